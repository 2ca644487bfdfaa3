"""Files of a table: read back by other people's readers they hold exactly the same numbers."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import replace

import numpy as np
import openpyxl
import pytest

from web.tables import FILE_FORMATS, table, to_csvw


@pytest.fixture(params=["hose", "vehicle"])
def found(request):
    return table(request.getfixturevalue(request.param), rows=23, derivatives=2)


def test_csv_reads_back_the_same_numbers(found):
    text = FILE_FORMATS["csv"].write(found).decode()
    assert text.count("\r\n") == len(found.rows) + 1 and text.replace("\r\n", "").find("\n") == -1
    heading, *rows = csv.reader(io.StringIO(text, newline=""))
    assert tuple(heading) == found.headings
    for text in found.texts:
        assert tuple(row.pop(0) for row in rows) == text.cells
    numbers = np.array([[float(cell) if cell else np.nan for cell in row] for row in rows])
    np.testing.assert_array_equal(numbers, found.rows)


def test_json_reads_back_the_same_numbers(found):
    document = json.loads(FILE_FORMATS["json"].write(found))
    numbers = np.array([[np.nan if cell is None else cell for cell in row] for row in document["rows"]], dtype=float)
    np.testing.assert_array_equal(numbers, found.rows)
    assert [column["unit"] for column in document["columns"]] == [column.unit for column in found.columns]
    assert document["caution"] == found.caution


def test_xlsx_reads_back_the_same_numbers(found):
    book = openpyxl.load_workbook(io.BytesIO(FILE_FORMATS["xlsx"].write(found)))
    heading, *rows = book["Curve"].iter_rows(values_only=True)
    assert heading == found.headings
    first = len(found.texts)
    numbers = np.array([[np.nan if cell is None else cell for cell in row[first:]] for row in rows], dtype=float)
    np.testing.assert_array_equal(numbers, found.rows)
    record = {row[0]: row[1] for row in book["Provenance"].iter_rows(values_only=True)}
    assert record["caution"] == found.caution
    assert record["problem hash"].startswith("sha256:") and record["verdict"] == "local minimum"


def test_npz_reads_back_the_same_numbers_without_pickle(found):
    with np.load(io.BytesIO(FILE_FORMATS["npz"].write(found)), allow_pickle=False) as archive:
        np.testing.assert_array_equal(archive["rows"], found.rows)
        assert archive["names"].tolist() == [column.name for column in found.columns]
        assert archive["units"].tolist() == [column.unit for column in found.columns]
        assert all(archive[text.member].tolist() == list(text.cells) for text in found.texts)
        assert str(archive["caution"]) == found.caution


@pytest.mark.parametrize("start", ["=", "+", "-", "@", "\t"])
def test_no_text_cell_starts_a_formula(vehicle, start):
    found = table(vehicle, rows=3)
    (arc,) = found.texts
    hostile = replace(found, texts=(replace(arc, cells=(start + 'HYPERLINK("x")', "burn", "coast")),))
    rows = list(csv.reader(io.StringIO(FILE_FORMATS["csv"].write(hostile).decode(), newline="")))
    assert rows[1][0] == "'" + start + 'HYPERLINK("x")'
    book = openpyxl.load_workbook(io.BytesIO(FILE_FORMATS["xlsx"].write(hostile)))
    assert book["Curve"]["A2"].data_type == "s"


def test_csvw_describes_the_columns_of_the_csv(found):
    """W3C Metadata Vocabulary for Tabular Data (2015), sections 5.3-5.6: the members that a validator asks for."""
    metadata = json.loads(json.dumps(to_csvw(found, "curve.csv")))
    assert metadata["@context"] == ["http://www.w3.org/ns/csvw", {"@language": "en"}]
    assert metadata["url"] == "curve.csv"
    columns = metadata["tableSchema"]["columns"]
    assert tuple(column["titles"] for column in columns) == found.headings
    names = [column["name"] for column in columns]
    assert len(set(names)) == len(names) and not any(name.startswith("_") for name in names)
    assert {column["datatype"] for column in columns} <= {"double", "string"}
    units = [column["notes"][0]["unit"] for column in columns if column["datatype"] == "double"]
    assert units == [column.unit or "1" for column in found.columns]
    assert any("caution" in note for note in metadata["notes"])
