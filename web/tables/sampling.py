"""Rows of numbers from an exact curve: at the mesh nodes, so many, or at a fixed step that ends exactly at the end."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cache
from typing import Any

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.curve import Array
from web.caution import CAUTION
from web.extremes import HIGHEST_DERIVATIVE
from web.trajectory import Arc, Trajectory, read_trajectory
from web.unit_text import bracketed

MOST_ROWS = 200_000
MOST_CELLS = 2_000_000
SHORTEST_LAST_STEP = 1e-6
"""A last step shorter than this share of a step is rounding, and is joined to the one before."""

_ORDINALS = ("", "first", "second", "third")


class TableError(ValueError):
    """A table that cannot be made: `message` says why, `hint` what would do, `code` is stable."""

    def __init__(self, message: str, hint: str, code: str) -> None:
        super().__init__(message)
        self.message = message
        self.hint = hint
        self.code = code


@dataclass(frozen=True, slots=True)
class Column:
    """One column: `name` as in formulas (`x'`), unit (maybe ""), and what it means in words."""

    name: str
    unit: str
    meaning: str

    @property
    def heading(self) -> str:
        """The name with its unit: `x' [m/s]`."""
        return bracketed(self.name, self.unit)


@dataclass(frozen=True, slots=True)
class Table:
    """Numbers with their columns; `rows` has the shape (rows, columns), NaN where an arc lacks a function.

    `arcs` names the arc of each row, or is empty where there is only one arc.  `record` says where the numbers come
    from, in pairs of heading and text.
    """

    title: str
    columns: tuple[Column, ...]
    rows: Array
    arcs: tuple[str, ...] = ()
    record: tuple[tuple[str, str], ...] = ()
    caution: str = CAUTION

    @property
    def headings(self) -> tuple[str, ...]:
        """What stands above the columns, `arc` first where there are several."""
        numbers = tuple(column.heading for column in self.columns)
        return ("arc", *numbers) if self.arcs else numbers


def table(
    result: Mapping[str, Any],
    *,
    rows: int | None = None,
    step: float | None = None,
    columns: Sequence[str] | None = None,
    derivatives: int = 0,
) -> Table:
    """The curve of a result document as a table, in the user's units.

    Rows are the mesh nodes (the ends of every interval and the Lobatto points between, which determine its
    polynomials), or `rows` places evenly spaced, or every `step` from the start; the last row is exactly the end.
    `columns` are names with primes (the independent variable is always first); by default every unknown with its
    derivatives up to `derivatives`.  At a break where a control jumps the row shows the value just before it; at a
    junction node rows show both arcs, evenly spaced ones the arc that ends there.

    Raises `TableError`.
    """
    trajectory = read_trajectory(result)
    if trajectory is None:
        raise TableError("This result has no curve.", "Only a result with a curve has a table.", "no-curve")
    chosen = _chosen(trajectory, columns, derivatives)
    places = _places(trajectory, rows, step)
    total = sum(len(some) for _, some in places)
    if total * (1 + len(chosen)) > MOST_CELLS:
        raise TableError(
            f"The table would have {total:,} rows of {1 + len(chosen)} columns; {MOST_CELLS:,} numbers are the limit.",
            "Ask for fewer rows, a longer step or fewer columns.",
            "too-many-rows",
        )
    numbers = [
        np.column_stack([some, *(arc.evaluate(name, order, some) for name, order in chosen)]) for arc, some in places
    ]
    return Table(
        title=str((result.get("problem") or {}).get("title") or "Curve"),
        columns=_columns(trajectory, chosen, (result.get("problem") or {}).get("unknowns") or {}),
        rows=np.concatenate(numbers),
        arcs=tuple(arc.name for arc, some in places for _ in some) if len(trajectory.arcs) > 1 else (),
        record=_record(result),
    )


def even_places(start: float, end: float, rows: int) -> Array:
    """`rows` places evenly spaced, the first exactly at the start and the last exactly at the end."""
    _check_rows(rows)
    return np.linspace(start, end, rows)


def stepped_places(start: float, end: float, step: float) -> Array:
    """Every `step` from the start; the last place is exactly the end, so the last step may be shorter."""
    if not (math.isfinite(step) and step > 0):
        raise TableError(
            f"A step of {step!r} leads nowhere.", "Give a step above 0 in the unit of the first column.", "bad-step"
        )
    steps = (end - start) / step
    if steps > MOST_ROWS:
        raise TableError(
            f"A step of {step!r} from {start!r} to {end!r} gives more than {MOST_ROWS:,} rows.",
            f"Take a step of at least {(end - start) / (MOST_ROWS - 2):.3g}.",
            "too-many-rows",
        )
    whole = math.floor(steps)
    if whole and steps - whole <= SHORTEST_LAST_STEP:
        whole -= 1
    return np.append(start + step * np.arange(whole + 1), end)


def nodes(arc: Arc) -> Array:
    """The ends of every interval and, between them, the Lobatto points of its highest degree."""
    degrees = np.max([_degrees(coefficients) for coefficients in arc.functions.values()], axis=0)
    places = [arc.breaks[:1]]
    for interval, degree in enumerate(degrees.tolist()):
        places += [arc.places(_inner_lobatto(degree), np.array(interval)), arc.breaks[interval + 1 : interval + 2]]
    return np.concatenate(places)


def _degrees(coefficients: Array) -> NDArray[np.intp]:
    """The degree of each column: where its last coefficient stands that is not zero."""
    there = coefficients != 0
    return np.where(there.any(axis=0), len(there) - 1 - np.argmax(there[::-1], axis=0), 0)


@cache
def _inner_lobatto(degree: int) -> Array:
    """The roots of the derivative of the Legendre polynomial of this degree: `degree - 1` places in (-1, 1)."""
    if degree < 2:
        return np.empty(0)
    return np.asarray(np.sort(legendre.legroots(legendre.legder([0.0] * degree + [1.0])).real), dtype=float)


def _places(trajectory: Trajectory, rows: int | None, step: float | None) -> list[tuple[Arc, Array]]:
    """Which places each arc contributes."""
    if rows is not None and step is not None:
        raise TableError("Both a number of rows and a step are given.", "Give one of the two.", "rows-and-step")
    if rows is None and step is None:
        places = [(arc, nodes(arc)) for arc in trajectory.arcs]
        _check_rows(sum(len(some) for _, some in places))
        return places
    if step is not None:
        everywhere = stepped_places(trajectory.start, trajectory.end, step)
    else:
        assert rows is not None
        everywhere = even_places(trajectory.start, trajectory.end, rows)
    return trajectory.by_arc(everywhere)


def _check_rows(rows: int) -> None:
    if rows < 2:
        raise TableError(f"{rows} rows cannot hold both ends.", "Ask for at least 2 rows.", "too-few-rows")
    if rows > MOST_ROWS:
        raise TableError(
            f"{rows:,} rows are more than the limit of {MOST_ROWS:,}.",
            f"Ask for at most {MOST_ROWS:,} rows.",
            "too-many-rows",
        )


def _chosen(trajectory: Trajectory, columns: Sequence[str] | None, derivatives: int) -> list[tuple[str, int]]:
    """The columns after the first, as names with the number of their primes."""
    if not 0 <= derivatives <= HIGHEST_DERIVATIVE:
        raise TableError(
            f"Derivatives up to order {derivatives} are asked for.",
            f"The order is a number from 0 to {HIGHEST_DERIVATIVE}.",
            "bad-derivatives",
        )
    if columns is None:
        return [(name, order) for name in trajectory.names for order in range(derivatives + 1)]
    wanted = [name for name in dict.fromkeys(columns) if name != trajectory.independent]
    return [_column(trajectory, name) for name in wanted]


def _column(trajectory: Trajectory, wanted: str) -> tuple[str, int]:
    name = wanted.rstrip("'")
    order = len(wanted) - len(name)
    if name in trajectory.names and (order <= HIGHEST_DERIVATIVE or wanted in trajectory.stored):
        return name, order
    known = [other + "'" * count for other in trajectory.names for count in range(HIGHEST_DERIVATIVE + 1)]
    if name in trajectory.names:
        hint = f"Derivatives go up to the third: {name}'''."
    elif close := get_close_matches(wanted, known, n=1, cutoff=0.5):
        hint = f"Did you mean {close[0]}?"
    else:
        hint = f"The columns are {', '.join((trajectory.independent, *trajectory.names))} and their derivatives (x')."
    raise TableError(f"There is no column {wanted!r}.", hint, "unknown-column")


def _columns(trajectory: Trajectory, chosen: list[tuple[str, int]], unknowns: Mapping[str, Any]) -> tuple[Column, ...]:
    first = Column(trajectory.independent, trajectory.unit, "independent variable")
    others = (
        Column(
            name + "'" * order,
            trajectory.unit_of(name, order),
            _meaning(name, order, trajectory.independent, (unknowns.get(name) or {}).get("about") or ""),
        )
        for name, order in chosen
    )
    return (first, *others)


def _meaning(name: str, order: int, independent: str, about: str) -> str:
    if not order:
        return about or f"unknown {name}"
    ordinal = _ORDINALS[order] if order < len(_ORDINALS) else f"{order}th"
    return f"{ordinal} derivative of {name} by {independent}" + (f" ({about})" if about else "")


def _record(result: Mapping[str, Any]) -> tuple[tuple[str, str], ...]:
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
