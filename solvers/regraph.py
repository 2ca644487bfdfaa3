"""From a curve in parametric form back to functions of x, as exactly as the parametric one is known."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from itertools import pairwise

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.curve import Curve

Array = NDArray[np.float64]

DEGREE = 12
FINEST = 1e-11
"""Width, relative to the whole, below which a piece of the curve is not cut further."""
MOST_PIECES = 600


def regraph(
    breaks: Array, x: Callable[[Array], Array], functions: Mapping[str, Callable[[Array], Array]], leading: str
) -> Curve:
    """Functions of a parameter s as functions of x(s), which must not decrease.

    `breaks` are breaks in s; pieces are halved until `leading` is matched to nearly all digits.  Pieces over which x
    does not advance (vertical ones) have no room in a function of x and are left out.
    """
    span = float(x(breaks[-1:])[0] - x(breaks[:1])[0])
    nodes = legendre.leggauss(DEGREE + 1)[0]
    fit = np.linalg.inv(legendre.legvander(nodes, DEGREE))
    between = np.linspace(-0.97, 0.97, 9)
    places = np.concatenate([nodes, between])
    size = float(np.abs(functions[leading](breaks)).max()) or 1.0
    pieces: list[tuple[float, float, dict[str, Array]]] = []
    waiting = [(float(a), float(b)) for a, b in pairwise(breaks)][::-1]
    while waiting:
        start, end = waiting.pop()
        left, right = (float(value) for value in x(np.array([start, end])))
        width = right - left
        if width <= 1e-3 * FINEST * span:
            continue
        samples = _inverse(x, start, end, (left + right) / 2 + places * width / 2)
        inside, probes = samples[: len(nodes)], samples[len(nodes) :]
        modes = fit @ functions[leading](inside)
        miss = np.abs(legendre.legval(between, modes) - functions[leading](probes)).max()
        if miss > 1e-10 * size and width > FINEST * span and len(pieces) + len(waiting) < MOST_PIECES:
            middle = (start + end) / 2
            waiting += [(middle, end), (start, middle)]
            continue
        pieces.append((left, right, {name: fit @ function(inside) for name, function in functions.items()}))
    edges = np.array([pieces[0][0], *(right for _, right, _ in pieces)])
    return Curve(edges, {name: tuple(part[name] for _, _, part in pieces) for name in functions})


def _inverse(x: Callable[[Array], Array], start: float, end: float, wanted: Array) -> Array:
    """Parameters at which x has the wanted values: each bracket is cut into sixteen, six times, then a chord."""
    low, high = np.full_like(wanted, start), np.full_like(wanted, end)
    steps = np.linspace(0.0, 1.0, 17)
    for _ in range(6):
        grid = low[:, None] + (high - low)[:, None] * steps
        values = x(grid.ravel()).reshape(grid.shape)
        values[:, 0], values[:, -1] = -np.inf, np.inf
        cell = (values <= wanted[:, None]).sum(axis=1) - 1
        rows = np.arange(len(wanted))
        low, high = grid[rows, cell], grid[rows, cell + 1]
    below, above = x(low), x(high)
    rise = np.where(above > below, above - below, 1.0)
    return low + (high - low) * np.clip((wanted - below) / rise, 0.0, 1.0)
