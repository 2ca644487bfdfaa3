"""Where the values of a table lie, and how it bends: proved from its polynomials in Bernstein's form.

A polynomial lies within the range of its Bernstein coefficients.  Reference: Farouki (2012), The Bernstein polynomial
basis: a centennial retrospective, Computer Aided Geometric Design 29 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from solvers.tables.table import Outside, Table, differentiated

Array = NDArray[np.float64]

Interval = tuple[float, float]

ROUNDING = 1e-12
"""Bounds closer to zero than this, relative to the largest size, count as zero."""


def inside(table: Table, intervals: Sequence[Interval]) -> list[Interval]:
    """The intervals of the arguments, as far as they may reach into the range of a table that is refused beyond it."""
    if table.outside is not Outside.REFUSE:
        return list(intervals)
    return [(max(low, first), min(high, last)) for (low, high), (first, last) in
            zip(intervals, table.ranges, strict=True)]  # fmt: skip


def bounds(table: Table, orders: Sequence[int], intervals: Sequence[Interval]) -> Interval:
    """An interval that holds all values of a table, or of its derivative, for arguments in intervals."""
    coefficients = differentiated(table.pieces.coefficients, orders)
    count = len(intervals)
    if any(low > high for low, high in intervals):
        return -math.inf, math.inf
    for axis, (low, high) in enumerate(intervals):
        edges = table.pieces.edges[axis]
        starts, ends = np.append(-np.inf, edges), np.append(edges, np.inf)
        used = np.flatnonzero((ends >= low) & (starts <= high))
        first, last = (np.clip(part[used], low, high) for part in (starts, ends))
        coefficients = np.take(coefficients, used, axis)
        endless = ~(np.isfinite(first) & np.isfinite(last))
        if np.any(np.moveaxis(coefficients, (axis, count + axis), (0, 1))[endless, 1:]):
            return -math.inf, math.inf  # a tangent that goes on for ever
        first, last = (np.where(endless, 0.0, part) for part in (first, last))
        away = first - table.pieces.origins[axis][used]
        coefficients = _bernstein(coefficients, axis, count + axis, away, last - first)
    low, high = float(coefficients.min()), float(coefficients.max())
    room = ROUNDING * max(abs(low), abs(high))
    return (low if abs(low) > room else 0.0), (high if abs(high) > room else 0.0)


def _bernstein(coefficients: Array, cell_axis: int, power_axis: int, away: Array, width: Array) -> Array:
    """Coefficients in Bernstein's form on [away, away + width] of every cell, from those of the powers."""
    parts = np.moveaxis(coefficients, (cell_axis, power_axis), (0, 1))
    degree = parts.shape[1] - 1
    matrices = np.zeros((len(away), degree + 1, degree + 1))
    for power in range(degree + 1):
        for below in range(power + 1):  # (away + width s)^power, the term with s^below
            term = math.comb(power, below) * away ** (power - below) * width**below
            for i in range(below, degree + 1):
                matrices[:, i, power] += term * math.comb(i, below) / math.comb(degree, below)
    return np.moveaxis(np.einsum("cip,cp...->ci...", matrices, parts), (0, 1), (cell_axis, power_axis))
