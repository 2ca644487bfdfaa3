"""Switches read off a mesh and made unknown places."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.formula.evaluate import REAL, evaluate
from solvers.search.structure import (
    MOST_SWITCHES,
    SWITCH,
    Switch,
    present_switches,
    signals,
    softened,
    switches,
    with_switches,
)
from solvers.solution import Verdict
from solvers.solve import solve
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import path_along, program_of, shape, solved_on, stated

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


def test_singular_arcs_are_calm_and_held_arcs_are_not():
    path = path_of(lambda t: np.select([t < 0.2, t < 0.7], [1.0, 0.3], -1.0))
    changed = with_switches(bang(), switches(path, LINEAR), path, LINEAR)
    assert [(c.stretch, c.name) for c in changed.calm] == [(1, "u")]
    assert [h.stretch for h in changed.held] == [0, 2]


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
