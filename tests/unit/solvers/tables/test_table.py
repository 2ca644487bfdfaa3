"""Tables: through their points, as smooth as they say, shaped like their points, and what is beyond them."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.interpolate import CubicSpline, PchipInterpolator

from solvers.tables.table import CORNER, Between, Outside, OutsideRangeError
from tests.unit.solvers.measured import TABLES, curve, surface

RNG = np.random.default_rng(5)
KNOTS = np.array([0.0, 0.4, 0.5, 1.3, 2.0, 2.1, 3.0])
VALUES = np.array([1.0, 1.4, 0.2, 0.2, -0.6, 0.5, 0.9])
INSIDE = np.linspace(KNOTS[0], KNOTS[-1], 401)[1:-1]


@pytest.mark.parametrize("count", [4, 5, 7])
def test_smooth_is_the_cubic_spline_with_not_a_knot_ends(count):
    # SciPy's spline is another implementation of de Boor (1978), chapter IV.
    spline, table = CubicSpline(KNOTS[:count], VALUES[:count]), curve(KNOTS[:count], VALUES[:count])
    places = np.linspace(KNOTS[0], KNOTS[count - 1], 97)[1:-1]
    for order in range(4):
        np.testing.assert_allclose(table.value(places, orders=(order,)), spline(places, order), rtol=1e-9, atol=1e-9)


def test_two_points_make_a_line_and_three_a_parabola():
    np.testing.assert_allclose(curve([0, 2], [1, 5]).value([0.5, 1.5]), [2, 4], rtol=1e-14)
    np.testing.assert_allclose(curve([0, 1, 4], [0, 1, 16]).value(INSIDE), INSIDE**2, rtol=1e-12)


def test_monotone_is_the_interpolant_of_fritsch_and_butland():
    # SciPy's implementation of Fritsch and Butland (1984).
    reference, table = PchipInterpolator(KNOTS, VALUES), curve(KNOTS, VALUES, Between.MONOTONE)
    for order in range(2):
        np.testing.assert_allclose(
            table.value(INSIDE, orders=(order,)), reference(INSIDE, order), rtol=1e-11, atol=1e-11
        )


def test_linear_is_a_broken_line_but_for_its_corners():
    table = curve(KNOTS, VALUES, Between.LINEAR)
    corners = np.abs(INSIDE[:, None] - KNOTS).min(axis=1) < 2 * CORNER
    line = np.interp(INSIDE, KNOTS, VALUES)
    np.testing.assert_allclose(table.value(INSIDE)[~corners], line[~corners], rtol=1e-12, atol=1e-14)
    assert np.abs(table.value(KNOTS) - VALUES).max() < CORNER * np.ptp(VALUES)


@pytest.mark.parametrize(("between", "least"), [(Between.SMOOTH, 3.8), (Between.MONOTONE, 1.9), (Between.LINEAR, 1.9)])
def test_the_error_falls_with_the_order_of_the_interpolant(between, least):
    places = np.linspace(0.1, 2.9, 301)

    def error(count):
        knots = np.linspace(0, 3, count)
        return np.abs(curve(knots, np.sin(knots), between).value(places) - np.sin(places)).max()

    assert np.log2(error(21) / error(41)) > least


@pytest.mark.parametrize("outside", Outside)
@pytest.mark.parametrize("between", Between)
@pytest.mark.parametrize("table", TABLES)
def test_values_and_slopes_are_continuous(table, between, outside):
    table = curve(KNOTS, VALUES, between, outside) if table == "f" else surface(
        KNOTS, KNOTS[:4], np.add.outer(VALUES, VALUES[:4] ** 2), between, outside
    )  # fmt: skip
    for axis, edges in enumerate(table.pieces.edges):
        other = [] if len(table.knots) == 1 else [np.array([0.17, 1.1, 9.0, -3.0])[:, None]]
        for order in (0, 1, 2) if between is Between.SMOOTH and outside is Outside.EXTEND else (0, 1):
            orders = tuple(order * (k == axis) for k in range(len(table.knots)))
            inner = edges[1:-1] if order == 2 else edges  # beyond the range there is a tangent only
            sides = []
            for side in (inner, np.nextafter(inner, -np.inf)):
                arguments = [*other]
                arguments.insert(axis, side)
                sides.append(table.value(*arguments, orders=orders))
            np.testing.assert_allclose(*sides, rtol=1e-8, atol=1e-8)


@pytest.mark.parametrize("between", Between)
def test_what_a_table_does_beyond_its_range(between):
    held, extended = (curve(KNOTS, VALUES, between, outside) for outside in (Outside.HOLD, Outside.EXTEND))
    np.testing.assert_allclose(held.value([-5, 4, 50]), [1.0, 0.9, 0.9], rtol=1e-14)
    np.testing.assert_allclose(held.value([-5, 4], orders=(1,)), 0)
    slope, end = extended.value(3.0, orders=(1,)), extended.value(3.0)
    np.testing.assert_allclose(extended.value([4.0, 13.0]), end + slope * np.array([1, 10]), rtol=1e-13)


def test_a_table_that_is_refused_beyond_its_range_has_no_number_there():
    table = curve(KNOTS, VALUES, outside=Outside.REFUSE)
    with pytest.raises(OutsideRangeError, match=r"3\.1 is outside of the table's range, 0 to 3"):
        table.strict_value(3.1)
    assert table.strict_value(3.0) == pytest.approx(0.9)


def test_a_surface_is_the_product_of_its_lines():
    table = surface(KNOTS, KNOTS[:5] - 1, np.outer(VALUES, VALUES[:5] + 2))
    one, other = CubicSpline(KNOTS, VALUES), CubicSpline(KNOTS[:5] - 1, VALUES[:5] + 2)
    u, v = RNG.uniform(0, 3, 50), RNG.uniform(-1, 1, 50)
    for i, k in ((0, 0), (1, 0), (0, 1), (1, 1), (2, 1), (0, 3)):
        np.testing.assert_allclose(table.value(u, v, orders=(i, k)), one(u, i) * other(v, k), rtol=1e-8, atol=1e-8)


@pytest.mark.parametrize("between", Between)
def test_a_surface_goes_through_its_points(between):
    points = RNG.normal(size=(7, 5))
    table = surface(KNOTS, KNOTS[:5], points, between)
    rounding = CORNER * np.ptp(points) if between is Between.LINEAR else 1e-12
    np.testing.assert_allclose(table.value(KNOTS[:, None], KNOTS[None, :5]), points, atol=rounding)


steps = st.lists(st.floats(0.05, 2.0), min_size=2, max_size=6)
rises = st.lists(st.floats(0.0, 5.0), min_size=2, max_size=6)


@settings(deadline=None)
@given(steps, rises)
def test_monotone_rises_where_the_points_rise(steps, rises):
    count = min(len(steps), len(rises))
    knots, values = (np.concatenate([[0.0], np.cumsum(part[:count])]) for part in (steps, rises))
    table = curve(knots, values, Between.MONOTONE)
    falls = -np.diff(table.value(np.linspace(0, knots[-1], 500)))
    assert falls.max() <= 1e-12 * (1 + values[-1])


@settings(max_examples=40, deadline=None)
@given(steps, steps, st.integers(0, 10**6))
def test_a_monotone_surface_rises_where_the_points_rise(across, up, seed):
    knots = [np.concatenate([[0.0], np.cumsum(part)]) for part in (across, up)]
    shape = tuple(len(part) for part in knots)
    points = np.cumsum(np.random.default_rng(seed).exponential(size=shape) ** 3, axis=0)  # rises along u, any way by v
    table = surface(*knots, points, Between.MONOTONE)
    grid = [np.linspace(0, part[-1], 61) for part in knots]
    falls = -np.diff(table.value(grid[0][:, None], grid[1][None, :]), axis=0)
    assert falls.max() <= 1e-12 * points.max()


def test_a_monotone_surface_is_still_close():
    def error(count):
        knots = np.linspace(0.1, 2, count)
        table = surface(knots, knots, np.exp(knots)[:, None] * np.cos(knots)[None, :], Between.MONOTONE)
        u, v = np.linspace(0.15, 1.95, 90)[:, None], np.linspace(0.15, 1.95, 80)[None, :]
        return np.abs(table.value(u, v) - np.exp(u) * np.cos(v)).max()

    assert np.log2(error(11) / error(21)) > 1.9


@pytest.mark.parametrize("name", TABLES)
def test_derivatives_are_those_of_the_values(name):
    table, step = TABLES[name], 1e-6
    at = [RNG.uniform(0.1, 0.9, 20) for _ in table.knots]
    for axis in range(len(at)):
        for order in range(3):
            lower, upper = (tuple((order + more) * (k == axis) for k in range(len(at))) for more in (0, 1))
            above, below = ([a + s * step * (k == axis) for k, a in enumerate(at)] for s in (1, -1))
            slope = (table.value(*above, orders=lower) - table.value(*below, orders=lower)) / (2 * step)
            np.testing.assert_allclose(table.value(*at, orders=upper), slope, rtol=1e-5, atol=1e-5)


def test_the_fourth_derivative_of_a_cubic_is_zero():
    assert not TABLES["f"].value(INSIDE, orders=(4,)).any()
    assert not TABLES["g"].value(0.3, 0.4, orders=(1, 5)).any()
