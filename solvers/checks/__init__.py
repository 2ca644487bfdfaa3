"""The checks of a result, each by a method of its own; none evaluates the equations that the solver solved.

`run` makes all of them in a fixed order.  A check never raises: one that breaks is a failed check with the reason.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

from solvers.checks import (
    conditions,
    convexity,
    curvature,
    first_integral,
    free_ends,
    legendre,
    limits,
    motion,
    refinement,
    stationarity,
)
from solvers.checks.sampling import Sampler
from solvers.problem import Problem
from solvers.solution import Check, Status
from solvers.trajectory import Trajectory

NAMES = (motion.NAME, limits.NAME, conditions.NAME, stationarity.NAME, free_ends.NAME, first_integral.NAME,
         legendre.NAME, curvature.NAME, convexity.NAME, refinement.NAME)  # fmt: skip
"""The names of all checks in the order in which they are made and shown."""


def run(
    path: Trajectory,
    *,
    original: Problem | None = None,
    value_error: float | None = None,
    curve_error: float | None = None,
    deadline: float = float("inf"),
) -> tuple[Check, ...]:
    """Make all checks of a solved mesh.

    `original` is the problem as stated where the mesh is of an equivalent form: convexity depends on the form.
    `value_error` (SI) and `curve_error` (relative) are what the refinement states, None where there was no second mesh.
    `deadline` is on the clock of `time.perf_counter`: checks that would start later fail with that reason.
    """
    try:
        sampler = Sampler(path)
        size = max(abs(path.value), 1e-3 * abs(path.program.value_scale))
    except Exception as error:
        reason = f"The curve cannot be looked at: {error}"
        return tuple(Check(name, Status.FAILED, reason) for name in NAMES)
    tolerance = sampler.tolerance
    made: tuple[tuple[str, Callable[[], Check]], ...] = (
        (motion.NAME, lambda: motion.check(sampler)),
        (limits.NAME, lambda: limits.check(sampler)),
        (conditions.NAME, lambda: conditions.check(sampler, value_error)),
        (stationarity.NAME, lambda: stationarity.check(sampler)),
        (free_ends.NAME, lambda: free_ends.check(sampler)),
        (first_integral.NAME, lambda: first_integral.check(sampler)),
        (legendre.NAME, lambda: legendre.check(sampler)),
        (curvature.NAME, lambda: curvature.check(sampler)),
        (convexity.NAME, lambda: convexity.check(original or sampler.problem)),
        (refinement.NAME, lambda: refinement.check(value_error, size, curve_error, tolerance)),
    )
    with np.errstate(all="ignore"):
        return tuple(_made(name, one, deadline) for name, one in made)


def _made(name: str, one: Callable[[], Check], deadline: float) -> Check:
    """One check, whatever happens."""
    if time.perf_counter() > deadline:
        return Check(name, Status.FAILED, "Not made: the time was over.")
    try:
        return one()
    except Exception as error:  # a broken check must not pass, and must not take the result down
        return Check(name, Status.FAILED, f"The check itself broke: {type(error).__name__}: {error}")
