"""Small documents that are meant to mislead: whatever is claimed of them has to be true.

Each has what is true of it: its value (None where there is none, or where it is not elementary) and the verdicts that
say so.  Weaker words are no lie; they are listed where nothing better is owed.
"""

import json
import math
from math import pi

import pytest

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


def loaded_power(power, load):
    """min of the integral of |y'|^p - k y between zeros at 0 and 1, and its least value.

    Euler's equation p |y'|^(p-1) sign(y') = k (1/2 - x) gives y'; the value is -(p - 1) times the integral of
    (k |x - 1/2|/p)^(p/(p-1)): -1/216 for p = 3/2, k = 1.
    """
    conjugate = power / (power - 1)
    value = -(power - 1) * (load / (2 * power)) ** conjugate / (conjugate + 1)
    return between(1) | {"integrand": f"abs(y')^{power} - {load}*y"}, value, GLOBAL


CASES = {
    "a power between one and two": loaded_power(1.5, 1),
    "under a larger load": loaded_power(1.5, 4),
    "a power near one": loaded_power(1.3, 1),
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
    "a plant that runs away": (
        over(1, endpoints=["y(0) = 1", "y(1) = 0"]) | {
            "unknowns": {"y": {}, "u": {}}, "integrand": "u^2", "dynamics": ["y' = 30*y + u"]},
        60 / (1 - math.exp(-60)), GLOBAL),
}  # fmt: skip


@pytest.mark.parametrize("members, value, right", CASES.values(), ids=CASES)
def test_no_claim_is_wrong(members, value, right):
    sought = {part: members[part] for part in ("integrand", "endpoint") if part in members}
    rest = {name: part for name, part in members.items() if name not in sought}
    document = {"format": 1, "unknowns": {"y": {}}, "functional": {"seek": "minimum"} | sought} | rest
    document["solve"] = {"time_limit": 30}
    found = solve(assemble(read(json.dumps(document).encode())))
    assert found.verdict in right
    if value is not None and found.verdict in LEAST:
        assert abs(found.value - value) <= found.value_error + 4e-16 * abs(value)
