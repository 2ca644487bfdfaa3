"""Comma-separated values (RFC 4180), their metadata (CSV on the Web), and the same table as JSON."""

from __future__ import annotations

import csv
import io
import json
import math
from dataclasses import asdict
from typing import Any

from web.tables.sampling import Table

_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n")


def text_cell(text: str) -> str:
    """A text that no spreadsheet takes for a formula: an apostrophe is put before a sign that could start one."""
    return "'" + text if text.startswith(_FORMULA_STARTS) else text


def to_csv(table: Table) -> bytes:
    """A heading line, then the rows; CRLF; numbers in the shortest form that reads back as the same number."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\r\n")
    writer.writerow([text_cell(heading) for heading in table.headings])
    rows = ([_number(value) for value in row] for row in table.rows.tolist())
    writer.writerows([*map(text_cell, texts), *row] for texts, row in zip(table.text_rows, rows, strict=True))
    return text.getvalue().encode()


def to_csvw(table: Table, address: str) -> dict[str, Any]:
    """The metadata document of `to_csv`'s file at `address` (W3C, Metadata Vocabulary for Tabular Data, 2015).

    The unit of a column is a note, since the vocabulary has no word for it; so is `betweenRows`, how far straight lines
    between the rows miss the curve.
    """
    columns: list[dict[str, Any]] = [
        {"name": text.name, "titles": text.name, "dc:description": text.meaning, "datatype": "string"}
        for text in table.texts
    ]
    columns += [
        {
            "name": f"column_{number}",
            "titles": column.heading,
            "dc:description": column.meaning,
            "datatype": "double",
            "notes": [{"name": column.name, "unit": column.unit or "1", "betweenRows": column.between}],
        }
        for number, column in enumerate(table.columns, start=1)
    ]
    return {
        "@context": ["http://www.w3.org/ns/csvw", {"@language": "en"}],
        "url": address,
        "dc:title": table.title,
        "dialect": {"header": True, "encoding": "utf-8", "lineTerminators": ["\r\n"]},
        "tableSchema": {"columns": columns},
        "notes": [{"caution": table.caution}, dict(table.record)],
    }


def to_json(table: Table) -> bytes:
    """Columns with units and meanings, rows as lists, the record and the caution; null where there is no number."""
    document: dict[str, Any] = {
        "title": table.title,
        "caution": table.caution,
        "record": dict(table.record),
        "columns": [asdict(column) for column in table.columns],
        "rows": [[value if math.isfinite(value) else None for value in row] for row in table.rows.tolist()],
    }
    document |= {text.member: list(text.cells) for text in table.texts}
    return json.dumps(document, ensure_ascii=False, allow_nan=False, separators=(",", ":")).encode()


def _number(value: float) -> str:
    return repr(value) if math.isfinite(value) else ""
