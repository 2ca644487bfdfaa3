"""The door for documents: bytes in, a `Document` out, or everything that is wrong with them."""

from __future__ import annotations

from typing import Any

from pydantic import ValidationError

from service.complaints import Complaint, Refused, Stage, refuse
from service.spec.model import Document
from service.spec.strict_json import parse
from service.spec.wording import complaints_of

LARGEST_BODY = 256 * 1024
"""Bytes of a document."""

LATER = {
    "region": "Problems have one independent variable for now.",
}
"""Members that the format has room for and that this version does not solve yet, with what to do meanwhile."""


def read(body: bytes) -> Document:
    """The document in `body`.  Raises `Refused` at stage size, json or schema with all findings of that stage."""
    if len(body) > LARGEST_BODY:
        message = f"The document has {len(body):,} bytes; at most {LARGEST_BODY:,} are read."
        raise Refused(Stage.SIZE, [Complaint("", None, "document-too-large", message, "Shorten texts and guesses.")])
    source = parse(body)
    if not isinstance(source, dict):
        message = "A problem document is a JSON object."
        hint = 'Start with {"format": 1, …}.'
        raise Refused(Stage.SCHEMA, [Complaint("", None, "wrong-type", message, hint)])
    refuse(Stage.SCHEMA, _not_yet(source))
    try:
        return Document.of(source)
    except ValidationError as error:
        complaints = complaints_of(error, source)
    raise Refused(Stage.SCHEMA, complaints)


def _not_yet(source: dict[str, Any]) -> list[Complaint]:
    found = [
        Complaint(f"/{member}", None, "not-yet", f"`{member}` is not solved yet.", hint)
        for member, hint in LATER.items()
        if member in source
    ]
    if isinstance(source.get("independent"), list):
        message = "Several independent variables are not solved yet."
        found.append(Complaint("/independent", None, "not-yet", message, LATER["region"]))
    return found
