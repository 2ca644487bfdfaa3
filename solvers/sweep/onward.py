"""The next point of a branch where other limits bind than at the last one: found as the points of a sweep are."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np

from solvers.deadline import Deadline
from solvers.forms.choice import Found
from solvers.problem import Problem
from solvers.search import refinement
from solvers.search.pursuit import pursue
from solvers.search.record import End, Pursuit
from solvers.sweep.repair import plainly, without_contacts
from solvers.sweep.stepping import Origin, Stepper
from solvers.sweep.tools import Tools
from solvers.transcription.trajectory import Trajectory

ROOM = 2.0
LEAST = 1.0
"""How many times the work of the problem as it stands each way to such a point may take; and seconds at the least."""


def onward(
    problem: Problem, constant: str, base: Found, tools: Tools, deadline: Deadline
) -> Callable[[Trajectory, float, float], Iterator[Trajectory]]:
    """What finds solutions from a path, for a value of a constant (SI), for another value of it.

    In the path's form, with its structure read anew, on plain meshes, from nothing; `base` is the first solution.
    """

    def found_from(path: Trajectory, at: float, there: float) -> Iterator[Trajectory]:
        work, goal = max(ROOM * base.work, LEAST), np.array([there])
        room = deadline.within(work)
        stepper = Stepper(problem, [constant], tools, room)
        near = Origin(np.array([at]), Found(_pursuit(path), base.gauged))
        for step in stepper.steps(goal, near, None, room):
            yield without_contacts(step.found.pursuit, room)
        form = plainly(near.found.pursuit.problem, stepper.stated(goal))
        plain = pursue(form, None, deadline.within(work), start=path)
        if plain.done:
            yield plain.paths[-1]
        room = deadline.within(work)
        alone = tools.alone(stepper.stated(goal), room)
        if alone.pursuit.done and (alone.gauged is None) == (base.gauged is None):
            yield without_contacts(alone.pursuit, room)

    return found_from


def _pursuit(path: Trajectory) -> Pursuit:
    """A path as one that has been refined enough."""
    found, compiled = refinement.estimate(path), path.program.compiled
    size = max(abs(path.value), abs(path.program.value_scale))
    return Pursuit(compiled.lowered.problem, compiled, End.CONVERGED, paths=[path], estimates=[found],
                   value_error=size * found.worst**2, curve_error=found.worst)  # fmt: skip
