"""Points of a table as people paste them, one row a line, and the arguments of a table in words."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Iterator
from typing import Any

NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?", re.ASCII)
INTEGER = re.compile(r"[+-]?\d{1,15}", re.ASCII)
_BETWEEN = re.compile(r"[\s,;|]+")
_ARGUMENT = re.compile(r"\s*(?P<name>[^\s,\[\]]+)(?:\s+in\s+(?P<unit>[^,\[\]]+?)|\s*\[(?P<bracketed>[^,\[\]]*)\])?\s*")


def number_from(text: str) -> int | float | None:
    """The number that a text stands for in JSON; None for anything else."""
    if not NUMBER.fullmatch(text):
        return None
    number = int(text) if INTEGER.fullmatch(text) else float(text)
    return number if math.isfinite(number) else None


def rows_from_text(text: str) -> list[list[int | float | None]] | None:
    """Rows of numbers, separated by blanks, tabs, commas or semicolons; None where something else stands.

    A first line that is one number shorter than all others is the head of a grid: its empty corner becomes null.
    """
    if no_number_in(text) is not None:
        return None
    rows = [[number_from(part) for part in parts] for _, parts in _parts(text)]
    if len(rows) > 2 and len(rows[1]) > 2 and all(len(row) == len(rows[0]) + 1 for row in rows[1:]):
        rows[0].insert(0, None)
    return rows


def no_number_in(text: str) -> tuple[int, str] | None:
    """The first thing that is no number, and the line, counted from 1, on which it stands."""
    return next(((line, part) for line, parts in _parts(text) for part in parts
                 if part != "null" and number_from(part) is None), None)  # fmt: skip


def line_of_row(text: str, row: int) -> int | None:
    """The line, counted from 1, on which a row stands, counted from 0: empty lines hold none."""
    lines = [line for line, _ in _parts(text)]
    return lines[row] if row < len(lines) else None


def _parts(text: str) -> Iterator[tuple[int, list[str]]]:
    """What stands on the lines that are not empty, with their numbers, counted from 1."""
    for number, line in enumerate(text.splitlines(), start=1):
        if parts := [part for part in _BETWEEN.split(line.strip()) if part]:
            yield number, parts


def text_from_rows(value: Any) -> str | None:
    """The lines that give these rows back, in columns; None where there are none."""
    if not isinstance(value, list) or not value or not all(isinstance(row, list) for row in value):
        return None
    cells = [["" if cell is None else json.dumps(cell) for cell in row] for row in value]
    columns = max(len(row) for row in cells)
    widths = [max((len(row[k]) for row in cells if k < len(row)), default=0) for k in range(columns)]
    text = "\n".join("  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=False)) for row in cells)
    return text.strip() if _same(rows_from_text(text.strip()), value) else None


def arguments_from_text(text: str) -> dict[str, str] | None:
    """`r in mm`, `T [K], p [bar]`, `x, y` as names with units; None where a part says something else."""
    found: dict[str, str] = {}
    for part in text.split(","):
        match = _ARGUMENT.fullmatch(part)
        if match is None or match["name"] in found:
            return None
        found[match["name"]] = (match["unit"] or match["bracketed"] or "").strip()
    return found


def text_from_arguments(value: Any) -> str | None:
    """The words that give these names and units back; None where there are none."""
    if not isinstance(value, dict) or not value or not all(isinstance(unit, str) for unit in value.values()):
        return None
    text = ", ".join(f"{name} in {unit}" if unit else name for name, unit in value.items())
    return text if _same(arguments_from_text(text), value) else None


def _same(one: Any, other: Any) -> bool:
    """Equal also in what JSON tells apart and Python does not: 1 and 1.0, true and 1."""
    return json.dumps(one) == json.dumps(other)
