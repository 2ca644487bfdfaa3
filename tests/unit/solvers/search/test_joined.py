"""An arc that a mesh has seen as two is one again."""

from dataclasses import replace

import pytest

from solvers.formula.algebra import ZERO
from solvers.formula.nodes import At, Name
from solvers.problem import Calm, Condition, Held, Parameter, Place, Touch
from solvers.search.joined import joined
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import stated


def cut(held, calm=()):
    """A problem on 0 to 1 with four switches."""
    problem = stated()
    names = [f"switch {k}" for k in (1, 2, 3, 4)]
    return replace(
        problem,
        places=(problem.places[0], *(Place(Name(name), name) for name in names), problem.places[1]),
        parameters=tuple(Parameter(name, 0, 1) for name in names),
        held=held,
        calm=calm,
    )


def test_two_arcs_on_one_limit_become_one():
    whole = joined(cut((Held(1, "x", 0, 1), Held(3, "x", 0, 1)), (Calm(0, "u", 0), Calm(2, "u", 0), Calm(4, "u", 0))))
    assert [place.label for place in whole.places] == ["0", "switch 1", "switch 4", "1"]
    assert [p.name for p in whole.parameters] == ["switch 1", "switch 4"]
    assert whole.held == (Held(1, "x", 0, 1),)
    assert whole.calm == (Calm(0, "u", 0), Calm(2, "u", 0))


@pytest.mark.parametrize(
    "held, touch, places, stretches",
    [(Held(1, "x", 0, 1), "switch 3", ["switch 1", "switch 3", "switch 4"], [1]),
     (Held(2, "x", 0, 1), "switch 1", ["switch 1", "switch 3", "switch 4"], [1])],
)  # fmt: skip
def test_an_arc_and_a_touch_beside_it_become_one(held, touch, places, stretches):
    whole = joined(replace(cut((held,)), touches=(Touch(touch, "x", 0, 1),)))
    assert [place.label for place in whole.places] == ["0", *places, "1"]
    assert [h.stretch for h in whole.held] == stretches
    assert whole.touches == ()


def test_a_gap_goes_with_what_was_touched_at_its_ends():
    """Another state touches its limit where the gap begins; that place is no more."""
    apart = cut((Held(1, "x", 0, 1), Held(3, "x", 0, 1)))
    assert joined(replace(apart, touches=(Touch("switch 2", "y", 0, 1),))).touches == ()
    kept = Touch("switch 4", "y", 0, 1)
    assert joined(replace(apart, touches=(kept,))).touches == (kept,)


def test_conditions_at_places_that_are_gone_go_too():
    """As that an arc begins smoothly."""
    apart = cut((Held(1, "x", 0, 1), Held(3, "x", 0, 1)))
    at = [Condition(At("x", 0, Name(f"switch {k}")), ZERO, ZERO, f"switch: {k}", "") for k in (1, 2, 3)]
    assert joined(replace(apart, endpoints=(*apart.endpoints, *at))).endpoints == (*apart.endpoints, at[0])


def test_an_arc_and_a_touch_of_the_other_limit_stay_two():
    assert joined(replace(cut((Held(1, "x", 0, 1),)), touches=(Touch("switch 3", "x", 0, -1),))) is None


def test_arcs_on_different_limits_stay_two():
    assert joined(cut((Held(1, "u", 0, 1), Held(3, "u", 0, -1)))) is None


def test_arcs_with_another_between_them_stay_two():
    assert joined(cut((Held(1, "u", 0, 1), Held(2, "u", 0, -1), Held(3, "u", 0, 1)))) is None


def test_a_gap_of_the_problem_itself_stays():
    problem = cut((Held(1, "x", 0, 1), Held(3, "x", 0, 1)))
    own = replace(problem.places[2], label="0.5")
    assert joined(replace(problem, places=(*problem.places[:2], own, *problem.places[3:]))) is None


def test_a_boundary_arc_is_found_exactly():
    """Bryson, Ho (1975), Applied Optimal Control, section 3.11: below 1/9 the value is 4, the arc from 1/3 to 2/3."""
    solution = solve(
        stated(
            unknowns={"x": {}, "u": {}},
            dynamics=["x'' = u"],
            functional={"integrand": "u^2/2"},
            endpoints=["x(0) = 0", "x'(0) = 1", "x(1) = 0", "x'(1) = -1"],
            constraints=["x <= 1/9"],
        )
    )
    assert solution.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(solution.value - 4) <= min(solution.value_error, 1e-9)
    first, last = solution.switches
    assert abs(first.place - 1 / 3) < 1e-4
    assert abs(last.place - 2 / 3) < 1e-4
