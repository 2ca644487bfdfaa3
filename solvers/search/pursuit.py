"""One form of a problem pursued from its first guess, mesh after mesh, until the tolerance is met or hope is lost."""

from __future__ import annotations

from collections import Counter
from typing import Any

import numpy as np

from solvers.deadline import Deadline
from solvers.minimise.ipopt import WARM, Minimum, Outcome, Start
from solvers.problem import Problem
from solvers.search import refinement
from solvers.search.attempt import SOLVED, end_of, loose, make_program
from solvers.search.beginning import FEW_ITERATIONS, begin, begin_at, begin_from
from solvers.search.corners import at_corners
from solvers.search.effort import Minimiser
from solvers.search.record import End, Pursuit
from solvers.search.settling import estimate_errors, out_of_reach, settled, worth_of_misses
from solvers.search.widths import with_widths
from solvers.solution import Watch
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import Layout, layout
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import Mesh
from solvers.transcription.program import Program
from solvers.transcription.trajectory import Trajectory, as_start, carry, trajectory

MESHES = 24
GROWTH = 2.5
"""How much larger, in points, one mesh may be than the one before."""
AIM = 0.1
"""The local error that a new mesh is made for, relative to the tolerance."""
LEAST_BARRIER = 1e-11
"""The least barrier with which a warm start begins."""
CLOSE = 1e-2
"""The error of a mesh up to which the next one begins close to its end."""
NIMBLE: dict[str, Any] = {
    "ipopt.mu_strategy": "adaptive",
    "ipopt.mu_min": 1e-14,
    "ipopt.acceptable_tol": 1e-10,
    "ipopt.acceptable_iter": 3,
    "ipopt.max_iter": 25,
}
"""Options for a start close to its end: a barrier that adapts takes a third of the iterations (4 to 8 instead of 10 to
28 on obstacles and arcs on limits).  It has to end lower than by default, or the value stays above by what the limits
together still push; and a start close to its end is acceptable from the first by the usual measure, which must not be
enough, while rounding may keep a large program from the last digits.  What takes longer is not determined well: there
such a barrier leads astray, and is not tried again."""
WHOLE_STEPS = 20
"""Iterations of a warm start where there are no limits: its whole steps are soon through, or lead anywhere."""
NARROW = 0.1
"""Width of an interval, relative to an even mesh, below which a smaller barrier may help."""


def pursue(
    problem: Problem,
    watch: Watch | None,
    deadline: Deadline,
    *,
    meshes: int = MESHES,
    start: Trajectory | None = None,
    mesh: Mesh | None = None,
    iterations: int | None = None,
) -> Pursuit:
    """Solve one form of a problem on at most so many meshes.

    From a trajectory of a related form where one is given: on a mesh of its own where that is near its end, and then in
    a single attempt where it is also said within how many `iterations`; without a mesh as from any guess.
    """
    problem = with_widths(problem)
    compiled = compile_problem(lower(problem))
    pursuit = Pursuit(problem, compiled)
    minimiser = Minimiser(pursuit, watch, deadline)
    if start is None:
        begun = begin(pursuit, minimiser)
    elif mesh is None:
        begun = begin_at(pursuit, minimiser, start)
    else:
        begun = begin_from(pursuit, minimiser, start, mesh, iterations)
    if begun is None:
        return pursuit
    _add(pursuit, minimiser, *begun)
    _go_on(pursuit, minimiser, meshes - 1)
    return pursuit


def go_on(pursuit: Pursuit, watch: Watch | None, deadline: Deadline, meshes: int = MESHES) -> Pursuit:
    """Refine a pursuit further that was stopped after a few meshes."""
    _go_on(pursuit, Minimiser(pursuit, watch, deadline), meshes)
    return pursuit


def _go_on(pursuit: Pursuit, minimise_: Minimiser, meshes: int) -> None:
    """Refine and solve until the tolerance is met or something ends it."""
    if pursuit.blocked:
        return
    options = pursuit.problem.options
    pursuit.end = End.SETTLED
    for _ in range(meshes):
        path, found = pursuit.paths[-1], pursuit.estimates[-1]
        better = _better(pursuit)
        if better == path.program.mesh:
            pursuit.end = End.SETTLED if pursuit.value_met else End.FINEST
            return
        mesh = _limited(better, path.program.mesh, found, options.points)
        if mesh is None:
            pursuit.end = End.POINTS
            return
        if out_of_reach(pursuit, minimise_.deadline.left, MESHES - len(pursuit.steps)):
            pursuit.end = End.FAR
            return
        if minimise_.deadline.over or minimise_.deadline.left < 1.2 * pursuit.steps[-1].seconds:
            pursuit.end = End.TIME
            return
        step = _next(path, _with_corners(mesh, path, options.points), minimise_)
        if step is None:
            pursuit.blocked = pursuit.end is End.FAILED
            if pursuit.blocked and pursuit.shown and pursuit.value_met_before:
                pursuit.end = End.SETTLED  # what the meshes before have shown stays shown
            return
        _add(pursuit, minimise_, *step)
        end = settled(pursuit)
        if end is not None:
            pursuit.end = end
            return


def _better(pursuit: Pursuit) -> Mesh:
    """The mesh that follows: where local errors are small all along, a finer one, to see what is left to gain.

    Where they are small and the value's is not, it is the worst of them that have to become smaller.
    """
    path, found, aim = pursuit.paths[-1], pursuit.estimates[-1], AIM * pursuit.problem.options.tolerance
    better = refinement.refine(path, found, aim)
    if better == path.program.mesh and len(pursuit.paths) > 1 and not pursuit.value_met:
        better = refinement.refine(path, found, AIM * found.worst)
    return refinement.finer(better) if better == path.program.mesh and found.worst <= aim else better


def _with_corners(mesh: Mesh, path: Trajectory, points: int) -> Mesh:
    """The mesh with breaks at corners of tables, as far as the points reach."""
    cut = at_corners(mesh, path)
    return cut if cut.points <= points else mesh


def _add(pursuit: Pursuit, minimise_: Minimiser, program: Program, minimum: Minimum) -> None:
    """Take a solved mesh in: its trajectory, its errors, its sign of life.

    Where the minimiser was content too early for the value, it goes on.
    """
    path = trajectory(program, minimum)
    size = max(abs(path.value), abs(program.value_scale))
    if minimum.outcome is Outcome.ACCEPTABLE and worth_of_misses(path) > pursuit.problem.options.tolerance * size:
        further = minimise_(program, as_start(path), {"ipopt.acceptable_iter": 0, "ipopt.max_iter": FEW_ITERATIONS})
        if further.outcome is Outcome.SOLVED:
            minimum, path = further, trajectory(program, further)
    found = refinement.estimate(path)
    pursuit.paths.append(path)
    pursuit.estimates.append(found)
    minimise_.record(program, minimum, path.value, found.worst)
    if len(pursuit.paths) > 1:
        estimate_errors(pursuit, found)


def _next(path: Trajectory, mesh: Mesh, minimise_: Minimiser) -> tuple[Program, Minimum] | None:
    """The next mesh, started warm; cold from the same curve where that fails."""
    compiled = path.program.compiled
    where: Layout = layout(compiled, mesh)
    carried = carry(path, mesh, where)
    program = make_program(compiled, mesh, where, carried.z, path.program)
    warm = carried.onto(program)
    near = minimise_.nearby(program, warm)
    if near is not None:
        return program, near
    pursuit, first = minimise_.pursuit, gentle_barrier(mesh)
    usual: dict[str, Any] = {"ipopt.max_iter": WHOLE_STEPS if program.unlimited else FEW_ITERATIONS}
    gentle = usual | {"ipopt.mu_init": first}
    tries = [(warm, usual), (warm, gentle), (Start(warm.z), {})]
    if program.unlimited or first > NARROW * WARM["ipopt.mu_init"]:
        del tries[1]
    elif pursuit.gently:
        del tries[0]
    if _close(pursuit) and not program.unlimited:  # else all barriers are the same: there is none
        tries.insert(0, (warm, NIMBLE))
    for start, options in tries:
        afresh = start is not warm
        minimum = minimise_.patiently(program, start) if afresh else minimise_(program, start, options)
        if minimum.outcome in SOLVED:
            pursuit.gently = options is gentle
            return program, minimum
        pursuit.astray = pursuit.astray or options is NIMBLE
        end = end_of(minimum)
        if end in (End.STOPPED, End.TIME):
            break
    pursuit.end = end
    return None


def _close(pursuit: Pursuit) -> bool:
    """Whether a mesh is so good that the next one begins near its end, and nothing is loose.

    Where many curves do nearly equally well, a large barrier keeps to their middle.
    """
    good = (pursuit.steps[-1].error or 0.0) <= CLOSE
    return good and not pursuit.gently and not pursuit.astray and not loose(pursuit.compiled)


def gentle_barrier(mesh: Mesh) -> float:
    """A barrier with which a warm start keeps the curve where it was also beside limits on narrow intervals.

    At each point the barrier counts the same, but the functional counts by the point's measure: where curves come near
    to limits that do not bind, as at singular ends, the usual barrier would drive them away.
    """
    each = Counter(i.stretch for i in mesh.intervals)
    narrowest = min(i.width * each[i.stretch] for i in mesh.intervals)
    return max(float(WARM["ipopt.mu_init"]) * min(narrowest, 1.0), LEAST_BARRIER)


def _limited(mesh: Mesh, old: Mesh, found: refinement.Estimate, points: int) -> Mesh | None:
    """The mesh with at most so many more points than the old one: the worst intervals first; None beyond the limit."""
    allowed = min(int(GROWTH * old.points) + 40, points)
    if mesh.points <= allowed:
        return mesh
    if old.points >= points:
        return None
    groups: list[list[Any]] = []
    for piece in old.intervals:
        same = (i for i in mesh.intervals if i.stretch == piece.stretch)
        groups.append([i for i in same if 0 < i.start + i.width / 2 - piece.start < piece.width])
    chosen: list[list[Any]] = [[piece] for piece in old.intervals]
    total = old.points
    for k in np.argsort(-found.errors):
        extra = sum(i.scheme.degree for i in groups[k]) - old.intervals[k].scheme.degree
        if total + extra <= allowed:
            chosen[k] = groups[k]
            total += extra
    limited = Mesh(tuple(piece for group in chosen for piece in group))
    return None if limited == old else limited
