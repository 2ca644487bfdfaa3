"""JSON as RFC 8259 and RFC 7493 (I-JSON) want it: UTF-8, no repeated members, no number beyond the doubles."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Iterator
from typing import Any

from pydantic_core import from_json

from service.complaints import Complaint, Refused, Stage, pointer, refuse

DEEPEST = 16
"""How deep arrays and objects may nest; the format needs five levels."""

_PLACE = re.compile(r"^(?P<what>.*) at line (?P<line>\d+) column (?P<column>\d+)$", re.DOTALL)
_NO_NUMBER = re.compile(r"-?(NaN|Infinity|inf)\b")


class _Members(dict[str, Any]):
    """An object in which some names came more than once."""

    repeated: tuple[str, ...] = ()


def parse(body: bytes) -> Any:
    """The value of a JSON text.  Raises `Refused` (stage json), with every finding of the first sort that fails."""
    try:
        text = body.decode("utf-8").removeprefix("\ufeff")
    except UnicodeDecodeError as error:
        raise _refused("not-utf-8", f"Byte {error.start} is not UTF-8.", "Save the document as UTF-8.") from None
    try:
        value = from_json(text, allow_inf_nan=False)
    except ValueError as error:
        raise _unreadable(text, str(error)) from None
    refuse(Stage.JSON, _repetitions(text))
    if not _moderate(value):
        refuse(Stage.JSON, _excesses(value))
    return value


def _refused(code: str, message: str, hint: str, span: tuple[int, int] | None = None) -> Refused:
    return Refused(Stage.JSON, [Complaint("", span, code, message, hint)])


def _unreadable(text: str, error: str) -> Refused:
    """The parser's message with its line and column turned into a span of the whole text."""
    if not text.strip():
        return _refused("empty", "The document is empty.", 'Send a JSON object, starting with {"format": 1, …}.')
    if "recursion limit" in error:
        return _too_deep("")
    found = _PLACE.match(error)
    if found is None:
        return _refused("not-json", f"This is not JSON: {error}.", "Send one JSON object.")
    line, column = int(found["line"]), int(found["column"])
    lines = text.split("\n")
    # The parser counts columns in bytes of UTF-8.
    before = lines[line - 1].encode()[: max(column - 1, 0)].decode(errors="ignore") if line <= len(lines) else ""
    start = min(sum(len(passed) + 1 for passed in lines[: line - 1]) + len(before), max(len(text) - 1, 0))
    span = (start, start + 1)
    if _NO_NUMBER.match(text, start) or _NO_NUMBER.match(text, max(start - 1, 0)):
        where = f"line {line}, column {column}"
        message = f"JSON has no NaN and no infinity ({where})."
        return _refused("not-a-number", message, "Use null for an open bound.", span)
    what = found["what"].replace("EOF while parsing", "the text ends inside")
    message = f"This is not JSON: {what} at line {line}, column {column}."
    return _refused("not-json", message, "Check commas, quotes and brackets just before this place.", span)


def _too_deep(place: str) -> Refused:
    message = f"Arrays and objects nest deeper than {DEEPEST} levels."
    return Refused(Stage.JSON, [Complaint(place, None, "too-deep", message, "A problem document needs five levels.")])


def _repetitions(text: str) -> Iterator[Complaint]:
    """Names that an object has twice; the fast parser keeps the last one silently."""
    some = False

    def members_of(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        nonlocal some
        members = dict(pairs)
        if len(members) == len(pairs):
            return members
        some, members = True, _Members(pairs)
        names = [name for name, _ in pairs]
        members.repeated = tuple(name for name in members if names.count(name) > 1)
        return members

    tree = json.loads(text, object_pairs_hook=members_of, parse_int=str, parse_float=str)
    for place, value in _walk(tree) if some else ():
        for name in value.repeated if isinstance(value, _Members) else ():
            message = f"The name {json.dumps(name, ensure_ascii=False)} is there more than once."
            yield Complaint(place + pointer(name), None, "repeated-name", message, "Keep one of them.")


def _moderate(value: Any) -> bool:
    """Whether `_excesses` finds nothing, without saying where."""
    level = [value]
    for _ in range(DEEPEST):
        if not all(map(_is_double, (part for part in level if isinstance(part, int | float)))):
            return False
        inner = [part.values() if isinstance(part, dict) else part for part in level if isinstance(part, dict | list)]
        level = [part for parts in inner for part in parts]
    return not level


def _excesses(value: Any) -> Iterator[Complaint]:
    """Numbers that no double can hold, and nesting that no document needs."""
    for place, part in _walk(value):
        if place.count("/") >= DEEPEST and isinstance(part, list | dict):
            raise _too_deep(place)
        if isinstance(part, int | float) and not isinstance(part, bool) and not _is_double(part):
            message = "This number is too large for double precision."
            yield Complaint(place, None, "number-range", message, "Stay below 1.7e308 in size.")


def _is_double(number: int | float) -> bool:
    try:
        return math.isfinite(float(number))
    except OverflowError:
        return False


def _walk(value: Any) -> Iterator[tuple[str, Any]]:
    """Every part of a JSON value with its pointer, in reading order."""
    stack = [("", value)]
    while stack:
        place, part = stack.pop()
        yield place, part
        if isinstance(part, dict):
            stack.extend((place + pointer(name), member) for name, member in reversed(part.items()))
        elif isinstance(part, list):
            stack.extend((place + pointer(index), item) for index, item in reversed(tuple(enumerate(part))))
