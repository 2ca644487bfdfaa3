"""Limits of a problem as bounds of its program."""

from dataclasses import replace

import numpy as np

from solvers.problem import Held, Touch
from solvers.transcription.layout import layout, row_order
from solvers.transcription.limits import interval_of, limits, number, quantity_bounds
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import LEAST_TIME, compiled, stated

INFINITE = np.inf


def bounds_of(problem):
    functions = compiled(problem)
    mesh = uniform(len(problem.places) - 1, 2, 3)
    where = layout(functions, mesh)
    return where, *limits(functions, where, row_order(functions, mesh, where)), row_order(functions, mesh, where)


def test_bounds_of_several_sources_are_met_together():
    functions = compiled(
        stated(
            constants={"c": 2},
            unknowns={"x": {"within": [-3, None]}, "u": {"within": [0, 4]}},
            constraints=["x >= -2*c", "x <= 3*c", "u <= c", "u >= -1"],
        )
    )
    found = quantity_bounds(functions)
    assert [float(value[0]) for value in found] == [-3, 6, 0, 2]


def test_conditions_on_single_values_narrow_one_variable():
    where, lower, upper, *_ = bounds_of(
        stated(unknowns={"x": {"within": [-5, 5]}, "u": {}}, endpoints=["x(0) = 1", "x(1) >= 2", "x(1/2) <= 3"])
    )
    at = [int(where.nodes[node, 0]) for node in where.at_place]
    assert [(lower[k], upper[k]) for k in at] == [(1, 1), (-5, 3), (2, 5)]
    inside = [k for k in np.union1d(where.nodes, where.inner) if k not in at]
    assert np.all(lower[inside] == -5)
    assert np.all(upper[inside] == 5)


def test_fixed_places_stand_and_free_ones_are_parameters():
    where, lower, upper, *_ = bounds_of(stated(**LEAST_TIME))
    assert (lower[where.places[0]], upper[where.places[0]]) == (0, 0)
    assert where.places[1] == where.parameters[0]
    assert (lower[where.places[1]], upper[where.places[1]]) == (0.1, 100)


def test_rows_take_the_limits_of_their_conditions():
    where, _, _, lower, upper, rows = bounds_of(
        stated(
            constraints=["-1 <= x + u <= 2", "x*u >= 0", "integral(u^4) <= 9"],
            endpoints=["x(0) = 0", "x(0) + x(1) = 1"],
        )
    )
    points = len(where.fractions)
    np.testing.assert_array_equal(lower[rows.pointwise : rows.rims].reshape(points, 2), [[-1, 0]] * points)
    np.testing.assert_array_equal(upper[rows.pointwise : rows.rims].reshape(points, 2), [[2, INFINITE]] * points)
    np.testing.assert_array_equal(lower[rows.conditions :], [1, -INFINITE])
    np.testing.assert_array_equal(upper[rows.conditions :], [1, 9])


def test_a_held_control_is_fixed_along_its_stretch_only():
    problem = stated(unknowns={"x": {}, "u": {"within": [-1, 2]}}, endpoints=["x(0) = 0", "x(1/2) = 1"])
    where, lower, upper, *_ = bounds_of(replace(problem, held=(Held(0, "u", 0, 1), Held(1, "u", 0, -1))))
    own = where.controls[:, 0]
    np.testing.assert_array_equal(lower[own], np.where(where.stretch == 0, 2, -1))
    np.testing.assert_array_equal(upper[own], lower[own])


def test_a_limit_that_follows_from_what_is_held_is_not_stated():
    """Beyond 1/2 nothing flows, so x stays where it is: its limit there has no multiplier of its own."""
    members = {"unknowns": {"x": {"within": [0, 3]}, "u": {"within": [0, 2]}}, "dynamics": ["x' = -u"]}
    problem = stated(**members, endpoints=["x(0) = 1", "x(1/2) = 0", "x(1) <= 1"])
    problem = replace(problem, held=(Held(1, "u", 0, -1),), implied=(Held(1, "x", 0, -1),))
    where, lower, upper, *_ = bounds_of(problem)
    node = where.at_place[1]
    beyond = np.concatenate([where.nodes[node + 1 :, 0], where.inner[where.stretch == 1, 0]])
    assert np.all(lower[beyond] == -INFINITE)
    assert (upper[where.nodes[-1, 0]], upper[where.nodes[-2, 0]]) == (1, 3)
    assert (lower[where.nodes[node, 0]], upper[where.nodes[node, 0]]) == (0, 0)
    assert np.all(lower[where.inner[where.stretch == 0, 0][:-1]] == 0)


def test_a_touch_stays_one_where_the_limit_is_not_stated_beside_it():
    members = {"unknowns": {"x": {"within": [-3, None]}, "u": {"within": [0, 2]}}, "dynamics": ["x'' = u"]}
    problem = stated(**members, endpoints=["x(0) = 1", "x(1/2) <= 2"])
    place = problem.places[1].label
    problem = replace(problem, implied=(Held(1, "x", 0, -1),), touches=(Touch(place, "x", 0, -1),))
    where, lower, upper, *_ = bounds_of(problem)
    value, slope = where.nodes[where.at_place[1]]
    assert (lower[value], upper[value], lower[slope], upper[slope]) == (-3, -3, 0, 0)


def test_limits_are_formulas_of_constants():
    problem = stated(constants={"a": 3}, constraints=["x + u <= 2*a - 1"])
    assert interval_of(problem.constraints[0], {"a": 3.0}) == (-INFINITE, 5)
    assert number(problem.constraints[0].upper, {"a": 4.0}) == 7
