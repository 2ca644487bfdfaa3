"""The exact curve: piecewise polynomials in Legendre form, ready to be evaluated anywhere without the solver."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.series import basis, side_by_side

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Curve:
    """Functions of the independent variable on one mesh.

    `breaks` (n + 1 increasing places) bound n intervals.  `functions` maps a name with primes (`y`, `y'`, `u`) to n
    arrays of Legendre coefficients, lowest degree first, in the local variable that runs from -1 to 1 over its
    interval.  An interval of width zero cannot occur.
    """

    breaks: Array
    functions: Mapping[str, tuple[Array, ...]]

    @cached_property
    def _tables(self) -> dict[str, Array]:
        """Coefficients of the functions that were asked for, side by side."""
        return {}

    def evaluate(self, name: str, places: Array, derivative: int = 0) -> Array:
        """Values of `name` (or of its derivative) at `places`; at a break the interval on its left speaks.

        Places beyond the ends are continued from the outermost interval.
        """
        places = np.asarray(places, dtype=float)
        owner = np.searchsorted(self.breaks[1:-1], places, side="left")
        left, right = self.breaks[owner], self.breaks[owner + 1]
        local = (2 * places - left - right) / (right - left)
        if name not in self._tables:
            self._tables[name] = side_by_side(self.functions[name])
        coefficients = self._tables[name]
        if derivative:
            coefficients = np.asarray(legendre.legder(coefficients, derivative, axis=1), dtype=float)
        values = (basis(local, coefficients.shape[1] - 1) * coefficients[owner]).sum(axis=-1)
        return np.asarray(values * (2 / (right - left)) ** derivative)
