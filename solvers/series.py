"""Legendre series: what every curve here is made of, piece by piece, each in a local variable from -1 to 1.

Reference: Abramowitz, Stegun (1964), Handbook of Mathematical Functions, section 22.7 (the recurrence; from memory).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def basis(places: Array, degree: int) -> Array:
    """The Legendre polynomials of degrees 0 to `degree` at P places (P x (degree + 1))."""
    table = np.empty((degree + 1, len(places)))
    table[0] = 1.0
    if degree:
        table[1] = places
    for k in range(2, degree + 1):
        np.multiply(places, table[k - 1], out=table[k])
        table[k] *= (2 * k - 1) / k
        table[k] -= (k - 1) / k * table[k - 2]
    return table.T


def side_by_side(pieces: Sequence[Array]) -> Array:
    """Coefficients of N pieces (each degrees x ...) as one array (N x degrees x ...), filled with zeros."""
    table = np.zeros((len(pieces), max(map(len, pieces)), *pieces[0].shape[1:]))
    for row, piece in zip(table, pieces, strict=True):
        row[: len(piece)] = piece
    return table
