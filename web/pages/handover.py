"""What one can take along from a result: its table and files, its provenance, how to cite it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from solvers.curve import Array
from web import display, links
from web.tables import FILE_FORMATS, Choice, Table, TableError
from web.trajectory import read_trajectory
from web.unit_text import bracketed

PREVIEW_ROWS = 12
DUST = 1e-13

Pairs = tuple[tuple[str, str], ...]
Rows = tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Preview:
    """The first rows of the chosen table and the files it can be had as; `error` where the choice cannot be made.

    `between` says for each column after the first how far straight lines between the rows miss the curve.  `step_unit`
    and `example` show in the empty fields of the form what may be written there.
    """

    choice: Choice
    headings: tuple[str, ...]
    rows: Rows
    last: tuple[str, ...]
    between: tuple[str, ...]
    total: str
    error: str
    files: Pairs
    metadata: str
    step_unit: str
    example: str


def preview_of(result: Mapping[str, Any], run_id: str, choice: Choice) -> Preview | None:
    if not result.get("curve"):
        return None
    try:
        made, error = choice.table(result), ""
    except TableError as refused:
        made, error = Choice().table(result), f"{refused.message} {refused.hint}"
        query = {}
    else:
        query = choice.query()
    shown = _without_dust(made.rows)
    cells = [tuple(display.number(value, 8) for value in row) for row in shown[:PREVIEW_ROWS].tolist()]
    last = tuple(display.number(value, 8) for value in shown[-1].tolist())
    texts = made.text_rows
    cells = [(*before, *row) for before, row in zip(texts, cells, strict=False)]
    last = (*texts[-1], *last)
    return Preview(
        choice=choice,
        headings=(
            *(text.name for text in made.texts),
            *(bracketed(c.name, display.unit(c.unit)) for c in made.columns),
        ),
        rows=tuple(cells),
        last=last if len(made.rows) > PREVIEW_ROWS else (),
        between=(*("" for _ in made.texts), *_missed(made)),
        total=f"{len(made.rows):,}",
        error=error,
        files=tuple((file.name, links.table(run_id, suffix, **query)) for suffix, file in FILE_FORMATS.items()),
        metadata=links.table(run_id, "csv-metadata.json", **query),
        step_unit=f"in {display.unit(made.columns[0].unit)}" if made.columns[0].unit else "",
        example=_example(result),
    )


def _missed(made: Table) -> tuple[str, ...]:
    """How far straight lines between the rows miss each column after the first."""
    sizes = np.nanmax(np.abs(made.rows), axis=0, initial=0.0)[1:].tolist()
    pairs = zip(made.columns[1:], sizes, strict=True)
    return tuple(display.number(c.between if c.between > DUST * size else 0.0, 2) for c, size in pairs)


def _without_dust(rows: Array) -> Array:
    """For the eye only: what is lost in the rounding of its column is shown as 0.  The files keep every digit."""
    size = np.nanmax(np.abs(rows), axis=0, initial=0.0)
    return np.where(np.abs(rows) < DUST * size, 0.0, rows)


def _example(result: Mapping[str, Any]) -> str:
    """`x, x', a`: a list of columns that this curve has."""
    trajectory = read_trajectory(result)
    names = trajectory.names if trajectory is not None else ()
    return ", ".join((*names[:1], *(name + "'" for name in names[:1]), *names[1:3]))


def facts_of(result: Mapping[str, Any], moment: str) -> Pairs:
    provenance = result.get("provenance") or {}
    versions = ", ".join(f"{name} {version}" for name, version in (provenance.get("versions") or {}).items())
    options = ", ".join(f"{name} = {_plain(value)}" for name, value in (provenance.get("options") or {}).items())
    times = ", ".join(f"{stage} {display.duration(spent)}" for stage, spent in (provenance.get("times") or {}).items())
    iterations = provenance.get("iterations")
    pairs = (
        ("Run", str(result.get("id") or "")),
        ("Ended", moment),
        ("Hash of the canonical problem", str(result.get("problem_hash") or "")),
        ("Versions", versions),
        ("Options", options),
        ("Times", times),
        ("Iterations of the solver", "" if iterations is None else str(iterations)),
    )
    return tuple((heading, text) for heading, text in pairs if text)


def _plain(value: Any) -> str:
    return display.number(value, 4) if isinstance(value, int | float) and not isinstance(value, bool) else str(value)


def meshes_of(result: Mapping[str, Any]) -> Rows:
    unit = result.get("value_unit") or ""
    return tuple(
        (
            str(count),
            str(mesh["intervals"]),
            str(mesh["points"]),
            _degrees(mesh["lowest_degree"], mesh["highest_degree"]),
            display.quantity(mesh.get("value"), unit, 10),
            display.number(mesh.get("error"), 2),
            str(mesh["iterations"]),
            display.duration(mesh["seconds"]),
        )
        for count, mesh in enumerate((result.get("provenance") or {}).get("meshes") or (), start=1)
    )


def _degrees(lowest: int, highest: int) -> str:
    return str(lowest) if lowest == highest else f"{lowest} to {highest}"


def citation_of(result: Mapping[str, Any], permalink: str) -> str:
    version = ((result.get("provenance") or {}).get("versions") or {}).get("curvewright", "")
    title = str((result.get("problem") or {}).get("title") or "Untitled problem")
    parts = (
        f"“{title}”",
        f"solved with Curvewright {version}".strip(),
        str(result.get("problem_hash") or ""),
        permalink,
    )
    return ", ".join(part for part in parts if part) + "."
