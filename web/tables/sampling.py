"""A table of numbers from an exact curve."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from solvers.curve import Array
from web.caution import CAUTION
from web.tables.columns import Column, TextColumn, Wanted, described, wanted_columns
from web.tables.error import TableError
from web.tables.places import row_places
from web.trajectory import Arc, Trajectory, band, read_changes, read_costates, read_trajectory
from web.unit_text import bracketed

MOST_CELLS = 1_000_000


@dataclass(frozen=True, slots=True)
class Table:
    """Numbers with their columns; `rows` has the shape (rows, columns), NaN where an arc lacks a function.

    `texts` are columns before those of numbers, such as the arc of each row where there are several.  `record` says
    where the numbers come from, in pairs of heading and text.
    """

    title: str
    columns: tuple[Column, ...]
    rows: Array
    texts: tuple[TextColumn, ...] = ()
    record: tuple[tuple[str, str], ...] = ()
    caution: str = CAUTION

    @property
    def headings(self) -> tuple[str, ...]:
        """What stands above the columns."""
        return (*(column.name for column in self.texts), *(column.heading for column in self.columns))

    @property
    def text_rows(self) -> list[tuple[str, ...]]:
        """The texts of each row."""
        cells = [column.cells for column in self.texts]
        return list(zip(*cells, strict=True)) if cells else [()] * len(self.rows)


def table(
    result: Mapping[str, Any],
    *,
    rows: int | None = None,
    step: float | None = None,
    columns: Sequence[str] | None = None,
    derivatives: int = 0,
    sigma: bool = False,
) -> Table:
    """The curve of a result document as a table, in the user's units.

    Rows are the mesh nodes (the ends of every interval and the Lobatto points between, which determine its
    polynomials), or `rows` places evenly spaced, or every `step` from the start; the last row is exactly the end.
    `columns` are names with primes (the independent variable is always first); by default every unknown with its
    derivatives up to `derivatives`.  At a break where a control jumps the row shows the value just before it; at a
    junction node rows show both arcs, evenly spaced ones the arc that ends there.  With `sigma` every column is
    followed by one standard deviation of it from the tolerances of the constants, where that is known.

    Raises `TableError`.
    """
    trajectory = read_trajectory(result)
    if trajectory is None:
        raise TableError("This result has no curve.", "Only a result with a curve has a table.", "no-curve")
    chosen = wanted_columns(trajectory, columns, derivatives)
    places = row_places(trajectory, rows, step)
    total = sum(len(some) for _, some in places)
    if total * (1 + len(chosen)) > MOST_CELLS:
        raise TableError(
            f"The table would have {total:,} rows of {1 + len(chosen)} columns; {MOST_CELLS:,} numbers are the limit.",
            "Ask for fewer rows, a longer step or fewer columns.",
            "too-many-rows",
        )
    return _sampled(result, trajectory, chosen, places, sigma)


def costate_table(result: Mapping[str, Any]) -> Table:
    """The costates, and the multipliers of pointwise constraints that bind, at the nodes of the mesh.

    Raises `TableError`.
    """
    trajectory = read_costates(result)
    if trajectory is None:
        raise TableError("This result has no costates.", "Only a result with a curve has them.", "no-part")
    chosen = [(name, 0) for name in trajectory.stored]
    return _sampled(result, trajectory, chosen, row_places(trajectory, None, None), False)


def _sampled(
    result: Mapping[str, Any],
    trajectory: Trajectory,
    chosen: list[Wanted],
    places: list[tuple[Arc, Array]],
    sigma: bool,
) -> Table:
    """The chosen functions at places of each arc."""
    numbers = [
        (arc, np.column_stack([some, *(arc.evaluate(name, order, some) for name, order in chosen)]))
        for arc, some in places
    ]
    columns_ = described(trajectory, chosen, numbers, (result.get("problem") or {}).get("unknowns") or {})
    whole = np.concatenate([some for _, some in numbers])
    arcs = tuple(arc.name for arc, some in places for _ in some)
    if sigma:
        columns_, whole = _with_sigma(result, chosen, columns_, whole)
    return Table(
        title=str((result.get("problem") or {}).get("title") or "Curve"),
        columns=columns_,
        rows=whole,
        texts=(TextColumn("arc", "arcs", "arc of the row", arcs),) if len(trajectory.arcs) > 1 else (),
        record=record_of(result),
    )


def _with_sigma(
    result: Mapping[str, Any], chosen: Sequence[tuple[str, int]], columns: tuple[Column, ...], rows: Array
) -> tuple[tuple[Column, ...], Array]:
    """Columns and rows with the standard deviations; raises TableError where there are none."""
    changes = read_changes(result)
    if not changes:
        if result.get("value") is None:
            hint = "Its curve is the one that violates the conditions least."
            raise TableError("Nothing was solved in this run: there are no standard deviations.", hint, "no-tolerances")
        message = "It is not known what the tolerances of the constants do to the curve."
        raise TableError(message, "Give a constant a tolerance: 0.80 m +/- 0.01 m.", "no-tolerances")
    more, numbers = [columns[0]], [rows[:, 0]]
    for (name, order), column, values in zip(chosen, columns[1:], rows.T[1:], strict=True):
        more.append(column)
        numbers.append(values)
        found = band(changes, name, order, rows[:, 0])
        if found is not None:
            meaning = f"one standard deviation of {column.name} from the tolerances of the constants"
            more.append(Column(f"{column.name} sigma", column.unit, meaning))
            numbers.append(found)
    return tuple(more), np.column_stack(numbers)


def record_of(result: Mapping[str, Any]) -> tuple[tuple[str, str], ...]:
    """Where the numbers come from."""
    provenance = result.get("provenance") or {}
    curve = result.get("curve") or {}
    versions = ", ".join(f"{name} {version}" for name, version in (provenance.get("versions") or {}).items())
    error, value, bound = curve.get("error"), result.get("value"), result.get("value_error")
    unit = result.get("value_unit") or ""
    pairs = (
        ("run", result.get("id")),
        ("problem hash", result.get("problem_hash")),
        ("verdict", result.get("verdict")),
        ("value", None if value is None else bracketed(repr(value), unit)),
        ("bound on the error of the value", None if bound is None else bracketed(repr(bound), unit)),
        ("relative error of the curve", None if error is None else repr(error)),
        ("versions", versions),
        ("at a jump", "the row shows the value just before it"),
    )
    return tuple((heading, str(text)) for heading, text in pairs if text)
