"""The price of every limit: how much the optimal value changes per unit by which the limit is raised.

With the Lagrangian f + multipliers x (g - limit) the least f changes by minus the multiplier (envelope theorem).  A
condition that fixes a single value has removed a variable from the program; its multiplier is what the rest of the
Lagrangian's gradient leaves at that variable.  A limit that holds everywhere is raised everywhere at once.

Reference: Luenberger (1969), Optimization by Vector Space Methods, section 8.5 (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from solvers.limits import constants_of, interval_of
from solvers.lowering import primed
from solvers.problem import Condition, Seek
from solvers.solution import Price
from solvers.trajectory import Trajectory

Array = NDArray[np.float64]

NEGLIGIBLE = 1e-7
"""Prices of inequalities below this, relative to value over size of the limit's body, are not worth a line."""


def prices(path: Trajectory) -> tuple[Price, ...]:
    """All prices in SI, in the user's sense of the value: conditions at places, integrals, then limits."""
    compiled = path.program.compiled
    problem = compiled.lowered.problem
    sign = 1.0 if problem.seek is Seek.MAXIMUM else -1.0  # the price is this times the multiplier
    multipliers = bound_multipliers(path)
    found = [*_conditions(path, multipliers), *_limits(path, multipliers)]
    order = {c.pointer: k for k, c in enumerate((*problem.endpoints, *problem.integrals, *problem.constraints))}
    found.sort(key=lambda price: order.get(price.pointer, len(order)))
    return tuple(Price(p.label, p.pointer, sign * p.price + 0.0) for p in found)


def bound_multipliers(path: Trajectory) -> Array:
    """Multipliers of the bounds of z in SI, also of those variables that are fixed."""
    program = path.program
    size = abs(program.value_scale)
    z, constants = path.z / program.scale, list(program.compiled.constants)
    gradient = np.asarray(program.functions["grad_f"](z, constants)[1]).ravel()
    jacobian = program.functions["jac_g"](z, constants)[1]
    pushed = np.asarray((path.row_multipliers * program.row_scale / size) @ jacobian.sparse_matrix()
                        if hasattr(jacobian, "sparse_matrix") else _product(jacobian, path, size)).ravel()  # fmt: skip
    multipliers = path.bound_multipliers.copy()
    fixed = program.lower == program.upper
    multipliers[fixed] = (-(gradient + pushed) * size / program.scale)[fixed]
    return multipliers


def _conditions(path: Trajectory, multipliers: Array) -> Iterator[Price]:
    """Multipliers of the conditions at places and of the integral conditions."""
    program, compiled = path.program, path.program.compiled
    constants = constants_of(compiled)
    where = program.layout
    for variable in {(state, place) for state, place, _ in compiled.fixed}:
        state, place = variable
        index = int(where.nodes[where.at_place[place], state])
        same = [condition for s, p, condition in compiled.fixed if (s, p) == variable]
        multiplier = float(multipliers[index])
        holding = _holding(same, constants, multiplier, float(path.z[index]))
        yield from (Price(c.label, c.pointer, multiplier if c is holding else 0.0) for c in same)
    rows = path.row_multipliers[program.rows.conditions :]
    yield from (Price(c.label, c.pointer, float(m)) for c, m in zip(compiled.conditions, rows, strict=True))


def _holding(same: list[Condition], constants: dict[str, float], multiplier: float, value: float) -> Condition:
    """Of several conditions on one value the one that rests on its limit."""

    def slack(condition: Condition) -> float:
        lower, upper = interval_of(condition, constants)
        return abs(upper - value) if multiplier > 0 else abs(value - lower)

    return min(same, key=slack)


def _limits(path: Trajectory, multipliers: Array) -> Iterator[Price]:
    """Multipliers of limits that hold everywhere, summed over the curve: those of upper and lower limits apart."""
    program, compiled = path.program, path.program.compiled
    point, where, problem = compiled.point, program.layout, compiled.lowered.problem
    lines = len(compiled.lowered.equalities)
    rows = path.row_multipliers[program.rows.pointwise : program.rows.integrals].reshape(-1, point.constraints or 1)
    for k, condition in enumerate(compiled.pointwise[lines:], start=lines):
        yield from _sides(condition.label, condition.pointer, rows[:, k], condition.equality, _worth(path))
    fixed = program.lower == program.upper
    free = np.where(fixed, 0.0, multipliers)
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
            own = free[indices[:, column]]
            if indices is where.inner:
                own = np.concatenate([own, free[where.nodes[nodes, column]]])
            yield from _attributed(primed(quantity), bounded.get(quantity, []), own, path)
    for parameter, index in zip(problem.parameters, where.parameters, strict=True):
        limit = (f"{parameter.name} within", f"/parameters/{parameter.name}/within", parameter.lower, parameter.upper)
        yield from _attributed(parameter.name, [limit], free[[index]], path)


def _own_nodes(path: Trajectory) -> Array:
    """Nodes that are no collocation points themselves."""
    where = path.program.layout
    shared = np.isin(where.nodes[:, 0], where.inner[:, 0]) if where.nodes.shape[1] else np.ones(len(where.nodes), bool)
    return np.flatnonzero(~shared)


def _attributed(
    name: str, limits: list[tuple[str, str, float, float]], multipliers: Array, path: Trajectory
) -> Iterator[Price]:
    """Prices of the bounds of one quantity: the tightest upper and the tightest lower limit."""
    upper, lower = float(multipliers[multipliers > 0].sum()), float(multipliers[multipliers < 0].sum())
    worth = _worth(path)
    finite_above = [limit for limit in limits if np.isfinite(limit[3])]
    finite_below = [limit for limit in limits if np.isfinite(limit[2])]
    if finite_above and upper > NEGLIGIBLE * worth / (abs(min(limit[3] for limit in finite_above)) or 1.0):
        label, pointer, *_ = min(finite_above, key=lambda limit: limit[3])
        yield Price(f"{label} (upper)", pointer, upper)
    if finite_below and -lower > NEGLIGIBLE * worth / (abs(max(limit[2] for limit in finite_below)) or 1.0):
        label, pointer, *_ = max(finite_below, key=lambda limit: limit[2])
        yield Price(f"{label} (lower)", pointer, lower)
    assert name


def _sides(label: str, pointer: str, multipliers: Array, equality: bool, worth: float) -> Iterator[Price]:
    if equality:
        yield Price(label, pointer, float(multipliers.sum()))
        return
    upper, lower = float(multipliers[multipliers > 0].sum()), float(multipliers[multipliers < 0].sum())
    if upper > 0 and upper > -1e-6 * lower:
        yield Price(f"{label} (upper)" if lower < -1e-6 * upper else label, pointer, upper)
    if lower < 0 and -lower > 1e-6 * upper:
        yield Price(f"{label} (lower)" if upper > -1e-6 * lower else label, pointer, lower)
    assert worth >= 0


def _worth(path: Trajectory) -> float:
    return max(abs(path.value), 1e-3 * abs(path.program.value_scale))


def _product(jacobian: object, path: Trajectory, size: float) -> Array:
    return np.asarray(path.row_multipliers * path.program.row_scale / size @ np.asarray(jacobian))
