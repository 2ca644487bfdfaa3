"""Weierstrass: no other slope, however far, lowers the Hamiltonian."""

import numpy as np

from solvers.checks import legendre, weierstrass
from solvers.checks.sampling import Sampler
from solvers.solution import Status

WELLS = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "(y'^2 - 1)^2"},
    "endpoints": ["y(0) = 0", "y(1) = 0.5"],
}
WEAK = {
    **WELLS,
    "functional": {"seek": "minimum", "integrand": "y'^2 + y'^3"},
    "endpoints": ["y(0) = 0", "y(1) = 0"],
}
"""y = 0 is a weak minimum (L_y'y' = 2), but E(0, q) = q^2 + q^3 < 0 for q < -1 (Gelfand, Fomin, 1963, sec. 34)."""


def test_a_convex_integrand_passes(solved, examine):
    check = examine(weierstrass.check, solved({**WELLS, "functional": {"seek": "minimum", "integrand": "y'^4 + y^2"}}))
    assert check.status is Status.PASSED
    assert check.figure == 0.0


def test_a_weak_minimum_that_is_no_strong_one_fails(solved, examine):
    path = solved(WEAK)
    assert examine(legendre.check, path).status is Status.PASSED
    check = examine(weierstrass.check, path)
    assert check.status is Status.FAILED
    assert check.subject == "y'"
    assert "below" in check.sentence


def test_limits_of_the_slope_are_kept(solved, examine):
    """Slopes below -1 are not admissible here, and the others do no better."""
    for constraint in ("y' >= -0.9", "y'^2 <= 0.81"):
        assert examine(weierstrass.check, solved({**WEAK, "constraints": [constraint]})).status is Status.PASSED


def test_between_two_wells_the_line_fails(solved, examine):
    assert examine(weierstrass.check, solved(WELLS)).status is Status.FAILED


def test_a_maximum_is_judged_as_one(solved, examine):
    upside_down = {**WEAK, "functional": {"seek": "maximum", "integrand": "-y'^2 - y'^3"}}
    assert examine(weierstrass.check, solved(upside_down)).status is Status.FAILED


def test_the_gain_is_the_excess_function(solved):
    """E(0, q) = q^2 + q^3 at the trials, relative to the size of the Hamiltonian."""
    sampler = Sampler(solved(WEAK))
    gains, values, _ = weierstrass.best_trials(sampler)
    assert np.all(values < -1)
    np.testing.assert_allclose(gains * sampler.power, -(values**2 + values**3), rtol=1e-6)


def test_a_linear_hamiltonian_says_nothing(solved, examine):
    document = {
        "independent": {"name": "t", "from": 0, "to": 1},
        "unknowns": {"x": {}, "u": {"within": [-1, 1]}},
        "dynamics": ["x' = u"],
        "functional": {"seek": "minimum", "integrand": "x^2"},
        "endpoints": ["x(0) = 2"],
    }
    assert examine(weierstrass.check, solved(document)).status is Status.NOT_APPLICABLE


def test_controls_that_an_equation_ties_are_left_alone(solved, examine):
    document = {
        "independent": {"name": "t", "from": 0, "to": 1},
        "unknowns": {"x": {}, "u": {}, "w": {}},
        "dynamics": ["x' = u + w"],
        "functional": {"seek": "minimum", "integrand": "u^2 + w^2 + x^2"},
        "constraints": ["u = 2*w"],
        "endpoints": ["x(0) = 1"],
    }
    check = examine(weierstrass.check, solved(document))
    assert check.status is Status.NOT_APPLICABLE
    assert "tie" in check.sentence


def test_a_bounded_control_is_tried_over_its_whole_range(sketched, examine):
    """(u^2 - 1)^2 + u/2 has its lower well near -1: a control that rests in the upper one fails."""
    document = {
        "independent": {"name": "t", "from": 0, "to": 1},
        "unknowns": {"x": {}, "u": {"within": [-2, 2]}},
        "dynamics": ["x' = u"],
        "functional": {"seek": "minimum", "integrand": "(u^2 - 1)^2 + u/2"},
        "endpoints": ["x(0) = 0"],
    }
    upper, lower = (max(np.roots([4, 0, -4, 0.5])), min(np.roots([4, 0, -4, 0.5])))
    for value, status in ((upper, Status.FAILED), (lower, Status.PASSED)):
        curves = [lambda t, u=value: u * t], [lambda t, u=value: u + 0 * t]
        assert examine(weierstrass.check, sketched(document, *curves)).status is status
