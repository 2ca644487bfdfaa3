"""Costates between the nodes, integrated anew from their values at the nodes.

On every interval p' = -H_x is integrated along the stored curve from the right end to the left (on the last interval,
if its right end is fixed, from the left, since a costate may be infinite there).  What is found inside the interval
obeys the costate equation whatever the solver did; what it lacks at the other end is the jump that a check must weigh.
Where a constraint on states alone is touched, its multiplier is a measure: there, if the costate lacks its push, the
stored polynomials are kept, and the weak form of the equation takes the place of the jump.

The equation is linear; three-stage Gauss steps (order six) solve it on all intervals side by side.
Reference: Hairer, Wanner (1996), Solving Ordinary Differential Equations II, section IV.5 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from solvers.checks.sampling import Sampler

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

LACKING = 1e-5
"""A jump, relative to the functional, that needs the push of a limit as its reason."""
TOUCHED = 1e-5
"""Multipliers of limits on states alone, relative to the functional, that make an interval a touched one."""

LARGEST_BATCH = 2_000_000
"""How many numbers the steps of several intervals may take that are solved at once."""

_ROOT = np.sqrt(15.0)
_A = np.array([[5 / 36, 2 / 9 - _ROOT / 15, 5 / 36 - _ROOT / 30],
               [5 / 36 + _ROOT / 24, 2 / 9, 5 / 36 - _ROOT / 24],
               [5 / 36 + _ROOT / 30, 2 / 9 + _ROOT / 15, 5 / 36]])  # fmt: skip
_B = np.array([5.0, 8.0, 5.0]) / 18
_C = np.array([0.5 - _ROOT / 10, 0.5, 0.5 + _ROOT / 10])


@dataclass(frozen=True, slots=True)
class Continued:
    """Costates on the grid of halves (P x n), what they lack at the far end of each interval (N x n), and where that
    end is (N+1 breaks by number); `kept` marks the intervals where the stored polynomials stay in force."""

    values: Array
    jumps: Array
    far: NDArray[np.int64]
    kept: Flags


@dataclass(frozen=True, slots=True)
class Steps:
    """Local places where the solution is wanted, both ends and a few between, and the stages of the steps."""

    edges: Array
    wanted: NDArray[np.int64]

    @property
    def stages(self) -> Array:
        """Local places of the stages, step by step."""
        return np.asarray((self.edges[:-1, None] + np.diff(self.edges)[:, None] * _C).ravel())


def steps_through(places: Array) -> Steps:
    """Steps that pass through local places, graded towards both ends, where coefficients may grow without bound.

    They look the same from both ends where the places do.
    """
    outer = np.concatenate([np.geomspace(places[0], places[1], 4)[1:-1], [np.sqrt(places[1] * places[2])]])
    edges = np.sort(np.concatenate([[0.0, 1.0], outer, 1 - outer, places]))
    return Steps(edges, np.searchsorted(edges, places))


def integrate(steps: Steps, matrix: Array, source: Array, length: Array, start: Array) -> Array:
    """Solve p' = -(A' p + b) on N intervals from right to left: p at all edges, N x E x n.

    `matrix` (N x S x n x n: slopes of rate i by state j) and `source` (N x S x n) at the S stages, `length` (N) of the
    intervals in the independent variable, `start` (N x n) at their right ends.
    """
    count, n = start.shape
    total = len(steps.edges)
    step = np.diff(steps.edges) * length[:, None]
    if not matrix.any():  # no rate depends on a state: only sums are left
        moves = step[:, :, None] * np.einsum("s,nksi->nki", _B, source.reshape(count, total - 1, 3, n))
        parts = np.concatenate([start[:, None], moves[:, ::-1]], axis=1)
        return np.asarray(np.cumsum(parts, axis=1)[:, ::-1])
    values = np.empty((count, total, n))
    values[:, -1] = start
    group = max(1, LARGEST_BATCH // ((total - 1) * 3 * n * (4 * n + 1) or 1))
    for first in range(0, count, group):
        own = slice(first, first + group)
        turned, added = _moves(matrix[own], source[own], step[own])
        part = values[own]
        for k in range(total - 2, -1, -1):
            before = part[:, k + 1]
            part[:, k] = before + (turned[:, k] @ before[:, :, None])[:, :, 0] + added[:, k]
    return values


def _moves(matrix: Array, source: Array, step: Array) -> tuple[Array, Array]:
    """What each step adds to the solution: a matrix times it (N x E-1 x n x n), and a vector (N x E-1 x n)."""
    (count, steps), n = step.shape, matrix.shape[-1]
    nodes = _A[::-1, ::-1]  # the method is symmetric: backwards its stages change places
    transposed = np.swapaxes(matrix, -1, -2).reshape(count, steps, 3, n, n)
    system = -step[:, :, None, None, None, None] * transposed[:, :, :, None] * nodes[:, :, None, None]
    system = np.swapaxes(system, 3, 4).reshape(-1, 3 * n, 3 * n) + np.eye(3 * n)
    right = np.concatenate([transposed, source.reshape(count, steps, 3, n, 1)], axis=-1)
    slopes = _solved(system, right.reshape(-1, 3 * n, n + 1)).reshape(count, steps, 3, n, n + 1)
    moves = step[:, :, None, None] * np.einsum("s,nksij->nkij", _B, slopes)
    return moves[..., :n], moves[..., n]


def _solved(system: Array, right: Array) -> Array:
    """Solve all systems; those that hold undefined numbers have an undefined solution."""
    good = np.isfinite(system).all(axis=(1, 2)) & np.isfinite(right).all(axis=(1, 2))
    if good.all():
        return np.asarray(np.linalg.solve(system, right))
    answer = np.full_like(right, np.nan)
    answer[good] = np.linalg.solve(system[good], right[good])
    return answer


def continued(sampler: Sampler, steps: Steps) -> Continued:
    """The costates at the wanted places of every interval."""
    count, n = sampler.count, sampler.point.states
    if n == 0:
        none = np.zeros((count, 0))
        return Continued(np.zeros((count * len(steps.wanted), 0)), none, np.arange(count), np.zeros(count, dtype=bool))
    left, right = sampler.costate_ends[:, 0], sampler.costate_ends[:, 1]
    joined = np.append(np.diff(sampler.stretch) == 0, False)  # the next interval belongs to the same stretch
    start = right.copy()
    start[joined] = left[1:][joined[:-1]]
    from_left = count > 1 and bool(joined[-2]) and any(fixed for _, fixed in sampler.fixed_ends)
    if from_left:
        start[-2:] = right[-2]  # the last interval's own polynomial is of no use at its left end
    far = np.arange(count)
    sample = sampler.grid(steps.stages)
    slopes = sampler.slopes(sample)
    matrix = _rate_slopes(sampler, slopes, sample.interval).reshape(count, -1, n, n)
    weights = sampler.weights(sample, costates=np.zeros(n))
    source = sampler.gradient(sample, slopes, weights)[:, :n].reshape(count, -1, n)
    if from_left:  # turned round, that interval runs from right to left as well
        matrix[-1], source[-1] = -matrix[-1, ::-1], -source[-1, ::-1]
    values = integrate(steps, matrix, source, sampler.length, start)
    jumps = values[:, 0] - left
    if from_left:
        values[-1] = values[-1, ::-1].copy()
        jumps[-1], far[-1] = values[-1, -1] - right[-1], count
    inside = values[:, steps.wanted]
    shares = (sampler.path.breaks[far] - sampler.path.breaks[0]) / sampler.span
    weights = np.column_stack([variation(shares, fixed)[0] for fixed in sampler.fixed_ends])
    lacking = (
        np.where(weights > 0, np.abs(jumps * weights), 0.0) @ sampler.state_sizes > LACKING * sampler.program_value
    )
    lacking |= (weights == 0).any(axis=1)  # at a fixed end a costate is free: no jump can tell
    kept = (touched(sampler) & lacking) | ~np.isfinite(inside).all(axis=(1, 2))
    if kept.any():
        places = steps.edges[steps.wanted]
        inside[kept] = sampler.in_each(sampler.costates[kept], places).reshape(-1, len(places), n)
    return Continued(inside.reshape(-1, n), jumps, far, kept)


def _rate_slopes(sampler: Sampler, slopes: Array, interval: NDArray[np.int64]) -> Array:
    """Slopes of the rates by the states, per unit of the independent variable (P x n x n)."""
    n = sampler.point.states
    matrix = np.zeros((len(slopes), n, n))
    for entry, (row, column) in enumerate(
        zip(sampler.point.jacobian_rows, sampler.point.jacobian_columns, strict=True)
    ):  # fmt: skip
        if row < n and column < n:
            matrix[:, row, column] = slopes[:, entry]
    return np.asarray(matrix / (sampler.end - sampler.start)[interval, None, None])


def variation(share: Array, fixed: tuple[bool, bool]) -> tuple[Array, Array]:
    """A smooth variation of largest value one that vanishes at fixed ends, and its slope, at shares of the range."""
    match fixed:
        case (True, True):
            return 4 * share * (1 - share), 4 - 8 * share
        case (True, False):
            return share * (2 - share), 2 - 2 * share
        case (False, True):
            return 1 - share**2, -2 * share
        case _:
            return np.ones_like(share), np.zeros_like(share)


def touched(sampler: Sampler) -> Flags:
    """The intervals where a limit on states alone is pushed against."""
    path, n, c = sampler.path, sampler.point.states, sampler.point.constraints
    where = path.program.layout
    owner = np.repeat(np.arange(sampler.count), np.diff(where.first))
    shares = (path.points - path.breaks[0]) / sampler.span
    weights = np.column_stack([variation(shares, fixed)[0] for fixed in sampler.fixed_ends])
    pushes = (np.abs(path.bound_multipliers[where.inner]) * weights * sampler.state_sizes).sum(axis=1)
    if c:
        multipliers = path.row_multipliers[path.program.rows.pointwise : path.program.rows.rims].reshape(-1, c)
        alone = np.array([not sampler.holds_controls(n + k) for k in range(c)])
        pushes = pushes + np.abs(multipliers[:, alone]) @ sampler.output_sizes[n : n + c][alone]
    return np.asarray(np.bincount(owner, pushes, sampler.count) > TOUCHED * sampler.program_value)
