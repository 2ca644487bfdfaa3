"""Does the slope stay bounded?  Where it does not, curves of bounded slope may all stay away from the infimum.

All meshes consist of polynomials, so of curves whose slope is bounded.  For most integrands these come as near to the
infimum as one likes; but where the integrand names the independent variable, is not convex, and the slope grows beyond
all bounds at a place, there may be a gap that no refinement closes (Lavrentiev).  Then the value is not to be trusted,
however well the meshes agree.  An integrand that does not name the independent variable has no gap.  Nor has a convex
one, along whose curve the costates are finite: it lies above its tangents, and what these add up to vanishes for every
curve with the same ends, however steep.

The meshes narrow towards such a place, and beside it the mean slopes of the intervals follow a power of the distance.

References: Lavrentiev (1926), Annali di Matematica 4; Mania (1934); Alberti, Serra Cassano (1994), Non-occurrence of
gap for one-dimensional autonomous functionals; Cesari (1983), Optimization: Theory and Applications, section 18.5 (all
from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.first_integral import autonomous
from solvers.checks.sampling import Sampler
from solvers.solution import Check, Status

Array = NDArray[np.float64]

NAME = "slope growth"
NARROW = 1e-4
"""Distance, relative to the whole, up to which a mesh has to narrow before growth without bound can be told."""
REACH = 1e3
"""The power is that over distances up to so many times the least one."""
POWER = 0.05
"""Least power of the inverse distance with which a slope counts as growing without bound."""


def check(sampler: Sampler, *, convex: bool = False) -> Check:
    """Failed where a slope grows without bound, the integrand names the independent variable and is not `convex`."""
    problem, lowered = sampler.problem, sampler.compiled.lowered
    slopes = [j for j, (_, order) in enumerate(lowered.controls) if order > 0]
    if problem.dynamics or not slopes:
        return Check(NAME, Status.NOT_APPLICABLE, "No slope is free.")
    lower, upper = sampler.bounds[2:]
    found = [(growth(sampler, j), j) for j in slopes if not np.isfinite(upper[j] - lower[j])]
    if not found:
        return Check(NAME, Status.PASSED, "Every slope has its limits.")
    (power, place), j = max(found, key=lambda one: one[0][0])
    name = sampler.control_names[j]
    if power <= POWER:
        return Check(NAME, Status.PASSED, "Every slope stays bounded.", max(power, 0.0), POWER)
    grows = f"{name} grows without bound, like the distance to the power {-power:.2g}"
    if autonomous(sampler):
        sentence = f"{grows}; as {problem.independent} does not appear by itself, curves of bounded slope come as near "
        return Check(NAME, Status.PASSED, f"{sentence}to the best value as one likes.", power, None, place, name)
    if convex:
        sentence = f"{grows}; as the problem is convex, no curve is better than an extremal, however steep it is."
        return Check(NAME, Status.PASSED, sentence, power, None, place, name)
    sentence = f"{grows}, and {problem.independent} appears by itself: every mesh has a bounded slope, and such curves "
    return Check(NAME, Status.FAILED, f"{sentence}may all stay away from the best value (Lavrentiev's gap).", power,
                 POWER, place, name)  # fmt: skip


def growth(sampler: Sampler, control: int) -> tuple[float, float]:
    """The power of the inverse distance with which a control grows towards a place, and that place; 0 where none."""
    breaks = sampler.path.breaks
    middles = (breaks[1:] + breaks[:-1]) / 2
    sizes = np.sqrt(
        np.mean(sampler.halves.v[:, sampler.point.states + control].reshape(sampler.count, -1) ** 2, axis=1)
    )
    best = (0.0, float(breaks[0]))
    for place in (breaks[np.argmax(sizes)], breaks[np.argmax(sizes) + 1]):
        for side in (middles < place, middles > place):
            distance, size = np.abs(middles[side] - place), sizes[side]
            least = float(distance.min(initial=np.inf))
            if not least <= NARROW * abs(sampler.span):
                continue
            near = (distance <= REACH * least) & (size > 0)
            if np.count_nonzero(near) < 4:
                continue
            power = -float(np.polyfit(np.log(distance[near]), np.log(size[near]), 1)[0])
            best = max(best, (power, float(place)))
    return best
