"""The composer: a problem as a form or as JSON, with what was understood of it and what is wrong with it."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, ClassVar

from markupsafe import Markup

from web import snippets
from web.form.draft import FORM, JSON, Draft
from web.form.filling import kept_back
from web.form.reading import REST, field_of, rows
from web.form.rows import line_of_row, no_number_in
from web.form.sections import HEAD, SECTIONS, Column, Kind, Section, Shape, column_of
from web.form.spoken import spoken
from web.form.text_place import line_of, place_of
from web.form.understood import understood
from web.marked import Complaint, complaint
from web.pages.page import Page, told
from web.pages.reading import Reading, reading_view
from web.pointer import at

if TYPE_CHECKING:
    from solvers.formula.parser import Tables

LONG = 26
"""Characters of a formula whose mathematics fits beside the field."""


@dataclass(frozen=True, slots=True)
class Field:
    """One field with its label and what was said about it."""

    id: str
    label: str
    kind: str
    value: str
    example: str
    width: str
    choices: tuple[str, ...]
    complaints: tuple[Complaint, ...]
    mathml: Markup
    long: bool  # the mathematics may be wider than its place: it scrolls, and the keyboard must reach it
    focus: bool
    lines: int = 1  # of a text area


@dataclass(frozen=True, slots=True)
class Row:
    """One row of a section, or the fields of a record.  `id` is `unknowns.2`, or the section's name."""

    id: str
    label: str
    fields: tuple[Field, ...]
    rest: str
    movable: bool


@dataclass(frozen=True, slots=True)
class Block:
    """A section of the form with its rows."""

    name: str
    heading: str
    explanation: str
    row_name: str
    rows: tuple[Row, ...]
    open: bool
    foldable: bool


@dataclass(frozen=True, kw_only=True)
class ComposePage(Page):
    """The page on which a problem is written."""

    template: ClassVar[str] = "compose.html"
    here: ClassVar[str] = "compose"

    view: str = told('"form" or "json": what is shown, and what a post of the page is made of.')
    head: tuple[Field, ...] = told("Title and notes; empty in the JSON view.")
    blocks: tuple[Block, ...] = told("The sections of the form; empty in the JSON view.")
    rest: str = told("JSON of the members that the form has no field for; posted back as it is.")
    kept: tuple[str, ...] = told("Names of those members.")
    text: str = told("The document as JSON.")
    lines: int = told("Lines of the text area that show the whole text.")
    complaints: tuple[Complaint, ...] = told("Everything that is wrong, in the order of the document.")
    text_complaints: tuple[Complaint, ...] = told("The same where the text area is the field; empty in the form.")
    status: str = told("One sentence: how complete the problem is.")
    tone: str = told("Class of the tag beside that sentence.")
    reading: Reading | None = told("How the document was understood; None where it was not.")
    curl: str = told("A shell command that sends this problem.")
    python: str = told("A Python program that sends this problem.")


def compose_page(
    draft: Draft,
    *,
    base_url: str,
    reading: Mapping[str, Any] | None = None,
    complaints: Sequence[Mapping[str, Any]] = (),
) -> ComposePage:
    """The page of a draft.  `reading` or `complaints` are the answer of the check; neither: not checked yet.

    A post that only asks for a check or another row is answered with status 200 whatever the check says; 422 is for a
    draft that was to be solved (`draft.solve`) and cannot be.
    """
    shown = _complaints(draft, complaints)
    by_field: dict[str, list[Complaint]] = {}
    for item in shown:
        by_field.setdefault(item.field, []).append(item)
    status, tone = _status(shown, reading)
    in_form = draft.view == FORM
    tables = _tables(draft)
    return ComposePage(
        title="Compose a problem",
        view=draft.view,
        head=tuple(_field(column, column.key, draft, by_field, tables) for column in HEAD) if in_form else (),
        blocks=tuple(_block(section, draft, by_field, tables) for section in SECTIONS) if in_form else (),
        rest=draft.fields.get(REST, ""),
        kept=kept_back(draft.fields),
        text=draft.text,
        lines=min(max(draft.text.count("\n") + 3, 18), 60),
        complaints=shown,
        text_complaints=shown if draft.view == JSON else (),
        status=status,
        tone=tone,
        reading=reading_view(reading, _pictures(tables)) if reading is not None and not shown else None,
        curl=snippets.curl(draft.text, base_url),
        python=snippets.python(draft.text, base_url),
    )


def _tables(draft: Draft) -> Tables:
    """The tables of a draft, as far as they can be read."""
    try:
        document = json.loads(draft.text)
    except (ValueError, RecursionError):
        return {}
    if not isinstance(document, dict) or "tables" not in document:
        return {}
    from web.measured import measured  # only where there are some: a server is ready sooner

    return {table.name: table for table in measured(document)}


def _pictures(tables: Tables) -> dict[str, Markup]:
    if not tables:
        return {}
    from web.figures import drawn
    from web.figures.tabulated import plot_of

    return {name: drawn(plot_of(table)).still for name, table in tables.items()}


def _complaints(draft: Draft, given: Sequence[Mapping[str, Any]]) -> tuple[Complaint, ...]:
    own = [
        Complaint(item.message, item.hint, item.code, field=item.field, where=spoken(item.field, draft.fields))
        for item in draft.complaints
    ]
    if draft.view == JSON and own:
        return tuple(own)  # the text cannot be read: the check says the same in other words
    found = []
    for item in given:
        field = field_of(str(item.get("pointer") or ""), draft.places) or draft.places.get("", "")
        made = complaint(item, field=field, text=_concerned(draft, item, field))
        if draft.view == JSON:
            found.append(_placed(made, draft.text, item))
        else:
            found.append(replace(_by_line(made, draft.fields.get(field, ""), field), where=spoken(field, draft.fields)))
    return (*own, *found)


def _by_line(made: Complaint, text: str, field: str) -> Complaint:
    """A complaint about points in the words of their field, which holds lines and no list."""
    if column_of(field).kind is not Kind.POINTS or text.lstrip()[:1] == "[":
        return made
    if (wrong := no_number_in(text)) is not None:
        line, part = wrong
        hint = "Write one point to a line: numbers with blanks, tabs, commas or semicolons between them."
        return replace(made, message=f"Line {line}: “{part[:40]}” is no number.", hint=hint)
    row = made.pointer.partition("/points/")[2].partition("/")[0]
    at_line = line_of_row(text, int(row)) if row.isdigit() else None
    return made if at_line is None else replace(made, message=f"Line {at_line}: {made.message}")


def _placed(made: Complaint, text: str, given: Mapping[str, Any]) -> Complaint:
    """The complaint with its place in the JSON text; where that cannot be read, its span is of the text itself."""
    span = given.get("span")
    place = place_of(text, made.pointer, span) or (tuple(span) if span else None)
    if place is None:
        return made
    start, end = place
    line = line_of(text, start)
    return replace(made, start=start, end=end, line=line, where=f"Line {line}")


def _concerned(draft: Draft, given: Mapping[str, Any], field: str) -> str:
    """The text that the span of a complaint counts in: a field, the formula in the JSON text, or that text itself."""
    shown = draft.fields.get(field, "")
    if draft.view == FORM and column_of(field).kind not in (Kind.LINES, Kind.ENTRIES):
        return shown
    pointer = str(given.get("pointer") or "")
    try:
        found = at(json.loads(draft.text), pointer)
    except (ValueError, RecursionError):
        return draft.text
    return found if isinstance(found, str) else ""


def _status(complaints: Sequence[Complaint], reading: Mapping[str, Any] | None) -> tuple[str, str]:
    if complaints:
        count = len(complaints)
        return (f"{count} things to put right" if count > 1 else "One thing to put right"), "bad"
    if reading is not None:
        return "Complete: ready to solve", "good"
    return "Not checked yet", ""


def _block(section: Section, draft: Draft, by_field: Mapping[str, Sequence[Complaint]], tables: Tables) -> Block:
    if section.shape is Shape.RECORD:
        shown: tuple[Row, ...] = (_row(section, section.name, "", draft, by_field, tables),)
        filled = any(field.value for field in shown[0].fields if field.kind != Kind.CHOICE.value)
    else:
        numbers = rows(section.name, draft.fields)
        filled = bool(numbers)
        shown = tuple(
            _row(section, f"{section.name}.{number}", f"{section.row} {place}", draft, by_field, tables)
            for place, number in enumerate(numbers or [0], start=1)
        )
    wrong = any(field.complaints or field.focus for row in shown for field in row.fields)
    return Block(
        name=section.name,
        heading=section.heading,
        explanation=section.explanation,
        row_name=section.row,
        rows=shown,
        open=filled or wrong or not section.folded,
        foldable=section.folded,
    )


def _row(
    section: Section, row: str, label: str, draft: Draft, by_field: Mapping[str, Sequence[Complaint]], tables: Tables
) -> Row:
    columns = section.columns
    if section.shape is Shape.MAP:
        columns = (Column("name", "name", "Name", example="x", width="narrow"), *columns)
    return Row(
        id=row,
        label=label,
        fields=tuple(_field(column, f"{row}.{column.key}", draft, by_field, tables) for column in columns),
        rest=draft.fields.get(f"{row}.{REST}", ""),
        movable=section.shape is not Shape.RECORD,
    )


def _field(
    column: Column, name: str, draft: Draft, by_field: Mapping[str, Sequence[Complaint]], tables: Tables
) -> Field:
    value = draft.fields.get(name, "")
    return Field(
        id=name,
        label=column.label,
        kind=column.kind.value,
        value=value,
        example=column.example,
        width=column.width,
        choices=column.choices,
        complaints=tuple(by_field.get(name, ())),
        mathml=understood(value, tables) if column.kind is Kind.FORMULA else Markup(""),
        long=len(value) > LONG,
        focus=name == draft.focus,
        lines=max(value.count("\n") + 1, 2) if column.kind in (Kind.LINES, Kind.ENTRIES, Kind.POINTS) else 1,
    )
