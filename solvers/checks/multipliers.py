"""Multipliers of a solved mesh put in place of others."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.collocation import Family
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


def rate_rows(path: Trajectory, points: Indices, entry: int, end: int, state: int) -> Indices:
    """The rows of the program that hold the rate of a state along a stretch, and its end value where it has one."""
    program, n = path.program, path.nodes.shape[1]
    gauss = np.array([i.scheme.family is Family.GAUSS for i in program.mesh.intervals])
    rank = np.cumsum(gauss) - 1
    ends = [int(rank[k]) for k in range(entry, end) if gauss[k]]
    return np.concatenate([program.rows.defects + points * n + state,
                           program.rows.ends + np.array(ends, dtype=np.int64) * n + state])  # fmt: skip


def with_multipliers(path: Trajectory, rows: Array, bounds: Array, pull: Array) -> Trajectory:
    """The same curve with other multipliers (scaled); of what is fixed those of the bounds are what pulls there."""
    program, where, size = path.program, path.program.layout, abs(path.program.value_scale)
    fixed = program.lower == program.upper
    bounds[fixed] = pull[fixed]
    physical = rows / program.row_scale * size
    weights = np.concatenate([i.scheme.weights for i in program.mesh.intervals])
    defects = physical[: len(where.fractions) * path.nodes.shape[1]].reshape(path.costates.shape)
    measures = where.measures * (path.places[where.stretch + 1] - path.places[where.stretch])
    pushes = physical[program.rows.pointwise : program.rows.rims].reshape(path.multipliers.shape)
    return replace(path, costates=-defects / weights[:, None], multipliers=pushes / measures[:, None],
                   row_multipliers=physical, bound_multipliers=bounds * size / program.scale)  # fmt: skip
