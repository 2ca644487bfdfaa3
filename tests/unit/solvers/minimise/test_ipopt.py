"""The minimiser: outcomes, what a watcher hears and may ask for, warm starts."""

import time
from dataclasses import replace

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.minimise.ipopt import BARRIER, ROOM, Outcome, Start, barrier, minimise
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import program_of, regulator, shape, start_of, stated

MESH = uniform(1, 4, 4)


def minimum_of(problem, **settings):
    program = program_of(problem, MESH)
    return program, minimise(program, Start(start_of(problem, MESH) / program.scale), **settings)


def test_first_order_conditions_hold_at_the_minimum():
    """The Lagrangian f + multipliers.g + bound_multipliers.z is stationary; multipliers have the signs of limits."""
    problem = stated(unknowns={"x": {}, "u": {"within": [0, 2]}}, constraints=["x^2 + u <= 5"],
                     functional={"integrand": "(u - 3*t)^2"}, endpoints=["x(0) = 0"])  # fmt: skip
    program, minimum = minimum_of(problem)
    assert minimum.outcome is Outcome.SOLVED
    numbers = program.numbers
    pushed = numbers.jacobian_pattern.times_from_left(minimum.multipliers, numbers.jacobian(minimum.z))
    residual = numbers.gradient(minimum.z) + pushed + minimum.bound_multipliers
    free = program.lower < program.upper  # the multipliers of fixed variables are not computed
    np.testing.assert_allclose(residual[free], 0, atol=1e-7)
    for value, lower, upper, push in (
        (minimum.z, program.lower, program.upper, minimum.bound_multipliers),
        (numbers.constraints(minimum.z), program.row_lower, program.row_upper, minimum.multipliers),
    ):
        off_upper, off_lower = upper - value > 1e-4, value - lower > 1e-4
        assert np.all(push[off_upper & (lower < upper)] <= 1e-6)
        assert np.all(push[off_lower & (lower < upper)] >= -1e-6)


def test_the_watcher_hears_of_every_iteration():
    heard = []
    _, minimum = minimum_of(regulator(), watch=lambda iterate: heard.append(iterate) or False)
    assert [iterate.number for iterate in heard] == list(range(minimum.iterations + 1))
    assert heard[-1].value == pytest.approx(minimum.value, rel=1e-9)
    assert heard[-1].infeasibility < 1e-9
    assert heard[0].infeasibility > 1e-3


def test_the_watcher_stops_at_the_next_iteration():
    heard = []

    def stop_at_two(iterate):
        heard.append(iterate.number)
        return iterate.number == 2

    _, minimum = minimum_of(shape(functional={"integrand": "exp(y')*(1 + y^2) + exp(-3*y')"}), watch=stop_at_two)
    assert minimum.outcome is Outcome.STOPPED
    assert heard == [0, 1, 2]


def test_an_error_in_the_watcher_is_no_stop():
    def broken(iterate):
        raise ZeroDivisionError("in the watcher")

    with pytest.raises(ZeroDivisionError, match="in the watcher"):
        minimum_of(regulator(), watch=broken)


def test_the_time_limit_is_an_outcome():
    def slow(iterate):
        time.sleep(0.05)
        return False

    problem = shape(functional={"integrand": "(y'^2 - 1)^2 + sin(9*y)^2"}, endpoints=["y(0) = 0", "y(3) = 1"])
    _, minimum = minimum_of(problem, deadline=in_seconds(0.05), watch=slow)
    assert minimum.outcome is Outcome.TIME


@pytest.mark.parametrize(
    "members, outcome",
    [
        ({"constraints": ["u^2 + x^2 <= -1"]}, Outcome.INFEASIBLE),
        ({"functional": {"integrand": "log(x - 9)"}, "guess": {"x": "0*t"}}, Outcome.UNDEFINED),
        ({"functional": {"integrand": "u^3 + u"}, "unknowns": {"x": {}, "u": {}}}, Outcome.UNBOUNDED),
    ],
    ids=("infeasible", "undefined", "unbounded"),
)
def test_other_outcomes(members, outcome):
    _, minimum = minimum_of(stated(**{"endpoints": ["x(0) = 0"]} | members))
    assert minimum.outcome is outcome


def test_the_iteration_limit_is_an_outcome():
    _, minimum = minimum_of(shape(functional={"integrand": "exp(y')*(1 + y^2) + exp(-3*y')"}),
                            options={"ipopt.max_iter": 1})  # fmt: skip
    assert minimum.outcome is Outcome.ITERATIONS


def test_a_warm_start_keeps_what_was_known():
    program, cold = minimum_of(regulator(constraints=["u >= -1/2"]))
    warm = minimise(program, Start(cold.z, cold.bound_multipliers, cold.multipliers))
    assert warm.outcome is Outcome.SOLVED
    assert warm.iterations < cold.iterations
    np.testing.assert_allclose(warm.z, cold.z, atol=1e-6)


def test_a_start_beyond_the_bounds_is_drawn_inside():
    program = program_of(stated(unknowns={"x": {}, "u": {"within": [0, 2]}}), MESH)
    minimum = minimise(program, Start(np.full(program.layout.size, 50.0)))
    assert minimum.outcome is Outcome.SOLVED
    assert np.all(minimum.z <= program.upper)
    assert np.all(minimum.z >= program.lower)


@pytest.mark.parametrize(
    "push, parameter",
    [
        (0.0, BARRIER[1]),  # nothing pushes: far from all limits
        (0.1, ROOM * 0.1),
        (1e-7, BARRIER[0]),
        (1e6, BARRIER[1]),
    ],
)
def test_a_warm_start_begins_as_near_to_limits_as_they_push(push, parameter):
    """Where a limit at distance d has the multiplier m, the barrier parameter is m d."""
    program = program_of(stated(constraints=["x^2 + u^2 <= 4"]), MESH)
    unequal = program.row_lower < program.row_upper
    start = Start(np.zeros(len(program.lower)), np.zeros(len(program.lower)), np.where(unequal, push, 1.0))
    assert barrier(program, start) == pytest.approx(parameter)


def test_limits_that_contradict_each_other_leave_nothing_to_look_for():
    program = program_of(regulator(), MESH)
    crossed = replace(program, lower=program.lower + 1, upper=np.minimum(program.upper, program.lower))
    assert minimise(crossed, Start(np.zeros(len(program.lower)))).outcome is Outcome.INFEASIBLE
