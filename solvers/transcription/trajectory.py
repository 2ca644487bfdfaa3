"""The answer of a program as functions: states, controls and costates as piecewise polynomials, in SI.

States are polynomials of degree K through the left node and the K points of each interval, controls and costates of
degree K - 1 through the points.  Costates come from the multipliers of the collocation defects; see Garg et al. (2010),
Automatica 46, section 4 (from memory): costate = -multiplier / quadrature weight.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from solvers.curve import Curve
from solvers.minimise.ipopt import Minimum, Start
from solvers.problem import Problem, Seek
from solvers.series import basis
from solvers.transcription.functions import Compiled
from solvers.transcription.layout import Layout, row_order
from solvers.transcription.limits import constants_of, number
from solvers.transcription.lowering import primed
from solvers.transcription.mesh import Mesh
from solvers.transcription.program import Program
from solvers.transcription.scaling import not_faint

Array = NDArray[np.float64]

NOISE = 1e-8
"""What is smaller than this, relative to its scale, is zero to the minimiser."""

BINDING = 1e-5
"""Least push of a pointwise constraint that binds, over its size and relative to the value's."""


@dataclass(frozen=True)
class Trajectory:
    """One solved (or guessed) mesh, in SI (N intervals, M points, n states, m controls, c pointwise constraints).

    `z` all variables; `breaks` (N+1); `points` (M) places of the points; `states` (M x n) and `controls` (M x m) there;
    `nodes` ((N+1) x n) states at the breaks; `costates` (M x n) and `multipliers` (M x c: per unit of the independent
    variable) are of the problem as a minimisation: negative of the user's for a maximum.
    """

    program: Program
    z: Array
    value: float
    places: Array
    parameters: Array
    breaks: Array
    points: Array
    nodes: Array
    states: Array
    controls: Array
    costates: Array
    multipliers: Array
    bound_multipliers: Array
    row_multipliers: Array

    @cached_property
    def state_modes(self) -> Array:
        """Legendre coefficients of the states (N x (largest K + 1) x n), zero beyond the K + 1 of each interval."""
        return _modes(self.program.mesh, self.states, self.nodes)

    @cached_property
    def control_modes(self) -> Array:
        """Legendre coefficients of the controls (N x largest K x m)."""
        return _modes(self.program.mesh, self.controls)

    @cached_property
    def costate_modes(self) -> Array:
        """Legendre coefficients of the costates (N x largest K x n)."""
        return _modes(self.program.mesh, self.costates)

    @cached_property
    def multiplier_modes(self) -> Array:
        """Legendre coefficients of the multipliers of the pointwise constraints (N x largest K x c)."""
        return _modes(self.program.mesh, self.multipliers)

    def pieces(self, modes: Array) -> Iterable[Array]:
        """Coefficients of one quantity (N x largest degree) without the zeros that fill them up."""
        counts = self.program.mesh.counts
        own = modes.shape[1] - counts.max()  # one more for states
        return (part[: count + own] for part, count in zip(modes, counts, strict=True))


def _modes(mesh: Mesh, values: Array, nodes: Array | None = None) -> Array:
    """Coefficients in every interval from the values at its points, and at its left node where there is one."""
    groups = mesh.alike
    own = 0 if nodes is None else 1
    modes = np.zeros((len(mesh.intervals), mesh.counts.max() + own, values.shape[1]))
    for group in groups:
        inside = values[group.points]
        if nodes is None:
            modes[group.members, : group.scheme.degree] = group.scheme.control_modes @ inside
        else:
            support = np.concatenate([nodes[group.members][:, None], inside], axis=1)
            modes[group.members, : group.scheme.degree + 1] = group.scheme.state_modes @ support
    return modes


def trajectory(program: Program, minimum: Minimum) -> Trajectory:
    """Read a solved program."""
    where, scale = program.layout, program.scale
    z = minimum.z * scale
    places = place_values(program.compiled.lowered.problem, where, z)
    point = program.compiled.point
    count = len(where.fractions)
    sign_and_size = abs(program.value_scale)
    bounds = np.where(
        program.lower == program.upper, -slopes_of(program, minimum.z, minimum.multipliers), minimum.bound_multipliers
    )
    rows = minimum.multipliers / program.row_scale * sign_and_size  # multipliers of the rows in SI
    defects = rows[: count * point.states].reshape(count, point.states)
    constraints = rows[program.rows.pointwise : program.rows.rims].reshape(count, point.constraints)
    return Trajectory(
        program=program,
        z=z,
        value=minimum.value * program.value_scale,
        places=places,
        parameters=z[where.parameters],
        breaks=program.mesh.breaks(places),
        points=where.points(places),
        nodes=z[where.nodes],
        states=z[where.inner],
        controls=z[where.controls],
        costates=-defects / program.mesh.weights[:, None],
        multipliers=_per_unit(constraints, where.measures * where.lengths(places)),
        bound_multipliers=bounds * sign_and_size / scale,
        row_multipliers=rows,
    )


def _per_unit(sums: Array, measures: Array) -> Array:
    """Sums per unit of the measures; nothing where a stretch has come to have no length."""
    return np.divide(sums, measures[:, None], out=np.zeros_like(sums), where=measures[:, None] != 0)


def place_values(problem: Problem, where: Layout, z: Array) -> Array:
    """The places; those that are given exactly as they were given, not as scaling has left them."""
    constants = {c.name: c.value for c in problem.constants}
    free = np.isin(where.places, where.parameters)
    return np.array([z[index] if moves else number(place.tree, constants)
                     for place, index, moves in zip(problem.places, where.places, free, strict=True)])  # fmt: skip


def slopes_of(program: Program, z: Array, multipliers: Array) -> Array:
    """The slope of f + multipliers.g in every variable (scaled).

    The minimiser takes fixed variables out and knows no multipliers of theirs: this slope, negative, is what they are.
    """
    numbers = program.numbers
    pushed = numbers.jacobian_pattern.times_from_left(multipliers, numbers.jacobian(z))
    return numbers.gradient(z) + pushed


def as_start(path: Trajectory) -> Start:
    """A solved path as a warm start of its own program, or of one that differs in constants and limits only."""
    program, size = path.program, abs(path.program.value_scale)
    free = program.lower < program.upper
    bounds = np.where(free, path.bound_multipliers * program.scale / size, 0.0)
    return Start(path.z / program.scale, bounds, path.row_multipliers * program.row_scale / size)


def curve(path: Trajectory) -> Curve:
    """Every unknown with its derivatives up to its order."""
    lowered = path.program.compiled.lowered
    functions: dict[str, tuple[Array, ...]] = {}
    widths = np.diff(path.breaks)
    for quantities, modes in ((lowered.states, path.state_modes), (lowered.controls, path.control_modes)):
        for index, quantity in enumerate(quantities):
            functions[primed(quantity)] = tuple(path.pieces(modes[:, :, index]))
    for name, order in lowered.given:
        below = functions[primed((name, order - 1))]
        functions[primed((name, order))] = tuple(
            np.polynomial.legendre.legder(modes) * (2 / width) for modes, width in zip(below, widths, strict=True)
        )
    return Curve(path.breaks, functions)


def costate_curve(path: Trajectory) -> Curve:
    """The costates, and the multipliers of the user's pointwise constraints that bind, in his sense of better."""
    compiled = path.program.compiled
    sign = -1.0 if compiled.lowered.problem.seek is Seek.MAXIMUM else 1.0
    functions = {
        primed(quantity): tuple(path.pieces(sign * path.costate_modes[:, :, index]))
        for index, quantity in enumerate(compiled.lowered.states)
    }
    rows = path.program.rows
    sizes = path.program.row_scale[rows.pointwise : rows.rims].reshape(path.multipliers.shape)
    pushes = np.abs(path.row_multipliers[rows.pointwise : rows.rims].reshape(sizes.shape) * sizes).sum(axis=0)
    for index, condition in enumerate(compiled.pointwise):
        if condition.pointer and pushes[index] > BINDING * abs(path.program.value_scale):
            functions[condition.label] = tuple(path.pieces(sign * path.multiplier_modes[:, :, index]))
    return Curve(path.breaks, functions)


@dataclass(frozen=True, slots=True)
class Carried:
    """A trajectory brought onto another mesh, in SI: the variables, and the multipliers of bounds and rows."""

    z: Array
    bounds: Array
    rows: Array

    def onto(self, program: Program) -> Start:
        """As a warm start of a program on that mesh."""
        size = abs(program.value_scale)
        return Start(self.z / program.scale, self.bounds * program.scale / size, self.rows * program.row_scale / size)


def carry(path: Trajectory, mesh: Mesh, where: Layout) -> Carried:
    """Bring a trajectory onto another mesh of the same problem."""
    old = path.program.layout
    z = np.zeros(where.size)
    z[where.places], z[where.parameters] = path.places, path.parameters
    z[where.integrals] = path.z[old.integrals]
    _draw(z, path, where, mesh.breaks(path.places), where.points(path.places))
    carried = _with_multipliers(z, path, path.program.compiled, mesh, where)
    source = path.program
    fixed = (source.lower == source.upper)[old.parameters]
    carried.bounds[where.parameters] = np.where(fixed, 0.0, path.bound_multipliers[old.parameters])
    return carried


def _with_multipliers(z: Array, path: Trajectory, compiled: Compiled, mesh: Mesh, where: Layout) -> Carried:
    """Variables of the same or of a related problem with the multipliers that a trajectory has there."""
    source, old = path.program, path.program.layout
    order = row_order(compiled, mesh, where)
    places = z[where.places]
    points = where.points(places)
    rows = np.zeros(order.count)
    costates = at_points(path.breaks, path.costate_modes, points)
    rows[: order.ends] = (-costates * mesh.weights[:, None]).ravel()
    rows[order.ends : order.pointwise] = costates[where.first[np.flatnonzero(mesh.gauss) + 1] - 1].ravel()
    measures = where.measures * where.lengths(places)
    density = at_points(path.breaks, path.multiplier_modes, points)
    rows[order.pointwise : order.rims] = (density * measures[:, None]).ravel()
    if order.integrals - order.rims == source.rows.integrals - source.rows.rims:
        rows[order.rims : order.integrals] = path.row_multipliers[source.rows.rims : source.rows.integrals]
    same = min(order.count - order.integrals, source.rows.count - source.rows.integrals)
    rows[order.integrals :][:same] = path.row_multipliers[source.rows.integrals :][:same]

    bounds = np.zeros(where.size)
    pushes = np.where(source.lower == source.upper, 0.0, path.bound_multipliers)  # what fixes one value stays there
    old_measures = old.measures * old.lengths(path.places)
    nearest = np.searchsorted((path.points[1:] + path.points[:-1]) / 2, points)  # multipliers of bounds may jump
    for new, before in ((where.inner, old.inner), (where.controls, old.controls)):
        bounds[new] = _per_unit(pushes[before], old_measures)[nearest] * measures[:, None]
    return Carried(z, bounds, rows)


def _draw(z: Array, path: Trajectory, where: Layout, breaks: Array, points: Array) -> None:
    """Put the curve of a path into the variables of another layout."""
    z[where.nodes] = at_points(path.breaks, path.state_modes, breaks)
    z[where.inner] = at_points(path.breaks, path.state_modes, points)
    z[where.controls] = at_points(path.breaks, path.control_modes, points)


def at_points(breaks: Array, modes: Array, places: Array) -> Array:
    """Piecewise polynomials at places of another mesh (len(places) x components)."""
    summed = np.maximum(np.abs(places), abs(breaks[0]))  # of what is added up to reach a place
    rounding = 4 * np.finfo(float).eps * summed  # a point at a right end stays with what ends there
    owner = np.clip(np.searchsorted(breaks, places - rounding, side="left") - 1, 0, len(modes) - 1)
    left, right = breaks[owner], breaks[owner + 1]
    local = np.clip((2 * places - left - right) / (right - left), -1.0, 1.0)
    return np.asarray((basis(local, modes.shape[1] - 1)[:, None, :] @ modes[owner])[:, 0, :])


def distance(now: Trajectory, before: Trajectory) -> float:
    """The largest difference of the states of two meshes of one problem, relative to each state's size.

    At the same shares of the stretches, as free places may have moved; or, where the ends have not, at the same places:
    where one arc leads smoothly into the next, their junction may move far without the curve.
    """
    if now.states.shape[1] == 0:
        return 0.0
    ways = [(_fractions(now), _fractions(before))]
    if np.array_equal(now.places[[0, -1]], before.places[[0, -1]]):
        ways.append(((now.breaks, now.points), (before.breaks, before.points)))
    differences = [
        np.abs(at_points(before_at[0], before.state_modes, now_at[1]) - now.states).max(axis=0)
        for now_at, before_at in ways
    ]
    return float((np.min(differences, axis=0) / sizes_of(now)[0]).max())


def sizes_of(path: Trajectory) -> tuple[Array, Array]:
    """What errors of states and of controls are relative to: the largest value, where it is more than noise."""
    lowered, scales = path.program.compiled.lowered, path.program.scales
    sizes: dict[tuple[str, int], float] = {}
    for quantities, values, own in (
        (lowered.states, path.states, scales.states),
        (lowered.controls, path.controls, scales.controls),
    ):
        largest = np.maximum(np.abs(values).max(axis=0, initial=0.0), NOISE * own)
        sizes |= {quantity: float(size) for quantity, size in zip(quantities, largest, strict=True)}
    not_faint(sizes, float(abs(path.breaks[-1] - path.breaks[0])))
    return np.array([sizes[q] for q in lowered.states]), np.array([sizes[q] for q in lowered.controls])


def _fractions(path: Trajectory) -> tuple[Array, Array]:
    """Breaks and points in a variable in which the places are 0, 1, 2, ...: free places may have moved."""
    places = np.arange(len(path.places), dtype=float)
    where = path.program.layout
    return path.program.mesh.breaks(places), where.stretch + where.fractions


def related(path: Trajectory, compiled: Compiled, mesh: Mesh, where: Layout) -> Array:
    """All variables (SI) of a layout of a related problem: other places or parameters, the same unknowns."""
    own = path.program.compiled.lowered.problem
    given = {p.name: float(v) for p, v in zip(own.parameters, path.parameters, strict=True)}
    problem = compiled.lowered.problem
    z = np.zeros(where.size)
    for parameter, index in zip(problem.parameters, where.parameters, strict=True):
        z[index] = given.get(parameter.name, parameter.guess or 0.0)
    constants = constants_of(compiled)
    for place, index in zip(problem.places, where.places, strict=True):
        if index not in where.parameters:
            z[index] = number(place.tree, constants)
    places = z[where.places]
    _draw(z, path, where, mesh.breaks(places), where.points(places))
    z[where.integrals] = path.z[path.program.layout.integrals]
    return z


def related_with_multipliers(path: Trajectory, compiled: Compiled, mesh: Mesh, where: Layout) -> Carried:
    """The same with the multipliers of what both problems have."""
    return _with_multipliers(related(path, compiled, mesh, where), path, compiled, mesh, where)
