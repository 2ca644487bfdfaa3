"""Arcs cut at their switches: each switch is found for itself, at whatever share of its arc it lies."""

import numpy as np
import pytest

from solvers.forms.cut import cut_at_switches
from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.service.assemble import stating
from tests.unit.solvers.arcs import wall


def legs(first, second, **members):
    """In least time to a stop at 1 and on to one at 5, the force between other limits on each leg."""
    return stating.stated(**{
        "independent": {"name": "t", "from": 0, "to": "T"},
        "parameters": {"t1": {"within": [0.1, 20]}, "T": {"within": [0.1, 40]}},
        "unknowns": {"x": {}, "u": {}},
        "dynamics": ["x'' = u"],
        "functional": {"seek": "minimum", "endpoint": "T"},
        "endpoints": ["x(0) = 0", "x'(0) = 0", "x(t1) = 1", "x'(t1) = 0", "x(T) = 5", "x'(T) = 0"],
        "arcs": [{"name": "first leg", "from": 0, "to": "t1", "constraints": [first]},
                 {"name": "second leg", "from": "t1", "to": "T", "constraints": [second]}],
    } | members)  # fmt: skip


def least_time(way, brake, push):
    """Time of a leg and when it switches: Pontryagin et al. (1962), section 5 (from memory)."""
    time = np.sqrt(2 * way * (push + brake) / (push * brake))
    return time, time * brake / (push + brake)


@pytest.mark.parametrize(
    "limits",
    [((1, 1), (1, 1)), ((1, 1), (2, 2)), ((1, 1.05), (2, 2)), ((1, 3), (0.5, 1.5))],
    ids=("the same", "the same share", "nearly the same share", "the same share, not the middle"),
)
def test_switches_at_the_same_share_of_two_arcs_are_found(limits):
    found = solve(legs(*(f"-{brake} <= u <= {push}" for brake, push in limits)))
    assert found.verdict is Verdict.LOCAL_MINIMUM
    (first, turn), (second, other) = (least_time(way, *limit) for way, limit in zip((1, 4), limits, strict=True))
    assert found.value == pytest.approx(first + second, rel=1e-8)
    assert [switch.place for switch in found.switches] == pytest.approx([turn, first + other], rel=1e-7)
    assert found.parameters == pytest.approx({"t1": first, "T": first + second}, rel=1e-7)
    assert all(check.status is not Status.FAILED for check in found.checks)
    assert any(note.startswith("Switches were found") for note in found.notes)
    assert not any("switch 1" in note for note in found.notes)
    one, two = (arc.curve for arc in found.arcs)
    for curve, start, (brake, push), at in ((one, 0, limits[0], turn), (two, first, limits[1], first + other)):
        t = np.array([start + 1e-6, at - 1e-6, at + 1e-6])
        assert curve.evaluate("u", t) == pytest.approx([push, push, -brake], abs=1e-7)


def test_what_jumps_at_the_junction_still_does():
    members = {"endpoints": ["x(0) = 0", "x'(0) = 0", "x(t1-) = 1", "x(t1+) = x(t1-) + 2", "x'(t1) = 0", "x(T) = 7",
                             "x'(T) = 0"]}  # fmt: skip
    found = solve(legs("-1 <= u <= 1", "-1 <= u <= 1", **members))
    assert found.value == pytest.approx(6, rel=1e-8)
    assert found.arcs[1].curve.evaluate("x", found.arcs[1].curve.breaks[:1])[0] == pytest.approx(3)


def test_slopes_are_those_of_the_problem():
    found = solve(legs("-k <= u <= k", "-k <= u <= k", constants={"k": 1}))
    (slope,) = found.slopes
    assert slope.slope == pytest.approx(-3, rel=1e-6)  # 6/sqrt(k)


def test_without_a_switch_nothing_is_cut():
    problem = wall(constraints=["-9 <= u <= 9"])
    assert cut_at_switches(problem, solve(problem)) is None
