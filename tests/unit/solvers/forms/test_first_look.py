"""What the first guess tells: sizes, the integrand, and a beginning that keeps to the gauge."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.forms.first_look import at_constant_speed, behind_guess, first_look
from solvers.forms.gauge import SPEED, in_parametric_form
from solvers.problem import Variation
from solvers.solve import solve
from tests.unit.solvers.problems import shape

HOSE = shape(functional={"integrand": "y*sqrt(1 + y'^2)"}, endpoints=["y(0) = 2", "y(3) = 2.4"],
             constraints=["integral(sqrt(1 + y'^2)) = 4.2"])  # fmt: skip


def begun(problem):
    look = first_look(problem)
    gauged = in_parametric_form(problem, lambda: look.sizes, squared=False)
    return look, at_constant_speed(gauged, look)


def points(gauged, name):
    (unknown,) = (u for u in gauged.problem.unknowns if u.name == name)
    return np.array(unknown.guess).T


def test_the_first_guess_is_told_at_constant_speed():
    look, gauged = begun(HOSE)
    s, x = points(gauged, "x")
    _, y = points(gauged, "y")
    np.testing.assert_allclose([x[0], x[-1], y[0], y[-1]], [0, 3, 2, 2.4], atol=1e-12)
    chords = np.hypot(np.diff(x) / look.sizes["x"], np.diff(y) / look.sizes["y"])
    np.testing.assert_allclose(chords / np.diff(s), chords.sum(), rtol=0.05)  # the chords cut the corners of others
    (speed,) = (p.guess for p in gauged.problem.parameters if p.name == SPEED)
    assert speed == pytest.approx(chords.sum(), rel=0.01)


def test_a_hanging_hose_is_solved_from_there_in_few_steps():
    """28 iterations from a straight line at half the speed."""
    solution = solve(HOSE)
    assert solution.meshes[0].iterations <= 10


def test_a_varied_start_is_drawn_once():
    varied = replace(HOSE, start=Variation("y with 2 half waves", {"y": (0.0, 0.5)}))
    _, gauged = begun(varied)
    assert not gauged.problem.start.modes
    _, y = points(gauged, "y")
    _, plain = points(begun(HOSE)[1], "y")
    assert np.abs(y - plain).max() > 0.1


def test_what_is_no_graph_begins_as_it_is():
    way = shape(
        unknowns={"y": {}, "z": {}}, functional={"integrand": "sqrt(y'^2 + z'^2)"}, endpoints=["y(0) = 0", "y(3) = 1"]
    )
    look = first_look(way)
    gauged = in_parametric_form(way, lambda: look.sizes, squared=True)
    assert not gauged.graph
    assert at_constant_speed(gauged, look) is gauged


@pytest.mark.parametrize(("value", "seek", "behind"), [(1.5, "minimum", True), (1.4, "minimum", False),
                                                       (1.3, "maximum", True), (1.5, "maximum", False)])  # fmt: skip
def test_a_value_is_compared_with_that_of_the_first_guess(value, seek, behind):
    """From (0, 0) to (1, 1) the guess is the line of length sqrt(2)."""
    problem = shape(independent={"name": "x", "from": 0, "to": 1}, endpoints=["y(0) = 0", "y(1) = 1"],
                    functional={"seek": seek, "integrand": "sqrt(1 + y'^2)"})  # fmt: skip
    assert behind_guess(problem, value) is behind


def test_a_guess_that_breaks_conditions_is_no_measure():
    """Near y = 0 the condition is broken: no line or bend from there is compared."""
    problem = shape(independent={"name": "x", "from": 0, "to": 1}, functional={"integrand": "sqrt(1 + y'^2)"},
                    constraints=["y^2 + x >= 3/2"], endpoints=[])  # fmt: skip
    assert not behind_guess(problem, 100.0)
