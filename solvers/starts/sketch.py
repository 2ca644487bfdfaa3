"""Curves drawn from what the endpoint conditions say: lines through known values, bent if asked for."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.polynomial import polynomial
from numpy.typing import NDArray

from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import SIDE, Node
from solvers.observations import known_values
from solvers.problem import Unknown
from solvers.transcription.functions import Compiled
from solvers.transcription.layout import Layout
from solvers.transcription.limits import constants_of, interval_of, quantity_bounds
from solvers.transcription.lowering import Quantity
from solvers.transcription.mesh import Mesh

Array = NDArray[np.float64]

ARRAYS: dict[str, Callable[..., Any]] = {
    "sqrt": np.sqrt, "exp": np.exp, "log": np.log, "sin": np.sin, "cos": np.cos, "tan": np.tan,
    "asin": np.arcsin, "acos": np.arccos, "atan": np.arctan, "atan2": np.arctan2, "sinh": np.sinh, "cosh": np.cosh,
    "tanh": np.tanh, "abs": np.abs, "sign": np.sign, "hypot": np.hypot, "power": np.power,
    "min": lambda *values: np.minimum.reduce(np.broadcast_arrays(*values)),
    "max": lambda *values: np.maximum.reduce(np.broadcast_arrays(*values)),
    "table": lambda table, orders, *arguments: table.value(*arguments, orders=orders),
    SIDE: lambda at, place: np.sign(at - place),
}  # fmt: skip
"""The operations of formulas on arrays."""


@dataclass(frozen=True, slots=True)
class Bend:
    """A bend added to every line: its size relative to the unknown (or the range), and its number of half waves."""

    size: float = 0.0
    waves: int = 1


class Sketch:
    """The lines of one guess on a mesh, which any bend is added to."""

    def __init__(self, compiled: Compiled, mesh: Mesh, where: Layout, places: Array, parameters: Array) -> None:
        self._compiled, self._where = compiled, where
        self._places, self._parameters = places, parameters
        self._bounds = _bounds(compiled)
        nodes = mesh.breaks(places)
        self._grid, self._back = np.unique(np.concatenate([nodes, where.points(places)]), return_inverse=True)
        self._nodes = len(nodes)
        self._known = _known_values(compiled)
        self._rows = [self._drawn(unknown) for unknown in compiled.lowered.problem.unknowns]

    def _drawn(self, unknown: Unknown) -> list[Array]:
        """An unknown and its derivatives on the grid."""
        problem, grid = self._compiled.lowered.problem, self._grid
        if unknown.guess is None:
            return _lines(unknown, grid, self._places, self._known, between(*self._bounds[unknown.name, 0]))
        given = {p.name: float(v) for p, v in zip(problem.parameters, self._parameters, strict=True)}
        rows = [given_values(unknown.guess, grid, constants_of(self._compiled) | given, problem.independent)]
        for order in range(1, unknown.order + 1):
            lines = order == 1 and isinstance(unknown.guess, tuple)
            rows.append(_slopes(unknown.guess, grid) if lines else np.gradient(rows[-1], grid))
        return rows

    def bent(self, bend: Bend, sizes: Mapping[str, float] = MappingProxyType({})) -> Array:
        """All variables (SI) but the integrals, which stay zero.  `sizes` are those of unknowns that else are zero."""
        lowered, where, grid = self._compiled.lowered, self._where, self._grid
        start, span = self._places[0], self._places[-1] - self._places[0]
        z = np.zeros(where.size)
        z[where.places], z[where.parameters] = self._places, self._parameters
        for turn, (unknown, drawn) in enumerate(zip(lowered.problem.unknowns, self._rows, strict=True)):
            rows = list(drawn)
            if bend.size and unknown.order and (unknown.guess is None or unknown.sketched):
                _add(bend, rows, (grid - start) / span, span, sizes.get(unknown.name, span), turn)
            modes = lowered.problem.start.modes.get(unknown.name, ())
            if modes:
                held = {index for index, _ in self._known.get((unknown.name, 0), ())}
                ends = (0 in held, len(self._places) - 1 in held)
                _vary(modes, rows, grid - start, span, self._bounds[unknown.name, 0], ends)
            for order, row in enumerate(rows):
                quantity = (unknown.name, order)
                if quantity not in self._bounds:
                    continue
                values = np.clip(row, *self._bounds[quantity])[self._back]
                if quantity in lowered.states:
                    k = lowered.states.index(quantity)
                    z[where.inner[:, k]] = values[self._nodes :]
                    z[where.nodes[:, k]] = values[: self._nodes]
                else:
                    z[where.controls[:, lowered.controls.index(quantity)]] = values[self._nodes :]
        return z


def _bounds(compiled: Compiled) -> dict[Quantity, tuple[float, float]]:
    """Lower and upper bound of every state and control."""
    lowered = compiled.lowered
    state_lower, state_upper, control_lower, control_upper = quantity_bounds(compiled)
    quantities = (*lowered.states, *lowered.controls)
    lower, upper = np.concatenate([state_lower, control_lower]), np.concatenate([state_upper, control_upper])
    return {q: (float(a), float(b)) for q, a, b in zip(quantities, lower, upper, strict=True)}


def _known_values(compiled: Compiled) -> dict[Quantity, list[tuple[int, float]]]:
    """Values at places (by index) that conditions fix, or hold away from zero, or that were measured, by quantity."""
    constants = constants_of(compiled)
    known: dict[Quantity, list[tuple[int, float]]] = {}
    for state, place, condition in compiled.fixed:
        lower, upper = interval_of(condition, constants)
        if condition.equality or not lower <= 0.0 <= upper:
            value = lower if np.isfinite(lower) else upper
            known.setdefault(compiled.lowered.states[state], []).append((place, value))
    problem = compiled.lowered.problem
    ordinals = {id(place.tree): index for index, place in enumerate(problem.places)}
    for name, order, place_tree, value in known_values(problem):
        values = known.setdefault((name, order), [])
        if all(place != ordinals[id(place_tree)] for place, _ in values):
            values.append((ordinals[id(place_tree)], value))
    return known


def between(lower: float, upper: float) -> float:
    """A value inside the bounds of an unknown about which nothing else is known."""
    if np.isfinite(lower) and np.isfinite(upper):
        return (lower + upper) / 2
    if np.isfinite(lower) and lower >= 0:
        return lower + max(1.0, abs(lower))
    if np.isfinite(upper) and upper <= 0:
        return upper - max(1.0, abs(upper))
    return 0.0


def _lines(
    unknown: Unknown, grid: Array, places: Array, known: dict[Quantity, list[tuple[int, float]]], middle: float
) -> list[Array]:
    """An unknown and its derivatives, lowest first: each a line through its own known values, else the slope of y."""

    def line(order: int) -> Array | None:
        values = sorted(known.get((unknown.name, order), []))
        if not values:
            return None
        return np.asarray(np.interp(grid, [places[index] for index, _ in values], [value for _, value in values]))

    smooth = _through_all(unknown, grid, places, known)
    if smooth is not None:
        return smooth
    rows = [np.full_like(grid, middle) if (first := line(0)) is None else first]
    for order in range(1, unknown.order + 1):
        own = line(order)
        if own is None:
            own = np.gradient(rows[0], grid) if order == 1 else np.zeros_like(grid)
        rows.append(own)
    return rows


MOST_KNOWN = 6
"""Known values of an unknown and its derivatives up to which one polynomial through all of them stays calm."""


def _through_all(
    unknown: Unknown, grid: Array, places: Array, known: dict[Quantity, list[tuple[int, float]]]
) -> list[Array] | None:
    """The polynomial of least degree through the known values of an unknown and its derivatives, and its derivatives.

    None where only values or too many are known, or where these do not determine it.
    """
    start, span = places[0], places[-1] - places[0]
    given = [
        (order, (places[index] - start) / span, value * span**order)
        for order in range(unknown.order + 1)
        for index, value in known.get((unknown.name, order), ())
    ]
    if len(given) > MOST_KNOWN or all(order == 0 for order, _, _ in given):
        return None
    powers = np.eye(len(given))
    matrix = np.array(
        [[polynomial.polyval(at, polynomial.polyder(p, order)) for p in powers] for order, at, _ in given]
    )
    if np.linalg.cond(matrix) > 1e6:
        return None
    shape = np.linalg.solve(matrix, [value for _, _, value in given])
    share = (grid - start) / span
    return [
        polynomial.polyval(share, polynomial.polyder(shape, order)) / span**order for order in range(unknown.order + 1)
    ]


def _add(bend: Bend, rows: list[Array], fraction: Array, span: float, size: float, turn: int) -> None:
    """Add a bend that is flat enough at both ends for the unknown's order; every second unknown is out of step.

    It is relative to the unknown, or to `size` where that is zero.
    """
    size = float(np.abs(rows[0]).max()) or abs(size)
    for k, shape in enumerate(_shapes(len(rows) - 1, bend.waves - 1 + turn % 2)):
        rows[k] = rows[k] + bend.size * size * polynomial.polyval(fraction, shape) / span**k


@lru_cache
def _shapes(order: int, nodes: int) -> list[Array]:
    """A polynomial on 0 to 1 that is flat at both ends and has so many zeros between, and its derivatives."""
    shape = polynomial.polypow([0.0, 4.0, -4.0], max(1, (order + 1) // 2))
    for _ in range(nodes):
        shape = polynomial.polymul(shape, [1.0, -2.0])
    return [np.asarray(polynomial.polyder(shape, k)) for k in range(order + 1)]


def _vary(
    modes: tuple[float, ...],
    rows: list[Array],
    way: Array,
    span: float,
    bounds: tuple[float, float],
    held: tuple[bool, bool],
) -> None:
    """Add waves as of a string whose ends are held or free: sin(k pi s), sin((k - 1/2) pi s) or cos((k - 1) pi s).

    Their size is half the range of the bounds, else that of the unknown, else the length of the way.
    """
    size = (bounds[1] - bounds[0]) / 2
    if not np.isfinite(size):
        size = float(max(np.abs(rows[0]).max(), np.ptp(rows[0]))) or abs(span)
    for count, amplitude in enumerate(modes):
        waves = np.pi * (count + 1 - (2 - sum(held)) / 2)
        phase = 0.0 if held[0] else np.pi / 2
        for order, row in enumerate(rows):
            wave = np.sin(waves * way / span + phase + order * np.pi / 2)
            rows[order] = row + amplitude * size * (waves / span) ** order * wave


def _slopes(guess: Node | tuple[tuple[float, float], ...], grid: Array) -> Array:
    """The slopes of the lines through given points; at a point that of the line before it, beyond them none."""
    places, values = np.array(guess, dtype=float).T
    if len(places) < 2:
        return np.zeros_like(grid)
    rounding = 1e-12 * float(np.ptp(places))
    line = np.clip(np.searchsorted(places + rounding, grid, side="left") - 1, 0, len(places) - 2)
    widths = np.diff(places)
    slopes = np.diff(values) / np.where(widths > 0, widths, 1.0)
    inside = (grid >= places[0] - rounding) & (grid <= places[-1] + rounding)
    return np.where(inside, slopes[line], 0.0)


def given_values(
    guess: Node | tuple[tuple[float, float], ...], grid: Array, numbers: dict[str, float], independent: str
) -> Array:
    """The user's guess on a grid."""
    if isinstance(guess, tuple):
        places, values = np.array(guess).T
        return np.asarray(np.interp(grid, places, values))
    with np.errstate(all="ignore"):
        value = evaluate(guess, lambda name, order: grid if name == independent else numbers[name], ARRAYS)
    return np.array(np.broadcast_to(np.asarray(value, dtype=np.float64), grid.shape))
