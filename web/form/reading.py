"""Fields of the composer -> problem document.  Nothing is judged here but what a document cannot even express."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from web.form.rows import arguments_from_text, number_from, rows_from_text
from web.form.sections import HEAD, ORDER, SECTIONS, Column, Kind, Section, Shape
from web.pointer import token

REST = "rest"
"""Key of the hidden fields that hold, as JSON, what the form has no field for."""


@dataclass(frozen=True, slots=True)
class FieldComplaint:
    """Something that is wrong with a field before there is a document: a row without a name, a name given twice."""

    field: str
    code: str
    message: str
    hint: str


@dataclass(frozen=True, slots=True)
class FormReading:
    """The document, where each of its parts stands in the form (JSON pointer -> field), and what is wrong so far."""

    document: dict[str, Any]
    places: dict[str, str]
    complaints: tuple[FieldComplaint, ...]


def document_from_form(fields: Mapping[str, str]) -> dict[str, Any]:
    """The problem document that the fields describe; empty rows and empty fields are left out."""
    return read_form(fields).document


def read_form(fields: Mapping[str, str]) -> FormReading:
    """The same, with the field of every JSON pointer and the complaints that concern the form alone."""
    members: dict[str, Any] = {"format": 1, **_rest(fields, REST)}
    places: dict[str, str] = {}
    complaints: list[FieldComplaint] = []
    for column in HEAD:
        if text := fields.get(column.key, "").strip():
            members[column.member] = text
        places[f"/{column.member}"] = column.key
    for section in SECTIONS:
        found = _READ[section.shape](section, fields, places, complaints)
        if found:
            members[section.name] = found
    ordered = [name for name in ORDER if name in members]
    ordered += [name for name in members if name not in ORDER]
    return FormReading({name: members[name] for name in ordered}, places, tuple(complaints))


def rows(section: str, fields: Mapping[str, str]) -> list[int]:
    """The row numbers of a section that occur in the fields, in order."""
    prefix = section + "."
    numbers = {name[len(prefix) :].partition(".")[0] for name in fields if name.startswith(prefix)}
    return sorted(int(number) for number in numbers if number.isascii() and number.isdigit() and len(number) < 6)


def value_from_text(text: str, kind: Kind) -> Any:
    """What the text of a field means: a number where it reads as one and may be one, else the text itself."""
    text = text.strip()
    if kind in (Kind.VALUE, Kind.GUESS) and (number := number_from(text)) is not None:
        return number
    if kind is Kind.ARGUMENTS and (arguments := arguments_from_text(text)) is not None:
        return arguments
    if kind is Kind.POINTS and (points := rows_from_text(text)) is not None:
        return points
    if kind in (Kind.VALUE, Kind.GUESS, Kind.POINTS, Kind.ARGUMENTS) and text[:1] in ("[", "{"):
        try:
            return json.loads(text, parse_constant=_no_constant)
        except (ValueError, RecursionError):
            return text
    if kind in (Kind.LINES, Kind.ENTRIES):
        lines = [line.strip() for line in text.split("\n") if line.strip()]
        return lines if kind is Kind.LINES else dict(_named(line) for line in lines)
    return text


def _named(line: str) -> tuple[str, str]:
    """Name and formula of a line `name = formula`."""
    name, _, formula = line.partition("=")
    return name.strip(), formula.strip()


def field_of(pointer: str, places: Mapping[str, str]) -> str:
    """The field that shows what a JSON pointer points to, or the nearest part around it; "" where there is none."""
    while pointer:
        if pointer in places:
            return places[pointer]
        pointer = pointer.rpartition("/")[0]
    return ""


def _read_map(
    section: Section, fields: Mapping[str, str], places: dict[str, str], complaints: list[FieldComplaint]
) -> dict[str, Any]:
    entries: dict[str, Any] = {}
    places[f"/{section.name}"] = f"{section.name}.0.name"
    for number in rows(section.name, fields):
        row = f"{section.name}.{number}"
        name = fields.get(f"{row}.name", "").strip()
        entry = _entry(section, row, fields)
        if not name:
            if entry is not None:
                message = f"This {section.row} has no name, so no formula can use it."
                complaints.append(FieldComplaint(f"{row}.name", "no-name", message, "Give it one, or remove the row."))
            continue
        if name in entries:
            message = f"The name {name} is given twice."
            complaints.append(FieldComplaint(f"{row}.name", "name-twice", message, "Choose another name."))
            continue
        whole = len(section.columns) == 1  # the entry is a bare value, not an object
        entries[name] = entry if entry is not None else "" if whole else {}
        pointer = f"/{section.name}/{token(name)}"
        _place_columns(section, pointer, row, places)
        places[pointer] = f"{row}.{section.columns[0].key}" if whole else f"{row}.name"
    return entries


def _read_list(
    section: Section, fields: Mapping[str, str], places: dict[str, str], complaints: list[FieldComplaint]
) -> list[Any]:
    (column,) = section.columns
    found: list[Any] = []
    places[f"/{section.name}"] = f"{section.name}.0.{column.key}"
    for number in rows(section.name, fields):
        field = f"{section.name}.{number}.{column.key}"
        if fields.get(field, "").strip():
            places[f"/{section.name}/{len(found)}"] = field
            found.append(value_from_text(fields[field], column.kind))
    return found


def _read_objects(
    section: Section, fields: Mapping[str, str], places: dict[str, str], complaints: list[FieldComplaint]
) -> list[Any]:
    found: list[Any] = []
    places[f"/{section.name}"] = f"{section.name}.0.{section.columns[0].key}"
    for number in rows(section.name, fields):
        row = f"{section.name}.{number}"
        entry = _entry(section, row, fields)
        if entry is None:
            continue
        for column in section.columns:
            if column.kind is Kind.ENTRIES:
                complaints += _unnamed(f"{row}.{column.key}", fields)
        pointer = f"/{section.name}/{len(found)}"
        _place_columns(section, pointer, row, places)
        places[pointer] = f"{row}.{section.columns[0].key}"
        found.append(entry)
    return found


def _unnamed(field: str, fields: Mapping[str, str]) -> Iterator[FieldComplaint]:
    """Lines that do not say what is called how, and names that come twice: a document could not hold them."""
    taken: set[str] = set()
    for line in fields.get(field, "").split("\n"):
        name, formula = _named(line)
        if not line.strip():
            continue
        if not name or not formula:
            message = f"The line “{line.strip()[:40]}” gives no name to a formula."
            yield FieldComplaint(field, "no-name", message, "Write name = formula.")
        elif name in taken:
            yield FieldComplaint(field, "name-twice", f"The name {name} is given twice.", "Choose another name.")
        taken.add(name)


def _read_record(
    section: Section, fields: Mapping[str, str], places: dict[str, str], complaints: list[FieldComplaint]
) -> dict[str, Any]:
    pointer = f"/{section.name}"
    _place_columns(section, pointer, section.name, places)
    places[pointer] = f"{section.name}.{section.columns[0].key}"
    entry: dict[str, Any] = _entry(section, section.name, fields) or {}
    # A choice always has a value: left as it was, it does not make a record.
    untouched = {column.member: column.choices[0] for column in section.columns if column.kind is Kind.CHOICE}
    return {} if entry == untouched else entry


def _place_columns(section: Section, pointer: str, row: str, places: dict[str, str]) -> None:
    for column in section.columns:
        if column.member:
            places[f"{pointer}/{column.member}"] = f"{row}.{column.key}"
            parent = column.member.rpartition("/")[0]
            if parent:
                places.setdefault(f"{pointer}/{parent}", f"{row}.{column.key}")


def _entry(section: Section, row: str, fields: Mapping[str, str]) -> Any:
    """The value of one row or record; None where all its fields are empty."""
    entry: dict[str, Any] = dict(_rest(fields, f"{row}.{REST}"))
    for column in section.columns:
        text = fields.get(f"{row}.{column.key}", "")
        if not text.strip():
            continue
        value = value_from_text(text, column.kind)
        if not column.member:
            return value
        _put(entry, column, value)
    return entry or None


def _put(entry: dict[str, Any], column: Column, value: Any) -> None:
    member, _, index = column.member.partition("/")
    if index:  # one of a pair, the other open
        entry.setdefault(member, [None, None])[int(index)] = value
    else:
        entry[member] = value


def _rest(fields: Mapping[str, str], name: str) -> dict[str, Any]:
    try:
        found = json.loads(fields.get(name, "") or "{}", parse_constant=_no_constant)
    except (ValueError, RecursionError):
        return {}  # a hidden field that somebody tampered with
    return found if isinstance(found, dict) else {}


def _no_constant(text: str) -> Any:
    raise ValueError(f"{text} is no JSON")


_READ = {
    Shape.MAP: _read_map, Shape.LIST: _read_list, Shape.OBJECTS: _read_objects, Shape.RECORD: _read_record,
}  # fmt: skip
