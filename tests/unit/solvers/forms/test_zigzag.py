"""Values that run away by zigzags.

Dacorogna (2008), Direct Methods in the Calculus of Variations, section 3.3 (from memory): growth from below is needed
for a minimum to exist; how fast the value falls without it is derived beside each problem.
"""

import pytest

from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape

ENDS = ["y(0) = 0", "y(1) = 1"]


def found_for(integrand, endpoints=ENDS, seek="minimum", **members):
    functional = {"seek": seek, "integrand": integrand}
    return solve(shape(independent={"name": "x", "from": 0, "to": 1}, functional=functional, endpoints=endpoints,
                       **members))  # fmt: skip


@pytest.mark.parametrize(
    ("integrand", "members"),
    [
        ("sqrt(1 + y'^2)", {"seek": "maximum"}),  # n zigzags of height 1 are longer than 2*n
        ("y*sqrt(1 + y'^2)", {"seek": "maximum", "endpoints": ["y(0) = 1", "y(1) = 1"]}),  # the same, times 1 or so
        ("-y*sqrt(1 + y'^2)", {"endpoints": ["y(0) = 1", "y(1) = 1"]}),
        ("y'^2 + y'^3", {"endpoints": ["y(0) = 0", "y(1) = 0"]}),  # slope -q over the share 1/q^2, then 1/q: -q or so
        ("y'^2 - 3*y'^3", {}),
        ("y'^2 - z'^2 + y*z", {"unknowns": {"y": {}, "z": {}}, "endpoints": [*ENDS, "z(0) = 0", "z(1) = 1"]}),
        ("(x - 0.9)*y'^2", {}),  # before x = 0.9 the steeper the better
        ("y^2 - y''^2", {"endpoints": ["y(0) = 0", "y'(0) = 0"]}),
        ("c*y^2 - hypot(y', c)", {"constants": {"c": 3}}),
        ("y^2 - sqrt(1 + y'^2)", {"unknowns": {"y": {"within": [-1, 2]}}}),  # there is room within the limits
    ],
)
def test_no_curve_is_best_and_that_is_said_at_once(integrand, members):
    found = found_for(integrand, **members)
    assert found.verdict is Verdict.NO_OPTIMUM and found.value is None
    assert found.diagnosis.reason == "unbounded"
    assert [finding.label.rstrip("'") in ("y", "z") for finding in found.diagnosis.findings] == [True]
    assert found.times["solve"] < 5


@pytest.mark.parametrize(
    ("integrand", "value", "members"),
    [
        ("sqrt(1 + y'^2) - 2*y'", 2**0.5 - 2, {}),  # what a zigzag gains on its way up it loses on its way down
        ("y'^2 + y'", 2.0, {}),  # the line
        ("y'^4 - y'^2", 0.0, {}),  # the line: the slope 1 lies where the fourth power has won
    ],
)
def test_where_they_gain_nothing_the_problem_is_solved(integrand, value, members):
    found = found_for(integrand, **members)
    assert found.value == pytest.approx(value, abs=1e-7)


def test_limits_on_the_slope_hold_it():
    """y'^2 + y'^3 is convex at slopes above -1/3 (2 + 6*y' > 0): the line is best among those curves."""
    found = found_for("y'^2 + y'^3", ["y(0) = 0", "y(1) = 0"], constraints=["-1/3 <= y' <= 1/3"])
    assert found.value == pytest.approx(0, abs=1e-8)
    assert found.verdict in (Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM)


def test_an_integral_may_hold_it():
    """The longest curve of a given energy, the integral of 1 + y'^2 being 2, is the line: its length is sqrt(2)."""
    found = found_for("sqrt(1 + y'^2)", seek="maximum", constraints=["integral(1 + y'^2) = 2"])
    assert found.verdict is not Verdict.NO_OPTIMUM
    assert found.value is None or found.value == pytest.approx(2**0.5, abs=1e-6)


def test_conditions_that_no_curve_meets_come_first():
    """Without any curve nothing runs away."""
    found = found_for("-sqrt(1 + y'^2)", ["y(0)^2 + y(1)^2 = -1"])
    assert found.verdict is not Verdict.NO_OPTIMUM
