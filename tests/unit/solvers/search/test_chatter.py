"""Chattering is recognised, continued by its geometric series, and said."""

from itertools import pairwise

import pytest

from solvers.deadline import in_seconds
from solvers.search.chatter import chatter, one_more
from solvers.search.pursuit import pursue
from solvers.search.sharpen import sharpen
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import stated

FULLER = {
    "independent": {"name": "t", "from": 0, "to": 5},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"integrand": "x^2"},
    "endpoints": ["x(0) = 0", "x'(0) = 1"],
}
"""Fuller (1963): the times between switches shrink by 0.2421 each (from memory); value as in the catalogue."""
VALUE, RATIO = 0.2683938305689113, 0.2421
CATALYST = {
    "unknowns": {"x1": {}, "x2": {}, "u": {"within": [0, 1]}},
    "dynamics": ["x1' = u*(10*x2 - x1)", "x2' = u*(x1 - 10*x2) - (1 - u)*x2"],
    "functional": {"endpoint": "x1(1) + x2(1) - 1"},
    "endpoints": ["x1(0) = 1", "x2(0) = 0"],
}


@pytest.fixture(scope="module")
def sharpened():
    def make(members):
        deadline = in_seconds(60)
        return sharpen(pursue(stated(**members), None, deadline, meshes=3), None, deadline).paths[-1]

    return make


def test_the_series_is_that_of_fuller(sharpened):
    path = sharpened(FULLER)
    found = chatter(path)
    assert found.control == ("u", 0)
    assert found.steady
    assert found.ratio == pytest.approx(RATIO, rel=0.02)
    first, second = path.places[1:3]
    assert found.ends == pytest.approx(first + (second - first) / (1 - RATIO), rel=1e-3)
    assert path.value == pytest.approx(VALUE, rel=1e-9)


def test_one_more_switch_goes_between_the_last_one_and_the_calm(sharpened):
    path = sharpened(FULLER)
    before = path.program.compiled.lowered.problem
    after = one_more(path)
    assert len(after.places) == len(before.places) + 1
    assert {c.stretch for c in after.calm} == {c.stretch + 1 for c in before.calm}
    sides = [held.side for held in sorted(after.held, key=lambda held: held.stretch)]
    assert all(side == -other for side, other in pairwise(sides))
    new = after.parameters[-1]
    assert path.places[-2] < new.lower < new.guess < new.upper < path.places[-1]


def test_a_singular_arc_between_bang_arcs_does_not_chatter(sharpened):
    """Gunn, Thomas (1965): one bang arc before the singular arc, and one after it."""
    path = sharpened(CATALYST)
    assert chatter(path) is None
    assert one_more(path) is None


def test_the_value_is_right_and_chattering_is_said():
    solution = solve(stated(**FULLER))
    assert solution.verdict is Verdict.GLOBAL_MINIMUM  # convex
    assert abs(solution.value - VALUE) <= solution.value_error < 1e-6 * VALUE
    (note,) = (note for note in solution.notes if "chatters" in note)
    assert "towards t = 2.92" in note
    assert "0.24 of the time before" in note
