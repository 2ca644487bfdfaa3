"""One form of a problem solved as it is given: plain meshes, the switches that they show, and what is left."""

from __future__ import annotations

import time

from solvers.deadline import Deadline
from solvers.problem import Problem
from solvers.search.early import sharpened_early
from solvers.search.pursuit import MESHES, go_on, pursue
from solvers.search.record import End, Pursuit
from solvers.search.sharpen import sharpen, with_structure, worse
from solvers.search.signals import jumps_at_breaks
from solvers.search.touches import parted
from solvers.solution import Watch
from solvers.transcription.functions import linear_controls
from solvers.transcription.trajectory import Trajectory

SHARE = 0.6
"""Share of the remaining time that the search for switches may take."""
PATIENCE = 20.0
"""How much longer than the plain meshes it may take."""
CLEARER = 2
"""Plain meshes after which switches are looked for again."""
NEARLY = 30.0
"""How far from the tolerance, as a factor, plain meshes are given a chance to finish first."""


def solve_as_given(
    problem: Problem, watch: Watch | None, deadline: Deadline, start: Trajectory | None = None
) -> Pursuit:
    """Plain meshes first; where controls switch, then the switches as unknowns; else plain meshes to the end.

    From the default guess, or from a curve that was found before.
    """
    began = time.process_time()
    pursuit = pursue(problem, watch, deadline, meshes=1, start=start)
    early = sharpened_early(pursuit, watch, deadline)
    if early is not None:
        return _after(pursuit, early)
    if pursuit.solved and (pursuit.steps[-1].error or 0.0) <= NEARLY * problem.options.tolerance:
        pursuit = pursuit if pursuit.end is End.CONVERGED else go_on(pursuit, watch, deadline, 3)
    if pursuit.end is End.CONVERGED and jumps_at_breaks(pursuit.paths[-1]):  # their multipliers are not the only ones
        sharp = sharpen(pursuit, watch, deadline.within(PATIENCE * (time.process_time() - began)))
        return pursuit if sharp is None or sharp.end is not End.CONVERGED else _after(pursuit, sharp)
    if not pursuit.solved or pursuit.end in (End.CONVERGED, End.STOPPED, End.TIME, End.TORN):
        return pursuit
    room = min(SHARE * deadline.left, PATIENCE * (time.process_time() - began) + 1.0)
    sharp = sharpen(pursuit, watch, deadline.within(room))
    if sharp is not None:
        sharp = _after(pursuit, sharp)
        if sharp.end is End.TIME and not deadline.over and sharp.value_met_before:
            sharp.end = End.SETTLED  # the room for this search was over, not the time of the run
        settled = sharp.end is End.SETTLED and sharp.shown and parted(sharp.paths[-1]) is None
        if not worse(sharp, pursuit) and (sharp.end is End.CONVERGED or settled):
            return sharp
    clear = _on_finer_meshes(pursuit, watch, deadline)
    if clear is not None:
        return _after(pursuit, clear)
    return pursuit if sharp is None or _nearer(pursuit, sharp) else sharp


def _on_finer_meshes(plain: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """Refine a plain pursuit to the end, or until it shows its switches so clearly that they can be solved for."""
    tried: list[Problem] = []
    going, switching = True, bool(linear_controls(plain.compiled))
    while going:
        count = len(plain.steps)
        go_on(plain, watch, deadline, CLEARER)
        going = plain.end is End.SETTLED and len(plain.steps) == count + CLEARER and len(plain.steps) < MESHES
        if switching and plain.end in (End.SETTLED, End.POINTS) and not deadline.over:
            sharp = with_structure(plain, plain.paths[-1], watch, deadline.within(SHARE * deadline.left), tried)
            if sharp is not None and sharp.end is End.CONVERGED and not worse(sharp, plain):
                return sharp
    return None


def _after(plain: Pursuit, sharp: Pursuit) -> Pursuit:
    """The pursuit with switches, its record with that of the plain meshes before it."""
    sharp.steps[:0] = plain.steps
    sharp.iterations += plain.iterations
    return sharp


def _nearer(plain: Pursuit, sharp: Pursuit) -> bool:
    """Whether plain meshes have come nearer to the tolerance than those with switches, or to a better value."""
    if worse(sharp, plain):
        return True
    if End.CONVERGED in (plain.end, sharp.end) or plain.shown != sharp.shown:
        return plain.end is End.CONVERGED or (plain.shown and sharp.end is not End.CONVERGED)
    return plain.value_error <= sharp.value_error
