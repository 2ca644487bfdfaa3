"""Whether a state can stay on its limit: where no control within its own limits holds it there, it only touches it.

On a coarse mesh a state that turns back slowly looks as if it rested.
"""

from __future__ import annotations

from itertools import product

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.evaluation import point_outputs
from solvers.transcription.functions import linear_controls
from solvers.transcription.limits import quantity_bounds
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

MOST_CONTROLS = 3
"""Of how many controls at once all limits are tried."""
ROUNDING = 1e-6
"""How far beyond zero, relative to its range, a rate may reach: a control may have to stay just on its limit."""


def can_rest(path: Trajectory, state: Quantity, inside: NDArray[np.bool_]) -> bool:
    """Whether a state can stay where it is along most of some points (M), or nothing is known of that.

    Its rate, or that of the first of its slopes that a control moves, has to become zero: what is linear in each of the
    controls is least and largest where these are on their limits.
    """
    compiled, where = path.program.compiled, path.program.layout
    lowered, moved = compiled.lowered, state
    while moved in lowered.states and compiled.reached_by(lowered.states.index(moved))[0] > 0:
        slope = lowered.slope_of(moved)
        if slope is None:
            return True
        moved = slope
    if moved not in lowered.states:
        return True
    rate = lowered.states.index(moved)
    chosen = sorted(lowered.controls.index(control) for control in compiled.reached_by(rate)[1])
    _, _, lower, upper = quantity_bounds(compiled)
    limits = np.array([lower[chosen], upper[chosen]])
    if not set(chosen) <= set(linear_controls(compiled)) or not 0 < len(chosen) <= MOST_CONTROLS:
        return True
    if not np.isfinite(limits).all():
        return True
    rates = []
    for corner in product(*limits.T):
        z = path.z.copy()
        z[where.controls[:, chosen]] = corner
        rates.append(point_outputs(compiled, where, z)[inside, rate])
    least, most = np.min(rates, axis=0), np.max(rates, axis=0)
    beyond = ROUNDING * (most - least)
    return bool(np.mean((least <= beyond) & (most >= -beyond)) >= 0.5)
