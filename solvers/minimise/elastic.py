"""The least violation of a program: which conditions conflict, and by how much each would have to give.

Every condition of the user gets one slack, the largest amount by which it is broken anywhere; the sum of the slacks,
each relative to its condition's size, is minimised while the dynamics hold.  Where the least sum is zero the problem
has curves after all, and one of them is found.
Reference: Nocedal, Wright (2006), Numerical Optimization, section 17.2 (l1 penalty, elastic mode; from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from solvers.deadline import Deadline
from solvers.minimise.ipopt import LEAST_SQUARES_MULTIPLIERS, Iterate, Minimum, Start, minimise
from solvers.problem import Condition
from solvers.solution import Finding
from solvers.transcription.entries import Entries
from solvers.transcription.lowering import Quantity, primed
from solvers.transcription.program import Program, restated

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


SETTINGS = LEAST_SQUARES_MULTIPLIERS | {"ipopt.tol": 1e-8, "ipopt.acceptable_tol": 1e-5}
"""What conflicts is named to some digits."""


LEAST_SLACK = 0.01
"""With what a slack begins where nothing is broken yet."""

STEADY = {"ipopt.mu_strategy": "monotone"}

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
    """The curve that violates least (scaled z) and, worst first, what it violates; `total` is relative.

    `forces` says by pointer how hard each condition presses against the others: what has no part in a conflict does
    not.
    """

    z: Array
    total: float
    findings: tuple[Finding, ...]
    forces: Mapping[str, float]
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
    """Its numbers: f is the sum of the weighed slacks and the pull to the start.

    Its variables are z and the slacks; its rows the hard ones of g, the relaxed ones plus and minus their slack, and
    held z the same.
    """

    def __init__(self, program: Program, hard: Indices, relaxed: Indices, held: Indices, owners: Indices,
                 signs: Array, prices: Array, start: Array, pull: float) -> None:  # fmt: skip
        self._inner, self._size, self._prices = program.numbers, program.layout.size, prices
        self._start, self._pull = start, pull
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
        size = self._size + len(prices)
        self._jacobian = entries.recipe((h + 2 * (m + k), size))
        curved, entries, diagonal = self._inner.hessian_pattern, Entries(), np.arange(self._size)
        entries.add(curved.rows, curved.columns(), 1.0, np.arange(len(curved.rows)))
        entries.add(diagonal, diagonal, pull, len(curved.rows))
        self._hessian = entries.recipe((size, size))
        self.jacobian_pattern = self._jacobian.pattern
        self.hessian_pattern = self._hessian.pattern

    def value(self, w: Array) -> float:
        return float(self._prices @ w[self._size :] + self._pull / 2 * np.sum((w[: self._size] - self._start) ** 2))

    def gradient(self, w: Array) -> Array:
        return np.concatenate([self._pull * (w[: self._size] - self._start), self._prices])

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
    """What may give: conditions, constraints and bounds of the user, but neither dynamics nor fixed places."""
    compiled, where, rows = program.compiled, program.layout, program.rows
    lowered = compiled.lowered
    none = np.empty(0, np.int64)
    found = []
    count, constraints = len(where.fractions), compiled.point.constraints
    for index, condition in enumerate(compiled.pointwise):
        if index >= len(lowered.equalities):
            here = rows.pointwise + np.arange(count) * constraints + index
            found.append(Group(condition.label, condition.pointer, here, none))
    for index, (_, _, condition) in enumerate(compiled.rims):
        found.append(Group(condition.label, condition.pointer, np.array([rows.rims + index]), none))
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
        if " " in parameter.name:  # no user can write that: what the solver has added for its own use holds
            continue
        if np.isfinite(parameter.lower) or np.isfinite(parameter.upper):
            pointer = f"/parameters/{parameter.name}/within"
            found.append(Group(f"{parameter.name} within its bounds", pointer, none, np.array([index])))
    return [group for group in found if group.pointer]  # so does what has no place in the document


def without(program: Program, pointers: Collection[str]) -> Program:
    """The same program with some conditions of the user dropped, by their pointers."""
    compiled, problem = program.compiled, program.compiled.lowered.problem

    def loose(condition: Condition) -> Condition:
        return replace(condition, lower=None, upper=None) if condition.pointer in pointers else condition

    unknowns = tuple(replace(u, lower=-np.inf, upper=np.inf) if f"/unknowns/{u.name}/within" in pointers else u
                     for u in problem.unknowns)  # fmt: skip
    parameters = tuple(replace(p, lower=-np.inf, upper=np.inf) if f"/parameters/{p.name}/within" in pointers else p
                       for p in problem.parameters)  # fmt: skip
    free = replace(problem, unknowns=unknowns, parameters=parameters)
    return restated(program, replace(
        compiled,
        lowered=replace(compiled.lowered, problem=free),
        pointwise=tuple(map(loose, compiled.pointwise)),
        bounds=tuple((quantity, condition) for quantity, condition in compiled.bounds
                     if condition.pointer not in pointers),
        conditions=tuple(map(loose, compiled.conditions)),
        fixed=tuple((state, place, condition) for state, place, condition in compiled.fixed
                    if condition.pointer not in pointers),
        rims=tuple((control, place, loose(condition)) for control, place, condition in compiled.rims),
    ))  # fmt: skip


def least_violation(
    program: Program,
    z: Array,
    *,
    deadline: Deadline,
    watch: Callable[[Iterate], bool] | None = None,
    prices: Mapping[str, float] = MappingProxyType({}),
    pull: float = PULL,
    steadily: bool = False,
    iterations: int = 300,
) -> LeastViolation:
    """Minimise the sum of the slacks from a start (scaled), each times the price of its pointer, or once.

    In so many `iterations` at most.  `steadily` lowers the barrier step by step: slower where all goes well, but from a
    start that is no good it arrives.
    """
    parts = groups(program)
    size = program.layout.size
    owner_of_row, owner_of_variable = _owners(program, parts)
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
        numbers=_Numbers(
            program,
            hard,
            relaxed,
            held,
            owners,
            signs,
            np.array([prices.get(group.pointer, 1.0) for group in parts]),
            z,
            pull,
        ),
    )
    start = np.concatenate([z, _first_slacks(program, z, owner_of_row, owner_of_variable, len(parts))])
    minimum = minimise(elastic, Start(start), deadline=deadline, watch=watch,
                       options=SETTINGS | {"ipopt.max_iter": iterations} | (STEADY if steadily else {}))  # fmt: skip
    answer, amounts = minimum.z[:size], minimum.z[size:]
    findings = _findings(program, parts, owner_of_variable, answer, amounts)
    forces: dict[str, float] = {}
    above_rows, below_rows, above, below = np.split(minimum.multipliers[len(hard) :], np.cumsum([m, m, k]))
    net = np.concatenate([above_rows + below_rows, above + below])  # what both sides of an equality say cancels
    pushes = np.bincount(np.concatenate([owner_of_row[relaxed], owner_of_variable[held]]), np.abs(net), len(parts))
    for group, push in zip(parts, pushes, strict=True):
        forces[group.pointer] = forces.get(group.pointer, 0.0) + float(push)
    return LeastViolation(answer, float(np.sum(amounts[amounts > 1e-7])), findings, forces, minimum)


def _owners(program: Program, parts: list[Group]) -> tuple[Indices, Indices]:
    """Which group every row and every variable belongs to, -1 where to none."""
    of_rows, of_variables = np.full(program.rows.count, -1), np.full(program.layout.size, -1)
    for index, group in enumerate(parts):
        of_rows[group.rows] = index
        # A variable may be held by an endpoint value and by a bound: the endpoint value, which comes first, keeps it.
        of_variables[group.variables[of_variables[group.variables] < 0]] = index
    return of_rows, of_variables


def broken(program: Program, z: Array) -> tuple[tuple[Finding, ...], float]:
    """What scaled variables break as they stand, worst first, and how far they miss the dynamics (relative)."""
    parts = groups(program)
    of_rows, of_variables = _owners(program, parts)
    rows, variables = _excess(program, z)
    amounts = np.zeros(len(parts))
    np.maximum.at(amounts, of_rows[of_rows >= 0], rows[of_rows >= 0])
    np.maximum.at(amounts, of_variables[of_variables >= 0], variables[of_variables >= 0])
    return _findings(program, parts, of_variables, z, amounts), float(rows[: program.rows.pointwise].max(initial=0.0))


def _excess(program: Program, z: Array) -> tuple[Array, Array]:
    """How far rows and variables are outside of their limits, scaled; what has no value counts as one."""
    values = program.numbers.constraints(z)
    rows = np.maximum(program.row_lower - values, values - program.row_upper)
    return np.nan_to_num(rows, nan=1.0), np.maximum(program.lower - z, z - program.upper)


def _first_slacks(program: Program, z: Array, of_rows: Indices, of_variables: Indices, count: int) -> Array:
    """Somewhat more than what each condition is broken by at the start: at least a little, at most one."""
    excess = np.concatenate(_excess(program, z))
    owners = np.concatenate([of_rows, of_variables])
    slacks: Array = np.full(count, LEAST_SLACK)
    np.maximum.at(slacks, owners[owners >= 0], 1.1 * np.clip(excess[owners >= 0], 0.0, 1.0))
    return np.asarray(np.minimum(slacks, 1.0))


def _findings(program: Program, parts: list[Group], owners: Indices, z: Array, amounts: Array) -> tuple[Finding, ...]:
    """What is broken, worst first, with the place where it is."""
    row_excess, excess = _excess(program, z)
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
