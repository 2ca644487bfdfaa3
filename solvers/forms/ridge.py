"""Curves along a ridge: where a formula has a concave kink, the curve in it is no extremum, but its rounded form is.

-|y| falls to both sides of y = 0, where the first guess likes to lie.  So the search begins again beside it, to either
side, and the better of what it leads to is taken if it is better and lies along no ridge itself.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from solvers.checks import rounding
from solvers.checks.sampling import Sampler
from solvers.deadline import Deadline
from solvers.problem import Seek, Variation
from solvers.search.pursuit import pursue
from solvers.search.record import End, Pursuit
from solvers.solution import Watch

SIDES = (0.3, -0.3)
"""Half waves that are added to all unknowns, relative to their sizes."""


def off_ridge(base: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """A better pursuit of the same problem from beside the ridge that a curve lies on; None where there is none."""
    problem = base.problem
    if not base.solved or problem.seek is Seek.STATIONARY or problem.start.modes or not _along_one(base):
        return None
    sign = -1.0 if problem.seek is Seek.MAXIMUM else 1.0
    found = []
    for side in SIDES:
        modes = {unknown.name: (side,) for unknown in problem.unknowns if unknown.order}
        pursuit = pursue(replace(problem, start=Variation(problem.start.label, modes)), watch, deadline)
        better = pursuit.solved and sign * (pursuit.paths[-1].value - base.paths[-1].value) < 0
        if better and pursuit.end in (End.CONVERGED, End.SETTLED) and not _along_one(pursuit):
            found.append(pursuit)
    best = min(found, key=lambda pursuit: sign * pursuit.paths[-1].value, default=None)
    if best is not None:
        best.steps[:0] = base.steps
        best.iterations += base.iterations
    return best


def _along_one(pursuit: Pursuit) -> bool:
    """Whether the curve runs along a concave kink."""
    with np.errstate(all="ignore"):
        found = rounding.concave(Sampler(pursuit.paths[-1]))
    return found is not None and found[0] > rounding.STRETCH
