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
FINEST = 1e-10
"""Width, relative to the whole, below which a piece of the curve is not cut further."""


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
    size = float(np.abs(functions[leading](breaks)).max()) or 1.0
    pieces: list[tuple[float, float, dict[str, Array]]] = []
    waiting = [(float(a), float(b)) for a, b in pairwise(breaks)][::-1]
    while waiting:
        start, end = waiting.pop()
        left, right = (float(value) for value in x(np.array([start, end])))
        width = right - left
        if width <= FINEST * 1e-3 * span:
            continue
        samples = _inverse(x, start, end, (left + right) / 2 + nodes * width / 2)
        modes = fit @ functions[leading](samples)
        probes = _inverse(x, start, end, (left + right) / 2 + between * width / 2)
        miss = np.abs(legendre.legval(between, modes) - functions[leading](probes)).max()
        if miss > 1e-10 * size and width > FINEST * span and end - start > 1e-9:
            middle = (start + end) / 2
            waiting += [(middle, end), (start, middle)]
            continue
        pieces.append((left, right, {name: fit @ function(samples) for name, function in functions.items()}))
    edges = np.array([pieces[0][0], *(right for _, right, _ in pieces)])
    return Curve(edges, {name: tuple(part[name] for _, _, part in pieces) for name in functions})


def _inverse(x: Callable[[Array], Array], start: float, end: float, wanted: Array) -> Array:
    """Parameters at which x has the wanted values, by bisection with all values at once."""
    low, high = np.full_like(wanted, start), np.full_like(wanted, end)
    for _ in range(50):
        middle = (low + high) / 2
        below = x(middle) < wanted
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return (low + high) / 2
