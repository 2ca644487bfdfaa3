"""Corners of curves where the integrand is not convex in the slope (Weierstrass, Erdmann)."""

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.forms.broken import _edge_over, convex_in, corner_at_once, with_corner
from solvers.search.pursuit import pursue
from solvers.search.structure import present_switches
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape, stated

SLOPE = "y", 1
WELLS = {"functional": {"integrand": "(y'^2 - 1)^2"}, "endpoints": ["y(0) = 0", "y(3) = 1"]}
"""Slopes 1 and -1 are the wells: the curve rises to 2 at x = 2, or falls to -1 at x = 1 (Bolza, 1904; from memory)."""


def broken(members):
    deadline = in_seconds(30)
    return with_corner(pursue(shape(**members), None, deadline, meshes=3), None, deadline)


def test_the_corner_is_where_slopes_of_the_wells_meet():
    path = broken(WELLS).paths[-1]
    (corner,) = present_switches(path)
    assert min(abs(corner.place - 2), abs(corner.place - 1)) < 1e-6
    np.testing.assert_allclose(np.abs(path.controls), 1.0, atol=1e-6)
    assert path.value == pytest.approx(0.0, abs=1e-10)


def test_tilted_wells_keep_the_common_tangent():
    """L = (p^2 - 1)^2 + p/2: the tilt is the same for all curves between the ends, so the slopes stay 1 and -1."""
    path = broken(WELLS | {"functional": {"integrand": "(y'^2 - 1)^2 + y'/2"}}).paths[-1]
    np.testing.assert_allclose(np.abs(path.controls), 1.0, atol=1e-5)
    assert path.value == pytest.approx(0.5, rel=1e-8)


def test_a_maximum_has_corners_too():
    path = broken(WELLS | {"functional": {"seek": "maximum", "integrand": "-(y'^2 - 1)^2"}}).paths[-1]
    assert path.value == pytest.approx(0.0, abs=1e-10)


@pytest.mark.parametrize(
    "integrand",
    [
        "y'^2",  # convex
        "(y'^2 - 1)^2 + 10*y^2",  # ever finer zigzags: no curve with one corner passes the condition itself
    ],
)
def test_no_corner_where_it_does_not_help(integrand):
    assert broken(WELLS | {"functional": {"integrand": integrand}, "endpoints": ["y(0) = 0", "y(3) = 0"]}) is None


@pytest.mark.parametrize(
    ("members", "convex"),
    [
        ({"integrand": "(1 + x^2)*y'^2 - y^4"}, True),  # nothing but the slope has to bend well
        ({"integrand": "y*y'^2"}, False),  # y may be negative
        ({"integrand": "exp(y)*sqrt(1 + y'^2)"}, True),
        ({"integrand": "(y'^2 - 1)^2"}, False),
        ({"integrand": "-y'^2"}, False),
        ({"integrand": "-y'^2", "seek": "maximum"}, True),
    ],
)
def test_where_all_slopes_bend_one_way_no_corner_is_looked_for(members, convex):
    assert convex_in(shape(functional=members), SLOPE, 0.0, 1.0) is convex
    assert not convex_in(shape(functional=members), SLOPE, 1.0, 0.0)  # backwards the integral changes its sign


@pytest.mark.parametrize(("integral", "convex"), [("y^3", True), ("y'", True), ("sqrt(1 + y'^2)", False)])
def test_integrals_count_with_multiples_of_any_sign(integral, convex):
    problem = shape(functional={"integrand": "y'^2"}, constraints=[f"integral({integral}) = 2"])
    assert convex_in(problem, SLOPE, 0.0, 1.0) is convex


def test_the_least_value_is_proved_and_the_corner_said():
    solution = solve(shape(**WELLS))
    assert solution.verdict is Verdict.GLOBAL_MINIMUM  # no value of the integrand is below zero
    assert any(note.startswith("Corners were found") for note in solution.notes)


@pytest.mark.parametrize(
    ("y", "at", "edge"),
    [
        ([0.0, 1.0, 0.5, 2.0, 0.0], 1.5, (0.0, 4.0)),
        ([0.0, -1.0, 0.5, -1.5, 4.0], 1.5, (1.0, 3.0)),
        ([0.0, 1.0, 4.0, 9.0, 16.0], 2.5, (2.0, 3.0)),
        ([0.0, 1.0, 4.0, 9.0, 16.0], 2.0, (2.0, 3.0)),  # a corner belongs to the edge after it
        ([0.0, 1.0, 4.0, 9.0, 16.0], 4.0, (-np.inf, np.inf)),
    ],
)
def test_the_edge_of_the_lower_hull_over_a_place(y, at, edge):
    assert _edge_over(np.arange(5.0), np.array(y), at) == edge


def test_the_edge_over_a_place_lies_below_all_points():
    x = np.linspace(-3.0, 3.0, 4001)
    left, right = _edge_over(x, (x**2 - 1) ** 2 + 0.3 * x, 0.2)
    assert (left, right) == pytest.approx((-1.0, 1.0), abs=2e-3)  # the tilt is the slope of the edge


def test_between_limits_of_the_slope_the_longest_curve_is_a_tent():
    """Closed form: no curve with |y'| <= 1 is longer than sqrt(2) over a range of 1, and one of slopes 1 and -1 is."""
    members = {
        "independent": {"name": "x", "from": 0, "to": 1},
        "functional": {"seek": "maximum", "integrand": "sqrt(1 + y'^2)"},
        "endpoints": ["y(0) = 0", "y(1) = 0"],
        "constraints": ["-1 <= y' <= 1"],
    }
    found = solve(shape(**members))
    assert found.verdict in (Verdict.LOCAL_MAXIMUM, Verdict.GLOBAL_MAXIMUM)
    assert abs(found.value - np.sqrt(2)) <= found.value_error < 1e-7
    np.testing.assert_allclose(np.abs(found.curve.evaluate("y'", np.linspace(0.01, 0.99, 50))), 1.0, atol=1e-6)
    shortest = solve(shape(**members | {"functional": {"integrand": "sqrt(1 + y'^2)"}}))
    assert shortest.value == pytest.approx(1.0, rel=1e-8)


def test_where_the_slope_is_limited_what_switches_is_found_as_given():
    """(1 + y) sqrt(1 + y'^2) with |y'| <= 1: higher and steeper are both better, so the tent of the height 1/2 is the
    best curve, worth sqrt(2) (1 + 1/4)."""
    found = solve(shape(
        independent={"name": "x", "from": 0, "to": 1},
        functional={"seek": "maximum", "integrand": "(1 + y)*sqrt(1 + y'^2)"},
        endpoints=["y(0) = 0", "y(1) = 0"],
        constraints=["-1 <= y' <= 1"],
    ))  # fmt: skip
    assert found.verdict in (Verdict.LOCAL_MAXIMUM, Verdict.GLOBAL_MAXIMUM)
    assert abs(found.value - 1.25 * np.sqrt(2)) <= found.value_error < 1e-7


@pytest.mark.parametrize("slope", ["u", "y'"])
def test_the_tent_is_the_longest_curve_also_where_a_control_stands_for_its_slope(slope):
    """Closed form: slope 1 up to 0.65, then -1, so that 0.65 - 0.35 = 0.3; no curve is longer than sqrt(2)."""
    problem = stated(unknowns={"y": {}, "u": {"within": [-1, 1]}}, dynamics=["y' = u"],
                     functional={"seek": "maximum", "integrand": f"sqrt(1 + {slope}^2)"},
                     endpoints=["y(0) = 0", "y(1) = 3/10"])  # fmt: skip
    found = corner_at_once(problem, None, in_seconds(30))
    (corner,) = present_switches(found.paths[-1])
    assert min(abs(corner.place - 0.65), abs(corner.place - 0.35)) < 1e-9
    solution = solve(problem)
    assert solution.verdict is Verdict.GLOBAL_MAXIMUM
    assert abs(solution.value - np.sqrt(2)) <= solution.value_error < 1e-7


@pytest.mark.parametrize("integrand", ["u^2", "(u^2 - 1)^2", "y - u^2"])
def test_no_corner_is_tried_at_once_where_nothing_shows_that_none_does_better(integrand):
    """The least is convex in the control, neither way bent, without bound."""
    problem = stated(unknowns={"y": {}, "u": {"within": [-1, 1]}}, dynamics=["y' = u"],
                     functional={"integrand": integrand}, endpoints=["y(0) = 0", "y(1) = 3/10"])  # fmt: skip
    assert corner_at_once(problem, None, in_seconds(30)) is None
