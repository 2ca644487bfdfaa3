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
ROUNDING = 1e-15
SAFETY = 30.0
"""How much larger the error of a derivative may be than the curve's own lets expect."""
SMALL = 1e-3
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

    The polynomials themselves are searched, so nothing hides between rows, and at a jump both sides count.  What is no
    larger than the error of the curve lets expect of a zero is told as zero.  Of derivatives that are zero everywhere
    only the first has a line.
    """
    trajectory = read_trajectory(result)
    if trajectory is None:
        return ()
    error = max(result["curve"].get("error") or 0.0, ROUNDING)
    lines = []
    for name in trajectory.names:
        for order in range(derivatives + 1):
            line = extremes_of(trajectory, name, order, error)
            if line is not None:
                lines.append(line)
                if order and line.largest == 0:
                    break
    return tuple(lines)


def extremes_of(trajectory: Trajectory, name: str, order: int, error: float = 0.0) -> Extremes | None:
    """How far one derivative goes; None where it is not defined.  `error` is that of the curve, relative."""
    highs, lows, noises = [], [], []
    for arc in trajectory.arcs:
        coefficients = arc.coefficients(name, order)
        if coefficients is not None and np.all(np.isfinite(coefficients)):
            highs.append(_highest(arc, coefficients))
            lows.append(_highest(arc, -coefficients))
            noises.append(_noise(arc, name, order, error))
    if not highs:
        return None
    highest, lowest = max(highs), max(lows)
    if max(abs(highest[0]), abs(lowest[0])) <= max(noises):
        highest = lowest = (0.0, -trajectory.start)
    unit = trajectory.unit_of(name, order)
    low, high = (0.0 if abs(value) <= max(noises) else value for value in (-lowest[0], highest[0]))
    return Extremes(name + "'" * order, unit, low, -lowest[1], high, -highest[1])


def _noise(arc: Arc, name: str, order: int, error: float) -> float:
    """How large a derivative that is zero may come out where the curve has a relative error.

    It would have to be small beside the function over the arc's length, too.  The derivatives of a polynomial of degree
    p that is at most one between -1 and 1 are at most p^2, p^2 (p^2 - 1)/3, p^2 (p^2 - 1)(p^2 - 4)/15: Markov (1892),
    on functions that deviate little from zero (from memory).
    """
    further = 0
    while name + "'" * (order - further) not in arc.functions:
        further += 1
    stored = arc.functions[name + "'" * (order - further)]
    size, degree = float(np.abs(stored).sum(axis=0).max()), len(stored) - 1
    if not further:
        return error * size
    largest = np.prod([(degree**2 - k**2) / (2 * k + 1) for k in range(further)])
    noise = SAFETY * error * largest * (2 / np.diff(arc.breaks).min()) ** further
    return float(size * min(noise, SMALL / (arc.end - arc.start) ** further))


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
