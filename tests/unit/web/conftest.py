"""Result documents with known truth: Legendre polynomials fitted to closed forms of the Hollin Bench cases."""

from __future__ import annotations

import copy
import itertools
import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from numpy.polynomial import legendre

Function = Callable[[np.ndarray], np.ndarray]


def arc(breaks: list[float], functions: dict[str, Function], degree: int = 12, name: str = "") -> dict[str, Any]:
    """One arc of a result document; every function is interpolated at Gauss points of each interval."""
    points, _ = legendre.leggauss(degree + 1)
    fitted = {
        key: [
            legendre.legfit(points, function(left + (right - left) * (points + 1) / 2), degree).tolist()
            for left, right in itertools.pairwise(breaks)
        ]
        for key, function in functions.items()
    }
    return {"name": name, "basis": "legendre", "breaks": breaks, "functions": fitted}


def catenary(span: float, rise: float, length: float) -> tuple[float, float]:
    """Size a and lowest place of a hanging line from (0, 0) to (span, rise).

    sqrt(length^2 - rise^2) = 2 a sinh(span / 2 a)  (from memory)
    """
    low, high = 1e-2 * span, 1e3 * span
    chord = math.sqrt(length**2 - rise**2)
    for _ in range(200):
        middle = (low + high) / 2
        low, high = (middle, high) if 2 * middle * math.sinh(min(span / 2 / middle, 300)) > chord else (low, middle)
    return low, span / 2 - low * math.asinh(rise / chord)


def hose_document() -> dict[str, Any]:
    """The hanging hose: 4.2 m between (0, 2) and (3, 2.4)."""
    size, lowest = catenary(3.0, 0.4, 4.2)
    offset = 2.0 - size * math.cosh(lowest / size)
    multiplier = -offset
    breaks = np.linspace(0, 3, 9).tolist()
    curve = arc(
        breaks,
        {
            "y": lambda x: size * np.cosh((x - lowest) / size) + offset,
            "y'": lambda x: np.sinh((x - lowest) / size),
        },
    )
    x, weights = legendre.leggauss(60)
    x = 1.5 * (x + 1)
    value = float(np.sum(1.5 * weights * (size * np.cosh((x - lowest) / size) + offset) * np.cosh((x - lowest) / size)))
    costate = arc(breaks, {"y": lambda x: size * np.sinh((x - lowest) / size)})
    return {
        "format": 1,
        "id": "hose-0001",
        "state": "finished",
        "problem": {
            "format": 1,
            "title": "Hose of 4.2 m between two hooks",
            "independent": {"name": "x", "unit": "m", "from": 0, "to": 3},
            "unknowns": {"y": {"unit": "m", "about": "height of the hose"}},
            "functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"},
            "endpoints": ["y(0) = 2", "y(3) = 2.4"],
            "constraints": ["integral(sqrt(1 + y'^2)) = 4.2"],
        },
        "problem_hash": "sha256:" + "5c" * 32,
        "verdict": "local minimum",
        "value": value,
        "value_error": 3.4e-9,
        "value_unit": "m^2",
        "parameters": {},
        "checks": [
            check("conditions", "passed", 2.1e-11, 1e-6, 3.0, "y(3) = 2.4", "Every condition at the ends holds."),
            check("stationarity", "passed", 3.3e-8, 1e-6, 1.2, "y", "The Euler-Lagrange equation holds off the nodes."),
            check("motion", "not applicable", None, None, None, "", "The problem has no dynamics."),
            check("convexity", "failed", 0.4, 0.0, 0.0, "", "The integrand is not convex in y and y' together."),
        ],
        "curve": {
            "independent": {"name": "x", "unit": "m"},
            "error": 1.2e-9,
            "arcs": [curve],
            "units": {"y": "m", "y'": ""},
        },
        "multipliers": {
            "costates": {"arcs": [costate], "units": {"y": "m"}},
            "prices": [
                {
                    "condition": "integral(sqrt(1 + y'^2)) = 4.2",
                    "pointer": "/constraints/0",
                    "price": multiplier,
                    "unit": "m",
                }
            ],
        },
        "slopes": [
            {"constant": "l", "slope": multiplier, "unit": "m", "tolerance": 0.02, "contribution": 0.02 * multiplier},
            {"constant": "w", "slope": 0.0, "unit": "m^2", "tolerance": None, "contribution": None},
        ],
        "sweep": None,
        "continuation": None,
        "band": {"value": 0.02 * multiplier, "curve": []},
        "diagnosis": None,
        "notes": ["The length condition is an integral condition; its multiplier is found with the curve."],
        "reading": {
            "independent": {"name": "x", "unit": "m", "from": "0", "to": "3"},
            "unknowns": [
                {
                    "name": "y",
                    "order": 1,
                    "unit": "m",
                    "role": "state",
                    "free": True,
                    "sentence": "y: free function, y' is its highest derivative",
                }
            ],
            "parameters": [],
            "constants": [
                {"name": "l", "value": 4.2, "unit": "m", "tolerance": 0.02},
                {"name": "w", "value": 6.5, "unit": "N/m", "tolerance": None},
            ],
            "functional": {
                "sentence": "Least integral of y*sqrt(1 + y'^2) from x = 0 to x = 3",
                "mathml": "<math><mi>J</mi><mo>=</mo><mo>∫</mo><mi>y</mi><msqrt><mn>1</mn><mo>+</mo><msup><mi>y′</mi>"
                "<mn>2</mn></msup></msqrt><mi>d</mi><mi>x</mi></math>",
                "unit": "m^2",
            },
            "relations": [
                {
                    "pointer": "/endpoints/0",
                    "kind": "endpoint",
                    "mathml": "<math><mi>y</mi><mo>(</mo><mn>0</mn><mo>)</mo><mo>=</mo><mn>2</mn></math>",
                    "unit": "m",
                }
            ],
            "necessary": [
                {
                    "kind": "Euler-Lagrange",
                    "for": "y",
                    "mathml": "<math><msqrt><mn>1</mn></msqrt><mo>=</mo><mn>1</mn></math>",
                    "text": "d/dx F_y' = F_y",
                }
            ],
            "freedom": {"unknown_functions": 1, "conditions": 3, "sentence": "One free function, three conditions."},
            "notes": [],
        },
        "provenance": {
            "versions": {"curvewright": "0.1.0", "casadi": "3.8.2"},
            "options": {"tolerance": 1e-6},
            "times": {"set-up": 0.02, "solve": 0.11, "checks": 0.05},
            "iterations": 31,
            "meshes": [
                mesh(10, 40, 4, 4, value + 1e-3, 1e-3, 14, 0.03),
                mesh(8, 64, 8, 8, value + 1e-6, 2e-6, 9, 0.04),
                mesh(8, 96, 12, 12, value, 1.2e-9, 8, 0.04),
            ],
        },
    }


def stage_document() -> dict[str, Any]:
    """Rest to rest over 40 mm in least time with |a| <= 2000 mm/s^2: one switch, in the middle."""
    acceleration, distance = 2000.0, 40.0
    half = math.sqrt(distance / acceleration)
    document = hose_document()
    document |= {
        "id": "stage-0001",
        "problem": {
            "format": 1,
            "title": "Scan stage over 40 mm",
            "independent": {"name": "t", "unit": "s", "from": 0, "to": "T"},
            "parameters": {"T": {"unit": "s", "within": [0.01, 10]}},
            "unknowns": {
                "x": {"unit": "mm", "about": "stage position"},
                "a": {"unit": "mm/s^2", "within": [-2000, 2000], "about": "acceleration"},
            },
            "dynamics": ["x'' = a"],
            "functional": {"seek": "minimum", "endpoint": "T"},
            "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 40", "x'(T) = 0"],
        },
        "value": 2 * half,
        "value_error": 4e-10,
        "value_unit": "s",
        "parameters": {"T": {"value": 2 * half, "unit": "s"}},
        "curve": {
            "independent": {"name": "t", "unit": "s"},
            "error": 1e-9,
            "arcs": [
                arc(
                    [0.0, half, 2 * half],
                    {
                        "x": lambda t: np.where(
                            t < half, acceleration * t**2 / 2, distance - acceleration * (2 * half - t) ** 2 / 2
                        ),
                        "x'": lambda t: np.where(t < half, acceleration * t, acceleration * (2 * half - t)),
                        "a": lambda t: np.where(t < half, acceleration, -acceleration),
                    },
                    degree=3,
                )
            ],
            "units": {"x": "mm", "x'": "mm/s", "a": "mm/s^2"},
        },
        "multipliers": {"costates": {"arcs": [], "units": {}}, "prices": []},
    }
    return document


def vehicle_document() -> dict[str, Any]:
    """Two arcs, burn and coast; the mass drops by 4 kg at the junction and the thrust exists on the first only."""
    document = stage_document()
    document |= {
        "id": "vehicle-0001",
        "problem": {"format": 1, "title": "Sample vehicle in two arcs", "unknowns": {"m": {"about": "mass"}}},
        "curve": {
            "independent": {"name": "t", "unit": "s"},
            "error": 1e-8,
            "arcs": [
                arc(
                    [0.0, 1.0, 2.0], {"h": lambda t: t**2, "m": lambda t: 40 - t, "F": lambda t: 10 + 0 * t}, 3, "burn"
                ),
                arc([2.0, 5.0], {"h": lambda t: 4 * t - 4, "m": lambda t: 34 + 0 * t}, 3, "coast"),
            ],
            "units": {"h": "m", "m": "kg", "F": "N"},
        },
    }
    return document


def several_document() -> dict[str, Any]:
    """The hose with what two starts led to: itself, and the same shape upside down between its hooks."""
    document = hose_document()
    size, lowest = catenary(3.0, -0.4, 4.2)
    above = arc(
        np.linspace(0, 3, 9).tolist(),
        {"y": lambda x: 2.0 + size * math.cosh(lowest / size) - size * np.cosh((x - lowest) / size)},
    )
    best = {name: document[name] for name in ("verdict", "value", "value_error", "parameters", "checks", "curve")}
    other = best | {
        "verdict": "not a minimum",
        "value": 11.5,
        "parameters": {"k": {"value": 2.5, "unit": "m"}},
        "curve": document["curve"] | {"arcs": [above]},
    }
    starts = (["default guess", "y with 1 half wave down"], ["y with 1 half wave up"])
    found = [extremal | {"starts": some} for extremal, some in zip((best, other), starts, strict=True)]
    return document | {"id": "hose-0003", "extremals": found}


def fitted_document() -> dict[str, Any]:
    """The hose with readings of its height in cm at three places, 1 and 2 cm off."""
    document = hose_document()
    (hose_arc,) = document["curve"]["arcs"]
    places = [0.5, 1.5, 2.5]
    heights = [100 * _at(hose_arc, "y", place) for place in places]
    observed = [height + off for height, off in zip(heights, (1.0, -2.0, 1.0), strict=True)]
    listed = {
        "of": "y", "pointer": "/observations/0/of", "unit": "cm", "place": places, "observed": observed,
        "fitted": heights, "residual": [1.0, -2.0, 1.0], "sigma": None, "normalised": [0.5, -1.0, 0.5],
        "fitted_sigma": [0.4, 0.3, 0.4],
    }  # fmt: skip
    fit = {
        "points": 3, "sigmas_known": False, "sum_of_squares": 6.0,
        "degrees_of_freedom": 1.5, "spread": 2.0, "unit": "cm",
        "parameters": {
            "a": {"value": 2.0, "sigma": 0.1, "unit": "m"},
            "b": {"value": -4.0, "sigma": None, "unit": ""},
            "c": {"value": 0.0, "sigma": 0.3, "unit": "1/m"},
        },
        "covariance": [[0.01, 0.0, -0.015], [0.0, 0.0, 0.0], [-0.015, 0.0, 0.09]],
        "lists": [listed, listed | {"of": "2*y", "sigma": [1.0, 2.0, 1.0]}],
    }  # fmt: skip
    return document | {"id": "hose-0004", "observations": fit}


def _at(one_arc: dict[str, Any], name: str, place: float) -> float:
    """The value of a function on an arc."""
    breaks = one_arc["breaks"]
    k = next(k for k in range(len(breaks) - 1) if place <= breaks[k + 1])
    local = (2 * place - breaks[k] - breaks[k + 1]) / (breaks[k + 1] - breaks[k])
    return float(legendre.legval(local, one_arc["functions"][name][k]))


def infeasible_document() -> dict[str, Any]:
    """A hose that is shorter than the distance of its hooks."""
    document = hose_document()
    return document | {
        "id": "hose-0002",
        "state": "finished",
        "verdict": "infeasible",
        "value": None,
        "value_error": None,
        "checks": [],
        "curve": None,
        "multipliers": {"costates": {"arcs": [], "units": {}}, "prices": []},
        "diagnosis": {
            "reason": "infeasible",
            "sentence": "No curve meets y(3) = 2.4 and the length of 2.9 m together: the hooks are 3.027 m apart.",
            "findings": [
                {
                    "condition": "integral(sqrt(1 + y'^2)) = 2.9",
                    "pointer": "/constraints/0",
                    "amount": 0.127,
                    "unit": "m",
                    "where": None,
                    "note": "short by this much at the least-violating curve",
                },
                {
                    "condition": "y(3) = 2.4",
                    "pointer": "/endpoints/1",
                    "amount": 0.0,
                    "unit": "m",
                    "where": {"place": 3.0, "subject": "y"},
                    "note": "",
                },
            ],
        },
    }


def check(
    name: str, status: str, figure: Any, threshold: Any, place: Any, subject: str, sentence: str
) -> dict[str, Any]:
    """One check of a result document."""
    where = None if place is None and not subject else {"place": place, "subject": subject}
    return {
        "name": name,
        "status": status,
        "figure": figure,
        "threshold": threshold,
        "where": where,
        "sentence": sentence,
    }


def mesh(intervals: int, points: int, low: int, high: int, value: Any, error: Any, count: int, seconds: float) -> dict:
    """One line of the mesh history."""
    return {
        "intervals": intervals,
        "points": points,
        "lowest_degree": low,
        "highest_degree": high,
        "value": value,
        "error": error,
        "iterations": count,
        "seconds": seconds,
    }


@pytest.fixture
def hose() -> dict[str, Any]:
    """The hanging hose."""
    return hose_document()


@pytest.fixture
def stage() -> dict[str, Any]:
    """The scan stage with one switch."""
    return stage_document()


@pytest.fixture
def vehicle() -> dict[str, Any]:
    """Two arcs."""
    return vehicle_document()


@pytest.fixture
def several() -> dict[str, Any]:
    """Two curves found from several starts."""
    return several_document()


@pytest.fixture
def fitted() -> dict[str, Any]:
    """A fit to two lists of observations."""
    return fitted_document()


@pytest.fixture
def infeasible() -> dict[str, Any]:
    """No curve at all."""
    return infeasible_document()


@pytest.fixture
def out_of_time() -> dict[str, Any]:
    """Stopped by the clock with the best curve so far."""
    document = copy.deepcopy(hose_document())
    return document | {
        "verdict": "best found",
        "value_error": None,
        "diagnosis": {"reason": "out of time", "sentence": "The time limit of 2 s ended on mesh 2.", "findings": []},
    }
