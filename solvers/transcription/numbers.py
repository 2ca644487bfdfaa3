"""The numbers of a program: f, g and their exact derivatives at any z, by the two functions of a compiled problem.

Every nonlinear number is made by the point function, mapped over all points, and the end function; where it goes is
said by constant indices.  So what a mesh costs is a few array operations, however it is cut.
"""

from __future__ import annotations

from copy import copy
from dataclasses import dataclass

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.transcription.entries import Entries, Pattern, Recipe, counted
from solvers.transcription.evaluation import Evaluation, whole_chunks
from solvers.transcription.functions import Compiled
from solvers.transcription.layout import Layout, Rows
from solvers.transcription.linear_rows import loose_rows, slope_entries, slopes, spanned
from solvers.transcription.mesh import Mesh

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Placement:
    """A compiled problem on a mesh: where everything stands among the variables and the rows, and its size."""

    compiled: Compiled
    mesh: Mesh
    layout: Layout
    rows: Rows
    scale: Array  # z times scale is in SI
    row_scale: Array  # g times row_scale is in SI
    value_scale: float  # f times value_scale is the functional in SI (negative for a maximum)
    fixed: NDArray[np.bool_]  # variables that cannot move


class Both:
    """One of the functions at all points and at the ends: its numbers stand in one array, those of the points first."""

    def __init__(self, point: ca.Function, at_points: list[Array], end: ca.Function, at_ends: list[Array]) -> None:
        shape = len(at_points[0]), point.nnz_out(0)
        count = shape[0] * shape[1]
        self.numbers = np.zeros(count + end.nnz_out(0))
        self.at_points, self.at_ends = self.numbers[:count].reshape(shape), self.numbers[count:]
        self._parts = Evaluation(point, at_points, self.at_points), Evaluation(end, at_ends, self.at_ends[None])

    def evaluate(self) -> None:
        """Make the numbers of what the inputs are now."""
        for part in self._parts:
            part()


class Numbers:
    """What the minimiser asks for, all of it scaled; the nonzeros are in the order of the patterns."""

    def __init__(self, placed: Placement) -> None:
        self._placed = placed
        where, rows = placed.layout, placed.rows
        point, end = placed.compiled.point, placed.compiled.end
        self.count, self.conditions = len(where.fractions), end.outputs - 1
        self.value_factor = 1 / placed.value_scale
        ordinal = np.arange(self.count)[:, None]
        n, c, q = point.states, point.constraints, point.integrals
        # Where every output of the point function goes: a row and a factor; the functional, the last one, has no row.
        self.target = np.empty((self.count, n + c + q), dtype=np.int64)
        self.target[:, :n] = rows.defects + ordinal * n + np.arange(n)
        self.target[:, n : n + c] = rows.pointwise + ordinal * c + np.arange(c)
        self.target[:, n + c :] = rows.integrals + np.arange(q)
        self.factor = np.ones((self.count, n + c + q))
        self.factor[:, :n] = -placed.mesh.widths[placed.mesh.owner, None]
        self.factor[:, n + c :] = -where.measures[:, None]
        self.factor /= placed.row_scale[self.target]
        self.cost = where.measures * self.value_factor
        self.condition_rows = rows.conditions + np.arange(self.conditions)
        self._condition_sizes = placed.row_scale[rows.conditions :]
        self._gather, self._end_gather = whole_chunks(placed.layout.gather), placed.layout.end_gather
        self._sizes, self._end_sizes = placed.scale[self._gather], placed.scale[self._end_gather]
        self._spanned = spanned(placed)
        self._linear = self._loose()
        self._take(placed.compiled.constants)
        self._jacobian, self._gradient, self._hessian = self._recipes()

    def _take(self, constants: tuple[float, ...]) -> None:
        """Make the functions for values of the constants; nothing is known yet for them."""
        point, end = self._placed.compiled.point, self._placed.compiled.end
        fractions, rows = self._placed.layout.fractions, len(self._gather)
        given = np.hstack([fractions[:, None], np.tile(constants, (self.count, 1))])
        at_points = [np.zeros((rows, point.inputs)), whole_chunks(given)]
        at_ends = [np.zeros((1, end.inputs)), np.array(constants, dtype=float)[None]]
        weights = np.zeros((rows, point.outputs)), np.zeros((1, end.outputs))
        self._inputs, self._weights = (at_points[0], at_ends[0][0]), (weights[0][: self.count], weights[1][0])
        self._values = Both(point.value, at_points, end.value, at_ends)
        self._slopes = Both(point.jacobian, at_points, end.jacobian, at_ends)
        self._bends = Both(point.hessian, [*at_points, weights[0]], end.hessian, [*at_ends, weights[1]])
        self._z = b""
        self._known: set[Both] = set()

    def restated(self, constants: tuple[float, ...]) -> Numbers:
        """The same numbers for other values of the constants."""
        other = copy(self)
        other._take(constants)
        return other

    def alike(self, other: Numbers) -> bool:
        """Whether both are the same numbers but for the values of the constants."""
        return self._jacobian is other._jacobian

    @property
    def jacobian_pattern(self) -> Pattern:
        """Where the Jacobian of g has nonzeros."""
        return self._jacobian.pattern

    @property
    def hessian_pattern(self) -> Pattern:
        """Where the upper triangle of the Hessian of the Lagrangian has nonzeros."""
        return self._hessian.pattern

    def value(self, z: Array) -> float:
        """f."""
        made = self._made(self._values, z)
        return float(made.at_points[: self.count, -1] @ self.cost + made.at_ends[-1] * self.value_factor)

    def constraints(self, z: Array) -> Array:
        """g."""
        placed, rows = self._placed, self._placed.rows
        n, c = placed.compiled.point.states, placed.compiled.point.constraints
        made = self._made(self._values, z)
        parts = made.at_points[: self.count, :-1] * self.factor
        columns, rank, values = self._linear
        g = counted(rank, values * z[columns], rows.count)
        g[: rows.ends] = parts[:, :n].ravel() + slopes(self._spanned, z)
        g[rows.pointwise : rows.rims] = parts[:, n : n + c].ravel()
        g[rows.integrals : rows.conditions] += parts[:, n + c :].sum(axis=0)
        g[rows.conditions :] = made.at_ends[:-1] / self._condition_sizes
        return g

    def gradient(self, z: Array) -> Array:
        """The slopes of f."""
        found = np.zeros(len(z))
        found[self._gradient.pattern.rows] = self._gradient.nonzeros(self._made(self._slopes, z).numbers)
        return found

    def jacobian(self, z: Array) -> Array:
        """The nonzeros of the slopes of g."""
        return self._jacobian.nonzeros(self._made(self._slopes, z).numbers)

    def hessian(self, z: Array, weight_f: float, weight_g: Array) -> Array:
        """The nonzeros of the upper triangle of the Hessian of weight_f * f + weight_g.g."""
        rows, n = self._placed.rows, self._placed.compiled.point.states
        c = self._placed.compiled.point.constraints
        weights, end_weights = self._weights
        weights[:, :n] = weight_g[: rows.ends].reshape(self.count, n)
        weights[:, n : n + c] = weight_g[rows.pointwise : rows.rims].reshape(self.count, c)
        weights[:, n + c : -1] = weight_g[rows.integrals : rows.conditions]
        weights[:, :-1] *= self.factor
        weights[:, -1] = self.cost * weight_f
        end_weights[:-1] = weight_g[rows.conditions :] / self._condition_sizes
        end_weights[-1] = weight_f * self.value_factor
        self._known.discard(self._bends)
        return self._hessian.nonzeros(self._made(self._bends, z).numbers)

    def _made(self, functions: Both, z: Array) -> Both:
        """What functions make of z; what was made of other variables is forgotten."""
        key = z.tobytes()
        if key != self._z:
            np.multiply(z[self._gather], self._sizes, out=self._inputs[0])
            np.multiply(z[self._end_gather], self._end_sizes, out=self._inputs[1])
            self._z = key
            self._known.clear()
        if functions not in self._known:
            functions.evaluate()
            self._known.add(functions)
        return functions

    def _moving(self) -> NDArray[np.bool_]:
        """The inputs of the point function that are not fixed places all along: only these need derivatives."""
        placed, point = self._placed, self._placed.compiled.point
        moving = np.ones(point.inputs, dtype=bool)
        for place in (point.states + point.controls, point.states + point.controls + 1):
            moving[place] = not placed.fixed[placed.layout.gather[:, place]].all()
        return moving

    def _loose(self) -> tuple[Indices, Indices, Array]:
        """Columns, rows and values (scaled) of the linear rows that are no defects."""
        entries = Entries()
        for row, columns, values in loose_rows(self._placed, self._spanned):
            entries.add(row, columns, self._scaled(row, columns, values))
        return entries.columns, entries.rows, entries.values

    def _scaled(self, row: Indices, columns: Indices, values: Array) -> Array:
        """Entries of g in the program's units."""
        return values * self._placed.scale[columns] / self._placed.row_scale[row]

    def _recipes(self) -> tuple[Recipe, Recipe, Recipe]:
        """Of the Jacobian of g, of the gradient of f, of the Hessian's upper triangle."""
        placed, point, end = self._placed, self._placed.compiled.point, self._placed.compiled.end
        size, scale, row_scale = placed.layout.size, placed.scale, placed.row_scale
        jacobian, gradient, hessian = Entries(), Entries(), Entries()
        moving = self._moving()
        columns, loose, values = self._linear
        jacobian.add(loose, columns, values)
        for row, columns, values in slope_entries(placed, self._spanned):
            jacobian.add(row, columns, self._scaled(row, columns, values))
        out, by = np.array(point.jacobian_rows, int), np.array(point.jacobian_columns, int)
        each = np.arange(self.count)[:, None] * len(out)
        inside = np.flatnonzero((out < point.outputs - 1) & moving[by])
        columns, own = placed.layout.gather[:, by[inside]], out[inside]
        jacobian.add(self.target[:, own], columns, self.factor[:, own] * scale[columns], each + inside)
        inside = np.flatnonzero((out == point.outputs - 1) & moving[by])
        columns = placed.layout.gather[:, by[inside]]
        gradient.add(columns, 0, self.cost[:, None] * scale[columns], each + inside)
        offset = self._slopes.at_points.size
        out, by = np.array(end.jacobian_rows, int), np.array(end.jacobian_columns, int)
        inside = np.flatnonzero(out < self.conditions)
        columns, own = placed.layout.end_gather[by[inside]], self.condition_rows[out[inside]]
        jacobian.add(own, columns, scale[columns] / row_scale[own], offset + inside)
        inside = np.flatnonzero(out == self.conditions)
        columns = placed.layout.end_gather[by[inside]]
        gradient.add(columns, 0, self.value_factor * scale[columns], offset + inside)
        first, second = np.array(point.hessian_rows, int), np.array(point.hessian_columns, int)
        inside = np.flatnonzero(moving[first] & moving[second])
        sources = np.arange(self.count)[:, None] * len(first) + inside
        offset = self._bends.at_points.size
        first, second = first[inside], second[inside]
        self._add_pairs(
            hessian, placed.layout.gather[:, first], placed.layout.gather[:, second], first != second, sources
        )
        first, second = np.array(end.hessian_rows, int), np.array(end.hessian_columns, int)
        sources = offset + np.arange(len(first))
        self._add_pairs(
            hessian, placed.layout.end_gather[first], placed.layout.end_gather[second], first != second, sources
        )
        hessian.add(0, 0, 0.0)  # so that there is a pattern where nothing is curved
        shapes = (placed.rows.count, size), (size, 1), (size, size)
        made = (e.recipe(s) for e, s in zip((jacobian, gradient, hessian), shapes, strict=True))
        return next(made), next(made), next(made)

    def _add_pairs(
        self, entries: Entries, first: Indices, second: Indices, mixed: NDArray[np.bool_], sources: Indices
    ) -> None:
        """Second derivatives; where two inputs are the same variable, a mixed one counts twice on the diagonal."""
        scale = self._placed.scale
        values = scale[first] * scale[second] * np.where(mixed & (first == second), 2.0, 1.0)
        entries.add(np.minimum(first, second), np.maximum(first, second), values, sources)
