"""Observations with fitted values and residuals as a table."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from web.tables.columns import Column
from web.tables.error import TableError
from web.tables.sampling import Table, record_of

COLUMNS = (
    ("observed", "as measured"),
    ("fitted", "value of the fit"),
    ("residual", "observed less fitted"),
    ("sigma", "one standard deviation of the observed value, as given"),
    ("fitted_sigma", "one standard deviation of the fitted value"),
)
"""Member of the result document and meaning, all in the unit of the observations."""


def observed_table(result: Mapping[str, Any], number: int = 1) -> Table:
    """One list of observations, the first is number 1.  Raises `TableError`."""
    fit = result.get("observations")
    if not fit:
        raise TableError("Nothing was observed in this run.", "Its problem has no observations.", "no-observations")
    lists = fit["lists"]
    if not 1 <= number <= len(lists):
        message = f"There is no list {number} of observations."
        raise TableError(message, f"The lists are numbered from 1 to {len(lists)}.", "bad-list")
    found = lists[number - 1]
    independent = result["curve"]["independent"]
    shown = [(name, meaning) for name, meaning in COLUMNS if found[name] is not None]
    columns = [
        Column(independent["name"], independent["unit"], "independent variable"),
        *(Column(name.replace("_", " "), found["unit"], f"{meaning}: {found['of']}") for name, meaning in shown),
    ]
    rows = [found["place"], *(found[name] for name, _ in shown)]
    if found["normalised"] is not None:
        what = "sigma" if fit["sigmas_known"] else "the spread of all residuals"
        columns.append(Column("normalised", "", f"residual over {what}"))
        rows.append(found["normalised"])
    title = str((result.get("problem") or {}).get("title") or "Observations")
    return Table(title, tuple(columns), np.array(rows, dtype=float).T, record=record_of(result))
