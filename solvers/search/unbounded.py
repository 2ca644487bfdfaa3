"""Does the value run away within the conditions?  Then in every larger box the best curve is better by as much or more.

That a minimiser diverges, or ends with a very good value at a point that breaks the equations, shows nothing.  So all
that is free is held within a box a hundred times its size, and within one a hundred times larger again: a solution
that no box holds back is one of the problem itself; where every box holds back a curve that meets all conditions, also
between the points of its mesh, and its value, integrated anew, falls no less from box to box, there is no least value.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.minimise.ipopt import Minimum, Start
from solvers.search import refinement
from solvers.search.attempt import SOLVED, end_of, make_program
from solvers.search.effort import Minimiser
from solvers.search.record import End, Pursuit
from solvers.transcription.layout import Layout, layout
from solvers.transcription.mesh import Mesh
from solvers.transcription.program import Program
from solvers.transcription.trajectory import carry, trajectory

Array = NDArray[np.float64]

BOX = 100.0
"""Half the width of a box, in sizes of what is free."""
BOXES = 4
"""How many boxes have to hold the curve back."""
HELD = 0.99
"""Share of its box from which on a quantity counts as held back."""
STEADILY = 0.9
"""Share of the last gain that the next box has to bring at the least."""
BROKEN = 1e-3
"""How much, beside a curve's own size, it may break conditions between the points of its mesh."""


def in_growing_boxes(
    pursuit: Pursuit, mesh: Mesh, where: Layout, z: Array, minimise_: Minimiser
) -> tuple[Program, Minimum] | None:
    """A solution that no box holds back, from z (SI); else the pursuit ends, unbounded only where that is shown."""
    compiled = pursuit.compiled
    values: list[float] = []
    pursuit.end = End.FAILED
    for _ in range(BOXES):
        program = make_program(compiled, mesh, where, z)
        boxed = replace(program, lower=_within(program.lower), upper=_within(program.upper))
        minimum = minimise_(boxed, Start(np.clip(z / program.scale, boxed.lower, boxed.upper)))
        if minimum.outcome not in SOLVED:
            pursuit.end = end_of(minimum)
            return None
        held = np.abs(minimum.z) >= HELD * BOX
        if not np.any(held & ((boxed.lower > program.lower) | (boxed.upper < program.upper))):
            return program, minimum
        value = _integrated_anew(boxed, minimum)
        if value is None:
            return None
        values.append(value)
        z = minimum.z * program.scale
    gains = -np.diff(values)
    if gains[0] > 0 and np.all(gains[1:] >= STEADILY * gains[:-1]):
        pursuit.end = End.UNBOUNDED
    return None


def _within(bounds: Array) -> Array:
    """Bounds that reach no farther than a box; those that lie beyond it altogether stay."""
    return np.where(np.isfinite(bounds), bounds, np.sign(bounds) * BOX)


def _integrated_anew(program: Program, minimum: Minimum) -> float | None:
    """What is minimised, on a mesh of other points; None where the curve does not meet the conditions there."""
    path = trajectory(program, minimum)
    mesh = refinement.finer(program.mesh)
    where = layout(program.compiled, mesh)
    carried = carry(path, mesh, where)
    finer = make_program(program.compiled, mesh, where, carried.z, program)
    z = carried.z / finer.scale
    g = finer.numbers.constraints(z)
    broken = np.maximum(finer.row_lower - g, g - finer.row_upper).max(initial=0.0)
    value = finer.numbers.value(z) * abs(finer.value_scale)
    return float(value) if np.isfinite(value) and broken <= BROKEN * np.abs(z).max() else None
