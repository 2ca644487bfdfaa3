"""Figures: finite and bounded data, captions that tell the truth, pictures that are well-formed."""

from __future__ import annotations

import json
import math
import xml.etree.ElementTree as ElementTree

import numpy as np
import pytest

from web.figures import figures, plots, spec, svg
from web.figures.plots import MOST_ALIKE
from web.figures.series import MOST_POINTS, jumps, series
from web.figures.ticks import decades, ticks
from web.palette import LINES
from web.trajectory import read_trajectory

DOCUMENTS = ["hose", "stage", "vehicle", "infeasible", "out_of_time"]


def numbers(value):
    """All numbers in a nested structure."""
    if isinstance(value, dict):
        value = list(value.values())
    if isinstance(value, list):
        return [number for item in value for number in numbers(item)]
    return [value] if isinstance(value, float) else []


@pytest.fixture(params=DOCUMENTS)
def document(request):
    return request.getfixturevalue(request.param)


def test_every_number_of_a_specification_is_finite_and_the_points_are_bounded(document):
    for plot in plots(document):
        made = spec(plot)
        assert all(math.isfinite(number) for number in numbers(made))
        for trace in made["data"]:
            assert 2 <= len(trace["x"]) == len(trace["y"]) <= MOST_POINTS
            assert any(value is not None for value in trace["y"])


def test_the_data_block_reads_back_and_cannot_end_its_script(document):
    document["problem"]["unknowns"] = {}
    for plot, figure in zip(plots(document), figures(document), strict=True):
        assert json.loads(str(figure.data)) == json.loads(json.dumps(spec(plot)))
        assert "<" not in str(figure.data)


def test_every_picture_is_well_formed_and_draws_inside_its_frame(document):
    for plot in plots(document):
        tree = ElementTree.fromstring(svg(plot))
        _, _, width, height = (float(part) for part in tree.attrib["viewBox"].split())
        lines = [e for e in tree.iter("path") if e.attrib["class"].startswith("plot-line")]
        assert len(lines) >= len(plot.traces)
        for line in lines[: len(plot.traces)]:
            points = [float(part) for part in line.attrib["d"].replace("M", " ").replace("L", " ").split()]
            assert points and all(0 <= x <= width for x in points[::2]) and all(0 <= y <= height for y in points[1::2])


def test_hostile_names_are_escaped_in_the_picture(hose):
    name = "</svg><script>alert(1)</script>"
    functions = hose["multipliers"]["costates"]["arcs"][0]["functions"]
    functions[name] = functions.pop("y")
    plot = next(plot for plot in plots(hose) if plot.key.startswith("costate"))
    assert name in plot.traces[0].label
    assert "<script" not in svg(plot)
    ElementTree.fromstring(svg(plot))
    assert "<" not in json.dumps(spec(plot)["layout"]["yaxis"]["title"])


def test_series_lie_on_the_curve_and_hold_both_ends(hose):
    trajectory = read_trajectory(hose)
    places, heights = series(trajectory, "y")
    assert places[0] == 0 and places[-1] == 3 and np.all(np.diff(places) > 0)
    np.testing.assert_allclose(heights, trajectory.arcs[0].evaluate("y", 0, places), rtol=1e-13)
    # a straight line between neighbours is nowhere further from the curve than a hair of the picture
    between = (places[1:] + places[:-1]) / 2
    gap = abs((heights[1:] + heights[:-1]) / 2 - trajectory.arcs[0].evaluate("y", 0, between))
    assert gap.max() < 1e-3 * np.ptp(heights)


@pytest.mark.parametrize("most", [8, 40, 200])
def test_series_keep_to_the_number_of_points_they_are_given(hose, most):
    places, _ = series(read_trajectory(hose), "y", most=most)
    assert len(places) <= most


def test_a_jump_is_drawn_as_a_riser(stage):
    trajectory = read_trajectory(stage)
    switch = trajectory.arcs[0].breaks[1]
    places, heights = series(trajectory, "a")
    assert places.tolist() == [0, switch, switch, trajectory.end]
    assert heights == pytest.approx([2000, 2000, -2000, -2000])
    ((place, before, after),) = jumps(trajectory, "a")
    assert (place, before, after) == (switch, pytest.approx(2000), pytest.approx(-2000))


def test_the_pen_is_lifted_where_an_arc_lacks_the_function(vehicle):
    places, heights = series(read_trajectory(vehicle), "F")
    assert np.isnan(heights[places > 2]).all() and np.isfinite(heights[places < 2]).all()
    thrust = next(plot for plot in plots(vehicle) if plot.key == "curve-F")
    assert None in spec(thrust)["data"][0]["y"]


def test_captions_say_what_is_to_be_seen(hose, stage, vehicle):
    drawn = [plot for document in (vehicle, stage, hose) for plot in plots(document)]
    said = {plot.key: plot.finding.replace("\N{NO-BREAK SPACE}", " ") for plot in drawn}
    assert said["curve-y"] == "y starts at 2 m, is lowest with 0.8884 m at x = 1.402 m and ends at 2.4 m."
    assert said["curve-x"] == "x rises from 0 mm to 40 mm."
    assert said["curve-a"] == "a jumps at t = 0.1414 s from 2000 mm/s² to −2000 mm/s²."
    assert said["curve-m"] == "m jumps at t = 2 s from 38 kg to 34 kg."
    assert said["curve-F"] == "F stays at 10 N."
    assert said["error-history"] == "The relative error estimate fell from 0.001 to 1.2·10⁻⁹ over 3 meshes."
    assert said["mesh"] == "8 intervals, each 0.375 m long."


def test_a_shape_has_one_scale_on_both_axes_unless_that_would_squeeze_it(hose):
    shape = next(plot for plot in plots(hose) if plot.key == "curve-y")
    assert shape.equal and spec(shape)["layout"]["yaxis"]["scaleanchor"] == "x"
    for piece in hose["curve"]["arcs"][0]["functions"]["y"]:
        piece[:] = [value / (2 * MOST_ALIKE) for value in piece]
    assert not next(plot for plot in plots(hose) if plot.key == "curve-y").equal


def test_two_lengths_over_time_are_drawn_as_a_path_too(stage):
    stage["curve"]["arcs"][0]["functions"]["z"] = [[30.0, 20.0], [40.0, -10.0]]
    stage["curve"]["units"]["z"] = "mm"
    path = next(plot for plot in plots(stage) if plot.key == "path")
    assert (path.across, path.up) == ("x [mm]", "z [mm]") and path.equal
    together = next(plot for plot in plots(stage) if plot.key == "curve-x")
    assert [trace.label for trace in together.traces] == ["x", "z"]
    assert len({(trace.colour, trace.line.dash) for trace in together.traces}) == 2


def test_costates_of_a_state_and_of_its_derivative_are_both_drawn(stage):
    pieces = [[1.0], [1.0]]
    breaks = stage["curve"]["arcs"][0]["breaks"]
    arcs = [{"name": "", "basis": "legendre", "breaks": breaks, "functions": {"x": pieces, "x'": pieces}}]
    stage["multipliers"]["costates"] = {"arcs": arcs, "units": {"x": "s/mm", "x'": "s^2/mm"}}
    labels = [trace.label for plot in plots(stage) if plot.key.startswith("costate") for trace in plot.traces]
    assert labels == ["costate of x", "costate of x'"]


def test_more_unknowns_of_one_unit_than_line_styles_make_a_second_plot(stage):
    functions = stage["curve"]["arcs"][0]["functions"]
    for number in range(len(LINES) + 1):
        functions[f"w{number}"] = [[float(number)], [float(number)]]
    drawn = [plot for plot in plots(stage) if plot.traces[0].label.startswith("w")]
    assert [len(plot.traces) for plot in drawn] == [len(LINES), 1]


@pytest.mark.parametrize(("low", "high"), [(0, 1), (-3.2e-9, 7e-9), (0.999, 1.001), (-1e8, 3e8), (0, 0.28284)], ids=str)
def test_ticks_are_round_inside_and_evenly_spaced(low, high):
    marks = ticks(low, high)
    assert 3 <= len(marks) <= 8
    assert all(low - 1e-9 * (high - low) <= mark <= high + 1e-9 * (high - low) for mark in marks)
    assert np.diff(marks) == pytest.approx(np.full(len(marks) - 1, marks[1] - marks[0]))
    assert all(len(f"{mark:.6g}".lstrip("-").replace(".", "").strip("0")) <= 6 for mark in marks)


def test_decades_are_thinned():
    assert decades(1e-3, 1) == (1e-3, 1e-2, 1e-1, 1)
    assert len(decades(1e-16, 1e2)) <= 6
