"""Polynomials of degree two with numbers as coefficients: sums, products, and signs by eigenvalues.

Reference: Boyd, Vandenberghe (2004), Convex Optimization, section 3.1.4 (second-order conditions; from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

Variable = tuple[str, int, str]
Quadratic = dict[tuple[Variable, ...], float]
"""Coefficients by the variables that they multiply: none, one, or two in order."""

ROUNDING = 1e-12
"""Eigenvalues above minus this, of a form whose diagonal holds ones, count as nonnegative."""


def add_to(total: Quadratic, part: Quadratic, factor: float) -> None:
    """Add a multiple of one polynomial to another."""
    for key, value in part.items():
        total[key] = total.get(key, 0.0) + factor * value


def multiplied(a: Quadratic, b: Quadratic) -> Quadratic | None:
    """The product, or None where its degree is above two."""
    result: Quadratic = {}
    for left, x in a.items():
        for right, y in b.items():
            if len(left) + len(right) > 2:
                return None
            add_to(result, {tuple(sorted(left + right)): x * y}, 1.0)
    return result


def bends(quadratic: Quadratic) -> tuple[bool, bool]:
    """Whether a polynomial is convex, and whether it is concave."""
    matrix = _matrix(quadratic)[:-1, :-1]
    return _nonnegative(matrix), _nonnegative(-matrix)


def nowhere_negative(quadratic: Quadratic) -> bool:
    """Whether a polynomial is nonnegative whatever its variables are."""
    return _nonnegative(_matrix(quadratic))


def _matrix(quadratic: Quadratic) -> Array:
    """The symmetric matrix of a polynomial in its variables and one; the lower degrees fill the last row and column."""
    variables = sorted({name for key in quadratic for name in key})
    index = {name: i for i, name in enumerate(variables)}
    last = len(variables)
    matrix = np.zeros((last + 1, last + 1))
    for key, value in quadratic.items():
        i, j = ([index[name] for name in key] + [last, last])[:2]
        matrix[i, j] += value / 2
        matrix[j, i] += value / 2
    return matrix


def _nonnegative(matrix: Array) -> bool:
    """True where the quadratic form is nowhere negative.  With every variable in its own unit no entry can hide behind
    a large one of another: a form that is not negative has no entry larger than those of the diagonal then."""
    diagonal = np.diag(matrix)
    if np.any(diagonal < 0):
        return False
    zero = diagonal == 0
    if np.any(matrix[zero]):
        return False
    units = np.sqrt(diagonal[~zero])
    if not units.size:
        return True
    scaled = matrix[np.ix_(~zero, ~zero)] / units[:, None] / units
    return bool(np.isfinite(scaled).all() and np.linalg.eigvalsh(scaled)[0] >= -ROUNDING)
