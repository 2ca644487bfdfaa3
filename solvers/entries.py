"""Sparse matrices whose nonzeros are a constant plus constant multiples of numbers that are computed later.

Nearly every nonzero is made of one number, so it is fetched by its index; only what is left over is added by a small
sparse product.  Lists of Python numbers are what CasADi takes fastest.
"""

from __future__ import annotations

from typing import Any

import casadi as ca
import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

CONSTANT = -1
"""The source of an entry that is made of no number."""


class Entries:
    """Entries of a sparse matrix; those at the same place are added."""

    def __init__(self) -> None:
        self._rows: list[Indices] = []
        self._columns: list[Indices] = []
        self._values: list[Array] = []
        self._sources: list[Indices] = []

    def add(self, rows: Any, columns: Any, values: Any, sources: Any = CONSTANT) -> None:
        """Entries with their values, times the number at `sources` where there is one."""
        rows, columns, values, sources = np.broadcast_arrays(rows, columns, values, sources)
        self._rows.append(rows.ravel())
        self._columns.append(columns.ravel())
        self._values.append(values.ravel().astype(float))
        self._sources.append(sources.ravel())

    def matrix(self, shape: tuple[int, int], numbers: ca.MX) -> ca.MX:
        """The matrix as an expression of the numbers (a column)."""
        rows, columns = np.concatenate(self._rows), np.concatenate(self._columns)
        values, sources = np.concatenate(self._values), np.concatenate(self._sources)
        keys, place = np.unique(columns * shape[0] + rows, return_inverse=True)
        constant = np.zeros(len(keys))
        fixed = sources == CONSTANT
        np.add.at(constant, place[fixed], values[fixed])
        place, values, sources = place[~fixed], values[~fixed], sources[~fixed]
        nothing = int(numbers.size1())  # the index of a zero behind the numbers
        index, factor = np.full(len(keys), nothing), np.zeros(len(keys))
        first = np.zeros(len(place), dtype=bool)
        first[np.unique(place, return_index=True)[1]] = True
        index[place[first]], factor[place[first]] = sources[first], values[first]
        nonzeros = column(constant) + fetch(ca.vertcat(numbers, 0), index) * column(factor)
        if not first.all():
            rest = ~first
            nonzeros += ca.mtimes(sparse((len(keys), nothing), place[rest], sources[rest], values[rest]), numbers)
        return ca.MX(pattern(shape, keys % shape[0], keys // shape[0]), nonzeros)


def fetch(values: ca.MX, indices: Indices) -> ca.MX:
    """Entries of a column by their indices, as a column."""
    return ca.vec(values[indices.tolist()]) if len(indices) else ca.MX(0, 1)


def part(values: ca.MX, start: int, end: int) -> ca.MX:
    """Entries `start` up to, not including, `end` of a column, as a column also where it has but one entry."""
    return values[start:end] if end > start else ca.MX(0, 1)


def column(values: Array) -> ca.DM:
    """A dense column."""
    return ca.DM(values.tolist()) if len(values) else ca.DM(0, 1)


def pattern(shape: tuple[int, int], rows: Indices, columns: Indices) -> ca.Sparsity:
    """A pattern from places that are sorted by column, then row, without repetition."""
    starts = np.searchsorted(columns, np.arange(shape[1] + 1))
    return ca.Sparsity(shape[0], shape[1], starts.tolist(), rows.tolist())


def sparse(shape: tuple[int, int], rows: Indices, columns: Indices, values: Array) -> ca.DM:
    """A sparse matrix; entries at the same place are added."""
    keys, place = np.unique(columns * shape[0] + rows, return_inverse=True)
    total = np.zeros(len(keys))
    np.add.at(total, place, values)
    return ca.DM(pattern(shape, keys % shape[0], keys // shape[0]), total.tolist())
