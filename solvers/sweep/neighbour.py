"""A point from a solved neighbour, in its form, on its mesh, on the same compiled program.

The start is continued from the last two points in a straight line, or along the first-order change of the neighbour's
solution where there is but one.  Where the mesh is no longer fine enough it is refined from there.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks.inertia import minimum_of_program
from solvers.deadline import Deadline
from solvers.minimise.ipopt import CLOSE, FLOOR, Iterate, Minimum, Start, minimise
from solvers.minimise.newton import stationary_point, straight_to
from solvers.problem import Problem, Seek
from solvers.search import refinement
from solvers.search.attempt import SOLVED
from solvers.search.holding import held_rightly
from solvers.search.pursuit import go_on
from solvers.search.record import End, Pursuit
from solvers.search.signals import SWITCH
from solvers.search.structure import at_the_edge, present_switches
from solvers.solution import MeshStep
from solvers.transcription.functions import Compiled, with_constants
from solvers.transcription.numbers import Numbers
from solvers.transcription.program import Program, restated
from solvers.transcription.trajectory import Trajectory, as_start, trajectory

Array = NDArray[np.float64]

SAFETY = 2.0
"""How much larger errors may be than what they were where the mesh was last compared with another one."""
HOPELESS = 100.0
"""Local errors so many times those allowed: what switches where has changed, and a finer mesh would not help."""
REFINEMENTS = 4
"""Meshes that are tried from a neighbour before the problem is solved from the start."""


@dataclass(frozen=True, slots=True)
class Solved:
    """A solved point: the values of the swept constants, and what was found for them."""

    at: Array
    pursuit: Pursuit


@dataclass(frozen=True, slots=True)
class Reached:
    """Where a neighbour led: `good` as it is, or a path that may say what has changed; None where not even that.

    `convex`: the last matrix had the inertia of a minimum; `same`: no mesh but the neighbour's was needed.
    """

    good: Pursuit | None = None
    path: Trajectory | None = None
    convex: bool = False
    same: bool = False


@dataclass(frozen=True, slots=True)
class _Measured:
    """The errors of a mesh where it was last compared with another one."""

    numbers: Numbers
    worst: float
    value_error: float  # beyond what `worst` and the minimiser explain, relative
    curve_error: float


@dataclass
class Neighbours:
    """Goes from points to their neighbours; `names` are the swept constants."""

    names: Sequence[str]
    deadline: Deadline
    measured: list[_Measured] = field(default_factory=list)

    def step(self, problem: Problem, at: Array, near: Solved, far: Solved | None) -> Reached:
        """The solution at `at` in the form and on the mesh of `near`; `far` lies behind it."""
        path = near.pursuit.paths[-1]
        measured = self._measured(near.pursuit)
        values = dict(zip(self.names, at.tolist(), strict=True))
        start = self._start(near, at, far)
        program = restated(path.program, with_constants(_with_room(path.program, start), values))
        straight: Minimum | None = None
        if problem.seek is Seek.STATIONARY:
            minimum = stationary_point(program, start, _unheard)
        else:
            straight = straight_to(program, start, _unheard)
            minimum = straight or minimise(program, start, deadline=self.deadline, options=CLOSE)
        if minimum.outcome not in SOLVED:
            return Reached()
        found = trajectory(program, minimum)
        convex = minimum.convex if straight is None else minimum_of_program(program, straight)
        if present_switches(found) and (at_the_edge(found) or not held_rightly(found)):
            return Reached(path=found)
        pursuit = self._pursuit(near.pursuit, found, minimum, measured)
        if pursuit is None:
            return Reached(path=found)
        return Reached(pursuit, found, convex, len(pursuit.paths) == 1)

    def _start(self, near: Solved, at: Array, far: Solved | None) -> Start:
        """The neighbour's solution continued to another point."""
        path = near.pursuit.paths[-1]
        now = as_start(path)
        if far is not None and far.pursuit.paths[-1].program.numbers.alike(path.program.numbers):
            way = near.at - far.at
            share = float((at - near.at) @ way / (way @ way))
            return _straight_on(now, as_start(far.pursuit.paths[-1]), share)
        changes = dict(zip(self.names, (at - near.at).tolist(), strict=True))
        z, rows = _moved(path, {name: change for name, change in changes.items() if change})
        return replace(now, z=now.z + z, multipliers=_given(now.multipliers) + rows)

    def _measured(self, pursuit: Pursuit) -> _Measured:
        """The errors of the mesh of a pursuit."""
        path, worst = pursuit.paths[-1], pursuit.estimates[-1].worst
        for known in self.measured:
            if known.numbers.alike(path.program.numbers):
                return known
        size = max(abs(path.value), abs(path.program.value_scale))
        beyond = max(pursuit.value_error / size - worst**2 - FLOOR, 0.0)
        self.measured.append(_Measured(path.program.numbers, worst, beyond, pursuit.curve_error))
        return self.measured[-1]

    def _pursuit(self, before: Pursuit, path: Trajectory, minimum: Minimum, measured: _Measured) -> Pursuit | None:
        """The point as a pursuit; its errors grow with the local ones, and beyond the tolerance it is refined."""
        compiled = path.program.compiled
        tolerance = compiled.lowered.problem.options.tolerance
        found = refinement.estimate(path)
        size = max(abs(path.value), abs(path.program.value_scale))
        growth = SAFETY * max(1.0, found.worst / max(measured.worst, 1e-300))
        low, high = path.program.mesh.degrees()
        step = MeshStep(len(path.breaks) - 1, len(path.points), low, high, path.value, found.worst, minimum.iterations,
                        minimum.seconds)  # fmt: skip
        pursuit = Pursuit(
            compiled.lowered.problem,
            compiled,
            end=before.end,
            steps=[step],
            paths=[path],
            estimates=[found],
            first=before.first,
            value_error=size * (growth * measured.value_error + found.worst**2 + SAFETY * FLOOR),
            curve_error=growth * measured.curve_error + found.worst,
        )
        allowed = max(tolerance, SAFETY * measured.worst)
        if found.worst <= allowed and pursuit.value_error <= max(tolerance * pursuit.value_size, 2 * FLOOR * size):
            return pursuit
        if found.worst > HOPELESS * allowed:
            return None
        go_on(pursuit, None, self.deadline, REFINEMENTS)
        return pursuit if pursuit.end in (End.CONVERGED, End.SETTLED) else None


def _unheard(_: Iterate) -> bool:
    """Nobody watches the steps of a point, and nobody stops there."""
    return False


def _straight_on(now: Start, before: Start, share: float) -> Start:
    """A start as far beyond `now` as that is beyond `before`, times `share`."""
    return Start(
        *(
            _given(one) + share * (_given(one) - _given(two))
            for one, two in (
                (now.z, before.z),
                (now.bound_multipliers, before.bound_multipliers),
                (now.multipliers, before.multipliers),
            )
        )
    )


def _given(values: Array | None) -> Array:
    assert values is not None, "a warm start has multipliers"
    return values


def _moved(path: Trajectory, changes: Mapping[str, float]) -> tuple[Array, Array]:
    """The first-order change of the variables and of the rows' multipliers (scaled); none where it is undetermined."""
    from solvers.answers.response import Response, SingularError  # here, as SciPy is loaded only where it is needed
    from solvers.answers.sensitivity import limit_shifts

    z, rows = np.zeros_like(path.z), np.zeros_like(path.row_multipliers)
    names = [c.name for c in path.program.compiled.lowered.problem.constants]
    try:
        response, shifts = Response(path), limit_shifts(path)
        for name, change in changes.items():
            index = names.index(name)
            along, pushed = response.along(index, shifts[index])
            z, rows = z + change * along, rows + change * pushed
    except SingularError:
        return np.zeros_like(z), np.zeros_like(rows)
    return z, rows


def _with_room(program: Program, start: Start) -> Compiled:
    """The problem with new room for its switches, half way to their neighbours: they move with the constants."""
    compiled, where = program.compiled, program.layout
    problem = compiled.lowered.problem
    places = start.z[where.places] * program.scale[where.places]
    parameters = list(problem.parameters)
    for k in range(1, len(places) - 1):
        own = np.flatnonzero(where.parameters == where.places[k])
        if len(own) and parameters[own[0]].name.startswith(SWITCH + " "):
            low, high = (places[k - 1] + places[k]) / 2, (places[k] + places[k + 1]) / 2
            parameters[own[0]] = replace(parameters[own[0]], lower=float(low), upper=float(high))
    lowered = replace(compiled.lowered, problem=replace(problem, parameters=tuple(parameters)))
    return replace(compiled, lowered=lowered)
