"""The least violation of a program: which conditions conflict, and by how much each would have to give.

Every condition of the user gets one slack, the largest amount by which it is broken anywhere; the sum of the slacks,
each relative to its condition's size, is minimised while the dynamics hold.  Where the least sum is zero the problem
has curves after all, and one of them is found.
Reference: Nocedal, Wright (2006), Numerical Optimization, section 17.2 (l1 penalty, elastic mode; from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.entries import sparse
from solvers.ipopt import Iterate, Minimum, Start, minimise
from solvers.lowering import Quantity, primed
from solvers.solution import Finding
from solvers.transcription import Program

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Group:
    """The rows and the variables of a program that belong to one condition of the user."""

    label: str
    pointer: str
    rows: Indices
    variables: Indices


@dataclass(frozen=True, slots=True)
class LeastViolation:
    """The curve that violates least (scaled z) and, worst first, what it violates; `total` is relative."""

    z: Array
    total: float
    findings: tuple[Finding, ...]
    minimum: Minimum


def groups(program: Program) -> list[Group]:
    """What may give: conditions, constraints and bounds, but neither dynamics nor fixed places."""
    compiled, where, rows = program.compiled, program.layout, program.rows
    lowered = compiled.lowered
    none = np.empty(0, np.int64)
    found = []
    count, constraints = len(where.fractions), compiled.point.constraints
    for index, condition in enumerate(compiled.pointwise):
        if index >= len(lowered.equalities):
            here = rows.pointwise + np.arange(count) * constraints + index
            found.append(Group(condition.label, condition.pointer, here, none))
    for index, condition in enumerate(compiled.conditions):
        found.append(Group(condition.label, condition.pointer, np.array([rows.conditions + index]), none))
    for state, place, condition in compiled.fixed:
        found.append(Group(condition.label, condition.pointer, none,
                           np.array([where.nodes[where.at_place[place], state]])))  # fmt: skip

    def everywhere(quantity: Quantity) -> Indices:
        if quantity in lowered.states:
            k = lowered.states.index(quantity)
            return np.unique(np.concatenate([where.nodes[:, k], where.inner[:, k]]))
        return where.controls[:, lowered.controls.index(quantity)]

    for quantity, condition in compiled.bounds:
        found.append(Group(condition.label, condition.pointer, none, everywhere(quantity)))
    for unknown in lowered.problem.unknowns:
        if np.isfinite(unknown.lower) or np.isfinite(unknown.upper):
            pointer = f"/unknowns/{unknown.name}/within"
            found.append(Group(f"{primed((unknown.name, 0))} within its bounds", pointer, none,
                               everywhere((unknown.name, 0))))  # fmt: skip
    for parameter, index in zip(lowered.problem.parameters, where.parameters, strict=True):
        if np.isfinite(parameter.lower) or np.isfinite(parameter.upper):
            pointer = f"/parameters/{parameter.name}/within"
            found.append(Group(f"{parameter.name} within its bounds", pointer, none, np.array([index])))
    return found


def least_violation(
    program: Program, z: Array, *, time_limit: float, watch: Callable[[Iterate], bool] | None = None
) -> LeastViolation:
    """Minimise the sum of the slacks from a start (scaled)."""
    parts = groups(program)
    size, count = program.layout.size, program.rows.count
    owner_of_row, owner_of_variable = np.full(count, -1), np.full(size, -1)
    for index, group in enumerate(parts):
        owner_of_row[group.rows] = index
        # A variable may be held by an endpoint value and by a bound: the endpoint value, which comes first, keeps it.
        free = group.variables[owner_of_variable[group.variables] < 0]
        owner_of_variable[free] = index
    relaxed, held = np.flatnonzero(owner_of_row >= 0), np.flatnonzero(owner_of_variable >= 0)
    hard = np.flatnonzero(owner_of_row < 0)
    m, k = len(relaxed), len(held)
    total = len(hard) + 2 * m + 2 * k
    at = np.arange(total)
    on_g = sparse((total, count), at[: len(hard) + 2 * m], np.concatenate([hard, relaxed, relaxed]),
                  np.ones(len(hard) + 2 * m))  # fmt: skip
    on_z = sparse((total, size), at[len(hard) + 2 * m :], np.concatenate([held, held]), np.ones(2 * k))
    soft = np.arange(len(hard), total)
    owners = np.concatenate([owner_of_row[relaxed]] * 2 + [owner_of_variable[held]] * 2)
    signs = np.concatenate([np.ones(m), -np.ones(m), np.ones(k), -np.ones(k)])
    on_s = sparse((total, len(parts)), soft, owners, signs)
    infinite = np.inf
    row_lower = np.concatenate([program.row_lower[hard], program.row_lower[relaxed], np.full(m, -infinite),
                                program.lower[held], np.full(k, -infinite)])  # fmt: skip
    row_upper = np.concatenate([program.row_upper[hard], np.full(m, infinite), program.row_upper[relaxed],
                                np.full(k, infinite), program.upper[held]])  # fmt: skip
    lower, upper = program.lower.copy(), program.upper.copy()
    lower[held], upper[held] = -infinite, infinite
    functions = program.functions
    w = ca.MX.sym("w", size + len(parts))
    inside, slack, constants = w[:size], w[size:], functions["c"]
    values, jacobian = functions["jac_g"](inside, constants)
    g = ca.mtimes(on_g, values) + ca.mtimes(on_z, inside) + ca.mtimes(on_s, slack)
    plain_g = ca.Function("g", [functions["z"], constants], [functions["g"]])
    rows_only = ca.mtimes(on_g, plain_g(inside, constants)) + ca.mtimes(on_z, inside) + ca.mtimes(on_s, slack)
    weight_f, weight_g = ca.MX.sym("lam_f"), ca.MX.sym("lam_g", total)
    curvature = functions["hess_lag"](inside, constants, 0, ca.mtimes(on_g.T, weight_g))
    f = ca.sum1(slack)
    slope = ca.vertcat(ca.DM.zeros(size, 1), ca.DM.ones(len(parts), 1))
    elastic = {
        "z": w,
        "c": constants,
        "f": f,
        "g": rows_only,
        "grad_f": ca.Function("grad_f", [w, constants], [f, slope],
                              ["x", "p"], ["f", "grad_f_x"]),
        "jac_g": ca.Function("jac_g", [w, constants], [g, ca.horzcat(ca.mtimes(on_g, jacobian) + on_z, on_s)],
                             ["x", "p"], ["g", "jac_g_x"]),
        "hess_lag": ca.Function("hess_lag", [w, constants, weight_f, weight_g],
                                [ca.diagcat(curvature, ca.MX(len(parts), len(parts)))],
                                ["x", "p", "lam_f", "lam_g"], ["hess_gamma_x_x"]),
    }  # fmt: skip
    grown = replace(
        program,
        layout=replace(program.layout, size=size + len(parts)),
        rows=replace(program.rows, count=total),
        lower=np.concatenate([lower, np.zeros(len(parts))]),
        upper=np.concatenate([upper, np.full(len(parts), infinite)]),
        row_lower=row_lower,
        row_upper=row_upper,
        functions=elastic,
    )
    start = np.concatenate([z, np.ones(len(parts))])
    minimum = minimise(grown, Start(start), time_limit=time_limit, watch=watch)
    answer, amounts = minimum.z[:size], minimum.z[size:]
    findings = _findings(program, parts, owner_of_variable, answer, amounts)
    return LeastViolation(answer, float(np.sum(amounts[amounts > 1e-7])), findings, minimum)


def _findings(program: Program, parts: list[Group], owners: Array, z: Array, amounts: Array) -> tuple[Finding, ...]:
    """What is broken, worst first, with the place where it is."""
    values = np.asarray(ca.Function("g", [program.functions["z"], program.functions["c"]], [program.functions["g"]])(
        z, list(program.compiled.constants))).ravel()  # fmt: skip
    row_excess = np.maximum(program.row_lower - values, values - program.row_upper)
    excess = np.maximum(program.lower - z, z - program.upper)
    found = []
    for index in np.argsort(-amounts):
        if amounts[index] <= 1e-6:
            continue
        group = parts[index]
        if len(group.rows):
            worst = int(group.rows[np.argmax(row_excess[group.rows])])
            amount = float(amounts[index] * program.row_scale[worst])
            place = _place_of_row(program, worst, z)
        else:
            own = group.variables[owners[group.variables] == index]
            if len(own) == 0:
                continue
            worst = int(own[np.argmax(excess[own])])
            amount = float(amounts[index] * program.scale[worst])
            place = _place_of_variable(program, worst, z)
        found.append(Finding(group.label, group.pointer, amount, place))
    return tuple(found)


def _place_of_row(program: Program, row: int, z: Array) -> float | None:
    if not program.rows.pointwise <= row < program.rows.rims:
        return None
    point = (row - program.rows.pointwise) // program.compiled.point.constraints
    return float(_points(program, z)[point])


def _place_of_variable(program: Program, index: int, z: Array) -> float | None:
    where = program.layout
    places = z[where.places] * program.scale[where.places]
    for table, at in ((where.nodes, program.mesh.breaks(places)), (where.inner, _points(program, z)),
                      (where.controls, _points(program, z))):  # fmt: skip
        hit = np.flatnonzero((table == index).any(axis=1))
        if len(hit):
            return float(at[hit[0]])
    return None


def _points(program: Program, z: Array) -> Array:
    where = program.layout
    places = z[where.places] * program.scale[where.places]
    return where.points(places)
