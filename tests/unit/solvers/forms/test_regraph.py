"""Curves in a parameter told as functions of x: near infinite slopes, across vertical pieces, backwards exactly."""

import numpy as np
import pytest

from solvers.forms.regraph import MOST_PIECES, regraph

ENDS = np.array([0.0, 1.0])


def test_a_power_with_an_infinite_slope():
    """x = s^3, y = s^2: y = x^(2/3), whose slope is infinite at 0."""
    curve = regraph(ENDS, lambda s: s**3, {"y": lambda s: s**2, "y'": lambda s: 2 / (3 * np.maximum(s, 1e-300))}, "y")
    x = np.concatenate([np.linspace(0, 1, 401), np.geomspace(1e-9, 1, 200)])
    np.testing.assert_allclose(curve.evaluate("y", x), x ** (2 / 3), atol=1e-9)
    assert len(curve.breaks) < 60
    away = x[x > 1e-3]
    np.testing.assert_allclose(curve.evaluate("y'", away), 2 / 3 * away ** (-1 / 3), rtol=1e-6)


def test_the_cycloid():
    """x = s - sin s, y = 1 - cos s (the curve of quickest descent)."""
    curve = regraph(np.linspace(0, np.pi, 5), lambda s: s - np.sin(s), {"y": lambda s: 1 - np.cos(s)}, "y")
    s = np.linspace(0, np.pi, 301)
    np.testing.assert_allclose(curve.evaluate("y", s - np.sin(s)), 1 - np.cos(s), atol=2e-9)
    assert curve.breaks[0] == 0
    assert curve.breaks[-1] == pytest.approx(np.pi, rel=1e-15)


def test_a_smooth_curve_is_hardly_cut():
    curve = regraph(ENDS, lambda s: 2 * s + s**2, {"y": np.sin}, "y")
    assert len(curve.breaks) <= 3
    x = np.linspace(0, 3, 101)
    np.testing.assert_allclose(curve.evaluate("y", x), np.sin(np.sqrt(1 + x) - 1), atol=1e-10)


def test_x_itself_comes_back():
    """The inverse is monotone and exact: x of the parameter at x is x."""

    def x(s):
        return s**5 + 1e-3 * s

    curve = regraph(ENDS, x, {"s": lambda s: s, "x": x}, "s")
    at = np.linspace(0, 1.001, 501)
    np.testing.assert_allclose(curve.evaluate("x", at), at, atol=1e-12)
    assert np.all(np.diff(curve.evaluate("s", at)) > 0)


def test_vertical_pieces_have_no_room():
    """Along, up at x = 1, and along: what is left jumps there."""

    def x(s):
        return np.minimum(s, 1) + np.maximum(s - 2, 0)

    curve = regraph(np.array([0.0, 1.0, 2.0, 3.0]), x, {"y": lambda s: np.clip(s - 1, 0, 1) * 5}, "y")
    np.testing.assert_array_equal(curve.breaks, [0, 1, 2])
    np.testing.assert_allclose(curve.evaluate("y", np.array([0.5, 1.0, 1.5])), [0, 0, 5], atol=1e-12)


def test_vertical_pieces_at_the_ends_shorten_nothing():
    def x(s):
        return 2 + np.clip(s - 1, 0, 1)

    curve = regraph(np.array([0.0, 1.0, 2.0, 3.0]), x, {"y": lambda s: s}, "y")
    np.testing.assert_array_equal(curve.breaks, [2, 3])


@pytest.mark.parametrize("size", (1e-6, 1.0, 1e6))
def test_sizes_do_not_matter(size):
    curve = regraph(ENDS, lambda s: size * s**3, {"y": lambda s: size * s**2}, "y")
    x = np.linspace(0, 1, 101)
    np.testing.assert_allclose(curve.evaluate("y", size * x) / size, x ** (2 / 3), atol=1e-9)


def test_pieces_are_limited_even_where_nothing_helps():
    curve = regraph(ENDS, lambda s: 1 * s, {"y": lambda s: np.sin(1 / (np.abs(s - 0.3) + 1e-6))}, "y")
    assert len(curve.breaks) <= MOST_PIECES + 2
    assert np.all(np.diff(curve.breaks) > 0)
