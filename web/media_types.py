"""The media types of tables by file suffix: apart from what writes them, which is slow to load."""

from collections.abc import Mapping

TABLES: Mapping[str, str] = {
    "csv": "text/csv; charset=utf-8; header=present",
    "json": "application/json",
    "xlsx": "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
    "npz": "application/x-npz",
}
