"""How far limits are left between the points, over stretches that no even grid sees."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.search.excess import excess
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import path_along, stated

PUSH = 7.0
BOUND = {"unknowns": {"x": {"within": [0, None]}, "u": {}}}
CONSTRAINT = {"constraints": ["x + t >= t"]}


def pushed(path, k):
    """The path with a push of its lower bound on x, or of its constraint, at a point of interval k."""
    where, rows = path.program.layout, path.program.rows
    bounds, multipliers = np.zeros_like(path.bound_multipliers), np.zeros_like(path.row_multipliers)
    bounds[where.inner[where.first[k], 0]] = PUSH
    multipliers[rows.pointwise : rows.rims][where.first[k] :][:1] = PUSH
    return replace(path, bound_multipliers=bounds, row_multipliers=multipliers)


@pytest.mark.parametrize("depth", [1e-6, 1e-9, 1e-12])
@pytest.mark.parametrize("members", [BOUND, CONSTRAINT], ids=("a bound", "a constraint"))
def test_a_touch_between_the_points_is_found(depth, members):
    """x = (t - 0.3456)^2 - depth is below zero over a stretch of 2 sqrt(depth) only."""
    problem = stated(endpoints=["x(0) = 0"], **members)
    path = path_along(uniform(1, 4, 4), lambda t: (t - 0.3456) ** 2 - depth, lambda t: 2 * (t - 0.3456), problem)
    worst, gained = excess(pushed(path, 1))
    assert gained == pytest.approx(PUSH * depth, rel=1e-3, abs=1e-15)
    assert worst[1] > 0
    assert worst[[0, 2, 3]].max() == 0
    assert excess(path)[1] == 0  # nothing pushes
