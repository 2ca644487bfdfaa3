"""Kinks that are given along the range become places, and what is between them its smooth branches."""

from itertools import pairwise

import numpy as np
import pytest

from solvers.forms.kinks import at_kinks
from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import At, walk
from solvers.problem import MIDDLE
from solvers.starts.sketch import ARRAYS
from solvers.transcription.functions import rounded_functions
from solvers.transcription.limits import number
from tests.unit.solvers.problems import shape

CONSTANTS = {"c": 1.25, "d": 0.5}


def bent(integrand, **members):
    return at_kinks(shape(functional={"integrand": f"y'^2 + y*({integrand})"}, constants=CONSTANTS, **members))


def places_of(problem):
    return [number(place.tree, CONSTANTS) for place in problem.places]


def along(problem, at, middles):
    """The integrand where y = 1 and y' = 0."""
    values = {"x": at, MIDDLE: middles, "y": 1.0} | CONSTANTS
    abbreviations = dict(problem.where)

    def look_up(name, order):
        if name in abbreviations:
            return evaluate(abbreviations[name], look_up, ARRAYS)
        return 0.0 if order else values[name]

    return evaluate(problem.integrand, look_up, ARRAYS)


@pytest.mark.parametrize(
    "integrand, exact, kinks",
    [
        ("abs(x - 1)", lambda x: np.abs(x - 1), [1]),
        ("sign(c - x)", lambda x: np.sign(1.25 - x), [1.25]),
        ("max(x, d, 2 - x)", lambda x: np.maximum(np.maximum(x, 0.5), 2 - x), [1]),
        ("min(x, d, 2 - x)", lambda x: np.minimum(np.minimum(x, 0.5), 2 - x), [0.5, 1.5]),
        ("abs(abs(x - 1) - d)", lambda x: np.abs(np.abs(x - 1) - 0.5), [0.5, 1, 1.5]),
        ("sign(max(0, x - c))", lambda x: np.sign(np.maximum(0, x - 1.25)), [1.25]),
        ("sign(x^2 - 4)*abs(x - 2)", lambda x: x - 2, [2]),
        ("abs(x + 1) - max(c, d)", lambda x: x + 1 - 1.25, []),  # bent nowhere in the range
        ("k*x", lambda x: np.abs(x - 1) * x, [1]),
    ],
)
def test_between_its_places_a_formula_is_its_branches(integrand, exact, kinks):
    problem = bent(integrand, where={"k": "abs(x - 1)"} if integrand == "k*x" else {})
    places = places_of(problem)
    assert not rounded_functions(problem)
    assert all(min(abs(place - kink) for place in places) <= 2e-16 for kink in kinks)
    assert len(places) - 2 <= len(kinks) + (integrand[:3] == "max")  # one hides behind the third
    for low, high in pairwise(places):
        x = np.linspace(low, high, 9)[1:-1]
        found = along(problem, x, np.full_like(x, (low + high) / 2))
        assert np.broadcast_to(found, x.shape) == pytest.approx(exact(x), abs=1e-15)


def test_a_place_moves_with_the_constants():
    """The root of x^2 - c is sqrt(c): near its value the place follows to first order."""
    problem = bent("sign(x^2 - c)")
    tree = problem.places[1].tree
    step = 1e-5
    moved = (number(tree, CONSTANTS | {"c": 1.25 + step}) - number(tree, CONSTANTS | {"c": 1.25 - step})) / (2 * step)
    assert number(tree, CONSTANTS) == pytest.approx(np.sqrt(1.25), abs=4e-16)
    assert moved == pytest.approx(0.5 / np.sqrt(1.25), rel=1e-9)


def test_a_place_of_the_problem_is_no_other_one():
    problem = bent("abs(x - 1)", endpoints=["y(0) = 0", "y(1) = 1"])
    assert [place.label for place in problem.places] == ["0", "1", "3"]


@pytest.mark.parametrize("integrand", ["abs(y - x)", "abs(x - p)", "sign(sin(1000*x))", "abs(sqrt(x - 1))"])
def test_what_is_not_given_or_too_much_is_left_to_the_rounding(integrand):
    parameters = {"p": {}} if "p" in integrand else {}
    problem = shape(functional={"integrand": f"y'^2 + y*{integrand}"}, parameters=parameters)
    assert at_kinks(problem) == problem


def test_a_free_end_leaves_kinks_as_they_are():
    members = {"independent": {"name": "x", "from": 0, "to": "p"}, "parameters": {"p": {"within": [0.1, 4]}}}
    problem = shape(functional={"integrand": "y'^2 + abs(x - 1)"}, **members)
    assert at_kinks(problem) is problem


def test_a_limit_of_states_holds_at_its_kinks_too():
    problem = at_kinks(shape(constraints=["y >= abs(x - 1) + sign(x - 2)", "y'*x <= abs(x - 1)"]))
    added = problem.endpoints
    assert {condition.pointer for condition in added} == {"/constraints/0"}
    there = [next(node.place for node in walk(c.body) if isinstance(node, At)) for c in added]
    assert [number(place, {}) for place in there] == [1, 1, 2, 2]

    def value(body):  # with y = 0
        return evaluate(body, lambda name, order: pytest.fail(name), ARRAYS, lambda *_: 0.0)

    assert [float(value(c.body)) for c in added] == [1, 1, -2, 0]  # from after each place, then from before it
