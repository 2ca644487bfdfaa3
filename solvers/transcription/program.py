"""A compiled problem on a mesh as one sparse program: direct collocation.

The program's variables z are, interval by interval, the states at its left end, the states and controls at its points,
then the last states, the places, the parameters and the integrals, each divided by its scale.  Its constraints are, in
this order: collocation defects, end values of Gauss intervals, pointwise constraints, controls at the ends,
definitions of the integrals, conditions at places.  `solvers.transcription.numbers` computes all of it and its
derivatives.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from solvers.problem import Seek
from solvers.transcription.functions import Compiled
from solvers.transcription.layout import Layout, calm_entries, row_order, spread
from solvers.transcription.limits import limits
from solvers.transcription.mesh import Mesh
from solvers.transcription.numbers import Numbers, Placement
from solvers.transcription.scaling import RowSizes, Scales

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Program(Placement):
    """The sparse program: minimise f subject to bounds on z and g, all scaled."""

    scales: Scales
    lower: Array
    upper: Array
    row_lower: Array
    row_upper: Array
    numbers: Numbers  # f, g and their derivatives at any z

    @property
    def overdetermined(self) -> bool:
        """Whether there are more equations than variables that can move."""
        return bool((self.row_lower == self.row_upper).sum() > (self.lower < self.upper).sum())

    @property
    def unlimited(self) -> bool:
        """Whether there are equations only, and no bounds on what can move."""
        free = self.lower < self.upper
        bounds = np.concatenate([self.lower[free], self.upper[free]])
        return not (np.isfinite(bounds).any() or (self.row_lower < self.row_upper).any())


def transcribe(
    compiled: Compiled,
    mesh: Mesh,
    where: Layout,
    scales: Scales,
    row_sizes: RowSizes,
    controls: Array | None = None,
) -> Program:
    """Put a compiled problem on a mesh with its layout; `controls` are their sizes point by point where they differ."""
    rows = row_order(compiled, mesh, where)
    scale = spread(compiled, where, scales)
    if controls is not None:
        scale[where.controls] = controls
    row_scale = _row_scale(compiled, mesh, where, scales, row_sizes)
    sign = -1.0 if compiled.lowered.problem.seek is Seek.MAXIMUM else 1.0
    lower, upper, row_lower, row_upper = limits(compiled, where, rows)
    placed = Placement(compiled, mesh, where, rows, scale, row_scale, sign * row_sizes.value, lower == upper)
    return Program(
        **{f.name: getattr(placed, f.name) for f in fields(Placement)},
        scales=scales,
        lower=lower / scale,
        upper=upper / scale,
        row_lower=row_lower / row_scale,
        row_upper=row_upper / row_scale,
        numbers=Numbers(placed),
    )


def restated(program: Program, compiled: Compiled) -> Program:
    """The same program for a compiled problem that differs in constants and limits only."""
    lower, upper, row_lower, row_upper = limits(compiled, program.layout, program.rows)
    scale, row_scale = program.scale, program.row_scale
    return replace(program, compiled=compiled, lower=lower / scale, upper=upper / scale,
                   row_lower=row_lower / row_scale, row_upper=row_upper / row_scale,
                   numbers=program.numbers.restated(compiled.constants))  # fmt: skip


def _row_scale(compiled: Compiled, mesh: Mesh, where: Layout, scales: Scales, row_sizes: RowSizes) -> Array:
    """One scale for every row."""
    linear = [control for control, _, _ in (*compiled.rims, *calm_entries(compiled, mesh))]
    return np.concatenate([
        np.tile(scales.states, len(where.fractions) + int(mesh.gauss.sum())),
        np.tile(row_sizes.pointwise, len(where.fractions)),
        scales.controls[linear],
        scales.integrals,
        row_sizes.conditions,
    ])  # fmt: skip
