"""The limit report: how far each quantity goes, between the nodes too, and where."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.polynomial import legendre

from solvers.curve import Array
from web.trajectory import Arc, Trajectory, read_trajectory

HIGHEST_DERIVATIVE = 3


@dataclass(frozen=True, slots=True)
class Extremes:
    """The lowest and the highest value of a quantity, each with its place (and the arc it lies on)."""

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

    @property
    def largest_at(self) -> float:
        """Where the absolute value is largest."""
        return self.highest_at if abs(self.highest) >= abs(self.lowest) else self.lowest_at


def extremes(result: Mapping[str, Any], derivatives: int = HIGHEST_DERIVATIVE) -> tuple[Extremes, ...]:
    """One line for every unknown and each of its derivatives, in the user's units; () where there is no curve.

    The polynomials themselves are searched (ends of the intervals and roots of the slope), so nothing hides
    between rows, and at a jump both sides count.  A derivative that is zero everywhere is left out.
    """
    trajectory = read_trajectory(result)
    if trajectory is None:
        return ()
    lines = (extremes_of(trajectory, name, order) for name in trajectory.names for order in range(derivatives + 1))
    return tuple(line for line in lines if line is not None)


def extremes_of(trajectory: Trajectory, name: str, order: int) -> Extremes | None:
    """How far one derivative goes; None where it is not defined, or (from the first on) zero everywhere."""
    candidates = [found for arc in trajectory.arcs for found in _candidates(arc, trajectory.pieces(arc, name, order))]
    if not candidates or (order and all(value == 0 for value, _ in candidates)):
        return None
    lowest, highest = min(candidates), max(candidates, key=lambda found: (found[0], -found[1]))
    return Extremes(name + "'" * order, trajectory.unit_of(name, order), lowest[0], lowest[1], highest[0], highest[1])


def _candidates(arc: Arc, pieces: tuple[Array, ...]) -> Iterator[tuple[float, float]]:
    """(value, place) at both ends of every interval and wherever the slope vanishes inside."""
    for left, right, piece in zip(arc.curve.breaks[:-1], arc.curve.breaks[1:], pieces, strict=bool(pieces)):
        local = np.concatenate([[-1.0], _stationary(piece), [1.0]])
        places = left + (right - left) * (local + 1) / 2
        values = legendre.legval(local, piece)
        yield from zip(values.tolist(), places.tolist(), strict=True)


def _stationary(piece: Array) -> Array:
    """Where the slope of a polynomial vanishes in (-1, 1); coefficients lost in rounding are dropped first."""
    slope = legendre.legder(piece)
    slope = legendre.legtrim(slope, 1e-14 * float(np.max(np.abs(slope), initial=0.0)))
    if len(slope) < 2:
        return np.empty(0)
    roots = legendre.legroots(slope)
    real = roots.real[(abs(roots.imag) < 1e-8) & (abs(roots.real) < 1)]
    return np.asarray(real, dtype=float)
