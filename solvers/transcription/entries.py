"""Sparse matrices whose nonzeros are a constant plus constant multiples of numbers that are computed later."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

CONSTANT = -1
"""The source of an entry that is made of no number."""


@dataclass(frozen=True, slots=True)
class Pattern:
    """The places of the nonzeros of a sparse matrix by compressed columns: rows (nonzeros) and starts (columns + 1)."""

    shape: tuple[int, int]
    rows: Indices
    starts: Indices

    def columns(self) -> Indices:
        """The column of every nonzero."""
        return np.repeat(np.arange(self.shape[1]), np.diff(self.starts))

    def filled(self, nonzeros: Array) -> Any:
        """The matrix with its nonzeros, as one of SciPy, which is loaded only where it is needed."""
        from scipy.sparse import csc_matrix

        return csc_matrix((nonzeros, self.rows, self.starts), shape=self.shape)

    def times(self, vector: Array, nonzeros: Array) -> Array:
        """The product matrix.vector."""
        return counted(self.rows, vector[self.columns()] * nonzeros, self.shape[0])

    def times_from_left(self, vector: Array, nonzeros: Array) -> Array:
        """The product vector.matrix."""
        return counted(self.columns(), vector[self.rows] * nonzeros, self.shape[1])


@dataclass(frozen=True, slots=True)
class Recipe:
    """How the nonzeros of a matrix are made of numbers: each number that goes anywhere, its factor and its place."""

    pattern: Pattern
    constant: Array  # one for every nonzero
    sources: Indices  # of the numbers, in the order of their nonzeros
    factors: Array
    first: Indices  # where, among the sources, those of the next nonzero begin
    places: Indices  # the nonzeros that are made of numbers

    def nonzeros(self, numbers: Array) -> Array:
        """The nonzeros in the order of the pattern."""
        parts = numbers[self.sources] * self.factors
        made = self.constant.copy()
        if len(parts):
            made[self.places] += parts if len(parts) == len(self.places) else np.add.reduceat(parts, self.first)
        return made


class Entries:
    """Entries of a sparse matrix; those at the same place are added."""

    def __init__(self) -> None:
        self._rows: list[Indices] = []
        self._columns: list[Indices] = []
        self._values: list[Array] = []
        self._sources: list[Indices] = []

    def add(self, rows: Any, columns: Any, values: Any, sources: Any = CONSTANT) -> None:
        """Entries with their values, times the number at `sources` where there is one."""
        shape = np.broadcast(rows, columns, values, sources).shape
        self._rows.append(_spread(rows, shape, np.int64))
        self._columns.append(_spread(columns, shape, np.int64))
        self._values.append(_spread(values, shape, np.float64))
        self._sources.append(_spread(sources, shape, np.int64))

    @property
    def rows(self) -> Indices:
        """The row of every entry, in the order in which they were added."""
        return np.concatenate(self._rows)

    @property
    def columns(self) -> Indices:
        """The column of every entry."""
        return np.concatenate(self._columns)

    @property
    def values(self) -> Array:
        """The value of every entry."""
        return np.concatenate(self._values)

    def recipe(self, shape: tuple[int, int]) -> Recipe:
        """How the matrix is made."""
        keys = self.columns * shape[0] + self.rows
        order = np.argsort(keys, kind="stable")
        keys = keys[order]
        values, sources = self.values[order], np.concatenate(self._sources)[order]
        new = _changes(keys)
        place = np.cumsum(new) - 1
        keys = keys[new]
        fixed = sources == CONSTANT
        constant = counted(place[fixed], values[fixed], len(keys))
        place, made = place[~fixed], ~fixed
        first = np.flatnonzero(_changes(place))
        columns = keys // shape[0]
        pattern = Pattern(shape, keys - columns * shape[0], np.searchsorted(columns, np.arange(shape[1] + 1)))
        return Recipe(pattern, constant, sources[made], values[made], first, place[first])


def _spread(given: Any, shape: tuple[int, ...], kind: type) -> NDArray[Any]:
    """What is given for every entry, one after the other."""
    spread: NDArray[Any] = np.empty(shape, kind)
    spread[...] = given
    return spread.ravel()


def counted(places: Indices, values: Array, size: int) -> Array:
    """Sums of the values at each place."""
    return np.bincount(places, values, size).astype(float)  # without any values NumPy counts in integers


def _changes(values: Indices) -> NDArray[np.bool_]:
    """Where sorted values differ from the one before; the first one always does."""
    return np.concatenate([np.ones(min(len(values), 1), dtype=bool), values[1:] != values[:-1]])
