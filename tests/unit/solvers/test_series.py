"""Legendre series by their recurrence, against NumPy's polynomials."""

import numpy as np
import pytest
from numpy.polynomial import legendre

from solvers.series import basis, side_by_side


@pytest.mark.parametrize("degree", [0, 1, 2, 7, 14])
def test_the_basis_is_that_of_legendre(degree):
    places = np.linspace(-1.2, 1, 23)
    np.testing.assert_allclose(basis(places, degree), legendre.legvander(places, degree), rtol=1e-12, atol=1e-13)


def test_missing_degrees_are_zero():
    table = side_by_side([np.array([[1.0], [2.0]]), np.array([[3.0]])])
    np.testing.assert_array_equal(table, [[[1], [2]], [[3], [0]]])
