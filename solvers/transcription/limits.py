"""The limits of a problem as bounds on the variables and constraints of its program, in SI."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import At, Node, walk
from solvers.problem import Condition, Held

if TYPE_CHECKING:
    from solvers.transcription.functions import Compiled
    from solvers.transcription.layout import Layout, Rows
    from solvers.transcription.lowering import Lowered, Quantity

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


def number(tree: Node, constants: Mapping[str, float]) -> float:
    """The value of a formula of numbers and constants."""
    return float(evaluate(tree, lambda name, order: constants[name], REAL))


def interval_of(condition: Condition, constants: Mapping[str, float]) -> tuple[float, float]:
    """The least and the greatest value that a condition allows."""
    lower = -np.inf if condition.lower is None else number(condition.lower, constants)
    upper = np.inf if condition.upper is None else number(condition.upper, constants)
    return lower, upper


def quantity_bounds(compiled: Compiled) -> tuple[Array, Array, Array, Array]:
    """Bounds of the states and of the controls: lower and upper of each, from `within` and plain constraints."""
    lowered = compiled.lowered
    constants = constants_of(compiled)
    bounds = {quantity: [-np.inf, np.inf] for quantity in (*lowered.states, *lowered.controls)}
    for unknown in lowered.problem.unknowns:
        if (unknown.name, 0) in bounds:
            bounds[unknown.name, 0] = [unknown.lower, unknown.upper]
    for quantity, condition in compiled.bounds:
        lower, upper = interval_of(condition, constants)
        bounds[quantity] = [max(bounds[quantity][0], lower), min(bounds[quantity][1], upper)]
    states = np.array([bounds[q] for q in lowered.states]).reshape(-1, 2)
    controls = np.array([bounds[q] for q in lowered.controls]).reshape(-1, 2)
    return states[:, 0], states[:, 1], controls[:, 0], controls[:, 1]


def constants_of(compiled: Compiled) -> dict[str, float]:
    """The values of the constants by name."""
    return {c.name: c.value for c in compiled.lowered.problem.constants}


def limits(compiled: Compiled, where: Layout, rows: Rows) -> tuple[Array, Array, Array, Array]:
    """Lower and upper bounds of z, then of g."""
    problem = compiled.lowered.problem
    constants = constants_of(compiled)
    lower, upper = np.full(where.size, -np.inf), np.full(where.size, np.inf)
    state_lower, state_upper, control_lower, control_upper = quantity_bounds(compiled)
    for indices in (where.nodes, where.inner):
        lower[indices], upper[indices] = state_lower, state_upper
    lower[where.controls], upper[where.controls] = control_lower, control_upper
    for held in problem.held:
        if compiled.rank_of(held) is None:
            _hold(held, compiled, where, lower, upper)
    for implied in problem.implied:
        if compiled.rank_of(implied) is None:
            _leave_out(implied, compiled, where, lower, upper)
    for touch in problem.touches:
        node = where.at_place[[place.label for place in problem.places].index(touch.place)]
        touched = (touch.name, touch.order)
        state = compiled.lowered.states.index(touched)
        at = where.nodes[node, state]  # where its limits may be left out for a stretch beside it
        lower[at] = upper[at] = state_lower[state] if touch.side < 0 else state_upper[state]
        for slope in _slopes(compiled.lowered, touched)[:1]:
            lower[where.nodes[node, slope]] = upper[where.nodes[node, slope]] = 0.0
    for parameter, index in zip(problem.parameters, where.parameters, strict=True):
        lower[index], upper[index] = parameter.lower, parameter.upper
    for place, index in zip(problem.places, where.places, strict=True):
        if index not in where.parameters:
            lower[index] = upper[index] = number(place.tree, constants)
    for state, at, condition in compiled.fixed:
        index = where.nodes[where.at_place[at], state]
        least, most = interval_of(condition, constants)
        lower[index], upper[index] = max(lower[index], least), min(upper[index], most)
    row_lower, row_upper = np.zeros(rows.count), np.zeros(rows.count)
    count = len(where.fractions)
    pointwise = np.array([interval_of(c, constants) for c in compiled.pointwise]).reshape(-1, 2)
    contact, needless = contacts(compiled, where, problem.held), contacts(compiled, where, problem.implied)
    floors = np.where(needless < 0, -np.inf, np.tile(pointwise[:, 0], (count, 1)))
    ceilings = np.where(needless > 0, np.inf, np.tile(pointwise[:, 1], (count, 1)))
    for _, rank, at in restated(compiled):
        last = int(where.first[where.at_place[at]]) - 1
        if where.ends_on_point(last) and not contact[last, rank]:
            floors[last, rank], ceilings[last, rank] = -np.inf, np.inf
    row_lower[rows.pointwise : rows.rims] = np.where(contact > 0, ceilings, floors).ravel()
    row_upper[rows.pointwise : rows.rims] = np.where(contact < 0, floors, ceilings).ravel()
    rims = np.array([interval_of(c, constants) for _, _, c in compiled.rims]).reshape(-1, 2)
    row_lower[rows.rims : rows.rims + len(rims)], row_upper[rows.rims : rows.rims + len(rims)] = rims.T
    conditions = np.array([interval_of(c, constants) for c in compiled.conditions]).reshape(-1, 2)
    row_lower[rows.conditions :], row_upper[rows.conditions :] = conditions[:, 0], conditions[:, 1]
    return lower, upper, row_lower, row_upper


def _hold(held: Held, compiled: Compiled, where: Layout, lower: Array, upper: Array) -> None:
    """Fix what is held on its limit along a stretch.

    A state that stays on a constant limit has derivatives zero: they are fixed where the stretch begins, and from
    there on follow from the dynamics.
    """
    lowered = compiled.lowered
    quantity = (held.name, held.order)
    side = lower if held.side < 0 else upper
    if quantity in lowered.controls:
        inside = where.controls[where.stretch == held.stretch, lowered.controls.index(quantity)]
        lower[inside] = upper[inside] = side[inside]
        return
    inside = _along(held, compiled, where)
    lower[inside] = upper[inside] = side[inside]
    start = where.nodes[where.at_place[held.stretch], _slopes(lowered, quantity)]
    lower[start] = upper[start] = 0.0


def _slopes(lowered: Lowered, state: Quantity) -> list[int]:
    """The states that are derivatives of one, in their order, by where they stand among all."""
    found: list[int] = []
    slope = lowered.slope_of(state)
    while slope is not None and lowered.states.index(slope) not in found:
        found.append(lowered.states.index(slope))
        slope = lowered.slope_of(slope)
    return found


def _leave_out(implied: Held, compiled: Compiled, where: Layout, lower: Array, upper: Array) -> None:
    """Do not state a limit that cannot be crossed: it would leave no room inside, and no multiplier of its own."""
    inside = _along(implied, compiled, where)
    inside = inside[lower[inside] < upper[inside]]
    if implied.side < 0:
        lower[inside] = -np.inf
    else:
        upper[inside] = np.inf


def contacts(compiled: Compiled, where: Layout, held: tuple[Held, ...]) -> NDArray[np.int8]:
    """On which limit a pointwise constraint is held at each point (M x c): -1 the lower, 1 the upper one, 0 on none.

    One on states alone is held at the node where its arc begins too, which is the last point of the stretch before:
    what is on its limit there and at all points of an interval determines as many controls as the interval has points.
    """
    count, n = len(where.fractions), compiled.point.states
    sides = np.zeros((count, len(compiled.pointwise)), np.int8)
    for one in held:
        rank = compiled.rank_of(one)
        if rank is None:
            continue
        sides[where.stretch == one.stretch, rank] = one.side
        entry = where.first[where.at_place[one.stretch]] - 1
        if compiled.reached_by(n + rank)[0] > 0 and entry >= 0 and where.ends_on_point(entry):
            sides[entry, rank] = one.side
    return sides


def restated(compiled: Compiled) -> Iterator[tuple[int, int, int]]:
    """The conditions at places that only repeat a pointwise constraint there: their rank, its rank, the place."""
    for rank, constraint in enumerate(compiled.pointwise):
        for own, condition in enumerate(compiled.conditions):
            same = condition.pointer == constraint.pointer and condition.label == constraint.label
            if same and (condition.lower is constraint.lower) and (condition.upper is constraint.upper):
                tree = next(node.place for node in walk(condition.body) if isinstance(node, At))
                places = [place.tree for place in compiled.lowered.problem.places]
                yield own, rank, places.index(tree)


def _along(held: Held, compiled: Compiled, where: Layout) -> Indices:
    """Where the values of a control or state along a stretch stand in z, those of a state at both ends included."""
    if (held.name, held.order) in compiled.lowered.controls:
        k = compiled.lowered.controls.index((held.name, held.order))
        return np.asarray(where.controls[where.stretch == held.stretch, k])
    k = compiled.lowered.states.index((held.name, held.order))
    start, end = where.at_place[held.stretch], where.at_place[held.stretch + 1]
    return np.concatenate([where.nodes[start : end + 1, k], where.inner[where.stretch == held.stretch, k]])
