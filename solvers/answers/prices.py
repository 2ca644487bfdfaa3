"""The price of every limit: how much the optimal value changes per unit by which the limit is raised.

With the Lagrangian f + multipliers x (g - limit) the least f changes by minus the multiplier (envelope theorem).  A
condition that fixes a single value has removed a variable from the program; its multiplier is what the rest of the
Lagrangian's gradient leaves at that variable.  A limit that holds everywhere is raised everywhere at once.

Reference: Luenberger (1969), Optimization by Vector Space Methods, section 8.5 (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np
from numpy.typing import NDArray

from solvers.problem import KINK, Condition, Seek
from solvers.solution import Price
from solvers.transcription.limits import constants_of, contacts, interval_of, quantity_bounds, restated
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Variable = tuple[int, int]
"""A state and a place, by their numbers."""

TRACE = 1e-6
"""Prices of inequalities below this, relative to value over size of the body, are left out."""


def prices(path: Trajectory) -> tuple[Price, ...]:
    """All prices in SI, in the user's sense of the value: conditions at places, integrals, then limits."""
    compiled = path.program.compiled
    problem = compiled.lowered.problem
    sign = 1.0 if problem.seek is Seek.MAXIMUM else -1.0  # the price is this times the multiplier
    multipliers = path.bound_multipliers
    own = {variable: _holding(path, variable, multipliers) for variable in _single(path)}
    elsewhere = multipliers.copy()  # what limits that hold everywhere push there
    elsewhere[[_index(path, variable) for variable, holding in own.items() if holding is not None]] = 0.0
    found = [*_conditions(path, multipliers, own), *_limits(path, elsewhere)]
    order = {c.pointer: k for k, c in enumerate((*problem.endpoints, *problem.integrals, *problem.constraints))}
    found.sort(key=lambda price: order.get(price.pointer, len(order)))
    return tuple(Price(p.label, p.pointer, sign * p.price + 0.0) for p in found if p.pointer)


def _conditions(path: Trajectory, multipliers: Array, own: Mapping[Variable, Condition | None]) -> Iterator[Price]:
    """Multipliers of the conditions at places and of the integral conditions."""
    program, compiled = path.program, path.program.compiled
    for variable, holding in own.items():
        multiplier = float(multipliers[_index(path, variable)])
        for c in _on(path, variable):
            yield Price(c.label, c.pointer, multiplier if c is holding else 0.0)
    rows, repeated = path.row_multipliers[program.rows.conditions :], {own for own, _, _ in restated(compiled)}
    told = enumerate(zip(compiled.conditions, rows, strict=True))
    yield from (Price(c.label, c.pointer, float(m)) for k, (c, m) in told if k not in repeated)


def _single(path: Trajectory) -> tuple[Variable, ...]:
    """The values of single states at single places on which there are conditions."""
    return tuple(dict.fromkeys((state, place) for state, place, _ in path.program.compiled.fixed))


def _on(path: Trajectory, variable: Variable) -> list[Condition]:
    return [c for state, place, c in path.program.compiled.fixed if (state, place) == variable]


def _index(path: Trajectory, variable: Variable) -> int:
    """Where such a value stands in z."""
    where, (state, place) = path.program.layout, variable
    return int(where.nodes[where.at_place[place], state])


def _holding(path: Trajectory, variable: Variable, multipliers: Array) -> Condition | None:
    """Of the conditions on one value the one that rests on its limit; None where a limit that holds everywhere does."""
    compiled = path.program.compiled
    index = _index(path, variable)
    constants, value, raised = constants_of(compiled), float(path.z[index]), multipliers[index] > 0

    def slack(limits: tuple[float, float]) -> float:
        return abs(limits[1] - value) if raised else abs(value - limits[0])

    slacks = {rank: slack(interval_of(c, constants)) for rank, c in enumerate(_on(path, variable))}
    nearest = min(slacks, key=lambda rank: slacks[rank])
    lower, upper, _, _ = quantity_bounds(compiled)
    everywhere = slack((float(lower[variable[0]]), float(upper[variable[0]])))
    return None if everywhere < slacks[nearest] else _on(path, variable)[nearest]


def _limits(path: Trajectory, multipliers: Array) -> Iterator[Price]:
    """Multipliers of limits that hold everywhere, summed over the curve: those of upper and lower limits apart."""
    program, compiled = path.program, path.program.compiled
    point, where, problem = compiled.point, program.layout, compiled.lowered.problem
    lines, worth = len(compiled.lowered.equalities), TRACE * abs(program.value_scale)
    rows = path.row_multipliers[program.rows.pointwise : program.rows.rims].reshape(-1, point.constraints or 1)
    touched = contacts(compiled, where, problem.held)
    for again, rank, _ in restated(compiled):
        pushed = np.zeros((1, point.constraints))
        pushed[0, rank] = path.row_multipliers[program.rows.conditions + again]
        rows, touched = np.vstack([rows, pushed]), np.vstack([touched, np.zeros(pushed.shape, np.int8)])
    pushed_on: dict[tuple[str, str], list[tuple[float, float, float]]] = {}  # a relation may be several conditions
    for k, condition in enumerate(compiled.pointwise[lines:], start=lines):
        if condition.equality:
            yield Price(condition.label, condition.pointer, float(rows[:, k].sum()))
        else:
            least, sides = worth / program.row_scale[program.rows.pointwise + k], touched[:, k]
            upper = float(np.where(sides > 0, rows[:, k], np.maximum(rows[:, k], 0.0))[sides >= 0].sum())
            lower = float(np.where(sides < 0, rows[:, k], np.minimum(rows[:, k], 0.0))[sides <= 0].sum())
            pushed_on.setdefault((condition.label, condition.pointer), []).append((upper, lower, least))
    for (label, pointer), pushes in pushed_on.items():
        upper, lower = sum(push[0] for push in pushes), sum(push[1] for push in pushes)
        yield from _told((label,) * 2, (pointer,) * 2, upper, lower, max(push[2] for push in pushes))
    held = _held(path)
    free = np.where(program.lower == program.upper, 0.0, multipliers)
    above = np.where(held > 0, multipliers, np.maximum(free, 0.0))
    below = np.where(held < 0, multipliers, np.minimum(free, 0.0))
    bounded: dict[tuple[str, int], list[tuple[str, str, float, float]]] = {}
    for unknown in problem.unknowns:
        pointer = f"/unknowns/{unknown.name}/within"
        bounded[unknown.name, 0] = [(f"{unknown.name} within", pointer, unknown.lower, unknown.upper)]
    constants = constants_of(compiled)
    for quantity, condition in compiled.bounds:
        limits = interval_of(condition, constants)
        bounded.setdefault(quantity, []).append((condition.label, condition.pointer, *limits))
    nodes = _own_nodes(path)
    for quantities, indices in ((compiled.lowered.states, where.inner), (compiled.lowered.controls, where.controls)):
        for column, quantity in enumerate(quantities):
            own = indices[:, column]
            if indices is where.inner:
                own = np.concatenate([own, where.nodes[nodes, column]])
            if bounded.get(quantity):
                least = worth / program.scale[indices[0, column]]
                yield from _attributed(bounded[quantity], float(above[own].sum()), float(below[own].sum()), least)
    for parameter, index in zip(problem.parameters, where.parameters, strict=True):
        if parameter.name.startswith(KINK + " "):  # its limits are the solver's
            continue
        limit = (f"{parameter.name} within", f"/parameters/{parameter.name}/within", parameter.lower, parameter.upper)
        yield from _attributed([limit], float(above[index]), float(below[index]), worth / program.scale[index])


def _held(path: Trajectory) -> NDArray[np.int8]:
    """For each variable whether an arc or a touch holds it on its upper (1) or lower (-1) limit; else 0.

    What a condition fixes at a place belongs to that condition.
    """
    compiled, where = path.program.compiled, path.program.layout
    lowered, held = compiled.lowered, np.zeros(where.size, np.int8)
    labels = [place.label for place in lowered.problem.places]
    for hold in lowered.problem.held:
        quantity, on = (hold.name, hold.order), where.stretch == hold.stretch
        if compiled.rank_of(hold) is not None:
            continue
        if quantity in lowered.controls:
            held[where.controls[on, lowered.controls.index(quantity)]] = hold.side
        else:
            k = lowered.states.index(quantity)
            held[where.inner[on, k]] = hold.side
            held[where.nodes[where.at_place[hold.stretch] : where.at_place[hold.stretch + 1] + 1, k]] = hold.side
    for touch in lowered.problem.touches:
        node = where.at_place[labels.index(touch.place)]
        held[where.nodes[node, lowered.states.index((touch.name, touch.order))]] = touch.side
    for state, place, condition in compiled.fixed:
        if condition.equality:
            held[where.nodes[where.at_place[place], state]] = 0
    return held


def _own_nodes(path: Trajectory) -> NDArray[np.int64]:
    """Nodes that are no collocation points themselves."""
    where = path.program.layout
    shared = np.isin(where.nodes[:, 0], where.inner[:, 0]) if where.nodes.shape[1] else np.ones(len(where.nodes), bool)
    return np.flatnonzero(~shared)


def _attributed(
    limits: list[tuple[str, str, float, float]], upper: float, lower: float, least: float
) -> Iterator[Price]:
    """Prices of the bounds of one quantity: they belong to its least upper and its greatest lower limit."""
    above = min(limits, key=lambda limit: limit[3])
    below = max(limits, key=lambda limit: limit[2])
    yield from _told((above[0], below[0]), (above[1], below[1]), upper, lower, least)


def _told(
    labels: tuple[str, str], pointers: tuple[str, str], upper: float, lower: float, least: float
) -> Iterator[Price]:
    """Those of both sides that bind.

    An interior point method leaves a trace of every multiplier, so only those above `least` count.
    """
    both = min(upper, -lower) > least
    if upper > least:
        yield Price(f"{labels[0]} (upper)" if both else labels[0], pointers[0], upper)
    if -lower > least:
        yield Price(f"{labels[1]} (lower)" if both else labels[1], pointers[1], lower)
