"""Pictures of tables: the points as they were measured, and the curve through them."""

import numpy as np
import pytest

from web.figures import drawn, spec, svg
from web.figures.tabulated import MOST_LINES, tabulated

N = {"of": {"r": "mm"}, "unit": "", "points": [[-2, 1.57], [0, 1.62], [2, 1.57]]}
G = {
    "of": {"T": "K", "p": "bar"},
    "unit": "kJ/kg",
    "points": [[None, *range(1, 9)], *([t, *(t * p / 10 for p in range(1, 9))] for t in (300, 350, 400))],
}


def plot(table, name="n"):
    (made,) = tabulated({"tables": {name: table}})
    return made


def test_the_points_are_marked_and_the_curve_runs_through_them():
    curve, points = plot(N).traces
    assert (points.joined, points.marked, points.label) == (False, True, "measured")
    np.testing.assert_array_equal(points.places, [-2, 0, 2])
    np.testing.assert_allclose(np.interp(points.places, curve.places, curve.values), points.values, rtol=1e-12)
    assert spec(plot(N))["data"][1]["mode"] == "markers"
    assert svg(plot(N)).count("<circle") == 3 + 1  # and one in the legend


def test_beyond_its_range_a_table_is_drawn_where_it_has_values():
    assert plot(N).traces[0].places[[0, -1]].tolist() == [-2, 2]
    held = plot(N | {"outside": "hold"}).traces[0]
    assert held.places[0] < -2
    assert held.values[0] == pytest.approx(1.57)


def test_the_sentence_says_how_it_runs():
    runs, measured = plot(N).finding.split("; ")
    assert runs == "n starts at 1.57, is highest with 1.62 at r = 0\u00a0mm and ends at 1.57"
    assert measured == "3 points, arguments have to stay inside."


def test_a_grid_is_shown_by_some_of_its_lines():
    made = plot(G, "h")
    *lines, points = made.traces
    assert len(lines) == MOST_LINES
    assert lines[0].label == "p = 1\u00a0bar"
    assert lines[-1].label == "p = 8\u00a0bar"
    assert len(points.places) == 3 * MOST_LINES
    assert made.up == "h [kJ/kg]"
    assert len({trace.number for trace in made.traces}) == MOST_LINES + 1
    assert len(drawn(made).rows) == 3


@pytest.mark.parametrize(
    "tables",
    [
        pytest.param(None, id="none"),
        pytest.param([N], id="a list"),
        pytest.param({"n": {}}, id="an empty one"),
        pytest.param({"n": N | {"points": [[0, 1], [0, 2]]}}, id="not increasing"),
        pytest.param({"n": N | {"points": [[0, 1], [1]]}}, id="ragged"),
        pytest.param({"n": N | {"of": {}}}, id="without argument"),
        pytest.param({"n": G | {"points": G["points"][:2]}}, id="too small"),
        pytest.param({"n": N | {"between": "cubic"}}, id="a strange choice"),
        pytest.param({"n": N | {"points": "0 1"}}, id="a text"),
    ],
)
def test_what_is_no_table_is_not_drawn(tables):
    assert list(tabulated({"tables": tables})) == []
