"""The tables of a document: their points checked, and put together in SI."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import chain, pairwise

import numpy as np

from service.assemble.dimensions import UNCHECKED, Sort, TableSorts
from service.assemble.names import Names, declarations
from service.complaints import Complaint, Stage, pointer, refuse, sentence
from service.spec import Document, TablePart
from service.units import ONE, parse_unit
from solvers.formula.errors import FormulaError
from solvers.formula.parser import slope_of
from solvers.formula.tokens import read_name
from solvers.tables.table import Between, Outside, Table
from solvers.unit_text import UnitTextError
from solvers.units import Unit

MOST_VALUES = 20_000
"""Measured values of one table."""

CLOSEST = 1e-9
"""Least distance of neighbouring places, relative to the range."""

Row = tuple[float | None, ...]


@dataclass(frozen=True, slots=True)
class Measured:
    """The tables by name, the units of their arguments and values, and what is wrong with these units."""

    tables: Mapping[str, Table]
    sorts: Mapping[str, TableSorts]
    complaints: tuple[Complaint, ...]


def _wrong_points(document: Document) -> Iterator[Complaint]:
    """What keeps the points of a table from being a function."""
    for name, part in document.tables.items():
        place = pointer("tables", name, "points")
        yield from _wrong_rows(part, place) if len(part.of) == 1 else _wrong_grid(part, place)


def _wrong_rows(part: TablePart, place: str) -> Iterator[Complaint]:
    (argument,) = part.of
    right = True
    for index, row in enumerate(part.points):
        if len(row) != 2:
            right = False
            message = (
                f"Point {index + 1} has {_count(len(row))}; with one argument it has two: {argument} and the value."
            )
            hint = "Write [place, value]; a grid needs two arguments in `of`."
            yield Complaint(f"{place}/{index}", None, "wrong-length", message, hint)
        else:
            empty = list(_empty(row, f"{place}/{index}", 0))
            right = right and not empty
            yield from empty
    if right:
        places = [(f"{place}/{index}/0", row[0]) for index, row in enumerate(part.points)]
        yield from _not_increasing(places, argument)


def _wrong_grid(part: TablePart, place: str) -> Iterator[Complaint]:
    first, second = part.of
    head, *rows = part.points
    if len(head) < 3 or len(rows) < 2:
        message = f"A grid needs two places of {first} and two of {second} at least."
        hint = f"Write null and the places of {second} first, then for each {first} a row: its place and the values."
        yield Complaint(place, None, "wrong-length", message, hint)
        return
    if head[0] is not None:
        message = (
            f"Here stands {head[0]:g}; the first row of a grid begins with null, then come the places of {second}."
        )
        yield Complaint(f"{place}/0/0", None, "grid-corner", message, "Write null in this corner.")
    wrong = [*_empty(head[1:], f"{place}/0", 1)]
    for index, row in enumerate(rows, start=1):
        if len(row) != len(head):
            message = f"This row has {_count(len(row))}, the first one {len(head)}: a grid has no gaps."
            hint = f"Write the place of {first} and {len(head) - 1} values."
            wrong.append(Complaint(f"{place}/{index}", None, "wrong-length", message, hint))
        else:
            wrong += _empty(row, f"{place}/{index}", 0)
    yield from wrong
    count = (len(head) - 1) * len(rows)
    if count > MOST_VALUES:
        message = f"The grid has {count:,} values; at most {MOST_VALUES:,} are read."
        yield Complaint(place, None, "too-many", message, f"Stay within {MOST_VALUES:,} values.")
    if not wrong:
        yield from _not_increasing([(f"{place}/0/{k}", at) for k, at in enumerate(head[1:], start=1)], second)
        yield from _not_increasing([(f"{place}/{k}/0", row[0]) for k, row in enumerate(rows, start=1)], first)


def _count(numbers: int) -> str:
    return f"{numbers} number{'' if numbers == 1 else 's'}"


def _empty(row: Row, place: str, first: int) -> Iterator[Complaint]:
    for index, number in enumerate(row, start=first):
        if number is None:
            message = "Here stands null; expected a number."
            yield Complaint(f"{place}/{index}", None, "wrong-type", message, "Leave out places that were not measured.")


def _not_increasing(places: list[tuple[str, float | None]], argument: str) -> Iterator[Complaint]:
    numbers = [number for _, number in places if number is not None]
    least = CLOSEST * (max(numbers) - min(numbers))
    for (before, after), (at, _) in zip(pairwise(numbers), places[1:], strict=True):
        if after <= before:
            message = f"“{argument}” does not increase: {after:.10g} comes after {before:.10g}."
            yield Complaint(at, None, "points-order", message, "Sort the points; each place once.")
        elif after - before < least:
            message = f"“{argument}” hardly increases: from {before:.16g} to {after:.16g}."
            yield Complaint(at, None, "points-close", message, "Leave one of the two out.")


def read_tables(document: Document, names: Names) -> Measured:
    """The tables in SI.  Raises `Refused` (stage names) for arguments and points."""
    refuse(Stage.NAMES, chain(_wrong_arguments(document), _wrong_points(document)))
    tables: dict[str, Table] = {}
    sorts: dict[str, TableSorts] = {}
    complaints: list[Complaint] = []

    def understood(text: str, *place: str) -> tuple[Unit, Sort]:
        try:
            measure = parse_unit(text)
        except UnitTextError as error:
            complaints.append(
                Complaint(pointer(*place), None, "bad-unit", sentence(error.message), sentence(error.hint))
            )
            measure = ONE
        return Unit(text.strip(), measure.factor), Sort(measure) if text.strip() else UNCHECKED

    for name, part in document.tables.items():
        spelling = names.written[name]
        arguments = {read_name(a): understood(unit, "tables", name, "of", a) for a, unit in part.of.items()}
        unit, sort = understood(part.unit, "tables", name, "unit")
        sorts[spelling] = TableSorts(sort, tuple(of for _, of in arguments.values()))
        tables[spelling] = _table(spelling, part, {a: u for a, (u, _) in arguments.items()}, unit)
        if not all(np.isfinite(numbers).all() for numbers in (*tables[spelling].knots, tables[spelling].values)):
            message = "A number of this table is beyond the range of numbers in SI units."
            hint = "Choose smaller numbers or units."
            complaints.append(Complaint(pointer("tables", name, "points"), None, "number-range", message, hint))
    refuse(Stage.NAMES, _hidden(document, names, tables))
    return Measured(tables, sorts, tuple(complaints))


def _table(name: str, part: TablePart, arguments: Mapping[str, Unit], unit: Unit) -> Table:
    units = tuple(arguments.values())
    if len(units) == 1:
        columns = np.array(part.points, dtype=np.float64).T
        places, values = [columns[0]], columns[1]
    else:
        head, *rows = part.points
        grid = np.array(rows, dtype=np.float64)
        places, values = [grid[:, 0], np.array(head[1:], dtype=np.float64)], grid[:, 1:]
    with np.errstate(over="ignore"):
        knots = tuple(np.ascontiguousarray(of * by.factor) for of, by in zip(places, units, strict=True))
        values = np.ascontiguousarray(values * unit.factor)
    return Table(name, tuple(arguments), knots, values, Between(part.between), Outside(part.outside), unit, units)


def _wrong_arguments(document: Document) -> Iterator[Complaint]:
    for table, part in document.tables.items():
        seen: set[str] = set()
        for argument in part.of:
            place = pointer("tables", table, "of", argument)
            try:
                name = read_name(argument)
            except FormulaError as error:
                hint = "A name is a letter, then letters, digits and '_'."
                message = f"“{argument}” is no name: {error.message}."
                yield Complaint(place, None, "bad-name", message, hint)
                continue
            if name in seen:
                message = f"“{name}” is there twice, in two spellings."
                yield Complaint(place, None, "name-clash", message, "Give the arguments two names.")
            seen.add(name)


def _hidden(document: Document, names: Names, tables: Mapping[str, Table]) -> Iterator[Complaint]:
    """Names that would be taken for the slope of a table."""
    for name, kind, place in declarations(document):
        found = slope_of(names.written[name], tables)
        if found is not None and name not in document.tables:
            message = f"“{names.written[name]}” is {kind.value} here, and also the slope of the table {found[0].name}."
            yield Complaint(place, None, "name-clash", message, "Give one of the two another name.")
