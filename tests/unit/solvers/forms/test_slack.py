"""Functions with kinks in slack form: wherever that is exact, whichever way it is written."""

import numpy as np
import pytest
from scipy.optimize import brentq

from solvers.forms.slack import with_slacks
from solvers.solution import Verdict
from solvers.solve import solve
from solvers.transcription.functions import rounded_functions
from tests.unit.solvers.problems import stated

LEAST = [
    "abs(u)",
    "2*abs(u) + u^2",
    "max(u, 0, -u/2)",
    "-(-abs(u))",
    "x^2 + k*max(u, -u)",
    "-k*min(u, 1)",
    "-3*(1 - abs(u))",
    "(1 + t)*abs(u)",
    "abs(u)*exp(x)/(1 + u^2)",
    "(max(u, 1)*sqrt(1 + x^2))^2",
]
GREATEST = [
    "-abs(u)",
    "-(2*abs(u) + u^2)",
    "min(u, -u)",
    "-k*max(u, 0)",
    "3*(1 - abs(u))",
    "-(-min(u, 1))",
    "(-2)*abs(u)",
]
NEITHER = ["abs(u)^2", "u*abs(u)", "1/abs(u)", "sqrt(abs(u))", "x*max(u, 0)", "0*abs(u)"]


def with_integrand(integrand, seek="minimum"):
    return stated(functional={"seek": seek, "integrand": integrand}, constants={"k": 2}, endpoints=["x(0) = 1"])


@pytest.mark.parametrize("integrand", LEAST)
def test_terms_that_are_to_be_small_are_written_exactly(integrand):
    assert not rounded_functions(with_slacks(with_integrand(integrand)))
    assert rounded_functions(with_slacks(with_integrand(integrand, "maximum")))


@pytest.mark.parametrize("integrand", GREATEST)
def test_and_so_are_those_that_are_to_be_large(integrand):
    assert not rounded_functions(with_slacks(with_integrand(integrand, "maximum")))
    assert rounded_functions(with_slacks(with_integrand(integrand)))


@pytest.mark.parametrize("seek", ["minimum", "maximum", "stationary"])
@pytest.mark.parametrize("integrand", NEITHER)
def test_others_are_not(integrand, seek):
    problem = with_integrand(integrand, seek)
    assert with_slacks(problem) is problem


@pytest.mark.parametrize("seek, sign", [("minimum", ""), ("maximum", "-")])
def test_the_least_fuel_is_that_of_the_closed_form(seek, sign):
    """From rest over 1 in 3 with |u| <= 1: full thrust for t1, then coasting; t1 (3 - t1) = 1, and 2 t1 of fuel."""
    found = solve(stated(
        independent={"name": "t", "from": 0, "to": 3},
        unknowns={"x": {}, "u": {"within": [-1, 1]}},
        dynamics=["x'' = u"],
        functional={"seek": seek, "integrand": f"{sign}abs(u)"},
        endpoints=["x(0) = 0", "x'(0) = 0", "x(3) = 1", "x'(3) = 0"],
    ))  # fmt: skip
    exact = 3 - 5**0.5
    assert abs(abs(found.value) - exact) <= found.value_error < 1e-6
    assert found.verdict in (Verdict.GLOBAL_MINIMUM, Verdict.GLOBAL_MAXIMUM)


def fitted(target, **members):
    """The least of the integral of |y'| and the weighted square of the distance from a target, both ends free."""
    given = {"independent": {"name": "x", "from": 0, "to": 1}, "unknowns": {"y": {}}, "dynamics": None, "endpoints": [],
             "functional": {"integrand": f"abs(y') + {target}"}}  # fmt: skip
    return stated(**given | members)


def test_the_absolute_value_of_a_free_slope_is_its_rise_and_its_fall():
    problem = with_slacks(fitted("16*(y - x)^2"))
    assert [unknown.lower for unknown in problem.unknowns[1:]] == [0, 0]
    assert not problem.constraints
    for other in (fitted("16*(y - x)^2 + y'^2"), fitted("16*(y - x)^2", constraints=["y' <= 2"])):
        assert with_slacks(other).constraints  # the slope is held otherwise: an unknown bounds both branches
    assert with_slacks(fitted("16*(y - x)^2"), parted=False).constraints


@pytest.mark.parametrize("members", [{}, {
    "unknowns": {"y": {}, "u": {}}, "dynamics": ["y' = u"], "functional": {"integrand": "abs(u) + 16*(y - x)^2"},
}])  # fmt: skip
def test_total_variation_and_a_square_cut_the_ends_off(members):
    """y = clip(x, 1/4, 3/4): where y is level at c the integral of 32*(c - x) from the end, the costate, reaches 1 as
    c = 1/4: 32*c^2/2 = 1.  Its value is 1/2 and twice 16*c^3/3: 2/3.  (Rudin, Osher, Fatemi, 1992, from memory, for
    the functional.)"""
    found = solve(fitted("16*(y - x)^2", **members))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value - 2 / 3) <= found.value_error <= 1e-7
    assert not found.prices  # what bounds the auxiliary unknowns was not stated by anybody
    assert found.curve.evaluate("y", [0.1, 0.5, 0.9]) == pytest.approx([0.25, 0.5, 0.75], abs=1e-5)
    assert sorted(switch.place for switch in found.switches) == pytest.approx([0.25, 0.75], abs=1e-5)
    assert not any("slack" in note for note in found.notes)
    assert found.times["solve"] < 5


def test_for_another_target_the_same_holds_of_the_cuts():
    """y = clip(x^2, a^2, b^2): 16 times the integral of a^2 - x^2 up to a is 1, so that a^3 = 3/32; from b to 1 it is
    1 as well: 1/3 - b^2 + 2*b^3/3 = 1/16."""
    found = solve(fitted("8*(y - x^2)^2"))
    first, second = sorted(switch.place for switch in found.switches)
    assert first == pytest.approx((3 / 32) ** (1 / 3), abs=1e-6)
    assert 1 / 3 - second**2 + 2 * second**3 / 3 == pytest.approx(1 / 16, abs=1e-6)
    assert found.verdict is Verdict.GLOBAL_MINIMUM


def test_a_slope_that_is_singular_and_bends():
    """y = sin(6*x) from a to b: 20 times the integral of sin(6*a) - sin(6*x) up to a is 1 (elementary), with a minus:
    the way goes down, and the target rises first."""
    found = solve(fitted("10*(y - sin(6*x))^2"))
    a = min(switch.place for switch in found.switches)
    level = np.sin(6 * a)
    assert 20 * (level * a - (1 - np.cos(6 * a)) / 6) == pytest.approx(-1, abs=1e-4)
    assert found.verdict is Verdict.GLOBAL_MINIMUM


def test_a_jump_of_the_target_is_one_of_the_curve():
    """For sign(x - 1/2) the levels are -a and a: 2*a + 4*(1 - a)^2 is least at a = 3/4, 7/4."""
    found = solve(fitted("4*(y - sign(x - 0.5))^2"))
    assert found.verdict is Verdict.NO_OPTIMUM
    assert found.value == pytest.approx(7 / 4, abs=1e-4)


def test_light_through_a_medium_with_a_kink():
    """The index is 1 up to y = 1 and 1 + (y - 1)/2 above it: straight to (d, 1), then a catenary that has the same
    slope there.  With c = cos of the angle, the index n and cosh(u) = n/c, x runs on by 2*c*(u2 - u1), and the way
    costs (sinh(u2)*cosh(u2) + u2 - sinh(u1)*cosh(u1) - u1)*c^2 (elementary)."""

    def reach(c):
        u1, u2 = np.arccosh(1 / c), np.arccosh(1.5 / c)
        return 1 / np.tan(np.arccos(c)) + 2 * c * (u2 - u1)

    c = brentq(lambda c: reach(c) - 2, 0.3, 0.99)
    u1, u2 = np.arccosh(1 / c), np.arccosh(1.5 / c)
    exact = 1 / np.sqrt(1 - c**2) + c**2 * (np.sinh(2 * u2) / 2 + u2 - np.sinh(2 * u1) / 2 - u1)
    found = solve(stated(independent={"name": "x", "from": 0, "to": 2}, unknowns={"y": {}}, dynamics=None,
                         functional={"integrand": "max(1, 1 + (y - 1)/2)*sqrt(1 + y'^2)"},
                         endpoints=["y(0) = 0", "y(2) = 2"]))  # fmt: skip
    assert found.verdict in (Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM)
    assert abs(found.value - exact) <= found.value_error + 1e-9 * exact <= 1e-6
    assert found.times["solve"] < 5
