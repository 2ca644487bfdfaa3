"""Slope growth: where every mesh has a bounded slope and the best curve has not, there may be a gap."""

import pytest

from solvers.checks import growth
from solvers.checks.sampling import Sampler
from solvers.solution import Status

GAP = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "(y^3 - x)^2*y'^6"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}
"""The infimum is 0, of y = x^(1/3); curves of bounded slope stay above a positive value (Mania, 1934)."""
NO_GAP = {**GAP, "functional": {"seek": "minimum", "integrand": "y*y'^3"}, "constraints": ["y >= 0"]}
"""y = x^(3/4): the slope is infinite at 0, but x does not appear by itself."""


def test_where_a_gap_is_possible_the_check_fails(solved, examine):
    check = examine(growth.check, solved(GAP))
    assert check.status is Status.FAILED
    assert check.place == 0.0
    assert check.subject == "y'"
    assert "Lavrentiev" in check.sentence


def test_without_the_independent_variable_there_is_no_gap(solved, examine):
    check = examine(growth.check, solved(NO_GAP))
    assert check.status is Status.PASSED
    assert "grows without bound" in check.sentence


def test_a_convex_problem_has_no_gap_either(solved):
    """x^(1/2) y'^2: y = x^(1/2) is an extremal with finite costates, so that its tangents bound all other curves."""
    sampler = Sampler(solved({**GAP, "functional": {"seek": "minimum", "integrand": "sqrt(x)*y'^2"}}))
    assert growth.check(sampler).status is Status.FAILED
    assert growth.check(sampler, convex=True).status is Status.PASSED


def test_the_power_is_that_of_the_closed_form(solved):
    """y' = (3/4) x^(-1/4)."""
    power, place = growth.growth(Sampler(solved(NO_GAP)), 0)
    assert power == pytest.approx(0.25, abs=0.04)
    assert place == 0.0


@pytest.mark.parametrize("integrand", ["y'^2 + x*y", "y'^2 + 1e6*(y - x)^2"])
def test_a_bounded_slope_passes_however_steep(solved, examine, integrand):
    check = examine(growth.check, solved({**GAP, "functional": {"seek": "minimum", "integrand": integrand}}))
    assert check.status is Status.PASSED
    assert "stays bounded" in check.sentence


def test_a_slope_within_limits_is_bounded(solved, examine):
    document = {**GAP, "functional": {"seek": "minimum", "integrand": "y'^2"}, "constraints": ["-5 <= y' <= 5"]}
    assert "limits" in examine(growth.check, solved(document)).sentence


def test_dynamics_leave_no_slope_free(solved, examine):
    document = {**GAP, "unknowns": {"y": {}, "u": {}}, "dynamics": ["y' = u"],
                "functional": {"seek": "minimum", "integrand": "u^2"}}  # fmt: skip
    assert examine(growth.check, solved(document)).status is Status.NOT_APPLICABLE
