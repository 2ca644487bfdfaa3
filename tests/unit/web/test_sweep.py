"""The sweep of a result: its table in all formats, its figures, its part of the page."""

import copy
import csv
import io
import json

import numpy as np
import pytest

from web.figures.sweep import sweep_plots
from web.pages.result import result_page
from web.pages.sweep import sweep_of
from web.render import render
from web.tables import FILE_FORMATS, TableError, part_table, to_csvw


def point(at, value, verdict="local minimum", **members):
    error = None if value is None else 1e-9
    return {"at": at, "verdict": verdict, "value": value, "value_error": error, "parameters": {"T": value},
            "failed": [], "note": "", **members}  # fmt: skip


@pytest.fixture
def swept(hose):
    result = copy.deepcopy(hose)
    result["sweep"] = {
        "constants": [{"name": "l", "unit": "m", "values": [4.0, 4.2, 4.4]}],
        "parameters": {"T": "s"},
        "points": [
            point([4.0], 6.1),
            point([4.2], 5.8, "not verified", failed=["motion"]),
            point([4.4], None, None, note="The time limit was reached before this point."),
        ],
        "curves": [{"point": index, "arcs": hose["curve"]["arcs"]} for index in (0, 1)],
    }
    return result


@pytest.fixture
def grid(swept):
    values = [[weight, length] for weight in range(9) for length in (4.0, 4.2)]
    constants = [
        {"name": "w", "unit": "N/m", "values": list(range(9))},
        {"name": "l", "unit": "m", "values": [4.0, 4.2]},
    ]
    points = [point(at, at[0] * at[1]) for at in values]
    return {**swept, "sweep": {**swept["sweep"], "constants": constants, "points": points}}


def test_the_table_has_a_row_for_every_point(swept):
    made = part_table(swept, "sweep")
    assert made.headings == ("verdict", "l [m]", "value [m^2]", "value error [m^2]", "T [s]")
    assert made.texts[0].cells == ("local minimum", "not verified", "no result")
    np.testing.assert_array_equal(made.rows[:, :2], [[4.0, 6.1], [4.2, 5.8], [4.4, np.nan]])


def test_every_format_says_the_same(swept):
    made = part_table(swept, "sweep")
    lines = list(csv.reader(io.StringIO(FILE_FORMATS["csv"].write(made).decode())))
    assert lines[0] == list(made.headings)
    assert lines[1][:3] == ["local minimum", "4.0", "6.1"]
    assert lines[3] == ["no result", "4.4", "", "", ""]
    document = json.loads(FILE_FORMATS["json"].write(made))
    assert document["verdicts"] == list(made.texts[0].cells)
    assert document["rows"][2] == [4.4, None, None, None]
    archive = np.load(io.BytesIO(FILE_FORMATS["npz"].write(made)))
    assert archive["verdicts"].tolist() == list(made.texts[0].cells)
    np.testing.assert_array_equal(archive["rows"], made.rows)
    assert FILE_FORMATS["xlsx"].write(made)[:2] == b"PK"
    assert to_csvw(made, "sweep.csv")["tableSchema"]["columns"][0]["name"] == "verdict"


def test_a_result_without_a_sweep_has_no_such_table(hose):
    with pytest.raises(TableError, match="no sweep"):
        part_table(hose, "sweep")
    assert sweep_plots(hose) == ()
    assert sweep_of(hose) is None


def test_the_value_is_drawn_over_the_constant_and_what_is_missing_lifts_the_pen(swept):
    value, curves = sweep_plots(swept)
    (trace,) = value.traces
    np.testing.assert_array_equal(trace.values, [6.1, 5.8, np.nan])
    assert value.finding.replace("\N{NO-BREAK SPACE}", " ") == (
        "The value is least, 5.8 m², at l = 4.2 m and greatest, 6.1 m², at l = 4 m. 1 of 3 points have no value."
    )
    assert [trace.label.replace("\N{NO-BREAK SPACE}", " ") for trace in curves.traces] == ["l = 4 m", "l = 4.2 m"]


def test_two_constants_give_a_line_for_some_values_of_the_first(grid):
    value = sweep_plots(grid)[0]
    assert len(value.traces) == 7
    assert value.traces[0].label.replace("\N{NO-BREAK SPACE}", " ") == "w = 0 N/m"
    np.testing.assert_allclose(value.traces[-1].values, [8 * 4.0, 8 * 4.2])


def test_the_page_shows_points_with_their_verdicts_and_files(swept):
    text = render(result_page(swept, base_url="http://bench.example/"))
    assert "3 points: 1 local minimum, 1 not verified, 1 no result." in text
    assert "failed: motion" in text
    assert "/api/v1/runs/hose-0001/sweep.csv" in text
    assert "The time limit was reached before this point." in text


def test_of_many_points_the_page_shows_some(swept):
    values = np.linspace(0, 1, 400).tolist()
    swept["sweep"]["constants"][0]["values"] = values
    swept["sweep"]["points"] = [point([value], value) for value in values]
    shown = sweep_of(swept)
    assert len(shown.rows) == 25
    assert shown.shown == "25 of 400 points"
    assert (shown.rows[0].cells[0], shown.rows[-1].cells[0]) == ("0", "1")
