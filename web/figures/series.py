"""Enough points of a function to draw it: dense where its intervals are short or their degree is high."""

from __future__ import annotations

import numpy as np
from numpy.polynomial import legendre

from solvers.curve import Array
from web.trajectory import Arc, Trajectory

MOST_POINTS = 5_000
POINTS_PER_DEGREE = 5
LEAST_BENT = 25
"""Points of an interval that is no straight line."""

SEEN_JUMP = 1e-6
"""A jump below this share of the function's range is not drawn."""


def series(trajectory: Trajectory, name: str, derivative: int = 0, most: int = MOST_POINTS) -> tuple[Array, Array]:
    """Places and values of a function over all arcs, at most `most` of them.

    A jump gives two values at one place, so it is drawn as a riser; where an arc lacks the function a NaN lifts the
    pen.
    """
    places: list[Array] = []
    values: list[Array] = []
    share = most // len(trajectory.arcs)
    for arc in trajectory.arcs:
        some, heights = _arc(trajectory, arc, name, derivative, share)
        places.append(some)
        values.append(heights)
    return np.concatenate(places), np.concatenate(values)


def jumps(trajectory: Trajectory, name: str, derivative: int = 0) -> tuple[tuple[float, float, float], ...]:
    """(place, value before, value after) wherever the function jumps visibly."""
    found: list[tuple[float, float, float]] = []
    low, high = np.inf, -np.inf
    before = np.nan
    for arc in trajectory.arcs:
        pieces = trajectory.pieces(arc, name, derivative)
        if not pieces:
            before = np.nan
        for left, piece in zip(arc.curve.breaks[:-1], pieces, strict=bool(pieces)):
            after, end = (float(value) for value in legendre.legval(np.array([-1.0, 1.0]), piece))
            low, high = min(low, after, end), max(high, after, end)
            if np.isfinite(before):
                found.append((float(left), before, after))
            before = end
    return tuple(jump for jump in found if abs(jump[2] - jump[1]) > SEEN_JUMP * (high - low))


def _arc(trajectory: Trajectory, arc: Arc, name: str, derivative: int, most: int) -> tuple[Array, Array]:
    pieces = trajectory.pieces(arc, name, derivative)
    if not pieces:
        return np.array([arc.start, arc.end]), np.full(2, np.nan)
    if 2 * len(pieces) > most:
        places = np.linspace(arc.start, arc.end, most)
        return places, trajectory.evaluate(arc, name, derivative, places)
    budget = most // len(pieces)
    all_places: list[Array] = []
    all_values: list[Array] = []
    for left, right, piece in zip(arc.curve.breaks[:-1], arc.curve.breaks[1:], pieces, strict=True):
        local = np.linspace(-1, 1, min(_points(piece), budget))
        all_places.append(np.asarray(left + (right - left) * (local + 1) / 2, dtype=float))
        all_values.append(np.asarray(legendre.legval(local, piece), dtype=float))
    return _joined(all_places, all_values)


def _points(piece: Array) -> int:
    """Two for a straight line, more for what bends; coefficients that no eye could see do not count."""
    degree = len(legendre.legtrim(piece, 1e-7 * float(np.max(np.abs(piece), initial=0.0)))) - 1
    return 2 if degree < 2 else max(LEAST_BENT, POINTS_PER_DEGREE * degree + 1)


def _joined(places: list[Array], values: list[Array]) -> tuple[Array, Array]:
    """All intervals in a row; the doubled point at a break is kept only where the function jumps."""
    across, up = np.concatenate(places), np.concatenate(values)
    visible = SEEN_JUMP * float(np.ptp(up)) if len(up) else 0.0
    doubled = np.zeros(len(across), dtype=bool)
    starts = np.cumsum([len(some) for some in places])[:-1]
    doubled[starts] = np.abs(up[starts] - up[starts - 1]) <= visible
    return across[~doubled], up[~doubled]
