"""The second-order problem of a solved mesh: its matrices, and how many negative directions they have.

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
from solvers.checks.condensed import SHARED
from solvers.checks.sampling import Sampler
from solvers.checks.scattered import Scattered, both_triangles, scattered
from solvers.checks.variation import second_variation
from solvers.deadline import FOREVER, Deadline
from solvers.search.signals import SWITCH
from solvers.transcription.layout import Layout
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

PENALTY = 1e-5
AT_BOUND = 1e-6
"""How near to a limit, scaled, counts as resting on it."""
PUSHED = 1e-6
"""Multipliers, times the size of the variable and relative to its measure, that count as holding a limit."""
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
class Second:
    """The second-order problem of a solved mesh: all scaled as the program is."""

    hessian: Scattered
    jacobian: Scattered
    metric: Scattered  # dz' metric dz is the mean square of a variation, times the size of the functional
    fixed: Flags
    resting: Flags  # on a bound
    pushed: Flags  # and held there by a multiplier
    equalities: Flags
    at_limit: Flags
    forced: Flags
    long: Flags  # rows that couple the whole curve
    border: Flags  # variables that do, and those of the last interval
    owner: Indices  # the interval inside of which each variable is, or `SHARED`


@dataclass(frozen=True, slots=True)
class Count:
    """How many negative directions a quadratic form has on the kernel of constraints; columns of `directions` are near
    the first of them."""

    negative: int
    directions: Array | None


def second_order(sampler: Sampler) -> Second:
    """Hessian, Jacobian and what is active at the solution."""
    path, program = sampler.path, sampler.path.program
    where, rows, numbers = program.layout, program.rows, program.numbers
    z = path.z / program.scale
    size = abs(program.value_scale)
    multipliers = path.row_multipliers * program.row_scale / size
    bounds = path.bound_multipliers * program.scale / size
    hessian, metric = second_variation(sampler)
    pattern, nonzeros = numbers.jacobian_pattern, numbers.jacobian(z)
    jacobian = scattered(pattern.shape, pattern.rows, pattern.columns(), nonzeros)
    values = numbers.constraints(z)
    share = sampler.value_size / size
    weight = where.measures * np.abs((path.places[where.stretch + 1] - path.places[where.stretch]) / sampler.span)
    fixed = program.lower == program.upper
    held = np.zeros(where.size, bool)
    held[where.controls] = fixed[where.controls]  # arcs on a bound: not given, so they have to be pushed against it
    pull = -(numbers.gradient(z) + pattern.times_from_left(multipliers, nonzeros))
    bounds = np.where(held, pull, bounds)
    fixed &= ~held
    fixed[smooth_junctions(sampler)] = True
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
    return Second(hessian, jacobian, metric, fixed, resting, pushed, equalities, at_limit, forced,
                  long, border, _owners(where))  # fmt: skip


def _owners(where: Layout) -> Indices:
    """The interval inside of which each variable is, or `SHARED`."""
    owner = np.full(where.size, SHARED)
    interval = np.repeat(np.arange(len(where.first) - 1), np.diff(where.first))[:, None]
    owner[where.inner] = owner[where.controls] = interval
    owner[where.nodes] = SHARED
    return owner


SMOOTH = 1e-3
"""Jump of a control, relative to its size, up to which it goes on smoothly."""


def smooth_junctions(sampler: Sampler) -> Indices:
    """The switches at which no control jumps, by where their places stand in z.

    Moving such a place alone changes the curve by nothing of second order: the variation of the controls says already
    where the arcs meet (Maurer, 1981, on first- and second-order conditions with control constraints; from memory).
    """
    where, problem = sampler.path.program.layout, sampler.problem
    found = []
    for place, node in zip(problem.places, where.at_place, strict=True):
        names = [parameter.name for parameter in problem.parameters]
        if not place.label.startswith(SWITCH + " ") or place.label not in names:
            continue
        jump = np.abs(sampler.control_ends[node, 0] - sampler.control_ends[node - 1, 1]) / sampler.control_sizes
        if jump.max(initial=0.0) <= SMOOTH:
            found.append(where.parameters[names.index(place.label)])
    return np.array(found, dtype=np.int64)


def hessian_of_program(path: Trajectory) -> Scattered:
    """The second derivatives of the program's own Lagrangian, whose quadrature is at the collocation points."""
    program = path.program
    multipliers = path.row_multipliers * program.row_scale / abs(program.value_scale)
    pattern, numbers = program.numbers.hessian_pattern, program.numbers
    upper = numbers.hessian(path.z / program.scale, 1.0, multipliers)
    return both_triangles(scattered(pattern.shape, pattern.rows, pattern.columns(), upper))


def minimum_of_program(path: Trajectory) -> bool:
    """Whether a stationary point of a program at which no inequality binds is its minimum among those nearby.

    False also where that is not found out at once, in small full matrices.
    """
    program, numbers = path.program, path.program.numbers
    free = program.lower < program.upper
    if np.count_nonzero(free) > FEW:
        return False
    pattern = numbers.jacobian_pattern
    jacobian = scattered(pattern.shape, pattern.rows, pattern.columns(), numbers.jacobian(path.z / program.scale))
    rows = jacobian.dense()[program.row_lower == program.row_upper]
    owner = np.where(free, _owners(program.layout), condensed.FIXED)
    return condensed.count_negative(hessian_of_program(path).dense(), rows, owner, PENALTY, NOISE) == 0


def _pushed_throughout(sampler: Sampler, resting: Flags, bounds: Array, least: Array) -> Flags:
    """Controls that rest on one bound all through an interval that pushes on the whole: a switch may touch its end."""
    where, values = sampler.path.program.layout, sampler.path.controls
    controls, first = where.controls, where.first[:-1]
    if not resting[controls].any():
        return np.zeros(values.shape, bool)
    above = np.abs(sampler.bounds[3] - values) < np.abs(values - sampler.bounds[2])
    push = np.where(above, bounds[controls], -bounds[controls])
    whole = np.minimum.reduceat(np.where(resting[controls], push, -np.inf), first, axis=0) >= -least.max()
    whole &= np.add.reduceat(push, first, axis=0) > np.add.reduceat(least, first)[:, None]
    return np.asarray(np.repeat(whole, np.diff(where.first), axis=0))


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
