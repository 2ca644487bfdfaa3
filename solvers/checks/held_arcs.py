"""What could be gained along arcs on which a control is held on a limit.

There the Hamiltonian has to push it against that limit.  Where it pushes away, though it be between the points of the
mesh, there should be an arc more: to first order it gains the push times the way to the other limit, and where all is
convex no other curve gains more than that in all (Frank, Wolfe, 1956; from memory).
"""

from __future__ import annotations

import numpy as np

from solvers.checks.sampling import HALVES, Sampler
from solvers.series import basis

_CLOSE = (np.arange(256) + 0.5) / 128 - 1
BETWEEN = basis(_CLOSE, len(HALVES) - 1) @ np.linalg.inv(basis(2 * HALVES - 1, len(HALVES) - 1))
"""From values on the grid of halves to those of the polynomial through them at many places of an interval."""


def gain(sampler: Sampler) -> float:
    """The integral (SI) of all pushes away from limits on which controls are held."""
    lowered, n = sampler.compiled.lowered, sampler.point.states
    total = 0.0
    for held in sampler.problem.held:
        if (held.name, held.order) not in lowered.controls:
            continue
        own = lowered.controls.index((held.name, held.order))
        inside = sampler.stretch == held.stretch
        push = sampler.halves_gradient[:, n + own].reshape(sampler.count, -1)[inside] @ BETWEEN.T
        room = sampler.bounds[3][own] - sampler.bounds[2][own]
        away = np.maximum(held.side * push, 0.0).mean(axis=1) @ np.abs(sampler.length[inside])
        total += float(away * (room if np.isfinite(room) else sampler.control_sizes[own]))
    return total
