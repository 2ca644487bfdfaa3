"""How many negative directions a quadratic form has where rows keep their values, by condensing every interval.

What lies inside an interval has to do only with that interval's own ends and with the numbers of the whole curve.  So
the inside of every interval is eliminated, all of them side by side in small full matrices, and what is left is a
matrix of the ends and these numbers (static condensation).  Rows enter as a penalty; those that couple several
intervals stand beside as unknowns of their own, each with one negative pivot.  The negative directions are those of the
insides and those of what is left (Haynsworth).

Reference: Golub, Van Loan (2013), Matrix Computations, section 4.5 (block elimination; from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

SHARED, FIXED = -1, -2
"""The owners of what is inside of no interval, and of what does not move."""
NOTHING = 1e-14
"""Rows shorter than this say nothing."""
SINGULAR = 1e-11
"""How small a pivot may be, relative to the largest, where a block is not positive."""


def count_negative(form: Array, rows: Array, owner: Indices, penalty: float, noise: float) -> int | None:
    """Negative directions of a form (D x D) where rows (R x D) vanish; `owner` (D) is the interval of each variable.

    None where rounding errors as large as `noise` may decide.
    """
    rows = rows * (owner != FIXED)
    length = np.sqrt(np.einsum("ij,ij->i", rows, rows))
    rows *= np.where(length > NOTHING, 1 / np.maximum(length, NOTHING), 0.0)[:, None]
    count = int(owner.max(initial=SHARED)) + 1
    touched = np.abs(rows) @ (owner[:, None] == np.arange(count)) > 0
    touching = touched.sum(axis=1)
    shared, crossing = np.flatnonzero(owner == SHARED), np.flatnonzero(touching > 1)
    inner, there = _by_owner(owner, count)
    own, used = _by_owner(np.where(touching == 1, touched @ np.arange(count), SHARED), count)
    near = rows[own[:, :, None], inner[:, None, :]] * (used[:, :, None] & there[:, None, :])
    ends = rows[own[:, :, None], shared] * used[:, :, None]
    across = rows[crossing]
    block = np.where(there[:, :, None] & there[:, None, :], form[inner[:, :, None], inner[:, None, :]], 0.0)
    block += np.swapaxes(near, 1, 2) @ near / penalty
    every = np.arange(inner.shape[1])
    block[:, every, every] += ~there
    side = np.concatenate([form[inner[:, :, None], shared], across.T[inner]], axis=2) * there[:, :, None]
    side[:, :, : len(shared)] += np.swapaxes(near, 1, 2) @ ends / penalty
    alone = rows[touching <= 1][:, shared]
    corner = np.zeros((len(shared) + len(crossing),) * 2)
    first, beside = slice(0, len(shared)), slice(len(shared), None)
    corner[first, first] = form[np.ix_(shared, shared)] + alone.T @ alone / penalty
    corner[first, beside], corner[beside, first] = across[:, shared].T, across[:, shared]
    corner[beside, beside] = -penalty * np.eye(len(crossing))
    factored = _factored(block, side)
    if factored is None:
        return None
    factor, signs, moved = factored
    made = (factor * signs[:, None, :]) @ np.swapaxes(factor, 1, 2), factor @ moved
    if not max(np.abs(made[0] - block).max(initial=0.0), np.abs(made[1] - side).max(initial=0.0)) < noise:
        return None
    flat = moved.reshape(moved.shape[0] * moved.shape[1], len(corner))
    rest = corner - flat.T @ (signs.ravel()[:, None] * flat)
    pivots = np.linalg.eigvalsh(rest)
    if np.abs(pivots).min(initial=np.inf) <= noise:
        return None
    return int((pivots < 0).sum()) + int((signs < 0).sum()) - len(crossing)


def _factored(block: Array, side: Array) -> tuple[Array, Array, Array] | None:
    """Factors, signs (+1, -1) and sides with which every block is factor signs factor' and every side factor moved.

    None where a block is so nearly singular that the signs of its pivots mean nothing.
    """
    try:
        factor = np.linalg.cholesky(block)
        signs = np.sign(np.diagonal(factor, axis1=1, axis2=2))
        return np.asarray(factor), signs, np.asarray(np.linalg.solve(factor, side))
    except np.linalg.LinAlgError:
        pivots, vectors = np.linalg.eigh(block)
    sizes = np.abs(pivots)
    if not sizes.min(initial=np.inf) > SINGULAR * sizes.max(initial=0.0):
        return None
    roots = np.sqrt(sizes)[:, None, :]
    return np.asarray(vectors * roots), np.sign(pivots), np.asarray(np.swapaxes(vectors / roots, 1, 2) @ side)


def _by_owner(owner: Indices, count: int) -> tuple[Indices, Flags]:
    """What belongs to each interval (N x most, filled up with anything), and where that is so."""
    order = np.argsort(owner, kind="stable")[np.count_nonzero(owner < 0) :]
    sizes = np.bincount(owner[order], minlength=count)
    there = np.arange(sizes.max(initial=0)) < sizes[:, None]
    table = np.zeros(there.shape, dtype=np.int64)
    table[there] = order
    return table, there
