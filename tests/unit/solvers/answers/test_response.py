"""The first-order change of the curve with constants: closed forms, and neighbours solved again."""

import json
from dataclasses import replace

import numpy as np
import pytest

from service.assemble import assemble
from service.samples import load
from service.spec import read
from solvers.answers.response import SingularError, changes
from solvers.answers.sensitivity import limit_shifts
from solvers.deadline import in_seconds
from solvers.evidence import UNDETERMINED
from solvers.search.pursuit import pursue
from solvers.solve import solve
from tests.unit.solvers.problems import LEAST_TIME, shape, stated


def neighbour(problem, name, value):
    constants = tuple(replace(c, value=value) if c.name == name else c for c in problem.constants)
    return solve(replace(problem, constants=constants))


def by_differences(problem, name, places):
    """Half the difference of the curves for the constant a tolerance above and below."""
    constant = next(c for c in problem.constants if c.name == name)
    above, below = (neighbour(problem, name, constant.value + s * constant.tolerance).curve for s in (1, -1))
    return {f: (above.evaluate(f, places) - below.evaluate(f, places)) / 2 for f in above.functions}


def test_a_hanging_chain_changes_with_its_length_as_the_catenary_does():
    # Gelfand, Fomin (1963), section 12: y = a cosh(x/a) - a cosh(1/a), length 2 a sinh(1/a); here a = 1.
    problem = shape(
        independent={"name": "x", "from": -1, "to": 1},
        constants={"l": f"{2 * np.sinh(1)} +/- 0.01"},
        functional={"integrand": "y*sqrt(1 + y'^2)"},
        endpoints=["y(-1) = 0", "y(1) = 0"],
        constraints=["integral(sqrt(1 + y'^2)) = l"],
    )
    (change,) = solve(problem).changes
    x = np.linspace(-1, 1, 41)
    by_a = np.cosh(x) - x * np.sinh(x) - np.cosh(1) + np.sinh(1)
    length_by_a = 2 * np.sinh(1) - 2 * np.cosh(1)
    assert change.constant == "l"
    np.testing.assert_allclose(change.curve.evaluate("y", x), 0.01 * by_a / length_by_a, atol=1e-8)


def test_the_quickest_descent_does_not_change_with_gravity():
    # Johann Bernoulli (1696): the cycloid through two points is the same everywhere.
    problem = stated(
        independent={"name": "x", "from": 0, "to": 2},
        unknowns={"y": {"within": [0, None]}},
        dynamics=None,
        constants={"g": "9.8 +/- 0.5"},
        functional={"integrand": "sqrt((1 + y'^2)/(2*g*y))"},
        endpoints=["y(0) = 0", "y(2) = 1"],
    )
    (change,) = solve(problem).changes
    np.testing.assert_allclose(change.curve.evaluate("y", np.linspace(0, 2, 31)), 0, atol=1e-9)


def test_with_a_free_end_and_switches_the_change_is_at_fixed_times():
    # Pontryagin et al. (1962), section 5 (from memory): x = D + t - t^2/2 until the switch at 1 + sqrt(1/2 + D), then
    # (T - t)^2/2: the first piece moves with D itself, the second with (T - t) dT/dD, dT/dD = 1/sqrt(1/2 + D).
    ends = ["x(0) = D", "x'(0) = 1", "x(T) = 0", "x'(T) = 0"]
    problem = stated(**LEAST_TIME | {"constants": {"D": "1 +/- 0.01"}, "endpoints": ends})
    (change,) = solve(problem).changes
    switch, end = 1 + np.sqrt(1.5), 1 + 2 * np.sqrt(1.5)
    first, last = np.linspace(0, switch - 1e-3, 9), np.linspace(switch + 1e-3, end, 9)
    np.testing.assert_allclose(change.curve.evaluate("x", first), 0.01, atol=1e-8)
    np.testing.assert_allclose(change.curve.evaluate("x'", first), 0, atol=1e-8)
    np.testing.assert_allclose(change.curve.evaluate("x", last), 0.01 * (end - last) / np.sqrt(1.5), atol=1e-8)
    np.testing.assert_allclose(change.curve.evaluate("u", np.concatenate([first, last])), 0, atol=1e-8)


def test_limits_that_bind_are_kept_and_places_and_weights_move():
    # x' = u: least energy to D with u <= h and a cost of being away from zero.
    problem = stated(
        independent={"name": "t", "from": 0, "to": "L"},
        constants={"L": "2 +/- 0.001", "h": "0.9 +/- 0.001", "k": "3 +/- 0.001", "D": "1 +/- 0.001"},
        functional={"integrand": "u^2 + k*x^2"},
        endpoints=["x(0) = 0", "x(L) = D"],
        constraints=["u <= h"],
    )
    solution = solve(problem)
    t = np.array([0.2, 0.5, 0.7, 1.6, 1.9])  # away from where the limit begins to bind
    for change in solution.changes:
        expected = by_differences(problem, change.constant, t)
        for name in ("x", "u"):
            found = change.curve.evaluate(name, t)
            np.testing.assert_allclose(found, expected[name], atol=2e-3 * 0.001, err_msg=change.constant)


def test_the_moved_load_changes_with_the_length_of_its_rope_as_its_neighbours_do():
    document = load("crucible")
    document["constants"]["l"] = "0.80 m +/- 0.002 m"
    problem = assemble(read(json.dumps(document).encode()))
    solution = solve(problem)
    (change,) = solution.changes
    assert change.constant == "l"
    t = np.linspace(0.1, 3.1, 11)
    expected = by_differences(problem, "l", t)
    for name in ("x", "q"):
        np.testing.assert_allclose(
            change.curve.evaluate(name, t), expected[name], atol=3e-2 * np.abs(expected[name]).max()
        )


def test_a_family_of_equally_good_curves_has_no_change_and_the_result_says_so():
    # Any constant may be added to x: nothing fixes it.
    problem = stated(constants={"c": "2 +/- 0.1"}, functional={"integrand": "(u - c)^2"}, endpoints=["x(1) = x(0) + 1"])
    solution = solve(problem)
    assert solution.changes == ()
    assert UNDETERMINED in solution.notes
    assert [slope.slope for slope in solution.slopes] == pytest.approx([2.0])


def test_a_singular_system_is_told_and_not_solved():
    problem = stated(constants={"c": "1 +/- 0.1"}, functional={"integrand": "(u - c)^2"}, endpoints=["x(1) = x(0)"])
    path = pursue(problem, None, in_seconds(60), meshes=2).paths[-1]
    with pytest.raises(SingularError):
        changes(path, limit_shifts(path))


def test_on_a_huge_mesh_the_change_is_left_out_and_the_result_says_so(monkeypatch):
    monkeypatch.setattr("solvers.evidence.LARGEST", 10)
    problem = stated(constants={"D": "1 +/- 0.1"}, endpoints=["x(0) = 0", "x(1) = D"])
    solution = solve(problem)
    assert solution.changes == ()
    assert any("more than 10 unknowns" in note for note in solution.notes)
    assert solution.value_band == pytest.approx(0.2)
