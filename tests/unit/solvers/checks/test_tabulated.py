"""What is proved of tables: where their values lie, and how they bend."""

import math

import numpy as np
import pytest

from solvers.checks import convexity
from solvers.checks.tabulated import bounds, inside
from solvers.solution import Status
from solvers.tables.table import Between, Outside
from tests.unit.solvers.checks.conftest import problem_of
from tests.unit.solvers.measured import curve, surface

RNG = np.random.default_rng(8)


@pytest.mark.parametrize("between", Between)
@pytest.mark.parametrize("order", [0, 1, 2])
@pytest.mark.parametrize("interval", [(-1.5, 4.0), (0.3, 0.35), (0.0, 1.7), (-3.0, -1.0), (1.0, 1.0)])
def test_bounds_hold_all_values_and_little_more(interval, order, between):
    knots = np.sort(RNG.uniform(0, 2, 6))
    table = curve(knots, RNG.normal(size=6), between)
    low, high = bounds(table, (order,), [interval])
    values = table.value(np.linspace(*interval, 3001), orders=(order,))
    room = 1e-9 * np.abs(values).max()
    assert low - room <= values.min() and values.max() <= high + room
    if order == 2:  # straight pieces: their ends are their bounds
        everywhere = np.abs(table.value(np.linspace(-2, 5, 9001), orders=(2,))).max()
        assert high - low <= np.ptp(values) + 0.05 * everywhere + room or between is not Between.SMOOTH


@pytest.mark.parametrize("between", Between)
def test_bounds_of_a_surface(between):
    table = surface(np.sort(RNG.uniform(0, 2, 5)), np.sort(RNG.uniform(0, 2, 4)), RNG.normal(size=(5, 4)), between)
    box = [(0.2, 1.1), (-0.5, 0.9)]
    u, v = (np.linspace(*side, 201) for side in box)
    for orders in ((0, 0), (1, 0), (0, 1), (1, 1)):
        low, high = bounds(table, orders, box)
        values = table.value(u[:, None], v[None, :], orders=orders)
        assert low - 1e-9 <= values.min() and values.max() <= high + 1e-9


def test_a_tangent_that_goes_on_has_no_bound():
    assert bounds(curve([0, 1], [0, 1]), (0,), [(-math.inf, math.inf)]) == (-math.inf, math.inf)
    assert bounds(curve([0, 1], [0, 1]), (1,), [(-math.inf, math.inf)]) == pytest.approx((1, 1))
    held = curve([0, 1, 2], [0, 1, 0.5], Between.MONOTONE, Outside.HOLD)
    assert bounds(held, (0,), [(-math.inf, math.inf)]) == pytest.approx((0, 1), abs=2e-3)


def test_a_table_that_is_refused_beyond_its_range_is_only_asked_inside():
    table = curve([0, 1, 2], [0, 1, 4], outside=Outside.REFUSE)
    assert inside(table, [(-math.inf, 1.5)]) == [(0.0, 1.5)]
    assert inside(curve([0, 1], [0, 1]), [(-math.inf, 1.5)]) == [(-math.inf, 1.5)]


VALLEY = [[y, y**2] for y in (-2.0, -1.2, 0.0, 0.7, 2.0)]
HILL = [[y, -value] for y, value in VALLEY]
WAVE = [[-2, 0], [-1, 1], [0, 0], [1, -1], [2, 0]]
RISING = [[0, 1], [1, 2], [2, 4], [3, 8]]


def integrand(formula, points, **more):
    return problem_of(
        {
            "independent": {"name": "x", "from": 0, "to": 1},
            "unknowns": {"y": {}},
            "tables": {"w": {"of": {"u": ""}, "points": points, **more}},
            "functional": {"seek": "minimum", "integrand": formula},
            "endpoints": ["y(0) = 1"],
        }
    )


@pytest.mark.parametrize("between", ["smooth", "monotone", "linear"])
@pytest.mark.parametrize("outside", ["refuse", "extend"])
@pytest.mark.parametrize("formula", ["y'^2 + w(y)", "y'^2 + w(y/2 - x)"])
def test_a_table_of_a_convex_function_is_proved_convex(formula, between, outside):
    check = convexity.check(integrand(formula, VALLEY, between=between, outside=outside))
    assert check.status is Status.PASSED, check.sentence


@pytest.mark.parametrize(
    ("formula", "points", "more", "status"),
    [
        pytest.param("y'^2 - w(y)", HILL, {}, Status.PASSED, id="a concave one is subtracted"),
        pytest.param("y'^2 + w(y)", HILL, {}, Status.NOT_APPLICABLE, id="or not"),
        pytest.param("y'^2 + w(y)", WAVE, {}, Status.NOT_APPLICABLE, id="neither convex nor concave"),
        pytest.param("y'^2 + w(y)", VALLEY, {"outside": "hold"}, Status.NOT_APPLICABLE, id="flat beyond its range"),
        pytest.param("y'^2 + w(y^2)", RISING, {"outside": "extend"}, Status.PASSED, id="rising, of a convex formula"),
        pytest.param("y'^2 + w(-y^2)", RISING, {"outside": "extend"}, Status.NOT_APPLICABLE, id="of a concave one"),
        pytest.param("w(x)*y'^2", RISING, {}, Status.PASSED, id="a positive weight along the way"),
        pytest.param("w(x)*y'^2", WAVE, {}, Status.NOT_APPLICABLE, id="a weight that changes its sign"),
    ],
)
def test_how_a_table_bends_is_known(formula, points, more, status):
    check = convexity.check(integrand(formula, points, **more))
    assert check.status is status, check.sentence
