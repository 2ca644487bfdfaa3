"""What the tolerances of the constants leave open, in figures and tables; and the figure of a continuation."""

import copy

import numpy as np
import pytest

from web.figures import drawn
from web.figures.branch import branch_plot
from web.figures.plot import Span
from web.figures.plots import plots
from web.figures.spec import spec
from web.pages.result import result_page
from web.render import render
from web.tables import TableError, table
from web.trajectory import band, read_changes


@pytest.fixture
def banded(hose):
    """The hose with two tolerances that move it by 0.03 m and 0.04 m all along."""
    result = copy.deepcopy(hose)
    (arc,) = result["curve"]["arcs"]
    intervals = len(arc["breaks"]) - 1
    result["band"]["curve"] = [
        {"constant": name, "arcs": [{**arc, "functions": {"y": [[size]] * intervals}}]}
        for name, size in (("l", 0.03), ("w", -0.04))
    ]
    return result


@pytest.fixture
def folded(hose):
    points = [{"at": at, "value": at**2, "leg": leg} for at, leg in ((1, 0), (1.3, 0), (1.2, 1), (0.9, 1))]
    fold = {"at": 1.325487, "value": 1.8, "leg": 0}
    branch = {"constant": "d", "unit": "m", "points": points, "folds": [fold], "end": "The branch has come back."}
    return {**hose, "continuation": {**branch, "error": 1e-8}}


def test_independent_tolerances_add_up_as_squares(banded):
    places = np.linspace(0, 3, 7)
    np.testing.assert_allclose(band(read_changes(banded), "y", 0, places), 0.05)
    assert band(read_changes(banded), "z", 0, places) is None
    assert band((), "y", 0, places) is None


def test_the_band_is_shaded_beside_the_curve_in_both_pictures(banded):
    plot = next(plot for plot in plots(banded) if plot.key.startswith("curve"))
    (trace,) = plot.traces
    np.testing.assert_allclose(trace.band, 0.05)
    lower, upper = trace.edges(-10, 10)
    np.testing.assert_allclose(upper - lower, 0.1)
    assert 'class="plot-band line-1"' in drawn(plot).still
    shaded, line = spec(plot)["data"]
    assert (shaded["fill"], shaded["fillcolor"], line["name"]) == ("toself", "--line-1", "y")
    assert "Shaded: one standard deviation" in plot.finding


def test_without_tolerances_nothing_is_shaded(hose):
    plot = next(plot for plot in plots(hose) if plot.key.startswith("curve"))
    assert plot.traces[0].band is None
    assert "plot-band" not in drawn(plot).still
    assert len(spec(plot)["data"]) == 1


def test_where_a_control_is_singular_both_pictures_are_shaded(hose):
    stretches = [{"of": "y", "arc": "", "from": 0.5, "from_error": 2e-5, "to": 1.25, "to_error": 1e-6,
                  "course": "singular"},
                 {"of": "y", "arc": "", "from": 1.25, "to": 3.0, "course": "at its upper limit"}]  # fmt: skip
    plot = next(plot for plot in plots({**hose, "stretches": stretches}) if plot.key.startswith("curve"))
    assert plot.spans == (Span(0.5, 1.25, 0),)
    assert drawn(plot).still.count('class="plot-span line-1"') == 1
    (shape,) = spec(plot)["layout"]["shapes"]
    assert (shape["x0"], shape["x1"], shape["fillcolor"], shape["layer"]) == (0.5, 1.25, "--line-1", "below")
    assert plot.finding.endswith(
        "Shaded from top to bottom: y runs singular (its ends are known to 2·10⁻⁵\N{NO-BREAK SPACE}m)."
    )
    plain = next(plot for plot in plots(hose) if plot.key.startswith("curve"))
    assert plain.spans == () and "plot-span" not in drawn(plain).still


def test_where_a_curve_is_vertical_the_band_does_not_squeeze_the_picture(banded):
    for change in banded["band"]["curve"]:
        (arc,) = change["arcs"]
        arc["functions"]["y"] = [[1e6], *arc["functions"]["y"][1:]]
    plot = next(plot for plot in plots(banded) if plot.key.startswith("curve"))
    _, _, low, high = plot.extent()
    assert high - low <= 2.001 * np.ptp(plot.traces[0].values)


def test_the_table_has_the_deviation_beside_each_column_where_it_is_asked_for(banded):
    made = table(banded, rows=5, sigma=True)
    assert made.headings == ("x [m]", "y [m]", "y sigma [m]")
    np.testing.assert_allclose(made.rows[:, 2], 0.05)
    assert table(banded, rows=5).headings == ("x [m]", "y [m]")
    both = table(banded, rows=5, columns=["y", "y'"], sigma=True)
    assert both.headings == ("x [m]", "y [m]", "y sigma [m]", "y'", "y' sigma")
    np.testing.assert_allclose(both.rows[:, 4], 0, atol=1e-15)


@pytest.fixture
def banded_vehicle(vehicle):
    """The mass of the vehicle moves by 1 kg before the junction and by 2 kg after it, the thrust by 3 N."""
    result = copy.deepcopy(vehicle)
    burn, coast = result["curve"]["arcs"]
    changes = [{**burn, "functions": {"h": [[0.0]] * 2, "m": [[1.0]] * 2, "F": [[3.0]] * 2}},
               {**coast, "functions": {"h": [[0.0]], "m": [[2.0]]}}]  # fmt: skip
    result["band"] = {"value": 0.1, "curve": [{"constant": "c", "arcs": changes}]}
    return result


def test_both_sides_of_a_junction_have_their_own_deviation(banded_vehicle):
    made = table(banded_vehicle, columns=["m", "F"], sigma=True)
    at_junction = made.rows[made.rows[:, 0] == 2.0]
    assert at_junction[:, 2].tolist() == [1.0, 2.0]
    assert at_junction[0, 4] == 3.0
    assert np.isnan(at_junction[1, 3:]).all()  # no thrust on the second arc
    traces = {
        trace.label: trace for plot in plots(banded_vehicle) if plot.key.startswith("curve") for trace in plot.traces
    }
    mass = traces["m"]
    assert set(mass.band[mass.places < 2]) == {1.0}
    assert set(mass.band[mass.places > 2]) == {2.0}
    assert mass.band[mass.places == 2.0].tolist() == [1.0, 2.0]
    thrust = traces["F"]
    assert (np.isfinite(thrust.band) == np.isfinite(thrust.values)).all()


def test_a_deviation_that_is_not_known_is_refused(hose):
    with pytest.raises(TableError, match="tolerances"):
        table(hose, rows=5, sigma=True)


def test_a_branch_is_drawn_leg_by_leg_with_its_fold(folded):
    plot = branch_plot(folded)
    assert [trace.label for trace in plot.traces] == ["leg 1", "leg 2", "fold"]
    assert plot.traces[0].places.tolist() == [1, 1.3, 1.325487]
    assert plot.traces[1].places.tolist() == [1.325487, 1.2, 0.9]
    assert "folds at d = 1.325487" in plot.finding.replace("\N{NO-BREAK SPACE}", " ")
    text = render(result_page(folded, base_url="http://bench.example/"))
    assert "Continuation" in text
    assert "The branch has come back." in text


def test_no_branch_no_figure(hose):
    assert branch_plot(hose) is None
    assert "Continuation" not in render(result_page(hose, base_url="http://bench.example/"))
