"""The reading of a problem as a part of pages: how the document was understood, in words and as mathematics."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

from markupsafe import Markup

from web import display


@dataclass(frozen=True, slots=True)
class Equation:
    """One condition that the optimum satisfies; `mathml` may be empty, `text` then stands for it."""

    kind: str
    subject: str
    mathml: Markup
    text: str


@dataclass(frozen=True, slots=True)
class Measured:
    """A table: a sentence, and where it helps a picture."""

    sentence: str
    picture: Markup


@dataclass(frozen=True, slots=True)
class Reading:
    """What `_reading.html` shows."""

    sought: str
    sought_mathml: Markup
    unit: str
    independent: str
    arcs: tuple[str, ...]
    unknowns: tuple[str, ...]
    tables: tuple[Measured, ...]
    freedom: str
    notes: tuple[str, ...]
    necessary: tuple[Equation, ...]


def reading_view(reading: Mapping[str, Any], pictures: Mapping[str, Markup] = MappingProxyType({})) -> Reading:
    """From the reading of the interface (see DEVELOPERS.md); its MathML comes escaped from our own printer.

    `pictures` are of tables, by name.
    """
    functional = reading.get("functional") or {}
    return Reading(
        sought=str(functional.get("sentence", "")),
        sought_mathml=Markup(functional.get("mathml") or ""),
        unit=display.unit(str(functional.get("unit") or "")),
        independent=_independent(reading.get("independent") or {}),
        arcs=tuple(str(arc.get("sentence", "")) for arc in reading.get("arcs") or ()),
        unknowns=tuple(str(unknown.get("sentence", "")) for unknown in reading.get("unknowns") or ()),
        tables=tuple(
            Measured(str(table.get("sentence", "")), pictures.get(str(table.get("name", "")), Markup("")))
            for table in reading.get("tables") or ()
        ),
        freedom=str((reading.get("freedom") or {}).get("sentence", "")),
        notes=tuple(str(note) for note in reading.get("notes") or ()),
        necessary=tuple(
            Equation(
                kind=str(item.get("kind", "")),
                subject=str(item.get("for") or ""),
                mathml=Markup(item.get("mathml") or ""),
                text=str(item.get("text") or ""),
            )
            for item in reading.get("necessary") or ()
        ),
    )


def understood(reading: Mapping[str, Any]) -> dict[str, Markup]:
    """JSON pointer -> MathML of the formula there."""
    found = {str(item["pointer"]): Markup(item.get("mathml") or "") for item in reading.get("relations") or ()}
    return {pointer: mathml for pointer, mathml in found.items() if mathml}


def _independent(independent: Mapping[str, Any]) -> str:
    if not independent:
        return ""
    unit = display.unit(str(independent.get("unit") or ""))
    within = f" in {unit}" if unit else ""
    return f"{independent.get('name')} from {independent.get('from')} to {independent.get('to')}{within}"
