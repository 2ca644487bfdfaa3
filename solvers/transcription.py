"""A compiled problem on a mesh as one sparse program: direct collocation with constant scatter matrices.

The program's variables z are, interval by interval, the states at its left end, the states and controls at its points,
then the last states, the places, the parameters and the integrals, each divided by its scale.  Its constraints are, in
this order: collocation defects, end values of Gauss intervals, pointwise constraints, controls at the ends,
definitions of the integrals, conditions at places.  Every nonlinear number is made by the two functions of
`solvers.functions`, mapped; all else is constant, so that the set-up is a few array operations whatever the size of the
mesh.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.collocation import Family, Scheme
from solvers.entries import Entries, column, fetch, part
from solvers.functions import Compiled
from solvers.layout import Layout, Rows, calm_entries, layout, row_order, spread
from solvers.limits import limits
from solvers.mesh import Mesh
from solvers.problem import Seek
from solvers.scaling import RowSizes, Scales

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Program:
    """The sparse program: minimise f subject to bounds on z and g, all scaled."""

    compiled: Compiled
    mesh: Mesh
    layout: Layout
    rows: Rows
    scales: Scales
    scale: Array  # z times scale is in SI
    row_scale: Array  # g times row_scale is in SI
    value_scale: float  # f times value_scale is the functional in SI (negative for a maximum)
    lower: Array
    upper: Array
    row_lower: Array
    row_upper: Array
    gather: Indices  # M x inputs of the point function
    end_gather: Indices
    functions: dict[str, Any]  # f, g, grad_f, jac_g, hess_lag as CasADi functions


def transcribe(compiled: Compiled, mesh: Mesh, scales: Scales, row_sizes: RowSizes) -> Program:
    """Put a compiled problem on a mesh."""
    where = layout(compiled, mesh)
    rows = row_order(compiled, mesh, where)
    scale = spread(compiled, where, scales)
    row_scale = _row_scale(compiled, mesh, where, scales, row_sizes)
    count, size = len(where.fractions), where.size
    starts, ends = where.places[where.stretch], where.places[where.stretch + 1]
    gather = np.hstack([where.inner, where.controls, starts[:, None], ends[:, None],
                        np.tile(where.parameters, (count, 1))]).astype(np.int64)  # fmt: skip
    end_gather = np.concatenate([where.nodes[where.at_place].ravel(), where.places, where.parameters,
                                 where.integrals]).astype(np.int64)  # fmt: skip
    sign = -1.0 if compiled.lowered.problem.seek is Seek.MAXIMUM else 1.0
    none = np.empty(0)
    program = Program(compiled, mesh, where, rows, scales, scale, row_scale, sign * row_sizes.value,
                      none, none, none, none, gather, end_gather, {})  # fmt: skip
    lower, upper, row_lower, row_upper = limits(compiled, where, rows)
    program = replace(program, lower=lower / scale, upper=upper / scale, row_lower=row_lower / row_scale,
                      row_upper=row_upper / row_scale)  # fmt: skip
    z, constants = ca.MX.sym("z", size), ca.MX.sym("c", len(compiled.constants))
    return replace(program, functions=_Graph(program, z, constants).functions())


def _row_scale(compiled: Compiled, mesh: Mesh, where: Layout, scales: Scales, row_sizes: RowSizes) -> Array:
    """One scale for every row."""
    gauss = sum(i.scheme.family is Family.GAUSS for i in mesh.intervals)
    linear = [control for control, _, _ in (*compiled.rims, *calm_entries(compiled, mesh))]
    return np.concatenate([
        np.tile(scales.states, len(where.fractions) + gauss),
        np.tile(row_sizes.pointwise, len(where.fractions)),
        scales.controls[linear],
        scales.integrals,
        row_sizes.conditions,
    ])  # fmt: skip


class _Graph:
    """The expressions that the minimiser calls: f, g and their exact derivatives, from the mapped functions."""

    def __init__(self, program: Program, z: ca.MX, constants: ca.MX) -> None:
        self.program, self.z, self.constants = program, z, constants
        where, rows, point, end = program.layout, program.rows, program.compiled.point, program.compiled.end
        self.count, self.conditions = len(where.fractions), end.outputs - 1
        self.value_factor = 1 / program.value_scale
        ordinal = np.arange(self.count)[:, None]
        n, c, q = point.states, point.constraints, point.integrals
        # Where every output of the point function goes: a row and a factor; the functional, the last one, has no row.
        self.target = np.hstack([rows.defects + ordinal * n + np.arange(n), rows.pointwise + ordinal * c + np.arange(c),
                                 np.tile(rows.integrals + np.arange(q), (self.count, 1))]).astype(np.int64)  # fmt: skip
        widths = np.repeat([i.width for i in program.mesh.intervals], np.diff(where.first))
        factor = [
            np.tile(-widths[:, None], (1, n)),
            np.ones((self.count, c)),
            np.tile(-where.measures[:, None], (1, q)),
        ]
        self.factor = np.hstack(factor) / program.row_scale[self.target]
        self.cost = where.measures * self.value_factor
        self.condition_rows = rows.conditions + np.arange(self.conditions)
        self.v = ca.reshape(self._fetch(program.gather.ravel()), point.inputs, self.count)
        self.d = ca.vertcat(column(where.fractions).T, ca.repmat(constants, 1, self.count))
        self.y = self._fetch(program.end_gather)

    def _fetch(self, indices: Indices) -> ca.MX:
        """Variables in SI."""
        return fetch(self.z, indices) * column(self.program.scale[indices])

    def functions(self) -> dict[str, Any]:
        """Everything by the names that `solvers.ipopt` uses."""
        z, constants = self.z, self.constants
        f, g = self._values()
        numbers = ca.vertcat(_nonzeros(self.program.compiled.point.jacobian, self.count, self.v, self.d),
                             self.program.compiled.end.jacobian(self.y, constants))  # fmt: skip
        weight_f, weight_g = ca.MX.sym("lam_f"), ca.MX.sym("lam_g", self.program.rows.count)
        gradient = ca.densify(self._gradient(numbers))
        jacobian, hessian = self._jacobian(numbers), self._hessian(weight_f, weight_g)
        return {
            "z": z,
            "c": constants,
            "f": f,
            "g": g,
            "grad_f": ca.Function("grad_f", [z, constants], [f, gradient], ["x", "p"], ["f", "grad_f_x"]),
            "jac_g": ca.Function("jac_g", [z, constants], [g, jacobian], ["x", "p"], ["g", "jac_g_x"]),
            "hess_lag": ca.Function("hess_lag", [z, constants, weight_f, weight_g], [hessian],
                                    ["x", "p", "lam_f", "lam_g"], ["hess_gamma_x_x"]),
        }  # fmt: skip

    def _values(self) -> tuple[ca.MX, ca.MX]:
        """f and g."""
        program, point = self.program, self.program.compiled.point
        where, rows, n, c = program.layout, program.rows, point.states, point.constraints
        outputs = point.value.map(self.count)(self.v, self.d)
        end = program.compiled.end.value(self.y, self.constants)
        rates = outputs[:n, :] * ca.reshape(column(self.factor[:, :n].ravel()), n, self.count)
        bodies = outputs[n : n + c, :] * ca.reshape(column(self.factor[:, n : n + c].ravel()), c, self.count)
        totals = ca.mtimes(outputs[n + c : -1, :], column(where.measures)) / column(
            program.row_scale[rows.integrals : rows.conditions]
        )
        loose = Entries()
        for row, columns, values in _loose_rows(program):
            loose.add(row, columns, values * program.scale[columns] / program.row_scale[row])
        count = rows.conditions
        linear = ca.mtimes(loose.matrix((count, where.size), ca.MX(0, 1)), self.z)
        g = ca.vertcat(
            ca.vec(rates) + _slopes(program, self.z),
            part(linear, rows.ends, rows.pointwise),
            ca.vec(bodies),
            part(linear, rows.rims, rows.integrals),
            part(linear, rows.integrals, rows.conditions) - totals,
            part(end, 0, self.conditions) / column(program.row_scale[self.condition_rows]),
        )
        f = ca.mtimes(outputs[-1, :], column(self.cost)) + end[-1] * self.value_factor
        return f, g

    def _moving(self, columns: Indices) -> NDArray[np.bool_]:
        """Of inputs of the point function those that are not fixed places all along: these need no derivatives."""
        program, point = self.program, self.program.compiled.point
        first = point.states + point.controls
        fixed = program.lower == program.upper
        still = [k for k in (first, first + 1) if fixed[program.gather[:, k]].all()]
        return ~np.isin(columns, still)

    def _jacobian(self, numbers: ca.MX) -> ca.MX:
        """Of g by z."""
        program, point, end = self.program, self.program.compiled.point, self.program.compiled.end
        where, rows, scale, row_scale = program.layout, program.rows, program.scale, program.row_scale
        entries = Entries()
        for row, columns, values in (*_loose_rows(program), *_slope_entries(program)):
            entries.add(row, columns, values * scale[columns] / row_scale[row])
        out, by = np.array(point.jacobian_rows, int), np.array(point.jacobian_columns, int)
        inside = np.flatnonzero((out < point.outputs - 1) & self._moving(by))
        columns = program.gather[:, by[inside]]
        sources = np.arange(self.count)[:, None] * len(out) + inside
        entries.add(self.target[:, out[inside]], columns, self.factor[:, out[inside]] * scale[columns], sources)
        end_out, end_by = np.array(end.jacobian_rows, int), np.array(end.jacobian_columns, int)
        inside = np.flatnonzero(end_out < self.conditions)
        columns, own = program.end_gather[end_by[inside]], self.condition_rows[end_out[inside]]
        entries.add(own, columns, scale[columns] / row_scale[own], self.count * len(out) + inside)
        return entries.matrix((rows.count, where.size), numbers)

    def _gradient(self, numbers: ca.MX) -> ca.MX:
        """Of f by z."""
        program, point, end = self.program, self.program.compiled.point, self.program.compiled.end
        entries = Entries()
        out, by = np.array(point.jacobian_rows, int), np.array(point.jacobian_columns, int)
        inside = np.flatnonzero((out == point.outputs - 1) & self._moving(by))
        columns = program.gather[:, by[inside]]
        sources = np.arange(self.count)[:, None] * len(out) + inside
        entries.add(columns, 0, self.cost[:, None] * program.scale[columns], sources)
        end_out, end_by = np.array(end.jacobian_rows, int), np.array(end.jacobian_columns, int)
        inside = np.flatnonzero(end_out == self.conditions)
        columns = program.end_gather[end_by[inside]]
        entries.add(columns, 0, self.value_factor * program.scale[columns], self.count * len(out) + inside)
        return entries.matrix((program.layout.size, 1), numbers)

    def _hessian(self, weight_f: ca.MX, weight_g: ca.MX) -> ca.MX:
        """Upper triangle of the Hessian of the Lagrangian."""
        program, point, end = self.program, self.program.compiled.point, self.program.compiled.end
        rows, n, c = program.rows, point.states, point.constraints
        factors = [ca.reshape(column(self.factor[:, own].ravel()), -1, self.count) if self.factor[:, own].size else
                   ca.DM(0, self.count) for own in (slice(0, n), slice(n, n + c), slice(n + c, None))]  # fmt: skip
        weights = ca.vertcat(
            ca.reshape(part(weight_g, 0, rows.ends), n, self.count) * factors[0],
            ca.reshape(part(weight_g, rows.pointwise, rows.rims), c, self.count) * factors[1],
            ca.repmat(part(weight_g, rows.integrals, rows.conditions), 1, self.count) * factors[2],
            column(self.cost).T * weight_f,
        )
        on_conditions = part(weight_g, rows.conditions, rows.count) / column(program.row_scale[rows.conditions :])
        end_weights = ca.vertcat(on_conditions, weight_f * self.value_factor)
        numbers = ca.vertcat(_nonzeros(point.hessian, self.count, self.v, self.d, weights),
                             end.hessian(self.y, self.constants, end_weights))  # fmt: skip
        entries = Entries()
        first, second = np.array(point.hessian_rows, int), np.array(point.hessian_columns, int)
        inside = np.flatnonzero(self._moving(first) & self._moving(second))
        sources = np.arange(self.count)[:, None] * len(first) + inside
        first, second = first[inside], second[inside]
        self._add_pairs(entries, program.gather[:, first], program.gather[:, second], first != second, sources)
        offset = self.count * len(point.hessian_rows)
        first, second = np.array(end.hessian_rows, int), np.array(end.hessian_columns, int)
        sources = offset + np.arange(len(first))
        self._add_pairs(entries, program.end_gather[first], program.end_gather[second], first != second, sources)
        entries.add(0, 0, 0.0)  # so that there is a pattern where nothing is curved
        return entries.matrix((program.layout.size,) * 2, numbers)

    def _add_pairs(self, entries: Entries, first: Indices, second: Indices, mixed: Any, sources: Indices) -> None:
        """Second derivatives; where two inputs are the same variable, a mixed one counts twice on the diagonal."""
        scale = self.program.scale
        values = scale[first] * scale[second] * np.where(mixed & (first == second), 2.0, 1.0)
        entries.add(np.minimum(first, second), np.maximum(first, second), values, sources)


def _nonzeros(function: ca.Function, count: int, *arguments: ca.MX) -> ca.MX:
    """The mapped nonzeros as one column, also where there are none."""
    if function.numel_out(0) == 0:
        return ca.MX(0, 1)
    return ca.vec(function.map(count)(*arguments))


@dataclass(frozen=True, slots=True)
class _Alike:
    """The intervals of one scheme: G members, their points (G x K) and the states that span them (G x (K+1) x n)."""

    scheme: Scheme
    members: Indices
    points: Indices
    support: Indices


def _alike(program: Program) -> Iterator[_Alike]:
    """The intervals of a mesh by scheme."""
    where, intervals = program.layout, program.mesh.intervals
    owners = np.array([id(i.scheme) for i in intervals])
    for key, scheme in {id(i.scheme): i.scheme for i in intervals}.items():
        members = np.flatnonzero(owners == key)
        points = where.first[members][:, None] + np.arange(scheme.degree)
        support = np.concatenate([where.nodes[members][:, None, :], where.inner[points]], axis=1)
        yield _Alike(scheme, members, points, support)


def _slopes(program: Program, z: ca.MX) -> ca.MX:
    """Slopes of the states at all points, point by point, relative to the states' sizes: a small matrix per scheme."""
    n = program.compiled.point.states
    parts, order = [], []
    for alike in _alike(program):
        degree, count = alike.scheme.degree, len(alike.members)
        values = ca.reshape(fetch(z, alike.support.ravel()), (degree + 1) * n, count)
        parts.append(ca.vec(ca.mtimes(ca.kron(ca.DM(alike.scheme.differentiate), ca.DM.eye(n)), values)))
        order.append((alike.points[:, :, None] * n + np.arange(n)).ravel())
    if len(parts) == 1:
        return parts[0]
    return fetch(ca.vertcat(*parts), np.argsort(np.concatenate(order)))


Block = tuple[Indices, Indices, Array]
"""Rows, columns and values (SI) of constant entries of g."""


def _slope_entries(program: Program) -> Iterator[Block]:
    """The entries of the slopes of the states."""
    n = program.compiled.point.states
    for alike in _alike(program):
        degree = alike.scheme.degree
        row = program.rows.defects + alike.points[:, :, None] * n + np.arange(n)  # G x K x n
        shape = (len(alike.members), degree, degree + 1, n)
        yield (
            np.broadcast_to(row[:, :, None, :], shape).ravel(),
            np.broadcast_to(alike.support[:, None, :, :], shape).ravel(),
            np.broadcast_to(alike.scheme.differentiate[None, :, :, None], shape).ravel(),
        )


def _loose_rows(program: Program) -> Iterator[Block]:
    """The entries of the other linear rows: end values of Gauss intervals, rims, calm controls, the integrals."""
    where, rows, mesh, compiled = program.layout, program.rows, program.mesh, program.compiled
    n = compiled.point.states
    yield rows.integrals + np.arange(len(where.integrals)), where.integrals, np.ones(len(where.integrals))
    rank = 0
    for k, interval in enumerate(mesh.intervals):
        if interval.scheme.family is Family.GAUSS and n:
            row = rows.ends + rank * n + np.arange(n)
            support = np.vstack([where.nodes[k], where.inner[where.first[k] : where.first[k + 1]]])
            values = np.repeat(interval.scheme.extrapolate, n)
            yield np.tile(row, len(support)), support.ravel(), values
            yield row, where.nodes[k + 1], -np.ones(n)
            rank += 1
    for rank, (control, place, _) in enumerate(compiled.rims):
        owner = int(where.at_place[place]) - (1 if place else 0)
        scheme = mesh.intervals[owner].scheme
        side = np.ones(scheme.degree) if place else (-1.0) ** np.arange(scheme.degree)
        columns = where.controls[where.first[owner] : where.first[owner + 1], control]
        yield np.full(scheme.degree, rows.rims + rank), columns, side @ scheme.control_modes
    for rank, (control, owner, mode) in enumerate(calm_entries(compiled, mesh), start=len(compiled.rims)):
        scheme = mesh.intervals[owner].scheme
        columns = where.controls[where.first[owner] : where.first[owner + 1], control]
        yield np.full(scheme.degree, rows.rims + rank), columns, scheme.control_modes[mode]
