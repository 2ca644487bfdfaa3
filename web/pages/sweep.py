"""The sweep of a result for its page: figures, points as rows, files."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from web import display
from web.figures import Figure, sweep_figures
from web.tables.sweep import NONE
from web.unit_text import bracketed

MOST_ROWS = 25


@dataclass(frozen=True, slots=True)
class Row:
    """One point: its numbers, its verdict with the class of the tag, what failed or why there is nothing."""

    cells: tuple[str, ...]
    verdict: str
    tone: str
    remark: str


@dataclass(frozen=True, slots=True)
class Sweep:
    """What was swept and what came out; `rows` are all points, or evenly spread ones where there are many."""

    sentence: str
    figures: tuple[Figure, ...]
    headings: tuple[str, ...]
    rows: tuple[Row, ...]
    shown: str


def sweep_of(result: Mapping[str, Any]) -> Sweep | None:
    """None where nothing was swept."""
    sweep = result.get("sweep")
    if not sweep:
        return None
    points, unit = sweep["points"], result.get("value_unit") or ""
    counts = Counter(point["verdict"] or NONE for point in points)
    told = ", ".join(f"{count} {verdict}" for verdict, count in counts.most_common())
    most = min(len(points), MOST_ROWS)
    chosen = sorted({round(k * (len(points) - 1) / max(most - 1, 1)) for k in range(most)})
    return Sweep(
        sentence=f"{len(points)} points: {told}.",
        figures=sweep_figures(result),
        headings=(
            *(bracketed(constant["name"], display.unit(constant["unit"])) for constant in sweep["constants"]),
            bracketed("value", display.unit(unit)),
            *(bracketed(name, display.unit(of)) for name, of in sweep["parameters"].items()),
        ),
        rows=tuple(_row(points[index], sweep["parameters"]) for index in chosen),
        shown=f"{len(chosen)} of {len(points)} points" if len(chosen) < len(points) else "All points",
    )


def _row(point: Mapping[str, Any], parameters: Mapping[str, str]) -> Row:
    return Row(
        cells=(
            *(display.number(value) for value in point["at"]),
            display.with_error(point["value"], point["value_error"]),
            *(display.number(point["parameters"].get(name), 8) for name in parameters),
        ),
        verdict=point["verdict"] or NONE,
        tone=display.tone(point["verdict"]),
        remark=point["note"] or ("failed: " + ", ".join(point["failed"]) if point["failed"] else ""),
    )
