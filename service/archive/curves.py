"""Curves, costates and parameters as JSON: per arc its breaks and the Legendre coefficients of each interval.

A function's coefficients scale linearly with its unit and the breaks with the unit of the independent variable; the
local variable of an interval (-1 to 1) has no unit, so nothing else changes.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import islice
from typing import Any

import numpy as np

from service.archive.units import Units, finite, in_unit, numbers
from solvers.curve import Array, Curve
from solvers.problem import Problem
from solvers.solution import Change, Solution, SweepPoint
from solvers.units import Unit
from web.unit_text import per


def by_arc(found: Solution | SweepPoint | Change) -> list[tuple[str, Curve]]:
    """The arcs of a curve with their names; a curve without arcs is one without a name."""
    return [(arc.name, arc.curve) for arc in found.arcs] if found.curve is None else [("", found.curve)]


def arc_document(name: str, curve: Curve, units: Mapping[str, Unit], independent: Unit) -> dict[str, Any]:
    """One arc: its mesh and, per function, the coefficients of each interval, lowest degree first."""
    return {
        "name": name,
        "basis": "legendre",
        "breaks": numbers(curve.breaks, independent),
        "functions": {name: _pieces(pieces, units[name]) for name, pieces in curve.functions.items()},
    }


def _pieces(pieces: Sequence[Array], unit: Unit) -> list[list[float | None]]:
    """SI coefficients, interval by interval; divided at once, since they are many and short."""
    told = iter(numbers(np.concatenate(pieces), unit))
    return [list(islice(told, len(piece))) for piece in pieces]


def curve_document(solution: Solution, problem: Problem, units: Units) -> dict[str, Any] | None:
    """The curve with the units of its functions; None where there is none."""
    arcs = by_arc(solution)
    if not arcs:
        return None
    functions = {name: units.function(name) for _, curve in arcs for name in curve.functions}
    return {
        "independent": {"name": problem.independent, "unit": problem.independent_unit.text},
        "error": finite(solution.curve_error),
        "arcs": [arc_document(name, curve, functions, problem.independent_unit) for name, curve in arcs],
        "units": {name: unit.text for name, unit in functions.items()},
    }


def costates_document(solution: Solution, problem: Problem, units: Units) -> dict[str, Any]:
    """Costates are value per state; the multiplier of a pointwise condition is that per unit of the way too."""
    arcs = [(arc.name, arc.costates) for arc in solution.arcs if arc.costates is not None]
    if solution.costates is not None:
        arcs = [("", solution.costates)]
    value, way = problem.value_unit, problem.independent_unit
    pointwise = (*problem.constraints, *(condition for arc in problem.arcs for condition in arc.constraints))
    conditions = {condition.label: condition.unit for condition in pointwise}
    multipliers: dict[str, Unit] = {}
    for name in dict.fromkeys(name for _, curve in arcs for name in curve.functions):
        if (limit := conditions.get(name)) is not None:
            text = per(per(value.text, limit.text), way.text)
            multipliers[name] = Unit(text, value.factor / (limit.factor * way.factor))
        else:
            state = units.function(name)
            multipliers[name] = Unit(per(value.text, state.text), value.factor / state.factor)
    return {
        "arcs": [arc_document(name, curve, multipliers, way) for name, curve in arcs],
        "units": {name: unit.text for name, unit in multipliers.items()},
    }


def parameters_document(solution: Solution, units: Units) -> dict[str, Any]:
    """The parameters that were found, by name."""
    return {
        name: {"value": in_unit(value, units.parameter(name)), "unit": units.parameter(name).text}
        for name, value in solution.parameters.items()
    }
