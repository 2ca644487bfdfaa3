"""How steep is steep?  The slope at which an integrand of linear growth turns from level to linear.

sqrt(1 + (y'/c)^2) hardly grows with slopes well below c and linearly with slopes well above it: at c the growth of its
logarithm with that of the slope is just one half.  Measured by c, x and y of a curve are of one kind, whatever units
they were given in, and a gauge of constant speed is one of constant length.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.evaluation import mapped, point_inputs
from solvers.transcription.functions import Compiled, rounded_functions
from solvers.transcription.layout import Layout

Array = NDArray[np.float64]

SLOPES = 10.0 ** np.linspace(-12.0, 12.0, 241)
"""Slopes that are tried, relative to the size of the unknown over that of the range."""
HALF = 0.5
PLACES = 4


def steep_slopes(compiled: Compiled, where: Layout, z: Array, sizes: Array) -> dict[str, float]:
    """For the unknowns of a problem of first order the slope at which the integrand, or else an integral, is steep.

    `sizes` are those of the slopes.  An unknown for which there is none is left out.
    """
    if rounded_functions(compiled.lowered.problem):  # what is rounded has a steepness of its own
        return {}
    point = compiled.point
    v, d = point_inputs(compiled, where, z)
    chosen = np.linspace(0, len(v) - 1, PLACES + 2).astype(int)[1:-1]
    v, d = v[chosen], d[chosen]
    v[:, point.states : point.states + point.controls] = 0.0
    first = point.states + point.constraints
    found = {}
    for column, (name, order) in enumerate(compiled.lowered.controls):
        tried = np.repeat(v[None], len(SLOPES), axis=0)
        tried[:, :, point.states + column] = (sizes[column] * SLOPES)[:, None]
        values = mapped(point.value, tried.reshape(-1, v.shape[1]), np.tile(d, (len(SLOPES), 1)))
        with np.errstate(all="ignore"):
            heights = np.log(np.nanmean(np.abs(values.reshape(len(SLOPES), PLACES, -1)), axis=1))[:, first:]
            growth = np.gradient(heights, np.log(SLOPES), axis=0)
        for rate in growth.T[::-1]:
            at = _half(rate)
            if order == 1 and at is not None:
                found[name] = float(sizes[column] * at)
                break
    return found


def _half(growth: Array) -> float | None:
    """The slope at which a growth that rises from zero to one passes one half; None where it does not do that."""
    if not (np.isfinite(growth).all() and abs(growth[0]) < 0.1 and abs(growth[-1] - 1.0) < 0.1):
        return None
    k = int(np.argmax(growth > HALF))
    share = (HALF - growth[k - 1]) / (growth[k] - growth[k - 1])
    return float(SLOPES[k - 1] * (SLOPES[k] / SLOPES[k - 1]) ** share)
