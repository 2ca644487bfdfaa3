"""Does a curve run away?  Farther out the value gets no worse, so that no curve is best.

A free time that makes a motion the cheaper the longer it lasts, a value exp(-y) that falls as y grows: the minimiser
stops somewhere far out, where what is left to gain is less than it can see, and the curve there is the best of none.
So where something has grown far beyond its first size, no bound holds it and the second variation hardly does, the same
mesh is solved once more with that quantity ten times as large at the least.  At a minimum the value must suffer.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.minimise.ipopt import FLOOR, Outcome, Start, minimise
from solvers.minimise.optimality import Optimality
from solvers.search.record import Pursuit
from solvers.solution import Finding
from solvers.transcription.lowering import primed
from solvers.transcription.trajectory import Trajectory, as_start

Array = NDArray[np.float64]

FAR = 100.0
"""How much larger than its first size a quantity has to be to be looked at."""
FARTHER = 10.0
ITERATIONS = 100
FIRM = 1e-3
"""Loss of the value, relative to its size, that the second variation foretells for a quantity that has its place: far
more than what is left to gain where one runs away."""
ON_LIMIT = 1e-7
"""How near to a limit, scaled, counts as resting on it."""
NOTHING = 1e-12
"""Change of a quantity, by a pull of one, that is rounding: the conditions determine it."""


def escapes(pursuit: Pursuit, deadline: Deadline) -> tuple[Finding, ...]:
    """The first quantity that may as well be far larger, as a finding; none where the curve stays."""
    path = pursuit.paths[-1]
    program = path.program
    z = path.z / program.scale
    size = _size(pursuit)
    for label, index, scaled in _far_out(pursuit):
        side = np.sign(z[index])
        start, bound = z.copy(), FARTHER * z[index]
        start[scaled] *= FARTHER
        lower, upper = program.lower.copy(), program.upper.copy()
        (lower if side > 0 else upper)[index] = bound
        moved = replace(program, lower=lower, upper=upper)
        found = minimise(moved, Start(np.clip(start, lower, upper)), deadline=deadline,
                         options={"ipopt.max_iter": ITERATIONS})  # fmt: skip
        solved = found.outcome in (Outcome.SOLVED, Outcome.ACCEPTABLE)
        if (
            solved
            and found.value * abs(program.value_scale) <= abs(program.value_scale) * _value(pursuit) + FLOOR * size
        ):
            return (Finding(label, note="grows without end"),)
    return ()


def _firm(path: Trajectory, index: int, size: float) -> bool:
    """Whether the second variation alone keeps a variable from growing as far as is looked; `size` is the value's.

    A pull at it moves it by w: bringing it elsewhere costs half the square of the way over w.
    """
    from scipy.sparse.linalg import splu  # here, so that SciPy is loaded only where it is needed

    program, numbers, start = path.program, path.program.numbers, as_start(path)
    assert start.multipliers is not None
    z, rows = start.z, numbers.constraints(start.z)
    free = np.flatnonzero((z - program.lower > ON_LIMIT) & (program.upper - z > ON_LIMIT))
    kept = np.flatnonzero((rows - program.row_lower <= ON_LIMIT) | (program.row_upper - rows <= ON_LIMIT))
    system = Optimality(program, free, kept)
    matrix = system.matrix(numbers.hessian(z, 1.0, start.multipliers), numbers.jacobian(z))
    pull = (np.arange(system.size) == np.searchsorted(free, index)).astype(float)
    try:
        moved = float(splu(matrix).solve(pull) @ pull)
    except RuntimeError:  # singular: something is not determined
        return False
    way = (FARTHER - 1) * z[index]
    return abs(moved) < NOTHING * max(1.0, way**2) or (
        moved > 0 and way**2 / (2 * moved) * abs(program.value_scale) > FIRM * size
    )


def may_escape(pursuit: Pursuit) -> bool:
    """Whether something has grown so far that it would have to be found out."""
    return next(_far_out(pursuit), None) is not None


def _far_out(pursuit: Pursuit) -> Iterator[tuple[str, int, Array]]:
    """What has outgrown its first size on a side where no bound holds it, nor the second variation."""
    path = pursuit.paths[-1]
    program = path.program
    for label, index, scaled in _grown(pursuit):
        bound = program.upper[index] if path.z[index] > 0 else program.lower[index]
        if not (np.isfinite(bound) or _firm(path, index, _size(pursuit))):
            yield label, index, scaled


def _size(pursuit: Pursuit) -> float:
    """The size of the value, on the first mesh or this one."""
    programs = [pursuit.paths[-1].program, *([pursuit.first] if pursuit.first else [])]
    return max(abs(program.value_scale) for program in programs)


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
