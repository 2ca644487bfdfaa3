"""The tables of a problem document as functions in the user's own units, for pictures; what is no table is left out."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np

from solvers.tables.table import Between, Outside, Table
from solvers.units import Unit


def measured(document: Mapping[str, Any]) -> Iterator[Table]:
    """Every table of a document that can be read.

    Scaling a table and running a curve through it commute, so units need not be converted.
    """
    tables = document.get("tables")
    for name, given in tables.items() if isinstance(tables, Mapping) else ():
        try:
            yield _table(str(name), given)
        except (KeyError, TypeError, ValueError):
            continue


def _table(name: str, given: Mapping[str, Any]) -> Table:
    units = {str(argument): Unit(str(unit), 1.0) for argument, unit in given["of"].items()}
    rows = given["points"]
    if len(units) == 1:
        points = np.array(rows, dtype=np.float64)
        if points.ndim != 2 or points.shape[1] != 2:
            raise ValueError("no pairs")
        knots, values = [points[:, 0]], points[:, 1]
    else:
        grid = np.array(rows[1:], dtype=np.float64)
        knots, values = [grid[:, 0], np.array(rows[0][1:], dtype=np.float64)], grid[:, 1:]
        if len(units) != 2 or values.shape != (len(knots[0]), len(knots[1])):
            raise ValueError("no grid")
    if any(len(places) < 2 or not (np.diff(places) > 0).all() for places in knots) or not np.isfinite(values).all():
        raise ValueError("no function")
    between, outside = Between(given.get("between", "smooth")), Outside(given.get("outside", "refuse"))
    unit = Unit(str(given.get("unit", "")), 1.0)
    return Table(name, tuple(units), tuple(knots), values, between, outside, unit, tuple(units.values()))
