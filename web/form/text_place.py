"""Where in a JSON text the part stands that a pointer leads to: for the complaints of the text view."""

from __future__ import annotations

import re
from json.decoder import JSONDecoder, scanstring  # type: ignore[attr-defined]
from typing import Any

_BLANK = re.compile(r"[ \t\n\r]*")
_DECODER = JSONDecoder()


def place_of(text: str, pointer: str, span: Any = None) -> tuple[int, int] | None:
    """Characters [start, end) of the value at `pointer`, or of `span` within it where that is a plain string.

    A pointer that leads nowhere gives the nearest part around it; None where the text cannot be read.
    """
    try:
        start = _skip(text, 0)
        for part in pointer.split("/")[1:]:
            inside = _member(text, start, part.replace("~1", "/").replace("~0", "~"))
            if inside is None:
                span = None
                break
            start = inside
        end = _end(text, start)
    except (ValueError, IndexError, RecursionError):
        return None
    if _is_span(span) and text[start] == '"' and "\\" not in text[start:end]:
        # Without escapes the characters of the string are those of the text, behind the quote.
        return start + 1 + span[0], max(start + 1 + span[1], start + 2 + span[0])
    return start, end


def line_of(text: str, place: int) -> int:
    """The line, counted from 1, that a character stands in."""
    return text.count("\n", 0, place) + 1


def _member(text: str, start: int, name: str) -> int | None:
    """Where the value of a member or an item begins, in the object or list that begins at `start`."""
    opening = text[start]
    if opening not in "{[":
        return None
    at = _skip(text, start + 1)
    count = 0
    while text[at] not in "}]":
        key = str(count)
        if opening == "{":
            key, at = scanstring(text, at + 1)
            at = _skip(text, _skip(text, at) + 1)  # behind the colon
        if key == name:
            return at
        at = _skip(text, _end(text, at))
        if text[at] == ",":
            at = _skip(text, at + 1)
        count += 1
    return None


def _end(text: str, start: int) -> int:
    return _DECODER.raw_decode(text, start)[1]


def _skip(text: str, start: int) -> int:
    match = _BLANK.match(text, start)
    assert match is not None  # it matches nothing at all, too
    return match.end()


def _is_span(span: Any) -> bool:
    return isinstance(span, list | tuple) and len(span) == 2
