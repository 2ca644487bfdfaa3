"""Stationary points that need be no minima: Newton's method on the optimality system, from the same starts.

A minimiser moves downhill and leaves a saddle; Newton's method does not ask for the sign of the second variation.  Each
step is halved until the residual of the system falls.  Only equalities and fixed values take part; inequalities must
turn out not to bind.
Reference: Nocedal, Wright (2006), Numerical Optimization, section 18.1 (Newton's method for the optimality conditions;
from memory).
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.minimise.ipopt import Iterate, Minimum, Outcome, Start
from solvers.transcription.program import Program

Array = NDArray[np.float64]

STEPS = 80
TOLERANCE = 1e-11
SMALLEST_STEP = 2.0**-20


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
        while share > SMALLEST_STEP:
            moved, changed = system.moved(z, multipliers, step, share)
            after = system.residual(moved, changed)
            if np.all(np.isfinite(after)) and np.linalg.norm(after) < (1 - 1e-4 * share) * here:
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


class _System:
    """The optimality system of a program in its free variables and its equalities."""

    def __init__(self, program: Program) -> None:
        self.program = program
        self.free = np.flatnonzero(program.lower < program.upper)
        self.equal = np.flatnonzero(program.row_lower == program.row_upper)

    def value(self, z: Array) -> float:
        return self.program.numbers.value(z)

    def _parts(self, z: Array) -> tuple[Array, Array, Any]:
        """Gradient of f, violation of the equalities, and their Jacobian in the free variables."""
        numbers = self.program.numbers
        violation = numbers.constraints(z)[self.equal] - self.program.row_lower[self.equal]
        jacobian = numbers.jacobian_pattern.filled(numbers.jacobian(z)).tocsr()
        return numbers.gradient(z)[self.free], violation, jacobian[self.equal][:, self.free]

    def residual(self, z: Array, multipliers: Array) -> Array:
        """The optimality system's left side: slopes of the Lagrangian, then violations."""
        gradient, violation, jacobian = self._parts(z)
        return np.concatenate([gradient + jacobian.T @ multipliers[self.equal], violation])

    def least_squares_multipliers(self, z: Array) -> Array:
        """Multipliers with which the slopes of the Lagrangian are least."""
        from scipy.sparse.linalg import lsqr

        gradient, _, jacobian = self._parts(z)
        return np.asarray(lsqr(jacobian.T, -gradient)[0])

    def step(self, z: Array, multipliers: Array, residual: Array) -> Array | None:
        """Newton's step, or None where the system is singular."""
        import scipy.sparse as sp
        from scipy.sparse.linalg import splu

        weights = np.zeros(self.program.rows.count)
        weights[self.equal] = multipliers[self.equal]
        numbers = self.program.numbers
        upper = numbers.hessian_pattern.filled(numbers.hessian(z, 1.0, weights)).tocsr()
        hessian = (upper + sp.triu(upper, 1).T)[self.free][:, self.free]
        jacobian = self._parts(z)[2]
        matrix = sp.bmat([[hessian, jacobian.T], [jacobian, None]], format="csc")
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
