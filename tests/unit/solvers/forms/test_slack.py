"""Functions with kinks in slack form: wherever that is exact, whichever way it is written."""

import pytest

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
