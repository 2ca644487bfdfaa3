"""Kinks and jumps that are given along the range, against closed forms: `abs`, `sign`, `max`, `min` of x alone.

Each is solved as if there were no kink: on few meshes, to many digits, with an error that bounds the true one.
"""

import math
from itertools import pairwise

import pytest
from scipy.optimize import brentq

from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.service.assemble.stating import stated

LEAST = {Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM}


def over(start, end, integrand, *endpoints, **members):
    return {
        "independent": {"name": "x", "from": start, "to": end},
        "unknowns": {"y": {}},
        "dynamics": None,
        "functional": {"seek": "minimum", "integrand": integrand},
        "endpoints": list(endpoints),
    } | members


def through_layers(layers, rise):
    """The least optical length through layers (thickness, index) from y = 0 to y = rise.

    n sin(angle) = s is the same in all of them (Snell); y rises by w s/sqrt(n^2 - s^2), and n w sqrt(1 + y'^2) is
    n^2 w/sqrt(n^2 - s^2): Born, Wolf (1999), Principles of Optics, section 3.2 (from memory).
    """

    def risen(s):
        return sum(w * s / math.sqrt(n * n - s * s) for w, n in layers) - rise

    s = brentq(risen, 0, (1 - 1e-12) * min(n for _, n in layers), xtol=1e-16)
    return sum(n * n * w / math.sqrt(n * n - s * s) for w, n in layers)


def tracked():
    """min of (y - |x - 1|)^2 + y'^2 over 0 to 2, free ends.

    With z = |x - 1|, even about 1: y = z + a cosh z - sinh z and y'(0) = y'(1) = 0 at z = 0, 1, so that
    a = (cosh 1 - 1)/sinh 1.  The least is half the slope term: with e = y - z, e'' = e, the integral of e^2 + e'^2 is
    the jump of e e' and what is left is the integral of 2 e' + 1.
    """
    a = (math.cosh(1) - 1) / math.sinh(1)
    first, last = a, a * math.cosh(1) - math.sinh(1)
    return 2 * (last * (a * math.sinh(1) - math.cosh(1)) + first + 2 * (last - first) + 1)


TWO, THREE = [(0.7, 1.0), (1.3, 1.5)], [(1.0, 1.5), (1.0, 1.0), (1.0, 1.5)]
RAY = "y(0) = 0", "y(2) = 1"

CASES = {
    "two media": (over(0, 2, "(1.25 + 0.25*sign(x - 0.7))*sqrt(1 + y'^2)", *RAY), through_layers(TWO, 1)),
    "with the largest of two": (
        over(0, 2, "n*sqrt(1 + y'^2)", *RAY, where={"n": "1 + max(sign(x - 0.7), 0)/2"}), through_layers(TWO, 1)),
    "a slab": (
        over(0, 3, "(1.25 + sign(abs(x - 1.5) - 0.5)/4)*sqrt(1 + y'^2)", "y(0) = 0", "y(3) = 1"),
        through_layers(THREE, 1)),
    "a curve to follow": (over(0, 2, "(y - abs(x - 1))^2 + y'^2"), tracked()),
    # y' = sign(x - 0.3) + u must make up for 1 - 0.4: u = 0.6
    "a plant that turns round": (
        over(0, 1, "u^2", "y(0) = 0", "y(1) = 1", unknowns={"y": {}, "u": {}}, dynamics=["y' = sign(x - 0.3) + u"]),
        0.36),
    # y' is the integral of the load from x to 1, a saw of height 1/(2 n); the least is minus that of y'^2
    "a load with many jumps": (over(0, 1, "y'^2 - 2*y*sign(sin(20*pi*x))", "y(0) = 0"), -1 / 12 / 10**2),
    "over the tip of a tent": (
        over(-1, 2, "y'^2", "y(-1) = 0", "y(2) = 0", constraints=["y >= 1 - 2*abs(x)"]), 1 + 1 / 2),
    "into the tip of a valley": (
        over(-1, 1, "y'^2", "y(-1) = 1.2", "y(1) = 1.2", constraints=["y <= abs(x) + 0.5"]), 2 * 0.7**2),
    "over a roof": (
        over(-2, 2, "y'^2", "y(-2) = 0", "y(2) = 0", constraints=["y >= max(0, 1 - 2*abs(x))"]), 2 * 1 / 2),
    "over a step": (
        over(0, 2, "y'^2", "y(0) = 0", "y(2) = 1", constraints=["y >= 0.9*sign(x - 1) - 0.3"]), 0.6**2 + 0.4**2),
}  # fmt: skip


@pytest.mark.parametrize("members, value", CASES.values(), ids=CASES)
def test_kinks_along_the_range_cost_nothing(members, value):
    found = solve(stated(**members))
    assert found.verdict in LEAST, [check for check in found.checks if check.status is Status.FAILED]
    assert abs(found.value - value) <= found.value_error
    assert found.value_error <= 1e-7 * max(abs(value), 0.1)
    assert len(found.meshes) <= 3
    assert not any("rounded" in note for note in found.notes)
    assert any("given along the range" in note for note in found.notes)


def on_arcs(members, *junctions):
    """The same in arcs that meet at some places between 0 and 2."""
    ends = [0, *junctions, 2]
    arcs = [{"name": f"arc{k}", "from": a, "to": b} for k, (a, b) in enumerate(pairwise(ends))]
    return members | {"arcs": arcs}


@pytest.mark.parametrize("case", ["two media", "with the largest of two", "a curve to follow", "over a step"])
@pytest.mark.parametrize("junctions", [(1.5,), (0.7,), (0.4, 1.2)], ids=str)
def test_kinks_on_arcs_cost_nothing_either(case, junctions):
    members, value = CASES[case]
    found = solve(stated(**on_arcs(members, *junctions)))
    assert found.verdict in LEAST, [check for check in found.checks if check.status is Status.FAILED]
    assert abs(found.value - value) <= found.value_error <= 1e-7 * max(abs(value), 0.1)
    assert [arc.name for arc in found.arcs] == [f"arc{k}" for k in range(len(junctions) + 1)]


def test_what_jumps_at_a_junction_jumps_there_behind_a_kink_too():
    """y' = u + 1 + sign(x - 0.3) on each of two arcs, y drops by 1 between them: u makes up for what is missing."""
    members = over(
        0, 2, "u^2", "y(0) = 0", "y(1+) = y(1-) - 1", "y(2) = 3", unknowns={"y": {}, "u": {}},
        dynamics=["y' = u + 1 + sign(x - 0.3)"],
    )  # fmt: skip
    found = solve(stated(**on_arcs(members, 1)))
    u = (3 + 1 - 2 * 1.7) / 2
    assert found.verdict in LEAST
    assert abs(found.value - 2 * u**2) <= found.value_error <= 1e-6


def to_a_free_end(integrand, within, *endpoints, **members):
    independent, parameters = {"name": "x", "from": 0, "to": "T"}, {"T": {"within": within} if within else {}}
    return over(0, 1, integrand, *endpoints) | {"independent": independent, "parameters": parameters} | members


RAMP = "y(0) = 0", "y(T) = 3"
QUICKER = {
    "unknowns": {"y": {}, "u": {"within": [-1, 1]}},
    "dynamics": ["y' = u*(2 + sign(x - 1))"],
    "functional": {"seek": "minimum", "endpoint": "T"},
}
FREE = {
    # y' is 3/T; 9/T + 3 T/2 - 1 is least at T = sqrt(6), behind the step of the rate at 1
    "behind a kink": (to_a_free_end("y'^2 + 1 + sign(x - 1)/2", [0.1, 10], *RAMP), 6 * math.sqrt(1.5) - 1),
    # 9/T + T/2 is least at T = sqrt(18), before the step at 5, but far beyond the first guess
    "before one": (to_a_free_end("y'^2 + 1 + sign(x - 5)/2", [0.1, 10], *RAMP), 6 * math.sqrt(0.5)),
    # the slope by T jumps from 1/2 - 9/T^2 < 0 to 3/2 - 9/T^2 > 0 at 3.2
    "on one": (to_a_free_end("y'^2 + 1 + sign(x - 3.2)/2", [0.1, 10], *RAMP), 9 / 3.2 + 1.6),
    # 1 in the first unit of time, then 3 a unit
    "where the first guess leads nowhere": (to_a_free_end(None, [0.1, 10], "y(0) = 0", "y(T) = 4", **QUICKER), 2.0),
    "without limits": (to_a_free_end(None, None, "y(0) = 0", "y(T) = 4", **QUICKER), 2.0),
    # with a = s - 1 for the switch s: 1/2 + a + a^2 to it, then (1 + 2 a)^2/4, and T = 3/2 + 2 a
    "with a switch": (
        to_a_free_end(None, [0.1, 10], "y(0) = 0", "v(0) = 0", "y(T) = 3", "v(T) = 0", **QUICKER | {
            "unknowns": {"y": {}, "v": {}, "u": {"within": [-1, 1]}},
            "dynamics": ["y' = v", "v' = u*(3 + sign(x - 1))/2"]}), 0.5 + math.sqrt(5.5)),
    # to the line x + y = 3 through the thin medium only: straight to (1, 2), where that ends
    "light to a line": (
        to_a_free_end("(1.25 + sign(x - 1)/4)*sqrt(1 + y'^2)", [0.1, 4], "y(0) = 0", "y(T) = 3 - T"), math.sqrt(5)),
}  # fmt: skip


@pytest.mark.parametrize("members, value", FREE.values(), ids=FREE)
def test_a_free_end_finds_its_side_of_every_kink(members, value):
    found = solve(stated(**members))
    assert found.verdict in LEAST, [check for check in found.checks if check.status is Status.FAILED]
    assert abs(found.value - value) <= found.value_error <= 1e-6 * abs(value)
    assert not any("rounded" in note for note in found.notes)
    assert all(price.pointer and "kink" not in price.label for price in found.prices)


def test_what_is_proved_before_a_kink_is_not_claimed_of_what_lies_behind():
    """6 per unit up to 1, and -4 from there: the shortest range is a minimum, but not the least of all."""
    found = solve(stated(**to_a_free_end("y'^2 + 1 - 5*sign(x - 1)", [0.1, 10], "y(0) = 0")))
    assert (found.value, found.verdict) in [(pytest.approx(0.6), Verdict.LOCAL_MINIMUM),
                                            (pytest.approx(-30), Verdict.LOCAL_MINIMUM)]  # fmt: skip


def test_kinks_of_unknowns_with_a_free_end_are_none_of_the_range():
    """y'^2 + |y'| with y from 0 to 1 costs 1 + 1/T: T is as long as it may be."""
    found = solve(stated(**to_a_free_end("y'^2 + abs(y')", [0.5, 4], "y(0) = 0", "y(T) = 1")))
    assert found.verdict in LEAST
    assert abs(found.value - (1 + 1 / 4)) <= found.value_error


def test_the_price_of_an_obstacle_holds_its_push_at_the_tip():
    """Raised by r the tip is 1 + r: the least is (1 + r)^2 (1 + 1/2), with slope 3."""
    found = solve(stated(**CASES["over the tip of a tent"][0]))
    (price,) = (price for price in found.prices if price.pointer == "/constraints/0")
    assert price.price == pytest.approx(3, rel=1e-6)


def test_the_slope_by_a_constant_that_a_kink_moves_with():
    """Where the media meet is known no better than d: the slope of the closed form by differences."""
    members = over(0, 2, "(1.25 + 0.25*sign(x - d))*sqrt(1 + y'^2)", *RAY, constants={"d": 0.7})
    found = solve(stated(**members))
    (slope,) = found.slopes
    step = 1e-4
    ahead, behind = (through_layers([(0.7 + h, 1.0), (1.3 - h, 1.5)], 1) for h in (step, -step))
    assert slope.slope == pytest.approx((ahead - behind) / (2 * step), rel=1e-6)


def test_the_slope_where_a_kink_moves_along_a_curve_of_its_own():
    """y'^2 - 2 y sign(x^2 - c) over 0 to 1, y(0) = y'(1) = 0: y' = 1 - x behind sqrt(c), 1 - 2 sqrt(c) + x before it.

    The integral of y'^2 is ((1 - r)^3 - (1 - 2 r)^3)/3 + (1 - r)^3/3 with r = sqrt(c).
    """
    members = over(0, 1, "y'^2 - 2*y*sign(x^2 - c)", "y(0) = 0", constants={"c": 0.49})
    found = solve(stated(**members))
    (slope,) = found.slopes
    r = 0.7
    assert abs(found.value + (2 * (1 - r) ** 3 - (1 - 2 * r) ** 3) / 3) <= found.value_error
    assert slope.slope == pytest.approx(-(-2 * (1 - r) ** 2 + 2 * (1 - 2 * r) ** 2) / (2 * r), rel=1e-6)


def test_a_kink_that_moves_with_a_swept_constant():
    """Every point of the sweep tells the truth about its value, wherever the media meet."""
    members = over(0, 2, "y'^2*(1.5 + 0.5*sign(x - d))", *RAY, constants={"d": 1},
                   sweep={"d": {"values": [0.5, 1, 1.5]}})  # fmt: skip
    found = solve(stated(**members))
    for point in found.sweep:
        (d,) = point.at
        value = 1 / (d / 1 + (2 - d) / 2)  # y' is 1/(the weight) of a constant
        assert abs(point.value - value) <= point.value_error


@pytest.mark.parametrize("unit, size", [("nm", 1e-9), ("um", 1e-6), ("km", 1e3)])
def test_kinks_along_the_range_in_any_unit(unit, size):
    lengths = {"independent": {"name": "x", "unit": unit, "from": 0, "to": 2}, "unknowns": {"y": {"unit": unit}}}
    place = {"constants": {"d": f"0.7 {unit}"}, "constraints": ["y >= max(-d, abs(x - d) - 3*d)"]}
    members = over(0, 2, "(1.25 + 0.25*sign(x - d))*sqrt(1 + y'^2)", *RAY) | lengths | place
    found = solve(stated(**members))
    assert found.verdict in LEAST
    assert abs(found.value - size * through_layers(TWO, 1)) <= found.value_error <= 1e-7 * size
