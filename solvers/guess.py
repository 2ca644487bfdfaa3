"""The first guess: straight lines through what is known, bent where that satisfies more of the problem.

A line is all that the endpoint conditions say.  Where it is undefined (an integrand that is infinite on it) or breaks a
constraint or an integral condition (a hose longer than the distance), a bend of low order is added to the unknowns,
with the sign and the size that violate least.  What the user gives as a guess is kept as it is.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.polynomial import polynomial
from numpy.typing import NDArray

from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import Node
from solvers.functions import Compiled
from solvers.limits import constants_of, interval_of, number, quantity_bounds
from solvers.problem import Problem, Unknown
from solvers.transcription import Layout

Array = NDArray[np.float64]

BENDS = (0.1, -0.1, 0.3, -0.3, 1.0, -1.0)
"""Sizes of the bends that are tried, relative to the size of the unknown or to the range."""

ARRAYS: dict[str, Callable[..., Any]] = {
    "sqrt": np.sqrt, "exp": np.exp, "log": np.log, "sin": np.sin, "cos": np.cos, "tan": np.tan,
    "asin": np.arcsin, "acos": np.arccos, "atan": np.arctan, "atan2": np.arctan2, "sinh": np.sinh, "cosh": np.cosh,
    "tanh": np.tanh, "abs": np.abs, "sign": np.sign, "hypot": np.hypot, "power": np.power,
    "min": lambda *values: np.minimum.reduce(np.broadcast_arrays(*values)),
    "max": lambda *values: np.maximum.reduce(np.broadcast_arrays(*values)),
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Guess:
    """Values (SI) of all variables of a layout, and how much of the problem they violate (0: nothing)."""

    z: Array
    violation: float
    bent: bool


def guesses(compiled: Compiled, where: Layout, ends: Array | None = None) -> list[Guess]:
    """Guesses on a mesh, best first.  `ends` overrides the values of the places."""
    problem = compiled.lowered.problem
    constants = constants_of(compiled)
    parameters = np.array([_parameter_guess(p.lower, p.upper, p.guess) for p in problem.parameters])
    places = _places(problem, constants, parameters, where)
    if ends is not None:
        places = ends
    for index, place in zip(where.places, places, strict=True):
        hit = np.flatnonzero(where.parameters == index)
        parameters[hit] = place
    plain = _assemble(compiled, where, places, parameters, 0.0)
    found = [Guess(plain, _violation(compiled, where, plain), bent=False)]
    if found[0].violation > 1e-3:
        for bend in BENDS:
            z = _assemble(compiled, where, places, parameters, bend)
            found.append(Guess(z, _violation(compiled, where, z), bent=True))
    # A bend must be clearly better than none.
    return sorted(found, key=lambda guess: guess.violation * (1.1 if guess.bent else 1.0))


def _parameter_guess(lower: float, upper: float, given: float | None) -> float:
    if given is not None:
        return given
    if np.isfinite(lower) and np.isfinite(upper):
        return float(np.sqrt(lower * upper)) if lower > 0 and upper > 20 * lower else (lower + upper) / 2
    if np.isfinite(lower):
        return lower + max(1.0, abs(lower)) if lower != 0 else 1.0
    if np.isfinite(upper):
        return upper - max(1.0, abs(upper)) if upper != 0 else -1.0
    return 1.0


def _places(problem: Problem, constants: dict[str, float], parameters: Array, where: Layout) -> Array:
    """Values of the places; free ones without bounds of their own are spread between their neighbours."""
    values = np.full(len(problem.places), np.nan)
    for index, place in enumerate(problem.places):
        hit = np.flatnonzero(where.parameters == where.places[index])
        if len(hit) == 0:
            values[index] = number(place.tree, constants)
        elif index in (0, len(values) - 1) or problem.parameters[hit[0]].guess is not None:
            values[index] = parameters[hit[0]]
    if values[-1] <= values[0]:
        values[-1] = values[0] + max(1.0, abs(values[0]))
    known = np.flatnonzero(np.isfinite(values))
    return np.asarray(np.interp(np.arange(len(values)), known, values[known]))


def _assemble(compiled: Compiled, where: Layout, places: Array, parameters: Array, bend: float) -> Array:
    """All variables for one bend."""
    lowered = compiled.lowered
    problem = lowered.problem
    starts, ends = places[where.stretch], places[where.stretch + 1]
    points = starts + where.fractions * (ends - starts)
    nodes = _nodes(where, points, places)
    z = np.zeros(where.size)
    z[where.places], z[where.parameters] = places, parameters
    known = _known_values(compiled)
    constants = constants_of(compiled) | {p.name: v for p, v in zip(problem.parameters, parameters, strict=True)}
    state_lower, state_upper, control_lower, control_upper = quantity_bounds(compiled)
    for turn, unknown in enumerate(problem.unknowns):
        at = np.concatenate([nodes, points])
        middle = _middle(compiled, unknown, state_lower, state_upper, control_lower, control_upper)
        values = _unknown(unknown, at, places, known, constants, problem.independent, bend, turn, middle)
        for order in range(unknown.order + 1):
            quantity = (unknown.name, order)
            if quantity in lowered.states:
                k = lowered.states.index(quantity)
                clipped = np.clip(values[order], state_lower[k], state_upper[k])
                z[where.inner[:, k]] = clipped[len(nodes) :]
                z[where.nodes[:, k]] = clipped[: len(nodes)]
            elif quantity in lowered.controls:
                k = lowered.controls.index(quantity)
                inside = np.clip(values[order][len(nodes) :], control_lower[k], control_upper[k])
                z[where.controls[:, k]] = inside
    z[where.integrals] = _integrals(compiled, where, z)
    return z


def _nodes(where: Layout, points: Array, places: Array) -> Array:
    """Places of the nodes: the stretch's own ends, and between them the ends of the intervals."""
    count = len(where.first) - 1
    nodes = np.empty(count + 1)
    for k in range(count):
        inside = slice(where.first[k], where.first[k + 1])
        stretch = where.stretch[where.first[k]]
        left = places[stretch] if k in where.at_place else nodes[k]
        nodes[k] = left
        width = where.measures[inside].sum() * (places[stretch + 1] - places[stretch])
        nodes[k + 1] = left + width
    nodes[where.at_place] = places
    return nodes


def _known_values(compiled: Compiled) -> dict[tuple[str, int], list[tuple[int, float]]]:
    """Values at places that conditions fix, or bound on one side, by quantity."""
    constants = constants_of(compiled)
    known: dict[tuple[str, int], list[tuple[int, float]]] = {}
    for state, place, condition in compiled.fixed:
        lower, upper = interval_of(condition, constants)
        value = lower if np.isfinite(lower) else upper
        if condition.equality or not (lower <= 0.0 <= upper):
            known.setdefault(compiled.lowered.states[state], []).append((place, value))
    return known


def _middle(compiled: Compiled, unknown: Unknown, state_lower: Array, state_upper: Array, control_lower: Array,
            control_upper: Array) -> float:  # fmt: skip
    """A value inside the bounds of an unknown about which nothing else is known."""
    lowered = compiled.lowered
    quantity = (unknown.name, 0)
    if quantity in lowered.states:
        k = lowered.states.index(quantity)
        lower, upper = state_lower[k], state_upper[k]
    else:
        k = lowered.controls.index(quantity)
        lower, upper = control_lower[k], control_upper[k]
    if np.isfinite(lower) and np.isfinite(upper):
        return float((lower + upper) / 2)
    if np.isfinite(lower):
        return float(lower + max(1.0, abs(lower))) if lower >= 0 else 0.0
    if np.isfinite(upper):
        return float(upper - max(1.0, abs(upper))) if upper <= 0 else 0.0
    return 0.0


def _unknown(
    unknown: Unknown,
    at: Array,
    places: Array,
    known: dict[tuple[str, int], list[tuple[int, float]]],
    constants: dict[str, float],
    independent: str,
    bend: float,
    turn: int,
    middle: float,
) -> list[Array]:
    """Values at `at` of an unknown and its derivatives, lowest first."""
    grid, back = np.unique(at, return_inverse=True)
    span = places[-1] - places[0]
    if unknown.guess is not None:
        rows = [_given(unknown.guess, grid, constants, independent)]
        for _ in range(unknown.order):
            rows.append(np.gradient(rows[-1], grid))
        return [row[back] for row in rows]
    line = _line(known.get((unknown.name, 0)), grid, places)
    rows = [np.full_like(grid, middle) if line is None else line]
    for order in range(1, unknown.order + 1):
        line = _line(known.get((unknown.name, order)), grid, places)
        slope = np.gradient(rows[0], grid) if order == 1 else np.zeros_like(grid)
        rows.append(slope if line is None else line)
    if bend and unknown.order:
        size = float(np.abs(rows[0]).max()) or abs(span)
        shape = polynomial.polypow([0.0, 4.0, -4.0], max(1, unknown.order // 2 + unknown.order % 2))
        if turn % 2:
            shape = polynomial.polymul(shape, [1.0, -2.0])
        fraction = (grid - places[0]) / span
        for order in range(unknown.order + 1):
            rows[order] = rows[order] + bend * size * polynomial.polyval(fraction, shape) / span**order
            shape = polynomial.polyder(shape)
    return [row[back] for row in rows]


def _given(guess: Node | tuple[tuple[float, float], ...], grid: Array, constants: dict[str, float],
           independent: str) -> Array:  # fmt: skip
    """The user's guess on a grid."""
    if isinstance(guess, tuple):
        places, values = np.array(guess).T
        return np.asarray(np.interp(grid, places, values))
    with np.errstate(all="ignore"):
        value = evaluate(guess, lambda name, order: grid if name == independent else constants[name], ARRAYS)
    return np.broadcast_to(np.asarray(value, dtype=float), grid.shape)


def _line(known: list[tuple[int, float]] | None, at: Array, places: Array) -> Array | None:
    """Straight lines through known values."""
    if not known:
        return None
    ordered = sorted(known)
    return np.asarray(np.interp(at, [places[index] for index, _ in ordered], [value for _, value in ordered]))


def _point_values(compiled: Compiled, where: Layout, z: Array) -> Array:
    """Outputs of the point function at every point (M x outputs)."""
    count = len(where.fractions)
    starts, ends = where.places[where.stretch], where.places[where.stretch + 1]
    v = np.hstack([z[where.inner], z[where.controls], z[starts][:, None], z[ends][:, None],
                   np.tile(z[where.parameters], (count, 1))])  # fmt: skip
    d = np.hstack([where.fractions[:, None], np.tile(compiled.constants, (count, 1))])
    return np.asarray(compiled.point.value.map(count)(v.T, d.T)).T


def _integrals(compiled: Compiled, where: Layout, z: Array) -> Array:
    point = compiled.point
    outputs = _point_values(compiled, where, z)
    first = point.states + point.constraints
    totals = where.measures @ outputs[:, first : first + point.integrals]
    return np.where(np.isfinite(totals), totals, 0.0)


def _violation(compiled: Compiled, where: Layout, z: Array) -> float:
    """How much of the problem a guess violates: undefined values first, then constraints and conditions."""
    point = compiled.point
    constants = constants_of(compiled)
    outputs = _point_values(compiled, where, z)
    undefined = float(np.mean(~np.isfinite(outputs)))
    y = np.concatenate([z[where.nodes[where.at_place]].ravel(), z[where.places], z[where.parameters],
                        z[where.integrals]])  # fmt: skip
    end = np.asarray(compiled.end.value(y, compiled.constants)).ravel()
    undefined += float(np.mean(~np.isfinite(end)))
    total = 0.0
    pointwise = outputs[:, point.states : point.states + point.constraints]
    for values, condition in (*zip(pointwise.T, compiled.pointwise, strict=True),
                              *zip(end[:-1], compiled.conditions, strict=True)):  # fmt: skip
        lower, upper = interval_of(condition, constants)
        excess = np.maximum(np.maximum(lower - values, values - upper), 0.0)
        size = max(float(np.nanmax(np.abs(values), initial=0.0)),
                   *(abs(limit) for limit in (lower, upper) if np.isfinite(limit)))  # fmt: skip
        total += float(np.nanmean(excess)) / size if size > 0 else 0.0
    return 1e3 * undefined + total
