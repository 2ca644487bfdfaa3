"""Every part of a result that is a list has a table, in all formats, and its page says where."""

import csv
import io
import json
from typing import get_args

import numpy as np
import pytest

from service.routes.tables import Part
from web.media_types import PARTS as NAMES
from web.pages.result import result_page
from web.render import render
from web.tables import FILE_FORMATS, PARTS, TableError, part_table, table

STRETCHES = [
    {"of": "u", "arc": "", "from": 0.0, "from_error": None, "to": 1.25, "to_error": 1e-6, "course": "singular"},
    {
        "of": "u",
        "arc": "",
        "from": 1.25,
        "from_error": 1e-6,
        "to": 3.0,
        "to_error": None,
        "course": "at its upper limit",
    },
]
BRANCH = {
    "constant": "d",
    "unit": "mm",
    "points": [{"at": 50, "value": 1.2, "leg": 0}, {"at": 78, "value": 1.4, "leg": 1}],
    "folds": [{"at": 79.5, "value": 1.3, "leg": 0}],
    "end": "The value asked for is reached.",
    "error": 1e-8,
}
FIT = {"parameters": {"b": {"value": 238.9, "sigma": 2.7, "unit": "mm"}}}


@pytest.fixture
def whole(hose):
    """A result with something of every part but a sweep, which has tests of its own."""
    extremal = {name: hose[name] for name in ("verdict", "value", "value_error", "checks", "curve")}
    length = {"l": {"value": 4.2, "unit": "m"}}
    others = [{**extremal, "parameters": length, "starts": ["default guess", "y with 1 half wave up"]}]
    return {**hose, "stretches": STRETCHES, "continuation": BRANCH, "extremals": others, "observations": FIT}


def _csv(made):
    heading, *rows = csv.reader(io.StringIO(FILE_FORMATS["csv"].write(made).decode()))
    return heading, rows


def test_one_list_of_names():
    assert get_args(Part) == NAMES == tuple(PARTS)


@pytest.mark.parametrize("part", [part for part in PARTS if part != "sweep"])
@pytest.mark.parametrize("suffix", FILE_FORMATS)
def test_every_part_can_be_had_in_every_format(whole, part, suffix):
    made = part_table(whole, part)
    body = FILE_FORMATS[suffix].write(made)
    if suffix == "json":
        rows = np.array(json.loads(body)["rows"], dtype=float)
    elif suffix == "npz":
        rows = np.load(io.BytesIO(body))["rows"]
    else:
        return
    np.testing.assert_array_equal(rows, made.rows)


@pytest.mark.parametrize(
    ("part", "heading", "first"),
    [
        (
            "stretches",
            ["of", "arc", "course", "from [m]", "from_error [m]", "to [m]", "to_error [m]"],
            ["u", "", "singular", "0.0", "", "1.25", "1e-06"],
        ),
        ("continuation", ["kind", "d [mm]", "value [m^2]", "leg"], ["point", "50.0", "1.2", "0.0"]),
        ("fit", ["parameter", "unit", "value", "sigma"], ["b", "mm", "238.9", "2.7"]),
    ],
)
def test_texts_come_before_numbers(whole, part, heading, first):
    found, rows = _csv(part_table(whole, part))
    assert (found, rows[0]) == (heading, first)


def test_folds_lie_between_the_legs_that_they_join(whole):
    _, rows = _csv(part_table(whole, "continuation"))
    assert [row[0] for row in rows] == ["point", "fold", "point"]


def test_prices_and_slopes_have_the_unit_of_each_row(whole):
    (price,) = whole["multipliers"]["prices"]
    heading, (row,) = _csv(part_table(whole, "prices"))
    assert heading == ["condition", "pointer", "unit", "price"]
    assert row == [price["condition"], "/constraints/0", "m", repr(price["price"])]
    _, rows = _csv(part_table(whole, "slopes"))
    assert [row[:2] for row in rows] == [["l", "m"], ["w", "m^2"]]
    assert rows[1][3:] == ["", ""]  # no tolerance


def test_extremals_have_their_parameters_and_starts(whole):
    heading, (row,) = _csv(part_table(whole, "extremals"))
    assert heading[-1] == "l [m]" and row[-1] == "4.2"
    assert row[:2] == ["local minimum", "default guess; y with 1 half wave up"]


def test_costates_are_at_the_nodes_of_the_curve(whole):
    made = part_table(whole, "costates")
    assert made.headings == ("x [m]", "y [m]")
    assert set(whole["curve"]["arcs"][0]["breaks"]) <= set(made.rows[:, 0])
    assert len(made.rows) == len(table(whole).rows)


def test_what_a_result_has_not_is_said(hose):
    with pytest.raises(TableError, match="no stretches"):
        part_table(hose, "stretches")


def test_the_page_says_where_the_files_are(whole):
    whole.pop("observations")
    text = render(result_page(whole, base_url="http://bench.example/"))
    for part in set(PARTS) - {"sweep", "fit"}:
        assert f"/api/v1/runs/hose-0001/{part}.csv" in text
    assert "/api/v1/runs/hose-0001/table.csv?extremal=1" in text
