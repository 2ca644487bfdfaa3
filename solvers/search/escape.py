"""Does a curve run away?  Farther out the value gets no worse, so that no curve is best.

A free time that makes a motion the cheaper the longer it lasts, a value exp(-y) that falls as y grows: the minimiser
stops somewhere far out, where what is left to gain is less than it can see, and the curve there is the best of none.
So where something has grown far beyond its first size and no bound holds it, the same mesh is solved once more with
that quantity ten times as large at the least.  At a minimum the value must suffer.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.minimise.ipopt import FLOOR, Outcome, Start, minimise
from solvers.search.record import Pursuit
from solvers.solution import Finding
from solvers.transcription.lowering import primed

Array = NDArray[np.float64]

FAR = 100.0
"""How much larger than its first size a quantity has to be to be looked at."""
FARTHER = 10.0
ITERATIONS = 100


def escapes(pursuit: Pursuit, deadline: Deadline) -> tuple[Finding, ...]:
    """The first quantity that may as well be far larger, as a finding; none where the curve stays."""
    path = pursuit.paths[-1]
    program = path.program
    z = path.z / program.scale
    floor = FLOOR * max(abs(program.value_scale), abs(pursuit.first.value_scale) if pursuit.first else 0.0)
    for label, index, scaled in _grown(pursuit):
        side = np.sign(z[index])
        if np.isfinite(program.upper[index] if side > 0 else program.lower[index]):
            continue
        start, bound = z.copy(), FARTHER * z[index]
        start[scaled] *= FARTHER
        lower, upper = program.lower.copy(), program.upper.copy()
        (lower if side > 0 else upper)[index] = bound
        moved = replace(program, lower=lower, upper=upper)
        found = minimise(moved, Start(np.clip(start, lower, upper)), deadline=deadline,
                         options={"ipopt.max_iter": ITERATIONS})  # fmt: skip
        solved = found.outcome in (Outcome.SOLVED, Outcome.ACCEPTABLE)
        if solved and found.value * abs(program.value_scale) <= abs(program.value_scale) * _value(pursuit) + floor:
            return (Finding(label, note="grows without end"),)
    return ()


def _value(pursuit: Pursuit) -> float:
    """What is minimised, scaled."""
    path = pursuit.paths[-1]
    return float(path.value / path.program.value_scale)


def _grown(pursuit: Pursuit) -> Iterator[tuple[str, int, Array]]:
    """What has outgrown its first size: its name, the variable where it is largest, and all of its variables."""
    path, first = pursuit.paths[-1], pursuit.first
    if first is None:
        return
    program, where = path.program, path.program.layout
    problem = program.compiled.lowered.problem
    for k, parameter in enumerate(problem.parameters):
        index = int(where.parameters[k])
        if k < len(first.scales.parameters) and abs(path.z[index]) > FAR * first.scales.parameters[k]:
            yield parameter.name, index, np.array([index])
    names = [name for name, _ in program.compiled.lowered.states]
    for k, quantity in enumerate(program.compiled.lowered.states):
        nodes = where.nodes[:, k]
        index = int(nodes[np.argmax(np.abs(path.z[nodes]))])
        if abs(path.z[index]) > FAR * first.scales.states[k]:
            own = [j for j, name in enumerate(names) if name == quantity[0]]
            yield primed(quantity), index, np.concatenate([where.nodes[:, own].ravel(), where.inner[:, own].ravel()])
