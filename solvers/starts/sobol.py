"""Sobol points: a sequence that fills a unit cube evenly from its first points on, the same each time.

Direction numbers of Joe and Kuo (2008), Constructing Sobol sequences with better two-dimensional projections, SIAM J.
Sci. Comput. 30; the order of the points by Gray codes as in Antonov and Saleev (1979).  (Both from memory.)
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

BITS = 30

POLYNOMIALS = (1, 3, 7, 11, 13, 19, 25, 37, 41, 47, 55, 59, 61, 67, 91, 97)
"""A primitive polynomial over GF(2) for each dimension, its coefficients as bits."""

FIRST = ((1,), (1,), (1, 3), (1, 3, 1), (1, 1, 1), (1, 1, 3, 3), (1, 3, 5, 13), (1, 1, 5, 5, 17), (1, 1, 5, 5, 5),
         (1, 1, 7, 11, 19), (1, 1, 5, 1, 1), (1, 1, 1, 3, 11), (1, 3, 5, 5, 31), (1, 3, 3, 9, 7, 49),
         (1, 1, 1, 15, 21, 21), (1, 3, 1, 13, 27, 49))  # fmt: skip
"""The first direction numbers of each dimension."""

DIMENSIONS = len(POLYNOMIALS)


def sobol(count: int, dimensions: int) -> Array:
    """The first `count` points after the corner 0, of shape (count, dimensions), each coordinate in (0, 1)."""
    if dimensions > DIMENSIONS:
        raise ValueError(f"at most {DIMENSIONS} dimensions, not {dimensions}")
    directions = np.array([_directions(axis) for axis in range(dimensions)], dtype=np.int64).reshape(dimensions, BITS)
    point = np.zeros(dimensions, dtype=np.int64)
    points = np.empty((count, dimensions))
    for index in range(count):
        lowest_zero = (~index & (index + 1)).bit_length() - 1
        point ^= directions[:, lowest_zero]
        points[index] = point / 2.0**BITS
    return points


def _directions(axis: int) -> list[int]:
    """The direction numbers of one dimension, as binary fractions of BITS bits."""
    if axis == 0:
        return [1 << (BITS - 1 - k) for k in range(BITS)]
    polynomial, numbers = POLYNOMIALS[axis], list(FIRST[axis])
    degree = polynomial.bit_length() - 1
    for k in range(degree, BITS):
        new = numbers[k - degree] ^ (numbers[k - degree] << degree)
        for j in range(1, degree):
            if polynomial >> (degree - j) & 1:
                new ^= numbers[k - j] << j
        numbers.append(new)
    return [number << (BITS - 1 - k) for k, number in enumerate(numbers)]
