"""Small documents that are meant to mislead: whatever is claimed of them has to be true.

Each has what is true of it: its value (None where there is none, or where it is not elementary) and the verdicts that
say so.  Weaker words are no lie; they are listed where nothing better is owed.
"""

import cmath
import json
import math
from math import pi

import numpy as np
import pytest
from scipy.optimize import brentq

from service.assemble import assemble
from service.spec import read
from solvers.solution import Verdict
from solvers.solve import solve

GLOBAL = {Verdict.GLOBAL_MINIMUM}
LEAST = GLOBAL | {Verdict.LOCAL_MINIMUM}
NONE = {Verdict.NO_OPTIMUM, Verdict.NOT_A_MINIMUM}
OPEN = {Verdict.STATIONARY, Verdict.NOT_VERIFIED, Verdict.BEST_FOUND}


def over(end, start=0, **members):
    return {"independent": {"name": "x", "from": start, "to": end}} | members


def between(end, first=0, last=0, start=0):
    return over(end, start, endpoints=[f"y({start!r}) = {first!r}", f"y({end!r}) = {last!r}"])


def swings(share):
    """y'^2 - y^2 between zeros has its first conjugate point at pi."""
    return between(share * pi) | {"integrand": "y'^2 - y^2"}


FREE_TIME = {
    "independent": {"name": "x", "from": 0, "to": "T"},
    "parameters": {"T": {"within": [0.1, None]}},
    "endpoints": ["y(0) = 0", "y(T) = 1"],
}
TWO = {"unknowns": {"y": {}, "z": {}}, "endpoints": ["y(0) = 0", "y(1) = 1", "z(0) = 0", "z(1) = 1"]} | {
    "independent": {"name": "x", "from": 0, "to": 1}
}


def half_turns(x, v):
    """Least time of x'' = -x + u, |u| <= 1, to rest at the origin, by the half turns of Bushaw (1958; from memory).

    In z = x + i v a constant u turns clockwise about u.  Back from the origin: a last piece b <= pi about one limit,
    k half turns about each in turn, and a first piece a <= pi about the next, with |z + s| = |2 k + 2 - exp(i b)|.
    """
    times = []
    for k in range(9):
        for s in (1, -1):
            cosine = ((2 * k + 2) ** 2 + 1 - abs(complex(x, v) + s) ** 2) / (4 * k + 4)
            if abs(cosine) <= 1:
                b = math.acos(cosine)
                a = cmath.phase((complex(x, v) + s) / (s * (2 * k + 2 - cmath.exp(1j * b)))) % (2 * pi)
                times += [a + k * pi + b] if a <= pi else []
    return min(times)


def to_rest(dynamics, x, v, within, value, right=LEAST):
    return {
        "independent": {"name": "x", "from": 0, "to": "T"},
        "parameters": {"T": {"within": within}},
        "unknowns": {"y": {}, "v": {}, "u": {"within": [-1, 1]}},
        "dynamics": ["y' = v", f"v' = {dynamics}"],
        "endpoint": "T",
        "endpoints": [f"y(0) = {x}", f"v(0) = {v}", "y(T) = 0", "v(T) = 0"],
    }, value, right  # fmt: skip


def oscillator(x, v, within, right=LEAST):
    """Brought to rest from anywhere, however long it takes."""
    return to_rest("-y + u", x, v, within, half_turns(x, v), right)


def loaded_power(power, load):
    """min of the integral of |y'|^p - k y between zeros at 0 and 1, and its least value.

    Euler's equation p |y'|^(p-1) sign(y') = k (1/2 - x) gives y'; the value is -(p - 1) times the integral of
    (k |x - 1/2|/p)^(p/(p-1)): -1/216 for p = 3/2, k = 1.
    """
    conjugate = power / (power - 1)
    value = -(power - 1) * (load / (2 * power)) ** conjugate / (conjugate + 1)
    return between(1) | {"integrand": f"abs(y')^{power} - {load}*y"}, value, GLOBAL


def singular_end(a):
    """min of the integral of x^a y'^2: x^a y' is constant, y = x^(1-a), the value 1 - a."""
    return between(1, 0, 1) | {"integrand": f"x^{a!r}*y'^2"}, 1 - a, GLOBAL if a < 0.85 else GLOBAL | OPEN


CASES = {
    # bang, coast, bang: with switches after a and before T - a, a (T - a) = 1; least of 2 a + T/2 is sqrt(5)
    "time at the end and fuel on the way": (
        {"independent": {"name": "x", "from": 0, "to": "T"}, "parameters": {"T": {"within": [0.1, 20]}},
         "unknowns": {"y": {}, "u": {"within": [-1, 1]}}, "dynamics": ["y'' = u"],
         "integrand": "abs(u)", "endpoint": "T/2",
         "endpoints": ["y(0) = 0", "y'(0) = 0", "y(T) = 1", "y'(T) = 0"]}, math.sqrt(5), LEAST),
    "an end that is hardly singular": singular_end(0.3),
    "a singular end": singular_end(0.5),
    "a more singular one": singular_end(0.6),
    "one that is two thirds": singular_end(2 / 3),
    "a singular end that goes on and on": singular_end(0.8),
    "one that nearly has no value": singular_end(0.9),
    # (1 - x^2)^(1/2) y' is constant, y = (2/pi) asin(x)
    "two singular ends": (between(1, -1, 1, -1) | {"integrand": "sqrt(1 - x^2)*y'^2"}, 4 / pi, GLOBAL),
    "a singular end where numbers are coarse": (
        between(4, 0, 1, 3) | {"integrand": "(x - 3)^(2/3)*y'^2"}, 1 / 3, GLOBAL | OPEN),
    # y' = c |x - 0.4|^-a with c = (1 - a)/(0.4^(1-a) + 0.6^(1-a)); the value is c
    "a singular place within": (
        between(1, 0, 1) | {"integrand": "abs(x - 0.4)^0.6*y'^2"}, 0.4 / (0.4**0.4 + 0.6**0.4), GLOBAL),
    # y = log(x/e)/log(1/e) beyond e costs 1/log(1/e): 0 is approached and not attained
    "one that has none": (between(1, 0, 1) | {"integrand": "x*y'^2"}, 0.0, NONE | OPEN),
    "a power between one and two": loaded_power(1.5, 1),
    "under a larger load": loaded_power(1.5, 4),
    "a power near one": loaded_power(1.3, 1),
    "many half turns": oscillator(6, 1, [0.1, 20]),
    "within a wide range of times": oscillator(6, 1, [0.1, 40]),
    "some half turns": oscillator(4, 1, [0.1, 40]),
    "a first guess of little": oscillator(2, 1, [0.01, 40]),
    "another": oscillator(2, 1, [0.1, 40]),
    "five half turns": oscillator(10, 1, [0.1, 40]),
    # whole half turns reach no farther: abnormal, the least time grows like the root of the distance beyond
    "just two half turns": oscillator(4, 0, [0.1, 40]),
    "just three": oscillator(6, 0, [0.1, 40]),
    "just four": oscillator(8, 0, [0.1, 40], LEAST | OPEN),
    "a limit cycle left": to_rest("(1 - y^2)*v - y + u", 1, 1, [0.01, 40], None),
    "just before the conjugate point": (swings(1 - 1e-4), 0.0, LEAST),
    "just behind it": (swings(1 + 1e-4), None, NONE),
    "too near to tell": (swings(1 + 1e-9), None, NONE | OPEN),
    "a weight that vanishes": (between(1, -1, 1, -1) | {"integrand": "x^2*y'^2"}, None, NONE | OPEN),
    "one that nearly does": (
        between(1, -1, 1, -1) | {"integrand": "(x^2 + 1e-6)*y'^2"}, 2e-3 / math.atan(1e3), LEAST),
    "one that is negative for a moment": (
        between(1, 0, 1) | {"integrand": "(1 - 1.2*exp(-((x - 0.537)/0.004)^2))*y'^2"}, None, NONE | OPEN),
    "a hump between the points": (
        between(1) | {"integrand": "y'^2 - 2000*y*exp(-((x - 0.61803)/0.0005)^2)"},
        -pi / 4 * (0.61803 * 0.38197 - 0.0005 / math.sqrt(2 * pi)), GLOBAL | OPEN),
    "a limit with a hump": (
        between(1) | {"integrand": "y'^2", "constraints": ["y >= 0.5*exp(-((x - 0.61803)/0.002)^2) - 0.1"]},
        None, LEAST | OPEN),
    "a saddle that looks like a bowl": (TWO | {"integrand": "y'^2 + z'^2 + 3*y'*z'"}, None, NONE),
    "and one that is a bowl": (TWO | {"integrand": "y'^2 + z'^2 + 1.999999*y'*z'"}, 3.999999, GLOBAL),
    "slopes that want to be infinite": (between(1) | {"integrand": "y'^2 + 10*y'^3"}, None, NONE | OPEN),
    "two wells": (between(1) | {"integrand": "y'^2 + 40*(y^2 - 1)^2"}, None, NONE | OPEN | {Verdict.LOCAL_MINIMUM}),
    "unbounded far away": (between(1) | {"integrand": "y'^2 + y^2 - 1e-4*y^4"}, 0.0, {Verdict.LOCAL_MINIMUM}),
    "the farther the better": (
        over(1, endpoints=["y(0) = 0"], constraints=["y'^2 >= 0"]) | {"endpoint": "exp(-y(1))"},
                               None, NONE | OPEN),
    "the later the better": (FREE_TIME | {"integrand": "y'^2"}, None, NONE | OPEN),
    "late, but not for ever": (FREE_TIME | {"integrand": "y'^2 + 1e-8"}, 2e-4, LEAST),
    "a switch on a break": (
        between(1) | {"integrand": "y", "constraints": ["-1 <= y' <= 1"]}, -1 / 4, GLOBAL),
    "just steep enough": (
        between(1, 0, 1) | {"integrand": "y^2", "constraints": ["-1.000000001 <= y' <= 1.000000001"]}, 1 / 3, LEAST),
    "not steep enough": (
        between(1, 0, 1) | {"integrand": "y^2", "constraints": ["-0.99999 <= y' <= 0.99999"]},
        None, {Verdict.INFEASIBLE}),
    "a tiny load": (between(1) | {"integrand": "y'^2 - 2e-9*y"}, -1e-18 / 12, GLOBAL),
    "a huge load": (between(1) | {"integrand": "y'^2 - 2e9*y"}, -1e18 / 12, GLOBAL),
    "a small difference of large numbers": (between(1, 0, 1) | {"integrand": "y'^2 + 1e9"}, 1e9 + 1, GLOBAL),
    "thin layers": (between(1, 1, 2) | {"integrand": "1e-8*y'^2 + y^2"}, 5e-4, GLOBAL),
    "no more than a corner": (between(1) | {"integrand": "(y'^2 - 1)^2 + y^2"}, None, NONE | OPEN),
    # F(y') between zeros, convex near y' = 0 or everywhere: y = 0 (Jensen), but sinh falls for ever to one side
    "nothing, with a linear term": (between(1) | {"integrand": "y'^2 + y'"}, 0.0, GLOBAL),
    "nothing, with an angle": (between(1) | {"integrand": "y'^2 + atan(y')"}, 0.0, LEAST),
    "nothing, beside an abyss": (between(1) | {"integrand": "y'^2 + sinh(y')"}, None, NONE),
    "a plant that runs away": (
        over(1, endpoints=["y(0) = 1", "y(1) = 0"]) | {
            "unknowns": {"y": {}, "u": {}}, "integrand": "u^2", "dynamics": ["y' = 30*y + u"]},
        60 / (1 - math.exp(-60)), GLOBAL),
}  # fmt: skip


def solved(members):
    sought = {part: members[part] for part in ("integrand", "endpoint") if part in members}
    rest = {name: part for name, part in members.items() if name not in sought}
    document = {"format": 1, "unknowns": {"y": {}}, "functional": {"seek": "minimum"} | sought} | rest
    document["solve"] = {"time_limit": 30}
    return solve(assemble(read(json.dumps(document).encode())))


@pytest.mark.parametrize("members, value, right", CASES.values(), ids=CASES)
def test_no_claim_is_wrong(members, value, right):
    """Whatever the verdict: a value with its error is a claim."""
    found = solved(members)
    assert found.verdict in right
    if value is not None and found.value_error is not None and found.verdict in LEAST | OPEN:
        assert abs(found.value - value) <= found.value_error + 4e-16 * abs(value)


LEVELS = [[0, 0], [1, 0.1], [2, 3], [3, 3.1], [4, 8]]


def along_a_broken_line():
    """The least integral of y'^2 + k(y) for k through these points, by its first integral y'^2 - k = E.

    With the root r of E + k, x is the integral of dy/r and the value that of 2 r - E dy/r: on a straight piece of slope
    s these are 2 r/s and 4 r^3/(3 s) - 2 E r/s between its ends.
    """
    heights = np.array(LEVELS)[:, 1]
    slopes = np.diff(heights)

    def roots(level):
        return np.sqrt(level + heights)

    level = brentq(lambda level: float((2 * np.diff(roots(level)) / slopes).sum()) - 2, 1e-6, 100)
    return float((4 * np.diff(roots(level) ** 3) / (3 * slopes)).sum()) - 2 * level


def at_a_held_end():
    """The least integral of y'^2 - 9 k(y), y = 1 at 0 and 2, for k = (y^2 + y)/2 up to y = 2, where it stays.

    w = y + 1/2 obeys w'' = -W^2 w, W^2 = 9/2, until y = 2 is reached at rest: w = 5/2 cos W(a - x), cos Wa = 3/5.
    There y stays for 2 - 2a; the ways there and back cost 2 (-225/8 * 12/25 / W + 9a/8).
    """
    rate = math.sqrt(4.5)
    a = math.acos(0.6) / rate
    return 2 * (-13.5 / rate + 1.125 * a) - 27 * (2 - 2 * a)


ROUNDED = {
    "a broken line": (
        between(2, 0, 4) | {"integrand": "y'^2 + k(y)",
                            "tables": {"k": {"of": {"y": ""}, "points": LEVELS, "between": "linear"}}},
        along_a_broken_line(), LEAST),
    "an end that holds": (
        between(2, 1, 1) | {"integrand": "y'^2 - 9*k(y)",
                            "tables": {"k": {"of": {"y": ""}, "points": [[0, 0], [1, 1], [2, 3]], "outside": "hold"}}},
        at_a_held_end(), LEAST | OPEN),
    "a sign that is an absolute value": (  # |y| - y/5 is nowhere negative
        between(1) | {"integrand": "sign(y)*y + y'^2 - 0.2*y"}, 0.0, LEAST | OPEN),
}  # fmt: skip
"""Functions that are rounded, with what their exact ones are worth."""


@pytest.mark.parametrize("members, value, right", ROUNDED.values(), ids=ROUNDED)
def test_the_stated_error_contains_the_rounding(members, value, right):
    """Whatever the verdict: a value with its error is a claim."""
    found = solved(members)
    assert found.verdict in right
    assert abs(found.value - value) <= found.value_error
    assert any("rounded" in note for note in found.notes)


def test_a_curve_along_a_ridge_is_no_extremum():
    """y'^2 - |y| between zeros: y = 0 loses to first order against both -+x(1 - x)/4 (y'' = -+1/2), worth -1/48."""
    found = solved(between(1) | {"integrand": "y'^2 - abs(y)"})
    assert found.verdict in LEAST
    assert abs(found.value + 1 / 48) <= found.value_error


def test_the_fastest_way_down_to_a_line_is_a_cycloid():
    """Fastest descent from rest to the line x + y = 2: sqrt(pi/g), a cycloid that meets it at a right angle.

    Its angle there is pi/2, so that with radius r: r (pi/2 - 1 + 1) = 2 and T = pi/2 sqrt(r/g).
    """
    found = solved({
        "independent": {"name": "x", "from": 0, "to": "b"}, "parameters": {"b": {}},
        "integrand": "sqrt((1 + y'^2)/(2*9.81*y))", "endpoints": ["y(0) = 0", "y(b) = 2 - b"],
    })  # fmt: skip
    assert found.verdict in LEAST
    assert abs(found.value - math.sqrt(pi / 9.81)) <= found.value_error


def test_a_power_without_a_slope_where_the_guess_lies_is_named():
    """(y'^2)^(3/4) is |y'|^(3/2); on y = 0 its derivative is infinity times zero."""
    found = solved(between(1) | {"integrand": "(y'^2)^0.75 - y"})
    if found.verdict in LEAST:
        assert abs(found.value + 1 / 216) <= found.value_error
    else:
        (finding,) = found.diagnosis.findings
        assert (finding.label, finding.note) == ("(y'^2)^0.75", "no finite derivatives by its parts, with y'^2 = 0")
        assert "'(y'^2)^0.75'" in found.diagnosis.sentence


def test_a_switch_under_a_limit_that_moves_with_the_state_is_no_jump():
    """y' = u - y/5 with 0 <= u <= 3 y/2: all until s, then nothing; the least is where exp(-(2 - s)/5) = 6.3/7.5.

    The integral of 0.8 u - y is 0.2 (w - 1)/1.3 - 5 w 0.16 with w = exp(1.3 s); its slope in s vanishes there.
    """
    found = solved(over(2, endpoints=["y(0) = 1"]) | {
        "unknowns": {"y": {}, "u": {}}, "integrand": "0.8*u - y", "dynamics": ["y' = u - y/5"],
        "constraints": ["0 <= u <= 1.5*y"],
    })  # fmt: skip
    w = math.exp(1.3 * (2 + 5 * math.log(6.3 / 7.5)))
    assert found.verdict in LEAST
    assert abs(found.value - 0.2 * (w - 1) / 1.3 + 0.8 * w) <= found.value_error


@pytest.mark.parametrize("given", [[], ["y(0) = 1"], ["y(0) = 1", "z(0) = 2"]], ids=len)
def test_a_closed_curve_of_least_length_is_a_point(given):
    found = solved({
        "independent": {"name": "x", "from": 0, "to": 1}, "unknowns": {"y": {}, "z": {}},
        "integrand": "sqrt(y'^2 + z'^2)", "endpoints": ["y(0) = y(1)", "z(0) = z(1)", *given],
    })  # fmt: skip
    assert found.verdict in GLOBAL
    assert abs(found.value) <= found.value_error + 1e-12


def test_a_power_is_solved_from_a_guess_off_its_singular_point():
    """The same from 0 to 1: as |y'|^(3/2) is convex, the straight line, worth 1 (Jensen)."""
    found = solved(between(1, 0, 1) | {"integrand": "(y'^2)^0.75"})
    assert found.verdict in LEAST
    assert abs(found.value - 1) <= found.value_error <= 1e-6


def test_a_convex_problem_has_no_better_curve_nearby_wherever_its_controls_switch():
    """Where a control leaves its limit smoothly, the place is known less well than the value is."""
    members = over(100, unknowns={"y": {}, "u": {"within": [-1, 1]}}, dynamics=["y'' = u"],
                   functional={"seek": "minimum", "integrand": "y^2 + y'^2 + 0.01*u^2"},
                   endpoints=["y(0) = 10", "y'(0) = 0"])  # fmt: skip
    solution = solve(assemble(read(json.dumps({"format": 1, "title": "test", **members}).encode())))
    assert solution.verdict is Verdict.GLOBAL_MINIMUM


def test_a_condition_that_holds_nearby_too_is_part_of_the_stated_error():
    """(y(1) - 1)^2 = 0 written so that rounding hides it: the shortest way has the length sqrt(2)."""
    members = over(1, unknowns={"y": {}}, functional={"seek": "minimum", "integrand": "sqrt(1 + y'^2)"},
                   endpoints=["y(0) = 0", "(1 - 2)^2 + (y(1) - 1)^2 = 1"])  # fmt: skip
    solution = solve(assemble(read(json.dumps({"format": 1, "title": "test", **members}).encode())))
    assert solution.value == pytest.approx(math.sqrt(2), abs=solution.value_error, rel=0)
    assert solution.value_error < 1e-6
