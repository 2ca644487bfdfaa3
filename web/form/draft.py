"""What somebody is composing: as fields or as text, whatever was wrong with it.  Nothing typed is ever dropped."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from web.form.commands import obey
from web.form.filling import MOST_FIELDS, form_from_document
from web.form.pretty import pretty
from web.form.reading import FieldComplaint, FormReading, read_form

FORM, JSON = "form", "json"
TEXT_FIELD = "json"
"""Name of the text area of the JSON view."""


@dataclass(frozen=True, slots=True)
class Draft:
    """A problem under construction.

    `text` is the document to be checked or solved.  `fields` is what the form shows (empty in the JSON view), `places`
    leads from JSON pointers to fields, `complaints` are about the form itself and forbid solving.
    """

    view: str
    text: str
    fields: Mapping[str, str]
    places: Mapping[str, str]
    complaints: tuple[FieldComplaint, ...] = ()
    solve: bool = False  # asked to be solved, not only checked
    focus: str = ""  # the field to go to


def empty_draft() -> Draft:
    """The form as it is first met."""
    return _form_draft({"independent.from": "0", "functional.seek": "minimum"})


def draft_from_text(text: str, view: str = FORM) -> Draft:
    """A document to be edited; in the JSON view where it asks for that, or where the form cannot show it."""
    document = _readable(text)
    if view == JSON or isinstance(document, str):
        return _json_draft(text)
    fields = form_from_document(document)
    return _json_draft(text) if len(fields) > MOST_FIELDS else _form_draft(fields)


def draft_from_post(posted: Mapping[str, str]) -> Draft:
    """What a page of the composer sent.  Its button's value, `do`, is check, solve, form, json or a row command."""
    command = posted.get("do", "check")
    if posted.get("view") == JSON:
        text = posted.get(TEXT_FIELD, "")
        if command == FORM:
            return _as_form(text)
        return _json_draft(text, solve=command == "solve")
    # Browsers send line ends as CR LF; documents have LF.
    fields = {name: value.replace("\r\n", "\n") for name, value in posted.items() if name not in ("do", "view")}
    fields, focus = obey(command, fields)
    if command == JSON:
        reading = read_form(fields)
        # What a document cannot express would be lost: stay, and say what it is.
        return _form_draft(fields) if reading.complaints else _json_draft(pretty(reading.document))
    return _form_draft(fields, solve=command == "solve", focus=focus)


def _as_form(text: str) -> Draft:
    document = _readable(text)
    if isinstance(document, str):
        wrong = FieldComplaint(TEXT_FIELD, "unreadable", document, "The form is filled in once the text can be read.")
        return _json_draft(text, complaints=(wrong,))
    fields = form_from_document(document)
    if len(fields) > MOST_FIELDS:
        message = f"The form would have {len(fields)} fields."
        wrong = FieldComplaint(TEXT_FIELD, "too-long", message, f"It shows at most {MOST_FIELDS}; edit the text.")
        return _json_draft(text, complaints=(wrong,))
    return _form_draft(fields)


def _form_draft(fields: Mapping[str, str], *, solve: bool = False, focus: str = "") -> Draft:
    reading: FormReading = read_form(fields)
    return Draft(FORM, pretty(reading.document), fields, reading.places, reading.complaints, solve, focus)


def _json_draft(text: str, *, solve: bool = False, complaints: tuple[FieldComplaint, ...] = ()) -> Draft:
    return Draft(JSON, text.replace("\r\n", "\n"), {}, {"": TEXT_FIELD}, complaints, solve)


def _readable(text: str) -> dict[str, Any] | str:
    """The document, or one sentence that says why the text is none."""
    try:
        document = json.loads(text, object_pairs_hook=_without_twins, parse_constant=_refuse_constant)
    except json.JSONDecodeError as error:
        return f"The text is no JSON: {error.msg} in line {error.lineno}, column {error.colno}."
    except ValueError as error:
        return f"The text is no JSON: {error}."
    except RecursionError:
        return "The text is nested too deeply."
    return document if isinstance(document, dict) else "The text is JSON, but no object in braces."


def _without_twins(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    """The object; a name that occurs twice would silently lose one of its values."""
    found = dict(pairs)
    if len(found) < len(pairs):
        names = [name for name, _ in pairs]
        raise ValueError(f"the name {next(name for name in names if names.count(name) > 1)!r} is given twice")
    return found


def _refuse_constant(text: str) -> Any:
    raise ValueError(f"{text} is no number of JSON")
