"""A point whose limits are active elsewhere than at its neighbour: the structure is read anew, near the neighbour.

Where the neighbour's form still has a solution, that one shows what has changed: a switch that ran into another one,
a limit held where leaving it would gain.  Else the limits are given back as what they are, inequalities, on the
neighbour's mesh, whose breaks lie where its switches were.  The structure is then read off as in a single solve.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from solvers.deadline import Deadline
from solvers.problem import Problem
from solvers.search.pursuit import pursue
from solvers.search.record import End, Pursuit
from solvers.search.sharpen import sharpen, with_structure
from solvers.search.signals import SWITCH
from solvers.search.structure import smooth_contacts, without_switches
from solvers.transcription.functions import compile_problem
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import Mesh, interval
from solvers.transcription.trajectory import Trajectory


def repaired(form: Problem, near: Trajectory, seen: Trajectory | None, deadline: Deadline) -> Iterator[Pursuit]:
    """A point from a neighbour with other active limits, in one way after the other.

    `form` is the problem of the point in the neighbour's form, without its switches; `seen` is where the neighbour's
    structure led.
    """
    if seen is not None:
        base = Pursuit(form, compile_problem(lower(form)), end=End.SETTLED, paths=[seen])
        found = with_structure(base, seen, None, deadline)
        if found is not None and _good(found):
            yield found
    plain = pursue(form, None, deadline, meshes=1, start=near, mesh=_flat(near, form))
    found = sharpen(plain, None, deadline) if plain.solved else None
    if found is not None and _good(found):
        yield found


def plainly(form: Problem, constants: Problem) -> Problem:
    """A form that the solver has given switches without them, for the constants of another problem."""
    return replace(without_switches(form), constants=constants.constants)


def without_contacts(pursuit: Pursuit, deadline: Deadline) -> Trajectory:
    """The last path of a pursuit; where arcs along constraints begin and end smoothly, one without them as unknowns.

    Where they do is of no account for one solution, so nothing says how that moves along a branch.  The mesh is another
    one: a point just where a limit begins to bind would be no place to begin.
    """
    path = pursuit.paths[-1]
    if not smooth_contacts(path):
        return path
    plain = pursue(without_switches(pursuit.problem), None, deadline)
    return plain.paths[-1] if plain.solved else path


def _good(pursuit: Pursuit) -> bool:
    return pursuit.end is End.CONVERGED or (pursuit.end is End.SETTLED and pursuit.shown)


def _flat(path: Trajectory, form: Problem) -> Mesh:
    """The mesh of a path for the same problem without switches: breaks stay where they are."""
    places = path.program.compiled.lowered.problem.places
    own = [k for k, place in enumerate(places) if not place.label.startswith(SWITCH + " ")]
    pieces = []
    for k, old in enumerate(path.program.mesh.intervals):
        stretch = int(np.searchsorted(own, old.stretch, side="right")) - 1
        first, last = path.places[own[stretch]], path.places[own[stretch + 1]]
        start, end = ((b - first) / (last - first) for b in path.breaks[k : k + 2])
        pieces.append(interval(stretch, float(start), float(end), old.scheme.family, old.scheme.degree))
    return Mesh(tuple(pieces))
