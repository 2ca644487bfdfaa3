"""Enough points of a function to draw it: dense where its intervals are short or their degree is high."""

from __future__ import annotations

import numpy as np

from solvers.curve import Array
from web.trajectory import Arc, Trajectory, values

MOST_POINTS = 5_000
POINTS_PER_DEGREE = 5
LEAST_BENT = 25
"""Points of an interval that is no straight line."""

UNSEEN = 1e-7
"""A coefficient below this share of the largest one cannot be seen."""

SEEN_JUMP = 1e-6
"""A jump below this share of the function's range is not drawn."""


def series(trajectory: Trajectory, name: str, derivative: int = 0, most: int = MOST_POINTS) -> tuple[Array, Array]:
    """Places and values of a function over all arcs, at most `most` of them.

    A jump gives two values at one place, so it is drawn as a riser; where an arc lacks the function a NaN lifts the
    pen.
    """
    share = most // len(trajectory.arcs)
    parts = [_arc(arc, arc.coefficients(name, derivative), share) for arc in trajectory.arcs]
    return np.concatenate([places for places, _ in parts]), np.concatenate([heights for _, heights in parts])


def jumps(trajectory: Trajectory, name: str, derivative: int = 0) -> tuple[tuple[float, float, float], ...]:
    """(place, value before, value after) at every break where both sides have the function, however small."""
    found: list[tuple[float, float, float]] = []
    before = np.nan
    for arc in trajectory.arcs:
        coefficients = arc.coefficients(name, derivative)
        if coefficients is None:
            before = np.nan
            continue
        signs = np.where(np.arange(len(coefficients)) % 2, -1.0, 1.0)  # Legendre polynomials at -1; at 1 all are 1
        lefts, rights = signs @ coefficients, coefficients.sum(axis=0)
        earlier = np.concatenate([[before], rights[:-1]])
        found += zip(arc.breaks[:-1].tolist(), earlier.tolist(), lefts.tolist(), strict=True)
        before = rights[-1]
    return tuple(jump for jump in found if np.isfinite(jump[1]) and jump[1] != jump[2])


def _arc(arc: Arc, coefficients: Array | None, most: int) -> tuple[Array, Array]:
    if coefficients is None:
        return np.array([arc.start, arc.end]), np.full(2, np.nan)
    intervals = coefficients.shape[1]
    if 2 * intervals > most:  # a mesh finer than the picture: some of its intervals, two points each
        shown = np.unique(np.linspace(0, intervals - 1, most // 2).astype(int))
        counts = np.full(len(shown), 2)
    else:
        shown = np.arange(intervals)
        counts = np.minimum(_points(coefficients), most // intervals)
    owner = np.repeat(shown, counts)
    rank = np.arange(counts.sum()) - np.repeat(np.cumsum(counts) - counts, counts)
    local = 2 * rank / np.repeat(counts - 1, counts) - 1
    places, heights = arc.places(local, owner), values(local, coefficients, owner)
    return _without_doubles(places, heights, np.cumsum(counts)[:-1])


def _points(coefficients: Array) -> Array:
    """How many points each interval needs: two for a straight line, more for what bends."""
    size = np.abs(coefficients)
    seen = size > UNSEEN * size.max(axis=0)
    degrees = len(size) - 1 - np.argmax(seen[::-1], axis=0)
    return np.where(degrees < 2, 2, np.maximum(LEAST_BENT, POINTS_PER_DEGREE * degrees + 1))


def _without_doubles(places: Array, heights: Array, starts: Array) -> tuple[Array, Array]:
    """The doubled point at a break is kept only where the function jumps."""
    visible = SEEN_JUMP * float(np.ptp(heights))
    doubled = np.zeros(len(places), dtype=bool)
    doubled[starts] = np.abs(heights[starts] - heights[starts - 1]) <= visible
    return places[~doubled], heights[~doubled]
