"""Slopes of curves through points, from which cubics are made: smooth ones, and ones that keep the points' shape.

References: de Boor (1978), A Practical Guide to Splines, chapter IV; Fritsch and Butland (1984), A method for
constructing local monotone piecewise cubic interpolants, SIAM Journal on Scientific and Statistical Computing 5
(from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def spline_slopes(knots: Array, values: Array) -> Array:
    """Slopes at n knots of the cubic splines through each column of `values` (n x k), with not-a-knot ends.

    Two points make a line, three a parabola.
    """
    steps = np.diff(knots)
    rises = np.diff(values, axis=0) / steps[:, None]
    n = len(knots)
    if n == 2:
        return np.vstack([rises, rises])
    if n == 3:
        bend = (rises[1] - rises[0]) / (knots[2] - knots[0])
        return np.vstack([rises[0] - steps[0] * bend, rises[0] + steps[0] * bend, rises[1] + steps[1] * bend])
    below, diagonal, above, right = np.zeros(n), np.zeros(n), np.zeros(n), np.zeros_like(values)
    diagonal[1:-1] = 2 * (steps[:-1] + steps[1:])
    below[1:-1], above[1:-1] = steps[1:], steps[:-1]
    right[1:-1] = 3 * (steps[1:, None] * rises[:-1] + steps[:-1, None] * rises[1:])
    diagonal[0], above[0] = steps[1], steps[0] + steps[1]
    right[0] = ((3 * steps[0] + 2 * steps[1]) * steps[1] * rises[0] + steps[0] ** 2 * rises[1]) / above[0]
    diagonal[-1], below[-1] = steps[-2], steps[-1] + steps[-2]
    right[-1] = ((3 * steps[-1] + 2 * steps[-2]) * steps[-2] * rises[-1] + steps[-1] ** 2 * rises[-2]) / below[-1]
    return _tridiagonal(below, diagonal, above, right)


def _tridiagonal(below: Array, diagonal: Array, above: Array, right: Array) -> Array:
    """Elimination without a change of rows, for n equations and the columns of `right` (n x k)."""
    share, result = np.zeros(len(diagonal)), right.copy()
    share[0] = above[0] / diagonal[0]
    result[0] /= diagonal[0]
    for i in range(1, len(diagonal)):
        pivot = diagonal[i] - below[i] * share[i - 1]
        share[i] = above[i] / pivot
        result[i] = (result[i] - below[i] * result[i - 1]) / pivot
    for i in range(len(diagonal) - 2, -1, -1):
        result[i] -= share[i] * result[i + 1]
    return result


def shape_preserving_slopes(knots: Array, values: Array) -> Array:
    """Slopes at n knots with which cubics rise and fall only where each column of `values` (n x k) does.

    Inside it is the weighted harmonic mean of the slopes on both sides, zero where these differ in sign.
    """
    steps = np.diff(knots)[:, None]
    rises = np.diff(values, axis=0) / steps
    if len(knots) == 2:
        return np.vstack([rises, rises])
    slopes = np.zeros_like(values)
    before, after = rises[:-1], rises[1:]
    weights = (steps[:-1] + 2 * steps[1:], 2 * steps[:-1] + steps[1:])
    same = before * after > 0
    with np.errstate(all="ignore"):
        mean = (weights[0] + weights[1]) / (weights[0] / before + weights[1] / after)
    slopes[1:-1] = np.where(same, mean, 0.0)
    slopes[0] = _end_slope(steps[0], steps[1], rises[0], rises[1])
    slopes[-1] = _end_slope(steps[-1], steps[-2], rises[-1], rises[-2])
    return slopes


def _end_slope(step: Array, next_step: Array, rise: Array, next_rise: Array) -> Array:
    """The slope at an end of the parabola through the last three points, as far as it keeps the shape."""
    slope = ((2 * step + next_step) * rise - step * next_rise) / (step + next_step)
    slope = np.where(slope * rise > 0, slope, 0.0)
    return np.where((rise * next_rise <= 0) & (np.abs(slope) > 3 * np.abs(rise)), 3 * rise, slope)


def keep_shape(across: Array, up: Array, values: Array) -> tuple[Array, Array, Array]:
    """Slopes by both arguments and mixed slopes (each n x m) of bicubics over the grid `across` x `up`.

    Where two neighbouring rows (or columns) of points rise alike, so does all of the surface between them.  Slopes from
    the lines of the grid are made smaller until that holds for the control points of every cell in Bernstein's form.

    Reference: Carlson and Fritsch (1985), Monotone piecewise bicubic interpolation, SIAM Journal on Numerical Analysis
    22, for the aim (from memory); the way is our own and simpler.
    """
    right = _tamed(across, values, shape_preserving_slopes(across, values))
    ahead = _tamed(up, values.T, shape_preserving_slopes(up, values.T)).T
    one, other = shape_preserving_slopes(across, ahead), shape_preserving_slopes(up, right.T).T
    twist = np.where(one * other > 0, np.sign(one) * np.minimum(np.abs(one), np.abs(other)), 0.0)
    for attempt in range(60):
        room = np.minimum(_room(across, up, values, right, ahead, twist), 1.0)
        other_room = np.minimum(_room(up, across, values.T, ahead.T, right.T, twist.T).T, 1.0)
        if min(room.min(), other_room.min()) >= 1.0:
            break
        if attempt > 30:  # no more patience: flat
            room, other_room = (np.where(part < 1.0, 0.0, 1.0) for part in (room, other_room))
        ahead, right, twist = ahead * room, right * other_room, twist * np.minimum(room, other_room)
    return right, ahead, twist


def _tamed(knots: Array, values: Array, slopes: Array) -> Array:
    """Slopes of at most one and a half times the smaller rise beside them: then the control points are in order."""
    rises = np.abs(np.diff(values, axis=0)) / np.diff(knots)[:, None]
    least = np.minimum(np.vstack([rises[:1], rises]), np.vstack([rises, rises[-1:]]))
    return np.asarray(np.sign(slopes) * np.minimum(np.abs(slopes), 1.5 * least))


def _room(across: Array, up: Array, values: Array, right: Array, ahead: Array, twist: Array) -> Array:
    """For each node by which factor its slopes along `up` may be multiplied, so that cells rise along `across`."""
    width, height = np.diff(across)[:, None], np.diff(up)[None, :]
    rise = np.diff(values, axis=0)
    sign = np.sign(rise)
    alike = sign[:, :-1] * sign[:, 1:]  # rows below and above of every cell
    factor = np.ones_like(values)
    for side, at in ((1.0, slice(None, -1)), (-1.0, slice(1, None))):
        # Along a row of control points one third into the cell: three rises, each linear in the slopes along `up`.
        reach = side * height / 3
        low, high = ahead[:-1, at] * reach, ahead[1:, at] * reach
        tilt, other_tilt = twist[:-1, at] * reach * width / 3, twist[1:, at] * reach * width / 3
        first, last = right[:-1, at] * width / 3, right[1:, at] * width / 3
        whole = rise[:, at]
        fixed = (first, last, whole - first - last)
        moved = (tilt, other_tilt, high - low - tilt - other_tilt)
        for base, change in zip(fixed, moved, strict=True):
            base, change = base * sign[:, at], change * sign[:, at]
            short = (alike > 0) & (base + change < -1e-12 * np.abs(whole))
            allowed = np.where(short, np.maximum(base, 0.0) / np.where(short, -change, 1.0), 1.0) * np.where(
                short, 0.999, 1.0
            )
            np.minimum(factor[:-1, at], allowed, out=factor[:-1, at])
            np.minimum(factor[1:, at], allowed, out=factor[1:, at])
    return factor
