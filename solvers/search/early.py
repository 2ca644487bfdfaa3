"""Switches that a coarse mesh already shows clearly: the problem is solved with them without finer plain meshes."""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from solvers.deadline import Deadline
from solvers.problem import Problem
from solvers.search.accumulation import accumulation
from solvers.search.holding import held_rightly, released, surely_held_rightly, wrongly_held
from solvers.search.pursuit import go_on, pursue
from solvers.search.record import End, Pursuit
from solvers.search.refinement import smooth_all_along
from solvers.search.sharpen import agrees, alike, chatters, mesh_between, slow, with_more_switches, worse
from solvers.search.signals import Switch, jumps_at_breaks, switches
from solvers.search.structure import at_the_edge, hides_arcs, shown_by, with_switches
from solvers.solution import Watch
from solvers.transcription.functions import linear_controls
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

PLAIN = 3
"""Plain meshes after which more effort is due to find the switches."""
LEAST_POINTS = 4
"""So many points of the mesh must lie on every arc, or it may be none: as many as an interval of the first mesh has."""
HASTY = (30, 40)
"""Iterations within which a right structure is solved that is read off a plain mesh (most take less than 20), and then
one that is read off what that led to."""
FURTHER = 2
"""Meshes that a right structure is given where the second one does not suffice."""
NEARLY = 30.0
"""How far from the tolerance, as a factor, an error may stand still."""
SHARE = 0.3
"""Share of the remaining time that one structure may take."""


def sharpened_early(base: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """Refine a plain pursuit up to a few meshes; on the way try the switches that these show, if they do clearly.

    What is found has to converge, to agree with the plain value, and to be held rightly beyond doubt; else this is
    None, and nothing is lost but the time.
    """
    linear = [base.compiled.lowered.controls[index] for index in linear_controls(base.compiled)]
    tried: list[Problem] = []
    while base.end is End.SETTLED:
        last = len(base.paths) >= PLAIN
        changed = None if last and not linear else _clear_structure(base, linear)  # else it is looked at anyway
        sharp = _with_it(changed, base, linear, tried, watch, deadline)
        if sharp is not None or last:
            return sharp
        go_on(base, watch, deadline, 1)
    return None


def _with_it(
    changed: Problem | None,
    base: Pursuit,
    linear: list[Quantity],
    tried: list[Problem],
    watch: Watch | None,
    deadline: Deadline,
) -> Pursuit | None:
    """The problem with the switches of a structure, or of what that shows itself; None where that is in doubt.

    Where nothing speaks against a structure but that the error hardly falls, it lacks a switch, or all that follow
    where a control chatters.  Where a control is held wrongly, it is let go.
    """
    path = base.paths[-1]
    for iterations in HASTY:
        if changed is None or any(alike(changed, other) for other in tried):
            break
        tried.append(changed)
        room = deadline.within(SHARE * deadline.left)
        sharp = _pursued(changed, path, base, iterations, watch, room)
        if _surely(sharp, base):
            return sharp
        if not sharp.solved or at_the_edge(sharp.paths[-1]) or not agrees(sharp, base):
            break
        path = sharp.paths[-1]
        wrong = wrongly_held(path)
        lacking = slow(sharp) and _hopeful(sharp, base)
        if not lacking and not (wrong and all((held.name, held.order) in linear for held in wrong)):
            break
        if lacking and chatters(sharp):
            more = with_more_switches(base, sharp, watch, room)
            if more.shown and not worse(more, base):
                return more
        changed = with_switches(base.problem, shown_by(path, linear), path, linear, released(path, wrong))
    return None


def _clear_structure(base: Pursuit, linear: list[Quantity]) -> Problem | None:
    """The problem with the switches that its last mesh shows, where that is not smooth and shows all arcs."""
    path, tolerance = base.paths[-1], base.problem.options.tolerance
    if smooth_all_along(base.estimates[-1], tolerance):
        return None
    found = switches(path, linear)
    for seen in (found, _without_unseen(path, found)):
        changed = with_switches(base.problem, seen, path, linear) if seen else None
        if changed is not None and _clear(path, changed):
            return changed
    return None


def _without_unseen(path: Trajectory, found: list[Switch]) -> list[Switch]:
    """Two switches with hardly a point between them as one: what the mesh blurs between two arcs is no third one.

    A switch with hardly a point between it and an end of the range is none: it may lie at that end just as well.
    """
    first, end = float(path.places[0]), float(path.places[-1])
    kept: list[Switch] = []
    for switch in found:
        if min(_points_between(path, first, switch.place), _points_between(path, switch.place, end)) < LEAST_POINTS:
            continue
        last = kept[-1] if kept else None
        apart = last is None or {last.touching, last.bent, switch.touching, switch.bent} != {None}
        if last is None or apart or _points_between(path, last.place, switch.place) >= LEAST_POINTS:
            kept.append(switch)
        else:
            kept[-1] = Switch((last.place + switch.place) / 2, last.low, switch.high)
    return kept


def _clear(path: Trajectory, changed: Problem) -> bool:
    """Whether enough points lie on every arc."""
    switched = [parameter.guess for parameter in changed.parameters[len(path.parameters) :]]
    places = sorted([*path.places, *(place for place in switched if place is not None)])
    return all(_points_between(path, low, high) >= LEAST_POINTS for low, high in pairwise(places))


def _points_between(path: Trajectory, low: float, high: float) -> int:
    return int(np.sum((path.points > low) & (path.points < high)))


def _pursued(
    changed: Problem, path: Trajectory, base: Pursuit, iterations: int, watch: Watch | None, deadline: Deadline
) -> Pursuit:
    """The problem with switches solved from the path that shows them, on further meshes where that is hopeful."""
    mesh = mesh_between(changed, path)
    sharp = pursue(changed, watch, deadline, meshes=1, start=path, mesh=mesh, iterations=iterations)
    if sharp.solved and _hopeful(sharp, base):
        go_on(sharp, watch, deadline, 1)
        if sharp.end is not End.CONVERGED and not slow(sharp):
            go_on(sharp, watch, deadline, FURTHER)
    return sharp


def _surely(sharp: Pursuit, base: Pursuit) -> bool:
    """Whether what came of a structure is beyond doubt."""
    return sharp.solved and (sharp.end is End.CONVERGED or _stalls(sharp)) and _right(sharp, base)


def _stalls(sharp: Pursuit) -> bool:
    """Whether finer meshes would not help: the value stands, and what is left of the error falls no further, as where a
    singular control is known only through a state that costs little."""
    near = (sharp.steps[-1].error or 0.0) <= NEARLY * sharp.problem.options.tolerance
    return sharp.done and near and slow(sharp)


def _hopeful(sharp: Pursuit, base: Pursuit) -> bool:
    """Whether nothing speaks against a structure yet: on a coarse mesh a switch may still be far off its place."""
    path = sharp.paths[-1]
    whole = not (at_the_edge(path) or hides_arcs(path)) and accumulation(path) is None  # else switches are missing
    return whole and agrees(sharp, base) and held_rightly(path)


def _right(sharp: Pursuit, base: Pursuit) -> bool:
    path = sharp.paths[-1]
    sound = surely_held_rightly(path) and not jumps_at_breaks(path)
    return sound and _hopeful(sharp, base) and not worse(sharp, base)
