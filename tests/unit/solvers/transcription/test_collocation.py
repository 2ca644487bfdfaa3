"""Both families of points against what theory promises of them.

Sources: Hairer, Wanner (1996), Solving Ordinary Differential Equations II, sections IV.5 (orders) and IV.3
(stability); Abramowitz, Stegun (1964), section 25.4 (quadrature).  (From memory.)
"""

import math

import numpy as np
import pytest
from numpy.polynomial import legendre

from solvers.transcription.collocation import Family, scheme

FAMILIES = (Family.RADAU, Family.GAUSS)
DEGREES = (1, 2, 3, 5, 8, 10, 16)


def order(family, degree):
    """At the right end of an interval; also how many monomials the quadrature integrates exactly."""
    return 2 * degree - 1 if family is Family.RADAU else 2 * degree


def end_value(rule, width, rate, start=1.0):
    """One step of y' = rate*y by collocation."""
    matrix = rule.differentiate[:, 1:] - width * rate * np.eye(rule.degree)
    inner = np.linalg.solve(matrix, -rule.differentiate[:, 0] * start)
    return rule.extrapolate @ np.concatenate([[start], inner])


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("degree", DEGREES)
def test_points_increase_inside_the_interval(family, degree):
    points = scheme(family, degree).points
    assert np.all(np.diff(points) > 0)
    assert points[0] > 0
    if family is Family.RADAU:
        assert points[-1] == 1.0
    else:
        assert points[-1] < 1
        np.testing.assert_allclose(points + points[::-1], 1, atol=1e-15)


@pytest.mark.parametrize(
    "family, points, weights",
    [
        (Family.RADAU, [1 / 3, 1], [3 / 4, 1 / 4]),
        (
            Family.RADAU,
            [(4 - math.sqrt(6)) / 10, (4 + math.sqrt(6)) / 10, 1],
            [(16 - math.sqrt(6)) / 36, (16 + math.sqrt(6)) / 36, 1 / 9],
        ),
        (Family.GAUSS, [1 / 2 - math.sqrt(3) / 6, 1 / 2 + math.sqrt(3) / 6], [1 / 2, 1 / 2]),
        (Family.GAUSS, [1 / 2 - math.sqrt(15) / 10, 1 / 2, 1 / 2 + math.sqrt(15) / 10], [5 / 18, 4 / 9, 5 / 18]),
    ],
)
def test_points_and_weights_are_those_of_the_textbook(family, points, weights):
    rule = scheme(family, len(points))
    np.testing.assert_allclose(rule.points, points, rtol=1e-15)
    np.testing.assert_allclose(rule.weights, weights, rtol=1e-14)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("degree", DEGREES)
def test_quadrature_is_exact_to_its_order_and_no_further(family, degree):
    rule, exact = scheme(family, degree), order(family, degree)
    for power in range(exact):
        assert rule.weights @ rule.points**power == pytest.approx(1 / (power + 1), rel=1e-13)
    if degree <= 5:  # the first miss falls below the rounding soon
        # The polynomial of the points themselves, of which the rule sees nothing: integral of product of (x - c_i)^2.
        nodes = np.sort(np.concatenate([rule.points, rule.points[: exact - degree]]))
        series = np.polynomial.Polynomial.fromroots(nodes).integ()
        assert abs(series(1.0) - series(0.0)) > 1e-9


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("degree", DEGREES)
def test_slopes_of_polynomials_of_the_degree_are_exact(family, degree):
    rule = scheme(family, degree)
    support = np.concatenate([[0.0], rule.points])
    for power in range(degree + 1):
        slopes = power * rule.points ** max(power - 1, 0)
        np.testing.assert_allclose(rule.differentiate @ support**power, slopes, atol=1e-11)
        assert rule.extrapolate @ support**power == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("degree", DEGREES)
def test_modes_give_back_the_polynomial(family, degree):
    rule = scheme(family, degree)
    series = np.random.default_rng(degree).normal(size=degree + 1)
    support = np.concatenate([[0.0], rule.points])
    np.testing.assert_allclose(rule.state_modes @ legendre.legval(2 * support - 1, series), series, atol=1e-11)
    lower = series[:degree]
    np.testing.assert_allclose(rule.control_modes @ legendre.legval(2 * rule.points - 1, lower), lower, atol=1e-11)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("degree", (1, 2, 3, 4))
def test_order_at_the_nodes(family, degree):
    """The error of y' = y over 0 to 1 falls by 2^order when the intervals are halved."""
    rule = scheme(family, degree)

    def error(count):
        value = 1.0
        for _ in range(count):
            value = end_value(rule, 1 / count, 1.0, value)
        return abs(value - math.e)

    count = {1: 64, 2: 16, 3: 4, 4: 2}[degree]  # fine enough for the order to show, before rounding sets in
    assert math.log2(error(count) / error(2 * count)) == pytest.approx(order(family, degree), abs=0.15)


@pytest.mark.parametrize("degree", (1, 2, 3, 6))
def test_radau_forgets_and_gauss_keeps_what_is_infinitely_stiff(degree):
    """R(-infinity) is 0 for Radau points (L-stable) and (-1)^K for Gauss points (A-stable only)."""
    assert end_value(scheme(Family.RADAU, degree), 1.0, -1e9) == pytest.approx(0.0, abs=1e-6)
    assert end_value(scheme(Family.GAUSS, degree), 1.0, -1e9) == pytest.approx((-1) ** degree, abs=1e-6)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("degree", (1, 2, 4, 8))
def test_no_oscillation_grows(family, degree):
    """|R(iw)| <= 1 on the imaginary axis; Gauss points keep energy exactly."""
    for frequency in (0.1, 1.0, 10.0, 1000.0):
        growth = abs(end_value(scheme(family, degree), 1.0, 1j * frequency))
        assert growth <= 1 + 1e-10
        if family is Family.GAUSS:
            assert growth == pytest.approx(1.0, abs=1e-9)
