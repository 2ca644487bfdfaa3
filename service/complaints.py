"""What is wrong with a document, where, and what would be right: the one way in which a document is refused.

Refused           a stage found something wrong; it carries
  Complaint, ...  every finding of that stage, each with its place
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass
from enum import Enum
from functools import lru_cache
from itertools import islice


class Stage(Enum):
    """The steps of reading a document, in order; one answer lists the complaints of the first that fails."""

    JSON = "json"
    SCHEMA = "schema"
    NAMES = "names"
    FORMULAS = "formulas"
    UNITS = "units"
    CONDITIONS = "conditions"
    SIZE = "size"


@dataclass(frozen=True, slots=True)
class Complaint:
    """One finding.

    `pointer` is a JSON pointer (RFC 6901) into the document, `span` the characters [start, end) of the formula there
    or None, `code` a stable word for programs, `message` and `hint` one sentence each for people.
    """

    pointer: str
    span: tuple[int, int] | None
    code: str
    message: str
    hint: str


class Refused(Exception):  # noqa: N818  what the document is; nothing went wrong in the program
    """The document is refused at `stage`, for the reasons in `complaints` (at least one)."""

    def __init__(self, stage: Stage, complaints: Iterable[Complaint]) -> None:
        self.stage = stage
        self.complaints = tuple(complaints)
        super().__init__("; ".join(complaint.message for complaint in self.complaints))


MOST = 50
"""Complaints in one answer."""


def refuse(stage: Stage, complaints: Iterable[Complaint]) -> None:
    """Raise `Refused` with the first of the complaints if there are any."""
    found = tuple(islice(complaints, MOST))
    if found:
        raise Refused(stage, found)


@lru_cache(maxsize=4096)
def pointer(*steps: str | int) -> str:
    """The JSON pointer of these steps: `pointer("where", "a/b")` is "/where/a~1b"."""
    return "".join("/" + str(step).replace("~", "~0").replace("/", "~1") for step in steps)


def closest(word: str, known: Iterable[str]) -> str | None:
    """The known word that is most like `word`, or None where none is much like it."""
    known = tuple(known)
    same = [candidate for candidate in known if candidate.casefold() == word.casefold()]
    found = same or difflib.get_close_matches(word, known, n=1, cutoff=0.6)
    return found[0] if found else None


def sentence(text: str) -> str:
    """The text with a capital letter at the start and a full stop at the end, where it has none."""
    text = text[:1].upper() + text[1:]
    return text if text.endswith((".", "?", "!", "…")) else text + "."


def listing(words: Iterable[str], last: str = "and") -> str:
    """Words as a sentence has them: "a, b and c"."""
    words = tuple(words)
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} {last} {words[-1]}" if words else ""
