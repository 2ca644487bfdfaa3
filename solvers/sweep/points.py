"""All points of a sweep, outwards from the problem as it stands, each from its solved neighbour.

The form, the mesh and the compiled program stay those of the neighbour; only the constants and the limits change.
Where the limits that are active change, the structure is repaired near the neighbour; where the step is too long for
that, it is made in halves; where all of it or the checks say that the neighbour's form does not fit, the problem is
solved from the start.  Points that stay without a verdict are looked at once more from a sound one beyond them.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.forms.choice import Found
from solvers.problem import Problem
from solvers.solution import Progress, Solution, Status, SweepPoint, Verdict, Watch
from solvers.sweep.grid import Grid, Index
from solvers.sweep.stepping import Origin, Stepper
from solvers.sweep.taken_over import CLOSELY, taken_over
from solvers.sweep.tools import Tools

Array = NDArray[np.float64]

ORDER = (
    Verdict.GLOBAL_MINIMUM, Verdict.GLOBAL_MAXIMUM, Verdict.LOCAL_MINIMUM, Verdict.LOCAL_MAXIMUM, Verdict.STATIONARY,
    Verdict.NO_OPTIMUM, Verdict.NOT_A_MINIMUM, Verdict.NOT_A_MAXIMUM, Verdict.BEST_FOUND, Verdict.NOT_VERIFIED,
    Verdict.INFEASIBLE, None,
)  # fmt: skip
"""All verdicts, those that say more first."""

WEAK = (None, Verdict.NOT_VERIFIED, Verdict.BEST_FOUND, Verdict.NOT_A_MINIMUM, Verdict.NOT_A_MAXIMUM)
"""Verdicts after which a point is looked for from elsewhere, and at last given a solve of its own."""

REPAIR, LEAST = 5.0, 1.0
"""How many times the work of the problem as it stands a repair may take, and seconds at the least: a solve from nothing
comes next.  Of a problem that takes little, how little tells nothing."""
FAIR = 3.0
"""How many times its even share of the time left a point may take to be repaired, and to be solved from nothing."""


def sweep(
    problem: Problem, base: Found, tools: Tools, watch: Watch | None, deadline: Deadline
) -> tuple[SweepPoint, ...]:
    """All points, row by row (the values of the last constant run fastest); `base` is for the constants as given."""
    swept = _Sweep(problem, base, tools, deadline)
    points: dict[Index, SweepPoint] = {}
    indices = swept.grid.indices
    for done, index in enumerate(swept.grid.outwards(), start=1):
        points[index] = swept.point(index)
        points |= dict(swept.reconsidered(index))
        points |= dict(swept.from_beyond(index))
        if watch is not None:
            sign = Progress("point", 0, 0, 0, 0, points[index].value, point=(done, len(indices)))
            swept.stopped = watch(sign) or swept.stopped
    return tuple(points[index] for index in indices)


@dataclass(frozen=True, slots=True)
class _Point:
    """What was found at a point and what it was called; `glanced` at where checks were taken over.

    `straight`: the first way led to it.
    """

    origin: Origin
    solution: Solution
    glanced: bool
    straight: bool = True

    @property
    def weak(self) -> bool:
        return self.solution.verdict in WEAK


class _Sweep:
    def __init__(self, problem: Problem, base: Found, tools: Tools, deadline: Deadline) -> None:
        self.problem, self.base, self.tools, self.deadline = problem, base, tools, deadline
        self.grid = Grid(problem)
        self.stepper = Stepper(problem, self.grid.names, tools, deadline)
        self.points: dict[Index, _Point] = {}
        self.stopped = False
        self.done = 0

    def point(self, index: Index) -> SweepPoint:
        """Solve one point."""
        for old in [old for old in self.points if self.grid.away(old) < self.grid.away(index) - CLOSELY - 1]:
            del self.points[old]  # no other point begins there
        at = self.grid.at(index)
        if self.stopped or self.deadline.over:
            reason = "The run was stopped" if self.stopped else "The time limit was reached"
            return SweepPoint(tuple(at.tolist()), note=f"{reason} before this point.")
        best = self._best(index, at)
        self.done += 1
        if best.origin.found.pursuit.solved:
            self.points[index] = best
        return _told(at, best.solution)

    def _best(self, index: Index, at: Array) -> _Point:
        """The first way to a point whose result stands, else the one whose verdict says most."""
        tried: list[_Point] = []
        for way in self._ways(index, at):
            tried.append(way)
            if not way.weak:
                break
        best = min(tried, key=lambda point: ORDER.index(point.solution.verdict))
        return replace(best, straight=len(tried) == 1)

    def _ways(self, index: Index, at: Array) -> Iterator[_Point]:
        """From a neighbour, from the last sound point, from nothing."""
        drawn = index in self.grid.kept
        closely = self.grid.away(index) % CLOSELY == 0 or drawn
        for near, far, before in self._origins(index):
            room = self._room().within(max(REPAIR * self.base.work, LEAST))
            for step in self.stepper.steps(at, near, far, room):
                known = {}
                if before is not None and step.same and not closely:
                    held = bool(step.found.pursuit.compiled.lowered.problem.held)
                    known = taken_over(before, step.convex, held)
                solution = self.tools.judge(self.stepper.stated(at), step.found, drawn, known)
                yield _Point(Origin(at, step.found), solution, bool(known))
        problem, room = self.stepper.stated(at), self._room()
        found: Found | None = self.tools.alone(problem, room)
        while found is not None:
            solution = self.tools.judge(problem, found, drawn, {})
            yield _Point(Origin(at, found), solution, False)
            found = self.tools.off_saddle(problem, found, solution, room)

    def _room(self) -> Deadline:
        """How long a point may take beyond what is done at every point."""
        return self.deadline.within(FAIR * self.deadline.left / max(len(self.grid.indices) - self.done, 1))

    def _origins(self, index: Index) -> Iterator[tuple[Origin, Origin | None, Solution | None]]:
        """Where to set out for a point, what lies behind that, and what is known there: neighbours or sound points."""
        if index == self.grid.start:
            if self.base.pursuit.solved:
                yield Origin(self.grid.given, self.base), None, None
            return
        near, far = next(((n, f) for n, f in self.grid.behind(index) if n in self.points), ((), ()))
        if near and not self.points[near].weak:
            point, behind = self.points[near], self.points.get(far)
            yield point.origin, behind.origin if behind else None, point.solution
            return
        for count in range(2, CLOSELY + 1):
            for other, _ in self.grid.behind(index, count):
                if other in self.points and not self.points[other].weak:
                    yield self.points[other].origin, None, None
                    return
        if near:
            yield self.points[near].origin, None, self.points[near].solution

    def reconsidered(self, index: Index) -> Iterator[tuple[Index, SweepPoint]]:
        """The points before one that was looked at closely, where it is not what they were said to be, or not there."""
        near = next((n for n, _ in self.grid.behind(index) if n in self.points), None)
        own = self.points.get(index)
        if near is None or (own is not None and own.glanced):
            return
        if own is not None and own.straight and own.solution.verdict is self.points[near].solution.verdict:
            return
        for other, point in [(other, point) for other, point in self.points.items() if point.glanced]:
            at, found = point.origin.at, point.origin.found
            solution = self.tools.judge(self.stepper.stated(at), found, other in self.grid.kept, {})
            self.points[other] = _Point(point.origin, solution, False)
            yield other, _told(at, solution)

    def from_beyond(self, index: Index) -> Iterator[tuple[Index, SweepPoint]]:
        """The weak points before a sound one, once more from there: beyond a change the structure is known."""
        waiting = [index]
        while waiting and not self.stopped:
            here = waiting.pop()
            if here not in self.points or self.points[here].weak:
                continue
            for near, _ in self.grid.behind(here):
                before = self.points.get(near)
                if before is None or not before.weak:
                    continue
                at = self.grid.at(near)
                for step in self.stepper.steps(at, self.points[here].origin, None, self.deadline.within(0.0)):
                    solution = self.tools.judge(self.stepper.stated(at), step.found, near in self.grid.kept, {})
                    if solution.verdict in WEAK:
                        continue
                    self.points[near] = _Point(Origin(at, step.found), solution, False)
                    waiting.append(near)
                    yield near, _told(at, solution)
                    break


def _told(at: Array, solution: Solution) -> SweepPoint:
    failed = tuple(check.name for check in solution.checks if check.status is Status.FAILED)
    note = solution.diagnosis.sentence if solution.diagnosis is not None else ""
    return SweepPoint(tuple(at.tolist()), solution.verdict, solution.value, solution.value_error, solution.parameters,
                      failed, note, solution.curve)  # fmt: skip
