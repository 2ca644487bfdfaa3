"""The columns of a table: names with primes, their units and meanings, and how far straight lines miss the curve."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Any

import numpy as np

from solvers.curve import Array
from web.extremes import HIGHEST_DERIVATIVE
from web.tables.error import TableError
from web.trajectory import Arc, Trajectory
from web.unit_text import bracketed

BETWEEN = (0.25, 0.5, 0.75)

Wanted = tuple[str, int]
"""A function and the number of its primes."""

_ORDINALS = ("", "first", "second", "third")


@dataclass(frozen=True, slots=True)
class Column:
    """One column: `name` as in formulas (`x'`), unit (maybe ""), and what it means in words.

    `between` is how far the curve is from straight lines between the rows, looked at in `BETWEEN` of each gap: what a
    machine misses that interpolates linearly.  At a jump it is the jump.
    """

    name: str
    unit: str
    meaning: str
    between: float = 0.0

    @property
    def heading(self) -> str:
        """The name with its unit: `x' [m/s]`."""
        return bracketed(self.name, self.unit)


@dataclass(frozen=True, slots=True)
class TextColumn:
    """A column of texts, before those of numbers; `member` is what the list of its cells is called in JSON and NPZ."""

    name: str
    member: str
    meaning: str
    cells: tuple[str, ...]


def wanted_columns(trajectory: Trajectory, columns: Sequence[str] | None, derivatives: int) -> list[Wanted]:
    """The columns after the first, as names with the number of their primes; raises TableError."""
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


def _column(trajectory: Trajectory, wanted: str) -> Wanted:
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
        hint = f"The columns are {', '.join((trajectory.independent, *trajectory.names))}{_primed(trajectory)}."
    raise TableError(f"There is no column {wanted!r}.", hint, "unknown-column")


def _primed(trajectory: Trajectory) -> str:
    """What is said of derivatives behind the names of the columns."""
    if not trajectory.names:
        return ""
    whose = "their derivatives" if len(trajectory.names) > 1 else "its derivatives"
    return f", and {whose}, such as {trajectory.names[0]}'"


def described(
    trajectory: Trajectory, wanted: list[Wanted], numbers: list[tuple[Arc, Array]], unknowns: Mapping[str, Any]
) -> tuple[Column, ...]:
    """The columns of the rows `numbers` of each arc, the independent variable first."""
    first = Column(trajectory.independent, trajectory.unit, "independent variable")
    others = (
        Column(
            name + "'" * order,
            trajectory.unit_of(name, order),
            _meaning(name, order, trajectory.independent, (unknowns.get(name) or {}).get("about") or ""),
            _between(numbers, count, name, order),
        )
        for count, (name, order) in enumerate(wanted, start=1)
    )
    return (first, *others)


def _between(numbers: list[tuple[Arc, Array]], count: int, name: str, order: int) -> float:
    """`Column.between` of one column; arcs that lack the function do not count."""
    worst = 0.0
    for arc, rows in numbers:
        places, values = rows[:, 0], rows[:, count]
        for share in BETWEEN:
            straight = values[:-1] + share * np.diff(values)
            exact = arc.evaluate(name, order, places[:-1] + share * np.diff(places))
            worst = max(worst, float(np.nanmax(np.abs(straight - exact), initial=0.0)))
    return worst


def _meaning(name: str, order: int, independent: str, about: str) -> str:
    if not order:
        return about or f"unknown {name}"
    ordinal = _ORDINALS[order] if order < len(_ORDINALS) else f"{order}th"
    return f"{ordinal} derivative of {name} by {independent}" + (f" ({about})" if about else "")
