"""Convexity: proved where it holds and the rules reach, never where it does not hold."""

import pytest

from solvers.checks import convexity
from solvers.solution import Status
from tests.unit.solvers.checks.conftest import problem_of

BASE = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "constants": {"k": 2.0, "c": -1.0},
    "unknowns": {"y": {"within": [0.5, None]}, "z": {}},
    "endpoints": ["y(0) = 1", "z(0) = 0", "y(1) = 1"],
}

CONVEX = [
    "y'^2 + z'^2", "sqrt(1 + y'^2) + z'^2", "x*sqrt(1 + y'^2) + abs(z')", "exp(x)*(y' - z)^2 + z'^2",
    "sqrt(x^2 + y'^2) + z'^2", "y'^2 - y*z + y^2 + z^2 + z'^2", "2*y'^2 - 2*y'*z' + z'^2",
    "k*y'^2 - c*exp(y + z') - log(y)", "max(y', z', 0)^2", "hypot(y', z')", "sqrt((y'^2 + z'^2)/(x + 1))",
    "1/y + z'^2 + y'^2", "y^1.5 + y'^2 + z'^2", "cosh(y' - z') + y*sin(x)", "(y'^2 + z'^2)/k",
    "sqrt(y'^2 + (z' - 2*y)^2 + 3)", "k^(y' + z') + y'^2", "y'^2 + z'^2 - sqrt(y)", "(1 + y'^2 + z'^2)^2",
    "-min(y', -z')", "sqrt(x)*y'^2 + z'^2", "sqrt(1 - x^2)*(y' - z)^2 + z'^2",
]  # fmt: skip

NOT_CONVEX = [
    "y*sqrt(1 + y'^2) + z'^2", "y'^2 - z'^2", "y*y' + z'^2*y", "sqrt(y'^2 - 1) + z'^2", "log(y'^2 + 1) + z'^2",
    "sin(y') + z'^2", "(y'^2 - 1)^2 + z'^2", "c*y'^2 + z'^2", "(x - 1/2)*y'^2 + z'^2", "y'^3 + z'^2",
    "y'^2 - 3*y'*z' + z'^2", "1/z + y'^2 + z'^2", "z^1.5*c + y'^2 + z'^2", "exp(-y'^2) + z'^2", "min(y', z')",
    "sqrt(1 + y'^2)/sqrt(y) + z'^2", "y'^2*z'^2", "abs(y'^2 - 1) + z'^2",
]  # fmt: skip


@pytest.mark.parametrize("integrand", CONVEX)
def test_convex_integrands_are_proved(integrand):
    check = convexity.check(problem_of({**BASE, "functional": {"seek": "minimum", "integrand": integrand}}))
    assert check.status is Status.PASSED, check.sentence
    negative = {"seek": "maximum", "integrand": f"-({integrand})"}
    assert convexity.check(problem_of({**BASE, "functional": negative})).status is Status.PASSED


@pytest.mark.parametrize("integrand", NOT_CONVEX)
def test_others_are_not(integrand):
    check = convexity.check(problem_of({**BASE, "functional": {"seek": "minimum", "integrand": integrand}}))
    assert check.status is Status.NOT_APPLICABLE


@pytest.mark.parametrize("integrand", CONVEX[:8])
def test_a_convex_integrand_is_not_maximised_globally(integrand):
    check = convexity.check(problem_of({**BASE, "functional": {"seek": "maximum", "integrand": integrand}}))
    assert check.status is Status.NOT_APPLICABLE


DOUBLE = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {"within": [-9, 9]}},
    "dynamics": ["x'' = u - t*x"],
    "functional": {"seek": "minimum", "integrand": "u^2", "endpoint": "x(1)^2"},
    "endpoints": ["x(0) = 0", "x'(0) = 1"],
    "constraints": ["x^2 + u <= 100", "integral(abs(u)) <= 50", "x(0.5) >= 0"],
}


def test_a_linear_problem_with_convex_limits_is_proved():
    check = convexity.check(problem_of(DOUBLE))
    assert check.status is Status.PASSED, check.sentence


@pytest.mark.parametrize(
    "change",
    [
        {"dynamics": ["x'' = u - sin(x)"]},
        {"dynamics": ["x'' = u*x"]},
        {"constraints": ["(x + 1)^2 >= 0.01"]},
        {"constraints": ["x^2 + u = 3"]},
        {"constraints": ["integral(u^2) = 40"]},
        {"constraints": ["integral(abs(u)) >= 1"]},
        {"endpoints": ["x(0) = 0", "x'(0)^2 = 1"]},
        {"functional": {"seek": "minimum", "integrand": "u^2", "endpoint": "-x(1)^2"}},
        {"functional": {"seek": "stationary", "integrand": "u^2"}},
        {"independent": {"name": "t", "from": 0, "to": "T"}, "parameters": {"T": {"within": [1, 2]}}, "constraints": [],
         "functional": {"seek": "minimum", "integrand": "u^2"}},
    ],
    ids=["sine", "product", "outside", "surface", "energy", "at least", "end", "concave end", "stationary", "free end"],
)  # fmt: skip
def test_one_thing_that_is_not_convex_is_enough(change):
    check = convexity.check(problem_of({**DOUBLE, **change}))
    assert check.status is Status.NOT_APPLICABLE


def test_the_sentence_names_what_is_not_convex():
    check = convexity.check(problem_of({**DOUBLE, "constraints": ["(x + 1)^2 >= 0.01"]}))
    assert "'(x + 1)^2 >= 0.01'" in check.sentence
