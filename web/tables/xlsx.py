"""The table as a spreadsheet: one sheet of numbers, one that says where they come from."""

from __future__ import annotations

import io
import math
from typing import Any

import xlsxwriter
from xlsxwriter.worksheet import Worksheet

from web.tables.sampling import Table

BETWEEN_HEADING = "straight lines between the rows miss the curve by"


class _ExactSheet(Worksheet):  # type: ignore[misc]  # the package has no types
    """Writes numbers so that they read back as the same numbers: the package itself keeps 16 digits of 17."""

    def _xml_number_element(self, number: float, attributes: Any = ()) -> None:
        marks = "".join(f' {name}="{value}"' for name, value in attributes)
        self.fh.write(f"<c{marks}><v>{number!r}</v></c>")


def to_xlsx(table: Table) -> bytes:
    """Rows are written one after another so that memory stays flat; texts are never read as formulas or links."""
    buffer = io.BytesIO()
    options = {"constant_memory": True, "strings_to_formulas": False, "strings_to_urls": False}
    with xlsxwriter.Workbook(buffer, options) as book:
        book.set_properties({"title": table.title, "comments": table.caution})
        bold = book.add_format({"bold": True, "bottom": 1})
        wrapped = book.add_format({"text_wrap": True, "valign": "top"})
        _write_numbers(book.add_worksheet("Curve", _ExactSheet), table, bold)
        _write_record(book.add_worksheet("Provenance"), table, bold, wrapped)
    return buffer.getvalue()


def _write_numbers(sheet: Worksheet, table: Table, bold: xlsxwriter.format.Format) -> None:
    sheet.freeze_panes(1, 0)
    sheet.set_column(0, len(table.headings) - 1, 18)
    for number, heading in enumerate(table.headings):
        sheet.write_string(0, number, heading, bold)
    for row, (texts, values) in enumerate(zip(table.text_rows, table.rows.tolist(), strict=True), start=1):
        for number, text in enumerate(texts):
            sheet.write_string(row, number, text)
        for number, value in enumerate(values, start=len(texts)):
            if math.isfinite(value):
                sheet.write_number(row, number, value)


def _write_record(
    sheet: Worksheet,
    table: Table,
    bold: xlsxwriter.format.Format,
    wrapped: xlsxwriter.format.Format,
) -> None:
    sheet.set_column(0, 0, 30)
    sheet.set_column(1, 3, 50)
    lines = (("title", table.title), ("caution", table.caution), *table.record)
    for row, (heading, text) in enumerate(lines):
        sheet.write_string(row, 0, heading)
        sheet.write_string(row, 1, text, wrapped)
    start = len(lines) + 1
    for number, heading in enumerate(("column", "meaning", "unit", BETWEEN_HEADING)):
        sheet.write_string(start, number, heading, bold)
    for row, column in enumerate(table.columns, start=start + 1):
        for number, text in enumerate((column.name, column.meaning, column.unit)):
            sheet.write_string(row, number, text)
        sheet.write_number(row, 3, column.between)
