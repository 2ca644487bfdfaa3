"""The row buttons, on the fields alone."""

import pytest

from web.form.commands import obey

ROWS = {"title": "t", "endpoints.0.formula": "a", "endpoints.1.formula": "b", "endpoints.2.formula": "c"}


def formulas(fields):
    return [fields[name] for name in sorted(fields) if name.startswith("endpoints.")]


@pytest.mark.parametrize(
    ("command", "expected", "focus"),
    [
        ("add endpoints", ["a", "b", "c", ""], "endpoints.3.formula"),
        ("remove endpoints.1", ["a", "c"], "endpoints.1.formula"),
        ("remove endpoints.2", ["a", "b"], "endpoints.1.formula"),
        ("up endpoints.1", ["b", "a", "c"], "endpoints.0.formula"),
        ("up endpoints.0", ["a", "b", "c"], "endpoints.0.formula"),
        ("down endpoints.1", ["a", "c", "b"], "endpoints.2.formula"),
        ("down endpoints.2", ["a", "b", "c"], "endpoints.2.formula"),
    ],
)
def test_rows_are_added_removed_and_moved(command, expected, focus):
    fields, where = obey(command, ROWS)
    assert (formulas(fields), where) == (expected, focus)
    assert fields["title"] == "t"


@pytest.mark.parametrize(
    "command", ["", "check", "add", "add title", "up endpoints", "up endpoints.9", "remove endpoints.x", "burn all"]
)
def test_a_command_that_means_nothing_changes_nothing(command):
    assert obey(command, ROWS) == (ROWS, "")


def test_all_fields_of_a_row_move_with_it():
    fields = {"unknowns.0.name": "x", "unknowns.0.rest": '{"a": 1}', "unknowns.4.name": "y", "unknowns.4.unit": "m"}
    moved, _ = obey("up unknowns.4", fields)
    assert moved == {
        "unknowns.0.name": "y", "unknowns.0.unit": "m", "unknowns.1.name": "x", "unknowns.1.rest": '{"a": 1}',
    }  # fmt: skip
