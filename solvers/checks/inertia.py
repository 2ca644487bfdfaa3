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
from scipy.linalg import eigh, lapack, qr
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
"""Up to so many variables full matrices are factorized sooner than sparse ones ..."""
FEW_AT_ONCE = 600
"""... and up to so many when they are condensed interval by interval (3 to 6 ms instead of 7 to 11)."""
TOGETHER = 16
"""So many columns of the border are solved for at once."""
MOST = 3
"""So many negative directions are looked at where there are many variables."""
CLEARLY = 1e-9
"""The reciprocal condition from which on rows are clearly independent of each other."""
DEPENDENT = 1e-11
"""What a row has beside those before it, where it depends on them."""
SWEEPS = 4
"""How often a direction is put onto the constraints: each time leaves a small share of what it was off."""
REPEATED = 1e-10
"""What lets constraints that repeat others pass when a direction is put onto them."""
OFF = 1e-10
"""How far off them, relative to its length, a direction may stay."""


def count_negative(second: Second, free: Flags, rows: Flags, shift: float, deadline: Deadline = FOREVER) -> int | None:
    """Negative directions of hessian + shift * metric on the free variables where the rows keep their values.

    None where the factors are not to be trusted.  TimeoutError when the deadline passes.
    """
    if deadline.over:
        raise TimeoutError
    if not free.any():
        return 0
    many = np.count_nonzero(free)
    counted = _condensed(second, free, rows, shift) if many <= FEW_AT_ONCE else None
    if counted is None and many <= FEW:
        _, bend, size = _on_kernel(second, free, rows)
        counted = int((np.linalg.eigvalsh(bend + shift * size) < 0).sum())
    if counted is not None:
        return max(counted, 0)
    bordered = _bordered(second, free, rows, shift, deadline)
    return None if bordered is None else bordered.negative


def negative_directions(
    second: Second, free: Flags, rows: Flags, margin: float, deadline: Deadline = FOREVER
) -> Array | None:
    """Directions (columns, on all variables) that keep the rows and whose second variation is below -margin times their
    mean square: all of few variables' kernel; else those next to the first that the penalty leaves.

    None where the factors are not to be trusted.  TimeoutError when the deadline passes.
    """
    if np.count_nonzero(free) <= FEW:
        space, bend, size = _on_kernel(second, free, rows)
        if not space.shape[1]:
            return space
        quotients, vectors = eigh(bend, size)
        return np.asarray(space @ vectors[:, quotients < -margin])
    bordered = _bordered(second, free, rows, margin, deadline)
    if bordered is None:
        return None
    if bordered.negative == 0:
        return np.zeros((len(free), 0))
    operator = LinearOperator((bordered.size,) * 2, matvec=bordered.solve, dtype=float)
    wanted, start = min(MOST, bordered.negative), np.sin(1.0 + np.arange(bordered.size))
    try:
        found = eigsh(operator, wanted, which="SA", v0=start, tol=1e-4, maxiter=60)[1]
    except ArpackError as error:
        found = getattr(error, "eigenvectors", np.zeros((bordered.size, 0)))
    directions = np.zeros((len(free), found.shape[1]))
    directions[bordered.columns] = found[: len(bordered.columns)]
    return _on_rows(second, free, rows, directions)


def quotients(second: Second, directions: Array) -> Array:
    """The second variation of directions relative to their mean square."""
    bend = np.einsum("ij,ij->j", directions, second.hessian.sparse() @ directions)
    size = np.einsum("ij,ij->j", directions, second.metric.sparse() @ directions)
    return np.asarray(np.where(size > 0, bend / np.where(size > 0, size, 1.0), 0.0))


@dataclass(frozen=True, slots=True)
class _Bordered:
    """A penalised form, in a band and its border: how many negative directions it has, its variables in order, how
    many unknowns it has with those for rows that couple the whole curve, and its inverse."""

    negative: int
    columns: Indices
    size: int
    solve: Callable[[Array], Array]


def _bordered(second: Second, free: Flags, rows: Flags, shift: float, deadline: Deadline) -> _Bordered | None:
    """The form factorized; None where that is not to be trusted."""
    inside, border = np.flatnonzero(free & ~second.border), np.flatnonzero(free & second.border)
    near, far = np.flatnonzero(rows & ~second.long), np.flatnonzero(rows & second.long)
    columns = np.concatenate([inside, border])
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

    def inverse(vector: Array) -> Array:
        """The whole matrix's inverse, by blocks."""
        if deadline.over:
            raise TimeoutError
        inner = solve(vector[:size])
        outer = np.linalg.lstsq(rest, vector[size:] - side.T @ inner, rcond=None)[0] if len(rest) else vector[size:]
        return np.concatenate([inner - solve(side @ outer), outer])

    return _Bordered(max(negative, 0), columns, whole.shape[0], inverse)


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
    if np.count_nonzero(free) > FEW_AT_ONCE:
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
    space, bend, size = _on_kernel(second, free, rows)
    return float(eigh(bend, size, eigvals_only=True, subset_by_index=[0, 0])[0]) if space.shape[1] else np.inf


def kernel(rows: Array) -> Array:
    """Orthonormal columns that span what rows of length one do not see.

    Rows that are clearly independent are factorized as they stand, and of the factor only the columns wanted are made;
    others with pivoting, which takes several times as long.
    """
    count, size = rows.shape
    if 0 < count <= size:
        (reflectors, factors), triangle = qr(rows.T, mode="raw")
        if lapack.dtrcon(triangle[:count])[0] > CLEARLY:
            last = np.eye(size)[:, count:]
            return np.asarray(lapack.dormqr("L", "N", reflectors, factors, last, TOGETHER * max(size - count, 1))[0])
    basis, triangle, _ = qr(rows.T, pivoting=True)
    return np.asarray(basis[:, np.count_nonzero(np.abs(np.diag(triangle)) > DEPENDENT) :])


def _on_kernel(second: Second, free: Flags, rows: Flags) -> tuple[Array, Array, Array]:
    """Directions (columns, on all variables) that span the kernel of the rows, and on it second variation and mean
    square, this with a little added that keeps it regular."""
    columns = np.flatnonzero(free)
    own = kernel(normal(second.jacobian.sparse()[np.flatnonzero(rows)][:, columns]).toarray())
    space = np.zeros((len(free), own.shape[1]))
    space[columns] = own
    bend, size = (np.asarray(space.T @ (form.sparse() @ space)) for form in (second.hessian, second.metric))
    return space, bend, size + 1e-12 * np.trace(size) / max(len(size), 1) * np.eye(len(size))


def _on_rows(second: Second, free: Flags, rows: Flags, directions: Array) -> Array:
    """Directions (columns) put onto the constraints, without those that cannot be: what breaks them shows nothing."""
    columns = np.flatnonzero(free)
    jacobian = normal(second.jacobian.sparse()[np.flatnonzero(rows)][:, columns])
    size, count = jacobian.shape[1], jacobian.shape[0]
    system = sp.bmat([[sp.eye(size), jacobian.T], [jacobian, -REPEATED * sp.eye(count)]], format="csc")
    try:
        solve = splu(system).solve
    except RuntimeError:
        return directions[:, :0]
    put = directions[columns]
    for _ in range(SWEEPS):
        put = put - solve(np.vstack([np.zeros_like(put), jacobian @ put]))[:size]
    kept = np.linalg.norm(jacobian @ put, axis=0) <= OFF * np.linalg.norm(put, axis=0)
    directions = np.zeros((len(free), np.count_nonzero(kept)))
    directions[columns] = put[:, kept]
    return directions
