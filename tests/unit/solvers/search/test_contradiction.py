"""Proofs that conditions contradict each other, and that what can be met is never said to be contradictory."""

import pytest

from solvers.deadline import in_seconds
from solvers.search.contradiction import beyond_intervals, contradictory
from solvers.search.effort import Minimiser
from solvers.search.record import Pursuit
from tests.unit.solvers.problems import LEAST_TIME, compiled, stated

FREE_TIME = {"independent": {"name": "t", "from": 0, "to": "T"}, "unknowns": {"x": {}, "u": {"within": [-1, 1]}}}


def free_time(longest, **members):
    return FREE_TIME | {"parameters": {"T": {"within": [0.5, longest]}}} | members


def in_time(longest):
    """From rest to rest over 1 with |u| <= 1 takes 2; that x' stays below the time is all that intervals tell."""
    return free_time(longest, dynamics=["x'' = u"], functional={"endpoint": "T"},
                     endpoints=["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"])  # fmt: skip


BEYOND = {
    "too far for the rate": (free_time(1, endpoints=["x(0) = 0", "x(T) = 3"]), True),
    "just near enough": (free_time(3, endpoints=["x(0) = 0", "x(T) = 3"]), False),
    "too far backwards": (free_time(1, endpoints=["x(0) = 0", "x(T) = -3"]), True),
    "beyond the reach of a rate that grows": (in_time(0.9), True),
    "in reach by intervals": (in_time(1.1), False),
    "an unlimited time": (LEAST_TIME, False),
    "a value that no power of e has": ({"endpoints": ["x(0) = 0", "exp(x(1)) = -1"]}, True),
    "a value that it has": ({"endpoints": ["x(0) = 0", "exp(x(1)) = 1"]}, False),
    "a range that excludes an end": (
        {"unknowns": {"x": {"within": [0, 1]}, "u": {}}, "endpoints": ["x(0) = 0", "x(1)^2 + x(0) = 3"]}, True),
    "a rate with a sign": ({"dynamics": ["x' = u^2"], "endpoints": ["x(0) = 1", "x(1) = 0"]}, True),
    "and without": ({"dynamics": ["x' = u^3"], "endpoints": ["x(0) = 1", "x(1) = 0"]}, False),
    "a limit on the rate alone": ({"constraints": ["u <= 0.5"], "endpoints": ["x(0) = 0", "x(1) = 1"]}, True),
}  # fmt: skip


@pytest.mark.parametrize("members, proved", BEYOND.values(), ids=BEYOND)
def test_intervals_prove_what_lies_beyond_them_and_no_more(members, proved):
    assert beyond_intervals(compiled(stated(**members))) == proved


HALVES = {
    "a square that is negative": ({"endpoints": ["x(0) = 0", "x(1)^2 = -1"]}, True),
    "one that is not": ({"endpoints": ["x(0) = 0", "x(1)^2 = 1"]}, False),
    "a curve too short": (
        {"endpoints": ["x(0) = 0", "x(1) = 3"], "constraints": ["integral(sqrt(1 + u^2)) = 2"]}, True),
    "and too long": (
        {"endpoints": ["x(0) = 0", "x(1) = 1"], "constraints": ["integral(sqrt(1 + u^2)) = 2"]}, False),
    "beside dynamics that are not linear": (
        {"unknowns": {"x": {}, "y": {}, "u": {}}, "dynamics": ["x' = u", "y' = x*y"],
         "endpoints": ["x(0) = 0", "x(1) = 3", "y(0) = 1"], "constraints": ["integral(u^2) <= 1"]}, True),
}  # fmt: skip


@pytest.mark.parametrize("members, proved", HALVES.values(), ids=HALVES)
def test_convex_halves_prove_what_they_contradict(members, proved):
    problem = stated(**members)
    pursuit = Pursuit(problem, compiled(problem))
    assert contradictory(pursuit, Minimiser(pursuit, None, in_seconds(60))) == proved
