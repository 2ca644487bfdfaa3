"""The evidence of a result as rows: parameters, diagnosis, checks, prices, limit report."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from web import display
from web.extremes import Extremes
from web.verdicts import check_method, reason_heading

Rows = tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Check:
    """One check as a row: what was tested, how it ended, its figure against its threshold, where it is worst."""

    name: str
    method: str
    status: str
    tone: str
    figure: str
    threshold: str
    where: str
    sentence: str


@dataclass(frozen=True, slots=True)
class Diagnosis:
    """Why there is no full result: the reason in words, what to do, and the findings."""

    heading: str
    sentence: str
    advice: str
    findings: Rows


def parameters_of(result: Mapping[str, Any]) -> Rows:
    declared = (result.get("problem") or {}).get("parameters") or {}
    return tuple(
        (name, display.quantity(item.get("value"), item.get("unit") or "", 9), _about(declared.get(name)))
        for name, item in (result.get("parameters") or {}).items()
    )


def _about(declared: Any) -> str:
    return str(declared.get("about") or "") if isinstance(declared, Mapping) else ""


def diagnosis_of(result: Mapping[str, Any]) -> Diagnosis | None:
    given = result.get("diagnosis")
    if not given:
        return None
    numbered = {
        note for found in given.get("findings") or () if (note := str(found.get("note"))).startswith("conflict")
    }
    heading, advice = reason_heading(str(given.get("reason") or ""), max(len(numbered), 1))
    findings = (
        (
            str(finding.get("condition") or ""),
            display.quantity(finding.get("amount"), finding.get("unit") or "", 4),
            _where(finding.get("where"), result),
            str(finding.get("note") or ""),
        )
        for finding in given.get("findings") or ()
    )
    return Diagnosis(heading, str(given.get("sentence") or ""), advice, tuple(findings))


def undetermined_of(result: Mapping[str, Any]) -> Rows:
    """Name, sentence and place (a dash where it is all along) of what nothing determines."""
    return tuple(
        (str(one["name"]), str(one["sentence"]), _where(one.get("where"), result))
        for one in result.get("undetermined") or ()
    )


def stretches_of(result: Mapping[str, Any]) -> Rows:
    """Quantity with its arc, begin, end and what it does there."""
    return tuple(
        (
            f"{one['of']} on {one['arc']}" if one["arc"] else str(one["of"]),
            _place(one["from"], result, one.get("from_error")),
            _place(one["to"], result, one.get("to_error")),
            str(one["course"]),
        )
        for one in result.get("stretches") or ()
    )


def _independent(result: Mapping[str, Any]) -> tuple[str, str]:
    """Name and unit of the independent variable, from the curve or else from the problem."""
    found = (result.get("curve") or {}).get("independent") or (result.get("problem") or {}).get("independent") or {}
    return str(found.get("name") or ""), str(found.get("unit") or "")


def _place(place: float, result: Mapping[str, Any], error: float | None = None) -> str:
    """A place with its error, where it has one, and its unit; what is lost in the rounding of the whole way is 0."""
    if error:
        return display.joined(display.with_error(place, error), _independent(result)[1])
    arcs = (result.get("curve") or {}).get("arcs") or ()
    way = max((abs(end) for arc in arcs for end in (arc["breaks"][0], arc["breaks"][-1])), default=0.0)
    return display.quantity(place if abs(place) > 1e-13 * way else 0.0, _independent(result)[1], 5)


def _where(where: Any, result: Mapping[str, Any]) -> str:
    """`t = 0.3 s, x`; a dash where nothing is said."""
    if not where:
        return "—"
    name, _ = _independent(result)
    place = where.get("place")
    parts = [
        f"{name} = {_place(place, result)}" if place is not None else "",
        str(where.get("subject") or ""),
    ]
    return ", ".join(part for part in parts if part) or "—"


def check_of(check: Mapping[str, Any], result: Mapping[str, Any]) -> Check:
    return Check(
        name=str(check["name"]),
        method=check_method(str(check["name"])),
        status=str(check["status"]),
        tone=display.tone(check["status"]),
        figure=display.number(check.get("figure"), 2),
        threshold=display.number(check.get("threshold"), 2),
        where=_where(check.get("where"), result),
        sentence=str(check.get("sentence") or ""),
    )


def prices_of(result: Mapping[str, Any]) -> Rows:
    prices = (result.get("multipliers") or {}).get("prices") or ()
    return tuple(
        (str(p["condition"]), display.quantity(p.get("price"), p.get("unit") or ""), _effect(p)) for p in prices
    )


def _effect(price: Mapping[str, Any]) -> str:
    amount = price.get("price")
    if amount is None:
        return "not known"
    if amount == 0:
        return "the limit does not bind"
    return f"raising the limit {'raises' if amount > 0 else 'lowers'} the value"


def slopes_of(result: Mapping[str, Any]) -> Rows:
    """Constant, slope with unit, tolerance, what that moves the value by, in words."""
    unit = result.get("value_unit") or ""
    constants = {
        constant["name"]: constant["unit"] for constant in (result.get("reading") or {}).get("constants") or ()
    }
    rows = []
    for slope in result.get("slopes") or ():
        amount, tolerance = slope.get("slope"), slope.get("tolerance")
        effect = "no slope" if amount is None else "no effect" if amount == 0 else "raises" if amount > 0 else "lowers"
        rows.append(
            (
                str(slope["constant"]),
                display.quantity(amount, slope.get("unit") or ""),
                display.quantity(tolerance, constants.get(slope["constant"], ""), 3) if tolerance is not None else "",
                display.quantity(slope.get("contribution"), unit, 2) if tolerance is not None else "",
                f"a larger {slope['constant']} {effect} the value" if amount else effect,
            )
        )
    return tuple(rows)


def band_of(result: Mapping[str, Any]) -> str:
    """One standard deviation of the value with its unit; empty where there is none."""
    band = (result.get("band") or {}).get("value")
    return "" if band is None else display.quantity(band, result.get("value_unit") or "", 2)


def reach_of(line: Extremes, result: Mapping[str, Any]) -> tuple[str, ...]:
    return (
        line.name,
        display.quantity(line.lowest, line.unit),
        _place(line.lowest_at, result),
        display.quantity(line.highest, line.unit),
        _place(line.highest_at, result),
        display.quantity(line.largest, line.unit),
    )
