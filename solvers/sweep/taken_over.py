"""Which checks of a point are taken over from its neighbour.

Every so-maniest point is looked at closely: all its checks are made.  Between them `ALWAYS` are made, and what passed
by far at the neighbour is taken over on the same mesh: the figures change smoothly along a branch.  The second order is
taken over only where the point's own matrix has the inertia of a minimum: the minimiser says so at the end of a
minimisation without a correction (Waechter, Biegler 2006, section 3.1; from memory), and after Newton's steps it is
counted.  Where limits are held along arcs, whether they are held rightly is looked at each time: the
structure may change between any two points.
"""

from __future__ import annotations

from solvers.checks import curvature, free_ends, limits, lower_bound, motion, stationarity
from solvers.checks import refinement as refinement_check
from solvers.solution import Check, Solution, Status

CLOSELY = 8
"""Every so-maniest point is looked at closely."""
ALWAYS = {limits.NAME, refinement_check.NAME}
"""The checks that are made at every point.  The motion, integrated anew, is looked at closely only: the local errors,
which are found for every point, would tell before it."""
OF_STRUCTURE = {motion.NAME, stationarity.NAME, free_ends.NAME}
"""And those that are made where limits are held."""
BY_FAR = 0.1
"""Figures below this share of their threshold have passed by far."""


def taken_over(before: Solution, convex: bool, held: bool) -> dict[str, Check]:
    """The checks of a neighbour on the same mesh that a point takes over; `held`: limits are held along arcs."""
    always = ALWAYS | OF_STRUCTURE if held else ALWAYS
    return {
        check.name: check
        for check in before.checks
        if check.name not in always and _by_far(check) and (check.name != curvature.NAME or convex)
    }


def _by_far(check: Check) -> bool:
    """Whether a check does not apply, or passed so well that it passes at the next point too."""
    if check.name == lower_bound.NAME:  # what it shows is more than the others do, and is shown for every point anew
        return check.status is Status.NOT_APPLICABLE
    if check.status is not Status.PASSED or check.figure is None or check.threshold is None:
        return check.status is not Status.FAILED
    return check.figure <= BY_FAR * check.threshold
