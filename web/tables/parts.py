"""The parts of a result that are lists, each as a table: one row for each entry, texts first."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from typing import Any

import numpy as np

from web.tables.columns import Column, TextColumn
from web.tables.error import TableError
from web.tables.sampling import Table, costate_table, record_of
from web.tables.sweep import NONE, sweep_table

Result = Mapping[str, Any]
Entries = Sequence[Mapping[str, Any]]


def part_table(result: Result, part: str) -> Table:
    """The table of one of `PARTS`.  Raises `TableError` where the result has nothing of it."""
    return PARTS[part](result)


def _listed(
    result: Result, part: str, texts: Iterable[TextColumn], columns: Iterable[Column], rows: Sequence[Sequence[Any]]
) -> Table:
    """A table with a row for each entry; None is no number."""
    if not rows:
        raise TableError(f"This result has no {part}.", "Its result document says what it has.", "no-part")
    title = str((result.get("problem") or {}).get("title") or part)
    return Table(title, tuple(columns), np.array(rows, dtype=float), tuple(texts), record_of(result))


def _texts(entries: Entries, *columns: tuple[str, str, str]) -> list[TextColumn]:
    """Columns of texts: member of the entries, what the list of its cells is called, its meaning."""
    return [
        TextColumn(name, member, meaning, tuple(str(entry[name] or "") for entry in entries))
        for name, member, meaning in columns
    ]


def _independent(result: Result) -> tuple[str, str]:
    found = (result.get("curve") or {}).get("independent") or {}
    return str(found.get("name") or ""), str(found.get("unit") or "")


def _stretches(result: Result) -> Table:
    found = result.get("stretches") or ()
    name, unit = _independent(result)
    texts = _texts(
        found,
        ("of", "of", "unknown with its primes, or constraint"),
        ("arc", "arcs", "its arc"),
        ("course", "courses", "what it does there"),
    )
    columns = [
        Column("from", unit, f"{name} where it begins"),
        Column("from_error", unit, "how far that may be off; none where it is given"),
        Column("to", unit, f"{name} where it ends"),
        Column("to_error", unit, "how far that may be off"),
    ]
    rows = [(one["from"], one.get("from_error"), one["to"], one.get("to_error")) for one in found]
    return _listed(result, "stretches", texts, columns, rows)


def _checks(result: Result) -> Table:
    found = result.get("checks") or ()
    name, unit = _independent(result)
    where = [check["where"] or {"place": None, "subject": ""} for check in found]
    texts = _texts(
        found,
        ("name", "checks", "the check"),
        ("status", "statuses", "how it ended"),
        ("sentence", "sentences", "what was found"),
    )
    texts.insert(2, TextColumn("subject", "subjects", "what it is worst for", tuple(w["subject"] for w in where)))
    columns = [
        Column("figure", "", "what was measured, relative"),
        Column("threshold", "", "what the figure must not exceed"),
        Column("place", unit, f"{name} where it is worst"),
    ]
    rows = [(c["figure"], c["threshold"], w["place"]) for c, w in zip(found, where, strict=True)]
    return _listed(result, "checks", texts, columns, rows)


def _prices(result: Result) -> Table:
    found = (result.get("multipliers") or {}).get("prices") or ()
    texts = _texts(
        found,
        ("condition", "conditions", "the condition"),
        ("pointer", "pointers", "its place in the document"),
        ("unit", "units_of_rows", "unit of the price"),
    )
    columns = [Column("price", "", "change of the value per unit by which the limit is raised, in the row's unit")]
    return _listed(result, "prices", texts, columns, [(price["price"],) for price in found])


def _slopes(result: Result) -> Table:
    found = result.get("slopes") or ()
    texts = _texts(found, ("constant", "constants", "the constant"), ("unit", "units_of_rows", "unit of the slope"))
    columns = [
        Column("slope", "", "change of the value per unit of the constant, in the row's unit"),
        Column("tolerance", "", "one standard deviation of the constant, in its unit"),
        Column("contribution", result.get("value_unit") or "", "how far that moves the value"),
    ]
    rows = [(slope["slope"], slope["tolerance"], slope["contribution"]) for slope in found]
    return _listed(result, "slopes", texts, columns, rows)


def _continuation(result: Result) -> Table:
    """The points along the branch with its folds between them."""
    branch = result.get("continuation") or {"points": (), "folds": (), "constant": "", "unit": ""}
    told = [*((p["leg"], 0, p) for p in branch["points"]), *((f["leg"], 1, f) for f in branch["folds"])]
    told.sort(key=lambda one: one[:2])  # a fold ends the leg it is counted to
    kinds = tuple("fold" if fold else "point" for _, fold, _ in told)
    columns = [
        Column(branch["constant"], branch["unit"], "the constant"),
        Column("value", result.get("value_unit") or "", "value of the stationary curve"),
        Column("leg", "", "how many folds lie before"),
    ]
    rows = [(point["at"], point["value"], leg) for leg, _, point in told]
    texts = [TextColumn("kind", "kinds", "a point of the branch, or a fold", kinds)]
    return _listed(result, "continuation", texts, columns, rows)


def _extremals(result: Result) -> Table:
    found = result.get("extremals") or ()
    units = {name: item["unit"] for one in found for name, item in one["parameters"].items()}
    value_unit = result.get("value_unit") or ""
    texts = [
        TextColumn("verdict", "verdicts", "what it may be called", tuple(one["verdict"] or NONE for one in found)),
        TextColumn("starts", "starts", "the starts that led there", tuple("; ".join(one["starts"]) for one in found)),
    ]
    columns = [
        Column("value", value_unit, "its value"),
        Column("value error", value_unit, "bound on the error of the value"),
        *(Column(name, unit, "parameter") for name, unit in units.items()),
    ]
    rows = [
        (one["value"], one["value_error"], *((one["parameters"].get(name) or {}).get("value") for name in units))
        for one in found
    ]
    return _listed(result, "extremals", texts, columns, rows)


def _fit(result: Result) -> Table:
    found = ((result.get("observations") or {}).get("parameters") or {}).items()
    texts = [
        TextColumn("parameter", "parameters", "the fitted parameter", tuple(name for name, _ in found)),
        TextColumn("unit", "units_of_rows", "its unit", tuple(one["unit"] for _, one in found)),
    ]
    columns = [Column("value", "", "in the row's unit"), Column("sigma", "", "one standard deviation")]
    return _listed(result, "fit", texts, columns, [(one["value"], one["sigma"]) for _, one in found])


def _meshes(result: Result) -> Table:
    found = (result.get("provenance") or {}).get("meshes") or ()
    meanings = {
        "intervals": "",
        "points": "collocation points",
        "lowest_degree": "",
        "highest_degree": "",
        "value": "value on this mesh",
        "error": "relative error estimate",
        "iterations": "of the minimiser",
        "seconds": "",
    }
    units = {"value": result.get("value_unit") or "", "seconds": "s"}
    columns = [
        Column(name.replace("_", " "), units.get(name, ""), told or name.replace("_", " "))
        for name, told in meanings.items()
    ]
    return _listed(result, "meshes", (), columns, [[mesh[name] for name in meanings] for mesh in found])


PARTS: Mapping[str, Callable[[Result], Table]] = {
    "stretches": _stretches,
    "costates": costate_table,
    "checks": _checks,
    "prices": _prices,
    "slopes": _slopes,
    "sweep": sweep_table,
    "continuation": _continuation,
    "extremals": _extremals,
    "fit": _fit,
    "meshes": _meshes,
}
"""What makes the table of each part, by its name in addresses and on the command line."""
