"""How wide functions with kinks are rounded: a small share of the size of what they are taken of, in whatever unit.

The first guess tells the sizes of all quantities; with each moved about by its size, the arguments show theirs.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.forms.along import Along
from solvers.formula.nodes import Call
from solvers.problem import Problem
from solvers.search.attempt import first_mesh
from solvers.starts.guess import first_guess
from solvers.transcription.functions import SMOOTHING, bent_uses, compile_problem, without_rounding
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from solvers.transcription.natural import at_natural_sizes
from solvers.transcription.scaling import find_scales

Array = NDArray[np.float64]

MOVES = 8
"""How often all quantities are moved about."""


def with_widths(problem: Problem) -> Problem:
    """The problem with a width for every use of a function with a kink; the same problem where all have theirs."""
    known = dict(problem.widths)
    missing = [use for use in bent_uses(problem) if use not in known]
    if not missing:
        return problem
    sizes = _sizes(without_rounding(problem), missing)
    found = ((use, SMOOTHING * (size or 1.0)) for use, size in zip(missing, sizes, strict=True))
    return replace(problem, widths=(*problem.widths, *found))


def _sizes(problem: Problem, uses: list[Call]) -> list[float]:
    """Typical sizes of the arguments of functions with kinks, zero where nothing tells them."""
    compiled, mesh = compile_problem(lower(problem)), first_mesh(len(problem.places) - 1)
    where = layout(compiled, mesh)
    z = first_guess(compiled, mesh, where).z
    scales = find_scales(compiled, where, at_natural_sizes(compiled, mesh, where, z))
    points, random = where.points(z[where.places]), np.random.default_rng(1)
    seen: list[list[Array]] = [[] for _ in uses]
    for _ in range(MOVES):
        quantities = (
            z[where.inner] + scales.states * random.uniform(-1, 1, where.inner.shape),
            z[where.controls] + scales.controls * random.uniform(-1, 1, where.controls.shape),
            z[where.parameters] + scales.parameters * random.uniform(-1, 1, where.parameters.shape),
        )
        along = Along(compiled, points, *quantities)
        for use, found in zip(uses, seen, strict=True):
            values = np.array([along.size(part) for part in use.arguments])
            found.append(np.abs(values[0]) if len(values) == 1 else np.ptp(values, axis=0))
    return [_typical(np.concatenate(found)) for found in seen]


def _typical(sizes: Array) -> float:
    """The middle one of sizes, or the largest where most are zero; 0 where none is known."""
    sizes = sizes[np.isfinite(sizes)]
    return float(np.median(sizes) or np.max(sizes)) if len(sizes) else 0.0
