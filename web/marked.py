"""A complaint about a formula as a page shows it: the text cut into what is before, in and after the marked span."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

AROUND = 60
"""Characters of a long formula that are shown on each side of the mark."""


@dataclass(frozen=True, slots=True)
class Complaint:
    """One complaint, ready to be shown.

    `field` is where to go to put it right, `start` and `end` the characters there to select, `line` the line that they
    are in (0: not known), `where` the place in words.  `before`, `marked` and `after` are empty together where it is
    not about characters.
    """

    message: str
    hint: str
    code: str
    pointer: str = ""
    field: str = ""
    before: str = ""
    marked: str = ""
    after: str = ""
    start: int = 0
    end: int = 0
    line: int = 0
    where: str = ""


def complaint(given: Mapping[str, Any], *, field: str = "", text: str = "") -> Complaint:
    """Make one from the record of the interface; `text` is the content of the field that it is about."""
    before, marked, after = cut(text, given.get("span"))
    return Complaint(
        message=str(given.get("message", "")),
        hint=_sentence(str(given.get("hint") or "")),
        code=str(given.get("code", "")),
        pointer=str(given.get("pointer") or given.get("parameter") or ""),
        field=field,
        before=before,
        marked=marked,
        after=after,
    )


def cut(text: str, span: Any) -> tuple[str, str, str]:
    """The text around a span, shortened far from it; a span of no width marks the place by a blank."""
    if not text or not isinstance(span, list | tuple) or len(span) != 2:
        return "", "", ""
    start, stop = (max(0, min(int(end), len(text))) for end in span)
    before, marked, after = text[:start], text[start:stop], text[stop:]
    if len(before) > AROUND + 1:
        before = "…" + before[-AROUND:]
    if len(after) > AROUND + 1:
        after = after[:AROUND] + "…"
    return before, marked or "\N{NO-BREAK SPACE}", after


def _sentence(hint: str) -> str:
    """Begin with a capital letter, unless the first word may be a name in a formula."""
    return hint[:1].upper() + hint[1:] if re.match(r"[a-z]{2,}[ ,:]", hint) else hint
