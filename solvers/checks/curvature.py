"""Is the second variation positive, and if not, from where on (the first conjugate point)?

The second variation (`variation`) must be positive on all variations that keep dynamics and active limits.  Constraints
that couple neighbours only enter as a penalty, (J dz)^2 / e, which keeps the matrix banded in the order of the curve;
the few that couple everything (integrals, conditions) and the free numbers stand in a border, together with the last
interval (without it an eigenvalue problem's band would be singular at its very eigenvalue).  The pivots of the band
count its negative directions (Sylvester), those of the Schur complement the rest (Haynsworth).  Variations that
vanish from some place on belong to a leading part, and the first part that has a negative one ends at the first
conjugate point (Jacobi).

Both answers are safe.  A pass holds for any e, since the penalty vanishes on the variations in question.  A negative
direction is put back onto the constraints and its second variation computed before the curve is condemned.  A margin
decides between both: the second variation is compared with the mean square of the variation itself, relative to the
functional; in between nothing is said (a closed curve may be turned, an eigenvector may be scaled).

References: Gelfand, Fomin (1963), Calculus of Variations, chapter 5; Nocedal, Wright (2006), Numerical Optimization,
section 16.2 (from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.linalg import eigh, qr
from scipy.sparse.linalg import ArpackError, LinearOperator, eigsh, lsqr, splu

from solvers.checks import legendre
from solvers.checks.sampling import Sampler
from solvers.checks.variation import second_variation
from solvers.solution import Check, Status

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

NAME = "conjugate points"
MARGIN = 1e-5
PENALTY = 1e-5
AT_BOUND = 1e-6
"""How near to a limit, scaled, counts as resting on it."""
PUSHED = 1e-6
"""Multipliers, times the size of the variable and relative to its measure, that count as holding a limit."""
NOISE = 1e-9
"""Rounding error of the factors that leaves the margin trustworthy; entries of the Hessian are of the order of one."""
DENSE = 600
"""Up to so many variables the kernel of the constraints is computed where the penalty leaves doubts."""
FINE_MARGIN = 1e-7
"""The margin then: only the multipliers' own errors remain."""
LARGEST = 60_000


@dataclass(frozen=True, slots=True)
class Second:
    """The second-order problem of a solved mesh: all scaled as the program is."""

    hessian: sp.csc_matrix
    jacobian: sp.csr_matrix
    metric: sp.csc_matrix  # dz' metric dz is the mean square of a variation, times the size of the functional
    fixed: Flags
    resting: Flags  # on a bound
    pushed: Flags  # and held there by a multiplier
    equalities: Flags
    at_limit: Flags
    forced: Flags
    long: Flags  # rows that couple the whole curve
    border: Flags  # variables that do, and those of the last interval


@dataclass(frozen=True, slots=True)
class Count:
    """How many negative directions a quadratic form has on the kernel of constraints; columns of `directions` are near
    the first of them."""

    negative: int
    directions: Array | None


def check(sampler: Sampler) -> Check:
    """Passed where the second variation is positive, failed where a direction is proved negative."""
    program = sampler.path.program
    if program.layout.size > LARGEST:
        return Check(NAME, Status.NOT_APPLICABLE, f"The mesh has more than {LARGEST} unknowns; this was not tried.")
    second = second_order(sampler)
    if not np.isfinite(second.hessian.data).all():
        return Check(NAME, Status.NOT_APPLICABLE, "The second variation is undefined somewhere along the curve.")
    strict = ~(second.fixed | second.pushed)
    rows = second.equalities | second.forced
    positive = count_negative(second, strict, rows, -MARGIN)
    if positive is not None and positive.negative == 0:
        return Check(NAME, Status.PASSED, _sentence(sampler, second, strict))
    if np.count_nonzero(strict) <= DENSE and least_quotient(second, strict, rows) > FINE_MARGIN:
        return Check(NAME, Status.PASSED, _sentence(sampler, second, strict))
    free = ~(second.fixed | second.resting)
    rows = second.equalities | second.at_limit
    negative = count_negative(second, free, rows, MARGIN)
    if negative is None:
        return Check(NAME, Status.NOT_APPLICABLE, "The second variation could not be decided: its matrix is singular.")
    if negative.negative > 0 and negative.directions is not None:
        share = min(proved(second, free, rows, direction) for direction in negative.directions.T)
        if share < -MARGIN:
            place = _conjugate(sampler, second, free, rows)
            return Check(NAME, Status.FAILED, "A variation that keeps all conditions lowers the functional in second "
                         f"order by {-share:.1e} of its size; the first such vanishes beyond the place given.",
                         -share, MARGIN, place)  # fmt: skip
    return Check(NAME, Status.NOT_APPLICABLE, "Not decided: the second variation vanishes in some direction (within "
                 f"{MARGIN:.0e} of the functional), as along families of equally good curves.")  # fmt: skip


def _sentence(sampler: Sampler, second: Second, free: Flags) -> str:
    controls = sampler.path.program.layout.controls
    if controls.size and not free[controls].all():
        held = legendre.held_controls(sampler) if sampler.point.controls else np.zeros((0, 0), bool)
        share = float(sampler.mean(held.all(axis=1).astype(float)))
        if share > 0.9:
            return ("Bang-bang: the controls are pushed against their bounds strictly, but for the switches, and no "
                    "change of the switches that keeps the conditions lowers the functional.")  # fmt: skip
    return "The second variation is positive on all variations that keep the conditions: no conjugate point."


def second_order(sampler: Sampler) -> Second:
    """Hessian, Jacobian and what is active at the solution."""
    path, program = sampler.path, sampler.path.program
    where, rows, functions = program.layout, program.rows, program.functions
    z, constants = path.z / program.scale, list(program.compiled.constants)
    size = abs(program.value_scale)
    multipliers = path.row_multipliers * program.row_scale / size
    bounds = path.bound_multipliers * program.scale / size
    hessian, metric = second_variation(sampler)
    g, jacobian = functions["jac_g"](z, constants)
    values = np.asarray(g).ravel()
    share = sampler.value_size / size
    weight = where.measures * np.abs((path.places[where.stretch + 1] - path.places[where.stretch]) / sampler.span)
    fixed = program.lower == program.upper
    held = np.zeros(where.size, bool)
    held[where.controls] = fixed[where.controls]  # arcs on a bound: not given, so they have to be pushed against it
    pull = -(np.asarray(functions["grad_f"](z, constants)[1]).ravel() + _matrix(jacobian).T @ multipliers)
    bounds = np.where(held, pull, bounds)
    fixed &= ~held
    resting = ~fixed & (held | (z - program.lower <= AT_BOUND) | (program.upper - z <= AT_BOUND))
    measure = np.ones(where.size)
    measure[where.inner] = measure[where.controls] = weight[:, None]
    pushed = resting & (np.abs(bounds) > PUSHED * share * measure)
    pushed[where.controls] |= _pushed_throughout(sampler, resting, bounds, PUSHED * share * weight)
    equalities = program.row_lower == program.row_upper
    at_limit = ~equalities & ((values - program.row_lower <= AT_BOUND) | (program.row_upper - values <= AT_BOUND))
    row_measure = np.ones(rows.count)
    if sampler.point.constraints:
        row_measure[rows.pointwise : rows.rims] = np.repeat(weight, sampler.point.constraints)
    forced = at_limit & (np.abs(multipliers) > PUSHED * share * row_measure)
    long = np.zeros(rows.count, bool)
    long[rows.integrals :] = True
    border = np.zeros(where.size, bool)
    border[where.nodes[-2].min(initial=where.size) :] = True  # the last interval, places, parameters, integrals
    if not sampler.point.states:
        border[where.controls[where.first[-2], 0] :] = True
    return Second(hessian, _matrix(jacobian).tocsr(), metric, fixed, resting, pushed, equalities, at_limit, forced,
                  long, border)  # fmt: skip


def _pushed_throughout(sampler: Sampler, resting: Flags, bounds: Array, least: Array) -> Flags:
    """Controls that rest on one bound all through an interval that pushes on the whole: a switch may touch its end."""
    where, values = sampler.path.program.layout, sampler.path.controls
    if not values.size:
        return np.zeros(values.shape, bool)
    controls, first = where.controls, where.first[:-1]
    above = np.abs(sampler.bounds[3] - values) < np.abs(values - sampler.bounds[2])
    push = np.where(above, bounds[controls], -bounds[controls])
    whole = np.minimum.reduceat(np.where(resting[controls], push, -np.inf), first, axis=0) >= -least.max()
    whole &= np.add.reduceat(push, first, axis=0) > np.add.reduceat(least, first)[:, None]
    return np.asarray(np.repeat(whole, np.diff(where.first), axis=0))


def _matrix(value: object) -> sp.csc_matrix:
    pattern = value.sparsity()  # type: ignore[attr-defined]
    return sp.csc_matrix((np.array(value.nonzeros()), np.array(pattern.row()), np.array(pattern.colind())),  # type: ignore[attr-defined]
                         shape=pattern.shape)  # fmt: skip


def count_negative(second: Second, free: Flags, rows: Flags, shift: float) -> Count | None:
    """Negative directions of hessian + shift * metric on the free variables where the rows keep their values.

    None where the factors are not to be trusted.
    """
    inside, border = np.flatnonzero(free & ~second.border), np.flatnonzero(free & second.border)
    near, far = np.flatnonzero(rows & ~second.long), np.flatnonzero(rows & second.long)
    columns = np.concatenate([inside, border])
    if not len(columns):
        return Count(0, None)
    local, coupling = _normal(second.jacobian[near][:, columns]), _normal(second.jacobian[far][:, columns])
    hessian = second.hessian[columns][:, columns] + shift * second.metric[columns][:, columns]
    penalized = (hessian + local.T @ local / PENALTY).tocsc()
    whole = sp.bmat([[penalized, coupling.T], [coupling, -PENALTY * sp.eye(coupling.shape[0])]], format="csc")
    size = len(inside)
    band, side = whole[:size][:, :size], whole[:size][:, size:].toarray()
    corner = whole[size:][:, size:].toarray()
    solve, negative = _factorized(band)
    if solve is None:
        return None
    rest = corner - side.T @ solve(side) if side.shape[1] else corner  # Schur complement of the band
    negative += int((np.linalg.eigvalsh((rest + rest.T) / 2) < 0).sum()) - coupling.shape[0]
    if negative <= 0 or shift < 0:  # only a count that stands against the margin needs its direction
        return Count(max(negative, 0), None)

    def inverse(vector: Array) -> Array:
        """The whole matrix's inverse, by blocks."""
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


def _normal(jacobian: sp.csr_matrix) -> sp.csr_matrix:
    """Rows of length one; rows of zeros vanish."""
    length = np.sqrt(np.asarray(jacobian.multiply(jacobian).sum(axis=1)).ravel())
    kept = length > 1e-14
    return (sp.diags(1 / length[kept]) @ jacobian[kept]).tocsr()


def least_quotient(second: Second, free: Flags, rows: Flags) -> float:
    """The least second variation relative to the mean square of a variation, on the exact kernel of the rows."""
    columns = np.flatnonzero(free)
    jacobian = _normal(second.jacobian[np.flatnonzero(rows)][:, columns]).toarray()
    basis, triangle, _ = qr(jacobian.T, pivoting=True)
    kernel = basis[:, np.count_nonzero(np.abs(np.diag(triangle)) > 1e-11) :]
    if not kernel.shape[1]:
        return np.inf
    bend = kernel.T @ (second.hessian[columns][:, columns] @ kernel)
    size = kernel.T @ (second.metric[columns][:, columns] @ kernel)
    size += 1e-12 * np.trace(size) / len(size) * np.eye(len(size))
    return float(eigh(bend, size, eigvals_only=True, subset_by_index=[0, 0])[0])


def proved(second: Second, free: Flags, rows: Flags, direction: Array) -> float:
    """The second variation of a direction put onto the constraints, relative to its mean square."""
    columns = np.concatenate([np.flatnonzero(free & ~second.border), np.flatnonzero(free & second.border)])
    jacobian = _normal(second.jacobian[np.flatnonzero(rows)][:, columns])
    for _ in range(2):
        direction = direction - lsqr(jacobian, jacobian @ direction, atol=1e-14, btol=1e-14)[0]
    bend = float(direction @ (second.hessian[columns][:, columns] @ direction))
    size = float(direction @ (second.metric[columns][:, columns] @ direction))
    return bend / size if size > 0 else 0.0


def _conjugate(sampler: Sampler, second: Second, free: Flags, rows: Flags) -> float:
    """The first break such that a variation that vanishes beyond it is negative, by bisection."""
    where = sampler.path.program.layout
    low, high = 0, sampler.count
    while high - low > 1:
        middle = (low + high) // 2
        kept = free.copy()
        kept[where.nodes[middle, 0] if sampler.point.states else where.controls[where.first[middle], 0] :] = False
        found = count_negative(second, kept, rows, MARGIN)
        low, high = (low, middle) if found is not None and found.negative > 0 else (middle, high)
    return float(sampler.path.breaks[high])
