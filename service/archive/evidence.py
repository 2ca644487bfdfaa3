"""What is known about a result as JSON: checks, prices, slopes, stretches, a diagnosis and what nothing determines."""

from __future__ import annotations

from typing import Any

from service.archive.units import Units, finite, in_unit
from solvers.problem import Problem
from solvers.solution import Check, Diagnosis, Finding, Price, Slope, Stretch
from solvers.undetermined import Undetermined
from solvers.units import PLAIN, Unit
from web.unit_text import per


def check_document(check: Check, problem: Problem) -> dict[str, Any]:
    """One check, with its place in the unit of the independent variable."""
    return {
        "name": check.name,
        "status": check.status.value,
        "figure": finite(check.figure),
        "threshold": finite(check.threshold),
        "where": _where(check.place, check.subject, problem.independent_unit),
        "sentence": check.sentence,
    }


def price_document(price: Price, problem: Problem, units: Units) -> dict[str, Any]:
    """SI value per SI limit; in the user's units one raises the limit by one of *its* units."""
    limit = units.condition(price.label, price.pointer) or PLAIN
    unit = Unit(per(problem.value_unit.text, limit.text), problem.value_unit.factor / limit.factor)
    return {
        "condition": price.label,
        "pointer": price.pointer,
        "price": in_unit(price.price, unit),
        "unit": unit.text,
    }


def slope_document(slope: Slope, problem: Problem) -> dict[str, Any]:
    """The slope in the units of value and constant; what one standard deviation of the constant moves the value by."""
    own = next(constant.unit for constant in problem.constants if constant.name == slope.constant)
    unit = Unit(per(problem.value_unit.text, own.text), problem.value_unit.factor / own.factor)
    return {
        "constant": slope.constant,
        "slope": in_unit(slope.slope, unit),
        "unit": unit.text,
        "tolerance": in_unit(slope.tolerance, own),
        "contribution": in_unit(slope.contribution, problem.value_unit),
    }


def stretch_document(stretch: Stretch, problem: Problem) -> dict[str, Any]:
    """What a control or a limited quantity does from one switch to the next."""
    return {
        "of": stretch.of,
        "arc": stretch.arc,
        "from": in_unit(stretch.start, problem.independent_unit),
        "from_error": in_unit(stretch.start_error, problem.independent_unit),
        "to": in_unit(stretch.end, problem.independent_unit),
        "to_error": in_unit(stretch.end_error, problem.independent_unit),
        "course": stretch.course.value,
    }


def diagnosis_document(diagnosis: Diagnosis | None, problem: Problem, units: Units) -> dict[str, Any] | None:
    """Why there is no more, in the terms of the problem; None where there is nothing to say."""
    if diagnosis is None:
        return None
    findings = [_finding(finding, problem, units) for finding in diagnosis.findings]
    return {"reason": diagnosis.reason, "sentence": diagnosis.sentence, "findings": findings}


def _finding(finding: Finding, problem: Problem, units: Units) -> dict[str, Any]:
    unit = units.condition(finding.label, finding.pointer) or PLAIN
    return {
        "condition": finding.label,
        "pointer": finding.pointer,
        "amount": in_unit(finding.amount, unit),
        "unit": unit.text,
        "where": _where(finding.place, "", problem.independent_unit),
        "note": finding.note,
    }


def undetermined_document(found: Undetermined, problem: Problem) -> dict[str, Any]:
    """Something that nothing determines."""
    return {
        "name": found.name,
        "pointer": found.pointer,
        "where": _where(found.place, "", problem.independent_unit),
        "sentence": found.sentence,
    }


def _where(place: float | None, subject: str, independent: Unit) -> dict[str, Any] | None:
    return None if place is None and not subject else {"place": in_unit(place, independent), "subject": subject}
