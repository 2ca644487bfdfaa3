"""What a point of a sweep costs, as a share of a solve of its own: smooth problems, and some with many switches.

What the crucible's limits do to it changes with its distance: within the range here two switches go and come.
"""

import json
import time
from dataclasses import replace
from types import MappingProxyType

import numpy as np
import pytest

from service import samples
from service.assemble import assemble
from service.spec import read
from solvers.problem import Sweep
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.solvers.problems import LEAST_TIME, stated

POINTS = 100
GOOD = {Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM}


def _sample(name, constants=MappingProxyType({}), endpoints=MappingProxyType({})):
    """A sample with further constants, and some of its end conditions replaced."""
    document = samples.load(name)
    document["constants"] = document.get("constants", {}) | dict(constants)
    document["endpoints"] = [endpoints.get(condition, condition) for condition in document["endpoints"]]
    return assemble(read(json.dumps(document).encode()))


def _least_time():
    ends = ["x(0) = D", "x'(0) = 1", "x(T) = 0", "x'(T) = 0"]
    return stated(**LEAST_TIME | {"constants": {"D": 1}, "endpoints": ends})


CASES = {
    "hose": (lambda: _sample("hose"), "l", (3.5, 5.0)),
    "chute": (lambda: _sample("chute"), "v0", (0.2, 1.0)),
    "crucible": (lambda: _sample("crucible"), "D", (2.9, 3.05)),
    "scan stage": (lambda: _sample("scan-stage", {"D": "40 mm"}, {"p(T) = 40": "p(T) = D"}), "D", (0.03, 0.06)),
    "least time": (_least_time, "D", (0.5, 2.0)),
    "lines": (lambda: stated(constants={"D": 1}, endpoints=["x(0) = 0", "x(1) = D"]), "D", (1.0, 2.0)),
}


@pytest.mark.parametrize("name", CASES)
def test_a_sweep_costs_little_more_than_a_fifth_of_single_solves(benchmark, name):
    """At most 0.2 for 1,000 points; here 100, so that the solve at the beginning counts for a little more."""
    make, constant, (low, high) = CASES[name]
    problem = make()
    values = np.linspace(low, high, POINTS)
    problem = replace(problem, options=replace(problem.options, time_limit=600.0))
    swept = replace(problem, sweeps=(Sweep(constant, tuple(values.tolist())),))
    solve(problem)
    single, alone = 0.0, []
    for value in values[:: POINTS // 5]:
        constants = tuple(replace(c, value=value) if c.name == constant else c for c in problem.constants)
        began = time.process_time()
        alone.append(solve(replace(problem, constants=constants)))
        single += time.process_time() - began
    spent = []

    def sweep():
        began = time.process_time()
        found = solve(swept)
        spent.append(time.process_time() - began)
        return found

    points = benchmark.pedantic(sweep, rounds=1).sweep
    for point, one in zip(points[:: POINTS // 5], alone, strict=True):
        if one.value is not None:  # the default guess may lead nowhere where a neighbour does
            assert abs(point.value - one.value) <= point.value_error + one.value_error
    assert {point.verdict for point in points} <= GOOD
    share = spent[0] / POINTS / (single / len(alone))
    benchmark.extra_info["share"] = round(share, 3)
    assert share <= (0.4 if name == "lines" else 0.3)
