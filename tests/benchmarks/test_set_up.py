"""Set-up, from a problem to the first iteration: it must hardly grow with the mesh.

Beside it, in the same run, one unrolled graph of the same transcription of the same problem (6 states, 2 controls).
"""

from __future__ import annotations

import time
from pathlib import Path

import casadi as ca
import numpy as np
import pytest

from service.assemble import assemble
from service.spec import read
from solvers.minimise.ipopt import Start, minimise
from solvers.starts.guess import first_guess
from solvers.transcription.collocation import Family, scheme
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import uniform
from solvers.transcription.program import transcribe
from solvers.transcription.scaling import find_row_sizes, find_scales

CRANE = (Path(__file__).parents[1] / "acceptance/problems/C16a.json").read_bytes()
DEGREE = 4


def seconds_to_first_iteration(intervals: int) -> float:
    """Ours, from the document that was accepted."""
    began = time.perf_counter()
    reached = []

    def stop(iterate) -> bool:
        reached.append(time.perf_counter())
        return True

    compiled = compile_problem(lower(assemble(read(CRANE))))
    mesh = uniform(1, intervals, DEGREE, Family.RADAU)
    where = layout(compiled, mesh)
    guess = first_guess(compiled, mesh, where)
    scales = find_scales(compiled, where, guess.z)
    program = transcribe(compiled, mesh, where, scales, find_row_sizes(compiled, where, scales, guess.z))
    minimise(program, Start(guess.z / program.scale), watch=stop)
    return reached[0] - began


def unrolled_seconds_to_first_iteration(intervals: int) -> float:
    """The same transcription written out as one graph, differentiated as a whole."""
    began = time.perf_counter()
    rule, step = scheme(Family.RADAU, DEGREE), 9 / intervals
    z, g, f = [], [], 0
    left = ca.SX.sym("x", 6)
    z.append(left)
    for _ in range(intervals):
        inner = [ca.SX.sym("x", 6) for _ in range(DEGREE)]
        controls = [ca.SX.sym("u", 2) for _ in range(DEGREE)]
        z += [part for pair in zip(inner, controls, strict=True) for part in pair]
        support = ca.horzcat(left, *inner)
        for k, (x, u) in enumerate(zip(inner, controls, strict=True)):
            swing = -(u[0] + 27.0756 * x[2] + 2 * x[4] * x[5]) / x[1]
            rates = ca.vertcat(x[3], x[4], x[5], u[0] + 17.2656 * x[2], u[1], swing)
            g.append(support @ rule.differentiate[k] - step * rates)
            cost = (x[2] ** 2 + x[5] ** 2 + 0.01 * ca.sumsqr(u)) / 2
            f += step * rule.weights[k] * cost
        left = inner[-1]
    variables, constraints = ca.vertcat(*z), ca.vertcat(*g)
    options = {"ipopt.max_iter": 0, "ipopt.print_level": 0, "print_time": False, "error_on_fail": False}
    solver = ca.nlpsol("solver", "ipopt", {"x": variables, "f": f, "g": constraints}, options)
    solver(x0=np.ones(variables.size1()), lbg=0, ubg=0)
    return time.perf_counter() - began


def test_set_up_is_ten_times_faster_than_one_unrolled_graph(benchmark):
    def both() -> tuple[float, float]:
        return seconds_to_first_iteration(200), unrolled_seconds_to_first_iteration(200)

    seconds_to_first_iteration(8)  # what is loaded once for all problems
    pairs = [both() for _ in range(5)]
    ours, unrolled = (sorted(column)[2] for column in zip(*pairs, strict=True))
    benchmark.extra_info |= {"ours_ms": 1e3 * ours, "unrolled_ms": 1e3 * unrolled, "ratio": unrolled / ours}
    benchmark.pedantic(seconds_to_first_iteration, args=(200,), rounds=5)
    assert unrolled / ours >= 10


@pytest.mark.parametrize("intervals", [20, 200, 2000])
def test_set_up(benchmark, intervals):
    """Wanted here: 50 ms at 200 intervals, 250 ms at 2,000."""
    seconds_to_first_iteration(8)
    benchmark.pedantic(seconds_to_first_iteration, args=(intervals,), rounds=5)
