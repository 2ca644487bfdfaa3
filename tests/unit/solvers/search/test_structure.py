"""Switches read off a mesh and made unknown places."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import Number
from solvers.minimise.ipopt import Minimum, Outcome
from solvers.problem import Held, Place
from solvers.search.attempt import loose
from solvers.search.holding import released, surely_held_rightly, wrongly_held
from solvers.search.signals import MOST_SWITCHES, SWITCH, Switch, signals, switches
from solvers.search.structure import at_the_edge, determined_by, present_switches, shrinking, softened, with_switches
from solvers.solution import Verdict
from solvers.solve import solve
from solvers.transcription.mesh import uniform
from solvers.transcription.trajectory import trajectory
from tests.unit.solvers.problems import compiled, path_along, program_of, shape, solved_on, start_of, stated

TENTHS = uniform(1, 10, 4)
LINEAR = [("u", 0)]


def bang(seek="minimum"):
    return stated(unknowns={"x": {}, "u": {"within": [-1, 1]}}, functional={"seek": seek, "endpoint": "x(1)^2"},
                  endpoints=["x(0) = 0"])  # fmt: skip


def path_of(u, problem=None, mesh=TENTHS):
    return path_along(mesh, np.sin, u, problem or bang())


def places(found):
    return [switch.place for switch in found]


def test_a_jump_between_limits_is_a_switch_between_its_points():
    (found,) = switches(path_of(lambda t: np.where(t < 0.4, -1.0, 1.0)), LINEAR)
    assert found.low <= 0.4 <= found.high
    assert found.place == pytest.approx(0.4, abs=0.02)


def test_a_passage_within_one_interval_is_one_jump_with_the_same_integral():
    """The mean of 0.4 between 0.4 and 0.5 is what a jump from -1 to 1 at 0.43 makes of it."""

    def u(t):
        return np.select([t <= 0.4 + 1e-12, t <= 0.5 + 1e-12], [-1.0, 0.4], 1.0)

    (found,) = switches(path_of(u), LINEAR)
    assert found.place == pytest.approx(0.43, abs=1e-12)


def test_a_free_arc_has_two_ends():
    found = switches(path_of(lambda t: np.select([t < 0.2, t < 0.7], [1.0, 0.3], -1.0)), LINEAR)
    assert places(found) == pytest.approx([0.2, 0.7], abs=0.03)


def test_what_lies_on_no_limit_has_no_switches():
    path = path_of(lambda t: 0.5 * np.cos(9 * t))
    assert signals(path) == []
    assert switches(path, LINEAR) == []


def test_too_many_switches_are_no_structure():
    mesh = uniform(1, 60, 3)
    assert switches(path_of(lambda t: np.sign(np.cos(2 * np.pi * 12 * t)), mesh=mesh), LINEAR) == []
    few = switches(path_of(lambda t: np.sign(np.cos(2 * np.pi * 4 * t)), mesh=mesh), LINEAR)
    assert len(few) == 8 <= MOST_SWITCHES


def test_switches_become_free_places_between_their_neighbours():
    path = path_of(lambda t: np.select([t < 0.2, t < 0.7], [1.0, -1.0], 1.0))
    changed = with_switches(bang(), switches(path, LINEAR), path, LINEAR)
    assert [place.label for place in changed.places] == ["0", f"{SWITCH} 1", f"{SWITCH} 2", "1"]
    first, second = changed.parameters
    assert 0 < first.lower < first.guess < first.upper < second.lower < second.guess < second.upper < 1
    assert [(h.stretch, h.name, h.side) for h in changed.held] == [(0, "u", 1), (1, "u", -1), (2, "u", 1)]
    assert changed.calm == ()


def test_needless_switches_are_dropped():
    path = path_of(lambda t: np.where(t < 0.4, -1.0, 1.0))
    seen = [Switch(place, place - 0.01, place + 0.01) for place in (0.2, 0.4, 0.8)]
    changed = with_switches(bang(), seen, path, LINEAR)
    assert [parameter.guess for parameter in changed.parameters] == pytest.approx([0.4])
    always = path_of(lambda t: np.ones_like(t))
    assert with_switches(bang(), [Switch(0.5, 0.4, 0.6)], always, LINEAR) is None
    assert with_switches(bang(), [], path, LINEAR) is None


def test_a_switch_to_which_an_end_has_come_is_none():
    """Nor is one beyond an end: it would be no place between two others."""
    path = path_along(uniform(1, 8, 4), lambda t: t, lambda t: np.where(t < 0.5, 1.0, -1.0), bang())
    found = switches(path, LINEAR)
    beyond = [Switch(place, place, place) for place in (0.0, 1.0, 1.01)]
    assert with_switches(bang(), [*found, *beyond], path, LINEAR) == with_switches(bang(), found, path, LINEAR)


def test_singular_arcs_are_calm_and_held_arcs_are_not():
    path = path_of(lambda t: np.select([t < 0.2, t < 0.7], [1.0, 0.3], -1.0))
    changed = with_switches(bang(), switches(path, LINEAR), path, LINEAR)
    assert [(c.stretch, c.name) for c in changed.calm] == [(1, "u")]
    assert [h.stretch for h in changed.held] == [0, 2]


TWO = {
    "unknowns": {"x": {}, "y": {}, "u": {"within": [-1, 1]}, "w": {"within": [-1, 1]}},
    "dynamics": ["x'' = u", "y' = x + w"],
    "endpoints": ["x(0) = 0"],
    "constraints": ["x' <= 1/2", "y <= 1"],
    "functional": {"integrand": "x^2 + y^2"},
}


@pytest.mark.parametrize(
    "held, controls",
    [
        (("u", 0), {("u", 0)}),
        (("x", 1), {("u", 0)}),  # its first derivative
        (("x", 0), {("u", 0)}),  # its second one
        (("y", 0), {("w", 0)}),  # appears together with x, whose own rates are not asked for then
    ],
)
def test_a_held_state_determines_the_controls_that_first_move_it(held, controls):
    assert determined_by(Held(0, *held, 1), compiled(stated(**TWO))) == controls


def test_a_state_that_no_control_moves_determines_none():
    still = stated(**TWO | {"dynamics": ["x'' = u", "y' = -y"], "unknowns": {"x": {}, "y": {}, "u": {}}})
    assert determined_by(Held(0, "y", 0, 1), compiled(still)) == set()


def test_a_control_runs_singular_beside_another_that_is_held():
    """A speed on its limit determines u; w is as free there as where nothing is held."""
    problem = stated(**TWO)
    program = program_of(problem, TENTHS)
    where = program.layout
    z = start_of(problem, TENTHS)
    z[where.inner[where.fractions < 0.5, 1]] = 0.5
    z[where.controls[:, 1]] = 0.25
    still = np.zeros(where.size)
    path = trajectory(program, Minimum(Outcome.SOLVED, z / program.scale, 0, still, np.zeros(program.rows.count),
                                       0, 0, 0, ""))  # fmt: skip
    changed = with_switches(problem, [Switch(0.5, 0.5, 0.5)], path, [("u", 0), ("w", 0)])
    assert [(h.stretch, h.name, h.order) for h in changed.held] == [(0, "x", 1)]
    assert [(c.stretch, c.name) for c in changed.calm] == [(0, "w"), (1, "u"), (1, "w")]


def test_a_state_that_rests_because_a_control_does_is_implied():
    """An empty tank: with no flow left it stays empty, and there is but one control to hold."""
    tank = stated(unknowns={"x": {"within": [0, 1]}, "u": {"within": [0, 2]}}, dynamics=["x' = -u"],
                  endpoints=["x(0) = 1"])  # fmt: skip
    path = path_along(TENTHS, lambda t: np.maximum(1 - 2 * t, 0), lambda t: np.where(t < 0.5, 2.0, 0.0), tank)
    changed = with_switches(tank, switches(path, LINEAR), path, LINEAR)
    assert [(h.stretch, h.name, h.side) for h in changed.held] == [(0, "u", 1), (1, "u", -1)]
    assert [(h.stretch, h.name, h.side) for h in changed.implied] == [(1, "x", -1)]
    assert changed.calm == ()


def test_a_state_that_is_near_its_limit_for_a_while_is_not_implied():
    """The tank is nearly empty, but goes on to run dry: its limit still has to be stated."""
    tank = stated(unknowns={"x": {"within": [0, 1]}, "u": {"within": [2e-5, 2]}}, dynamics=["x' = -u"],
                  endpoints=["x(0) = 1"])  # fmt: skip
    path = path_along(TENTHS, lambda t: np.maximum(1 - 2 * t, 2e-5 * (1 - t)), lambda t: np.where(t < 0.5, 2, 2e-5),
                      tank)  # fmt: skip
    assert signals(path)[1].labels[-8:].tolist() == [-1] * 8
    changed = with_switches(tank, switches(path, LINEAR), path, LINEAR)
    assert [(h.stretch, h.name, h.side) for h in changed.held] == [(0, "u", 1), (1, "u", -1)]
    assert changed.implied == ()


CART = {"unknowns": {"x": {"within": [-1, 1]}, "u": {"within": [-9, 9]}}, "dynamics": ["x'' = u"],
        "endpoints": ["x(0) = 0"]}  # fmt: skip
"""A place whose second derivative is a control."""


def cart_along(mesh, x, v, u, members=CART):
    """A cart with given courses, whether they belong together or not."""
    program = program_of(stated(**members), mesh)
    where = program.layout
    z = np.zeros(where.size)
    z[where.places] = np.linspace(0, 1, len(where.places))
    breaks, points = mesh.breaks(z[where.places]), (where.stretch + where.fractions) / (len(where.places) - 1)
    for index, course in enumerate((x, v)):
        z[where.nodes[:, index]], z[where.inner[:, index]] = course(breaks), course(points)
    z[where.controls[:, 0]] = u(points)
    still = Minimum(Outcome.SOLVED, z / program.scale, 0, np.zeros(where.size), np.zeros(program.rows.count), 0, 0, 0,
                    "")  # fmt: skip
    return trajectory(program, still)


def test_a_touch_lies_where_the_state_turns_back():
    """The parabola below 1 counts as on its limit up to 0.01 from its top at 0.507; the points reach from 0.50."""
    path = cart_along(
        uniform(1, 25, 4), lambda t: 1 - 2 * (t - 0.507) ** 2, lambda t: -4 * (t - 0.507), lambda t: -4 + 0 * t
    )
    (touch,) = switches(path, LINEAR)
    assert touch.touching == (("x", 0), 1)
    assert touch.place == pytest.approx(0.507, abs=1e-12)


@pytest.mark.parametrize("apart, found", [(1.5e-3, 1), (1e-4, 0)])
def test_a_touch_is_told_apart_from_a_place_that_is_known(apart, found):
    """Two switches as near as that are one; a place of the problem is known better."""
    top = 0.5 + apart
    path = cart_along(uniform(2, 12, 4), lambda t: 1 - 2 * (t - top) ** 2, lambda t: -4 * (t - top),
                      lambda t: -4 + 0 * t, CART | {"endpoints": ["x(0) = 0", "x(0.5) >= 0"]})  # fmt: skip
    assert len(path.places) == 3
    assert len(switches(path, LINEAR)) == found


def test_where_an_arc_on_a_limit_ends_that_limit_is_not_touched_besides():
    path = cart_along(
        TENTHS,
        lambda t: np.minimum(1, 4 * t * (1 - t) + (t > 0.5)),
        lambda t: np.maximum(4 - 8 * t, 0),
        lambda t: np.where(t < 0.5, -8, 0),
    )
    end = Switch(0.5, 0.5, 0.5, (("x", 0), 1))
    changed = with_switches(stated(**CART), [end], path, LINEAR)
    assert [(h.stretch, h.name, h.side) for h in changed.held] == [(1, "x", 1)]
    assert changed.touches == ()
    other = Switch(0.5, 0.5, 0.5, (("x", 0), -1))
    assert len(with_switches(stated(**CART), [other], path, LINEAR).touches) == 1


def test_a_touch_soon_after_a_switch_is_a_place_of_its_own():
    path = path_of(lambda t: np.where(t < 0.4, -1.0, 1.0))
    touch = Switch(0.401, 0.401, 0.401, (("x", 0), -1))
    assert len(with_switches(bang(), [Switch(0.4, 0.4, 0.4), touch], path, LINEAR).places) == 4
    collapsing = Switch(0.401, 0.401, 0.401)
    assert len(with_switches(bang(), [Switch(0.4, 0.4, 0.4), collapsing], path, LINEAR).places) == 3


def test_switches_that_are_places_already_are_seen_as_such():
    path = path_of(lambda t: np.select([t < 0.2, t < 0.7], [1.0, -1.0], 1.0))
    assert present_switches(path) == []
    changed = with_switches(bang(), switches(path, LINEAR), path, LINEAR)
    again = solved_on(replace(changed, held=()), uniform(3, 3, 3))
    assert len(present_switches(again)) == 2
    assert all(switch.low == switch.place == switch.high for switch in present_switches(again))


@pytest.mark.parametrize("seek, sign", (("minimum", 1.0), ("maximum", -1.0)))
def test_the_softening_is_a_small_share_of_the_value(seek, sign):
    path = path_of(lambda t: np.where(t < 0.4, -1.0, 1.0), bang(seek))
    soft = softened(path, [0], 1e-3)
    at_the_limit = evaluate(soft.integrand, lambda name, order: 1.0, REAL)
    assert at_the_limit == pytest.approx(sign * 1e-3 * abs(path.program.value_scale))
    assert evaluate(soft.integrand, lambda name, order: 0.0, REAL) == 0
    assert program_of(soft).compiled.lowered.states == (("x", 0),)


def test_a_switch_that_falls_on_a_break_is_seen():
    """The least integral of y with |y'| <= 1 between zeros is the corner in the middle, where the first mesh has a
    break: from there every costate that vanishes between the points beside it would do."""
    found = solve(shape(functional={"integrand": "y"}, independent={"name": "x", "from": 0, "to": 1},
                        endpoints=["y(0) = 0", "y(1) = 0"], constraints=["-1 <= y' <= 1"]))  # fmt: skip
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value + 1 / 4) <= found.value_error < 1e-8


def test_a_control_that_does_not_act_linearly_passes_between_its_limits():
    """A strictly convex Hamiltonian lets no control jump: what looks like it is a passage with two ends."""
    jump = path_of(lambda t: np.where(t < 0.4, -1.0, 1.0))
    first, second = switches(jump, [])
    assert first.place < second.place
    steep = path_of(lambda t: np.clip((t - 0.45) / 0.04, -1.0, 1.0))
    assert len(switches(steep, LINEAR)) == 1
    assert len(switches(steep, [])) == 2


def test_what_is_let_go_is_not_held_again():
    path = path_of(lambda t: np.select([t < 0.2, t < 0.7], [1.0, 0.3], -1.0))
    changed = with_switches(bang(), switches(path, LINEAR), path, LINEAR, [(("u", 0), 0.6, 1.0)])
    assert [h.stretch for h in changed.held] == [0]
    assert len(changed.parameters) == 1
    assert [c.stretch for c in changed.calm] == [1]


def wrongly():
    """A path with u = 1 held from 1/2 on, although the value falls with x(1)."""
    path = path_of(lambda t: np.where(t < 0.5, 0.3, 1.0))
    changed = with_switches(bang(), switches(path, LINEAR), path, LINEAR)
    problem = replace(changed, places=(changed.places[0], Place(Number(0.5, ""), changed.places[1].label),
                                       changed.places[2]), calm=())  # fmt: skip
    return solved_on(problem, uniform(2, 3, 3))


def test_a_limit_that_it_would_be_better_to_leave_is_let_go_up_to_where_it_is_held_again():
    path = wrongly()
    assert [(h.stretch, h.name) for h in wrongly_held(path)] == [(1, "u")]
    assert released(path, wrongly_held(path)) == [(("u", 0), 0.0, 1.0)]


def test_a_control_that_acts_linearly_is_loose_until_it_is_held_everywhere():
    def arcs(*values):
        path = path_of(lambda t: np.select([t < 0.2, t < 0.7], values[:2], values[2]))
        return compiled(with_switches(bang(), switches(path, LINEAR), path, LINEAR))

    assert loose(compiled(bang()))
    assert loose(arcs(1.0, 0.3, -1.0))
    assert not loose(arcs(1.0, -1.0, 1.0))
    assert not loose(compiled(stated()))


def test_what_a_coarse_mesh_shows_is_believed_only_where_nothing_pushes_away_from_its_limit():
    path = wrongly()
    inside = path.program.layout.controls[path.program.layout.stretch == 1, 0]
    right = -path.bound_multipliers[inside]
    assert not surely_held_rightly(path)
    for share, surely in ((0.0, True), (0.1, False)):
        multipliers = path.bound_multipliers.copy()
        multipliers[inside] = right
        multipliers[inside[3]] = -share * right[3]
        spoiled = replace(path, bound_multipliers=multipliers)
        assert wrongly_held(spoiled) == []
        assert surely_held_rightly(spoiled) is surely


def test_a_switch_at_the_edge_of_its_room_shrinks_what_lies_beyond():
    path = path_of(lambda t: np.select([t < 0.2, t < 0.7], [1.0, -1.0], 1.0))
    changed = with_switches(bang(), switches(path, LINEAR), path, LINEAR)
    solved = solved_on(replace(changed, held=()), uniform(3, 3, 3))
    first, second = solved.program.compiled.lowered.problem.parameters
    at = {
        "low": [first.lower, second.guess],
        "high": [first.guess, second.upper],
        "inside": [first.guess, second.guess],
    }
    ends = {"low": (first.lower, 0.0), "high": (second.upper, 1.0)}
    for name, values in at.items():
        places = np.array([0.0, *values, 1.0])
        there = replace(solved, parameters=np.array(values), places=places)
        assert shrinking(there) == ([ends[name]] if name in ends else [])
        assert at_the_edge(there) == (name in ends)
