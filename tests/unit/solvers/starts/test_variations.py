"""The starts of a problem: different, the same each time, and drawn as they are named."""

import numpy as np
import pytest

from solvers.problem import Problem
from solvers.starts.variations import variations
from solvers.transcription.layout import layout
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import compiled, shape, start_of, stated

ENDS = ["y(0) = 1", "y(3) = 2"]


def drawn(problem: Problem, start: int):
    """Places and values of y as the start has them."""
    from dataclasses import replace

    mesh = uniform(len(problem.places) - 1, 8, 4)
    varied = replace(problem, start=variations(problem, start + 1)[start])
    where = layout(compiled(varied), mesh)
    z = start_of(varied, mesh)
    places = z[where.places]
    return mesh.breaks(places), z[where.nodes[:, 0]], z[where.parameters]


def test_the_first_start_is_the_default_guess():
    x, y, _ = drawn(shape(endpoints=ENDS), 0)
    np.testing.assert_allclose(y, 1 + x / 3)


def test_low_modes_keep_fixed_ends_and_go_both_ways():
    up, down = (drawn(shape(endpoints=ENDS), start) for start in (1, 2))
    line = 1 + up[0] / 3
    np.testing.assert_allclose((up[1] - line)[[0, -1]], 0, atol=1e-12)
    np.testing.assert_allclose(up[1] - line, line - down[1], atol=1e-12)
    np.testing.assert_allclose(up[1] - line, (up[1] - line)[4] * np.sin(np.pi * up[0] / 3), atol=1e-12)
    assert (up[1] - line)[4] > 1


def test_a_free_end_moves():
    _, y, _ = drawn(shape(endpoints=["y(0) = 1"]), 1)
    assert y[0] == 1 and abs(y[-1] - 1) > 0.3


def test_bounds_hold():
    _, y, _ = drawn(shape(endpoints=ENDS, unknowns={"y": {"within": [0.9, 2.1]}}), 2)
    assert y.min() >= 0.9 and y.max() <= 2.1


def test_sobol_points_move_parameters_within_their_ranges_and_keep_places_in_order():
    problem = stated(
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [2, 3]}, "k": {}},
        functional={"seek": "minimum", "integrand": "u^2 + k^2"},
        endpoints=["x(0) = 0", "x(T) = 1"],
    )
    found = [drawn(problem, number) for number, v in enumerate(variations(problem, 12)) if "Sobol" in v.label]
    lengths = [breaks[-1] for breaks, _, _ in found]
    assert len(set(lengths)) == len(lengths) == 3
    assert all(2 <= length <= 3 for length in lengths)
    assert all(parameters[0] == length for (_, _, parameters), length in zip(found, lengths, strict=True))
    assert all(0.25 <= parameters[1] <= 4 for _, _, parameters in found)


@pytest.mark.parametrize("number", [1, 2, 9, 60])
def test_starts_differ_and_are_the_same_each_time(number):
    problem = shape(endpoints=ENDS)
    made = variations(problem, number)
    assert made == variations(problem, number)
    assert len({variation.label for variation in made}) == len(made) == number


def test_controls_without_bounds_are_left_alone():
    assert not any("u" in variation.modes for variation in variations(stated(), 30))
