"""What else was found beside one curve, as JSON: other extremals, bands, sweeps and branches."""

from __future__ import annotations

from typing import Any

import numpy as np

from service.archive.curves import arc_document, by_arc, curve_document, parameters_document
from service.archive.evidence import check_document
from service.archive.units import Units, finite, in_unit, numbers
from solvers.problem import Problem
from solvers.solution import Extremal, Solution


def extremal_document(extremal: Extremal, problem: Problem, units: Units) -> dict[str, Any]:
    """One of the distinct curves that several starts led to."""
    found = extremal.solution
    return {
        "verdict": found.verdict.value if found.verdict else None,
        "value": in_unit(found.value, problem.value_unit),
        "value_error": in_unit(found.value_error, problem.value_unit),
        "parameters": parameters_document(found, units),
        "starts": list(extremal.starts),
        "checks": [check_document(check, problem) for check in found.checks],
        "curve": curve_document(found, problem, units),
    }


def band_document(solution: Solution, problem: Problem, units: Units) -> dict[str, Any] | None:
    """What the tolerances leave open: of the value, and of the curve constant by constant."""
    if solution.value_band is None:
        return None
    changes = [
        {
            "constant": change.constant,
            "arcs": [arc_document(name, curve, {name: units.function(name) for name in curve.functions},
                          problem.independent_unit) for name, curve in by_arc(change)],
        }
        for change in solution.changes
    ]  # fmt: skip
    return {"value": in_unit(solution.value_band, problem.value_unit), "curve": changes}


def sweep_document(solution: Solution, problem: Problem, units: Units) -> dict[str, Any] | None:
    """The points row by row, and the curves of some of them."""
    if not solution.sweep:
        return None
    own = {constant.name: constant.unit for constant in problem.constants}
    by = [own[sweep.constant] for sweep in problem.sweeps]
    return {
        "constants": [
            {"name": sweep.constant, "unit": unit.text, "values": numbers(np.array(sweep.values), unit)}
            for sweep, unit in zip(problem.sweeps, by, strict=True)
        ],
        "parameters": {parameter.name: parameter.unit.text for parameter in problem.parameters},
        "points": [
            {
                "at": [in_unit(value, unit) for value, unit in zip(point.at, by, strict=True)],
                "verdict": point.verdict.value if point.verdict else None,
                "value": in_unit(point.value, problem.value_unit),
                "value_error": in_unit(point.value_error, problem.value_unit),
                "parameters": {name: in_unit(value, units.parameter(name)) for name, value in point.parameters.items()},
                "failed": list(point.failed),
                "note": point.note,
            }
            for point in solution.sweep
        ],
        "curves": [
            {
                "point": index,
                "arcs": [arc_document(name, curve, {function: units.function(function) for function in curve.functions},
                              problem.independent_unit) for name, curve in arcs],
            }
            for index, point in enumerate(solution.sweep)
            if (arcs := by_arc(point))
        ],
    }  # fmt: skip


def branch_document(solution: Solution, problem: Problem) -> dict[str, Any] | None:
    """The points of a continuation and its folds."""
    branch = solution.branch
    if branch is None:
        return None
    unit = next(constant.unit for constant in problem.constants if constant.name == branch.constant)
    points, folds = (
        [{"at": in_unit(p.at, unit), "value": in_unit(p.value, problem.value_unit), "leg": p.leg} for p in some]
        for some in (branch.points, branch.folds)
    )
    return {"constant": branch.constant, "unit": unit.text, "points": points, "folds": folds, "end": branch.end,
            "error": finite(branch.error)}  # fmt: skip
