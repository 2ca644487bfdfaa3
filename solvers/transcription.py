"""A compiled problem on a mesh as one sparse program: direct collocation with constant scatter matrices.

The program's variables z are, interval by interval, the states at its left end, the states and controls at its points,
then the last states, the places, the parameters and the integrals, each divided by its scale.  Its constraints are, in
this order: collocation defects, end values of Gauss intervals, pointwise constraints, controls at the ends,
definitions of the integrals, conditions at places.  Every nonlinear number is made by the two functions of
`solvers.functions`, mapped; all else is constant, so that the set-up is a few array operations whatever the size of the
mesh.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.collocation import Family
from solvers.formula.nodes import Name
from solvers.functions import Compiled
from solvers.limits import limits
from solvers.mesh import Mesh
from solvers.problem import Seek
from solvers.scaling import RowSizes, Scales

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Layout:
    """Where each quantity stands in z (N intervals, M points, n states, m controls).

    `nodes` ((N+1) x n), `inner` (M x n: states at the points), `controls` (M x m), `places`, `parameters`,
    `integrals`; `first` (N+1) the index of each interval's first point; `fractions` (M) and `measures` (M) of each
    point: its place as a fraction of its stretch, and its quadrature weight in fractions of the stretch;
    `stretch` (M) the stretch of each point; `at_place` (places) the node at each place.
    """

    size: int
    nodes: Indices
    inner: Indices
    controls: Indices
    places: Indices
    parameters: Indices
    integrals: Indices
    first: Indices
    fractions: Array
    measures: Array
    stretch: Indices
    at_place: Indices


@dataclass(frozen=True, slots=True)
class Rows:
    """Where each kind of constraint begins, and how many there are in all."""

    defects: int  # M x n, point by point
    ends: int  # n for each Gauss interval
    pointwise: int  # M x c, point by point
    rims: int
    integrals: int
    conditions: int
    count: int


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

    def physical(self, z: Array) -> Array:
        """The variables in SI."""
        return z * self.scale


def layout(compiled: Compiled, mesh: Mesh) -> Layout:
    """Give every quantity its place in z."""
    problem = compiled.lowered.problem
    n, m = compiled.point.states, compiled.point.controls
    degrees = np.array([i.scheme.degree for i in mesh.intervals])
    radau = np.array([i.scheme.family is Family.RADAU for i in mesh.intervals])
    own = degrees - radau  # points whose states are not shared with the next node
    sizes = n + own * n + degrees * m
    starts = np.concatenate([[0], np.cumsum(sizes)])
    nodes = starts[:, None] + np.arange(n)[None, :]
    first = np.concatenate([[0], np.cumsum(degrees)])
    owner = np.repeat(np.arange(len(degrees)), degrees)
    local = np.arange(first[-1]) - first[owner]
    inner = (starts[owner] + n + local * n)[:, None] + np.arange(n)[None, :]
    shared = radau[owner] & (local == degrees[owner] - 1)
    inner[shared] = nodes[owner[shared] + 1]
    controls = (starts[owner] + n + own[owner] * n + local * m)[:, None] + np.arange(m)[None, :]
    position = int(starts[-1]) + n
    parameters = position + np.arange(len(problem.parameters))
    position += len(problem.parameters)
    names = [p.name for p in problem.parameters]
    places = np.empty(len(problem.places), dtype=np.int64)
    for index, place in enumerate(problem.places):
        if isinstance(place.tree, Name) and place.tree.name in names:
            places[index] = parameters[names.index(place.tree.name)]
        else:
            places[index] = position
            position += 1
    integrals = position + np.arange(compiled.point.integrals)
    widths = np.array([i.width for i in mesh.intervals])
    fractions = np.concatenate([i.start + i.width * i.scheme.points for i in mesh.intervals])
    measures = np.concatenate([i.width * i.scheme.weights for i in mesh.intervals])
    stretch = np.array([i.stretch for i in mesh.intervals])
    at_place = np.concatenate([[0], np.flatnonzero(np.diff(stretch)) + 1, [len(widths)]])
    return Layout(position + compiled.point.integrals, nodes, inner, controls, places, parameters, integrals, first,
                  fractions, measures, stretch[owner], at_place)  # fmt: skip


def row_order(compiled: Compiled, mesh: Mesh, where: Layout) -> Rows:
    """Give every constraint its row."""
    count, point = len(where.fractions), compiled.point
    gauss = sum(i.scheme.family is Family.GAUSS for i in mesh.intervals)
    ends = count * point.states
    pointwise = ends + gauss * point.states
    rims = pointwise + count * point.constraints
    integrals = rims + len(compiled.rims) + len(_calm_entries(compiled, mesh))
    conditions = integrals + point.integrals
    return Rows(0, ends, pointwise, rims, integrals, conditions, conditions + compiled.end.outputs - 1)


def spread(compiled: Compiled, where: Layout, scales: Scales) -> Array:
    """One scale for every variable of z."""
    scale = np.ones(where.size)
    scale[where.nodes] = scales.states
    scale[where.inner] = scales.states
    scale[where.controls] = scales.controls
    scale[where.places] = scales.places
    scale[where.parameters] = scales.parameters
    scale[where.integrals] = scales.integrals
    return scale


class _Triplets:
    """Entries of a sparse matrix whose values are a constant plus constant multiples of computed numbers."""

    def __init__(self) -> None:
        self.rows: list[Indices] = []
        self.columns: list[Indices] = []
        self.values: list[Array] = []
        self.sources: list[Indices] = []
        self.kinds: list[int] = []

    def add(self, rows: Any, columns: Any, values: Any, sources: Any, kind: int) -> None:
        """Entries of one kind: 0 constant, 1 made from a point number, 2 from an end number (at `sources`)."""
        rows, columns, values, sources = np.broadcast_arrays(rows, columns, values, sources)
        self.rows.append(rows.ravel())
        self.columns.append(columns.ravel())
        self.values.append(values.ravel().astype(float))
        self.sources.append(sources.ravel())
        self.kinds.append(kind)

    def assemble(self, shape: tuple[int, int], sizes: tuple[int, int]) -> tuple[ca.Sparsity, Array, ca.DM, ca.DM]:
        """Pattern, constant values, and the two matrices that scatter point and end numbers into the nonzeros."""
        rows, columns = np.concatenate(self.rows), np.concatenate(self.columns)
        keys, place = np.unique(columns * shape[0] + rows, return_inverse=True)
        pattern = _pattern(shape, keys % shape[0], keys // shape[0])
        constant = np.zeros(len(keys))
        parts: list[ca.DM] = []
        offset = 0
        collected: dict[int, list[tuple[Indices, Indices, Array]]] = {1: [], 2: []}
        for kind, values, sources in zip(self.kinds, self.values, self.sources, strict=True):
            here = place[offset : offset + len(values)]
            offset += len(values)
            if kind == 0:
                np.add.at(constant, here, values)
            else:
                collected[kind].append((here, sources, values))
        for kind, size in ((1, sizes[0]), (2, sizes[1])):
            entries = collected[kind]
            if entries:
                target, source, value = (np.concatenate(part) for part in zip(*entries, strict=True))
            else:
                target, source, value = np.empty(0, np.int64), np.empty(0, np.int64), np.empty(0)
            parts.append(sparse((len(keys), size), target, source, value))
        return pattern, constant, parts[0], parts[1]


def _pattern(shape: tuple[int, int], rows: Indices, columns: Indices) -> ca.Sparsity:
    """A pattern from places that are sorted by column, then row, without repetition."""
    starts = np.searchsorted(columns, np.arange(shape[1] + 1))
    return ca.Sparsity(shape[0], shape[1], starts.tolist(), rows.tolist())


def sparse(shape: tuple[int, int], rows: Indices, columns: Indices, values: Array) -> ca.DM:
    """A sparse matrix; entries at the same place are added."""
    keys, place = np.unique(columns * shape[0] + rows, return_inverse=True)
    total = np.zeros(len(keys))
    np.add.at(total, place, values)
    return ca.DM(_pattern(shape, keys % shape[0], keys // shape[0]), total)


def transcribe(compiled: Compiled, mesh: Mesh, scales: Scales, row_sizes: RowSizes) -> Program:
    """Put a compiled problem on a mesh."""
    where = layout(compiled, mesh)
    point, end = compiled.point, compiled.end
    problem = compiled.lowered.problem
    n = point.states
    count = len(where.fractions)
    scale = spread(compiled, where, scales)
    gauss = [i for i in mesh.intervals if i.scheme.family is Family.GAUSS]
    conditions = end.outputs - 1
    rows = row_order(compiled, mesh, where)
    row_scale = np.concatenate(
        [
            np.tile(scales.states, count),
            np.tile(scales.states, len(gauss)),
            np.tile(row_sizes.pointwise, count),
            scales.controls[[control for control, _, _ in compiled.rims]],
            scales.controls[[control for control, _, _ in _calm_entries(compiled, mesh)]],
            scales.integrals,
            row_sizes.conditions,
        ]
    )
    starts = where.places[where.stretch]
    ends = where.places[where.stretch + 1]
    gather = np.hstack(
        [where.inner, where.controls, starts[:, None], ends[:, None], np.tile(where.parameters, (count, 1))]
    ).astype(np.int64)
    end_gather = np.concatenate(
        [where.nodes[where.at_place].ravel(), where.places, where.parameters, where.integrals]
    ).astype(np.int64)

    # Where every output of the point function goes: a row and a factor; the functional has no row.
    degrees = np.diff(where.first)
    widths = np.repeat([i.width for i in mesh.intervals], degrees)
    ordinal = np.arange(count)[:, None]
    target = np.hstack(
        [
            rows.defects + ordinal * n + np.arange(n),
            rows.pointwise + ordinal * point.constraints + np.arange(point.constraints),
            np.tile(rows.integrals + np.arange(point.integrals), (count, 1)),
        ]
    ).astype(np.int64)
    factor = np.hstack(
        [
            np.tile(-widths[:, None], (1, n)),
            np.ones((count, point.constraints)),
            np.tile(-where.measures[:, None], (1, point.integrals)),
        ]
    ) / row_scale[target]  # fmt: skip
    sign = -1.0 if problem.seek is Seek.MAXIMUM else 1.0
    cost = sign * where.measures / row_sizes.value

    linear = _linear_part(compiled, mesh, where, rows, scale, row_scale)
    size, outputs = where.size, point.outputs
    constrained = outputs - 1

    # Values.
    points = np.arange(count)
    point_to_g = sparse((rows.count, count * outputs), target.ravel(),
                        (points[:, None] * outputs + np.arange(constrained)).ravel(), factor.ravel())  # fmt: skip
    condition_rows = rows.conditions + np.arange(conditions)
    end_to_g = sparse((rows.count, end.outputs), condition_rows, np.arange(conditions), 1 / row_scale[condition_rows])

    # Jacobian of g.
    jacobian = _Triplets()
    jacobian.add(*linear, 0, 0)
    entries_out, entries_in = np.array(point.jacobian_rows, int), np.array(point.jacobian_columns, int)
    nonzeros = len(entries_out)
    inside = np.flatnonzero(entries_out < constrained)
    columns = gather[:, entries_in[inside]]
    jacobian.add(target[:, entries_out[inside]], columns, factor[:, entries_out[inside]] * scale[columns],
                 points[:, None] * nonzeros + inside, 1)  # fmt: skip
    end_out, end_in = np.array(end.jacobian_rows, int), np.array(end.jacobian_columns, int)
    at_end = np.flatnonzero(end_out < conditions)
    columns = end_gather[end_in[at_end]]
    jacobian.add(condition_rows[end_out[at_end]], columns,
                 scale[columns] / row_scale[condition_rows[end_out[at_end]]], at_end, 2)  # fmt: skip
    jacobian_parts = jacobian.assemble((rows.count, size), (count * nonzeros, len(end_out)))

    # Gradient of f.
    gradient = _Triplets()
    own = np.flatnonzero(entries_out == constrained)
    columns = gather[:, entries_in[own]]
    gradient.add(columns, 0, cost[:, None] * scale[columns], points[:, None] * nonzeros + own, 1)
    own = np.flatnonzero(end_out == conditions)
    columns = end_gather[end_in[own]]
    gradient.add(columns, 0, sign / row_sizes.value * scale[columns], own, 2)
    gradient.add(np.arange(size), 0, 0.0, 0, 0)
    gradient_parts = gradient.assemble((size, 1), (count * nonzeros, len(end_out)))

    # Hessian of the Lagrangian, upper triangle.
    hessian = _Triplets()
    hessian_in, hessian_on = np.array(point.hessian_rows, int), np.array(point.hessian_columns, int)
    _add_hessian(hessian, gather[:, hessian_in], gather[:, hessian_on], hessian_in != hessian_on, scale,
                 points[:, None] * len(hessian_in) + np.arange(len(hessian_in)), 1)  # fmt: skip
    end_hessian_in, end_hessian_on = np.array(end.hessian_rows, int), np.array(end.hessian_columns, int)
    _add_hessian(hessian, end_gather[end_hessian_in], end_gather[end_hessian_on], end_hessian_in != end_hessian_on,
                 scale, np.arange(len(end_hessian_in)), 2)  # fmt: skip
    hessian_parts = hessian.assemble((size, size), (count * len(hessian_in), len(end_hessian_in)))

    # The functions that the minimiser calls.
    z, constants = ca.MX.sym("z", size), ca.MX.sym("c", len(compiled.constants))
    v = ca.reshape(z[gather.ravel().tolist()] * ca.DM(scale[gather.ravel()]), point.inputs, count)
    d = ca.vertcat(ca.DM(where.fractions).T, ca.repmat(constants, 1, count))
    y = z[end_gather.tolist()] * ca.DM(scale[end_gather])
    value = ca.vec(point.value.map(count)(v, d))
    end_value = end.value(y, constants)
    linear_matrix = sparse((rows.count, size), *linear)
    g = ca.mtimes(linear_matrix, z) + ca.mtimes(point_to_g, value) + ca.mtimes(end_to_g, end_value)
    costs = sparse((1, count * outputs), np.zeros(count, int), points * outputs + constrained, cost)
    f = ca.mtimes(costs, value) + end_value[conditions] * (sign / row_sizes.value)
    numbers = _nonzeros(point.jacobian, count, v, d)
    end_numbers = end.jacobian(y, constants)
    slope = ca.DM(gradient_parts[1]) + ca.mtimes(gradient_parts[2], numbers) + ca.mtimes(gradient_parts[3], end_numbers)
    slopes = (
        ca.DM(jacobian_parts[1]) + ca.mtimes(jacobian_parts[2], numbers) + ca.mtimes(jacobian_parts[3], end_numbers)
    )
    weight_f, weight_g = ca.MX.sym("lam_f"), ca.MX.sym("lam_g", rows.count)
    padded = np.hstack([target, np.zeros((count, 1), np.int64)]).ravel()
    if rows.count:
        point_weights = weight_g[padded.tolist()] * ca.DM(np.hstack([factor, np.zeros((count, 1))]).ravel())
    else:
        point_weights = ca.MX(count * outputs, 1)
    point_weights += ca.DM(np.hstack([np.zeros((count, constrained)), cost[:, None]]).ravel()) * weight_f
    point_weights = ca.reshape(point_weights, outputs, count)
    end_weights = ca.vertcat(weight_g[rows.conditions :] / ca.DM(row_scale[rows.conditions :]),
                             weight_f * (sign / row_sizes.value))  # fmt: skip
    curvature = (
        ca.DM(hessian_parts[1])
        + ca.mtimes(hessian_parts[2], _nonzeros(point.hessian, count, v, d, point_weights))
        + ca.mtimes(hessian_parts[3], end.hessian(y, constants, end_weights))
    )
    functions = {
        "z": z,
        "c": constants,
        "f": f,
        "g": g,
        "grad_f": ca.Function("grad_f", [z, constants], [f, ca.densify(ca.MX(gradient_parts[0], slope))],
                              ["x", "p"], ["f", "grad_f_x"]),
        "jac_g": ca.Function("jac_g", [z, constants], [g, ca.MX(jacobian_parts[0], slopes)],
                             ["x", "p"], ["g", "jac_g_x"]),
        "hess_lag": ca.Function("hess_lag", [z, constants, weight_f, weight_g], [ca.MX(hessian_parts[0], curvature)],
                                ["x", "p", "lam_f", "lam_g"], ["hess_gamma_x_x"]),
    }  # fmt: skip
    program = Program(compiled, mesh, where, rows, scales, scale, row_scale, sign * row_sizes.value,
                      np.empty(0), np.empty(0), np.empty(0), np.empty(0), gather, end_gather, functions)  # fmt: skip
    lower, upper, row_lower, row_upper = limits(compiled, where, rows)
    return replace(program, lower=lower / scale, upper=upper / scale, row_lower=row_lower / row_scale,
                   row_upper=row_upper / row_scale)  # fmt: skip


def _nonzeros(function: ca.Function, count: int, *arguments: ca.MX) -> ca.MX:
    """The mapped nonzeros as one column, also where there are none."""
    if function.numel_out(0) == 0:
        return ca.MX(0, 1)
    return ca.vec(function.map(count)(*arguments))


def _linear_part(
    compiled: Compiled, mesh: Mesh, where: Layout, rows: Rows, scale: Array, row_scale: Array
) -> tuple[Indices, Indices, Array]:
    """Rows, columns and values of the constant entries of g: slopes, end values and the integrals themselves."""
    all_rows: list[Any] = [rows.integrals + np.arange(len(where.integrals))]
    all_columns: list[Any] = [where.integrals]
    all_values: list[Any] = [np.ones(len(where.integrals))]
    schemes = {id(i.scheme): i.scheme for i in mesh.intervals}
    owners = np.array([id(i.scheme) for i in mesh.intervals])
    gauss = (k for k, i in enumerate(mesh.intervals) if i.scheme.family is Family.GAUSS)
    gauss_rank = {k: rank for rank, k in enumerate(gauss)}
    n = compiled.point.states
    states = np.arange(n)
    for rank, (control, place, _) in enumerate(compiled.rims):
        owner = int(where.at_place[place]) - (1 if place else 0)
        scheme = mesh.intervals[owner].scheme
        side = np.ones(scheme.degree) if place else (-1.0) ** np.arange(scheme.degree)
        all_rows.append(np.full(scheme.degree, rows.rims + rank))
        all_columns.append(where.controls[where.first[owner] : where.first[owner + 1], control])
        all_values.append(side @ scheme.control_modes)
    for rank, (control, owner, mode) in enumerate(_calm_entries(compiled, mesh), start=len(compiled.rims)):
        scheme = mesh.intervals[owner].scheme
        all_rows.append(np.full(scheme.degree, rows.rims + rank))
        all_columns.append(where.controls[where.first[owner] : where.first[owner + 1], control])
        all_values.append(scheme.control_modes[mode])
    for key, scheme in schemes.items():
        members = np.flatnonzero(owners == key)
        points = where.first[members][:, None] + np.arange(scheme.degree)  # G x K
        support = np.concatenate([where.nodes[members][:, None, :], where.inner[points]], axis=1)  # G x (K+1) x n
        row = rows.defects + points[:, :, None] * n + states  # G x K x n
        shape = (len(members), scheme.degree, scheme.degree + 1, n)
        all_rows.append(np.broadcast_to(row[:, :, None, :], shape).ravel())
        all_columns.append(np.broadcast_to(support[:, None, :, :], shape).ravel())
        all_values.append(np.broadcast_to(scheme.differentiate[None, :, :, None], shape).ravel())
        if scheme.family is Family.GAUSS:
            ranks = np.array([gauss_rank[int(k)] for k in members])
            row = rows.ends + ranks[:, None] * n + states  # G x n
            wide = (len(members), scheme.degree + 1, n)
            all_rows += [np.broadcast_to(row[:, None, :], wide).ravel(), row.ravel()]
            all_columns += [support.ravel(), where.nodes[members + 1].ravel()]
            all_values += [np.broadcast_to(scheme.extrapolate[None, :, None], wide).ravel(), -np.ones(row.size)]
    row, column, value = (np.concatenate(part) for part in (all_rows, all_columns, all_values))
    return row.astype(np.int64), column.astype(np.int64), value * scale[column] / row_scale[row]


def _calm_entries(compiled: Compiled, mesh: Mesh) -> list[tuple[int, int, int]]:
    """Control, interval and Legendre coefficient of everything that is kept at zero along calm stretches."""
    lowered = compiled.lowered
    calm = [(c.stretch, lowered.controls.index((c.name, c.order))) for c in lowered.problem.calm]
    return [
        (control, owner, mode)
        for stretch, control in calm
        for owner, interval in enumerate(mesh.intervals)
        if interval.stretch == stretch
        for mode in range((interval.scheme.degree + 1) // 2, interval.scheme.degree)
    ]


def _add_hessian(
    entries: _Triplets, first: Indices, second: Indices, mixed: Any, scale: Array, sources: Indices, kind: int
) -> None:
    """Second derivatives; where two inputs are the same variable, a mixed one counts twice on the diagonal."""
    values = scale[first] * scale[second] * np.where(mixed & (first == second), 2.0, 1.0)
    entries.add(np.minimum(first, second), np.maximum(first, second), values, sources, kind)
