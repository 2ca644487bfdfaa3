"""Integrands that are linear in the slopes.

Gelfand, Fomin (1963), Calculus of Variations, section 4, case 4 (from memory): the Euler-Lagrange equation of
M + N y' is M_y = N_x.  All values are derived beside the problems.
"""

import numpy as np
import pytest

from solvers.forms.affine import Reduced, Turning, linear, linear_by_parts, reduced
from solvers.formula.parser import parse_expression
from solvers.formula.printer import text
from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import shape

ENDS = ["y(0) = 0", "y(1) = 1"]


def over_one(integrand, endpoints=ENDS, seek="minimum", **members):
    functional = {"seek": seek, "integrand": integrand}
    return shape(independent={"name": "x", "from": 0, "to": 1}, functional=functional, endpoints=endpoints, **members)


@pytest.mark.parametrize(
    ("integrand", "straight", "by_parts"),
    [("y + x*y'", True, True), ("(y + y')^2 - y'^2", True, True), ("abs(y') + y^2", False, True),
     ("abs(y)*y'", True, True), ("max(y', 2*y' - 1)", False, True), ("sqrt(1 + y'^2)", False, False),
     ("max(1, y)*sqrt(1 + y'^2)", False, False), ("y'^2", False, False)],
)  # fmt: skip
def test_what_is_linear_in_the_slope_is_seen_by_structure(integrand, straight, by_parts):
    problem = over_one(integrand)
    tree = parse_expression(integrand)
    assert (linear(tree, problem), linear_by_parts(tree, problem)) == (straight, by_parts)


def test_all_slopes_count_together():
    """y'*z' is linear in each of the two, but not in both."""
    problem = over_one("y'*z'", unknowns={"y": {}, "z": {}})
    assert not linear(parse_expression("y'*z'"), problem)
    assert linear(parse_expression("y*z' - z*y'"), problem)


def test_the_slope_is_integrated_away():
    """With P = y^3/3 the integrand y^2*(1 + y') is y^2 and the derivative of P."""
    form = reduced(over_one("y^2*(1 + y')"))
    assert isinstance(form, Reduced) and not form.alike
    assert text(form.problem.integrand) == "y^2"
    assert text(form.problem.endpoint) == "y(1)^3/3 - y(0)^3/3"
    assert [unknown.order for unknown in form.relaxed.unknowns] == [0]


def test_what_is_no_gradient_turns():
    """Around a loop y*z' - z*y' gains twice the area; y*z' + z*y' is the derivative of y*z."""
    unknowns = {"y": {}, "z": {}}
    ends = ["y(0) = 0", "z(0) = 0"]
    assert isinstance(reduced(over_one("y*z' - z*y'", ends, unknowns=unknowns)), Turning)
    form = reduced(over_one("y*z' + z*y' + 3*y^2", ends, unknowns=unknowns))
    assert isinstance(form, Reduced) and text(form.problem.integrand) == "3*y^2"


@pytest.mark.parametrize(
    "members",
    [{"constraints": ["-2 <= y' <= 2"]}, {"constraints": ["integral(y^2) = 1"]}, {"constraints": ["y' <= 1 + x"]},
     {"constraints": ["(x - 2)^2 + y^2 >= 1"]}, {"constants": {"c": 1}, "integrand": "c*y + x*y'"},
     {"integrand": "y'/y"}],
)  # fmt: skip
def test_where_the_slope_is_held_or_the_theory_does_not_reach_the_problem_stays_as_it_is(members):
    """The constant is 1, and only then is the value the same for all curves."""
    assert reduced(over_one(**({"integrand": "y + x*y'"} | members))) is None


@pytest.mark.parametrize(
    ("integrand", "value"),
    [("2*y*y'", 1.0), ("y + x*y'", 1.0), ("cos(x*y)*(y + x*y')", np.sin(1)), ("exp(y)*(x*y' + 1)", np.e)],
)
@pytest.mark.parametrize("seek", ["minimum", "maximum"])
def test_where_every_curve_has_the_same_value_that_is_said(integrand, value, seek):
    """They are the derivatives of y^2, x*y, sin(x*y) and x*exp(y) along the curve."""
    found = solve(over_one(integrand, seek=seek))
    assert abs(found.value - value) <= found.value_error <= 1e-7
    assert found.verdict in (Verdict.GLOBAL_MINIMUM, Verdict.GLOBAL_MAXIMUM)
    assert [one.name for one in found.undetermined] == ["y"]


def test_a_free_end_is_chosen_best_all_the_same():
    """The value is y(1)^2 - 2*y(1), whatever lies between: least at y(1) = 1."""
    problem = over_one("2*y*y'", ["y(0) = 0"])
    found = solve(shape(independent={"name": "x", "from": 0, "to": 1}, endpoints=["y(0) = 0"],
                        functional={"integrand": "2*y*y'", "endpoint": "-2*y(1)"}))  # fmt: skip
    assert abs(found.value + 1) <= found.value_error <= 1e-7
    assert found.curve.evaluate("y", [1.0])[0] == pytest.approx(1, abs=1e-6)
    assert abs(solve(problem).value) <= 1e-9


@pytest.mark.parametrize(("integrand", "infimum", "jumps"), [
    ("(y - x)^2 + x*y'", 0.25, [0.0, 1.0]),  # 1 + (y - x)^2 - y, least at y = x + 1/2: 1 - 3/4
    ("y^2*(1 + y')", 1 / 3, [1.0]),  # 1/3 + y^2
])  # fmt: skip
def test_an_infimum_that_no_curve_attains(integrand, infimum, jumps):
    found = solve(over_one(integrand))
    assert found.verdict is Verdict.NO_OPTIMUM
    assert abs(found.value - infimum) <= found.value_error <= 1e-7
    assert [finding.place for finding in found.diagnosis.findings] == jumps
    assert "approached but not attained" in found.diagnosis.sentence


@pytest.mark.parametrize("ends", [["y(0) = 1/2", "y(1) = 3/2"], ["y(0) = 1/2", "y(1) >= 1"]])
def test_one_that_a_curve_between_such_ends_attains(ends):
    """y = x + 1/2 is the solution of M_y = N_x; 3/2 - 3/4 is its value (y(1) counts with weight 1, so that at a free
    end at least 1 a jump down to it gains 1/2)."""
    found = solve(over_one("(y - x)^2 + x*y'", ends))
    if ends[1] == "y(1) >= 1":
        assert found.verdict is Verdict.NO_OPTIMUM
        assert abs(found.value - 0.25) <= found.value_error <= 1e-7
        return
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value - 0.75) <= found.value_error <= 1e-7
    np.testing.assert_allclose(found.curve.evaluate("y", [0.0, 0.4, 1.0]), [0.5, 0.9, 1.5], atol=1e-6)


def test_a_free_end_that_costs_nothing_is_where_the_curve_comes_to():
    """x*(1 - x)*y' leaves (2*x - 1)*y inside and nothing at the ends: y^2/2 + (2*x - 1)*y is least at y = 1 - 2*x, at
    -1/6; no end is held, so that curve is the answer."""
    found = solve(over_one("y^2/2 + x*(1 - x)*y'", []))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value + 1 / 6) <= found.value_error <= 1e-7
    np.testing.assert_allclose(found.curve.evaluate("y", [0.25, 1.0]), [0.5, -1.0], atol=1e-6)


@pytest.mark.parametrize(
    ("integrand", "members"),
    [("x*y'", {}), ("(y - x)^2 + x*y'", {"endpoints": []}), ("y'", {"endpoints": []}),
     ("y*z' - z*y'", {"unknowns": {"y": {}, "z": {}}, "endpoints": ["y(0) = 0", "z(0) = 0", "y(1) = 1", "z(1) = 0"]})],
)  # fmt: skip
def test_a_value_that_runs_away(integrand, members):
    """x*y' is 1 - y inside; (y - x)^2 + x*y' with a free end falls with y(1), as y' does; loops gain area."""
    found = solve(over_one(integrand, **members))
    assert found.verdict is Verdict.NO_OPTIMUM and found.value is None
    assert found.diagnosis.reason == "unbounded"


def test_limits_of_the_unknown_hold_what_runs_away():
    """1 - y with y at most 2: the infimum is -1, and between the ends 0 and 1 it is not attained."""
    found = solve(over_one("x*y'", unknowns={"y": {"within": [0, 2]}}))
    assert found.verdict is Verdict.NO_OPTIMUM
    assert abs(found.value + 1) <= found.value_error <= 1e-7


@pytest.mark.parametrize(("integrand", "steepest", "value"), [
    ("x*y'", 2, 1 / 8),  # slope 2 up to s = 3/4, -2 after it: s^2 - (1 - s^2)
    ("(y - x)^2 + x*y'", 2, 11 / 36),  # 1/4 and the squares of the distance from y = x + 1/2 before 1/2, after 5/6
    ("y^2*(1 + y')", 3, 4 / 9),  # y = 0 up to 2/3, then slope 3: 1/3 + (1/3)^3*9/3
])  # fmt: skip
def test_with_limits_on_the_slope_there_is_a_best_curve(integrand, steepest, value):
    """The distance from x + 1/2 is 1/2 - x before 1/2 and 3*(x - 5/6) after 5/6: 1/24 + 1/72 together."""
    found = solve(over_one(integrand, constraints=[f"-{steepest} <= y' <= {steepest}"]))
    assert found.verdict in (Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM)
    assert abs(found.value - value) <= found.value_error <= 1e-6


def test_a_problem_without_states_has_its_checks():
    """(y - x^2)^2 has its least value at every place by itself."""
    found = solve(over_one("(y - x^2)^2 + 1", []))
    assert found.verdict is Verdict.GLOBAL_MINIMUM and abs(found.value - 1) <= found.value_error
    assert not any("broke" in check.sentence for check in found.checks if check.status is Status.FAILED)
