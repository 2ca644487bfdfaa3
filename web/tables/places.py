"""Where the rows of a table lie: at the mesh nodes, so many, or at a fixed step that ends exactly at the end."""

from __future__ import annotations

import math
from functools import cache

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.curve import Array
from web.tables.error import TableError
from web.trajectory import Arc, Trajectory

MOST_ROWS = 200_000
SHORTEST_LAST_STEP = 1e-6
"""A last step shorter than this share of a step is rounding, and is joined to the one before."""


def row_places(trajectory: Trajectory, rows: int | None, step: float | None) -> list[tuple[Arc, Array]]:
    """Which places each arc contributes; raises TableError."""
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


def _check_rows(rows: int) -> None:
    if rows < 2:
        raise TableError(
            f"{rows} row{'' if rows == 1 else 's'} cannot hold both ends.", "Ask for at least 2 rows.", "too-few-rows"
        )
    if rows > MOST_ROWS:
        raise TableError(
            f"{rows:,} rows are more than the limit of {MOST_ROWS:,}.",
            f"Ask for at most {MOST_ROWS:,} rows.",
            "too-many-rows",
        )
