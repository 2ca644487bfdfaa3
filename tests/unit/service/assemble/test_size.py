"""Time and size stay bounded whatever a document asks for."""

import time

import pytest

from solvers.transcription.lowering import lower
from tests.unit.service.assemble.stating import stated

CHAIN = {"a0": "x"} | {f"a{n}": f"(a{n - 1} + a{n - 1})/2" for n in range(1, 99)}
MANY = {f"w{n}": "+".join(["sin(x)*x"] * 20) for n in range(90)}


def _takes(members):
    started = time.process_time()
    problem = stated(**members)
    return problem, time.process_time() - started


@pytest.mark.parametrize(
    "members",
    [
        pytest.param({"where": CHAIN, "dynamics": ["x' = u + a98"]}, id="abbreviations that double, in the dynamics"),
        pytest.param({"where": CHAIN, "endpoints": ["a98(0) = 1"]}, id="abbreviations that double, at a place"),
        pytest.param({"constraints": ["sqrt(" * 95 + "x" + ")" * 95 + " <= 3"] * 60}, id="deep formulas"),
        pytest.param({"endpoints": [f"x({n}/199) = {n % 7}" for n in range(199)], "where": MANY}, id="many places"),
    ],
)
def test_a_document_at_the_limits_takes_less_than_two_seconds(members):
    problem, seconds = _takes(members)
    assert seconds < 2.0
    started = time.process_time()
    lower(problem)
    assert time.process_time() - started < 1.0
