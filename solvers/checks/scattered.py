"""A matrix as entries at places, of which those at the same place are added: dense or sparse when it is asked for."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Scattered:
    """Places, row by row, and values of the entries of a matrix."""

    shape: tuple[int, int]
    places: Indices
    values: Array

    @property
    def rows(self) -> Indices:
        """The row of every entry."""
        return self.places // self.shape[1]

    @property
    def columns(self) -> Indices:
        """The column of every entry."""
        return self.places % self.shape[1]

    @property
    def finite(self) -> bool:
        """Whether all entries are defined."""
        return bool(np.isfinite(self.values).all())

    def dense(self) -> Array:
        """The full matrix."""
        flat = np.bincount(self.places, self.values, self.shape[0] * self.shape[1])
        return flat.reshape(self.shape).astype(float, copy=False)  # without any values NumPy counts in integers

    def sparse(self) -> Any:
        """The matrix by compressed rows, as one of SciPy, which is loaded only where it is needed."""
        from scipy.sparse import coo_matrix

        return coo_matrix((self.values, (self.rows, self.columns)), shape=self.shape).tocsr()

    def plus(self, other: Scattered, factor: float = 1.0) -> Scattered:
        """The sum with a multiple of another matrix."""
        places = np.concatenate([self.places, other.places])
        return Scattered(self.shape, places, np.concatenate([self.values, factor * other.values]))


def scattered(shape: tuple[int, int], rows: Indices, columns: Indices, values: Array) -> Scattered:
    """A matrix from rows, columns and values of its entries."""
    return Scattered(shape, rows * shape[1] + columns, values)


def both_triangles(upper: Scattered) -> Scattered:
    """A symmetric matrix from its upper triangle."""
    rows, columns = upper.rows, upper.columns
    below = rows != columns
    return upper.plus(scattered(upper.shape, columns[below], rows[below], upper.values[below]))
