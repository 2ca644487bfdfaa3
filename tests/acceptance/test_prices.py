"""Prices in the result document, in the user's units: what the value does when a limit is raised, found by raising it.

The convention: a price is the slope of the value, as it is shown, with the number of the limit, as it is written,
whatever the sense of the relation and whatever is sought.  For every kind of condition the document is solved again
with the number a little larger and a little smaller.
"""

import json
from functools import lru_cache

import pytest

from service.archive import result_document
from service.assemble import assemble
from service.spec import read
from solvers.solve import solve

STEP = 1e-3
"""Share of its size by which a limit is raised."""


def document(independent, unknowns, functional, **members):
    return {"format": 1, "independent": independent, "unknowns": unknowns, "functional": functional, **members}


HEATED = document(
    {"name": "x", "unit": "mm", "from": 0, "to": 40},
    {"y": {"unit": "cm"}},
    {"seek": "minimum", "integrand": "y'^2 + (y/L)^2"},
    constants={"L": "30 mm", "S": "1 cm*mm"},
    endpoints=["y(0) = 1", "y(40) = {0}", "y(25) = {1}"],
    constraints=["integral(y)/S >= {2}"],
)
MOVED = document(
    {"name": "t", "unit": "min", "from": 0, "to": 2},
    {"x": {"unit": "m"}, "a": {"unit": "m/s^2"}},
    {"seek": "minimum", "integrand": "a^2"},
    dynamics=["x'' = a"],
    endpoints=["x(0) = 0", "x'(0) = 0", "x(2) = {0}", "x'(2) = 0"],
    constraints=["x' <= {1}"],
)
"""The speed in m/min."""
AREA = document(
    {"name": "x", "unit": "cm", "from": 0, "to": 50},
    {"y": {"unit": "mm"}},
    {"seek": "maximum", "integrand": "y"},
    endpoints=["y(0) = 0", "y(50) = {0}"],
    constraints=["integral(sqrt(1 + y'^2)) <= {1}"],
)
"""Solved in parametric form, at constant speed."""
FALL = document(
    {"name": "x", "unit": "cm", "from": 0, "to": 80},
    {"y": {"unit": "mm"}},
    {"seek": "minimum", "integrand": "sqrt((1 + y'^2)/(2*g*y))"},
    constants={"g": "9.80665 m/s^2"},
    endpoints=["y(0) = {1}", "y(80) = {0}"],
)
"""Solved in parametric form by the square."""
HASTE = document(
    {"name": "t", "unit": "s", "from": 0, "to": "T"},
    {"x": {"unit": "mm"}, "u": {"unit": "mm/s^2", "within": [-4, "{1}"]}},
    {"seek": "minimum", "endpoint": "T"},
    parameters={"T": {"unit": "s", "within": [0.1, 60]}},
    dynamics=["x'' = u"],
    endpoints=["x(0) = 0", "x'(0) = 0", "x(T) = {0}", "x'(T) = 0"],
)
"""Two switching arcs, whose place is an unknown."""
PATIENCE = document(
    {"name": "t", "unit": "min", "from": 0, "to": "T"},
    {"x": {"unit": "cm"}},
    {"seek": "minimum", "integrand": "x'^2"},
    parameters={"T": {"unit": "min", "within": [0.1, "{0}"]}},
    endpoints=["x(0) = 0", "x(T) = 7"],
)
GAIN = document(
    {"name": "t", "unit": "h", "from": 0, "to": 1},
    {"k": {"unit": "kg", "within": ["{0}", 9]}},
    {"seek": "maximum", "integrand": "-k'^2 - (k/tau)^2"},
    constants={"tau": "20 min"},
    endpoints=["k(0) = 2", "k(1) = 2", "k(0.5)*k(1) <= {1}"],
)

CASES = {
    "value at the end": (HEATED, (1.5, 0.9, 60.0), 0, "/endpoints/1"),
    "way point": (HEATED, (1.5, 0.9, 60.0), 1, "/endpoints/2"),
    "integral at least": (HEATED, (1.5, 0.9, 60.0), 2, "/constraints/0"),
    "bound on a derivative": (MOVED, (4000.0, 2800.0), 1, "/constraints/0"),
    "length, maximum": (AREA, (30.0, 60.0), 1, "/constraints/0"),
    "end, maximum": (AREA, (30.0, 60.0), 0, "/endpoints/1"),
    "end, squared form": (FALL, (500.0, 20.0), 0, "/endpoints/1"),
    "start, squared form": (FALL, (500.0, 20.0), 1, "/endpoints/0"),
    "end with switches": (HASTE, (90.0, 6.0), 0, "/endpoints/2"),
    "bound with switches": (HASTE, (90.0, 6.0), 1, "/unknowns/u/within"),
    "bound on a parameter": (PATIENCE, (2.0,), 0, "/parameters/T/within"),
    "lower bound, maximum": (GAIN, (0.9, 1.85), 0, "/unknowns/k/within"),
    "product of values, maximum": (GAIN, (0.1, 0.7), 1, "/endpoints/2"),
}


def _filled(part, limits):
    """The document with its numbers: `{k}` alone is a number, within a text it is written there."""
    if isinstance(part, dict):
        return {name: _filled(value, limits) for name, value in part.items()}
    if isinstance(part, list):
        return [_filled(value, limits) for value in part]
    if isinstance(part, str) and "{" in part:
        return limits[int(part[1])] if part in ("{0}", "{1}", "{2}") else part.format(*limits)
    return part


@lru_cache
def _result(text, limits):
    given = read(json.dumps(_filled(json.loads(text), limits)).encode())
    problem = assemble(given)
    return result_document(given, problem, solve(problem), {}, {})


@pytest.mark.parametrize("stated, limits, which, pointer", CASES.values(), ids=CASES)
def test_a_price_is_the_slope_of_the_value_as_shown(stated, limits, which, pointer):
    text = json.dumps(stated)
    result = _result(text, limits)
    prices = [p for p in result["multipliers"]["prices"] if p["pointer"] == pointer and p["price"]]
    if len(prices) == 2:  # both sides of `within` bind: the one that is raised
        lower = pointer == "/unknowns/k/within"
        prices = [p for p in prices if p["condition"].endswith("(lower)" if lower else "(upper)")]
    assert len(prices) == 1, result["multipliers"]["prices"]
    step = STEP * abs(limits[which])
    above, below = (
        _result(text, (*limits[:which], limits[which] + s, *limits[which + 1 :]))["value"] for s in (step, -step)
    )
    assert prices[0]["price"] == pytest.approx((above - below) / (2 * step), rel=3e-3)
