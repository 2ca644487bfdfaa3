"""A point of a sweep beside a solve of its own; `tests.benchmarks.figures sweep` prints the table for 1,000 points."""

import pytest

from solvers.solution import Verdict
from tests.benchmarks.sweeps import CASES, swept

POINTS = 100
GOOD = {Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM}


@pytest.mark.parametrize("name", CASES)
def test_a_sweep_costs_little_more_than_a_fifth_of_single_solves(benchmark, name):
    """At most 0.2 for 1,000 points; here 100, so that the solve at the beginning counts for a little more."""
    found = benchmark.pedantic(swept, args=(name, POINTS), rounds=1)
    for point, one in found.alone:
        if one.value is not None:  # the default guess may lead nowhere where a neighbour does
            assert abs(point.value - one.value) <= point.value_error + one.value_error
    assert {point.verdict for point in found.points} <= GOOD
    benchmark.extra_info["share"] = round(found.share, 3)
    assert found.share <= (0.4 if name == "lines" else 0.3)
