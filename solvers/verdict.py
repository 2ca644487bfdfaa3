"""From the checks to the verdict: a result is called what its checks show, and never more.

Feasibility and first order come first: without them nothing else counts.  Then the necessary conditions of second
order can refute the sort of extremum that was sought; sufficient ones can establish it, near the curve (second
variation) or everywhere (convexity).  A value that no curve can better, by the range of the integrand, needs none of
these.  Feasible curves that tend to none that is continuous have no optimum.
"""

from __future__ import annotations

from collections.abc import Sequence

from solvers.checks import FEASIBLE, FIRST_ORDER, convexity, curvature, growth, legendre, lower_bound, weierstrass
from solvers.problem import Seek
from solvers.search.record import End
from solvers.solution import Check, Status, Verdict

_WORDS = {
    Seek.MINIMUM: (Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM, Verdict.NOT_A_MINIMUM),
    Seek.MAXIMUM: (Verdict.GLOBAL_MAXIMUM, Verdict.LOCAL_MAXIMUM, Verdict.NOT_A_MAXIMUM),
}


def judge(seek: Seek, checks: Sequence[Check], end: End = End.CONVERGED) -> Verdict:
    """The verdict on a curve.

    A check that is not applicable neither helps nor harms, but a first-order or feasibility check that is missing
    altogether counts as failed.
    """
    if end is End.INFEASIBLE:
        return Verdict.INFEASIBLE
    if end is End.NOWHERE:
        return Verdict.NOT_VERIFIED
    if end is End.UNBOUNDED:
        return Verdict.NO_OPTIMUM
    status = {check.name: check.status for check in checks}

    def holds(names: Sequence[str]) -> bool:
        return all(status.get(name, Status.FAILED) is not Status.FAILED for name in names)

    if not holds(FEASIBLE):
        return Verdict.NOT_VERIFIED
    if end in (End.TORN, End.WIGGLES, End.AWAY):  # feasible curves, each better than the one before, tend to none
        return Verdict.NO_OPTIMUM
    if status.get(lower_bound.NAME) is Status.PASSED:  # no curve is better, however this one was found
        return _WORDS[seek][0]
    if end not in (End.CONVERGED, End.SETTLED):
        return Verdict.BEST_FOUND
    if not holds(FIRST_ORDER):
        return Verdict.NOT_VERIFIED
    if status.get(growth.NAME) is Status.FAILED:
        return Verdict.NOT_VERIFIED
    if seek is Seek.STATIONARY:
        return Verdict.STATIONARY
    everywhere, nearby, refuted = _WORDS[seek]
    if not holds((legendre.NAME, weierstrass.NAME, curvature.NAME)):
        return refuted
    if status.get(convexity.NAME) is Status.PASSED:
        return everywhere
    if status.get(curvature.NAME) is Status.PASSED:
        return nearby
    return Verdict.STATIONARY


def failures(checks: Sequence[Check]) -> tuple[Check, ...]:
    """The checks that failed, in their order: what a reader of "not verified" wants to know."""
    return tuple(check for check in checks if check.status is Status.FAILED)
