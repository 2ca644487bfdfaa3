"""Smallest conflicts: nothing idle is in them, nothing is missing, and what each condition alone would have to give."""

from math import exp, sqrt

import pytest

from solvers.deadline import in_seconds
from solvers.minimise.elastic import groups, without
from solvers.search.effort import Minimiser
from solvers.search.irreducible import conflicts
from solvers.search.pursuit import pursue
from solvers.search.record import End
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import program_of, shape, stated


def conflicts_of(problem):
    pursuit = pursue(problem, None, in_seconds(60))
    assert pursuit.end is End.INFEASIBLE
    found = conflicts(pursuit.nearest, Minimiser(pursuit, None, in_seconds(60)))
    return [{finding.label: finding.amount for finding in conflict} for conflict in found]


def test_a_conflict_has_no_idle_condition_and_misses_none():
    """x' = u <= 1 from 0 reaches 1 after 1, not 3: any of the three could give, and each would have to give 2."""
    problem = stated(constraints=["u <= 1", "u >= -7", "x <= 50", "integral(u^2) <= 100"],
                     endpoints=["x(0) = 0", "x(1) = 3"])  # fmt: skip
    (conflict,) = conflicts_of(problem)
    assert conflict == pytest.approx({"u <= 1": 2, "x(0) = 0": 2, "x(1) = 3": 2}, rel=1e-5)


def test_amounts_are_those_of_each_condition_alone():
    """x falls as exp(-t), whatever y does."""
    problem = stated(
        unknowns={"x": {}, "y": {}, "u": {}},
        dynamics=["x' = -x", "y' = u"],
        constraints=["x >= 1/2"],
        endpoints=["x(0) = 1", "y(0) = 0", "y(1) = 1"],
    )
    (conflict,) = conflicts_of(problem)
    assert conflict == pytest.approx({"x >= 1/2": 1 / 2 - exp(-1), "x(0) = 1": exp(1) / 2 - 1}, rel=1e-5)


def test_a_condition_that_nothing_satisfies_stands_alone():
    (conflict,) = conflicts_of(stated(constraints=["u^2 <= -1"], endpoints=["x(0) = 0", "x(1) = 3"]))
    assert conflict == pytest.approx({"u^2 <= -1": 1}, rel=1e-5)


def test_bounds_and_free_ends_take_part():
    problem = stated(
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [0.5, 1]}},
        unknowns={"x": {}, "u": {"within": [-1, 1]}},
        endpoints=["x(0) = 0", "x(T) = 3"],
    )
    (conflict,) = conflicts_of(problem)
    expected = dict.fromkeys(["x(0) = 0", "x(T) = 3", "T within its bounds", "u within its bounds"], 2)
    assert conflict == pytest.approx(expected, rel=1e-5)


def test_conflicts_without_a_common_condition_are_all_named():
    problem = stated(
        unknowns={"x": {}, "y": {}, "u": {}, "w": {}},
        dynamics=["x' = u", "y' = w"],
        functional={"integrand": "u^2 + w^2"},
        constraints=["u^2 <= 100", "w^2 <= 1"],
        endpoints=["x(0) = 0", "y(0) = 0", "x(1) = 20", "y(1) = 20"],
    )
    solution = solve(problem)
    assert solution.verdict is Verdict.INFEASIBLE
    first, second = ({f.label for f in solution.diagnosis.findings if f.note == f"conflict {k}"} for k in (1, 2))
    wanted = [{"u^2 <= 100", "x(0) = 0", "x(1) = 20"}, {"w^2 <= 1", "y(0) = 0", "y(1) = 20"}]
    assert first in wanted
    assert second in wanted
    assert first != second
    assert solution.diagnosis.sentence.count("all of") == 2


@pytest.mark.parametrize("last", [[], ["z(1) = 0.9999"]])
def test_a_curve_that_hardly_rises_may_fall_steeply_once_nothing_holds_it(last):
    """Of z' >= -0.1 and z(0) = 1 follows z >= 1 - 0.1 x, whose integral is 0.95: 0.3 is met where any is dropped."""
    problem = stated(
        unknowns={"z": {}},
        dynamics=None,
        functional={"seek": "minimum", "integrand": "z'^2"},
        constraints=["z' >= -0.1", "integral(z) <= 0.3"],
        endpoints=["z(0) = 1", *last],
    )
    (conflict,) = conflicts_of(problem)
    expected = {"z' >= -0.1": 1.3, "integral(z) <= 0.3": 0.65, "z(0) = 1": 0.65}
    assert conflict == pytest.approx(expected, rel=5e-3 if last else 1e-5)  # what was dropped still pulls a little


def test_that_a_curve_cannot_be_shorter_is_proved_although_its_length_is_given_as_equal():
    """A hose of 4 between ends 5 apart; it would do if one end came nearer by 4 - sqrt(7)."""
    problem = shape(functional={"integrand": "y'^2"}, endpoints=["y(0) = 0", "y(3) = 4"],
                    constraints=["integral(sqrt(1 + y'^2)) = 4", "y >= -20"])  # fmt: skip
    solution = solve(problem)
    assert solution.verdict is Verdict.INFEASIBLE
    amounts = {finding.label: finding.amount for finding in solution.diagnosis.findings}
    near = 4 - sqrt(7)
    expected = {"integral(sqrt(1 + y'^2)) = 4": 1, "y(0) = 0": near, "y(3) = 4": near}
    assert amounts == pytest.approx(expected, rel=1e-4)
    assert solution.diagnosis.sentence.startswith("No curve satisfies all of")


def test_what_is_dropped_limits_nothing_and_the_rest_stays():
    problem = stated(
        parameters={"k": {"within": [0, 2]}},
        unknowns={"x": {"within": [-1, 1]}, "u": {}},
        dynamics=["x' = k*u"],
        constraints=["u <= 3", "x*u <= 1", "integral(u) = 1"],
        endpoints=["x(0) = 0", "x(0) + x(1) = 1"],
    )
    program = program_of(problem)
    every = {group.pointer for group in groups(program)}
    for pointer in every:
        assert {group.pointer for group in groups(without(program, {pointer}))} >= every - {pointer}
    bare = without(program, every)
    assert (bare.row_upper[bare.rows.pointwise : bare.rows.rims] == float("inf")).all()
    free = without(program, {"/endpoints/0"})  # x(0) is held by its bounds then
    start = program.layout.nodes[0, 0]
    assert program.lower[start] == program.upper[start] == 0
    assert free.lower[start] * free.scale[start] == pytest.approx(-1)
    assert free.upper[start] * free.scale[start] == pytest.approx(1)
