"""How the whole curve changes with a constant, to first order: the optimality system at the solution, solved once more.

Limits that push are treated as equalities that move with the constant; then the solution is a smooth function of it,
whose derivative follows from the same matrix for every constant: one factorisation.  Where that matrix is singular, or
so nearly that the answer would be made of rounding errors, there is no answer.

Reference: Fiacco (1983), Introduction to Sensitivity and Stability Analysis in Nonlinear Programming, chapter 3 (from
memory).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.answers.sensitivity import Shift, end_weights, point_weights
from solvers.curve import Curve
from solvers.minimise.optimality import Optimality
from solvers.search.structure import smooth_contacts
from solvers.solution import Change
from solvers.transcription.evaluation import end_inputs, point_inputs
from solvers.transcription.layout import calm_entries
from solvers.transcription.lowering import primed
from solvers.transcription.trajectory import Trajectory, curve

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

DISTURBANCE = 1e-9
"""How much the matrix is changed, relative to its entries of the order of one, to see whether the answer holds."""
NOTHING = 1e-6
"""A change of any variable, relative to its size and for a constant twice as large, that counts as none."""
STEADY = 1e-2
"""How much the answer may change by that, relative to its size."""


class SingularError(ArithmeticError):
    """The optimality system does not determine the change of the curve."""


class Response:
    """The optimality system at a solution: its matrix in the free variables and the active rows (scaled)."""

    def __init__(self, path: Trajectory) -> None:
        self.path, program = path, path.program
        numbers, size = program.numbers, abs(program.value_scale)
        z = path.z / program.scale
        rows = path.row_multipliers * program.row_scale / size
        self._hessian, self._jacobian = numbers.hessian(z, 1.0, rows), numbers.jacobian(z)
        self.sides = _sides(path.bound_multipliers * program.scale / size, z, program.lower, program.upper)
        self.sides[program.layout.parameters[smooth_contacts(path)]] = 1  # where they lie is of no account
        self.row_sides = _sides(rows, numbers.constraints(z), program.row_lower, program.row_upper)
        self.free, active = np.flatnonzero(self.sides == 0), np.flatnonzero(self.row_sides)
        says = numbers.jacobian_pattern.times((self.sides == 0).astype(float), np.abs(self._jacobian)) > 0
        says[self._repeated()] = False
        self.active = active[says[active]]  # a row without free variables says nothing more
        self.matrix = Optimality(program, self.free, self.active).matrix(self._hessian, self._jacobian)

    def _repeated(self) -> Indices:
        """Rows that keep a control calm and say no more than others do: its values rest on a limit in places."""
        from scipy.linalg import qr

        program = self.path.program
        first = program.rows.rims + len(program.compiled.rims)
        owners = np.array([owner for _, owner, _ in calm_entries(program.compiled, program.mesh)], dtype=np.int64)
        repeated: list[int] = []
        if not len(owners):
            return np.array(repeated, dtype=np.int64)
        jacobian = program.numbers.jacobian_pattern.filled(self._jacobian).tocsr()
        for owner in np.unique(owners):
            own = first + np.flatnonzero(owners == owner)
            block = jacobian[own][:, self.free]
            triangle, order = qr(block[:, np.unique(block.indices)].toarray().T, mode="r", pivoting=True)
            size = np.abs(np.diag(triangle[: len(own)]))
            rank = int(np.count_nonzero(size > 1e-10 * max(float(size.max(initial=0.0)), 1e-300)))
            repeated += own[order[rank:]].tolist()
        return np.array(repeated, dtype=np.int64)

    @cached_property
    def _solve(self) -> Callable[[Array], Array]:
        """Solves with the matrix, which is factorised once."""
        from scipy.sparse.linalg import splu

        try:
            return splu(self.matrix).solve  # type: ignore[no-any-return]
        except RuntimeError as error:  # exactly singular
            raise SingularError from error

    def to(self, index: int, shift: Shift) -> Array:
        """The change (SI) of all variables per unit of the constant with this index, whose limits shift like this."""
        change = self.along(index, shift)[0] * self.path.program.scale
        places = self.path.program.layout.places
        fixed = places[~np.isin(places, self.free)]
        change[fixed] = shift.lower[fixed]
        return np.asarray(change)

    def along(self, index: int, shift: Shift) -> tuple[Array, Array]:
        """The change of all variables but given places, and of the multipliers of all rows, per unit (both scaled)."""
        size = abs(self.path.program.compiled.constants[index]) or 1.0
        found = self._checked(-self.push(index, shift), NOTHING / size)
        change, rows = self._carried(shift), np.zeros(self.path.program.rows.count)
        change[self.free], rows[self.active] = found[: len(self.free)], found[len(self.free) :]
        return change, rows

    def push(self, index: int, shift: Shift) -> Array:
        """What one unit of the constant does to the system's left side, the free variables held (scaled)."""
        gradient, rows = by_constant(self.path, index, shift)
        moved = self._carried(shift)
        limits = np.where(self.row_sides < 0, shift.row_lower, shift.row_upper) / self.path.program.row_scale
        return np.concatenate([
            (gradient + self._bent(moved))[self.free],
            (rows - limits + self.path.program.numbers.jacobian_pattern.times(moved, self._jacobian))[self.active],
        ])  # fmt: skip

    def residual(self) -> Array:
        """The system's left side: slopes of the Lagrangian, then how far the active rows are from their limits."""
        program, path = self.path.program, self.path
        z, rows = path.z / program.scale, path.row_multipliers * program.row_scale / abs(program.value_scale)
        pattern = program.numbers.jacobian_pattern
        slopes = program.numbers.gradient(z) + pattern.times_from_left(rows, self._jacobian)
        limits = np.where(self.row_sides < 0, program.row_lower, program.row_upper)
        return np.concatenate([slopes[self.free], (program.numbers.constraints(z) - limits)[self.active]])

    def _bent(self, moved: Array) -> Array:
        """The Hessian times a vector; it is known by its upper triangle."""
        pattern = self.path.program.numbers.hessian_pattern
        below = np.where(pattern.rows == pattern.columns(), 0.0, self._hessian)
        return pattern.times(moved, self._hessian) + pattern.times_from_left(moved, below)

    def _carried(self, shift: Shift) -> Array:
        """How limits carry along the variables that rest on them (scaled); places are in `by_constant`."""
        program = self.path.program
        moved = np.where(self.sides < 0, shift.lower, shift.upper) / program.scale
        moved[self.free] = 0.0
        moved[program.layout.parameters[smooth_contacts(self.path)]] = 0.0
        moved[program.layout.places[~np.isin(program.layout.places, self.free)]] = 0.0
        return np.asarray(moved)

    def _checked(self, right: Array, nothing: float) -> Array:
        """The solution; `SingularError` where a slightly disturbed matrix would give another one, beyond `nothing`."""
        found = self._solve(right)
        signs = np.concatenate([np.ones(len(self.free)), -np.ones(len(self.active))])
        other = self._solve(DISTURBANCE * signs * found)
        primal = slice(0, len(self.free))
        size = max(float(np.abs(found[primal]).max(initial=0.0)), nothing)
        if not np.isfinite(found).all() or not np.abs(other[primal]).max(initial=0.0) <= STEADY * size:
            raise SingularError
        return np.asarray(found)


def _sides(multipliers: Array, values: Array, lower: Array, upper: Array) -> NDArray[np.int64]:
    """-1 where a lower limit pushes, 1 where an upper one does, 0 where none: the multiplier exceeds the distance.

    Fixed values count as upper limits.
    """
    sides = np.where((multipliers > 0) & (multipliers > upper - values), 1, 0)
    sides = np.where((multipliers < 0) & (-multipliers > values - lower), -1, sides)
    return np.where(lower == upper, 1, sides).astype(np.int64)


def by_constant(path: Trajectory, index: int, shift: Shift) -> tuple[Array, Array]:
    """What a constant does at a fixed curve, per unit: to the slopes of the Lagrangian and to g (both scaled).

    Given places move with the constant; the program has no derivatives by them.
    """
    program, compiled = path.program, path.program.compiled
    where, numbers, point, end = program.layout, program.numbers, compiled.point, compiled.end
    v, d = point_inputs(compiled, where, path.z)
    along_v, along_d = np.zeros_like(v), np.zeros_like(d)
    along_d[:, 1 + index] = 1.0
    given = ~np.isin(where.places, where.parameters)
    places = np.where(given, shift.lower[where.places], 0.0)
    first = point.states + point.controls
    along_v[:, first], along_v[:, first + 1] = places[where.stretch], places[where.stretch + 1]
    outputs, slopes = _directional(point.value, v, d, point_weights(path), along_v, along_d)
    gradient, rows = np.zeros(where.size), np.zeros(program.rows.count)
    np.add.at(gradient, program.layout.gather, slopes)
    np.add.at(rows, numbers.target, outputs[:, :-1] * numbers.factor)
    y = end_inputs(where, path.z)[None]
    constants = np.array(compiled.constants, dtype=float)[None]
    along_y, along_constants = np.zeros_like(y), np.zeros_like(constants)
    along_constants[0, index] = 1.0
    before = len(places) * point.states
    along_y[0, before : before + len(places)] = places
    outputs, slopes = _directional(end.value, y, constants, end_weights(path)[None], along_y, along_constants)
    np.add.at(gradient, program.layout.end_gather, slopes[0])
    rows[program.rows.conditions :] += outputs[0, :-1] / program.row_scale[program.rows.conditions :]
    return gradient * program.scale / abs(program.value_scale), rows


def _directional(
    function: Any, v: Array, d: Array, weights: Array, along_v: Array, along_d: Array
) -> tuple[Array, Array]:
    """Derivatives along (v, d) of the outputs, and of the slopes by v of the weighted outputs."""
    none, still_v, still_d = np.zeros_like(weights), np.zeros_like(v), np.zeros_like(d)
    outputs = _first(function.forward(1), v, d, none, along_v, along_d)
    backward = function.reverse(1).forward(1)
    return outputs, _first(backward, v, d, none, weights, still_v, still_d, along_v, along_d, none, none)


def _first(function: Any, *arguments: Array) -> Array:
    """The first output of a function at many sets of inputs; zeros of its pattern are filled in."""
    made = function.map(len(arguments[0]))(*(argument.T for argument in arguments))
    return np.asarray(made[0] if isinstance(made, tuple | list) else made).T


def changes(path: Trajectory, shifts: Sequence[Shift]) -> tuple[Change, ...]:
    """Of the curve with every constant that has a tolerance, at fixed places of the independent variable.

    `shifts` are those of the limits with every constant.  Raises `SingularError`.
    """
    problem = path.program.compiled.lowered.problem
    constants, where = problem.constants, path.program.layout
    wanted = [index for index, constant in enumerate(constants) if constant.tolerance]
    if not wanted:
        return ()
    response = Response(path)
    found = []
    for k in wanted:
        change = response.to(k, shifts[k]) * (constants[k].tolerance or 0.0)
        moved = zip((p.name for p in problem.parameters), change[where.parameters].tolist(), strict=True)
        found.append(Change(constants[k].name, _at_fixed_places(path, change), dict(moved)))
    return tuple(found)


def _at_fixed_places(path: Trajectory, change: Array) -> Curve:
    """The change of all functions where the independent variable does not move along with the mesh.

    At a fixed fraction of its stretch a function changes by its own variables; the place there moves too, linearly over
    an interval, so that the slope times this movement is taken off.
    """
    program, lowered = path.program, path.program.compiled.lowered
    where = program.layout
    moved = replace(path, states=change[where.inner], controls=change[where.controls], nodes=change[where.nodes])
    movement = program.mesh.breaks(change[where.places]) if len(where.places) else np.zeros_like(path.breaks)
    widths, shape = np.diff(path.breaks), curve(path)
    functions: dict[str, tuple[Array, ...]] = {}
    for quantities, modes in ((lowered.states, moved.state_modes), (lowered.controls, moved.control_modes)):
        for column, quantity in enumerate(quantities):
            name = primed(quantity)
            functions[name] = tuple(
                less_movement(own, stored, width, left, right)
                for own, stored, width, left, right in zip(
                    path.pieces(modes[:, :, column]),
                    shape.functions[name],
                    widths,
                    movement[:-1],
                    movement[1:],
                    strict=True,
                )
            )
    for name, order in lowered.given:
        below = functions[primed((name, order - 1))]
        functions[primed((name, order))] = tuple(
            legendre.legder(modes) * (2 / width) for modes, width in zip(below, widths, strict=True)
        )
    return Curve(path.breaks, functions)


def less_movement(modes: Array, function: Array, width: float, left: float, right: float) -> Array:
    """A change less the slope of the function times a movement that runs from `left` to `right` over the interval."""
    if left == right == 0.0:
        return modes
    movement = np.array([(left + right) / 2, (right - left) / 2])
    return np.asarray(legendre.legsub(modes, legendre.legmul(legendre.legder(function) * (2 / width), movement)))
