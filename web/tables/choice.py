"""Which table is wanted, read from the query of a page's form."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from web.tables.error import TableError
from web.tables.sampling import Table, table


@dataclass(frozen=True, slots=True)
class Choice:
    """The fields of the form as they were sent, so that the form shows them again."""

    rows: str = ""
    step: str = ""
    columns: str = ""
    derivatives: str = "0"
    sigma: str = ""

    def query(self) -> dict[str, str]:
        """What is not the default, for the addresses of the files."""
        fields = {"rows": self.rows, "step": self.step, "columns": self.columns, "derivatives": self.derivatives,
                  "sigma": self.sigma}  # fmt: skip
        return {name: text for name, text in fields.items() if text and (name, text) != ("derivatives", "0")}

    def table(self, result: Mapping[str, Any]) -> Table:
        """The table; raises TableError, also for a field that is no number."""
        return table(
            result,
            rows=None if not self.rows else _whole(self.rows, "rows"),
            step=None if not self.step else _number(self.step, "step"),
            columns=[name for part in self.columns.split(",") if (name := part.strip())] or None,
            derivatives=_whole(self.derivatives or "0", "derivatives"),
            sigma=bool(self.sigma),
        )


def read_choice(query: Mapping[str, str]) -> Choice:
    """From the query of the page; what is missing is the default."""
    return Choice(
        rows=query.get("rows", "").strip(),
        step=query.get("step", "").strip(),
        columns=query.get("columns", "").strip(),
        derivatives=query.get("derivatives", "").strip() or "0",
        sigma="true" if query.get("sigma", "").strip() in ("true", "1", "on") else "",
    )


def _whole(text: str, field: str) -> int:
    if not (text.isascii() and text.isdigit() and len(text) < 10):
        message = f"{field}: {text[:40]!r} is no whole number."
        raise TableError(message, "Write digits only, such as 201.", f"bad-{field}")
    return int(text)


def _number(text: str, field: str) -> float:
    try:
        return float(text)
    except ValueError:
        message = f"{field}: {text[:40]!r} is no number."
        raise TableError(message, "Write a number with a point, such as 0.001.", f"bad-{field}") from None
