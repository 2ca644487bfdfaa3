"""Free ends: transversality, natural boundary conditions, free numbers."""

from dataclasses import replace

import numpy as np
import pytest

from solvers.checks import free_ends
from solvers.solution import Status

# closed form: y = 1 - cosh(1 - x)/cosh 1, y'(1) = 0
NATURAL = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y'^2/2 + y^2/2 - y"},
    "endpoints": ["y(0) = 0"],
}
# closed form: T + 12/T^3 is least at T = sqrt(6)
TIME_AND_ENERGY = {
    "independent": {"name": "t", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, 10]}},
    "unknowns": {"x": {}, "u": {}},
    "dynamics": ["x'' = u"],
    "functional": {"seek": "minimum", "integrand": "1 + u^2"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
}
ENDPOINT_TERM = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "parameters": {"a": {}},
    "unknowns": {"x": {}},
    "functional": {"seek": "minimum", "integrand": "x'^2 + a*x", "endpoint": "(x(1) - 2)^2 + a^2"},
    "endpoints": ["x(0) = 0"],
}
TO_A_CIRCLE = {  # the shortest way to a circle meets it at a right angle
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}, "y": {}},
    "functional": {"seek": "minimum", "integrand": "x'^2 + y'^2"},
    "endpoints": ["x(0) = 3", "y(0) = 1", "x(1)^2 + y(1)^2 = 1"],
}
ON_A_LIMIT = {  # a value at the end that rests on the limit of an inequality
    **NATURAL,
    "endpoints": ["y(0) = 0", "y(1) <= 0.2", "y(1)^2 + y(0) <= 4"],
}
MAXIMUM = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"x": {}},
    "functional": {"seek": "maximum", "integrand": "-x'^2", "endpoint": "2*x(1) - x(1)^2"},
    "endpoints": ["x(0) = 0"],
}
ALL = {"natural": NATURAL, "time and energy": TIME_AND_ENERGY, "endpoint term": ENDPOINT_TERM, "circle": TO_A_CIRCLE,
       "on a limit": ON_A_LIMIT, "maximum": MAXIMUM}  # fmt: skip


@pytest.mark.parametrize("document", ALL.values(), ids=ALL)
def test_a_solved_curve_passes(solved, examine, document):
    check = examine(free_ends.check, solved(document))
    assert check.status is Status.PASSED, check


@pytest.mark.parametrize("name", ["natural", "endpoint term", "circle", "maximum"])
def test_a_costate_that_does_not_fit_the_end_fails(solved, examine, name):
    path = solved(ALL[name])
    shifted = replace(path, costates=path.costates + 0.01 * (1 + np.abs(path.costates).max()))
    assert examine(free_ends.check, shifted).status is Status.FAILED


def test_an_end_that_is_pulled_off_its_limit_fails(solved, examine, refreshed):
    """The limit pushes, the curve stays away from it."""
    path = solved(ON_A_LIMIT)
    nodes = path.nodes.copy()
    nodes[-1] -= 0.02
    check = examine(free_ends.check, replace(path, nodes=nodes))
    assert (check.status, check.subject) == (Status.FAILED, "y(1)")


def test_a_parameter_off_its_best_value_fails(solved, examine):
    path = solved(ENDPOINT_TERM)
    check = examine(free_ends.check, replace(path, parameters=path.parameters + 0.05))
    assert (check.status, check.subject) == (Status.FAILED, "a")


def test_a_free_end_off_its_best_place_fails(solved, examine):
    """The best curve for a later end than the best one: only its bound holds it, and without the bound it fails."""
    later = {**TIME_AND_ENERGY, "parameters": {"T": {"within": [2.6, 10]}}}
    path = solved(later)
    assert path.parameters == pytest.approx(2.6)
    assert examine(free_ends.check, path).status is Status.PASSED
    lowered = path.program.compiled.lowered
    unbounded = replace(lowered.problem, parameters=(replace(lowered.problem.parameters[0], lower=0.1),))
    compiled = replace(path.program.compiled, lowered=replace(lowered, problem=unbounded))
    check = examine(free_ends.check, replace(path, program=replace(path.program, compiled=compiled)))
    assert (check.status, check.subject) == (Status.FAILED, "T")


def test_a_wrong_multiplier_of_a_condition_fails(solved, examine):
    path = solved(TO_A_CIRCLE)
    rows = path.row_multipliers.copy()
    rows[path.program.rows.conditions :] *= 1.05
    assert examine(free_ends.check, replace(path, row_multipliers=rows)).status is Status.FAILED


def test_a_multiplier_of_a_condition_that_does_not_bind_fails(solved, examine):
    path = solved(ON_A_LIMIT)
    rows = path.row_multipliers.copy()
    rows[path.program.rows.conditions :] = 0.3
    assert examine(free_ends.check, replace(path, row_multipliers=rows)).status is Status.FAILED


def test_with_nothing_free_it_does_not_apply(solved, examine):
    fixed = {**NATURAL, "endpoints": ["y(0) = 0", "y(1) = 1"]}
    assert examine(free_ends.check, solved(fixed)).status is Status.NOT_APPLICABLE


def test_the_free_end_is_that_of_the_closed_form(solved):
    assert solved(TIME_AND_ENERGY).parameters == pytest.approx(np.sqrt(6), rel=1e-5)
