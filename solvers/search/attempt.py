"""One attempt: a coarse mesh, a program with scales of its own, and how its minimisation ends a pursuit."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from solvers.minimise.ipopt import Minimum, Outcome
from solvers.problem import KINK, Problem
from solvers.search.record import End
from solvers.transcription.collocation import Family, scheme
from solvers.transcription.functions import Compiled, linear_controls
from solvers.transcription.layout import Layout
from solvers.transcription.mesh import Mesh, uniform
from solvers.transcription.natural import at_natural_sizes
from solvers.transcription.program import Program, transcribe
from solvers.transcription.scaling import FAINT, find_row_sizes, find_scales, sizes_along

Array = NDArray[np.float64]

FIRST_INTERVALS = 8
FIRST_DEGREE = 4
SOLVED = (Outcome.SOLVED, Outcome.ACCEPTABLE)


@lru_cache
def first_mesh(stretches: int, count: int = FIRST_INTERVALS, kinks: frozenset[int] = frozenset()) -> Mesh:
    """A coarse mesh; its outermost intervals have Gauss points: no end is touched, none is favoured.

    Nor is one of the places that are `kinks` of formulas: what vanishes there does so on both sides.
    """
    each = count if stretches == 1 else max(count // stretches, 2 if stretches <= count else 1)
    mesh = uniform(stretches, each, FIRST_DEGREE).intervals
    apart = {0, *(each * place - 1 for place in (*kinks, stretches))}
    gauss = scheme(Family.GAUSS, FIRST_DEGREE)
    return Mesh(tuple(replace(old, scheme=gauss) if index in apart else old for index, old in enumerate(mesh)))


def kinks_of(problem: Problem) -> frozenset[int]:
    """Which places are kinks of formulas."""
    return frozenset(k for k, place in enumerate(problem.places) if place.label.startswith(KINK + " "))


def make_program(
    compiled: Compiled,
    mesh: Mesh,
    where: Layout,
    z: Array,
    before: Program | None = None,
    size: float = 0.0,
    faint: float = FAINT,
) -> Program:
    """A program whose scales come from values (SI) on its mesh, and do not fall far below those of the one before.

    `size` is what is known of the functional's where there is none before; `faint` is the least size of slopes.
    """
    if before is None:
        z = at_natural_sizes(compiled, mesh, where, z)
    scales = find_scales(compiled, where, z, None if before is None else before.scales, faint)
    rows = find_row_sizes(compiled, where, scales, z, size if before is None else abs(before.value_scale))
    return transcribe(compiled, mesh, where, scales, rows, sizes_along(compiled, where, scales, z))


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


def runs_away(minimum: Minimum) -> bool:
    """Whether the value has grown beyond all sizes of the problem."""
    diverged = minimum.outcome is Outcome.UNBOUNDED
    return diverged or not np.isfinite(minimum.value) or minimum.value < -1e6
