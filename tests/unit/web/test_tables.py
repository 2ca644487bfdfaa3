"""Tables: which rows, which columns, and numbers that are those of the exact curve."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest

from web.extremes import extremes
from web.tables import MOST_ROWS, TableError, observed_table, table
from web.tables.places import even_places, nodes, stepped_places
from web.trajectory import read_trajectory
from web.unit_text import per


@pytest.mark.parametrize(
    ("end", "step", "count"),
    [
        pytest.param(1.0, 0.25, 5, id="the step fits"),
        pytest.param(1.0, 0.3, 5, id="a shorter last step"),
        pytest.param(0.3, 0.1, 4, id="the step fits but for rounding: 3*0.1 > 0.3"),
        pytest.param(0.7, 0.1, 8, id="the step fits but for rounding: 0.7/0.1 < 7"),
        pytest.param(2.1 + 1e-10, 0.001, 2101, id="no row within a millionth of a step of the end"),
        pytest.param(1.0, 5.0, 2, id="a step longer than the curve"),
    ],
)
def test_steps_end_exactly_at_the_end_without_a_double_row(end, step, count):
    places = stepped_places(0.0, end, step)
    assert len(places) == count
    assert places[0] == 0.0 and places[-1] == end
    gaps = np.diff(places)
    assert np.all(gaps > 1e-6 * step) and np.allclose(gaps[:-1], step)
    assert gaps[-1] <= step * (1 + 2e-6)


def test_even_rows_hold_both_ends():
    places = even_places(-0.1, 0.7, 1001)
    assert len(places) == 1001 and places[0] == -0.1 and places[-1] == 0.7


@pytest.mark.parametrize("name", ["hose", "stage", "vehicle"])
@pytest.mark.parametrize("choice", [{}, {"rows": 7}, {"step": 0.013}], ids=["nodes", "rows", "step"])
def test_the_last_row_is_exactly_the_end_of_the_curve(name, choice, request):
    document = request.getfixturevalue(name)
    rows = table(document, **choice).rows
    assert rows[-1, 0] == document["curve"]["arcs"][-1]["breaks"][-1]
    assert rows[0, 0] == document["curve"]["arcs"][0]["breaks"][0]


def test_values_and_derivatives_agree_with_the_closed_form(hose):
    found = table(hose, rows=41, derivatives=3)
    _, y, slope, second, third = found.rows.T
    # y = a cosh((x - x0)/a) + c, so a y'' = sqrt(1 + y'^2) and a^2 y''' = y'
    size = math.sqrt(1 + slope[0] ** 2) / second[0]
    assert y[0] == pytest.approx(2.0, abs=1e-12) and y[-1] == pytest.approx(2.4, abs=1e-12)
    assert second == pytest.approx(np.sqrt(1 + slope**2) / size, rel=1e-8)
    assert third == pytest.approx(slope / size**2, rel=1e-5, abs=1e-6)
    assert [column.unit for column in found.columns] == ["m", "m", "", "1/m", "1/m^2"]


def test_derivatives_of_a_polynomial_are_exact(stage):
    found = table(stage, rows=9, columns=["x", "x'", "x''", "x'''", "a"])
    t, x, speed, acceleration, jerk, a = found.rows.T
    first = t <= stage["curve"]["arcs"][0]["breaks"][1]
    assert x[first] == pytest.approx(1000 * t[first] ** 2)
    assert speed[first] == pytest.approx(2000 * t[first])
    assert acceleration == pytest.approx(np.where(first, 2000, -2000)) == a
    assert jerk == pytest.approx(np.zeros(9), abs=1e-5)
    assert [c.unit for c in found.columns] == ["s", "mm", "mm/s", "mm/s^2", "mm/s^3", "mm/s^2"]


def test_the_gap_between_the_rows_and_the_curve_is_told(stage):
    """A parabola is missed by a h^2 / 8 in the middle of a step h."""
    found = table(stage, rows=11, columns=["x", "a"])
    step = found.rows[1, 0]
    _, x, a = found.columns
    assert x.between == pytest.approx(2000 * step**2 / 8, rel=1e-6)
    assert table(stage, rows=101, columns=["x"]).columns[1].between == pytest.approx(x.between / 100, rel=1e-4)
    assert a.between >= 2000  # the jump stays, however short the step


def test_a_jump_shows_the_value_before_it(stage):
    switch = stage["curve"]["arcs"][0]["breaks"][1]
    t, a = table(stage, rows=3, columns=["a"]).rows.T
    assert t[1] == pytest.approx(switch)
    nodes_t, nodes_a = table(stage, columns=["a"]).rows.T
    assert nodes_a[list(nodes_t).index(switch)] == pytest.approx(2000)
    assert a[-1] == pytest.approx(-2000)


def test_the_nodes_determine_the_polynomials(hose):
    arc = read_trajectory(hose).arcs[0]
    places = nodes(arc)
    assert len(places) == 8 * 12 + 1 and np.all(np.diff(places) > 0)
    assert set(arc.breaks) <= set(places)


def test_node_rows_show_both_sides_of_a_junction_and_even_rows_one(vehicle):
    found = table(vehicle)
    at_junction = [(arc, row[2]) for arc, row in zip(found.texts[0].cells, found.rows, strict=True) if row[0] == 2.0]
    assert at_junction == [("burn", pytest.approx(38)), ("coast", pytest.approx(34))]
    even = table(vehicle, step=1.0)
    assert even.rows[:, 0].tolist() == [0, 1, 2, 3, 4, 5]
    assert even.texts[0].cells == ("burn",) * 3 + ("coast",) * 3
    assert even.headings == ("arc", "t [s]", "h [m]", "m [kg]", "F [N]")
    assert np.isnan(even.rows[3:, 3]).all() and not np.isnan(even.rows[:3]).any()


@pytest.mark.parametrize(
    ("choice", "code", "words"),
    [
        ({"rows": 5, "step": 0.1}, "rows-and-step", "one of the two"),
        ({"step": 0.0}, "bad-step", "above 0"),
        ({"step": -1.0}, "bad-step", "above 0"),
        ({"step": float("nan")}, "bad-step", "above 0"),
        ({"step": float("inf")}, "bad-step", "above 0"),
        ({"step": 1e-9}, "too-many-rows", "at least"),
        ({"rows": 1}, "too-few-rows", "at least 2"),
        ({"rows": MOST_ROWS + 1}, "too-many-rows", "200,000"),
        (
            {"rows": MOST_ROWS, "columns": ["y" + "'" * k for k in range(4)], "derivatives": 9},
            "bad-derivatives",
            "0",
        ),
        ({"columns": ["Y"]}, "unknown-column", "columns are x, y"),
        ({"columns": ["y''''"]}, "unknown-column", "up to the third"),
        ({"columns": ["yy'"]}, "unknown-column", "Did you mean y'?"),
    ],
)
def test_what_cannot_be_made_is_refused_with_what_would_do(hose, choice, code, words):
    with pytest.raises(TableError) as caught:
        table(hose, **choice)
    assert caught.value.code == code
    assert words in caught.value.hint


def test_a_result_without_curve_has_no_table(infeasible):
    with pytest.raises(TableError, match="no curve"):
        table(infeasible)


@pytest.mark.parametrize(
    ("unit", "divisor", "power", "expected"),
    [
        ("m", "s", 2, "m/s^2"),
        ("m/s^2", "s", 1, "m/s^3"),
        ("m", "m", 1, ""),
        ("m", "m", 2, "1/m"),
        ("mm", "m", 1, "mm/m"),
        ("", "s", 1, "1/s"),
        ("kg*m^2/s^2", "s", 1, "kg*m^2/s^3"),
        ("J", "mol/s", 1, "J*s/mol"),
        ("J", "s*m", 1, "J/s/m"),
        ("m*s", "s", 1, "m"),
        ("m", "", 2, "m"),
        ("kg/(m*s)", "s", 1, "kg/m/s^2"),
        ("m!", "s", 2, "(m!)/(s)^2"),
        ("1/s", "s", 1, "1/s^2"),
    ],
)
def test_units_of_derivatives(unit, divisor, power, expected):
    assert per(unit, divisor, power) == expected


def test_extremes_are_found_between_the_nodes_and_on_both_sides_of_a_jump(hose, stage):
    lines = {line.name: line for line in extremes(hose)}
    x, y = table(hose, rows=200_000).rows.T
    assert lines["y"].lowest <= y.min() and lines["y"].lowest == pytest.approx(y.min(), abs=1e-9)
    assert lines["y"].lowest_at == pytest.approx(x[y.argmin()], abs=1e-4)
    assert (lines["y"].largest, lines["y"].highest_at) == (pytest.approx(2.4), 3.0)
    jump = {line.name: line for line in extremes(stage)}["a"]
    assert (jump.lowest, jump.highest) == (pytest.approx(-2000), pytest.approx(2000))


def test_derivatives_that_are_zero_are_told_as_zero(stage):
    """Along arcs of constant acceleration rounding leaves something of the next derivative, but that is no figure."""
    spoiled = json.loads(json.dumps(stage))
    for piece in spoiled["curve"]["arcs"][0]["functions"]["a"]:
        piece[1:] = [1e-11, -2e-11]
    spoiled["curve"]["error"] = 1e-13
    lines = {line.name: line for line in extremes(spoiled)}
    assert (lines["a'"].lowest, lines["a'"].highest, lines["a'"].unit) == (0.0, 0.0, "mm/s^3")
    assert "a''" not in lines
    assert lines["x"].lowest == 0.0
    for piece in spoiled["curve"]["arcs"][0]["functions"]["a"]:
        piece[1:] = [10.0, -20.0]  # an acceleration that does change
    lines = {line.name: line for line in extremes(spoiled)}
    assert lines["a'"].largest > 100 and "a''" in lines


def test_observations_are_a_table_of_their_own(fitted):
    made = observed_table(fitted, 2)
    assert made.headings == (
        "x [m]", "observed [cm]", "fitted [cm]", "residual [cm]", "sigma [cm]", "fitted sigma [cm]", "normalised",
    )  # fmt: skip
    assert made.rows[:, 3].tolist() == [1, -2, 1]
    assert len(observed_table(fitted).columns) == 6  # without sigmas there is no column for them
    assert dict(made.record)["run"] == "hose-0004"


@pytest.mark.parametrize("number", [0, 3])
def test_a_list_of_observations_that_is_not_there_is_refused(fitted, number):
    with pytest.raises(TableError, match="no list"):
        observed_table(fitted, number)


def test_a_result_without_observations_has_no_table_of_them(hose):
    with pytest.raises(TableError, match="Nothing was observed"):
        observed_table(hose)
