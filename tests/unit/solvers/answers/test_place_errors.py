"""How well the places of switches and junctions are known, against closed forms."""

import math

import pytest

from solvers.answers.place_errors import known_digits
from solvers.solve import solve
from tests.unit.solvers.problems import stated


def ceiling(limit, dynamics):
    """Least energy from 0 to 0 in unit time with speed 1 and -1 under x <= l < 1/6: on it from 3 l to 1 - 3 l.

    Bryson, Ho (1975), Applied Optimal Control, section 3.11 (from memory); the acceleration comes to zero there.
    """
    first = {"x'' = a": "x'", "x' = v": "v"}[dynamics[0]]
    return stated(
        independent={"name": "t", "from": 0, "to": 1},
        unknowns={"x": {"within": [None, limit]}, "a": {}} | ({"v": {}} if first == "v" else {}),
        dynamics=dynamics,
        functional={"integrand": "a^2/2"},
        endpoints=["x(0) = 0", f"{first}(0) = 1", "x(1) = 0", f"{first}(1) = -1"],
    ), [3 * limit, 1 - 3 * limit]


def clipped(limit):
    """Least integral of (u - sin 3t)^2 with u <= c: u is sin 3t, or c where that is more."""
    return stated(
        unknowns={"x": {}, "u": {"within": [None, limit]}},
        dynamics=["x' = u"],
        functional={"integrand": "(u - sin(3*t))^2"},
        endpoints=["x(0) = 0"],
    ), [math.asin(limit) / 3, (math.pi - math.asin(limit)) / 3]


def to_rest(x, v):
    """Least time of x'' = u, |u| <= 1, to rest at 0: braking from v + sqrt(x + v^2/2) on (closed form)."""
    return stated(
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [0.1, 20]}},
        unknowns={"x": {}, "u": {"within": [-1, 1]}},
        dynamics=["x'' = u"],
        functional={"endpoint": "T"},
        endpoints=[f"x(0) = {x}", f"x'(0) = {v}", "x(T) = 0", "x'(T) = 0"],
    ), [v + math.sqrt(x + v**2 / 2)]


SMOOTH = {
    **{f"ceiling {limit:.3g}": ceiling(limit, ["x'' = a"]) for limit in (1 / 9, 0.05, 0.1, 0.08, 0.15, 0.14)},
    "ceiling, first order": ceiling(0.1, ["x' = v", "v' = a"]),
    **{f"clipped at {limit}": clipped(limit) for limit in (0.3, 0.5, 0.9)},
}
SHARP = {f"to rest from {x}, {v}": to_rest(x, v) for x, v in ((1, 0), (2, 0), (1, 0.5), (3, -1))}


@pytest.mark.parametrize("problem, places", [*SMOOTH.values(), *SHARP.values()], ids=[*SMOOTH, *SHARP])
def test_the_stated_error_of_a_place_bounds_the_true_one(problem, places):
    found = solve(problem)
    assert [switch.place for switch in found.switches] == pytest.approx(places, abs=1e-3)
    for switch, place in zip(found.switches, places, strict=True):
        assert abs(switch.place - place) <= switch.error <= 1e-3


@pytest.mark.parametrize("problem, places", SHARP.values(), ids=SHARP)
def test_where_a_control_jumps_nine_digits_are_known(problem, places):
    (note,) = (note for note in solve(problem).notes if note.startswith("Switches"))
    assert note.endswith(f"t = {places[0]:.9g}.")


def test_where_it_does_not_fewer_are_printed():
    problem, _ = ceiling(1 / 9, ["x'' = a"])
    found = solve(problem)
    assert all(1e-6 < switch.error < 1e-3 for switch in found.switches)
    assert any("t = 0.3333, 0.6667." in note for note in found.notes)


def test_ends_that_are_given_have_no_error():
    problem, _ = to_rest(1, 0)
    whole = solve(problem).stretches
    assert whole[0].start_error is None  # t = 0; T is free
    assert 0 < whole[0].end_error == whole[1].start_error < 1e-9
    assert 0 < whole[1].end_error < 1e-9


@pytest.mark.parametrize(
    "value, error, told",
    [
        (1 / 3, None, "0.333333333"),
        (1 / 3, 1e-15, "0.333333333"),
        (1 / 3, 2e-5, "0.3333"),
        (1 / 3, 5e-5, "0.3333"),
        (1 / 3, 6e-5, "0.333"),
        (1 / 3, 3.0, "0.3"),
        (1234.5678, 0.2, "1235"),
        (0.0, 1e-3, "0"),
    ],
)
def test_digits_that_are_not_known_are_not_printed(value, error, told):
    assert known_digits(value, error) == told
