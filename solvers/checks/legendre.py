"""Is the Hamiltonian convex in the free controls along the curve (Legendre's necessary condition)?

At every place the second derivative of H in the controls is taken on the directions that are left: controls on a bound
are held, and directions that active constraints forbid are projected out.  Its least eigenvalue, relative to the
Hamiltonian for changes as large as the controls themselves, must not be negative.  The figure is the mean over the
curve of its negative part, so that the noise of a multiplier on a vanishing interval does not condemn a curve.

Reference: Gelfand, Fomin (1963), Calculus of Variations, section 25 (from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import Sampler
from solvers.problem import Seek
from solvers.solution import Check, Status
from solvers.transcription.limits import constants_of, interval_of

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

NAME = "Legendre"
AT_LIMIT = 1e-4
"""How near to its limit, relative to its size, a quantity counts as held by it."""
FLAT = 1e-7
"""Relative eigenvalues below this count as zero."""


def check(sampler: Sampler) -> Check:
    """The mean negative part of the least eigenvalue, against the tolerance."""
    m = sampler.point.controls
    threshold = max(sampler.tolerance, FLAT)
    if m == 0:
        return Check(NAME, Status.NOT_APPLICABLE, "There is no control.")
    least, free = least_eigenvalues(sampler)
    if not free.any():
        return Check(NAME, Status.NOT_APPLICABLE, "Every control is held by its limits all along.")
    negative = np.where(free, np.maximum(-least, 0.0), 0.0)
    figure = float(sampler.mean(np.where(np.isfinite(negative), negative, np.inf)))
    worst = int(np.argmax(negative))
    place = float(sampler.halves.places[worst]) if figure > 0 else None
    greatest = sampler.asked.seek is Seek.MAXIMUM  # and then the user's Hamiltonian has the other sign
    if figure > threshold:
        bends, change = ("upwards", "raise") if greatest else ("downwards", "lower")
        return Check(NAME, Status.FAILED, f"The Hamiltonian bends {bends} in the free controls: faster wiggles of "
                     f"the curve {change} the functional.", figure, threshold, place)  # fmt: skip
    flat = float(np.abs(sampler.halves.measure)[free & (np.abs(least) <= FLAT)].sum())
    whole = float(np.abs(sampler.halves.measure)[free].sum())
    if flat > 0.999 * whole:
        return Check(NAME, Status.NOT_APPLICABLE, "The Hamiltonian is linear in the free controls: bang-bang or "
                     "singular, Legendre's condition says nothing.")  # fmt: skip
    strictly = "strictly " if flat < 1e-3 * whole else ""
    shape = "concave" if greatest else "convex"
    return Check(NAME, Status.PASSED, f"The Hamiltonian is {strictly}{shape} in the free controls along the curve.",
                 figure, threshold, place)  # fmt: skip


def least_eigenvalues(sampler: Sampler) -> tuple[Array, Flags]:
    """On the grid of halves: the least relative eigenvalue of H_uu on what is free, and whether anything is free."""
    n, m = sampler.point.states, sampler.point.controls
    sample, sizes = sampler.halves, sampler.control_sizes
    numbers = sampler.halves_bends
    bends = np.zeros((len(sample.local), m, m))
    for entry, (row, column) in enumerate(
        zip(sampler.point.hessian_rows, sampler.point.hessian_columns, strict=True)
    ):  # fmt: skip
        if n <= row < n + m and n <= column < n + m:
            bends[:, row - n, column - n] = bends[:, column - n, row - n] = numbers[:, entry]
    bends *= sizes[:, None] * sizes / (sampler.power * (sampler.end - sampler.start)[sample.interval, None, None])
    held = held_controls(sampler)
    forbidden = [np.where(held[:, j, None], np.eye(m)[j], 0.0) for j in range(m)]
    forbidden += [_active_slope(sampler, k) for k in range(sampler.point.constraints)]
    rows = np.stack(forbidden, axis=1)
    undefined = ~np.isfinite(bends).all(axis=(1, 2)) | ~np.isfinite(rows).all(axis=(1, 2))
    bends[undefined], rows[undefined] = -np.eye(m), 0.0
    if not rows.any():
        return np.asarray(np.linalg.eigvalsh(bends)[:, 0]), np.full(len(bends), True)
    _, strengths, directions = np.linalg.svd(rows, full_matrices=True)
    rank = (strengths > 1e-9).sum(axis=1)
    left_over = np.arange(m) >= rank[:, None]  # rows of `directions` that span what is free
    basis = directions * left_over[:, :, None]
    reduced = np.einsum("pai,pij,pbj->pab", basis, bends, basis)
    reduced += np.einsum("pa,ab->pab", np.where(left_over, 0.0, 1e30), np.eye(m))
    return np.linalg.eigvalsh(reduced)[:, 0], rank < m


def held_controls(sampler: Sampler) -> Flags:
    """Which controls rest on a constant bound, on the grid of halves."""
    n, m = sampler.point.states, sampler.point.controls
    controls = sampler.halves.v[:, n : n + m]
    lower, upper = sampler.bounds[2:]
    size = np.where(np.isfinite(upper - lower), np.minimum(upper - lower, sampler.control_sizes * 2),
                    sampler.control_sizes)  # fmt: skip
    return (controls - lower <= AT_LIMIT * size) | (upper - controls <= AT_LIMIT * size)


def _active_slope(sampler: Sampler, constraint: int) -> Array:
    """The slopes of a constraint by the scaled controls, of length one, where it is active; else zero (P x m)."""
    n, m = sampler.point.states, sampler.point.controls
    output = n + constraint
    slope = np.zeros((len(sampler.halves.local), m))
    for entry, (row, column) in enumerate(
        zip(sampler.point.jacobian_rows, sampler.point.jacobian_columns, strict=True)
    ):  # fmt: skip
        if row == output and n <= column < n + m:
            slope[:, column - n] = sampler.halves_slopes[:, entry] * sampler.control_sizes[column - n]
    lower, upper = interval_of(sampler.compiled.pointwise[constraint], constants_of(sampler.compiled))
    values = sampler.halves_outputs[:, output]
    size = sampler.output_sizes[output] or 1.0
    active = (values - lower <= AT_LIMIT * size) | (upper - values <= AT_LIMIT * size)
    length = np.linalg.norm(slope, axis=1, keepdims=True)
    return np.where(active[:, None] & (length > 1e-12 * size), slope / np.maximum(length, 1e-300), 0.0)
