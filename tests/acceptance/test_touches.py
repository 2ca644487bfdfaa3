"""A control that switches just before a state touches its limit, or just after: two places, not one.

The hanging load of the demo (service/samples/crucible.json) over 3.5 m in least time.  At its greatest swing of 12
degrees even full acceleration cannot hold it: 9.80665 sin(12 deg) > 2 cos(12 deg), so that it only touches its limit,
and under full acceleration it leaves it slowly.  With the switch and the touch at one place the least time is
3.6429418 s, and the slope of the swing has a price there.
"""

import json
from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from service import samples
from service.assemble import assemble
from service.spec import read
from solvers.solution import Course, Verdict
from solvers.solve import solve

AT_ONE_PLACE = 3.6429418
ACCELERATION, SPEED, SWING = 2.0, 1.5, np.radians(12)
GRAVITY, ROPE = 9.80665, 0.8


def solved(members, **constants):
    document = samples.load("crucible") | members
    document["constants"] |= constants
    return solve(assemble(read(json.dumps(document).encode())))


FIRST_ORDER = {
    "unknowns": {"x": {"unit": "m"}, "v": {"unit": "m/s", "within": [-SPEED, SPEED]},
                 "q": {"unit": "deg", "within": [-12, 12]}, "w": {"unit": "1/s"},
                 "a": {"unit": "m/s^2", "within": [-ACCELERATION, ACCELERATION]}},
    "dynamics": ["x' = v", "v' = a", "q' = w", "w' = -(g*sin(q) + a*cos(q))/l"],
    "endpoints": [f"{name}({at}) = {value}" for at, far in (("0", "0"), ("T", "D"))
                  for name, value in (("x", far), ("v", "0"), ("q", "0"), ("w", "0"))],
    "constraints": [],
}  # fmt: skip
"""The same with names of their own for the slopes."""


@pytest.fixture(scope="module", params=[{}, FIRST_ORDER], ids=["second order", "first order"])
def found(request):
    return solved(request.param, D="3.5 m")


def carried_out(found, gravity):
    """The state at the end and the largest swing by a general integrator, from what the stretches say alone.

    Inside its limits the acceleration is zero, at the limit of the speed, or -g tan q, which keeps q where it is.
    """

    def rates(_, state, a):
        _, v, q, w = state
        return [v, a, w, -(gravity * np.sin(q) + a * np.cos(q)) / ROPE]

    side = {Course.UPPER: 1, Course.LOWER: -1}
    rests = [stretch for stretch in found.stretches if stretch.of == "q" and stretch.end > stretch.start]

    def level(at):
        (course,) = (stretch.course for stretch in stretches if stretch.start < at < stretch.end)
        if course in side:
            return ACCELERATION * side[course]
        return next((-gravity * np.tan(SWING * side[s.course]) for s in rests if s.start < at < s.end), 0.0)

    state, largest = np.zeros(4), 0.0
    stretches = [stretch for stretch in found.stretches if stretch.of == "a"]
    assert all(before.end == after.start for before, after in pairwise(stretches))
    for start, end in pairwise(sorted({place for s in [*stretches, *rests] for place in (s.start, s.end)})):
        run = solve_ivp(rates, (start, end), state, "DOP853", args=(level((start + end) / 2),),
                        rtol=1e-12, atol=1e-13, dense_output=True)  # fmt: skip
        state = run.y[:, -1]
        largest = max(largest, np.abs(run.sol(np.linspace(start, end, 2001))[2]).max())
    return state, largest


def test_the_least_time_is_shorter_than_with_both_at_one_place(found):
    assert found.verdict is Verdict.LOCAL_MINIMUM
    assert found.value < AT_ONE_PLACE - 1e-4
    assert found.value_error < 1e-6


def test_the_load_comes_to_rest_when_the_switches_are_carried_out(found):
    state, largest = carried_out(found, GRAVITY)
    np.testing.assert_allclose(state, [3.5, 0, 0, 0], atol=1e-6)
    assert largest <= SWING * (1 + 1e-6)


@pytest.mark.parametrize("share", [0.75, 0.8, 1.1, 1.15])
def test_with_other_weights_too_the_load_comes_to_rest(share):
    """Where g is small the load rests on its limit under less than full acceleration, where it is large it only touches
    it: from 2/tan(12 deg) = 9.41 on."""
    found = solved({}, g=f"{share * GRAVITY} m/s^2")
    assert found.verdict is Verdict.LOCAL_MINIMUM
    state, largest = carried_out(found, share * GRAVITY)
    np.testing.assert_allclose(state, [3, 0, 0, 0], atol=1e-6)
    assert largest <= SWING * (1 + 1e-6)


def test_nothing_holds_the_slope_at_a_touch(found):
    (check,) = [check for check in found.checks if check.name == "free ends"]
    assert check.figure < 1e-6
