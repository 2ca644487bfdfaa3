"""The tables that there are and their media types: apart from what makes and writes them, which is slow to load."""

from collections.abc import Mapping

TABLES: Mapping[str, str] = {
    "csv": "text/csv; charset=utf-8; header=present",
    "json": "application/json",
    "xlsx": "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
    "npz": "application/x-npz",
}

PARTS = (
    "stretches", "costates", "checks", "prices", "slopes", "sweep", "continuation", "extremals", "fit", "meshes",
)  # fmt: skip
"""The parts of a result that have a table of their own, by their names in addresses and on the command line."""
