"""The checks of a result, each by a method of its own; none evaluates the equations that the solver solved.

`run` makes all of them in a fixed order.  A check never raises: one that breaks is a failed check with the reason.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from types import MappingProxyType

import numpy as np

from solvers.checks import (
    conditions,
    convexity,
    corners,
    curvature,
    first_integral,
    free_ends,
    growth,
    legendre,
    limits,
    lower_bound,
    motion,
    refinement,
    stationarity,
    weierstrass,
)
from solvers.checks.sampling import Sampler
from solvers.deadline import Deadline
from solvers.minimise.ipopt import FLOOR
from solvers.problem import Problem
from solvers.solution import Check, Status
from solvers.transcription.trajectory import Trajectory

NAMES = (motion.NAME, limits.NAME, conditions.NAME, stationarity.NAME, free_ends.NAME, first_integral.NAME,
         corners.NAME, legendre.NAME, weierstrass.NAME, curvature.NAME, convexity.NAME, lower_bound.NAME, growth.NAME,
         refinement.NAME)  # fmt: skip
"""The names of all checks in the order in which they are made and shown."""

FEASIBLE = (motion.NAME, limits.NAME, conditions.NAME)
"""The checks that look at what the problem demands of any curve."""

FIRST_ORDER = (stationarity.NAME, free_ends.NAME, first_integral.NAME, corners.NAME, refinement.NAME)
"""The checks of what every extremum has."""

INSTANT = (convexity.NAME, lower_bound.NAME, growth.NAME, refinement.NAME)
"""The checks that take no time, most of them as they look at no curve."""

OPTIONAL = (legendre.NAME, weierstrass.NAME, curvature.NAME, convexity.NAME, lower_bound.NAME)
"""The checks that only refine what the others have shown."""


def run(
    path: Trajectory,
    *,
    original: Problem | None = None,
    value_error: float | None = None,
    curve_error: float | None = None,
    budget: float | None = None,
    known: Mapping[str, Check] = MappingProxyType({}),
    sampler: Sampler | None = None,
) -> tuple[Check, ...]:
    """Make all checks of a solved mesh.

    `original` is the problem as stated where the mesh is of an equivalent form: convexity depends on the form.
    `value_error` (SI) and `curve_error` (relative) are what the refinement states, None where there was no second mesh.
    `budget` is how many seconds of processor time they may take in all, at first a second or a fifth of the time limit.
    What it does not suffice for has not been shown: a feasibility or first-order check then fails, one of second order
    says nothing.  Nor does that one where the curve is not even feasible: neighbours of a wrong curve prove nothing.
    `known` are checks that need not be made here; `sampler` is one of the path where there is one already.
    """
    deadline = Deadline().within(_budget(path) if budget is None else budget)
    try:
        sampler = sampler or Sampler(path)
        size = max(abs(path.value), 1e-3 * abs(path.program.value_scale))
    except Exception as error:
        reason = f"The curve cannot be looked at: {error}"
        return tuple(Check(name, Status.FAILED, reason) for name in NAMES)
    tolerance = sampler.tolerance
    floor = 2 * FLOOR * abs(path.program.value_scale)  # what the minimiser leaves open where the value nearly vanishes
    made: list[Check] = []

    def of_second_order() -> Check:
        if any(check.name in FEASIBLE and check.status is Status.FAILED for check in made):
            return Check(curvature.NAME, Status.NOT_APPLICABLE, "Not made: the curve is not feasible.")
        return curvature.check(sampler, deadline, curve_error or 0.0)

    planned: tuple[tuple[str, Callable[[], Check]], ...] = (
        (motion.NAME, lambda: motion.check(sampler, deadline)),
        (limits.NAME, lambda: limits.check(sampler)),
        (conditions.NAME, lambda: conditions.check(sampler, value_error)),
        (stationarity.NAME, lambda: stationarity.check(sampler)),
        (free_ends.NAME, lambda: free_ends.check(sampler)),
        (first_integral.NAME, lambda: first_integral.check(sampler)),
        (corners.NAME, lambda: corners.check(sampler)),
        (legendre.NAME, lambda: legendre.check(sampler)),
        (weierstrass.NAME, lambda: weierstrass.check(sampler)),
        (curvature.NAME, of_second_order),
        (convexity.NAME, lambda: convexity.check(original or sampler.problem)),
        (lower_bound.NAME, lambda: lower_bound.check(sampler)),
        (growth.NAME, lambda: growth.check(sampler, convex=_passed(made, convexity.NAME))),
        (refinement.NAME, lambda: refinement.check(value_error, size + floor / tolerance, curve_error, tolerance)),
    )
    with np.errstate(all="ignore"):
        for name, one in planned:
            made.append(known[name] if name in known else _made(name, one, deadline))
    return tuple(made) if not _passed(made, convexity.NAME) else tuple(map(_of_convex, made))


def _of_convex(check: Check) -> Check:
    """A check of a convex problem: what seems to be a negative second variation is an error of the places of switches.

    In the unknowns alone it is never negative; with such places among them that shows only where these are exact.
    """
    if check.name != curvature.NAME or check.status is not Status.FAILED:
        return check
    return replace(check, status=Status.NOT_APPLICABLE,
                   sentence="The problem is convex: no curve is better than a stationary one. By itself this says, to "
                   f"the accuracy of the places where controls switch: {check.sentence}")  # fmt: skip


def _passed(made: Sequence[Check], name: str) -> bool:
    return any(check.name == name and check.status is Status.PASSED for check in made)


def left_open(made: Sequence[Check]) -> float:
    """The share of the functional that failed checks leave open: about so much could change where they do not hold.

    Infinite where they leave all of it open: then nothing is known.  Refinement is left out: its figure is what the
    stated errors say already.
    """
    counted = {*FEASIBLE, *FIRST_ORDER} - {refinement.NAME}
    failed = (check for check in made if check.name in counted and check.status is Status.FAILED)
    share = sum(np.inf if check.figure is None else check.figure for check in failed)
    return share if share < 1 else np.inf


def _budget(path: Trajectory) -> float:
    """Seconds for all checks where nothing else is said."""
    return max(1.0, 0.2 * path.program.compiled.lowered.problem.options.time_limit)


def _made(name: str, one: Callable[[], Check], deadline: Deadline) -> Check:
    """One check, whatever happens."""
    if deadline.over and name not in INSTANT:
        status = Status.NOT_APPLICABLE if name in OPTIONAL else Status.FAILED
        return Check(name, status, "Not made: the time was over.")
    try:
        return one()
    except Exception as error:  # a broken check must not pass, and must not take the result down
        return Check(name, Status.FAILED, f"The check itself broke: {type(error).__name__}: {error}")
