"""Where a function of one variable changes its sign, to machine accuracy.

Sign changes are bracketed on a grid, also those that come in pairs within one of its steps, and then halved down to
neighbouring numbers: that needs no derivative, and so passes kinks and jumps of the function itself.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Function = Callable[[Array], Array]

STEPS = 2048
"""Steps of the grid."""
HALVINGS = 80
"""More than lead from a step of the grid to neighbouring numbers."""
SHRINKS = 40
"""How often the step beside a value that may be the least is shrunk, to a third each time."""


class UndefinedError(Exception):
    """The function has no value somewhere in the range."""


def sign_changes(function: Function, low: float, high: float) -> list[float]:
    """The places from `low` to `high` (low < high) at which the sign changes, zero being a sign of its own.

    Raises UndefinedError where the function is not finite somewhere on the grid.
    """
    grid = np.linspace(low, high, STEPS + 1)
    values = function(grid)
    if not np.isfinite(values).all():
        raise UndefinedError
    grid, values = _with_dips(function, grid, values)
    found: set[float] = set()
    for above in (np.greater, np.greater_equal):
        at = np.flatnonzero(above(values[1:], 0) != above(values[:-1], 0))
        found.update(_halved(function, grid[at], grid[at + 1], above).tolist())
    return sorted(found)


def _with_dips(function: Function, grid: Array, values: Array) -> tuple[Array, Array]:
    """The grid with places besides at which the function is nearest to zero between neighbours of the same sign."""
    size = np.abs(values)
    inner = np.flatnonzero((size[1:-1] <= size[:-2]) & (size[1:-1] <= size[2:]) & (size[1:-1] > 0)) + 1
    signs = np.sign(values)
    inner = inner[(signs[inner - 1] == signs[inner]) & (signs[inner + 1] == signs[inner])]
    at, sign, step = grid[inner], signs[inner], np.diff(grid).max(initial=0.0)
    for _ in range(SHRINKS if len(inner) else 0):
        tried = at + step * np.linspace(-1, 1, 7)[:, None]
        tried = np.clip(tried, grid[0], grid[-1])
        lowest = np.argmin(sign * function(tried.ravel()).reshape(tried.shape), axis=0)
        at = tried[lowest, np.arange(len(at))]
        step /= 3
    whole = np.unique(np.concatenate([grid, at]))
    return whole, function(whole)


def _halved(function: Function, left: Array, right: Array, above: Callable[[Array, float], NDArray[np.bool_]]) -> Array:
    """The ends of brackets that were halved as far as numbers go, of both ends the one where the function is less."""
    below, beyond = function(left), function(right)
    first = above(below, 0)
    for _ in range(HALVINGS if len(left) else 0):
        middle = left + (right - left) / 2
        here = function(middle)
        same = above(here, 0) == first
        left, below = np.where(same, middle, left), np.where(same, here, below)
        right, beyond = np.where(same, right, middle), np.where(same, beyond, here)
    return np.asarray(np.where(np.abs(below) <= np.abs(beyond), left, right))
