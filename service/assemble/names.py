"""Which names a document declares, what each of them is, and whether they can live together."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from enum import Enum
from types import MappingProxyType

from service.complaints import Complaint, Stage, closest, pointer, refuse, sentence
from service.spec import Document
from solvers.formula.errors import FormulaError
from solvers.formula.nodes import FUNCTIONS
from solvers.formula.tokens import read_name


class Kind(Enum):
    """What a name stands for, in the words of a message."""

    INDEPENDENT = "the independent variable"
    CONSTANT = "a constant"
    PARAMETER = "a parameter"
    UNKNOWN = "an unknown"
    ABBREVIATION = "an abbreviation"
    TABLE = "a table"


RESERVED = frozenset({*FUNCTIONS, "integral", "pi"})

_ARC_NAME = re.compile(r"\w[\w-]*( [\w-]+)*")

HABITS = {
    "ln": "log", "arcsin": "asin", "arccos": "acos", "arctan": "atan", "arctan2": "atan2", "root": "sqrt",
    "int": "integral", "fabs": "abs", "sgn": "sign", "pow": "^",
}  # fmt: skip
"""What people call a function elsewhere, and what it is called here."""


@dataclass(frozen=True, slots=True)
class Names:
    """Every declared name with its kind; `written` maps the spelling in the document to the one in formulas."""

    independent: str
    kinds: Mapping[str, Kind]
    written: Mapping[str, str]

    def of(self, kind: Kind) -> tuple[str, ...]:
        """The names of one kind, in the order of the document."""
        return tuple(name for name, found in self.kinds.items() if found is kind)

    def suggestion(self, name: str) -> str:
        """What might have been meant by an unknown name, as a hint."""
        if name in HABITS:
            return f"here it is written {HABITS[name]}"
        near = closest(name, (*self.kinds, *sorted(RESERVED)))
        return (
            f"did you mean “{near}”?" if near else "declare it under constants, parameters, unknowns, tables or where"
        )


def declare(document: Document) -> Names:
    """The names of a document.  Raises `Refused` (stage names)."""
    kinds: dict[str, Kind] = {}
    written: dict[str, str] = {}
    places: dict[str, str] = {}
    complaints: list[Complaint] = []
    for name, kind, place in declarations(document):
        try:
            spelling = read_name(name)
        except FormulaError as error:
            hint = sentence(error.hint or "a name is a letter, then letters, digits and '_'")
            complaints.append(Complaint(place, None, "bad-name", f"“{name[:40]}” is no name: {error.message}.", hint))
            continue
        if len(spelling) > 40:
            message = f"The name '{spelling[:20]}…' has {len(spelling)} characters."
            complaints.append(Complaint(place, None, "bad-name", message, "Names have at most 40 characters."))
        elif spelling in RESERVED:
            message = f"“{spelling}” is built in and cannot be {kind.value}."
            hint = f"Call it '{spelling}_1', for instance."
            complaints.append(Complaint(place, None, "reserved-name", message, hint))
        elif spelling in kinds and places[spelling].startswith("/arcs/") and place.startswith("/arcs/"):
            written[name] = spelling  # each arc has its own
        elif spelling in kinds:
            message = f"“{spelling}” is {kind.value} here and {kinds[spelling].value} at {places[spelling]}."
            complaints.append(Complaint(place, None, "name-clash", message, "Give one of the two another name."))
        else:
            kinds[spelling], written[name], places[spelling] = kind, spelling, place
    refuse(Stage.NAMES, [*complaints, *_names_of_arcs(document)])
    independent = written[document.independent.name]
    return Names(independent, MappingProxyType(kinds), MappingProxyType(written))


def _names_of_arcs(document: Document) -> Iterator[Complaint]:
    """Arcs are called by name in results: each has one of its own that can stand in a sentence."""
    taken: dict[str, str] = {}
    for index, arc in enumerate(document.arcs):
        place = pointer("arcs", index, "name")
        if not _ARC_NAME.fullmatch(arc.name):
            message = f"“{arc.name}” is no name of an arc."
            yield Complaint(place, None, "bad-name", message, "Use words of letters, digits, _ and -.")
        elif arc.name in taken:
            message = f"The arc at {taken[arc.name]} is called “{arc.name}” already."
            yield Complaint(place, None, "name-clash", message, "Give one of the two another name.")
        taken.setdefault(arc.name, pointer("arcs", index))


def declarations(document: Document) -> Iterable[tuple[str, Kind, str]]:
    """Every name that a document declares, as it is written, with its kind and its JSON pointer."""
    yield document.independent.name, Kind.INDEPENDENT, "/independent/name"
    for member, kind, table in (
        ("constants", Kind.CONSTANT, document.constants),
        ("parameters", Kind.PARAMETER, document.parameters),
        ("unknowns", Kind.UNKNOWN, document.unknowns),
        ("tables", Kind.TABLE, document.tables),
        ("where", Kind.ABBREVIATION, document.where),
    ):
        for name in table:
            yield name, kind, pointer(member, name)
    for index, arc in enumerate(document.arcs):
        for name in arc.where:
            yield name, Kind.ABBREVIATION, pointer("arcs", index, "where", name)
