"""The same problem for many values of one or two constants, each solved from its solved neighbour.

The form, the mesh and the compiled program stay those of the neighbour; only the constants and the limits change, and
the start is continued from the last two neighbours.  Every point gets all its checks.  Where the mesh is no longer fine
enough it is refined from there; where the minimiser or the checks say that the neighbour's form does not fit, the
problem is solved from the start.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from itertools import product

import numpy as np
from numpy.typing import NDArray

from solvers.checks import curvature, limits, lower_bound, motion
from solvers.checks import refinement as refinement_check
from solvers.deadline import Deadline
from solvers.forms.gauge import Gauged, in_parametric_form
from solvers.minimise.ipopt import CLOSE, FLOOR, Minimum, Start, minimise
from solvers.minimise.newton import stationary_point
from solvers.problem import Problem, Seek
from solvers.search import refinement
from solvers.search.attempt import SOLVED
from solvers.search.pursuit import go_on
from solvers.search.record import End, Pursuit
from solvers.search.structure import SWITCH
from solvers.solution import Check, MeshStep, Progress, Solution, Status, SweepPoint, Verdict, Watch
from solvers.transcription.functions import Compiled, with_constants
from solvers.transcription.numbers import Numbers
from solvers.transcription.program import Program, restated
from solvers.transcription.trajectory import Trajectory, trajectory

Array = NDArray[np.float64]
Index = tuple[int, ...]

CURVES = 7
"""Points whose curves are kept: so many lines can be told apart in one figure."""
CLOSELY = 8
"""Every so-maniest point is looked at closely: all its checks are made.

Between them `ALWAYS` are made, and what passed by far at the neighbour is taken over on the same mesh: the figures
change smoothly along a branch.  The second order is taken over only where the minimiser's matrix says so too: at the
end of a minimisation without a correction it has the inertia of a minimum (Waechter, Biegler 2006, section 3.1; from
memory), which along a branch changes only where the matrix becomes singular.  Where a closer look shows a change, the
points before it are looked at again.
"""
ALWAYS = {motion.NAME, limits.NAME, refinement_check.NAME, lower_bound.NAME}
BY_FAR = 0.1
"""Figures below this share of their threshold have passed by far."""
SAFETY = 2.0
"""How much larger errors may be than what they were where the mesh was last compared with another one."""
HOPELESS = 100.0
"""Local errors so many times those allowed: what switches where has changed, and a finer mesh would not help."""
REFINEMENTS = 4
"""Meshes that are tried from a neighbour before the problem is solved from the start."""

WEAK = (None, Verdict.NOT_VERIFIED, Verdict.BEST_FOUND, Verdict.NOT_A_MINIMUM, Verdict.NOT_A_MAXIMUM)
"""Verdicts after which a point is given a solve of its own."""


@dataclass(frozen=True, slots=True)
class Found:
    """The pursuit of the form in which a problem was solved; `gauged` says how where that is parametric."""

    pursuit: Pursuit
    gauged: Gauged | None


@dataclass(frozen=True, slots=True)
class Tools:
    """What a sweep needs of a single solve: to solve a problem from the start, and to judge what was found."""

    alone: Callable[[Problem], Found]
    judge: Callable[[Problem, Found, bool, Mapping[str, Check]], Solution]
    """With the curve where it is True, and with the checks that need not be made."""
    fits: Callable[[Problem, Found], bool]  # whether a point's form says the same as its problem


def sweep(
    problem: Problem, base: Found, tools: Tools, watch: Watch | None, deadline: Deadline
) -> tuple[SweepPoint, ...]:
    """All points, row by row (the values of the last constant run fastest); `base` is for the constants as given."""
    swept = _Sweep(problem, base, tools, deadline)
    points: dict[Index, SweepPoint] = {}
    for done, index in enumerate(swept.order(), start=1):
        points[index] = swept.point(index)
        points |= dict(swept.reconsidered(index))
        if watch is not None:
            sign = Progress("point", 0, 0, 0, 0, points[index].value, point=(done, len(swept.indices)))
            swept.stopped = watch(sign) or swept.stopped
    return tuple(points[index] for index in swept.indices)


@dataclass(frozen=True, slots=True)
class _Measured:
    """The errors of a mesh where it was last compared with another one."""

    numbers: Numbers
    worst: float
    value_error: float  # beyond what `worst` and the minimiser explain, relative
    curve_error: float


@dataclass(frozen=True, slots=True)
class _Step:
    """A point found from a neighbour: on the `same` mesh or not, the last matrix with a minimum's inertia or not."""

    found: Found
    neighbour: Index
    same: bool
    convex: bool


@dataclass
class _Sweep:
    problem: Problem
    last: Found
    tools: Tools
    deadline: Deadline
    stopped: bool = False
    found: dict[Index, tuple[Array, Found]] = field(default_factory=dict)
    solutions: dict[Index, Solution] = field(default_factory=dict)
    glanced: set[Index] = field(default_factory=set)  # points with checks that were taken over
    measured: list[_Measured] = field(default_factory=list)

    @cached_property
    def indices(self) -> list[Index]:
        """All points, row by row."""
        return list(product(*(range(len(sweep.values)) for sweep in self.problem.sweeps)))

    def at(self, index: Index) -> Array:
        """The values of the swept constants."""
        return np.array([sweep.values[k] for sweep, k in zip(self.problem.sweeps, index, strict=True)])

    @property
    def given(self) -> Array:
        """Their values in the problem as it stands."""
        values = {c.name: c.value for c in self.problem.constants}
        return np.array([values[sweep.constant] for sweep in self.problem.sweeps])

    @cached_property
    def start(self) -> Index:
        """The point next to the problem as it stands."""
        return tuple(
            int(np.argmin(np.abs(np.array(sweep.values) - value)))
            for sweep, value in zip(self.problem.sweeps, self.given, strict=True)
        )

    def order(self) -> Iterator[Index]:
        """Outwards from the start, so that every other point has a neighbour; what is far behind is forgotten."""
        for index in sorted(self.indices, key=self.away):
            for old in [other for other in self.found if self.away(other) < self.away(index) - CLOSELY - 1]:
                del self.found[old], self.solutions[old]
            yield index

    def away(self, index: Index) -> int:
        """How many points lie between a point and the start."""
        return sum(abs(k - s) for k, s in zip(index, self.start, strict=True))

    @cached_property
    def kept(self) -> set[Index]:
        """The points whose curves are kept."""
        shape = [len(sweep.values) for sweep in self.problem.sweeps]
        most = int(CURVES ** (1 / len(shape)))
        return set(product(*(np.unique(np.linspace(0, n - 1, min(n, most)).round().astype(int)).tolist()
                             for n in shape)))  # fmt: skip

    def neighbours(self, index: Index) -> Iterator[tuple[Index, Index]]:
        """The points next to one and behind that, on the way to the start."""
        for axis in reversed(range(len(index))):
            step = int(np.sign(self.start[axis] - index[axis]))
            if step:
                near, far = (tuple(k + (axis == a) * step * n for a, k in enumerate(index)) for n in (1, 2))
                yield near, far

    def point(self, index: Index) -> SweepPoint:
        """Solve one point."""
        at = self.at(index)
        if self.stopped or self.deadline.over:
            reason = "The run was stopped" if self.stopped else "The time limit was reached"
            return SweepPoint(tuple(at), note=f"{reason} before this point.")
        problem = self._stated(at)
        found, solution, drawn = None, Solution(None), index in self.kept
        if (step := self._from_neighbour(index, at, problem)) is not None:
            known = self._known(index, step)
            self.glanced |= {index} if known else set()
            found, solution = step.found, self.tools.judge(problem, step.found, drawn, known)
        if found is None or solution.verdict in WEAK:
            alone = self.tools.alone(problem)
            judged = self.tools.judge(problem, alone, drawn, {})
            if found is None or _rank(judged) < _rank(solution):
                found, solution = alone, judged
        self.last = found
        if found.pursuit.solved:
            self.found[index], self.solutions[index] = (at, found), solution
        return _told(at, solution)

    def _stated(self, at: Array) -> Problem:
        """The problem of one point."""
        values = self._values(at)
        constants = tuple(replace(c, value=values.get(c.name, c.value)) for c in self.problem.constants)
        return replace(self.problem, constants=constants, sweeps=())

    def _values(self, at: Array) -> dict[str, float]:
        return dict(zip((sweep.constant for sweep in self.problem.sweeps), at.tolist(), strict=True))

    def _known(self, index: Index, step: _Step) -> dict[str, Check]:
        """The checks that are taken over from the neighbour; none where the point is looked at closely."""
        before = self.solutions.get(step.neighbour)
        if before is None or not step.same or self.away(index) % CLOSELY == 0 or index in self.kept:
            return {}
        return {
            check.name: check
            for check in before.checks
            if check.name not in ALWAYS and _by_far(check) and (check.name != curvature.NAME or step.convex)
        }

    def reconsidered(self, index: Index) -> Iterator[tuple[Index, SweepPoint]]:
        """The points before one that was looked at closely and is no longer what they were said to be."""
        near = next((n for n, _ in self.neighbours(index) if n in self.solutions), None)
        own = self.solutions.get(index)
        if index in self.glanced or near is None or (own is not None and own.verdict is self.solutions[near].verdict):
            return
        for other in [other for other in self.glanced if other in self.found]:
            at, found = self.found[other]
            solution = self.tools.judge(self._stated(at), found, other in self.kept, {})
            self.glanced.discard(other)
            self.solutions[other] = solution
            yield other, _told(at, solution)

    def _from_neighbour(self, index: Index, at: Array, problem: Problem) -> _Step | None:
        """The solution in the form and on the mesh of a neighbour; None where that leads nowhere."""
        near, far = next(((n, f) for n, f in self.neighbours(index) if n in self.found), ((), ()))
        if not near:
            place, neighbour = self.given, self.last
            if index != self.start or not neighbour.pursuit.solved:
                return None
        else:
            place, neighbour = self.found[near]
        gauged = _gauged(problem, neighbour)
        if neighbour.gauged is not None and gauged is None:
            return None
        path = neighbour.pursuit.paths[-1]
        measured = self._measured(neighbour.pursuit)
        start = _start(path, place, at, self.found.get(far))
        compiled = with_constants(_with_room(path.program, start), self._values(at))
        program = restated(path.program, compiled)
        if problem.seek is Seek.STATIONARY:
            minimum = stationary_point(program, start, lambda iterate: False)
        else:
            minimum = minimise(program, start, deadline=self.deadline, options=CLOSE)
        if minimum.outcome not in SOLVED:
            return None
        pursuit = self._pursuit(neighbour.pursuit, trajectory(program, minimum), minimum, measured)
        if pursuit is None or not self.tools.fits(problem, Found(pursuit, gauged)):
            return None
        return _Step(Found(pursuit, gauged), near, len(pursuit.paths) == 1, minimum.convex)

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


def _gauged(problem: Problem, neighbour: Found) -> Gauged | None:
    """The parametric form of a point in the terms of its neighbour's; None where it is another one."""
    if neighbour.gauged is None:
        return None
    form = neighbour.gauged.problem
    if neighbour.gauged.squared:  # ends at rest depend on the values of constants
        own = in_parametric_form(problem, dict, True)
        if own is None or len(own.problem.endpoints) != len(form.endpoints):
            return None
    return Gauged(problem, replace(form, constants=problem.constants), neighbour.gauged.squared)


def _start(path: Trajectory, place: Array, at: Array, behind: tuple[Array, Found] | None) -> Start:
    """The neighbour's solution; where there is one behind it on the same program, continued in a straight line."""
    now = _scaled(path)
    if behind is None or not behind[1].pursuit.paths[-1].program.numbers.alike(path.program.numbers):
        return Start(*now)
    way = place - behind[0]
    share = float((at - place) @ way / (way @ way))
    return Start(
        *(one + share * (one - two) for one, two in zip(now, _scaled(behind[1].pursuit.paths[-1]), strict=True))
    )


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


def _scaled(path: Trajectory) -> tuple[Array, Array, Array]:
    """The variables, the multipliers of bounds and of rows, as the program scales them."""
    program, size = path.program, abs(path.program.value_scale)
    free = program.lower < program.upper
    bounds = np.where(free, path.bound_multipliers * program.scale / size, 0.0)
    return path.z / program.scale, bounds, path.row_multipliers * program.row_scale / size


_ORDER: Sequence[Verdict | None] = (
    Verdict.GLOBAL_MINIMUM, Verdict.GLOBAL_MAXIMUM, Verdict.LOCAL_MINIMUM, Verdict.LOCAL_MAXIMUM, Verdict.STATIONARY,
    Verdict.NOT_A_MINIMUM, Verdict.NOT_A_MAXIMUM, Verdict.BEST_FOUND, Verdict.NOT_VERIFIED, Verdict.NO_OPTIMUM,
    Verdict.INFEASIBLE, None,
)  # fmt: skip


def _by_far(check: Check) -> bool:
    """Whether a check does not apply, or passed so well that it passes at the next point too."""
    if check.status is not Status.PASSED or check.figure is None or check.threshold is None:
        return check.status is not Status.FAILED
    return check.figure <= BY_FAR * check.threshold


def _rank(solution: Solution) -> int:
    return _ORDER.index(solution.verdict)


def _told(at: Array, solution: Solution) -> SweepPoint:
    failed = tuple(check.name for check in solution.checks if check.status is Status.FAILED)
    note = solution.diagnosis.sentence if solution.diagnosis is not None else ""
    return SweepPoint(tuple(at.tolist()), solution.verdict, solution.value, solution.value_error, solution.parameters,
                      failed, note, solution.curve)  # fmt: skip
