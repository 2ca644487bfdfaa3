"""Newton's method on the optimality system: for stationary points that need be no minima, and near a known minimum.

A minimiser moves downhill and leaves a saddle; Newton's method does not ask for the sign of the second variation.  Each
step is halved until the residual of the system falls.  Only equalities and fixed values take part; inequalities must
turn out not to bind.  From the minimum of a coarser mesh whole steps go straight to that of the next one.
Reference: Nocedal, Wright (2006), Numerical Optimization, section 18.1 (Newton's method for the optimality conditions;
from memory).
"""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.minimise.ipopt import Iterate, Minimum, Outcome, Start
from solvers.minimise.optimality import Optimality
from solvers.transcription.program import Program

Array = NDArray[np.float64]

STEPS = 80
TOLERANCE = 1e-11
SMALLEST_STEP = 2.0**-20
CRAWLING = 20
CRAWLED = 0.95
"""So many steps that leave more than this of the residual lead nowhere: it is least nearby, but not zero."""
STRAIGHT = 6
FALL = 0.2
"""Whole steps that are tried, and how far each must let the residual fall."""
RISE = 1e3
"""How far the first step may let it rise where it has to find the multipliers."""
BINDING = 1e-7
"""Multipliers (scaled) of limits that count as binding."""
REGULAR = 1e-12
"""What keeps the matrix of a step regular where nothing determines some variables, or a condition repeats others."""


def stationary_point(program: Program, start: Start, watch: Callable[[Iterate], bool]) -> Minimum:
    """A stationary point near a start; `FAILED` where the steps do not get there or a limit would be crossed."""
    began = time.perf_counter()
    system = _System(program)
    z = np.clip(start.z, program.lower, program.upper)
    multipliers = np.zeros(program.rows.count) if start.multipliers is None else start.multipliers.copy()
    if start.multipliers is None:
        multipliers[system.equal] = system.least_squares_multipliers(z)
    outcome, count = Outcome.FAILED, 0
    residual = system.residual(z, multipliers)
    lengths: list[float] = []
    for count in range(STEPS):
        size = float(np.abs(residual).max(initial=0.0))
        if watch(Iterate(count, system.value(z), float(np.abs(residual[len(system.free) :]).max(initial=0.0)))):
            outcome = Outcome.STOPPED
            break
        if size <= TOLERANCE:
            outcome = Outcome.SOLVED if within_limits(program, z) else Outcome.FAILED
            break
        step = system.step(z, multipliers, residual)
        if step is None:
            break
        share, here = 1.0, float(np.linalg.norm(residual))
        lengths.append(here)
        if count >= CRAWLING and here > CRAWLED * lengths[-1 - CRAWLING]:
            break
        while share > SMALLEST_STEP:
            moved, changed = system.moved(z, multipliers, step, share)
            with np.errstate(over="ignore"):  # a step that is too long may lead anywhere
                after = system.residual(moved, changed)
                falls = np.linalg.norm(after) < (1 - 1e-4 * share) * here
            if falls:
                break
            share /= 2
        else:
            # At the edge of what floating-point numbers can tell, the residual falls no further.
            outcome = Outcome.ACCEPTABLE if size < 1e-8 and within_limits(program, z) else Outcome.FAILED
            break
        z, multipliers, residual = moved, changed, after
    seconds = time.perf_counter() - began
    nothing = np.zeros(len(z))
    return Minimum(outcome, z, system.value(z), nothing, multipliers, count, seconds, 0.0, "Newton")


def straight_to(program: Program, start: Start, watch: Callable[[Iterate], bool]) -> Minimum | None:
    """The stationary point next to a start; None where a limit binds there or whole steps do not go straight.

    From the minimum of a coarser mesh it is a minimum too.  Where the start has no multipliers the first step finds
    them, and what it leaves of the residual tells nothing yet.
    """
    began = time.perf_counter()
    system = _System(program)
    z, multipliers = np.clip(start.z, program.lower, program.upper), start.multipliers
    known = multipliers is not None and start.bound_multipliers is not None
    if multipliers is None or start.bound_multipliers is None:
        multipliers = np.zeros(program.rows.count)
    elif max(np.abs(start.bound_multipliers[system.free]).max(initial=0.0),
             np.abs(np.delete(multipliers, system.equal)).max(initial=0.0)) > BINDING:  # fmt: skip
        return None
    residual = system.residual(z, multipliers)
    size = float(np.abs(residual).max(initial=0.0))
    for count in range(STRAIGHT):
        if watch(Iterate(count, system.value(z), float(np.abs(residual[len(system.free) :]).max(initial=0.0)))):
            return None
        step = system.step(z, multipliers, residual)
        if step is None:
            return None
        z, multipliers = system.moved(z, multipliers, step, 1.0)
        residual = system.residual(z, multipliers)
        before, size = size, float(np.abs(residual).max(initial=0.0))
        if size <= TOLERANCE:
            value, seconds = system.value(z), time.perf_counter() - began
            if not within_limits(program, z) or not np.isfinite(value):  # slopes may have values where it has none
                return None
            return Minimum(Outcome.SOLVED, z, value, np.zeros(len(z)), multipliers, count + 1, seconds, 0.0, "Newton")
        if not size <= (FALL if known or count else RISE) * before:
            return None
    return None


class _System:
    """The optimality system of a program in its F free variables and its E equalities."""

    def __init__(self, program: Program) -> None:
        self.program = program
        self.free = np.flatnonzero(program.lower < program.upper)
        self.equal = np.flatnonzero(program.row_lower == program.row_upper)

    @cached_property
    def _optimality(self) -> Optimality:
        return Optimality(self.program, self.free, self.equal)

    @cached_property
    def _regular(self) -> Any:
        from scipy.sparse import csc_matrix

        signs = np.concatenate([np.ones(len(self.free)), -np.ones(len(self.equal))])
        return csc_matrix((REGULAR * signs, np.arange(len(signs)), np.arange(len(signs) + 1)))

    def value(self, z: Array) -> float:
        return self.program.numbers.value(z)

    def residual(self, z: Array, multipliers: Array) -> Array:
        """The optimality system's left side: slopes of the Lagrangian, then violations."""
        numbers = self.program.numbers
        violation = numbers.constraints(z)[self.equal] - self.program.row_lower[self.equal]
        kept = np.zeros_like(multipliers)
        kept[self.equal] = multipliers[self.equal]
        slopes = numbers.gradient(z) + numbers.jacobian_pattern.times_from_left(kept, numbers.jacobian(z))
        return np.concatenate([slopes[self.free], violation])

    def least_squares_multipliers(self, z: Array) -> Array:
        """Multipliers with which the slopes of the Lagrangian are least."""
        from scipy.sparse.linalg import lsqr

        numbers = self.program.numbers
        jacobian = numbers.jacobian_pattern.filled(numbers.jacobian(z)).tocsr()[self.equal][:, self.free]
        return np.asarray(lsqr(jacobian.T, -numbers.gradient(z)[self.free])[0])

    def step(self, z: Array, multipliers: Array, residual: Array) -> Array | None:
        """Newton's step, or None where the system is singular."""
        from scipy.sparse.linalg import splu

        weights = np.zeros(self.program.rows.count)
        weights[self.equal] = multipliers[self.equal]
        numbers = self.program.numbers
        matrix = self._optimality.matrix(numbers.hessian(z, 1.0, weights), numbers.jacobian(z)) + self._regular
        try:
            step = splu(matrix).solve(-residual)
        except RuntimeError:
            return None
        return step if np.all(np.isfinite(step)) else None

    def moved(self, z: Array, multipliers: Array, step: Array, share: float) -> tuple[Array, Array]:
        """The point after a share of a step."""
        z, multipliers = z.copy(), multipliers.copy()
        z[self.free] += share * step[: len(self.free)]
        multipliers[self.equal] += share * step[len(self.free) :]
        return z, multipliers


def within_limits(program: Program, z: Array) -> bool:
    """Whether all inequalities hold; none may bind, for nothing here would hold the point on it."""
    g = program.numbers.constraints(z)
    inside = np.all(z >= program.lower - 1e-9) and np.all(z <= program.upper + 1e-9)
    return bool(inside and np.all(g >= program.row_lower - 1e-7) and np.all(g <= program.row_upper + 1e-7))
