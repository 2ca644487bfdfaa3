"""Tables of a result: sampled from the exact curve, written as CSV, JSON, XLSX or NPZ with exactly the same numbers."""

from collections.abc import Callable
from dataclasses import dataclass

from web.media_types import TABLES
from web.tables.choice import Choice, read_choice
from web.tables.columns import Column
from web.tables.csv import to_csv, to_csvw, to_json
from web.tables.error import TableError
from web.tables.npz import to_npz
from web.tables.observed import observed_table
from web.tables.parts import PARTS, part_table
from web.tables.places import MOST_ROWS
from web.tables.sampling import Table, table

__all__ = [
    "FILE_FORMATS",
    "MOST_ROWS",
    "PARTS",
    "Choice",
    "Column",
    "FileFormat",
    "Table",
    "TableError",
    "observed_table",
    "part_table",
    "read_choice",
    "table",
    "to_csvw",
]


@dataclass(frozen=True, slots=True)
class FileFormat:
    """One way to write a table: what it is called, its media type, and the function that does it."""

    name: str
    media_type: str
    write: Callable[[Table], bytes]


def _to_xlsx(table: Table) -> bytes:
    from web.tables.xlsx import to_xlsx  # here, so that a server does not load the package before it is wanted

    return to_xlsx(table)


_WRITERS = {"csv": ("CSV", to_csv), "json": ("JSON", to_json), "xlsx": ("XLSX", _to_xlsx), "npz": ("NPZ", to_npz)}

FILE_FORMATS: dict[str, FileFormat] = {
    suffix: FileFormat(name, TABLES[suffix], write) for suffix, (name, write) in _WRITERS.items()
}
"""By file suffix."""
