"""One attempt: a coarse mesh, a program with scales of its own, and how its minimisation ends a pursuit."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from solvers.minimise.ipopt import Minimum, Outcome
from solvers.search.record import End
from solvers.transcription.collocation import Family
from solvers.transcription.functions import Compiled, linear_controls
from solvers.transcription.layout import Layout
from solvers.transcription.mesh import Mesh, interval, uniform
from solvers.transcription.natural import at_natural_sizes
from solvers.transcription.program import Program, transcribe
from solvers.transcription.scaling import find_row_sizes, find_scales

Array = NDArray[np.float64]

FIRST_INTERVALS = 8
FIRST_DEGREE = 4
SOLVED = (Outcome.SOLVED, Outcome.ACCEPTABLE)


@lru_cache
def first_mesh(stretches: int, count: int = FIRST_INTERVALS) -> Mesh:
    """A coarse mesh; its outermost intervals have Gauss points: no end is touched, none is favoured."""
    each = count if stretches == 1 else max(count // stretches, 2 if stretches <= count else 1)
    mesh = uniform(stretches, each, FIRST_DEGREE)
    first, *inner, last = mesh.intervals
    return Mesh((
        interval(first.stretch, 0.0, first.width, Family.GAUSS, FIRST_DEGREE),
        *inner,
        interval(last.stretch, last.start, 1.0, Family.GAUSS, FIRST_DEGREE),
    ))  # fmt: skip


def make_program(compiled: Compiled, mesh: Mesh, where: Layout, z: Array, before: Program | None = None) -> Program:
    """A program whose scales come from values (SI) on its mesh, and do not fall far below those of the one before."""
    if before is None:
        z = at_natural_sizes(compiled, mesh, where, z)
    scales = find_scales(compiled, where, z, None if before is None else before.scales)
    rows = find_row_sizes(compiled, where, scales, z, 0.0 if before is None else abs(before.value_scale))
    return transcribe(compiled, mesh, where, scales, rows)


def loose(compiled: Compiled) -> bool:
    """Whether many curves may do nearly equally well.

    So where a control that acts linearly is free, and where a state comes to lie on its limit smoothly: the place where
    it does changes the value only to third order.
    """
    problem, states = compiled.lowered.problem, compiled.lowered.states
    if any((held.name, held.order) in states for held in problem.held):
        return True
    return bool(problem.calm) if problem.held else bool(linear_controls(compiled))


def end_of(minimum: Minimum) -> End:
    """How a pursuit ends with a minimisation that did not succeed.

    That there is no curve, or no optimum, no minimiser can know: it only saw none nearby.
    """
    return {Outcome.TIME: End.TIME, Outcome.STOPPED: End.STOPPED}.get(minimum.outcome, End.FAILED)
