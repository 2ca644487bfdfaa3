"""Problem document -> fields of the composer.  What the form cannot show is carried along in hidden fields."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from web.form.reading import REST, value_from_text
from web.form.rows import text_from_arguments, text_from_rows
from web.form.sections import HEAD, SECTIONS, Column, Kind, Section, Shape

MOST_FIELDS = 900
"""More fields than this are slow to fill in, and servers refuse to read them: such a document is edited as JSON."""


def form_from_document(document: Mapping[str, Any]) -> dict[str, str]:
    """The fields that show the document; `read_form` of them gives an equal document back."""
    rest = dict(document)
    fields: dict[str, str] = {}
    if rest.get("format") == 1:
        del rest["format"]
    for column in HEAD:
        if isinstance(rest.get(column.member), str):
            fields[column.key] = rest.pop(column.member)
    for section in SECTIONS:
        fill = _FILL[section.shape]
        shown = fill(section, rest.get(section.name))
        if shown is not None:
            fields.update(shown)
            rest.pop(section.name, None)
    if rest:
        fields[REST] = _compact(rest)
    return fields


def kept_back(fields: Mapping[str, str]) -> tuple[str, ...]:
    """Names of the members that the document has and the form does not show."""
    return tuple(json.loads(fields.get(REST, "") or "{}"))


def _fill_map(section: Section, content: Any) -> dict[str, str] | None:
    if content is None:
        return {}
    if not isinstance(content, dict):
        return None
    fields: dict[str, str] = {}
    for number, (name, entry) in enumerate(content.items()):
        row = f"{section.name}.{number}"
        shown = _fill_entry(section, row, entry)
        if shown is None or not name.strip():
            return None
        fields |= {f"{row}.name": name, **shown}
    return fields


def _fill_list(section: Section, content: Any) -> dict[str, str] | None:
    if content is None:
        return {}
    (column,) = section.columns
    if not isinstance(content, list) or not all(isinstance(item, str) and item.strip() for item in content):
        return None
    return {f"{section.name}.{number}.{column.key}": item for number, item in enumerate(content)}


def _fill_objects(section: Section, content: Any) -> dict[str, str] | None:
    if content is None:
        return {}
    if not isinstance(content, list) or not content:
        return None
    fields: dict[str, str] = {}
    for number, entry in enumerate(content):
        shown = _fill_entry(section, f"{section.name}.{number}", entry)
        if not shown:
            return None
        fields |= shown
    return fields


def _fill_record(section: Section, content: Any) -> dict[str, str] | None:
    if content is None:
        return {}
    return _fill_entry(section, section.name, content)


def _fill_entry(section: Section, row: str, entry: Any) -> dict[str, str] | None:
    """Fields of one row or record; None where the entry is not of the shape that the section shows."""
    (first, *_) = section.columns
    if not first.member:
        text = _text(entry, first)
        return None if text is None else {f"{row}.{first.key}": text}
    if not isinstance(entry, dict):
        return None
    rest = dict(entry)
    fields: dict[str, str] = {}
    pair = rest.get("within")
    for column in section.columns:
        member, _, index = column.member.partition("/")
        if not index:
            text = _text(rest[member], column) if member in rest else None
            if text is None and member in rest and column.kind is Kind.CHOICE:
                return None  # a field of choices cannot be left empty
            if text is not None:
                fields[f"{row}.{column.key}"] = text
                del rest[member]
        elif isinstance(pair, list) and len(pair) == 2 and all(_bound(item) for item in pair) and pair != [None, None]:
            rest.pop(member, None)
            if pair[int(index)] is not None:
                fields[f"{row}.{column.key}"] = _text(pair[int(index)], column) or ""
    if rest:
        fields[f"{row}.{REST}"] = _compact(rest)
    return fields


def _bound(item: Any) -> bool:
    return item is None or (isinstance(item, str) and bool(item.strip())) or _is_number(item)


def _text(value: Any, column: Column) -> str | None:
    """The text that a field shows for a value; None where no text of this field would give the value back."""
    if column.kind is Kind.CHOICE:
        return value if value in column.choices else None
    if column.kind in (Kind.LINES, Kind.ENTRIES):
        text = _lines(value, column.kind)
        return text if text and value_from_text(text, column.kind) == value else None
    if isinstance(value, str):
        return value if value.strip() else None
    if column.kind is Kind.POINTS and (rows := text_from_rows(value)) is not None:
        return rows
    if column.kind is Kind.ARGUMENTS and (words := text_from_arguments(value)) is not None:
        return words
    if column.kind in (Kind.POINTS, Kind.ARGUMENTS) and value and isinstance(value, list | dict):
        return _compact(value)
    if column.kind in (Kind.VALUE, Kind.GUESS) and (_is_number(value) or isinstance(value, list | dict)):
        return _compact(value)
    return None


def _lines(value: Any, kind: Kind) -> str:
    """Formulas, or names and formulas, as lines; empty where the value is something else."""
    lines: list[Any] = []
    if kind is Kind.LINES and isinstance(value, list):
        lines = value
    elif kind is Kind.ENTRIES and isinstance(value, dict) and all(isinstance(part, str) for part in value.values()):
        lines = [f"{name} = {formula}" for name, formula in value.items()]
    return "\n".join(lines) if all(isinstance(line, str) for line in lines) else ""


def _is_number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _compact(value: Any) -> str:
    return json.dumps(value, ensure_ascii=False)


_FILL = {
    Shape.MAP: _fill_map, Shape.LIST: _fill_list, Shape.OBJECTS: _fill_objects, Shape.RECORD: _fill_record,
}  # fmt: skip
