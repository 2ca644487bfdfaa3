"""One form of a problem pursued from its first guess, mesh after mesh, until the tolerance is met or hope is lost."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from enum import Enum
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.checks.convexity import convex_curves
from solvers.deadline import Deadline
from solvers.minimise.elastic import LeastViolation, least_violation
from solvers.minimise.ipopt import FLOOR, LEAST_SQUARES_MULTIPLIERS, WIDE, Iterate, Minimum, Outcome, Start, minimise
from solvers.minimise.newton import stationary_point
from solvers.minimise.undefined import undefined_places
from solvers.problem import Problem, Seek, Variation
from solvers.search import refinement
from solvers.search.corners import at_corners
from solvers.solution import Finding, MeshStep, Progress, Watch
from solvers.starts.guess import guesses
from solvers.starts.variations import variations
from solvers.transcription.collocation import Family
from solvers.transcription.functions import Compiled, compile_problem
from solvers.transcription.layout import Layout, layout
from solvers.transcription.lowering import lower, primed
from solvers.transcription.mesh import Mesh, interval, uniform
from solvers.transcription.program import Program, transcribe
from solvers.transcription.scaling import Scales, find_row_sizes, find_scales
from solvers.transcription.trajectory import Trajectory, carry, distance, related, trajectory

Array = NDArray[np.float64]

FIRST_INTERVALS = 8
FIRST_DEGREE = 4
MESHES = 24
GROWTH = 2.5
"""How much larger, in points, one mesh may be than the one before."""
CURVE_ROOM = 100.0
"""How much more than the tolerance the curve may still have moved: a switch that hardly matters moves freely."""
OUTGROWN = 30.0
"""How much larger than its first size a quantity may end before its size counts as wrong."""
MANY_STATES = 24
"""States at each node beyond which a program is wide."""
DOUBTFUL_ITERATIONS = 200
"""Iterations of further tries once one start has led to a conflict."""
FEW_ITERATIONS = 100
"""Iterations within which a solve from a related trajectory must be through: it starts near its end."""
AIM = 0.1
"""The local error that a new mesh is made for, relative to the tolerance."""
LEAST_GAIN = 0.05
"""How much of the last change of the value counts as its error at the least, however much the mesh has improved."""
TORN_MESHES = 4
"""So many meshes in a row ..."""
TORN_ERROR = 0.05
"""... with such an error at one place that hardly falls, although it is cut finer each time: the curve jumps there."""
VIOLATED = 1e-6
"""The least sum of relative violations that counts as one."""
VIOLATING_STARTS = 6
"""How many starts are tried before no curve is said to satisfy all conditions."""
VIOLATING_DOUBLINGS = 5
"""How often the mesh is made finer before."""
STANDING = 0.8
"""A violation of which a mesh four times as fine leaves this share or more is no matter of the mesh."""


class End(Enum):
    """How a pursuit ended."""

    CONVERGED = "converged"
    SETTLED = "settled"  # the value and the states stand still, controls do not sharpen any more
    POINTS = "points limit"
    TIME = "out of time"
    STOPPED = "stopped"
    INFEASIBLE = "infeasible"
    UNBOUNDED = "unbounded"
    TORN = "degenerates"  # the curve tends to one that jumps
    UNDEFINED = "undefined"
    FAILED = "no progress"


@dataclass(slots=True)
class Pursuit:
    """What is known while one form of a problem is being solved; `paths` are the meshes that were solved."""

    problem: Problem
    compiled: Compiled
    end: End = End.FAILED
    steps: list[MeshStep] = field(default_factory=list)
    paths: list[Trajectory] = field(default_factory=list)
    estimates: list[refinement.Estimate] = field(default_factory=list)
    nearest: Trajectory | None = None  # the curve that violates least, where none satisfies all conditions
    last: tuple[Program, Minimum] | None = None
    findings: tuple[Finding, ...] = ()
    value_error: float = np.inf
    curve_error: float = np.inf
    value_met_before: bool = False
    iterations: int = 0

    @property
    def solved(self) -> bool:
        """Whether any mesh was solved."""
        return bool(self.paths)

    @property
    def value_size(self) -> float:
        """The size that errors of the value are relative to."""
        path = self.paths[-1]
        return max(abs(path.value), 1e-3 * abs(path.program.value_scale))

    @property
    def value_met(self) -> bool:
        """Whether the value is as exact as was asked for, or as the minimiser can tell."""
        floor = 2 * FLOOR * abs(self.paths[-1].program.value_scale)
        return self.value_error <= self.problem.options.tolerance * self.value_size + floor

    @property
    def shown(self) -> bool:
        """Whether the stated errors allow a verdict: where the value is flat, the curve may be known less exactly."""
        return self.solved and self.value_met and self.curve_error <= float(np.sqrt(self.problem.options.tolerance))


def pursue(
    problem: Problem,
    watch: Watch | None,
    deadline: Deadline,
    *,
    meshes: int = MESHES,
    start: Trajectory | None = None,
    mesh: Mesh | None = None,
) -> Pursuit:
    """Solve one form of a problem on at most so many meshes, from a trajectory of a related form where one is given."""
    compiled = compile_problem(lower(problem))
    pursuit = Pursuit(problem, compiled)
    minimiser = _Minimiser(pursuit, watch, deadline)
    begun = _begin(pursuit, minimiser) if start is None else _begin_from(pursuit, minimiser, start, mesh)
    if begun is None:
        return pursuit
    _add(pursuit, minimiser, *begun)
    _go_on(pursuit, minimiser, meshes - 1)
    return pursuit


def go_on(pursuit: Pursuit, watch: Watch | None, deadline: Deadline, meshes: int = MESHES) -> Pursuit:
    """Refine a pursuit further that was stopped after a few meshes."""
    _go_on(pursuit, _Minimiser(pursuit, watch, deadline), meshes)
    return pursuit


def _go_on(pursuit: Pursuit, minimise_: _Minimiser, meshes: int) -> None:
    """Refine and solve until the tolerance is met or something ends it."""
    options = pursuit.problem.options
    pursuit.end = End.SETTLED
    for _ in range(meshes):
        path, found = pursuit.paths[-1], pursuit.estimates[-1]
        better = refinement.refine(path, found, AIM * options.tolerance)
        if better == path.program.mesh:
            better = refinement.finer(better)
        mesh = _limited(better, path.program.mesh, found, options.points)
        if mesh is None:
            pursuit.end = End.POINTS
            return
        if minimise_.deadline.over or minimise_.deadline.left < 1.2 * pursuit.steps[-1].seconds:
            pursuit.end = End.TIME
            return
        step = _next(path, _with_corners(mesh, path, options.points), minimise_)
        if step is None:
            return
        _add(pursuit, minimise_, *step)
        end = _settled(pursuit)
        if end is not None:
            pursuit.end = end
            return


def _with_corners(mesh: Mesh, path: Trajectory, points: int) -> Mesh:
    """The mesh with breaks at corners of tables, as far as the points reach."""
    cut = at_corners(mesh, path)
    return cut if cut.points <= points else mesh


def _add(pursuit: Pursuit, minimise_: _Minimiser, program: Program, minimum: Minimum) -> None:
    """Take a solved mesh in: its trajectory, its errors, its sign of life."""
    path = trajectory(program, minimum)
    found = refinement.estimate(path)
    pursuit.paths.append(path)
    pursuit.estimates.append(found)
    minimise_.record(program, minimum, path.value, found.worst)
    if len(pursuit.paths) > 1:
        _estimate_errors(pursuit, found)


class _Minimiser:
    """Minimises programs, passes signs of life on and keeps count."""

    def __init__(self, pursuit: Pursuit, watch: Watch | None, deadline: Deadline) -> None:
        self.pursuit, self.watch, self.deadline = pursuit, watch, deadline
        self.stopped = False

    def __call__(self, program: Program, start: Start, options: dict[str, Any] | None = None) -> Minimum:
        if self.pursuit.problem.seek is Seek.STATIONARY:
            minimum = stationary_point(program, start, self._hear(program))
            self.pursuit.last = (program, minimum)
            if minimum.outcome is not Outcome.FAILED:
                return minimum
        if program.compiled.point.states > MANY_STATES:
            options = WIDE | (options or {})
        minimum = minimise(program, start, deadline=self.deadline, watch=self._hear(program), options=options)
        self.pursuit.last = (program, minimum)
        return minimum

    def relax(self, program: Program, z: Array) -> LeastViolation:
        """The curve that violates the conditions least."""
        return least_violation(program, z, deadline=self.deadline, watch=self._hear(program))

    def _hear(self, program: Program) -> Callable[[Iterate], bool]:
        mesh = program.mesh
        count = len(self.pursuit.steps) + 1

        def hear(iterate: Iterate) -> bool:
            self.pursuit.iterations += 1
            if self.watch is None:
                return False
            self.stopped = self.stopped or self.watch(
                Progress(
                    "iteration",
                    count,
                    self.pursuit.iterations,
                    len(mesh.intervals),
                    mesh.points,
                    iterate.value * program.value_scale,
                    iterate.infeasibility,
                )
            )
            return self.stopped

        return hear

    def record(self, program: Program, minimum: Minimum, value: float, error: float) -> None:
        mesh = program.mesh
        low, high = mesh.degrees()
        self.pursuit.steps.append(
            MeshStep(
                len(mesh.intervals),
                mesh.points,
                low,
                high,
                value,
                error,
                minimum.iterations,
                minimum.seconds + minimum.set_up,
            )
        )
        if self.watch is not None:
            breaks = self.pursuit.paths[-1].breaks
            self.stopped = self.stopped or self.watch(
                Progress(
                    "mesh",
                    len(self.pursuit.steps),
                    self.pursuit.iterations,
                    len(mesh.intervals),
                    mesh.points,
                    value,
                    None,
                    error,
                    tuple(float(b) for b in breaks),
                )
            )


def first_mesh(stretches: int, count: int = FIRST_INTERVALS) -> Mesh:
    """A coarse mesh; its outermost intervals have Gauss points: no end is touched, none is favoured."""
    each = count if stretches == 1 else max(count // stretches, 2 if stretches <= count else 1)
    mesh = uniform(stretches, each, FIRST_DEGREE)
    first, *inner, last = mesh.intervals
    return Mesh((
        interval(first.stretch, 0.0, first.width, Family.GAUSS, FIRST_DEGREE),
        *inner,
        interval(last.stretch, last.start, 1.0, Family.GAUSS, FIRST_DEGREE),
    ))  # fmt: skip


SOLVED = (Outcome.SOLVED, Outcome.ACCEPTABLE)

ATTEMPTS: tuple[dict[str, Any], ...] = (
    {},
    {"ipopt.mu_strategy": "monotone", "ipopt.mu_init": 0.1} | LEAST_SQUARES_MULTIPLIERS,
    {"ipopt.mu_strategy": "monotone", "ipopt.mu_init": 1e-3, "ipopt.nlp_scaling_method": "gradient-based"},
)
"""Settings of the minimiser that are tried in turn on the first mesh."""


def _begin(pursuit: Pursuit, minimise_: _Minimiser) -> tuple[Program, Minimum] | None:
    """The first mesh that is solved, from the first guess and settings that lead somewhere."""
    compiled = pursuit.compiled
    stretches = len(pursuit.problem.places) - 1
    ends: list[End] = []
    conflict = False
    for attempt, options in enumerate(ATTEMPTS):
        mesh = first_mesh(stretches, FIRST_INTERVALS * (1 if attempt < 2 else 2))
        where = layout(compiled, mesh)
        for guess in guesses(compiled, mesh, where)[: 2 if attempt else 3]:
            program = make_program(compiled, mesh, where, guess.z)
            doubtful = {"ipopt.max_iter": DOUBTFUL_ITERATIONS} if End.INFEASIBLE in ends else {}
            minimum = minimise_(program, Start(guess.z / program.scale), options | doubtful)
            if minimum.outcome is Outcome.FAILED and _outgrown(minimum):
                z = minimum.z * program.scale
                program = make_program(compiled, mesh, where, z)
                minimum = minimise_(program, Start(z / program.scale), options | doubtful)
            if minimum.outcome in SOLVED:
                return program, minimum
            ends.append(_end_of(minimum))
            if ends[-1] in (End.STOPPED, End.TIME):
                pursuit.end = ends[-1]
                return None
        if attempt == 0 and End.INFEASIBLE in ends:  # to find out is quicker than to fail with other settings
            begun = _after_least_violation(pursuit, minimise_)
            conflict = pursuit.end is End.INFEASIBLE
            if begun is not None or pursuit.end in (End.STOPPED, End.TIME):
                return begun
            if conflict and convex_curves(pursuit.problem):
                return None
    if set(ends) == {End.UNDEFINED}:
        mesh = first_mesh(stretches)
        where = layout(compiled, mesh)
        z = guesses(compiled, mesh, where)[0].z
        pursuit.end, pursuit.findings = End.UNDEFINED, undefined_places(compiled, where, z)
        return None
    if End.UNBOUNDED in ends:
        pursuit.end = End.UNBOUNDED
        return None
    if conflict:
        pursuit.end = End.INFEASIBLE
        return None
    return _after_least_violation(pursuit, minimise_)


def _begin_from(
    pursuit: Pursuit, minimise_: _Minimiser, start: Trajectory, mesh: Mesh | None
) -> tuple[Program, Minimum] | None:
    """The first mesh, from a trajectory of a related form of the problem."""
    mesh = mesh or first_mesh(len(pursuit.problem.places) - 1)
    where = layout(pursuit.compiled, mesh)
    z = related(start, pursuit.compiled, mesh, where)
    program = make_program(pursuit.compiled, mesh, where, z)
    z = z / program.scale
    settings: tuple[dict[str, Any], ...] = ({"ipopt.mu_strategy": "monotone", "ipopt.mu_init": 1e-3}, {})
    for options in settings:
        minimum = minimise_(program, Start(z), options | {"ipopt.max_iter": FEW_ITERATIONS})
        if minimum.outcome in SOLVED:
            return program, minimum
        pursuit.end = _end_of(minimum)
        if pursuit.end in (End.STOPPED, End.TIME):
            break
    return None


def _after_least_violation(pursuit: Pursuit, minimise_: _Minimiser) -> tuple[Program, Minimum] | None:
    """Find out whether any curve satisfies the conditions; start again from one that does."""
    program, least = _least_violation(pursuit, minimise_)
    if least.minimum.outcome not in SOLVED:
        pursuit.end = _end_of(least.minimum)
        return None
    if least.total > VIOLATED:
        pursuit.end, pursuit.findings = End.INFEASIBLE, least.findings
        pursuit.nearest = _of_least_violation(program, least)
        return None
    minimum = minimise_(program, Start(least.z), ATTEMPTS[1])
    if minimum.outcome in SOLVED:
        return program, minimum
    pursuit.end = End.UNBOUNDED if _runs_away(program, minimum) else _end_of(minimum)
    return None


def _least_violation(pursuit: Pursuit, minimise_: _Minimiser) -> tuple[Program, LeastViolation]:
    """The curve that violates least, among those that several starts lead to, unless one start suffices: where all
    conditions are convex there is but one least violation.  Then on finer meshes, for as long as that helps."""
    compiled, stretches = pursuit.compiled, len(pursuit.problem.places) - 1
    starts = [Variation()] if convex_curves(pursuit.problem) else variations(pursuit.problem, VIOLATING_STARTS)
    mesh = first_mesh(stretches)
    where = layout(compiled, mesh)
    best: tuple[Program, LeastViolation] | None = None
    for start in starts:
        varied = replace(compiled.lowered, problem=replace(pursuit.problem, start=start))
        z = guesses(replace(compiled, lowered=varied), mesh, where)[0].z
        program = make_program(compiled, mesh, where, z)
        found = program, minimise_.relax(program, z / program.scale)
        solved = found[1].minimum.outcome in SOLVED
        if best is None or (solved and not (best[1].minimum.outcome in SOLVED and found[1].total >= best[1].total)):
            best = found
        if best[1].total <= VIOLATED or _end_of(found[1].minimum) in (End.STOPPED, End.TIME):
            break
    assert best is not None
    totals = [best[1].total]
    for doubling in range(1, VIOLATING_DOUBLINGS + 1):
        program, least = best
        standing = len(totals) > 2 and totals[-1] > STANDING * totals[-3]
        solved = least.minimum.outcome in SOLVED
        if not solved or least.total <= VIOLATED or standing or minimise_.deadline.over:
            break
        mesh = first_mesh(stretches, FIRST_INTERVALS * 2**doubling)
        where = layout(compiled, mesh)
        z = carry(_of_least_violation(program, least), mesh, where).z
        finer = make_program(compiled, mesh, where, z, program.scales)
        again = minimise_.relax(finer, z / finer.scale)
        if again.minimum.outcome not in SOLVED:
            break
        best = finer, again
        totals.append(again.total)
    return best


def _of_least_violation(program: Program, least: LeastViolation) -> Trajectory:
    """The curve itself; it has no multipliers."""
    return trajectory(program, replace(least.minimum, z=least.z, multipliers=np.zeros(program.rows.count),
                                       bound_multipliers=np.zeros(len(least.z))))  # fmt: skip


def _outgrown(minimum: Minimum) -> bool:
    """Whether quantities are so much larger than the first guess let expect that rounding stopped the minimiser."""
    reached = max(abs(minimum.value), float(np.abs(minimum.z).max(initial=0.0)))
    return bool(OUTGROWN < reached < np.inf)


def _runs_away(program: Program, minimum: Minimum) -> bool:
    """Whether the value has grown beyond all sizes of the problem."""
    return not np.isfinite(minimum.value) or minimum.value < -1e6


def make_program(compiled: Compiled, mesh: Mesh, where: Layout, z: Array, before: Scales | None = None) -> Program:
    """A program whose scales come from values (SI) on its mesh, and do not fall far below those of the mesh before."""
    scales = find_scales(compiled, where, z, before)
    return transcribe(compiled, mesh, where, scales, find_row_sizes(compiled, where, scales, z))


def _end_of(minimum: Minimum) -> End:
    return {
        Outcome.INFEASIBLE: End.INFEASIBLE,
        Outcome.UNBOUNDED: End.UNBOUNDED,
        Outcome.UNDEFINED: End.UNDEFINED,
        Outcome.TIME: End.TIME,
        Outcome.STOPPED: End.STOPPED,
    }.get(minimum.outcome, End.FAILED)


def _next(path: Trajectory, mesh: Mesh, minimise_: _Minimiser) -> tuple[Program, Minimum] | None:
    """The next mesh, started warm; cold from the same curve where that fails."""
    compiled = path.program.compiled
    where: Layout = layout(compiled, mesh)
    carried = carry(path, mesh, where)
    program = make_program(compiled, mesh, where, carried.z, path.program.scales)
    warm = carried.onto(program)
    for start, options in ((warm, {"ipopt.max_iter": FEW_ITERATIONS}), (Start(warm.z), {})):
        minimum = minimise_(program, start, options)
        if minimum.outcome in SOLVED:
            return program, minimum
        end = _end_of(minimum)
        if end in (End.STOPPED, End.TIME):
            break
    minimise_.pursuit.end = end
    return None


def _estimate_errors(pursuit: Pursuit, found: refinement.Estimate) -> None:
    """Errors of value and curve from the last two meshes: their difference, and how much the mesh has improved since.

    The difference alone is the error of the mesh before; local errors that fell by a factor f let the value's error
    fall at least by f.
    """
    now, before = pursuit.paths[-1], pursuit.paths[-2]
    last = pursuit.steps[-2].error or 0.0
    gain = float(np.clip(found.worst / last, LEAST_GAIN, 1.0)) if last > 0 else 1.0
    size = max(abs(now.value), abs(now.program.value_scale))
    change = abs(now.value - before.value)
    pursuit.value_error = 2 * gain * change + size * found.worst**2 + FLOOR * size
    pursuit.curve_error = gain * distance(now, before) + found.worst


def _settled(pursuit: Pursuit) -> End | None:
    """Whether to stop refining."""
    tolerance = pursuit.problem.options.tolerance
    errors = [step.error or 0.0 for step in pursuit.steps]
    value_met = pursuit.value_met
    if value_met and errors[-1] <= tolerance and pursuit.curve_error <= tolerance:
        return End.CONVERGED
    if len(errors) > TORN_MESHES and min(errors[-TORN_MESHES:]) > max(TORN_ERROR, 0.5 * errors[-TORN_MESHES - 1]):
        pursuit.findings = _jump(pursuit)
        if pursuit.findings:
            return End.TORN
    stuck = len(errors) > 6 and min(errors[-6:]) > 0.3 * errors[-7]
    slow = len(errors) > 2 and min(errors[-2:]) > 0.5 * errors[-3] and pursuit.curve_error <= CURVE_ROOM * tolerance
    if value_met and (stuck or (slow and pursuit.value_met_before)):
        return End.SETTLED
    pursuit.value_met_before = value_met
    return None


def _jump(pursuit: Pursuit) -> tuple[Finding, ...]:
    """Which state jumps where: over an ever narrower interval at one place on each of the last meshes."""
    edges = []
    for path, found in zip(pursuit.paths[-TORN_MESHES:], pursuit.estimates[-TORN_MESHES:], strict=True):
        worst = int(np.argmax(found.errors))
        edges.append(path.breaks[worst : worst + 2])
    if not all(after[0] >= before[0] - 1e-12 and after[1] <= before[1] + 1e-12 for before, after in pairwise(edges)):
        return ()
    inside = slice(*path.program.layout.first[worst : worst + 2])
    rise = np.ptp(np.vstack([path.nodes[worst : worst + 2], path.states[inside]]), axis=0)
    largest = int(np.argmax(rise / np.maximum(np.abs(path.states).max(axis=0), 1e-300)))
    name = primed(pursuit.compiled.lowered.states[largest])
    return (Finding(name, "", None, float(edges[-1].mean()), "jumps"),)


def _limited(mesh: Mesh, old: Mesh, found: refinement.Estimate, points: int) -> Mesh | None:
    """The mesh with at most so many more points than the old one: the worst intervals first; None beyond the limit."""
    allowed = min(int(GROWTH * old.points) + 40, points)
    if mesh.points <= allowed:
        return mesh
    if old.points >= points:
        return None
    groups: list[list[Any]] = []
    for piece in old.intervals:
        end = piece.start + piece.width + 1e-14
        same = (i for i in mesh.intervals if i.stretch == piece.stretch)
        groups.append([i for i in same if piece.start - 1e-15 <= i.start and i.start + i.width <= end])
    chosen: list[list[Any]] = [[piece] for piece in old.intervals]
    total = old.points
    for k in np.argsort(-found.errors):
        extra = sum(i.scheme.degree for i in groups[k]) - old.intervals[k].scheme.degree
        if total + extra <= allowed:
            chosen[k] = groups[k]
            total += extra
    limited = Mesh(tuple(piece for group in chosen for piece in group))
    return None if limited == old else limited
