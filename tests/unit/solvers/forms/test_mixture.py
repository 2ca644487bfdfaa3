"""Infima that ever faster wiggles approach.

The first is Bolza's example; Young (1969), Lectures on the Calculus of Variations and Optimal Control Theory, chapter
VI (from memory).  All values are derived beside the problems.
"""

import numpy as np
import pytest

from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape, stated

BOLZA = "(y'^2 - 1)^2 + y^2"


def over_one(integrand, endpoints, **members):
    return shape(independent={"name": "x", "from": 0, "to": 1}, endpoints=endpoints,
                 functional={"integrand": integrand} | members.pop("more", {}), **members)  # fmt: skip


def approached(found, infimum):
    assert found.verdict is Verdict.NO_OPTIMUM
    assert found.diagnosis.reason == "wiggles"
    assert abs(found.value - infimum) <= found.value_error + 1e-12 <= 1e-6


def test_a_zigzag_of_slopes_one_approaches_zero():
    """Both terms vanish in the limit, and together on no curve."""
    found = solve(over_one(BOLZA, ["y(0) = 0", "y(1) = 0"]))
    approached(found, 0.0)
    np.testing.assert_allclose(found.curve.evaluate("y", [0.2, 0.7]), 0, atol=1e-6)
    assert set(found.curve.functions) == {"y", "y'"}
    assert [check.name for check in found.checks] == ["motion", "limits", "conditions"]


def test_for_a_maximum_it_is_the_same():
    found = solve(over_one(f"-({BOLZA})", ["y(0) = 0", "y(1) = 0"], more={"seek": "maximum"}))
    approached(found, 0.0)


def test_a_control_that_jumps_between_its_limits():
    """x^2 - u^2 with |u| <= 1 is at least -1, and approaches it as x stays near 0."""
    found = solve(stated(independent={"name": "t", "from": 0, "to": 1}, functional={"integrand": "x^2 - u^2"},
                         unknowns={"x": {}, "u": {"within": [-1, 1]}}, endpoints=["x(0) = 0"]))  # fmt: skip
    approached(found, -1.0)


def test_wiggles_along_a_part_of_the_curve():
    """It stays at 0 as long as it can, then rises to 1/2 where p F_p - F = 0: with s = p^2 that is
    3*s^2 - 2*s - 1 = y^2, and its cost is the integral of F/p over y.  It takes less than 1/2 of the range."""
    found = solve(over_one(BOLZA, ["y(0) = 0", "y(1) = 1/2"]))
    nodes, weights = np.polynomial.legendre.leggauss(40)
    y = (nodes + 1) / 4
    s = (1 + np.sqrt(4 + 3 * y**2)) / 3
    assert found.verdict is Verdict.NO_OPTIMUM
    assert found.value == pytest.approx(np.sum(weights / 4 * ((s - 1) ** 2 + y**2) / np.sqrt(s)), abs=1e-6)


@pytest.mark.parametrize(
    ("integrand", "endpoints"),
    [
        ("y'^2*(1 - y')^2", ["y(0) = 0", "y(1) = 0.4"]),  # a broken line of slopes 0 and 1 attains 0
        (BOLZA, ["y(0) = 0", "y(1) = 2"]),  # the slope is nowhere below 1, where F is convex
        ("y'^2 + y^2", ["y(0) = 0", "y(1) = 1"]),
    ],
)
def test_what_is_attained_is_not_said_to_be_approached(integrand, endpoints):
    found = solve(over_one(integrand, endpoints))
    assert found.verdict in (Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM)


def test_where_the_mean_does_not_act_as_its_parts_nothing_is_said():
    """x' = u^2: no mean of u moves x as its two values do."""
    found = solve(stated(independent={"name": "t", "from": 0, "to": 1}, functional={"integrand": "x^2 - u^2"},
                         unknowns={"x": {}, "u": {"within": [-1, 1]}}, endpoints=["x(0) = 0"],
                         dynamics=["x' = u^2"]))  # fmt: skip
    assert found.diagnosis is None or found.diagnosis.reason != "wiggles"


def test_what_is_mixed_counts_also_where_it_is_called_by_the_slope_that_it_determines():
    """With y' = u the integrand is 2*u^4 - 2*u^2 + 1 + y^2, which is at least 1/2: nothing below that is approached."""
    found = solve(stated(independent={"name": "t", "from": 0, "to": 1}, unknowns={"y": {}, "u": {"within": [-2, 2]}},
                         dynamics=["y' = u"], functional={"integrand": "(u^2 - 1)^2 + y'^4 + y^2"},
                         endpoints=["y(0) = 0", "y(1) = 0"]))  # fmt: skip
    assert found.value >= 0.5 - 1e-6
    assert found.verdict in (Verdict.NO_OPTIMUM, Verdict.NOT_A_MINIMUM)
