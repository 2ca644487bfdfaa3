"""A solution as the document that is stored, answered and shown: JSON values only, in the user's units.

The solver works in coherent SI units.  A function's Legendre coefficients scale linearly with its unit and the breaks
with the unit of the independent variable; the local variable of an interval (-1 to 1) has no unit, so nothing else
changes.  What is not a finite number becomes null: JSON (RFC 8259) has no other word for it.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from itertools import islice
from typing import Any

import numpy as np

from service.spec import Document
from solvers.curve import Array, Curve
from solvers.problem import Condition, Problem
from solvers.solution import (
    Change,
    Check,
    Diagnosis,
    Extremal,
    Finding,
    Fitted,
    MeshStep,
    Price,
    Slope,
    Solution,
    Stretch,
    SweepPoint,
)
from solvers.undetermined import Undetermined
from solvers.units import PLAIN, Unit
from web.unit_text import per

FORMAT = 1
NUMERICAL_PARTS = ("curvewright", "casadi", "numpy", "scipy")
_PRIMED = re.compile(r"(.*?)('*)", re.DOTALL)


def result_document(
    document: Document,
    problem: Problem,
    solution: Solution,
    reading: Mapping[str, Any],
    times: Mapping[str, float],
    *,
    id: str | None = None,
    state: str = "finished",
) -> dict[str, Any]:
    """The result document of `DEVELOPERS.md`.

    `reading` says how the document was understood, `times` are seconds per stage outside the solver.  `id` is the
    run's, None for a solve without a server.
    """
    units = _Units(problem)
    return {
        "format": FORMAT,
        "id": id,
        "state": state,
        "problem": document.source,
        "problem_hash": document.canonical_hash(),
        "verdict": solution.verdict.value if solution.verdict else None,
        "value": _in(solution.value, problem.value_unit),
        "value_error": _in(solution.value_error, problem.value_unit),
        "value_unit": problem.value_unit.text,
        "parameters": _parameters(solution, units),
        "checks": [_check(check, problem) for check in solution.checks],
        "curve": _curve(solution, problem, units),
        "multipliers": {
            "costates": _costates(solution, problem, units),
            "prices": [_price(price, problem, units) for price in solution.prices],
        },
        "stretches": [_stretch(stretch, problem) for stretch in solution.stretches],
        "observations": _fit(solution, problem, units),
        "extremals": [_extremal(extremal, problem, units) for extremal in solution.extremals],
        "slopes": [_slope(slope, problem) for slope in solution.slopes],
        "band": _band(solution, problem, units),
        "sweep": _sweep(solution, problem, units),
        "continuation": _branch(solution, problem),
        "diagnosis": _diagnosis(solution.diagnosis, problem, units),
        "undetermined": [_undetermined(one, problem) for one in solution.undetermined],
        "notes": list(solution.notes),
        "reading": dict(reading),
        "provenance": {
            "versions": dict(_versions(NUMERICAL_PARTS)),
            "options": {
                "tolerance": problem.options.tolerance,
                "time_limit": problem.options.time_limit,
                "starts": problem.options.starts,
                "points": problem.options.points,
            },
            "times": {stage: _finite(seconds) for stage, seconds in {**times, **solution.times}.items()},
            "iterations": solution.iterations,
            "meshes": [_mesh(step, problem.value_unit) for step in solution.meshes],
        },
    }


class _Units:
    """The user's unit of everything that a solution names."""

    def __init__(self, problem: Problem) -> None:
        self.independent = problem.independent_unit
        self._unknowns = {unknown.name: unknown.unit for unknown in problem.unknowns}
        self._parameters = {parameter.name: parameter.unit for parameter in problem.parameters}
        self._conditions: dict[tuple[str, str], Condition] = {}
        self._pointers: dict[str, Condition] = {}
        for condition in problem.conditions:
            self._conditions[condition.label, condition.pointer] = condition
            self._pointers.setdefault(condition.pointer, condition)

    def parameter(self, name: str) -> Unit:
        """The unit of a parameter."""
        return self._parameters.get(name, PLAIN)

    def function(self, primed: str) -> Unit:
        """The unit of an unknown or of its derivative, `x''`."""
        match = _PRIMED.fullmatch(primed)
        assert match is not None  # the pattern takes any text
        name, order = match[1], len(match[2])
        unit = self._unknowns.get(name, PLAIN)
        if not order:
            return unit
        return Unit(per(unit.text, self.independent.text, order), unit.factor / self.independent.factor**order)

    def condition(self, label: str, pointer: str) -> Unit | None:
        """The unit of a condition, a bound, or the unknown that a pointer means; None where it cannot be told."""
        found = self._conditions.get((label, pointer)) or self._pointers.get(pointer)
        if found is not None:
            return found.unit
        match pointer.split("/")[1:]:
            case ["unknowns" | "guess", name, *_] if (plain := _plain(name)) in self._unknowns:
                return self._unknowns[plain]
            case ["parameters" | "guess", name, *_] if (plain := _plain(name)) in self._parameters:
                return self._parameters[plain]
        return None


def _plain(token: str) -> str:
    """A token of a JSON pointer without its escapes (RFC 6901, section 4)."""
    return token.replace("~1", "/").replace("~0", "~")


def _finite(number: float | None) -> float | None:
    return float(number) if number is not None and math.isfinite(number) else None


def _in(number: float | None, unit: Unit) -> float | None:
    """An SI number in `unit`."""
    return None if number is None else _finite(number / unit.factor)


def _numbers(values: Array, unit: Unit) -> list[float | None]:
    """SI numbers in `unit`."""
    with np.errstate(over="ignore"):
        found = values / unit.factor
    told: list[float | None] = found.tolist()
    return told if np.isfinite(found).all() else [_finite(number) for number in told]


def _pieces(pieces: Sequence[Array], unit: Unit) -> list[list[float | None]]:
    """SI coefficients, interval by interval; divided at once, since they are many and short."""
    told = iter(_numbers(np.concatenate(pieces), unit))
    return [list(islice(told, len(piece))) for piece in pieces]


def _arc(name: str, curve: Curve, units: Mapping[str, Unit], independent: Unit) -> dict[str, Any]:
    """One arc: its mesh and, per function, the coefficients of each interval, lowest degree first."""
    return {
        "name": name,
        "basis": "legendre",
        "breaks": _numbers(curve.breaks, independent),
        "functions": {name: _pieces(pieces, units[name]) for name, pieces in curve.functions.items()},
    }


def _parameters(solution: Solution, units: _Units) -> dict[str, Any]:
    return {
        name: {"value": _in(value, units.parameter(name)), "unit": units.parameter(name).text}
        for name, value in solution.parameters.items()
    }


def _extremal(extremal: Extremal, problem: Problem, units: _Units) -> dict[str, Any]:
    found = extremal.solution
    return {
        "verdict": found.verdict.value if found.verdict else None,
        "value": _in(found.value, problem.value_unit),
        "value_error": _in(found.value_error, problem.value_unit),
        "parameters": _parameters(found, units),
        "starts": list(extremal.starts),
        "checks": [_check(check, problem) for check in found.checks],
        "curve": _curve(found, problem, units),
    }


def _stretch(stretch: Stretch, problem: Problem) -> dict[str, Any]:
    return {
        "of": stretch.of,
        "arc": stretch.arc,
        "from": _in(stretch.start, problem.independent_unit),
        "from_error": _in(stretch.start_error, problem.independent_unit),
        "to": _in(stretch.end, problem.independent_unit),
        "to_error": _in(stretch.end_error, problem.independent_unit),
        "course": stretch.course.value,
    }


def _fit(solution: Solution, problem: Problem, units: _Units) -> dict[str, Any] | None:
    """The fit to observations; a covariance is in the units of its two parameters."""
    fit = solution.fit
    if fit is None:
        return None
    first = fit.observations[0].unit
    own = PLAIN if fit.weighted else first
    names = [name for name in fit.names if name in solution.parameters]
    kept = [fit.names.index(name) for name in names]
    matrix = None
    if fit.covariance is not None:
        sizes = np.array([units.parameter(name).factor for name in names])
        matrix = fit.covariance[np.ix_(kept, kept)] / sizes[:, None] / sizes
    return {
        "points": fit.points,
        "sigmas_known": fit.weighted,
        "sum_of_squares": _finite(fit.squares / own.factor**2),
        "degrees_of_freedom": _finite(fit.freedom),
        "spread": _in(fit.spread, own),
        "unit": own.text,
        "parameters": {
            name: {
                "value": _in(solution.parameters[name], units.parameter(name)),
                "sigma": None if matrix is None else _finite(float(np.sqrt(max(matrix[k, k], 0.0)))),
                "unit": units.parameter(name).text,
            }
            for k, name in enumerate(names)
        },
        "covariance": None if matrix is None else [[_finite(float(v)) for v in row] for row in matrix],
        "lists": [_fitted(fitted, problem) for fitted in fit.observations],
    }


def _fitted(fitted: Fitted, problem: Problem) -> dict[str, Any]:
    unit = fitted.unit

    def column(values: Array | None, of: Unit = unit) -> list[float | None] | None:
        return None if values is None else _numbers(values, of)

    return {
        "of": fitted.label,
        "arc": fitted.arc,
        "pointer": fitted.pointer,
        "unit": unit.text,
        "place": column(fitted.places, problem.independent_unit),
        "observed": column(fitted.observed),
        "fitted": column(fitted.fitted),
        "residual": column(fitted.observed - fitted.fitted),
        "sigma": column(fitted.sigma),
        "normalised": column(fitted.normalised, PLAIN),
        "fitted_sigma": column(fitted.fitted_sigma),
    }


def _by_arc(found: Solution | SweepPoint | Change) -> list[tuple[str, Curve]]:
    """The arcs of a curve with their names; a curve without arcs is one without a name."""
    return [(arc.name, arc.curve) for arc in found.arcs] if found.curve is None else [("", found.curve)]


def _curve(solution: Solution, problem: Problem, units: _Units) -> dict[str, Any] | None:
    arcs = _by_arc(solution)
    if not arcs:
        return None
    functions = {name: units.function(name) for _, curve in arcs for name in curve.functions}
    return {
        "independent": {"name": problem.independent, "unit": problem.independent_unit.text},
        "error": _finite(solution.curve_error),
        "arcs": [_arc(name, curve, functions, problem.independent_unit) for name, curve in arcs],
        "units": {name: unit.text for name, unit in functions.items()},
    }


def _costates(solution: Solution, problem: Problem, units: _Units) -> dict[str, Any]:
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
        "arcs": [_arc(name, curve, multipliers, way) for name, curve in arcs],
        "units": {name: unit.text for name, unit in multipliers.items()},
    }


def _where(place: float | None, subject: str, independent: Unit) -> dict[str, Any] | None:
    return None if place is None and not subject else {"place": _in(place, independent), "subject": subject}


def _check(check: Check, problem: Problem) -> dict[str, Any]:
    return {
        "name": check.name,
        "status": check.status.value,
        "figure": _finite(check.figure),
        "threshold": _finite(check.threshold),
        "where": _where(check.place, check.subject, problem.independent_unit),
        "sentence": check.sentence,
    }


def _price(price: Price, problem: Problem, units: _Units) -> dict[str, Any]:
    """SI value per SI limit; in the user's units one raises the limit by one of *its* units."""
    limit = units.condition(price.label, price.pointer) or PLAIN
    unit = Unit(per(problem.value_unit.text, limit.text), problem.value_unit.factor / limit.factor)
    return {
        "condition": price.label,
        "pointer": price.pointer,
        "price": _in(price.price, unit),
        "unit": unit.text,
    }


def _slope(slope: Slope, problem: Problem) -> dict[str, Any]:
    """The slope in the units of value and constant; what one standard deviation of the constant moves the value by."""
    own = next(constant.unit for constant in problem.constants if constant.name == slope.constant)
    unit = Unit(per(problem.value_unit.text, own.text), problem.value_unit.factor / own.factor)
    return {
        "constant": slope.constant,
        "slope": _in(slope.slope, unit),
        "unit": unit.text,
        "tolerance": _in(slope.tolerance, own),
        "contribution": _in(slope.contribution, problem.value_unit),
    }


def _band(solution: Solution, problem: Problem, units: _Units) -> dict[str, Any] | None:
    """What the tolerances leave open: of the value, and of the curve constant by constant."""
    if solution.value_band is None:
        return None
    changes = [
        {
            "constant": change.constant,
            "arcs": [_arc(name, curve, {name: units.function(name) for name in curve.functions},
                          problem.independent_unit) for name, curve in _by_arc(change)],
        }
        for change in solution.changes
    ]  # fmt: skip
    return {"value": _in(solution.value_band, problem.value_unit), "curve": changes}


def _branch(solution: Solution, problem: Problem) -> dict[str, Any] | None:
    """The points of a continuation and its folds."""
    branch = solution.branch
    if branch is None:
        return None
    unit = next(constant.unit for constant in problem.constants if constant.name == branch.constant)
    points, folds = (
        [{"at": _in(p.at, unit), "value": _in(p.value, problem.value_unit), "leg": p.leg} for p in some]
        for some in (branch.points, branch.folds)
    )
    return {"constant": branch.constant, "unit": unit.text, "points": points, "folds": folds, "end": branch.end,
            "error": _finite(branch.error)}  # fmt: skip


def _sweep(solution: Solution, problem: Problem, units: _Units) -> dict[str, Any] | None:
    """The points row by row, and the curves of some of them."""
    if not solution.sweep:
        return None
    own = {constant.name: constant.unit for constant in problem.constants}
    by = [own[sweep.constant] for sweep in problem.sweeps]
    return {
        "constants": [
            {"name": sweep.constant, "unit": unit.text, "values": _numbers(np.array(sweep.values), unit)}
            for sweep, unit in zip(problem.sweeps, by, strict=True)
        ],
        "parameters": {parameter.name: parameter.unit.text for parameter in problem.parameters},
        "points": [
            {
                "at": [_in(value, unit) for value, unit in zip(point.at, by, strict=True)],
                "verdict": point.verdict.value if point.verdict else None,
                "value": _in(point.value, problem.value_unit),
                "value_error": _in(point.value_error, problem.value_unit),
                "parameters": {name: _in(value, units.parameter(name)) for name, value in point.parameters.items()},
                "failed": list(point.failed),
                "note": point.note,
            }
            for point in solution.sweep
        ],
        "curves": [
            {
                "point": index,
                "arcs": [_arc(name, curve, {function: units.function(function) for function in curve.functions},
                              problem.independent_unit) for name, curve in arcs],
            }
            for index, point in enumerate(solution.sweep)
            if (arcs := _by_arc(point))
        ],
    }  # fmt: skip


def _diagnosis(diagnosis: Diagnosis | None, problem: Problem, units: _Units) -> dict[str, Any] | None:
    if diagnosis is None:
        return None
    findings = [_finding(finding, problem, units) for finding in diagnosis.findings]
    return {"reason": diagnosis.reason, "sentence": diagnosis.sentence, "findings": findings}


def _undetermined(found: Undetermined, problem: Problem) -> dict[str, Any]:
    return {
        "name": found.name,
        "pointer": found.pointer,
        "where": _where(found.place, "", problem.independent_unit),
        "sentence": found.sentence,
    }


def _finding(finding: Finding, problem: Problem, units: _Units) -> dict[str, Any]:
    unit = units.condition(finding.label, finding.pointer) or PLAIN
    return {
        "condition": finding.label,
        "pointer": finding.pointer,
        "amount": _in(finding.amount, unit),
        "unit": unit.text,
        "where": _where(finding.place, "", problem.independent_unit),
        "note": finding.note,
    }


def _mesh(step: MeshStep, value_unit: Unit) -> dict[str, Any]:
    return {
        "intervals": step.intervals,
        "points": step.points,
        "lowest_degree": step.lowest_degree,
        "highest_degree": step.highest_degree,
        "value": _in(step.value, value_unit),
        "error": _finite(step.error),
        "iterations": step.iterations,
        "seconds": _finite(step.seconds),
    }


@cache
def _versions(packages: tuple[str, ...]) -> Mapping[str, str]:
    """Read once: it takes longer than the rest of the document."""
    found: dict[str, str] = {}
    for package in packages:
        try:
            found[package] = version(package)
        except PackageNotFoundError:  # an unpacked tree that was never installed
            found[package] = "not installed"
    return found
