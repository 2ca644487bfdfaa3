"""Legendre: the sign of the second derivative of the Hamiltonian in what is free."""

import numpy as np
import pytest

from solvers.checks import legendre
from solvers.checks.sampling import Sampler
from solvers.solution import Status

LINE = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}
DOWNWARDS = {**LINE, "functional": {"seek": "minimum", "integrand": "y^2 - y'^2"}}
HALFWAY = {**LINE, "functional": {"seek": "minimum", "integrand": "(x - 1/2)*y'^2"}}
WELLS = {
    **LINE,
    "functional": {"seek": "minimum", "integrand": "(y'^2 - 1)^2"},
    "endpoints": ["y(0) = 0", "y(1) = 0.5"],
}
SADDLE = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "u": {}, "w": {}},
    "dynamics": ["x' = u + w"],
    "functional": {"seek": "minimum", "integrand": "u^2 - w^2 + x^2"},
    "endpoints": ["x(0) = 0", "x(1) = 1"],
}
HELD_SADDLE = {**SADDLE, "constraints": ["u = 2*w"]}  # on what is left H_uu = 2 (4 - 1) > 0
LEAST_TIME = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, 10]}},
    "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "endpoint": "T"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
}


def test_a_line_passes_strictly(solved, examine):
    check = examine(legendre.check, solved(LINE))
    assert check.status is Status.PASSED
    assert "strictly" in check.sentence


def test_a_maximum_is_judged_as_one(solved, examine):
    upwards = {**LINE, "functional": {"seek": "maximum", "integrand": "-sqrt(1 + y'^2)"}}
    assert examine(legendre.check, solved(upwards)).status is Status.PASSED


@pytest.mark.parametrize("document", [DOWNWARDS, HALFWAY], ids=["everywhere", "halfway"])
def test_a_stationary_curve_that_bends_downwards_fails(stationary, examine, document):
    check = examine(legendre.check, stationary(document))
    assert check.status is Status.FAILED
    if document is HALFWAY:
        assert check.place < 0.5


def test_a_corner_less_curve_between_two_wells_fails(solved, examine):
    """y = x/2 is stationary, but zigzags of slopes 1 and -1 do better (Bolza's example, from memory)."""
    assert examine(legendre.check, solved(WELLS)).status is Status.FAILED


def test_a_saddle_fails_unless_a_constraint_leaves_only_its_good_direction(sketched, solved, examine):
    curves = [lambda t: t], [lambda t: 0.5 + 0 * t, lambda t: 0.5 + 0 * t]
    assert examine(legendre.check, sketched(SADDLE, *curves)).status is Status.FAILED
    assert examine(legendre.check, solved(HELD_SADDLE)).status is Status.PASSED


def test_a_linear_control_says_nothing(solved, examine):
    assert examine(legendre.check, solved(LEAST_TIME)).status is Status.NOT_APPLICABLE


def test_the_least_eigenvalue_is_that_of_the_closed_form(solved):
    """F_y'y' = (1 + y'^2)^(-3/2) = 2^(-3/2) on the diagonal line."""
    sampler = Sampler(solved(LINE))
    least, free = legendre.least_eigenvalues(sampler)
    assert free.all()
    assert least * sampler.power / sampler.control_sizes**2 == pytest.approx(2**-1.5 + 0 * least, rel=1e-6)
    assert np.all(least > 0)
