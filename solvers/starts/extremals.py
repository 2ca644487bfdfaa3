"""Several starts of one problem, and the distinct extremals that they lead to.

Two starts have led to the same extremal where values and curves agree within their errors: the value alone would take
an elastica that bends to the left for the one that bends to the right.  The distance of two curves is the mean square
of their difference over the whole range, in which an unknown counts relative to its size.

The starts are made one after the other or beside each other (`together`): what they lead to is the same, as none knows
of the others and they are compared in their order.

What does not satisfy the conditions of first order is no extremal: starts that end there are only counted.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from solvers.curve import Curve
from solvers.problem import Problem, Seek
from solvers.solution import Check, Extremal, Progress, Solution, Status, Verdict, Watch
from solvers.starts.together import IN_TURN, Lost, Task, Together
from solvers.starts.variations import variations

NAME = "other starts"

ALIKE = 1e-3
"""Least distance of curves, relative to their size, that makes two of them."""

PLACES = 401

BESIDE = "beside a saddle"

NEAR_ZERO = 1e-3
"""An unknown never counts for smaller than this share of its typical size."""

SOUND = frozenset({Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MAXIMUM, Verdict.LOCAL_MAXIMUM,
                   Verdict.STATIONARY})  # fmt: skip
REFUTED = frozenset({Verdict.NOT_A_MINIMUM, Verdict.NOT_A_MAXIMUM})
FEASIBLE = frozenset({Verdict.BEST_FOUND, Verdict.NO_OPTIMUM})
"""Verdicts on curves that need be no extremals, but have the value that they are said to have."""

LOWERED = {Verdict.GLOBAL_MINIMUM: Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MAXIMUM: Verdict.LOCAL_MAXIMUM}
"""What remains of a verdict that a better curve contradicts."""

Array = NDArray[np.float64]
Solver = Callable[[Problem, Watch | None], Solution]


def solve_from_starts(
    problem: Problem,
    watch: Watch | None,
    solve_one: Solver,
    leave_saddle: Solver,
    sizes: Mapping[str, float],
    together: Together = IN_TURN,
) -> Solution:
    """The best of what several starts lead to, with all that was found.

    `solve_one` solves from one start, `leave_saddle` likewise, but goes on from a saddle: so where saddles are all that
    was found.  `sizes` are typical ones of the unknowns.  The first start may take all the time there is: what it finds
    is found without the others too.  Raises `RuntimeError` where every start broke.
    """
    began = time.perf_counter()
    planned = variations(problem, problem.options.starts)

    def task(number: int) -> Task:
        def solved(hear: Watch) -> Solution | None:
            left = problem.options.time_limit - (time.perf_counter() - began)
            if number and left <= 0:
                return None
            share = left if number == 0 else min(left, 2 * left * together.processes / (len(planned) - number))
            options = replace(problem.options, time_limit=share, starts=1)
            return solve_one(replace(problem, start=planned[number], options=options), hear)

        return solved

    numbered = _Numbered(watch)
    outcomes = together([task(number) for number in range(len(planned))], numbered)
    made = [(v.label, found) for v, found in zip(planned, outcomes, strict=True) if isinstance(found, Solution)]
    broken = [f"{v.label}: {found.reason}" for v, found in zip(planned, outcomes, strict=True)
              if isinstance(found, Lost)]  # fmt: skip
    if not made:
        raise RuntimeError("; ".join(broken))
    best = _compared(problem, made, broken, sizes, time.perf_counter() - began)
    left = problem.options.time_limit - (time.perf_counter() - began)
    if best.verdict not in REFUTED or left <= 0:
        return best
    start = next(v for v in planned if v.label in best.extremals[0].starts)
    options = replace(problem.options, time_limit=left, starts=1)
    beside = leave_saddle(replace(problem, start=start, options=options), partial(numbered, len(planned) - 1))
    return _compared(problem, [*made, (BESIDE, beside)], broken, sizes, time.perf_counter() - began)


class _Numbered:
    """Passes signs of life on with the number of the start; meshes and iterations are counted over all starts."""

    def __init__(self, watch: Watch | None) -> None:
        self.watch = watch
        self._seen: dict[int, tuple[int, int]] = {}

    def __call__(self, number: int, progress: Progress) -> bool:
        mesh, iteration = self._seen.get(number, (0, 0))
        self._seen[number] = max(mesh, progress.mesh), max(iteration, progress.iteration)
        if self.watch is None:
            return False
        others = [seen for other, seen in self._seen.items() if other != number]
        mesh, iteration = (sum(counts) for counts in zip((progress.mesh, progress.iteration), *others, strict=True))
        return self.watch(replace(progress, start=number + 1, mesh=mesh, iteration=iteration))


def _compared(
    problem: Problem,
    made: Sequence[tuple[str, Solution]],
    broken: Sequence[str],
    sizes: Mapping[str, float],
    seconds: float,
) -> Solution:
    """The best solution, told what the others are; `broken` are the starts that ended without one."""
    curves = [(label, found) for label, found in made if found.value is not None and found.curve is not None]
    first = made[0][1]
    if not curves:
        return replace(first, times={**first.times, "starts": seconds})
    merit = _Merit(problem, len(made) + len(broken), tuple(broken))
    standing = [(label, found) for label, found in curves if merit.stands(found)]
    listed = standing or [min(curves, key=lambda one: merit.order(one[1]))]
    merit = replace(merit, lost=len(made) - len(listed))
    groups: list[list[tuple[str, Solution]]] = []
    for label, found in listed:
        group = next((g for g in groups if same(g[0][1], found, sizes, problem.options.tolerance)), None)
        if group is None:
            groups.append([(label, found)])
        else:
            group.append((label, found))
    extremals = [Extremal(min((s for _, s in g), key=merit.rank), tuple(label for label, _ in g)) for g in groups]
    extremals.sort(key=lambda extremal: merit.order(extremal.solution))
    told = [merit.told(extremal, extremals) for extremal in extremals]
    best = told[0].solution
    return replace(best, extremals=tuple(told), times={**best.times, "starts": seconds})


@dataclass(frozen=True, slots=True)
class _Merit:
    """Which of two solutions of a problem is better, and what became of its starts."""

    problem: Problem
    starts: int  # those that were tried
    broken: tuple[str, ...]  # those of them that ended by an error, with the reason
    lost: int = 0  # those of them that led nowhere

    @property
    def sign(self) -> float:
        return -1.0 if self.problem.seek is Seek.MAXIMUM else 1.0

    def rank(self, solution: Solution) -> int:
        """What its checks show comes before the value: a value that does not stand is no value."""
        if solution.verdict in SOUND:
            return 0
        if solution.verdict in REFUTED:
            return 1
        return 2 if solution.verdict in FEASIBLE else 3

    def stands(self, solution: Solution) -> bool:
        """Whether a curve is told: extremals are, and where a value is sought also what merely reaches one."""
        return self.rank(solution) < (2 if self.problem.seek is Seek.STATIONARY else 3)

    def order(self, solution: Solution) -> tuple[int, float]:
        """The sorting key, best first; among points that are only stationary, the earlier start first."""
        value = 0.0 if self.problem.seek is Seek.STATIONARY else self.sign * (solution.value or 0.0)
        return self.rank(solution), value

    def told(self, extremal: Extremal, every: Sequence[Extremal]) -> Extremal:
        """The extremal with the check that compares it with the others."""
        solution = extremal.solution
        check = self._check(extremal, every)
        verdict = solution.verdict
        if check.status is Status.FAILED and verdict is not None:
            verdict = LOWERED.get(verdict, verdict)
        return replace(extremal, solution=replace(solution, verdict=verdict, checks=(*solution.checks, check)))

    def _check(self, extremal: Extremal, every: Sequence[Extremal]) -> Check:
        starts = self.starts
        others = [other for other in every if other is not extremal]
        found = f"{starts} starts led to {len(every)} curve{'s' if len(every) > 1 else ''}"
        listed = "; ".join(self._line(other) for other in others[:5]) + ("; and more" if len(others) > 5 else "")
        sentence = f"{found}: {len(extremal.starts)} to this one{', the others to ' + listed if others else ''}."
        if self.lost:
            sentence += f" {self.lost} led nowhere."
        if self.broken:
            sentence += f" {len(self.broken)} ended by an error ({'; '.join(self.broken[:3])})."
        if self.problem.options.starts > starts:
            sentence += f" {self.problem.options.starts - starts} of those asked for were not tried."
        if self.problem.seek is Seek.STATIONARY or starts == 1:
            return Check(NAME, Status.NOT_APPLICABLE, sentence)
        own = extremal.solution
        size = max(abs(own.value or 0.0), 1e-300)
        threshold = self.problem.options.tolerance
        figure = 0.0
        for other in (o.solution for o in others if self.rank(o.solution) < 3):
            better = self.sign * ((own.value or 0.0) - (other.value or 0.0))
            better -= (own.value_error or 0.0) + (other.value_error or 0.0)
            figure = max(figure, better / size)
        if figure > threshold:
            return Check(NAME, Status.FAILED, f"Another start led to a better value. {sentence}", figure, threshold)
        return Check(NAME, Status.PASSED, sentence, figure, threshold)

    def _line(self, extremal: Extremal) -> str:
        solution, unit = extremal.solution, self.problem.value_unit
        verdict = solution.verdict.value if solution.verdict else "no verdict"
        value = f"{(solution.value or 0.0) / unit.factor:.7g}" + (f" {unit.text}" if unit.text else "")
        count = len(extremal.starts)
        return f"the value {value} ({verdict}, {count} start{'s' if count > 1 else ''})"


def same(first: Solution, second: Solution, sizes: Mapping[str, float], tolerance: float) -> bool:
    """Whether two solutions are the same extremal, to their errors."""
    assert first.value is not None and second.value is not None and first.curve is not None and second.curve is not None
    errors = sum(e if e is not None else 0.01 * abs(first.value) for e in (first.value_error, second.value_error))
    if abs(first.value - second.value) > 2 * errors + tolerance * max(abs(first.value), abs(second.value)):
        return False
    blur = 10 * max(tolerance, first.curve_error or 0.0, second.curve_error or 0.0)
    return distance(first.curve, second.curve, sizes) <= max(ALIKE, min(blur, 0.1))


def distance(first: Curve, second: Curve, sizes: Mapping[str, float]) -> float:
    """The largest root mean square difference of an unknown, relative to its size; places go by shares of the range.

    Controls are left out where there are states: they may be undetermined where they do not matter.
    """
    shares = np.linspace(0.0, 1.0, PLACES)
    ways = [curve.breaks[0] + shares * (curve.breaks[-1] - curve.breaks[0]) for curve in (first, second)]
    lengths = [float(np.ptp(curve.breaks)) for curve in (first, second)]
    shifts = np.abs(first.breaks[[0, -1]] - second.breaks[[0, -1]])
    found = [float(shifts.max()) / max(lengths)]
    names = [name for name in first.functions if not name.endswith("'") and name in second.functions]
    states = [name for name in names if f"{name}'" in first.functions]
    for name in states or names:
        one, other = first.evaluate(name, ways[0]), second.evaluate(name, ways[1])
        size = max(_size(one), _size(other), NEAR_ZERO * sizes.get(name, 0.0))
        found.append(_size(one - other) / size if size else 0.0)
    return max(found)


def _size(values: Array) -> float:
    return float(np.sqrt(np.mean(values**2)))
