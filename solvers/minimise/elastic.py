"""The least violation of a program: which conditions conflict, and by how much each would have to give.

Every condition of the user gets one slack, the largest amount by which it is broken anywhere; the sum of the slacks,
each relative to its condition's size, is minimised while the dynamics hold.  Where the least sum is zero the problem
has curves after all, and one of them is found.
Reference: Nocedal, Wright (2006), Numerical Optimization, section 17.2 (l1 penalty, elastic mode; from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.minimise.ipopt import LEAST_SQUARES_MULTIPLIERS, Iterate, Minimum, Start, minimise
from solvers.solution import Finding
from solvers.transcription.entries import Entries
from solvers.transcription.lowering import Quantity, primed
from solvers.transcription.program import Program

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


SETTINGS = LEAST_SQUARES_MULTIPLIERS | {"ipopt.tol": 1e-8, "ipopt.acceptable_tol": 1e-5, "ipopt.max_iter": 300}
"""What conflicts is named to some digits."""


PULL = 1e-4
"""Weight of the distance from the start: small enough that what can be met is met, it makes the curve the only one."""


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


@dataclass(frozen=True, slots=True)
class _Elastic:
    """The program whose variables are z and the slacks, and whose f is the sum of these."""

    lower: Array
    upper: Array
    row_lower: Array
    row_upper: Array
    numbers: _Numbers


class _Numbers:
    """Its numbers: f is the sum of the slacks and the pull to the start.

    Its variables are z and the slacks; its rows the hard ones of g, the relaxed ones plus and minus their slack, and
    held z the same.
    """

    def __init__(self, program: Program, hard: Indices, relaxed: Indices, held: Indices, owners: Indices,
                 signs: Array, slacks: int, start: Array) -> None:  # fmt: skip
        self._inner, self._size, self._slacks, self._start = program.numbers, program.layout.size, slacks, start
        self._hard, self._relaxed, self._held, self._owners, self._signs = hard, relaxed, held, owners, signs
        h, m, k = len(hard), len(relaxed), len(held)
        inner, entries = self._inner.jacobian_pattern, Entries()
        for own, at in ((hard, 0), (relaxed, h), (relaxed, h + m)):
            row = np.full(inner.shape[0], -1)
            row[own] = at + np.arange(len(own))
            kept = np.flatnonzero(row[inner.rows] >= 0)
            entries.add(row[inner.rows[kept]], inner.columns()[kept], 1.0, kept)
        entries.add(h + 2 * m + np.arange(2 * k), np.tile(held, 2), 1.0)
        entries.add(h + np.arange(len(owners)), self._size + owners, signs)
        size = self._size + slacks
        self._jacobian = entries.recipe((h + 2 * (m + k), size))
        curved, entries, diagonal = self._inner.hessian_pattern, Entries(), np.arange(self._size)
        entries.add(curved.rows, curved.columns(), 1.0, np.arange(len(curved.rows)))
        entries.add(diagonal, diagonal, PULL, len(curved.rows))
        self._hessian = entries.recipe((size, size))
        self.jacobian_pattern = self._jacobian.pattern
        self.hessian_pattern = self._hessian.pattern

    def value(self, w: Array) -> float:
        return float(w[self._size :].sum() + PULL / 2 * np.sum((w[: self._size] - self._start) ** 2))

    def gradient(self, w: Array) -> Array:
        return np.concatenate([PULL * (w[: self._size] - self._start), np.ones(self._slacks)])

    def constraints(self, w: Array) -> Array:
        z, slack = w[: self._size], w[self._size :]
        g = self._inner.constraints(z)
        soft = np.concatenate([g[self._relaxed], g[self._relaxed], z[self._held], z[self._held]])
        return np.concatenate([g[self._hard], soft + self._signs * slack[self._owners]])

    def jacobian(self, w: Array) -> Array:
        return self._jacobian.nonzeros(self._inner.jacobian(w[: self._size]))

    def hessian(self, w: Array, weight_f: float, weight_g: Array) -> Array:
        weights = np.zeros(self._inner.jacobian_pattern.shape[0])
        h, m = len(self._hard), len(self._relaxed)
        weights[self._hard] = weight_g[:h]
        weights[self._relaxed] = weight_g[h : h + m] + weight_g[h + m : h + 2 * m]
        return self._hessian.nonzeros(np.append(self._inner.hessian(w[: self._size], 0.0, weights), weight_f))


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
    program: Program, z: Array, *, deadline: Deadline, watch: Callable[[Iterate], bool] | None = None
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
    owners = np.concatenate([owner_of_row[relaxed]] * 2 + [owner_of_variable[held]] * 2)
    signs = np.concatenate([np.ones(m), -np.ones(m), np.ones(k), -np.ones(k)])
    infinite = np.inf
    row_lower = np.concatenate([program.row_lower[hard], program.row_lower[relaxed], np.full(m, -infinite),
                                program.lower[held], np.full(k, -infinite)])  # fmt: skip
    row_upper = np.concatenate([program.row_upper[hard], np.full(m, infinite), program.row_upper[relaxed],
                                np.full(k, infinite), program.upper[held]])  # fmt: skip
    lower, upper = program.lower.copy(), program.upper.copy()
    lower[held], upper[held] = -infinite, infinite
    elastic = _Elastic(
        lower=np.concatenate([lower, np.zeros(len(parts))]),
        upper=np.concatenate([upper, np.full(len(parts), infinite)]),
        row_lower=row_lower,
        row_upper=row_upper,
        numbers=_Numbers(program, hard, relaxed, held, owners, signs, len(parts), z),
    )
    start = np.concatenate([z, np.ones(len(parts))])
    minimum = minimise(elastic, Start(start), deadline=deadline, watch=watch, options=SETTINGS)
    answer, amounts = minimum.z[:size], minimum.z[size:]
    findings = _findings(program, parts, owner_of_variable, answer, amounts)
    return LeastViolation(answer, float(np.sum(amounts[amounts > 1e-7])), findings, minimum)


def _findings(program: Program, parts: list[Group], owners: Array, z: Array, amounts: Array) -> tuple[Finding, ...]:
    """What is broken, worst first, with the place where it is."""
    values = program.numbers.constraints(z)
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
