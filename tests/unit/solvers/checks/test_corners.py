"""Corners: the Hamiltonian goes on where a slope jumps (Weierstrass, Erdmann)."""

import numpy as np
import pytest

from solvers.checks import corners
from solvers.checks.sampling import Sampler
from solvers.solution import Status

STAIRS = {
    "independent": {"name": "x", "from": 0, "to": 2},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y'^2*(1 - y')^2"},
    "endpoints": ["y(0) = 0", "y(2) = 1"],
}
"""Slopes 0 and 1 are the only two with the same y' L_y' - L and the same L_y' (Gelfand, Fomin, 1963, sec. 15)."""


def stairs(first, second):
    """A curve with one corner in the middle, and its slopes."""
    return (
        [lambda x: np.where(x <= 1, first * x, first + second * (x - 1))],
        [lambda x: np.where(x <= 1, first + 0 * x, second + 0 * x)],
    )


@pytest.mark.parametrize("slopes", [(0.0, 1.0), (1.0, 0.0)])
def test_slopes_that_satisfy_the_condition_pass(sketched, examine, slopes):
    check = examine(corners.check, sketched(STAIRS, *stairs(*slopes), intervals=2))
    assert check.status is Status.PASSED
    assert check.figure == pytest.approx(0.0, abs=1e-12)
    assert "1 corner;" in check.sentence


@pytest.mark.parametrize("slopes", [(0.0, 0.5), (0.4, 1.0), (-1.0, 1.0)])
def test_wrong_slopes_at_a_corner_fail(sketched, examine, slopes):
    check = examine(corners.check, sketched(STAIRS, *stairs(*slopes), intervals=2))
    assert check.status is Status.FAILED
    assert check.figure > 10 * check.threshold
    assert check.place == pytest.approx(1.0)


def test_a_smooth_curve_has_none(solved, examine):
    line = {**STAIRS, "functional": {"seek": "minimum", "integrand": "y'^2 + y"}}
    check = examine(corners.check, solved(line))
    assert check.status is Status.NOT_APPLICABLE
    assert "no corner" in check.sentence


def test_a_corner_at_a_place_of_the_problem_may_stay(solved):
    """A broken line through a given point."""
    through = {**STAIRS, "endpoints": ["y(0) = 0", "y(1) = 1", "y(2) = 0"],
               "functional": {"seek": "minimum", "integrand": "y'^2"}}  # fmt: skip
    assert not len(corners.corners(Sampler(solved(through))))


def test_kinks_in_the_formulas_may_make_corners(sketched, examine):
    kinked = {**STAIRS, "functional": {"seek": "minimum", "integrand": "y'^2*(1 - y')^2 + abs(x - 1)*y'"}}
    check = examine(corners.check, sketched(kinked, *stairs(0.0, 0.5), intervals=2))
    assert check.status is Status.NOT_APPLICABLE
