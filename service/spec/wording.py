"""Pydantic's findings in the words of the format, at places of the document that was sent."""

from __future__ import annotations

import json
from typing import Any

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from service.complaints import MOST, Complaint, closest, listing, pointer
from service.spec.model import (
    ArcPart,
    ContinuationPart,
    Document,
    FunctionalPart,
    IndependentPart,
    ObservationPart,
    ParameterPart,
    SolvePart,
    SweepPart,
    TablePart,
    UnknownPart,
)

_KINDS = {
    "string_type": "text", "float_type": "a number", "float_parsing": "a number", "int_type": "a whole number",
    "int_from_float": "a whole number", "int_parsing": "a whole number", "tuple_type": "a list",
    "dict_type": "an object", "model_type": "an object", "none_required": "null",
}  # fmt: skip
"""What was expected, by pydantic's type of error."""

_LIMITS = {"ge": "at least", "gt": "more than", "le": "at most", "lt": "less than"}


def complaints_of(error: ValidationError, source: Any) -> list[Complaint]:
    """One complaint per place, for the first findings."""
    places: dict[str, list[ErrorDetails]] = {}
    for detail in error.errors(include_url=False, include_context=True)[:MOST]:
        places.setdefault(_place(detail, source), []).append(detail)
    return [
        _complaint(place, details)
        for place, details in places.items()
        # What is wrong inside a list is told there; that the list then has too few good items is no news.
        if not (details[0]["type"] == "too_short" and any(other.startswith(place + "/") for other in places))
    ]


def _place(detail: ErrorDetails, source: Any) -> str:
    """The pointer of the finding: steps that are in the document (pydantic adds the branch of an alternative)."""
    if detail["type"] == "no_functional":  # found out with the whole document: an arc may have the integrand
        return pointer("functional")
    steps: list[str | int] = []
    current = source
    for step in detail["loc"]:
        inside = (isinstance(current, dict) and step in current) or (
            isinstance(current, list) and isinstance(step, int) and step < len(current)
        )
        if inside:
            current = current[step]
            steps.append(step)
    if detail["type"] == "missing":
        # A missing item of a list has no place of its own: its list is where to look.
        steps.extend(step for step in detail["loc"][-1:] if isinstance(step, str))
    return pointer(*steps)


def _complaint(place: str, details: list[ErrorDetails]) -> Complaint:
    wanted = list(dict.fromkeys(_KINDS[detail["type"]] for detail in details if detail["type"] in _KINDS))
    others = [detail for detail in details if detail["type"] not in _KINDS]
    if not others:
        message = f"Here stands {_shown(details[0]['input'])}; expected {listing(wanted, 'or')}."
        return Complaint(place, None, "wrong-type", message, f"Write {listing(wanted, 'or')} here.")
    detail = others[0]
    name = str(detail["loc"][-1]) if detail["loc"] else ""
    context: dict[str, Any] = detail.get("ctx", {})
    match detail["type"]:
        case "extra_forbidden":
            members = _members(detail["loc"][:-1])
            near = closest(name, members)
            hint = f"Did you mean `{near}`?" if near else f"Known here: {listing(members)}."
            return Complaint(place, None, "unknown-member", f"There is no member `{name[:40]}` here.", hint)
        case "missing" if isinstance(detail["loc"][-1], int):
            hint = "Write two items, as in [0, 2]; null is an open bound."
            return Complaint(place, None, "wrong-length", "This list has too few items.", hint)
        case "missing":
            hint = 'Add `"format": 1`.' if place == "/format" else f"Add `{name}`."
            return Complaint(place, None, "missing-member", f"The member `{name}` is missing.", hint)
        case "literal_error":
            known = str(context["expected"]).replace("'", '"')
            message = f"Here stands {_shown(detail['input'])}; known: {known}."
            return Complaint(place, None, "unknown-value", message, f"Write {known}.")
        case "no_functional":
            hint = (
                'Add "integrand", "endpoint" or both, or observations; "endpoint": "0" asks only for a curve that '
                "meets all conditions."
            )
            return Complaint(place, None, "no-functional", "Nothing is sought: there is no functional.", hint)
        case "no_sweep":
            message = "It is not clear which values are meant."
            return Complaint(place, None, "no-sweep", message, 'Give "values", or "from", "to" and "count".')
        case "too_long" | "too_short":
            return _count(place, context, detail["input"])
        case "string_too_long" | "string_too_short":
            limit = context.get("max_length", context.get("min_length"))
            long = detail["type"] == "string_too_long"
            message = f"This text is longer than {limit:,} characters." if long else "This text is empty."
            hint = "Shorten it; parts of a formula can have names in `where`." if long else "Write it, or leave it out."
            return Complaint(place, None, "text-too-long" if long else "empty-text", message, hint)
        case _:
            limits = [f"{word} {context[key]:,g}" for key, word in _LIMITS.items() if key in context]
            message = f"{_shown(detail['input'])} is out of range; {listing(limits) or 'a finite number'} is allowed."
            return Complaint(place, None, "out-of-range", message, f"Write {listing(limits) or 'a finite number'}.")


def _count(place: str, context: dict[str, Any], given: Any) -> Complaint:
    """A list or an object with too many or too few entries."""
    most, least = context.get("max_length"), context.get("min_length")
    if place == "/sweep":
        hint = "Sweep the others in a document of their own."
        return Complaint(place, None, "too-many", f"At most {most} constants are swept together.", hint)
    if least == 2 and most != 2 and not place.startswith("/observations/"):
        hint = "Give two points at least, as in [[0, 1], [3, 2]]."
        return Complaint(place, None, "wrong-length", "One point makes no curve.", hint)
    if place.startswith("/observations/") and "/points/" in place:
        hint = "Write [place, value] or [place, value, sigma]."
        return Complaint(place, None, "wrong-length", "This point has the wrong number of items.", hint)
    if most == 2 and not isinstance(given, dict):
        hint = "Write two items, as in [0, 2]."
        return Complaint(place, None, "wrong-length", "This list has the wrong number of items.", hint)
    if most is not None:
        message = f"There are {context.get('actual_length') or 'more'} entries here; at most {most:,} are read."
        return Complaint(place, None, "too-many", message, f"Stay within {most:,} entries.")
    return Complaint(place, None, "too-few", f"There are no entries here; at least {least} is needed.", "Add one.")


def _members(location: tuple[str | int, ...]) -> tuple[str, ...]:
    """The members that the part at `location` may have, as they are written."""
    parts: dict[str, type[BaseModel]] = {
        "independent": IndependentPart, "parameters": ParameterPart, "unknowns": UnknownPart,
        "functional": FunctionalPart, "arcs": ArcPart, "solve": SolvePart, "tables": TablePart,
        "sweep": SweepPart, "continuation": ContinuationPart, "observations": ObservationPart,
    }  # fmt: skip
    part = parts[str(location[0])] if location else Document
    return tuple(field.alias or name for name, field in part.model_fields.items())


def _shown(value: Any) -> str:
    """A value as it was sent, shortened."""
    text = json.dumps(value, ensure_ascii=False, default=str)
    return text if len(text) <= 40 else text[:39] + "…"
