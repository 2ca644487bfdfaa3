"""The points of a sweep as a table: constants, value with its error, parameters, and the verdict of each row."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from web.tables.columns import Column, TextColumn
from web.tables.error import TableError
from web.tables.sampling import Table, record_of

NONE = "no result"
"""In the place of a verdict where there is none."""


def sweep_table(result: Mapping[str, Any]) -> Table:
    """One row for each point, NaN where it has no number.  Raises `TableError` where the result has no sweep."""
    sweep = result.get("sweep")
    if not sweep:
        raise TableError("This result has no sweep.", "Only a problem with `sweep` has this table.", "no-part")
    points, unit = sweep["points"], result.get("value_unit") or ""
    parameters = sweep["parameters"]
    columns = (
        *(Column(constant["name"], constant["unit"], "swept constant") for constant in sweep["constants"]),
        Column("value", unit, "optimal value"),
        Column("value error", unit, "bound on the error of the value"),
        *(Column(name, of, "parameter") for name, of in parameters.items()),
    )
    rows = [
        [*point["at"], point["value"], point["value_error"], *(point["parameters"].get(name) for name in parameters)]
        for point in points
    ]
    return Table(
        title=str((result.get("problem") or {}).get("title") or "Sweep"),
        columns=columns,
        rows=np.array(rows, dtype=float),
        texts=(TextColumn("verdict", "verdicts", "verdict on the point",
                          tuple(point["verdict"] or NONE for point in points)),),
        record=tuple(line for line in record_of(result) if line[0] in ("run", "problem hash", "versions")),
    )  # fmt: skip
