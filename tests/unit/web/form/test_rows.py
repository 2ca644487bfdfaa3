"""Points as they are pasted: any separator, a grid's empty corner, and back without loss."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from web.form.filling import form_from_document
from web.form.reading import document_from_form, read_form
from web.form.rows import arguments_from_text, rows_from_text, text_from_arguments, text_from_rows


@pytest.mark.parametrize(
    ("text", "rows"),
    [
        pytest.param("0 1.62\n1 1.61", [[0, 1.62], [1, 1.61]], id="blanks"),
        pytest.param("0\t1.62\r\n1\t1.61\r\n", [[0, 1.62], [1, 1.61]], id="tabs, as from a spreadsheet"),
        pytest.param("0; 1.62;\n\n 1, -1e-3", [[0, 1.62], [1, -0.001]], id="other separators and empty lines"),
        pytest.param("\t0\t10\n1\t2\t3\n4\t5\t6", [[None, 0, 10], [1, 2, 3], [4, 5, 6]], id="a grid"),
        pytest.param("null 0 10\n1 2 3\n4 5 6", [[None, 0, 10], [1, 2, 3], [4, 5, 6]], id="its corner written"),
        pytest.param("0 1\n1 2 3", [[0, 1], [1, 2, 3]], id="a ragged list is told as it is"),
        pytest.param("5\n1 2", [[5], [1, 2]], id="so is a lonely number"),
        pytest.param("r n\n0 1", None, id="words"),
        pytest.param("0 1e999", None, id="no number of JSON"),
    ],
)
def test_what_is_pasted_becomes_rows(text, rows):
    assert rows_from_text(text) == rows


numbers = st.one_of(st.integers(-(10**9), 10**9), st.floats(allow_nan=False, allow_infinity=False))


@given(st.lists(st.lists(numbers | st.none(), max_size=4), min_size=1, max_size=6))
def test_rows_survive_the_form(rows):
    document = {"format": 1, "tables": {"n": {"of": {"r": "mm"}, "points": rows}}}
    assert document_from_form(form_from_document(document)) == document


@given(st.integers(2, 5), st.integers(2, 5), st.data())
def test_a_grid_is_shown_as_lines(height, width, data):
    grid = [[None, *range(width)], *([at, *(data.draw(numbers) for _ in range(width))] for at in range(height))]
    text = text_from_rows(grid)
    assert text is not None
    assert len(text.splitlines()) == height + 1
    assert rows_from_text(text) == grid


@pytest.mark.parametrize(
    ("text", "arguments"),
    [
        ("r in mm", {"r": "mm"}),
        ("T [K], p[bar]", {"T": "K", "p": "bar"}),
        ("x , y", {"x": "", "y": ""}),
        ("v in m/s, w in kg*m/s^2", {"v": "m/s", "w": "kg*m/s^2"}),
        ("r in", None),
        ("r mm", None),
        ("r in mm, r in m", None),
        ("", None),
    ],
)
def test_arguments_in_words(text, arguments):
    assert arguments_from_text(text) == arguments


def test_arguments_that_no_words_give_back_have_none():
    assert text_from_arguments({"r": "mm", "z": ""}) == "r in mm, z"
    assert text_from_arguments({"r z": "mm"}) is None
    assert text_from_arguments({"r": 3}) is None


LENS = {"of": {"r": "mm"}, "points": [[0, 1.62], [1.5, 1.6]], "unit": "1", "between": "monotone", "about": "index"}


@pytest.mark.parametrize(
    "table",
    [
        pytest.param(LENS, id="a table"),
        pytest.param(LENS | {"outside": "hold"}, id="with everything"),
        pytest.param({"of": {"r": "mm"}, "points": [[0, 1], [2.0, 3]]}, id="with as little as possible"),
        pytest.param(LENS | {"of": {"T": "K", "p": ""}, "points": [[None, 0, 1], [2, 3, 4], [5, 6, 7]]}, id="a grid"),
        pytest.param(LENS | {"of": {"a, b": "mm"}}, id="strange arguments"),
        pytest.param(LENS | {"points": [[0, "high"], [1, True], []]}, id="strange points"),
        pytest.param(LENS | {"points": {"0": 1}}, id="no points"),
        pytest.param(LENS | {"between": "cubic"}, id="a strange choice"),
    ],
)
def test_a_table_survives_the_form(table):
    document = {"format": 1, "tables": {"n": table}}
    assert document_from_form(form_from_document(document)) == document


def test_the_fields_are_those_that_people_read():
    fields = form_from_document({"format": 1, "tables": {"n": LENS}})
    assert fields["tables.0.of"] == "r in mm"
    assert fields["tables.0.points"].splitlines() == ["0  1.62", "1.5   1.6"]
    assert fields["tables.0.between"] == "monotone"
    assert "tables.0.rest" not in fields


def test_a_complaint_about_a_point_leads_to_the_points():
    reading = read_form(form_from_document({"format": 1, "tables": {"n": LENS}}))
    assert reading.places["/tables/n/points"] == "tables.0.points"
    assert reading.places["/tables/n/of"] == "tables.0.of"
