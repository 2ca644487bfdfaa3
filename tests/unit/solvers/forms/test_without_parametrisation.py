"""Curves that are given without a parametrisation of their own: shortest ways in curved spaces, the largest area."""

import math

import numpy as np
import pytest

from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import stated


def way(integrand, ends, seek="minimum", lowest=None, **members):
    """From the first values of the unknowns to the last; None leaves one open."""
    endpoints = [f"{name}({at}) = {value}" for name, both in ends.items() for at, value in enumerate(both)
                 if value is not None]  # fmt: skip
    unknowns = {
        name: {"within": [lowest, None]} if name == list(ends)[-1] and lowest is not None else {} for name in ends
    }
    return solve(stated(
        independent={"name": "s", "from": 0, "to": 1}, unknowns=unknowns, dynamics=None,
        functional={"seek": seek, "integrand": integrand}, endpoints=endpoints, **members,
    ))  # fmt: skip


HALF_SPACE = math.acosh(1 + (1 + 4 + 4) / (2 * 3))
ON_SPHERE = math.acos(math.sin(1) * math.sin(1.2) * math.cos(1.5) + math.cos(1) * math.cos(1.2))

SPACES = {
    "hyperbolic plane": ("sqrt(x'^2 + y'^2)/y", {"x": (0, 1), "y": (1, 1)}, 0.01, math.acosh(1.5)),
    "straight up in it": ("sqrt(x'^2 + y'^2)/y", {"x": (0, 0), "y": (1, 3)}, 0.01, math.log(3)),
    "hyperbolic space": ("sqrt(x'^2 + y'^2 + z'^2)/z", {"x": (0, 1), "y": (0, 2), "z": (1, 3)}, 0.01, HALF_SPACE),
    "sphere times line": ("sqrt(a'^2 + sin(a)^2*b'^2 + h'^2)", {"a": (1, 1.2), "b": (0, 1.5), "h": (0, 2)}, None,
                          math.hypot(ON_SPHERE, 2)),
}  # fmt: skip
"""Upper half space: cosh d = 1 + |p - q|^2/(2 p_n q_n); Anderson (2005), Hyperbolic Geometry, sec. 3.5 (from memory).
In a product squares of distances add up; law of cosines on the sphere: both common practice."""


@pytest.mark.parametrize("space", SPACES.values(), ids=SPACES)
def test_the_shortest_way_has_the_distance_of_the_geometry(space):
    integrand, ends, lowest, distance = space
    found = way(integrand, ends, lowest=lowest)
    assert found.verdict in (Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM)
    assert found.value == pytest.approx(distance, rel=1e-8)
    assert abs(found.value - distance) <= found.value_error
    assert all(check.status is not Status.FAILED for check in found.checks)


def test_at_constant_cost_the_geodesic_is_a_half_circle():
    found = way("sqrt(x'^2 + y'^2)/y", {"x": (0, 1), "y": (1, 1)}, lowest=0.01)
    s = np.linspace(0, 1, 21)
    x, y = found.curve.evaluate("x", s), found.curve.evaluate("y", s)
    assert (x - 0.5) ** 2 + y**2 == pytest.approx(np.full(21, 1.25), rel=1e-6)
    cost = np.hypot(found.curve.evaluate("x'", s), found.curve.evaluate("y'", s)) / y
    assert cost == pytest.approx(np.full(21, found.value), rel=1e-5)


def test_the_largest_area_on_a_straight_shore_is_a_half_disc():
    """Dido's problem: Gelfand, Fomin (1963), section 12 (from memory).  Both ends stand upright on the shore."""
    found = way("y*x'", {"x": (0, None), "y": (0, 0)}, "maximum", 0, constraints=["integral(sqrt(x'^2 + y'^2)) = pi"])
    assert found.verdict is Verdict.LOCAL_MAXIMUM
    assert found.value == pytest.approx(math.pi / 2, rel=1e-8)
    assert found.curve.evaluate("x", np.array([1.0]))[0] == pytest.approx(2, rel=1e-6)
    assert found.curve.evaluate("x'", np.array([0.0]))[0] == pytest.approx(0, abs=1e-4)
    (price,) = [price for price in found.prices if price.pointer == "/constraints/0"]
    assert price.price == pytest.approx(1, rel=1e-6)  # the area is l^2/(2 pi)
