"""The JSON Schema of the problem document, derived from the model."""

from __future__ import annotations

from typing import Any

from service.spec.model import Document

EXAMPLES: list[dict[str, Any]] = [
    {
        "format": 1,
        "title": "Hose of 4.2 m with clearance over the bench",
        "independent": {"name": "x", "unit": "m", "from": 0, "to": 3},
        "unknowns": {"y": {"unit": "m"}},
        "functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"},
        "endpoints": ["y(0) = 2", "y(3) = 2.4"],
        "constraints": ["integral(sqrt(1 + y'^2)) = 4.2", "y >= 0.9"],
    },
    {
        "format": 1,
        "title": "Light path through a rod of measured refractive index",
        "independent": {"name": "z", "unit": "mm", "from": 0, "to": 12},
        "unknowns": {"r": {"unit": "mm"}},
        "tables": {
            "n": {
                "of": {"r": "mm"},
                "points": [[-2, 1.5723], [-1, 1.6082], [0, 1.62], [1, 1.6082], [2, 1.5723]],
                "between": "smooth",
                "outside": "refuse",
            }
        },
        "functional": {"seek": "minimum", "integrand": "n(r)*sqrt(1 + r'^2)"},
        "endpoints": ["r(0) = 0.8", "r(12) = -0.5"],
    },
    {
        "format": 1,
        "title": "Crucible across the hall without residual swing",
        "independent": {"name": "t", "unit": "s", "from": 0, "to": "T"},
        "constants": {"g": "9.80665 m/s^2", "l": "0.80 m +/- 0.01 m", "D": "3 m"},
        "parameters": {"T": {"unit": "s", "within": [0.5, 20]}},
        "unknowns": {
            "x": {"unit": "m", "about": "trolley position"},
            "q": {"unit": "deg", "about": "swing angle", "within": [-12, 12]},
            "a": {"unit": "m/s^2", "about": "trolley acceleration", "within": [-2, 2]},
        },
        "dynamics": ["x'' = a", "q'' = -(g*sin(q) + a*cos(q))/l"],
        "functional": {"seek": "minimum", "endpoint": "T"},
        "endpoints": [
            "x(0) = 0", "x'(0) = 0", "q(0) = 0", "q'(0) = 0",
            "x(T) = D", "x'(T) = 0", "q(T) = 0", "q'(T) = 0",
        ],
        "constraints": ["-1.5 <= x' <= 1.5"],
        "guess": {"T": 4, "x": [[0, 0], [4, 3]]},
        "solve": {"tolerance": 1e-6, "time_limit": 60},
    },
]  # fmt: skip
"""Whole documents: a shape, a path through what was measured, a trajectory."""


def problem_schema() -> dict[str, Any]:
    """The schema (draft 2020-12) of the problem document, with titles, descriptions and examples that validate."""
    schema = Document.model_json_schema(by_alias=True, mode="validation")
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        **schema,
        "title": "Problem document, format 1",
        "examples": EXAMPLES,
    }
