"""What the first guess tells: sizes, the integrand, and a beginning that keeps to the gauge."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.forms.first_look import at_constant_speed, first_look
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
