"""Plots of measured tables: the points, and the curve that runs between and beyond them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np

from solvers.curve import Array
from solvers.tables.table import Outside, Table
from web.extremes import Extremes
from web.figures import findings
from web.figures.labels import bracketed, identifier
from web.figures.plot import Plot, Trace
from web.measured import measured

PLACES = 401
ROWS = 9
"""Rows of the short table beside a plot."""

MOST_LINES = 5
"""Of a table of two arguments so many lines are shown, each at one measured place of the second."""

BEYOND = 0.12
"""How far beyond the range a table is shown that has values there, as a share of the range."""


def tabulated(document: Mapping[str, Any]) -> Iterator[Plot]:
    """One plot for each table of a problem document."""
    yield from (plot_of(table) for table in measured(document))


def plot_of(table: Table) -> Plot:
    """Lines over the first argument with the points that were measured on them."""
    knots, places = table.knots[0], _places(table)
    lines: list[tuple[str, Array, Array]] = []  # label, values along the line, measured values
    if len(table.knots) == 1:
        lines.append((table.name, table.value(places), table.values))
    else:
        name, unit = table.arguments[1], table.argument_units[1].text
        count = len(table.knots[1])
        for column in np.unique(np.linspace(0, count - 1, min(count, MOST_LINES)).round().astype(int)):
            at = float(table.knots[1][column])
            label = f"{name} = {findings.amount(at, unit)}"
            lines.append((label, table.value(places, at), table.values[:, column]))
    numbers = [0, 2, 3, 4, 5]
    traces = [Trace(label, places, values, number) for (label, values, _), number in zip(lines, numbers, strict=False)]
    points = Trace("measured", np.tile(knots, len(lines)), np.concatenate([own for *_, own in lines]), 1, True, False)
    rows = np.unique(np.linspace(0, len(knots) - 1, min(len(knots), ROWS)).round().astype(int))
    across = bracketed(table.arguments[0], table.argument_units[0].text)
    return Plot(
        key=identifier(f"table-{table.name}"),
        heading=f"Table {table.name}: {table.between.value}",
        finding=_finding(table, places, lines),
        across=across,
        up=bracketed(table.name, table.unit.text),
        traces=(*traces, points),
        table=np.column_stack([knots[rows], *(own[rows] for *_, own in lines)]),
        table_headings=(across, *(bracketed(label, table.unit.text) for label, *_ in lines)),
    )


def _places(table: Table) -> Array:
    low, high = table.ranges[0]
    more = BEYOND * (high - low) if table.outside is not Outside.REFUSE else 0.0
    return np.linspace(low - more, high + more, PLACES)


def _finding(table: Table, places: Array, lines: list[tuple[str, Array, Array]]) -> str:
    inside = (places >= table.ranges[0][0]) & (places <= table.ranges[0][1])
    unit, argument = table.unit.text, (table.arguments[0], table.argument_units[0].text)
    along, heights = places[inside], [values[inside] for _, values, _ in lines]
    beyond = {
        Outside.REFUSE: "arguments have to stay inside",
        Outside.HOLD: "beyond them the last value holds",
        Outside.EXTEND: "beyond them it goes on along its tangent",
    }[table.outside]
    if len(lines) > 1 or len(table.knots) > 1:
        least, most = (findings.amount(float(f(heights)), unit) for f in (np.min, np.max))
        size = f"{len(table.knots[0])} × {len(table.knots[1])} points"
        return findings.sentence([f"{table.name} lies between {least} and {most} on these lines; {size}, {beyond}"])
    values = heights[0]
    low, high = int(values.argmin()), int(values.argmax())
    reach = Extremes(table.name, unit, float(values[low]), float(along[low]), float(values[high]), float(along[high]))
    told = findings.course(table.name, unit, values, reach, argument)
    return findings.sentence([told, f"{len(table.knots[0])} points, {beyond}"])
