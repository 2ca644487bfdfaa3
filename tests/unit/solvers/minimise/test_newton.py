"""Stationary points that are no minima."""

import numpy as np
import pytest

from solvers.minimise.ipopt import Outcome, Start, minimise
from solvers.minimise.newton import STEPS, stationary_point, straight_to
from solvers.solution import Status, Verdict
from solvers.solve import solve
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import program_of, stated


def action(end, **more):
    """The action of an oscillator, which has its first conjugate point at pi."""
    return stated(
        independent={"name": "t", "from": 0, "to": end},
        unknowns={"y": more.pop("bounds", {})},
        dynamics=[],
        functional={"seek": "stationary", "integrand": "(y'^2 - y^2)/2"},
        endpoints=["y(0) = 0", f"y({end}) = 1"],
        **more,
    )


def on(problem, watch=lambda iterate: False):
    program = program_of(problem, uniform(1, 6, 6))
    return program, stationary_point(program, Start(np.full(program.layout.size, 0.3)), watch)


@pytest.mark.parametrize("end", [2, 4, 5])
def test_the_action_is_stationary_on_both_sides_of_the_conjugate_point(end):
    program, point = on(action(end))
    assert point.outcome is Outcome.SOLVED
    # y = sin t / sin T: closed form, the value is cot(T)/2
    assert point.value * program.value_scale == pytest.approx(1 / np.tan(end) / 2, rel=1e-7)


def test_a_stationary_curve_beyond_a_limit_is_none():
    _, point = on(action(4, bounds={"within": [-0.5, None]}))  # the extremal sinks to -1.32
    assert point.outcome is not Outcome.SOLVED


def test_it_stops_when_it_is_told_to():
    _, point = on(action(4), watch=lambda iterate: True)
    assert point.outcome is Outcome.STOPPED


def test_what_is_stationary_is_not_called_a_minimum():
    solution = solve(action(4))
    assert solution.verdict is Verdict.STATIONARY
    found = {check.name: check.status for check in solution.checks}
    assert found["conjugate points"] is Status.FAILED
    assert found["stationarity"] is Status.PASSED
    assert solution.value == pytest.approx(1 / np.tan(4) / 2, rel=1e-9)


def near(bounds, away):
    """A minimum, and what is found from variables that are so far away from it."""
    problem = stated(unknowns={"x": {}, "u": bounds}, functional={"integrand": "u^2 + x^4"})
    program = program_of(problem, uniform(1, 6, 6))
    found = minimise(program, Start(np.full(program.layout.size, 0.1)))
    moved = found.z + away * np.cos(np.arange(len(found.z)))
    start = Start(moved, found.bound_multipliers, found.multipliers)
    return found, straight_to(program, start, lambda iterate: False)


def test_whole_steps_go_straight_to_a_straight_to():
    found, again = near({}, 1e-3)
    assert again.outcome is Outcome.SOLVED
    assert again.iterations <= 4
    np.testing.assert_allclose(again.z, found.z, atol=1e-8)
    np.testing.assert_allclose(again.multipliers, found.multipliers, atol=1e-8)


def test_far_away_or_where_a_limit_binds_the_minimiser_has_to_look():
    assert near({}, 1e3)[1] is None
    assert near({"within": [None, 1.05]}, 1e-3)[1] is None  # u would be larger somewhere


def test_a_step_across_a_limit_is_none():
    """On a coarser mesh the limit did not bind, here the curve would cross it."""
    problem = stated(
        unknowns={"x": {"within": [None, 0.2]}, "u": {}},
        functional={"integrand": "u^2 - 4*x"},
        endpoints=["x(0) = 0", "x(1) = 0"],
    )  # without the limit x = t (1 - t), which rises to 0.25
    program = program_of(problem, uniform(1, 6, 6))
    size = program.layout.size
    start = Start(np.full(size, 0.1), np.zeros(size), np.zeros(program.rows.count))
    assert straight_to(program, start, lambda iterate: False) is None


def test_from_a_guess_without_multipliers_the_first_step_finds_them():
    problem = stated(unknowns={"x": {}, "u": {}}, functional={"integrand": "u^2 + x^4"})
    program = program_of(problem, uniform(1, 6, 6))
    guess = Start(np.full(program.layout.size, 0.1))
    found, again = minimise(program, guess), straight_to(program, guess, lambda iterate: False)
    assert again.outcome is Outcome.SOLVED
    np.testing.assert_allclose(again.z, found.z, atol=1e-8)
    np.testing.assert_allclose(again.multipliers, found.multipliers, atol=1e-8)


def test_a_singular_system_says_nothing_and_leads_nowhere(capfd):
    """All is linear: nothing determines u but its limit.  The factorization would complain on the standard output."""
    problem = stated(unknowns={"x": {}, "u": {"within": [0, None]}}, dynamics=["x' = u"], constraints=["u <= x"],
                     functional={"seek": "maximum", "integrand": "x"}, endpoints=["x(0) = 1"])  # fmt: skip
    program = program_of(problem, uniform(1, 6, 6))
    assert straight_to(program, Start(np.full(program.layout.size, 0.1)), lambda iterate: False) is None
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize("share, outcome", [(3.5, Outcome.SOLVED), (3.8, Outcome.FAILED)])
def test_where_the_residual_is_least_but_not_zero_the_steps_end(share, outcome):
    """y'' + share exp(y) = 0 between zeros has solutions up to share = 3.5138 (Frank-Kamenetskii, 1955; Bratu, 1914;
    both from memory)."""
    problem = stated(
        unknowns={"y": {}},
        dynamics=[],
        functional={"seek": "stationary", "integrand": f"y'^2/2 - {share}*exp(y)"},
        endpoints=["y(0) = 0", "y(1) = 0"],
    )
    _, point = on(problem)
    assert point.outcome is outcome
    assert point.iterations < STEPS - 1
