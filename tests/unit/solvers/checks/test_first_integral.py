"""First integral: what must be conserved is looked at, what need not be is not."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.checks import first_integral
from solvers.checks.sampling import Sampler
from solvers.solution import Status

# closed form: catenary c cosh((x - 1/2)/c), c = 0.848337938094979; the first integral y/sqrt(1 + y'^2) is c
FILM = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {"within": [0, None]}},
    "functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 1", "y(1) = 1"],
}
THROUGH_LAYERS = {  # the index depends on x only: y is cyclic (Snell)
    **FILM,
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "(1 + x)*sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}
NOTHING = {**FILM, "functional": {"seek": "minimum", "integrand": "(1 + x)*sqrt(1 + y'^2) + y^2"}}


def test_the_hamiltonian_of_the_film_is_its_neck(solved, examine):
    path = solved(FILM)
    check = examine(first_integral.check, path)
    assert (check.status, check.subject) == (Status.PASSED, "Hamiltonian")
    assert first_integral.hamiltonian(Sampler(path)) == pytest.approx(0.848337938094979, rel=1e-5)


def test_the_momentum_through_layers_is_constant(solved, examine):
    check = examine(first_integral.check, solved(THROUGH_LAYERS))
    assert (check.status, check.subject) == (Status.PASSED, "y")


def test_another_film_fails(solved, examine, drawn):
    """A parabola between the same rings."""
    other = drawn(solved(FILM), [lambda x: 1 - 0.8 * x * (1 - x)], [lambda x: -0.8 * (1 - 2 * x)])
    assert examine(first_integral.check, other).status is Status.FAILED


def test_costates_of_another_energy_fail(solved, examine):
    path = solved(FILM)
    tilted = path.costates * (1 + 0.05 * path.points[:, None])
    assert examine(first_integral.check, replace(path, costates=tilted)).status is Status.FAILED


def test_a_momentum_that_drifts_fails(solved, examine):
    path = solved(THROUGH_LAYERS)
    drifting = path.costates * (1 + 0.01 * np.sin(7 * path.points[:, None]))
    check = examine(first_integral.check, replace(path, costates=drifting))
    assert (check.status, check.subject) == (Status.FAILED, "y")


def test_where_nothing_is_conserved_it_does_not_apply(solved, examine):
    assert examine(first_integral.check, solved(NOTHING)).status is Status.NOT_APPLICABLE
