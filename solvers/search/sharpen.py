"""Bang-bang and singular problems sharpened: switches read off a softened solve, made unknown, solved again."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.problem import Problem
from solvers.search.accumulation import one_touch_more
from solvers.search.chatter import one_more
from solvers.search.holding import released, shrunk, wrongly_held
from solvers.search.joined import joined
from solvers.search.pursuit import go_on, pursue
from solvers.search.record import End, Pursuit
from solvers.search.signals import SWITCH, Switch, jumps_at_breaks, limited
from solvers.search.structure import (
    Release,
    at_the_edge,
    first_places,
    hides_arcs,
    shown_by,
    shrinking,
    softened,
    with_switches,
)
from solvers.search.touches import parted
from solvers.solution import Watch
from solvers.transcription.collocation import Family
from solvers.transcription.functions import linear_controls
from solvers.transcription.mesh import Interval, Mesh, interval
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]

SOFTNESS = (1e-3, 1e-5)
"""Weights of the softened problems that are tried in turn."""
ROUNDS = 3
"""How often the structure is read again off a sharpened path ..."""
BESIDES = 3
"""... and how often besides touches are parted from the switches beside them, or free arcs looked at uncalmed."""
FURTHER = 4
"""Meshes that a structure is given with which the error falls."""
SLOW = 0.25
"""How much of the error one more mesh must leave at the most where the structure is right."""
MOST_CHATTER = 5
"""So many switches are added where a control chatters: each counts about a thousandth of the one before."""
MOVED = 1e-3
"""How far, relative to the range, a switch has to be read elsewhere for its structure to be tried again."""
ENOUGH = 0.1
"""How much of the tolerance a touch has to be worth to be added, or the value's error for a further switch."""
LEAST_DEGREE = 6
"""The least degree of intervals that are taken over."""
CROWDED = 0.001
"""How near to each other, relative to an arc along a constraint, breaks crowd together."""
HELPS = 0.1
"""How much of the error must be left at the most where it came from the ends of arcs along constraints."""
AGREEMENT = 1e-2
"""How far the value may move when the structure is made exact, relative to its size."""


def sharpen(base: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """A pursuit of the same problem with its switches as unknowns; None where there are none or that leads nowhere."""
    path = base.paths[-1]
    if not limited(path):
        return None
    found: list[Pursuit] = []
    tried: list[Problem] = []
    for seen in _calmed(base, watch, deadline):
        sharp = with_structure(base, seen, watch, deadline, tried)
        for _ in range(ROUNDS):
            if sharp is None or sharp.done or _suffices(sharp):
                break
            again = with_structure(base, sharp.paths[-1], watch, deadline)
            if again is None or again.value_error > sharp.value_error:
                break
            sharp = again
        if sharp is not None and sharp.end is End.CONVERGED:
            return _with_more_touches(base, sharp, watch, deadline)
        if sharp is not None:
            found.append(sharp)
            if chatters(sharp):  # what a softer path shows is what is continued
                break
    best = min(found, key=lambda pursuit: (not pursuit.done, pursuit.value_error), default=None)
    if best is None:
        return None
    more = with_more_switches(base, best, watch, deadline)
    return go_on(best, watch, deadline, 4) if more is best and chatters(best) else more


def _suffices(sharp: Pursuit) -> bool:
    """Whether all is found that counts: what still moves from mesh to mesh hardly changes the value."""
    return sharp.shown and (sharp.steps[-1].error or 0.0) <= sharp.problem.options.tolerance


def _calmed(base: Pursuit, watch: Watch | None, deadline: Deadline) -> Iterator[Trajectory]:
    """Paths to read the structure off: softened ones where controls act linearly, else the plain one."""
    path = base.paths[-1]
    linear = linear_controls(base.compiled)
    if not linear:
        yield path
    for softness in SOFTNESS if linear else ():
        soft = softened(path, linear, softness)
        calm = pursue(soft, watch, deadline, meshes=3, start=path, mesh=path.program.mesh)
        if calm.solved:
            yield calm.paths[-1]


def with_structure(
    base: Pursuit, path: Trajectory, watch: Watch | None, deadline: Deadline, tried: list[Problem] | None = None
) -> Pursuit | None:
    """Read switches off a path and solve with them; None where there are none or the answer is not believable.

    Nor is the first structure solved again where it is one of those that were `tried`, unless its switches were read
    elsewhere: from there it may lead elsewhere.  It becomes one of them.

    What turns out to be held wrongly is let go, unless an arc that the mesh may have seen as two does as one.  A switch
    that ends at the edge of the room it was given is looked at again from there, and left out if it does so again: the
    arc towards which it runs has no length.  Looked at again is also a structure with which the error hardly falls from
    one mesh to the next, or with which a control leaps within an arc; where that shows nothing else, the same is solved
    without calming its free arcs.
    """
    linear = [base.compiled.lowered.controls[index] for index in linear_controls(base.compiled)]
    loose: list[Release] = []
    one: Problem | None = None
    seen, pursuit, again = path.program.compiled.lowered.problem, None, False
    calmed, besides = True, 0
    for round_ in range(ROUNDS + BESIDES):
        if round_ - besides >= ROUNDS:
            break
        found = shown_by(path, linear)
        changed = one or with_switches(base.problem, found, path, linear, loose)
        if again and changed is not None and alike(changed, seen):
            found = [switch for switch in found if not _vanishing(switch, shrinking(path))]
            loose += released(path, shrunk(path))
            changed = with_switches(base.problem, found, path, linear, loose)
        if changed is None:
            break
        same = alike(changed, seen)
        stuck = same and (again or not at_the_edge(path))
        if not stuck:
            if round_ == 0 and any(_begins_alike(changed, other, path) for other in tried or ()):
                break
            again, one = same, None
            now = pursue(changed, watch, deadline, meshes=1, start=path, mesh=mesh_between(changed, path))
        if stuck or not now.solved:
            rough = _uncalmed(pursuit, watch, deadline) if calmed else None
            if rough is None:
                break
            path, calmed, besides = rough, False, besides + 1
            continue
        if at_the_edge(now.paths[-1]) or not agrees(now, base) or not wrongly_held(now.paths[-1]):
            go_on(now, watch, deadline, 1)
        if tried is not None and round_ == 0:
            tried.append(changed)
        path = now.paths[-1]
        seen = changed
        if at_the_edge(path):
            continue
        if not agrees(now, base) or not _helps(now, base):
            break
        wrong = wrongly_held(path)
        if wrong:
            one = joined(changed)
            if one is None:
                loose += released(path, wrong)
            continue
        if calmed or pursuit is None or now.value_error <= pursuit.value_error:
            pursuit = now
        apart = parted(path) if besides < BESIDES else None
        if apart is not None:
            besides += 1
            one = with_switches(base.problem, apart, path, linear, loose)
            continue
        if hides_arcs(path):
            continue
        if now.end is not End.CONVERGED and not slow(now):
            go_on(now, watch, deadline, FURTHER)
            path = now.paths[-1]
        if not jumps_at_breaks(path) and (now.end is End.CONVERGED or not slow(now)):
            break
    if pursuit is None or pursuit.end is End.CONVERGED or len(pursuit.steps) > 2 or chatters(pursuit):
        return pursuit
    if hides_arcs(pursuit.paths[-1]):  # with them it would converge to a value that is a little worse
        return pursuit
    return go_on(pursuit, watch, deadline, FURTHER)


def _uncalmed(pursuit: Pursuit | None, watch: Watch | None, deadline: Deadline) -> Trajectory | None:
    """The same without calming where that does not converge: what it calms may switch, and not run singular."""
    if pursuit is None or not pursuit.problem.calm or not (slow(pursuit) or hides_arcs(pursuit.paths[-1])):
        return None
    path = pursuit.paths[-1]
    mesh = mesh_between(pursuit.problem, path)
    rough = pursue(replace(pursuit.problem, calm=()), watch, deadline, meshes=FURTHER, start=path, mesh=mesh)
    return rough.paths[-1] if rough.solved else None


def chatters(pursuit: Pursuit) -> bool:
    """Whether finer meshes would only show more of a chattering: the error hardly falls, and one more switch fits."""
    return slow(pursuit) and one_more(pursuit.paths[-1]) is not None


def _helps(now: Pursuit, base: Pursuit) -> bool:
    """Whether curves along constraints are better known than by the plain meshes, where they bend by themselves too."""
    if all(now.compiled.rank_of(held) is None for held in now.problem.held):
        return True
    return (now.steps[-1].error or 0.0) <= HELPS * (base.steps[-1].error or 0.0)


def slow(pursuit: Pursuit) -> bool:
    """Whether the error has hardly fallen on the last mesh, as it does where a switch is still missing."""
    errors = [step.error or 0.0 for step in pursuit.steps]
    return len(errors) > 1 and errors[-1] > SLOW * errors[-2]


def _vanishing(switch: Switch, stretches: list[tuple[float, float]]) -> bool:
    """Whether a switch begins one of the stretches, or lies within."""
    return any(min(stretch) <= switch.place <= max(stretch) and switch.place != stretch[1] for stretch in stretches)


def alike(one: Problem, other: Problem) -> bool:
    """Whether two structures have the same arcs in the same order."""
    return (one.held, one.calm, len(one.places)) == (other.held, other.calm, len(other.places))


def _begins_alike(one: Problem, other: Problem, path: Trajectory) -> bool:
    """Whether two structures are the same, with their switches at nearly the same places to begin with."""
    if not alike(one, other):
        return False
    there = {parameter.name: parameter.guess or 0.0 for parameter in other.parameters}
    moved = (abs((p.guess or 0.0) - there[p.name]) for p in one.parameters if p.name.startswith(SWITCH + " "))
    return max(moved, default=0.0) <= MOVED * float(np.ptp(path.places))


def with_more_switches(base: Pursuit, sharp: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit:
    """Where the control chatters, the same with so many switches that those after them do not count any more.

    What follows the last one is not refined: finer meshes would only show more of the chattering.
    """
    last, error = sharp, float("inf")
    for _ in range(MOST_CHATTER):
        if last.end is End.CONVERGED or deadline.over:
            break
        path = last.paths[-1]
        changed = one_more(path)
        if changed is None:
            break
        pursuit = pursue(changed, watch, deadline, meshes=2, start=path, mesh=mesh_between(changed, path))
        if not pursuit.solved or at_the_edge(pursuit.paths[-1]) or not agrees(pursuit, base):
            break
        if pursuit.value_error > error:
            break
        last, error = pursuit, pursuit.value_error
        if last.shown and error <= ENOUGH * base.problem.options.tolerance * last.value_size:
            break
    return last if last.shown or last.value_error <= sharp.value_error else sharp


def _with_more_touches(base: Pursuit, sharp: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit:
    """Where a state cannot come to rest on its limit at once, the same with so many touches before that that those
    which are left out do not count any more: with one of these multipliers are but noise."""
    last = sharp
    for _ in range(MOST_CHATTER):
        changed = one_touch_more(last.paths[-1])
        if changed is None or deadline.over:
            break
        path = last.paths[-1]
        pursuit = pursue(changed, watch, deadline, meshes=4, start=path, mesh=mesh_between(changed, path))
        if pursuit.end is not End.CONVERGED or at_the_edge(pursuit.paths[-1]) or worse(pursuit, last):
            break
        gained = abs(pursuit.paths[-1].value - last.paths[-1].value)
        if gained <= ENOUGH * base.problem.options.tolerance * base.value_size:
            last.value_error += 2 * gained
            break
        last = pursuit
    return last


def mesh_between(problem: Problem, path: Trajectory) -> Mesh:
    """Few intervals where everything is held, more where a control is free; with arcs along constraints a path's own.

    What bends there bends wherever its limit does, and the path's mesh knows about that.  The end is no point, unless a
    state is held there: then its limit pushes at the end too.
    """
    labels = {condition.label for condition in problem.constraints}
    if any(h.name in labels for h in problem.held):
        return _taken_over(problem, path)
    pieces: list[Interval] = []
    calm = {c.stretch for c in problem.calm}
    held = {h.stretch for h in problem.held} - calm
    last, states = len(problem.places) - 2, path.program.compiled.lowered.states
    pushed = any(h.stretch == last and (h.name, h.order) in states for h in problem.held)
    for stretch in range(last + 1):
        count, degree = (2, 5) if stretch in held else (4, 6)
        for k in range(count):
            ends = stretch == last and k == count - 1 and not pushed
            family = Family.GAUSS if ends else Family.RADAU
            pieces.append(interval(stretch, k / count, (k + 1) / count, family, degree))
    return Mesh(tuple(pieces))


def _taken_over(problem: Problem, path: Trajectory) -> Mesh:
    """The mesh of a path, cut anew by the places of a problem."""
    pieces: list[Interval] = []
    places, degrees = first_places(problem, path), path.program.mesh.counts
    for stretch, (start, end) in enumerate(pairwise(places)):
        for left, right in pairwise(_edges_between(path, start, end)):
            owner = np.searchsorted(path.breaks[1:-1], start + (left + right) / 2 * (end - start))
            family = Family.GAUSS if stretch == len(places) - 2 and right == 1 else Family.RADAU
            degree = max(LEAST_DEGREE, int(degrees[owner]))
            pieces.append(interval(stretch, float(left), float(right), family, degree))
    return Mesh(tuple(pieces))


def _edges_between(path: Trajectory, start: float, end: float) -> Array:
    """The breaks of a mesh between two places as shares of the way, without those that crowd together."""
    edges = [0.0]
    for share in (path.breaks - start) / (end - start):
        if edges[-1] + CROWDED < share < 1 - CROWDED:
            edges.append(float(share))
    return np.array([*edges, 1.0]) if len(edges) > 3 else np.linspace(0.0, 1.0, 5)


def worse(found: Pursuit, base: Pursuit) -> bool:
    """Whether the sharpened value is worse than that of the plain meshes, beyond both errors."""
    sign = np.sign(base.paths[-1].program.value_scale)
    return bool(sign * (found.paths[-1].value - base.paths[-1].value) > found.value_error + base.value_error)


def agrees(found: Pursuit, base: Pursuit) -> bool:
    """Whether the sharpened value is the one that the plain meshes tend to."""
    return abs(found.paths[-1].value - base.paths[-1].value) <= AGREEMENT * base.value_size
