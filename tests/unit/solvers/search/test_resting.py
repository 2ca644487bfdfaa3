"""Whether controls within their limits can keep a state where it is."""

import numpy as np
import pytest

from solvers.minimise.ipopt import Minimum, Outcome
from solvers.search.resting import can_rest
from solvers.search.signals import Switch
from solvers.search.structure import with_switches
from solvers.transcription.mesh import uniform
from solvers.transcription.trajectory import trajectory
from tests.unit.solvers.problems import program_of, start_of, stated

MESH = uniform(1, 10, 4)


def path_of(members, **courses):
    """The first guess of a problem, with courses of its own for some states and controls."""
    problem = stated(**{"endpoints": ["x(0) = 0"], "functional": {"endpoint": "x(1)^2"}} | members)
    program, z = program_of(problem, MESH), start_of(problem, MESH)
    where, lowered = program.layout, program.compiled.lowered
    for name, course in courses.items():
        if (name, 0) in lowered.controls:
            z[where.controls[:, lowered.controls.index((name, 0))]] = course(where.fractions)
        else:
            index = lowered.states.index((name, 0))
            z[where.inner[:, index]] = course(where.fractions)
            z[where.nodes[:, index]] = course(MESH.breaks(np.array([0.0, 1.0])))
    none = Minimum(
        Outcome.SOLVED, z / program.scale, 0, np.zeros(where.size), np.zeros(program.rows.count), 0, 0, 0, ""
    )
    return trajectory(program, none)


def rests(members, state="x"):
    path = path_of(members)
    return can_rest(path, (state, 0), np.ones(len(path.points), dtype=bool))


def lift(load, **members):
    """A load on an engine of the force 1 at most, upwards or down."""
    return {
        "unknowns": {"x": {"within": [-5, 5]}, "u": {"within": [-1, 1]}},
        "dynamics": [f"x'' = u - {load}"],
    } | members


@pytest.mark.parametrize("load, can", [(0.9, True), (1, True), (1.1, False), (-1.1, False)])
def test_an_engine_holds_what_is_not_heavier_than_its_force(load, can):
    assert rests(lift(load)) is can


def test_slopes_may_have_names_of_their_own():
    members = {"unknowns": {"x": {}, "v": {}, "u": {"within": [-1, 1]}}, "dynamics": ["x' = v", "v' = u - 2"]}
    assert not rests(members)


def test_two_engines_hold_together_what_neither_holds_alone():
    two = {"x": {}, "u": {"within": [-1, 1]}, "w": {"within": [0, 1]}}
    assert rests({"unknowns": two, "dynamics": ["x'' = u + w - 1.9"]})
    assert not rests({"unknowns": two, "dynamics": ["x'' = u + w - 2.1"]})


@pytest.mark.parametrize(
    "members",
    [lift(2, unknowns={"x": {}, "u": {}}), lift(2, dynamics=["x'' = u^2 - 2"]),
     lift(2, dynamics=["x' = v + sin(x) - 2", "v' = u"], unknowns={"x": {}, "v": {}, "u": {"within": [-1, 1]}})],
    ids=["no limits", "not linear", "no slope of a slope"],
)  # fmt: skip
def test_where_that_is_not_known_nothing_is_said(members):
    assert rests(members)


@pytest.mark.parametrize("load, held", [(0.5, [("x", -1)]), (1.5, [])])
def test_what_only_looks_as_if_it_rested_is_not_held(load, held):
    """The load turns back so slowly on the floor that all points of half the range lie on it."""
    path = path_of(lift(load, unknowns={"x": {"within": [0, 5]}, "u": {"within": [-1, 1]}}),
                   x=lambda t: np.where(t < 0.5, 0.0, t - 0.5), u=lambda t: 0.3 + 0 * t)  # fmt: skip
    changed = with_switches(path.program.compiled.lowered.problem, [Switch(0.5, 0.5, 0.5)], path, [("u", 0)])
    assert [(h.name, h.side) for h in (changed.held if changed else ())] == held
