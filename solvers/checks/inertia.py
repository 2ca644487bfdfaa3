"""How many negative directions the second-order problem of a solved mesh has, and which.

Of `curvature`, which explains the method, this is the linear algebra.  It stands apart so that SciPy is loaded only
when a second variation is looked at.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.linalg import eigh, qr
from scipy.sparse.linalg import ArpackError, LinearOperator, eigsh, splu

from solvers.checks import condensed
from solvers.checks.scattered import scattered
from solvers.checks.second_order import Second, hessian_at, owners
from solvers.deadline import FOREVER, Deadline
from solvers.minimise.ipopt import Minimum
from solvers.transcription.program import Program

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

PENALTY = 1e-5
NOISE = 1e-9
"""Rounding error of the factors that leaves the margin trustworthy; entries of the Hessian are of the order of one."""
FEW = 400
"""Up to so many variables full matrices are factorized sooner than sparse ones."""
TOGETHER = 16
"""So many columns of the border are solved for at once."""
SWEEPS = 4
"""How often a direction is put onto the constraints: each time leaves a small share of what it was off."""
REPEATED = 1e-10
"""What lets constraints that repeat others pass when a direction is put onto them."""
OFF = 1e-10
"""How far off them, relative to its length, a direction may stay."""


@dataclass(frozen=True, slots=True)
class Count:
    """How many negative directions a quadratic form has on the kernel of constraints; columns of `directions` are near
    the first of them."""

    negative: int
    directions: Array | None


def count_negative(
    second: Second, free: Flags, rows: Flags, shift: float, deadline: Deadline = FOREVER
) -> Count | None:
    """Negative directions of hessian + shift * metric on the free variables where the rows keep their values.

    None where the factors are not to be trusted.  TimeoutError when the deadline passes.
    """
    inside, border = np.flatnonzero(free & ~second.border), np.flatnonzero(free & second.border)
    near, far = np.flatnonzero(rows & ~second.long), np.flatnonzero(rows & second.long)
    columns = np.concatenate([inside, border])
    if not len(columns):
        return Count(0, None)
    if deadline.over:
        raise TimeoutError
    if len(columns) <= FEW:
        counted = _condensed(second, free, rows, shift)
        if counted is not None and (counted <= 0 or shift < 0):  # only one that stands against the margin has to prove
            return Count(max(counted, 0), None)
    jacobian, form, metric = second.jacobian.sparse(), second.hessian.sparse(), second.metric.sparse()
    local, coupling = normal(jacobian[near][:, columns]), normal(jacobian[far][:, columns])
    hessian = form[columns][:, columns] + shift * metric[columns][:, columns]
    penalized = (hessian + local.T @ local / PENALTY).tocsc()
    whole = sp.bmat([[penalized, coupling.T], [coupling, -PENALTY * sp.eye(coupling.shape[0])]], format="csc")
    size = len(inside)
    band, side = whole[:size][:, :size], whole[:size][:, size:].toarray()
    corner = whole[size:][:, size:].toarray()
    solve, negative = _factorized(band)
    if solve is None:
        return None
    moved = np.empty_like(side)
    for first in range(0, side.shape[1], TOGETHER):  # not all at once, which could take long beyond the deadline
        if deadline.over:
            raise TimeoutError
        few = slice(first, first + TOGETHER)
        moved[:, few] = solve(side[:, few])
    rest = corner - side.T @ moved  # Schur complement of the band
    negative += int((np.linalg.eigvalsh((rest + rest.T) / 2) < 0).sum()) - coupling.shape[0]
    if negative <= 0 or shift < 0:
        return Count(max(negative, 0), None)

    def inverse(vector: Array) -> Array:
        """The whole matrix's inverse, by blocks."""
        if deadline.over:
            raise TimeoutError
        inner = solve(vector[:size])
        outer = np.linalg.lstsq(rest, vector[size:] - side.T @ inner, rcond=None)[0] if len(rest) else vector[size:]
        return np.concatenate([inner - solve(side @ outer), outer])

    operator = LinearOperator(whole.shape, matvec=inverse, dtype=float)
    wanted = min(3, whole.shape[0] - 1)
    if wanted < 1:
        return Count(negative, np.ones((len(columns), 1)))
    start = np.sin(1.0 + np.arange(whole.shape[0]))
    try:
        vectors = eigsh(operator, wanted, which="SA", v0=start, tol=1e-4, maxiter=60)[1]
    except ArpackError as error:
        vectors = getattr(error, "eigenvectors", None)
    return Count(negative, None if vectors is None or not vectors.size else vectors[: len(columns)])


def _condensed(second: Second, free: Flags, rows: Flags, shift: float) -> int | None:
    """The count in full matrices: few numbers are sooner multiplied than looked for."""
    form = second.hessian.plus(second.metric, shift).dense()
    owner = np.where(free, second.owner, condensed.FIXED)
    return condensed.count_negative(form, second.jacobian.dense()[rows], owner, PENALTY, NOISE)


def minimum_of_program(program: Program, found: Minimum) -> bool:
    """Whether a stationary point of a program at which no inequality binds is its minimum among those nearby.

    False also where that is not found out at once, in small full matrices.
    """
    numbers = program.numbers
    free = program.lower < program.upper
    if np.count_nonzero(free) > FEW:
        return False
    pattern = numbers.jacobian_pattern
    jacobian = scattered(pattern.shape, pattern.rows, pattern.columns(), numbers.jacobian(found.z))
    rows = jacobian.dense()[program.row_lower == program.row_upper]
    owner = np.where(free, owners(program.layout), condensed.FIXED)
    return (
        condensed.count_negative(hessian_at(program, found.z, found.multipliers).dense(), rows, owner, PENALTY, NOISE)
        == 0
    )


def _factorized(band: sp.csc_matrix) -> tuple[Callable[[Array], Array] | None, int]:
    """Solver of a symmetric banded matrix and its number of negative pivots; None where pivots vanish."""
    if band.shape[0] == 0:
        return (lambda right: right), 0
    try:
        factors = splu(band, permc_spec="NATURAL", diag_pivot_thresh=0.0, options={"SymmetricMode": True})
    except RuntimeError:  # exactly singular
        return None, 0
    order = np.argsort(factors.perm_c)
    if not np.array_equal(factors.perm_r, factors.perm_c):
        return None, 0
    lost = np.abs((factors.L @ factors.U) - band[order][:, order]).max()
    if not lost < NOISE:  # the pivots' signs are those of a matrix this near to the one meant
        return None, 0
    return factors.solve, int((factors.U.diagonal() < 0).sum())


def normal(jacobian: sp.csr_matrix) -> sp.csr_matrix:
    """Rows of length one; rows of zeros vanish."""
    length = np.sqrt(np.asarray(jacobian.multiply(jacobian).sum(axis=1)).ravel())
    kept = length > 1e-14
    return (sp.diags(1 / length[kept]) @ jacobian[kept]).tocsr()


def least_quotient(second: Second, free: Flags, rows: Flags) -> float:
    """The least second variation relative to the mean square of a variation, on the exact kernel of the rows."""
    columns = np.flatnonzero(free)
    jacobian = normal(second.jacobian.sparse()[np.flatnonzero(rows)][:, columns]).toarray()
    basis, triangle, _ = qr(jacobian.T, pivoting=True)
    kernel = basis[:, np.count_nonzero(np.abs(np.diag(triangle)) > 1e-11) :]
    if not kernel.shape[1]:
        return np.inf
    bend = kernel.T @ (second.hessian.sparse()[columns][:, columns] @ kernel)
    size = kernel.T @ (second.metric.sparse()[columns][:, columns] @ kernel)
    size += 1e-12 * np.trace(size) / len(size) * np.eye(len(size))
    return float(eigh(bend, size, eigvals_only=True, subset_by_index=[0, 0])[0])


def proved(second: Second, free: Flags, rows: Flags, direction: Array) -> float:
    """The second variation of a direction put onto the constraints, relative to its mean square.

    Zero where it cannot be put there: a direction that breaks them shows nothing.
    """
    columns = np.concatenate([np.flatnonzero(free & ~second.border), np.flatnonzero(free & second.border)])
    jacobian = normal(second.jacobian.sparse()[np.flatnonzero(rows)][:, columns])
    size, count = jacobian.shape[1], jacobian.shape[0]
    system = sp.bmat([[sp.eye(size), jacobian.T], [jacobian, -REPEATED * sp.eye(count)]], format="csc")
    try:
        solve = splu(system).solve
    except RuntimeError:
        return 0.0
    for _ in range(SWEEPS):
        direction = direction - solve(np.concatenate([np.zeros(size), jacobian @ direction]))[:size]
    if not np.linalg.norm(jacobian @ direction) <= OFF * np.linalg.norm(direction):
        return 0.0
    bend = float(direction @ (second.hessian.sparse()[columns][:, columns] @ direction))
    size = float(direction @ (second.metric.sparse()[columns][:, columns] @ direction))
    return bend / size if size > 0 else 0.0
