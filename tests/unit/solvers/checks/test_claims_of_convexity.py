"""Problems that look convex to a hasty reader and are not: none of them is proved to be.

Where another curve is easily seen to be better it is named; the others have a direction in which they bend downwards.
"""

import pytest

from solvers.checks import convexity
from solvers.solution import Status
from tests.unit.solvers.checks.conftest import problem_of

PAIR = {"unknowns": {"y": {}, "w": {}}, "endpoints": ["y(0) = 0", "y(1) = 1", "w(0) = 0", "w(1) = 0"]}
CONTROLLED = {"unknowns": {"y": {}, "u": {}}, "endpoints": ["y(0) = 1", "y(1) = 2"]}
PARAMETER = {"parameters": {"p": {"within": [-5, 5]}}}


def least(integrand, endpoint=None, **members):
    functional = {"seek": "minimum", "integrand": integrand} | ({"endpoint": endpoint} if endpoint else {})
    return {
        "independent": {"name": "x", "from": 0, "to": 1},
        "unknowns": {"y": {}},
        "endpoints": ["y(0) = 0", "y(1) = 1"],
        "functional": functional,
        **members,
    }


TABLE = {"of": {"q": ""}, "points": [[-2, 4], [-1, 0], [0, 1], [1, 0], [2, 4]]}

CASES = {
    "a concave abbreviation at an end": least("y'^2", "z(1)", endpoints=["y(0) = 0"], where={"z": "-y^2"}),
    "a convex abbreviation at an end, subtracted": least("y'^2 + y^2", "-3*z(1)", endpoints=["y(0) = 0"],
                                                         where={"z": "y^2"}),
    "two ends by an abbreviation": least("(y' - 1)^2", endpoints=["y(0) = 0", "z(1) >= 1"], where={"z": "y^2"}),
    "two ends by an abbreviation of one": least("(y - 0.1)^2 + y'^2", endpoints=["b(1) = 1"],
                                                where={"a": "y", "b": "a^2"}),
    "a negative square beside a large one": least("y'^2 - 1e-13*w^2 + 1e-30*w'^2", **PAIR),
    "a product beside large squares": least("y'^2 + 1e-9*w'^2 + 1e-3*y'*w'", **PAIR),
    "a product with a missing square": least("y'^2 + 1e-14*y'*w + w'^2", **PAIR),
    "squares multiplied": least("y'^2*w'^2", **PAIR),
    "squares with a product that is too large": least("y'^2 + w'^2 + 2.0001*y'*w'", **PAIR),
    "a constant that is negative": least("c*y^2 + y'^2", constants={"c": -40}),
    "a difference of constants that is negative": least("y'^2*(c - d)", constants={"c": 0.3, "d": 0.5}),
    "the smaller of two constants": least("y'^2 + min(c, 1)*y^2", constants={"c": -30}),
    "a constant exponent": least("y'^2 + y^c", constants={"c": -1}),
    "an odd power": least("y'^2 + y^3"),
    "an odd power with bounds that let it bend down": least("y'^2 + y^3", constraints=["y >= -0.1"]),
    "a root": least("y'^2 + 5*y^(2/3)"),
    "a root of a square": least("y'^2 + (y^2)^0.4"),
    "a root of a size": least("y'^2 + abs(y)^0.5"),
    "a capped size": least("0.01*y'^2 + min(abs(y), 1)"),
    "the larger of two, subtracted": least("y'^2 - max(y, 0)"),
    "the larger of the smaller": least("0.1*y'^2 + max(min(y, 1 - y), 0)"),
    "a difference of sizes": least("0.1*y'^2 + abs(y) - abs(y - 0.5)"),
    "the size of what bends": least("y'^2 + abs(y^2 - 1)"),
    "a wave": least("y'^2 - 20*cos(y)"),
    "a step": least("y'^2 + sign(y)"),
    "a bell": least("y'^2 - exp(-y^2)"),
    "a saturation": least("y'^2 + 9*tanh(y)^2"),
    "a reciprocal across its pole": least("y'^2 + 1/y", constraints=["-1 <= y"]),
    "a reciprocal on the wrong side": least("y'^2 + 1/y", constraints=["-5 <= y <= -0.1"],
                                            endpoints=["y(0) = -1", "y(1) = -1"]),
    "a bump": least("y'^2 - 1/(1 + y^2)"),
    "a logarithm of a square": least("y'^2 + log(1 + y^2)"),
    "a hyperbolic sine of the wrong sign": least("y'^2 + 10*sinh(y)", constraints=["y <= 0"],
                                                 endpoints=["y(0) = 0", "y(1) = -1"]),
    "a place that changes sign": least("(x - 0.5)*y^2 + y'^2"),
    "a table with two wells": least("y'^2 + V(y)", tables={"V": TABLE}),
    "a table with a kink upwards": least("y'^2 + V(y)", tables={"V": {"of": {"q": ""}, "between": "linear",
                                                                     "points": [[-2, 0], [0, 3], [2, 0]]}}),
    "a table of two arguments": least("y'^2 + V(x, y)", tables={"V": {"of": {"p": "", "q": ""}, "points": [
        [None, -2, 0, 2], [0, 0, 1, 0], [0.5, 0, 2, 0], [1, 0, 1, 0]]}}),
    "a table as a negative factor": least("y'^2 + V(x)*y^2", tables={"V": {"of": {"q": ""}, "points": [
        [0, -30], [0.5, -60], [1, -30]]}}),
    "a parameter times an unknown": least("y'^2 + (p*y - 1)^2", **PARAMETER),
    "a parameter as exponent": least("y'^2 + y^p", parameters={"p": {"within": [2, 3]}}),
    "a parameter divided by": least("y'^2/p", "p", parameters={"p": {"within": [0.1, 9]}}),
    "a parameter that is cubed in an abbreviation": least("(y' - q)^2", where={"q": "p^3"}, **PARAMETER),
    "a parameter on two branches": least("(y' - p)^2", "(p - 0.1)^2", constraints=["p^2 >= 1"], **PARAMETER),
    "a way point at a free place": least("y'^2", endpoints=["y(0) = 0", "y(1) = 0", "y(s) = 1"],
                                         parameters={"s": {"within": [0.1, 0.9]}}),
    "two sides of a way point": least("y'^2", endpoints=["y(0) = 0", "y(1) = 0", "abs(y(0.5)) >= 1"]),
    "two sides of a disc": least("y'^2 + w'^2", **PAIR, constraints=["(y - 0.5)^2 + w^2 >= 0.04"]),
    "a circle": least("y'^2 + w'^2", **PAIR, constraints=["(y - 0.5)^2 + w^2 = 0.25"]),
    "a sphere of functions": least("y'^2", endpoints=["y(0) = 0", "y(1) = 0"], constraints=["integral(y^2) = 1"]),
    "outside a sphere of functions": least("y'^2", endpoints=["y(0) = 0", "y(1) = 0"], where={"e": "y^2"},
                                           constraints=["integral(e) >= 1"]),
    "implicit dynamics with a product": least("u^2", **CONTROLLED, dynamics=["y*y' = u"]),
    "implicit dynamics with a square": least("u^2", **CONTROLLED, dynamics=["y'^2 = u"]),
    "dynamics bent by an abbreviation": least("u^2", **CONTROLLED, where={"f": "sin(y)"}, dynamics=["y' = f + u"]),
    "a control times a state": least("u^2 + y^2", **CONTROLLED, dynamics=["y' = u*y + u"]),
    "a metric": least("(1 + y^2)*y'^2"),
    "a quotient of an indefinite form": least("sqrt(1 + y'^2 + 3*y*y' + y^2)"),
    "a difference of norms": least("hypot(y, w) - hypot(y', w')", **PAIR),
}  # fmt: skip


@pytest.mark.parametrize("document", CASES.values(), ids=CASES)
def test_nothing_is_called_convex_that_is_not(document):
    assert convexity.check(problem_of(document)).status is Status.NOT_APPLICABLE


@pytest.mark.parametrize(
    "document",
    [
        least("y'^2", "z(1)", endpoints=["y(0) = 0"], where={"z": "(y - 1)^2"}),
        least("y'^2", endpoints=["y(0) = 0", "z(1) >= 1"], where={"z": "2*y"}),
        least("1e12*y'^2 + w'^2 - 2e6*y'*w' + 1e-12*y^2", **PAIR),
        least("y'^2 + y^3", constraints=["y >= 0"]),
    ],
    ids=["abbreviation at an end", "condition on one", "squares of unlike size", "odd power above zero"],
)
def test_what_is_convex_still_is(document):
    assert convexity.check(problem_of(document)).status is Status.PASSED
