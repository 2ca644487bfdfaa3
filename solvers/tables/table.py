"""Measured functions of one or two arguments: points, and the piecewise polynomial that runs through them.

* smooth: cubics with two continuous derivatives;
* monotone: cubics with one, that rise and fall only where the points do;
* linear: straight lines whose corners are rounded off, so that derivatives exist.

On a grid the same is done along both arguments.  Beyond its range a table goes on along its tangent or stands still.
Where neither is allowed, conditions keep the arguments inside, and its tangent is met only on the way there.

References: see `solvers.tables.slopes`; for grids de Boor (1978), A Practical Guide to Splines, chapter XVII (from
memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from enum import Enum
from functools import cached_property
from math import perm

import numpy as np
from numpy.typing import ArrayLike, NDArray

from solvers.tables.slopes import keep_shape, shape_preserving_slopes, spline_slopes
from solvers.units import PLAIN, Unit

Array = NDArray[np.float64]

CORNER = 1e-4
"""How far from a corner a table is rounded off, relative to the shorter of the steps beside it."""


class Between(Enum):
    """How a table runs between its points."""

    SMOOTH = "smooth"
    MONOTONE = "monotone"
    LINEAR = "linear"


class Outside(Enum):
    """What a table does beyond its range."""

    REFUSE = "refuse"
    HOLD = "hold"
    EXTEND = "extend"


class OutsideRangeError(ValueError):
    """A table was asked for a value that it does not have."""


@dataclass(frozen=True, slots=True)
class Pieces:
    """A piecewise polynomial in one or two arguments.

    Per argument: `edges` between its C cells, and the `origins` of these.  `coefficients` (C x degree+1, or
    C x C' x degree+1 x degree+1) belong to powers of the distances from the origins.
    """

    edges: tuple[Array, ...]
    origins: tuple[Array, ...]
    coefficients: Array


@dataclass(frozen=True, eq=False)
class Table:
    """A measured function, in SI units.

    `knots` are n increasing places of each argument, `values` (n, or n x n') what was measured there; `corner` is how
    far from its corners it is rounded off, relative to the shorter of the steps beside them.
    """

    name: str
    arguments: tuple[str, ...]
    knots: tuple[Array, ...]
    values: Array
    between: Between = Between.SMOOTH
    outside: Outside = Outside.REFUSE
    unit: Unit = PLAIN
    argument_units: tuple[Unit, ...] = ()
    corner: float = CORNER

    @property
    def has_corners(self) -> bool:
        """Whether it has corners that are rounded off."""
        return self.between is Between.LINEAR or self.outside is Outside.HOLD

    @cached_property
    def exact(self) -> Table:
        """The same table with sharp corners."""
        return replace(self, corner=0.0)

    @property
    def reaches(self) -> tuple[float, ...]:
        """How far from corners of each argument they are rounded off at most."""
        return tuple(self.corner * float(np.diff(knots).max()) for knots in self.knots)

    @property
    def ranges(self) -> tuple[tuple[float, float], ...]:
        """The least and the greatest place of each argument."""
        return tuple((float(knots[0]), float(knots[-1])) for knots in self.knots)

    @cached_property
    def pieces(self) -> Pieces:
        """The polynomials, the two beyond each range included."""
        with np.errstate(all="ignore"):  # numbers near the end of their range
            return _pieces(self)

    def value(self, *arguments: ArrayLike, orders: Sequence[int] = ()) -> Array:
        """Values, or derivatives of these orders by each argument, at arguments that broadcast; never refuses."""
        pieces = self.pieces
        places = np.broadcast_arrays(*(np.asarray(argument, dtype=np.float64) for argument in arguments))
        cells = [np.searchsorted(edges, at, side="right") for edges, at in zip(pieces.edges, places, strict=True)]
        powers = differentiated(pieces.coefficients, orders)[tuple(cells)]
        for at, origins, cell in reversed(list(zip(places, pieces.origins, cells, strict=True))):
            away = (at - origins[cell]).reshape(at.shape + (1,) * (powers.ndim - 1 - at.ndim))
            total = powers[..., -1]
            for power in range(powers.shape[-1] - 2, -1, -1):
                total = total * away + powers[..., power]
            powers = total
        return np.asarray(powers)

    def strict_value(self, *arguments: float, orders: Sequence[int] = ()) -> float:
        """One value.  Raises OutsideRangeError where the table is refused beyond its range."""
        if self.outside is Outside.REFUSE:
            units = self.argument_units or [PLAIN] * len(arguments)
            for argument, (low, high), unit in zip(arguments, self.ranges, units, strict=True):
                if not low <= argument <= high:
                    shown = [f"{number / unit.factor:.9g}" for number in (argument, low, high)]
                    raise OutsideRangeError(f"{shown[0]} is outside of the table's range, {shown[1]} to {shown[2]}")
        return float(self.value(*arguments, orders=orders))


def differentiated(coefficients: Array, orders: Sequence[int]) -> Array:
    """The coefficients of the derivatives of these orders by each argument (none: the function itself)."""
    for argument, order in enumerate(orders):
        axis = coefficients.ndim - len(orders) + argument
        degree = coefficients.shape[axis] - 1
        if order > degree:
            return np.zeros(coefficients.shape[: -len(orders)] + (1,) * len(orders))
        shape = [1] * coefficients.ndim
        shape[axis] = -1
        factors = np.array([float(perm(power, order)) for power in range(order, degree + 1)]).reshape(shape)
        coefficients = np.take(coefficients, range(order, degree + 1), axis) * factors
    return coefficients


def _pieces(table: Table) -> Pieces:
    """Along one argument after the other: the polynomials of the first have coefficients that run along the second."""
    if len(table.knots) == 1:
        (knots,) = table.knots
        nodes, cells = _along(table, knots, table.values, None)
        return Pieces((_edges(nodes),), (_origins(nodes),), cells)
    across, up = table.knots
    columns: Array | None = None
    if table.between is Between.MONOTONE:
        slopes, rates, twists = keep_shape(across, up, table.values)
        nodes, rows = _along(table, across, table.values, slopes)
        columns = np.moveaxis(_along(table, across, rates, twists)[1], 2, 0)
    else:
        nodes, rows = _along(table, across, table.values, None)
    heights, cells = _along(table, up, np.moveaxis(rows, 2, 0), columns)
    return Pieces((_edges(nodes), _edges(heights)), (_origins(nodes), _origins(heights)), cells.transpose(2, 0, 3, 1))


def _edges(nodes: Array) -> Array:
    """Where the next polynomial begins; the last node still belongs to the range."""
    return np.append(nodes[:-1], np.nextafter(nodes[-1], np.inf))


def _origins(nodes: Array) -> Array:
    return np.concatenate([nodes[:1], nodes])


def _along(table: Table, knots: Array, values: Array, slopes: Array | None) -> tuple[Array, Array]:
    """Nodes, and the polynomials (C x degree+1 x k...) between and beyond them, of `values` (n x k...) at n knots."""
    hold = table.outside is Outside.HOLD
    if table.between is Between.LINEAR:
        nodes, values, slopes = _rounded_lines(knots, values, hold, table.corner)
        return nodes, _cells(nodes, values, slopes, 2)
    if slopes is None:
        find = spline_slopes if table.between is Between.SMOOTH else shape_preserving_slopes
        slopes = find(knots, values.reshape(len(knots), -1)).reshape(values.shape)
    if hold:
        knots, values, slopes = _rounded_ends(knots, values, slopes, table.corner)
    return knots, _cells(knots, values, slopes, 3)


def _cells(nodes: Array, values: Array, slopes: Array, degree: int) -> Array:
    """Polynomials with these values and slopes at n nodes: n - 1 between them, a line before and one behind."""
    steps = np.diff(nodes)
    steps = np.where(steps == 0, 1.0, steps).reshape(-1, *[1] * (values.ndim - 1))  # at a sharp corner two are one
    rises = np.diff(values, axis=0) / steps
    first, last = slopes[:-1], slopes[1:]
    if degree == 2:
        between = [values[:-1], first, (last - first) / (2 * steps)]
    else:
        between = [values[:-1], first, (3 * rises - 2 * first - last) / steps, (first + last - 2 * rises) / steps**2]
    beyond = [
        np.stack([values[end], slopes[end], *[np.zeros_like(values[end])] * (degree - 1)])[None] for end in (0, -1)
    ]
    return np.concatenate([beyond[0], np.stack(between, axis=1), beyond[1]])


def _rounded_lines(knots: Array, values: Array, hold: bool, corner: float) -> tuple[Array, Array, Array]:
    """A broken line by nodes, values and slopes, with two nodes for every corner."""
    steps = np.diff(knots)
    rises = np.diff(values, axis=0) / steps.reshape(-1, *[1] * (values.ndim - 1))
    still = np.zeros_like(rises[:1])
    rises = np.concatenate([still if hold else rises[:1], rises, still if hold else rises[-1:]])
    reach = corner * np.minimum(np.append(steps, steps[-1]), np.append(steps[0], steps))
    down, up = (sign * reach.reshape(-1, *[1] * (values.ndim - 1)) for sign in (-1, 1))
    pairs = [np.stack(pair, axis=1) for pair in (
        (knots - reach, knots + reach),
        (values + down * rises[:-1], values + up * rises[1:]),
        (rises[:-1], rises[1:]),
    )]  # fmt: skip
    nodes, heights, slopes = (pair.reshape(-1, *pair.shape[2:]) for pair in pairs)
    kept = slice(None) if hold else slice(1, -1)  # a line that goes on has no corner at its ends
    return nodes[kept], heights[kept], slopes[kept]


def _rounded_ends(knots: Array, values: Array, slopes: Array, corner: float) -> tuple[Array, Array, Array]:
    """Two nodes for each end, at which a curve turns into its continuation at rest."""
    found: list[tuple[Array, Array, Array]] = []
    cells = _cells(knots, values, slopes, 3)
    for end, cell, sign in ((0, 1, 1.0), (-1, -2, -1.0)):
        step = abs(float(knots[end] - knots[1 if end == 0 else -2]))
        reach = sign * corner * step
        away = reach if end == 0 else step + reach
        c = cells[cell]
        inside = c[0] + away * (c[1] + away * (c[2] + away * c[3])), c[1] + away * (2 * c[2] + 3 * away * c[3])
        pair = (np.array([knots[end] - reach, knots[end] + reach]), np.stack([values[end], inside[0]]),
                np.stack([np.zeros_like(inside[1]), inside[1]]))  # fmt: skip
        found.append(pair if end == 0 else (pair[0][::-1], pair[1][::-1], pair[2][::-1]))
    first, last = found
    nodes, heights, tilts = (
        np.concatenate([first[part], (knots, values, slopes)[part][1:-1], last[part]]) for part in range(3)
    )
    return nodes, heights, tilts
