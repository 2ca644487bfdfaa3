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
    """Rows, columns and values of the entries of a matrix."""

    shape: tuple[int, int]
    rows: Indices
    columns: Indices
    values: Array

    @property
    def finite(self) -> bool:
        """Whether all entries are defined."""
        return bool(np.isfinite(self.values).all())

    def dense(self) -> Array:
        """The full matrix."""
        height, width = self.shape
        flat = np.bincount(self.rows * width + self.columns, self.values, height * width)
        return flat.reshape(self.shape).astype(float, copy=False)  # without any values NumPy counts in integers

    def sparse(self) -> Any:
        """The matrix by compressed rows, as one of SciPy, which is loaded only where it is needed."""
        from scipy.sparse import coo_matrix

        return coo_matrix((self.values, (self.rows, self.columns)), shape=self.shape).tocsr()


def both_triangles(upper: Scattered) -> Scattered:
    """A symmetric matrix from its upper triangle."""
    mixed = upper.rows != upper.columns
    return Scattered(
        upper.shape,
        np.concatenate([upper.rows, upper.columns[mixed]]),
        np.concatenate([upper.columns, upper.rows[mixed]]),
        np.concatenate([upper.values, upper.values[mixed]]),
    )
