"""Sobol points against SciPy's, which are of the same direction numbers."""

import numpy as np
import pytest
from scipy.stats import qmc

from solvers.starts.sobol import DIMENSIONS, sobol


def test_the_points_are_those_of_scipy():
    theirs = qmc.Sobol(DIMENSIONS, scramble=False, bits=30).random(64)[1:]
    np.testing.assert_array_equal(sobol(63, DIMENSIONS), theirs)


def test_too_many_dimensions_are_refused():
    with pytest.raises(ValueError, match="at most"):
        sobol(4, DIMENSIONS + 1)
