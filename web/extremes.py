"""The limit report: how far each quantity goes, between the nodes too, and where."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.polynomial import legendre

from solvers.curve import Array
from web.trajectory import Arc, Trajectory, read_trajectory

HIGHEST_DERIVATIVE = 3
POINTS_PER_DEGREE = 4
BEYOND = 1 / math.cos(math.pi / (2 * POINTS_PER_DEGREE)) - 1
"""How far a polynomial may pass the largest of its values at the extrema of a Chebyshev polynomial of
`POINTS_PER_DEGREE` times its degree, as a share of that value: |p| <= max over the grid / cos(pi / 2 / ratio).

Ehlich, Zeller (1964), Schwankung von Polynomen zwischen Gitterpunkten, Math. Z. 86, 41-44 (from memory).
"""


@dataclass(frozen=True, slots=True)
class Extremes:
    """The lowest and the highest value of a quantity, each with its place."""

    name: str
    unit: str
    lowest: float
    lowest_at: float
    highest: float
    highest_at: float

    @property
    def largest(self) -> float:
        """The largest absolute value."""
        return max(abs(self.lowest), abs(self.highest))


def extremes(result: Mapping[str, Any], derivatives: int = HIGHEST_DERIVATIVE) -> tuple[Extremes, ...]:
    """One line for every unknown and each of its derivatives, in the user's units; () where there is no curve.

    The polynomials themselves are searched, so nothing hides between rows, and at a jump both sides count.  A
    derivative that is zero everywhere is left out.
    """
    trajectory = read_trajectory(result)
    if trajectory is None:
        return ()
    lines = (extremes_of(trajectory, name, order) for name in trajectory.names for order in range(derivatives + 1))
    return tuple(line for line in lines if line is not None)


def extremes_of(trajectory: Trajectory, name: str, order: int) -> Extremes | None:
    """How far one derivative goes; None where it is not defined, or (from the first on) zero everywhere."""
    highs, lows = [], []
    for arc in trajectory.arcs:
        coefficients = arc.coefficients(name, order)
        if coefficients is not None and np.all(np.isfinite(coefficients)):
            highs.append(_highest(arc, coefficients))
            lows.append(_highest(arc, -coefficients))
    if not highs:
        return None
    highest, lowest = max(highs), max(lows)
    if order and highest[0] == lowest[0] == 0:
        return None
    unit = trajectory.unit_of(name, order)
    return Extremes(name + "'" * order, unit, -lowest[0], -lowest[1], highest[0], -highest[1])


def _highest(arc: Arc, coefficients: Array) -> tuple[float, float]:
    """The highest value and, with the sign turned so that the first place wins among equals, where it is.

    All intervals are looked at on a grid; only those that may pass its highest value are searched for it.
    """
    degree = len(coefficients) - 1
    grid = np.cos(np.linspace(math.pi, 0, max(POINTS_PER_DEGREE * degree, 1) + 1))
    heights = legendre.legval(grid, coefficients)
    tops, middles = heights.max(axis=1), (heights.max(axis=1) + heights.min(axis=1)) / 2
    promising = np.flatnonzero(tops + BEYOND * (tops - middles) >= tops.max())
    return max(_top(arc, int(interval), coefficients[:, interval]) for interval in promising)


def _top(arc: Arc, interval: int, polynomial: Array) -> tuple[float, float]:
    local = np.concatenate([[-1.0], _stationary(polynomial), [1.0]])
    heights = legendre.legval(local, polynomial)
    first = int(np.argmax(heights))
    return float(heights[first]), -float(arc.places(local[first], np.array(interval)))


def _stationary(polynomial: Array) -> Array:
    """Where the slope of a polynomial vanishes in (-1, 1); coefficients lost in rounding are dropped first."""
    slope = legendre.legder(polynomial)
    slope = legendre.legtrim(slope, 1e-14 * float(np.max(np.abs(slope), initial=0.0)))
    if len(slope) < 2:
        return np.empty(0)
    roots = legendre.legroots(slope)
    real = roots.real[(abs(roots.imag) < 1e-8) & (abs(roots.real) < 1)]
    return np.asarray(np.sort(real), dtype=float)
