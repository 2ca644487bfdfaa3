"""Refinement: degree where a curve is smooth, cuts where it is not, both told from its coefficients alone."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.search.refinement import (
    END_CUT,
    HIGHEST_DEGREE,
    LEAST_WIDTH,
    MOST_CUTS,
    NARROWEST,
    estimate,
    finer,
    refine,
)
from solvers.transcription.collocation import Family
from solvers.transcription.mesh import Mesh, interval, uniform
from solvers.transcription.trajectory import curve
from tests.unit.solvers.problems import LEAST_TIME, path_along, shape, stated

TOLERANCE = 1e-8
COARSE = uniform(1, 4, 4)


def refined(mesh, x, u, rounds, tolerance=TOLERANCE):
    for _ in range(rounds):
        path = path_along(mesh, x, u)
        mesh = refine(path, estimate(path), tolerance)
    return mesh


def breaks_of(mesh):
    return mesh.breaks(np.array([0.0, 1.0]))


def covers(mesh):
    edges = [piece.start for piece in mesh.intervals] + [1.0]
    return all(
        abs(piece.start + piece.width - right) < 1e-14 for piece, right in zip(mesh.intervals, edges[1:], strict=True)
    )


def test_a_slope_that_is_nothing_but_noise_is_no_error():
    """Where y stays at 2 to eleven digits, no mesh will resolve y' any better; but a slope of a hundredth counts."""
    problem = shape(independent={"name": "x", "from": 0, "to": 1}, functional={"integrand": "y'^2"})
    for slope, resolved in ((1e-11, True), (1e-2, False)):
        path = path_along(COARSE, lambda x: 2 + 0 * x, lambda x, size=slope: size * np.sin(1e4 * x), problem)
        assert (estimate(path).worst <= TOLERANCE) is resolved


def test_a_smooth_function_raises_the_degree():
    mesh = refined(COARSE, np.sin, np.cos, 1)
    np.testing.assert_array_equal(breaks_of(mesh), breaks_of(COARSE))
    assert mesh.degrees()[0] > 4
    path = path_along(mesh, np.sin, np.cos)
    assert estimate(path).worst <= 10 * TOLERANCE


def test_what_is_exact_enough_stays_as_it_is():
    path = path_along(COARSE, lambda t: 3 * t**2 - t, lambda t: 6 * t - 1)
    assert estimate(path).worst < 1e-13
    assert refine(path, estimate(path), TOLERANCE) == COARSE


def test_only_what_needs_it_is_changed():
    path = path_along(COARSE, lambda t: np.maximum(t - 0.75, 0) ** 7, lambda t: 7 * np.maximum(t - 0.75, 0) ** 6)
    mesh = refine(path, estimate(path), TOLERANCE)
    assert mesh.intervals[:3] == COARSE.intervals[:3]
    assert mesh.points > COARSE.points


def test_a_kink_is_cut_around():
    """x' jumps at 0.37: cuts gather there, and nowhere else."""

    def x(t):
        return np.abs(t - 0.37)

    def u(t):
        return np.sign(t - 0.37)

    once = refined(COARSE, x, u, 1)
    inside = breaks_of(once)[(breaks_of(once) > 0.25) & (breaks_of(once) < 0.5)]
    assert len(inside) >= 1
    mesh = refined(COARSE, x, u, 8)
    edges = breaks_of(mesh)
    holder = np.searchsorted(edges, 0.37) - 1
    assert edges[holder + 1] - edges[holder] < 2e-2
    outside = edges[(edges < 0.25) | (edges > 0.5)]
    np.testing.assert_allclose(outside, [0, 0.75, 1])
    assert covers(mesh)


def test_a_singular_end_is_graded():
    """x = sqrt(t): intervals shrink towards 0."""
    mesh = refined(COARSE, np.sqrt, lambda t: 0.5 / np.sqrt(np.maximum(t, 1e-300)), 8)
    widths = np.diff(breaks_of(mesh))
    assert widths[0] < 1e-6
    assert np.all(widths[1:] >= 0.99 * widths[:-1])
    assert len(widths) < 40
    assert covers(mesh)


def test_nothing_is_cut_below_the_narrowest():
    """sqrt(1 - t): beside 1 numbers do not tell breaks apart any more."""
    mesh = refined(COARSE, lambda t: np.sqrt(1 - t), lambda t: -0.5 / np.sqrt(np.maximum(1 - t, 1e-300)), 16, 1e-13)
    assert np.diff(breaks_of(mesh)).min() > END_CUT**MOST_CUTS * NARROWEST
    assert mesh.degrees()[1] <= HIGHEST_DEGREE


def test_beside_zero_cuts_go_on():
    """t^(1/8), to nine digits: that takes an interval of less than 1e-48."""
    mesh = refined(COARSE, lambda t: t**0.125, lambda t: 0.125 * np.maximum(t, 1e-300) ** -0.875, 16, 1e-6)
    widths = np.diff(breaks_of(mesh))
    assert END_CUT**MOST_CUTS * LEAST_WIDTH < widths.min() < LEAST_WIDTH
    assert np.all(widths[1:] >= 0.99 * widths[:-1])
    assert covers(mesh)


def test_points_that_touch_no_end_stay_at_the_ends():
    """The last interval keeps its Gauss points only where it still reaches the end."""
    last = interval(0, 0.5, 1.0, Family.GAUSS, 4)
    mesh = Mesh((interval(0, 0.0, 0.5, Family.RADAU, 4), last))
    mesh = refined(mesh, lambda t: np.sqrt(1 - t), lambda t: -0.5 / np.sqrt(1 - t + 1e-300), 3)
    families = [piece.scheme.family for piece in mesh.intervals]
    assert families[-1] is Family.GAUSS
    assert set(families[:-1]) == {Family.RADAU}


@pytest.mark.parametrize("size", (1e-6, 1e6))
def test_errors_are_relative(size):
    plain = estimate(path_along(COARSE, np.sin, np.cos))
    scaled = estimate(path_along(COARSE, lambda t: size * np.sin(t), lambda t: size * np.cos(t)))
    np.testing.assert_allclose(scaled.errors, plain.errors, rtol=1e-6)


def test_the_estimate_follows_the_true_error():
    """Of the interpolated state, within a factor of a hundred, over many orders of magnitude."""
    for degree in (2, 3, 4, 5, 6):
        path = path_along(uniform(1, 2, degree), np.exp, lambda t: np.exp(t))
        t = np.linspace(0, 1, 101)

        true = np.abs(curve(path).evaluate("u", t) - np.exp(t)).max() / np.e
        assert 0.01 < estimate(path).worst / true < 100


def test_controls_that_act_linearly_are_left_out():
    """Along a singular arc a control rings; only what the states do with it counts."""
    members = LEAST_TIME | {"independent": {"name": "t", "from": 0, "to": 1}, "parameters": {}, "dynamics": ["x' = u"],
                            "functional": {"integrand": "x^2"}, "endpoints": ["x(0) = 0"]}  # fmt: skip
    linear = stated(**members)

    def ringing(t):
        return 0.5 * np.sign(np.sin(40 * t))

    assert estimate(path_along(COARSE, np.sin, ringing, linear)).worst < 1e-3
    assert estimate(path_along(COARSE, np.sin, ringing)).worst > 1e-2


def test_finer_raises_every_degree():
    mesh = finer(COARSE)
    assert mesh.degrees() == (6, 6)
    np.testing.assert_array_equal(breaks_of(mesh), breaks_of(COARSE))


def test_what_a_curve_gains_between_the_points_counts():
    """x rises to its limit only between two points: by so much times the push there the value may be too good."""
    problem = stated(unknowns={"x": {"within": [None, 0.25]}, "u": {}}, endpoints=["x(0) = 0", "x(1) = 0"])
    mesh = uniform(1, 1, 3)
    path = path_along(mesh, lambda t: 1.03 * t * (1 - t), lambda t: 1.03 * (1 - 2 * t), problem)
    excess = 1.03 / 4 - 0.25
    assert estimate(path).worst >= 0.9 * excess
    assert estimate(path).gained == 0  # nothing pushes
    pushes = np.zeros_like(path.bound_multipliers)
    pushes[path.program.layout.inner[1, 0]] = 7.0
    gained = estimate(replace(path, bound_multipliers=pushes)).gained
    assert gained == pytest.approx(7 * excess, rel=1e-2)
