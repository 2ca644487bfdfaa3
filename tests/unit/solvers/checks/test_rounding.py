"""What rounded functions may change, against what their exact ones are worth along the same curves."""

import numpy as np
import pytest

from solvers.checks import rounding, stationarity
from solvers.checks.sampling import Sampler
from solvers.solution import Status
from solvers.tables.table import CORNER, Between, Outside, Table
from solvers.transcription.functions import SMOOTHING

LINE = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "endpoints": ["y(0) = 0"],
}


def document(integrand, **members):
    return {**LINE, "functional": {"seek": "minimum", "integrand": f"{integrand} + y'^2"}, **members}


def along(sketched, document, value):
    return Sampler(sketched(document, [lambda x: value + 0 * x], [lambda x: 0 * x]))


@pytest.mark.parametrize("integrand, most", [
    ("y^2", 0.0),
    ("3*abs(y)", 3 * SMOOTHING),
    ("max(y, 2*y)", SMOOTHING / 2),  # (y + 2*y + abs(y))/2
    ("abs(abs(y))", 2 * SMOOTHING),  # of the outer one, and of the inner one through it: its slope is 1 there, nearly
    ("y*sign(y)", 0.0),  # y is 0, so that its sign counts nothing
])  # fmt: skip
def test_a_kink_counts_what_it_is_rounded_by(sketched, integrand, most):
    """Along y = 0, where abs is too large by the width of the rounding."""
    effect = rounding.effect(along(sketched, document(integrand), 0.0))
    assert effect == pytest.approx(most, rel=0.5)


def test_far_from_a_kink_it_counts_next_to_nothing(sketched):
    assert rounding.effect(along(sketched, document("abs(y)"), 1.0)) < SMOOTHING**1.7


def test_kinks_in_the_endpoint_term_count_too(sketched):
    given = document("0*y", functional={"seek": "minimum", "integrand": "y'^2", "endpoint": "5*abs(y(1))"})
    assert rounding.effect(along(sketched, given, 0.0)) == pytest.approx(5 * SMOOTHING)


@pytest.mark.parametrize("at", [1.0, 1 + CORNER, 1 - 2 * CORNER / 3])
def test_a_curve_in_a_corner_may_be_off_by_the_deviation_in_the_corner(sketched, at):
    """Two lines of slopes 1 and 4, joined by a parabola: at the corner it is off by the change of slope x reach/4."""
    tables = {"k": {"of": {"y": ""}, "points": [[0, 0], [1, 1], [2, 5]], "between": "linear"}}
    effect = rounding.effect(along(sketched, document("k(y)", tables=tables), at))
    off = 3 * CORNER / 4
    assert off <= effect <= 2.5 * off


def test_a_curve_beside_a_corner_is_exact(sketched):
    tables = {"k": {"of": {"y": ""}, "points": [[0, 0], [1, 1], [2, 5]], "between": "linear"}}
    assert rounding.effect(along(sketched, document("k(y)", tables=tables), 1.5)) < 1e-14


@pytest.mark.parametrize("integrand, status", [
    ("-abs(y)", Status.FAILED),
    ("min(y, -y)", Status.FAILED),
    ("-abs(x - x)", Status.PASSED),  # nothing to vary
    ("y^2", Status.PASSED),
    ("y*sign(y)", Status.PASSED),
])  # fmt: skip
def test_along_a_concave_kink_nothing_is_stationary(sketched, examine, integrand, status):
    """-|y| falls to both sides of y = 0, although its rounded form is level there."""
    curve = sketched(document(integrand), [lambda x: 0 * x], [lambda x: 0 * x])
    assert examine(stationarity.check, curve).status is status


def test_a_concave_kink_that_is_passed_says_nothing(sketched):
    sampler = Sampler(sketched(document("-abs(y - 0.5)"), [lambda x: x], [lambda x: 1 + 0 * x]))
    share, _ = rounding.concave(sampler)
    assert share < rounding.STRETCH


@pytest.mark.parametrize("between, outside", [
    (Between.LINEAR, Outside.EXTEND), (Between.LINEAR, Outside.HOLD), (Between.SMOOTH, Outside.HOLD),
])  # fmt: skip
def test_an_exact_table_runs_through_its_points_and_has_sharp_corners(between, outside):
    knots, values = np.array([0.0, 1.0, 3.0]), np.array([2.0, 1.0, 4.0])
    exact = Table("k", ("y",), (knots,), values, between, outside).exact
    assert exact.value(knots) == pytest.approx(values, abs=1e-14)
    if outside is Outside.HOLD:
        assert exact.value([-1.0, 3 + 1e-9]) == pytest.approx([2.0, 4.0])
    if between is Between.LINEAR:
        assert exact.value([0.25, 1 - 1e-6, 1 + 1e-6]) == pytest.approx([1.75, 1 + 1e-6, 1 + 1.5e-6], abs=1e-14)


def test_an_exact_grid_has_sharp_corners():
    """|y - 1| + |z - 1| between its corners (bilinear, so exact)."""
    knots = np.array([0.0, 1.0, 2.0])
    values = np.abs(knots - 1)[:, None] + np.abs(knots - 1)
    table = Table("k", ("y", "z"), (knots, knots), values, Between.LINEAR)
    assert table.value(1.0, 1.0) == pytest.approx(CORNER)
    assert table.exact.value([1.0, 1.25], [1.0, 1 - 1e-6]) == pytest.approx([0.0, 0.25 + 1e-6], abs=1e-14)


@pytest.mark.parametrize("away, share", [(0.0, 1.0), (1e2 * SMOOTHING, 0.0)])
def test_beside_a_concave_kink_a_curve_is_not_in_it(sketched, away, share):
    """At a hundred widths the slope of the rounded function is that of the exact one to 5e-5."""
    assert rounding.concave(along(sketched, document("-abs(y)"), away))[0] == pytest.approx(share, abs=0.3)
