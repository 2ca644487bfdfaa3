"""The way from a solved point to another one: directly, with the structure repaired, or in halves."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.forms.choice import Found
from solvers.forms.gauge import Form, Gauged
from solvers.forms.kinks import at_kinks
from solvers.problem import Problem
from solvers.search.structure import present_switches
from solvers.sweep.neighbour import Neighbours, Solved
from solvers.sweep.repair import plainly, repaired
from solvers.sweep.tools import Tools

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Origin:
    """A solved point: the values of the swept constants and what was found there."""

    at: Array
    found: Found

    @property
    def solved(self) -> Solved:
        """As its neighbours see it."""
        return Solved(self.at, self.found.pursuit)


@dataclass(frozen=True, slots=True)
class Step:
    """A point found from another one: on the `same` mesh or not, the last matrix with a minimum's inertia or not."""

    found: Found
    same: bool = False
    convex: bool = False


class Stepper:
    """Goes from points of a sweep to others; `names` are the swept constants."""

    def __init__(self, problem: Problem, names: Sequence[str], tools: Tools, deadline: Deadline) -> None:
        self.problem, self.names, self.tools, self.deadline = problem, names, tools, deadline
        self.neighbours = Neighbours(names, deadline)

    def stated(self, at: Array) -> Problem:
        """The problem of one point."""
        values = dict(zip(self.names, at.tolist(), strict=True))
        constants = tuple(replace(c, value=values.get(c.name, c.value)) for c in self.problem.constants)
        return replace(self.problem, constants=constants)

    def steps(self, at: Array, near: Origin, far: Origin | None, room: Deadline) -> Iterator[Step]:
        """What leads from the solution at `near`, behind which lies `far`, to `at`: one way after the other.

        In the neighbour's form, at once or in two steps; where that has switches, with their structure read anew, as
        long as there is `room`.
        """
        problem, own = self.stated(at), near.found
        gauged = _gauged(problem, own, self.tools.form)
        if own.gauged is not None and gauged is None:
            return
        reached = self.neighbours.step(problem, at, near.solved, far.solved if far else None)
        path = own.pursuit.paths[-1]
        switching = bool(present_switches(path))
        if reached.path is None and switching:
            middle = (at + near.at) / 2
            between = self.neighbours.step(self.stated(middle), middle, near.solved, far.solved if far else None)
            if between.good is not None:
                reached = self.neighbours.step(problem, at, Solved(middle, between.good), near.solved)
        if reached.good is not None:
            yield from self._fitting(problem, Step(Found(reached.good, gauged), reached.same, reached.convex))
        if switching and not room.over:
            form = plainly(path.program.compiled.lowered.problem, problem)
            seen = None if reached.good is not None else reached.path  # a good path has its own structure already
            for found in repaired(form, path, seen, room):
                yield from self._fitting(problem, Step(Found(found, gauged)))

    def _fitting(self, problem: Problem, step: Step) -> Iterator[Step]:
        """The step where its form says the same as the problem does there."""
        if self.tools.fits(problem, step.found):
            yield step


def _gauged(problem: Problem, neighbour: Found, form: Form) -> Gauged | None:
    """The parametric form of a point in the terms of its neighbour's; None where it is another one."""
    known = neighbour.gauged
    if known is None:
        return None
    if known.squared:  # ends at rest depend on the values of constants
        own = form(at_kinks(problem), dict, True)
        if own is None or len(own.problem.endpoints) != len(known.problem.endpoints):
            return None
    return replace(known, original=problem, problem=replace(known.problem, constants=problem.constants))
