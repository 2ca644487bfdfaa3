"""From a curve in parametric form back to functions of x, as exactly as the parametric one is known."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import lru_cache

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.curve import Curve
from solvers.series import basis

Array = NDArray[np.float64]

DEGREE = 12
FINEST = 1e-11
"""Width, relative to the whole, below which a piece of the curve is not cut further."""
MOST_PIECES = 600
CHORDS = 12
EXACT = 1e-15
CLOSE = 1e-3
"""How near to a place, relative to the values around, chords come ever faster ..."""
STAYING = 0.25
"""... so that where two leave more than this of a miss it is rounding."""


def regraph(
    breaks: Array, x: Callable[[Array], Array], functions: Mapping[str, Callable[[Array], Array]], leading: str
) -> Curve:
    """Functions of a parameter s as functions of x(s), which must not decrease.

    `breaks` are breaks in s; pieces are halved until `leading` is matched to nearly all digits.  Pieces over which x
    does not advance (vertical ones) have no room in a function of x and are left out.
    """
    span = float(x(breaks[-1:])[0] - x(breaks[:1])[0])
    places, fit, probing = _fitting()
    size = float(np.abs(functions[leading](breaks)).max()) or 1.0
    done: list[tuple[Array, Array, Array]] = []
    starts, ends, count = breaks[:-1], breaks[1:], 0
    while len(starts):
        left, right = x(starts), x(ends)
        width = right - left
        advancing = width > 1e-3 * FINEST * span
        starts, ends, left, right, width = (values[advancing] for values in (starts, ends, left, right, width))
        wanted = (left + right)[:, None] / 2 + places * width[:, None] / 2
        inside, probes = np.split(_inverse(x, starts, ends, wanted), [DEGREE + 1], axis=1)
        misses = np.abs(_at(functions[leading], inside) @ fit.T @ probing.T - _at(functions[leading], probes))
        count += len(starts)
        good = (misses.max(axis=1) <= 1e-10 * size) | (width <= FINEST * span) | (count >= MOST_PIECES)
        done.append((left[good], right[good], inside[good]))
        middles = (starts[~good] + ends[~good]) / 2
        starts, ends = np.concatenate([starts[~good], middles]), np.concatenate([middles, ends[~good]])
    lefts, rights, inside = (np.concatenate(parts) for parts in zip(*done, strict=True))
    order = np.argsort(lefts)
    return Curve(
        np.concatenate([lefts[order[:1]], rights[order]]),
        {name: tuple(_at(function, inside[order]) @ fit.T) for name, function in functions.items()},
    )


@lru_cache
def _fitting() -> tuple[Array, Array, Array]:
    """Local places that a polynomial is fitted at and then some between, what fits it, and its values between."""
    nodes, between = legendre.leggauss(DEGREE + 1)[0], np.linspace(-0.97, 0.97, 9)
    fit: Array = np.linalg.inv(basis(nodes, DEGREE)).astype(np.float64)
    return np.concatenate([nodes, between]), fit, basis(between, DEGREE)


def _at(function: Callable[[Array], Array], places: Array) -> Array:
    """A function of a list at a table of places."""
    return np.asarray(function(places.ravel()).reshape(places.shape))


def _inverse(x: Callable[[Array], Array], low: Array, high: Array, wanted: Array) -> Array:
    """Parameters at which x has the wanted values, a row for each bracket: it is cut into sixteen, then by chords.

    An end of the bracket that has stayed twice counts as half as far off, so that both ends move (the Illinois method;
    Dowell, Jarratt, 1971, A modified regula falsi method for computing the root of an equation, BIT 11; from memory).
    """
    grid = low[:, None] + (high - low)[:, None] * np.linspace(0.0, 1.0, 17)
    values = _at(x, grid)[:, None, :] - wanted[:, :, None]
    cell = np.clip((values <= 0).sum(axis=-1) - 1, 0, 15)
    rows, columns = np.ogrid[: len(wanted), : wanted.shape[1]]
    low, high, below, above = (part.ravel() for part in (
        grid[rows, cell], grid[rows, cell + 1], values[rows, columns, cell], values[rows, columns, cell + 1]
    ))  # fmt: skip
    goal, size = wanted.ravel(), np.abs(values).max(initial=0.0)
    at, before = low, np.zeros(len(low))
    misses = [np.inf, np.inf]
    for _ in range(CHORDS):
        rise = np.where(above > below, above - below, 1.0)
        at = low - (high - low) * np.clip(below / rise, -1.0, 0.0)
        here = x(at) - goal
        misses.append(float(np.abs(here).max(initial=0.0)))
        rounding = STAYING * misses[-3] < misses[-1] <= CLOSE * size
        if misses[-1] <= EXACT * size or rounding:
            break
        left = here < 0
        side = np.where(left, -1.0, 1.0)
        stayed = np.where(side == before, 0.5, 1.0)
        above, below = np.where(left, stayed * above, here), np.where(left, here, stayed * below)
        low, high, before = np.where(left, at, low), np.where(left, high, at), side
    return at.reshape(wanted.shape)
