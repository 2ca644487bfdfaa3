"""The solved curve anywhere between its nodes, with everything that the checks weigh there.

Nothing here looks at a collocation equation: a trajectory is taken as piecewise polynomials, with controls clipped to
their constant bounds (that is what is handed over), and the point function is evaluated wherever a check asks.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.checks.adjoint import Continued, continued, steps_through
from solvers.checks.quadrature import integrate
from solvers.problem import Seek
from solvers.series import basis
from solvers.transcription.evaluation import mapped
from solvers.transcription.limits import quantity_bounds
from solvers.transcription.lowering import primed
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

_NODES, _WEIGHTS = legendre.leggauss(6)
HALVES = np.concatenate([(_NODES + 1) / 4, (_NODES + 3) / 4])
"""Gauss points of both halves of an interval: none of them is a collocation point of any scheme in use."""
HALF_WEIGHTS = np.concatenate([_WEIGHTS, _WEIGHTS]) / 4
_STEPS = steps_through(HALVES)


@dataclass(frozen=True, slots=True)
class Sample:
    """P places of the curve: the interval of each, its place, the inputs of the point function, its measure.

    `measure` (P) is the quadrature weight in the independent variable, zero where the sample is not a quadrature.
    """

    interval: Indices
    local: Array
    places: Array
    v: Array
    d: Array
    measure: Array


@dataclass(frozen=True, slots=True)
class Asked:
    """What was asked for, where an equivalent form of it was solved: minimum or maximum, and `value`, which turns a
    value of the form (SI) into one of the user's functional (SI)."""

    seek: Seek
    value: Callable[[float], float] = float


class Sampler:
    """A trajectory (N intervals, n states, m controls, c pointwise constraints) that can be asked anywhere.

    `asked` is said where the mesh is of another form than the one that was asked for.
    """

    def __init__(self, path: Trajectory, asked: Asked | None = None) -> None:
        self.path = path
        self.compiled = path.program.compiled
        self.point = self.compiled.point
        self.problem = self.compiled.lowered.problem
        self.tolerance = self.problem.options.tolerance
        self.asked = asked or Asked(self.problem.seek)
        self.sign = -1.0 if self.problem.seek is Seek.MAXIMUM else 1.0
        mesh = path.program.mesh.intervals
        self.count = len(mesh)
        self.stretch = np.array([i.stretch for i in mesh])
        self.fraction = np.array([i.start for i in mesh])
        self.width = np.array([i.width for i in mesh])
        self.start, self.end = path.places[self.stretch], path.places[self.stretch + 1]
        self.length = self.width * (self.end - self.start)  # of each interval, in the independent variable
        self.span = float(path.breaks[-1] - path.breaks[0])
        self.states = path.state_modes
        self.controls = path.control_modes
        self.costates = path.costate_modes
        self.bounds = quantity_bounds(self.compiled)
        self.constants = np.array(self.compiled.constants, dtype=float)
        self.state_names = [primed(q) for q in self.compiled.lowered.states]
        self.control_names = [primed(q) for q in self.compiled.lowered.controls]

    def sample(self, interval: Indices, local: Array, measure: Array | None = None) -> Sample:
        """The curve at local places (0 to 1) of intervals."""
        states, controls = self.of(self.states, interval, local), self.controls_at(interval, local)
        return self._sample(interval, local, states, controls, measure)

    def grid(self, local: Array, weights: Array | None = None) -> Sample:
        """The same local places in every interval; `weights` integrate from 0 to 1."""
        interval = np.repeat(np.arange(self.count), len(local))
        measure = None if weights is None else np.tile(weights, self.count) * self.length[interval]
        states, controls = self.in_each(self.states, local), self._bounded(self.in_each(self.controls, local))
        return self._sample(interval, np.tile(local, self.count), states, controls, measure)

    def _sample(self, interval: Indices, local: Array, states: Array, controls: Array, measure: Array | None) -> Sample:
        v, d = self.inputs(interval, states, controls), self.data(interval, local)
        start, end = v[:, self._ends].T
        places = start + d[:, 0] * (end - start)
        return Sample(interval, local, places, v, d, np.zeros(len(local)) if measure is None else measure)

    def of(self, modes: Array, interval: Indices, local: Array) -> Array:
        """Piecewise polynomials at local places (P x components)."""
        shapes = basis(2 * local - 1, modes.shape[1] - 1)
        return np.asarray((shapes[:, None] @ modes[interval])[:, 0])

    def in_each(self, modes: Array, local: Array) -> Array:
        """Piecewise polynomials at the same local places of every interval (P x components)."""
        shapes = basis(2 * local - 1, modes.shape[1] - 1)
        return np.asarray((shapes @ modes).reshape(len(modes) * len(local), modes.shape[2]))

    def controls_at(self, interval: Indices, local: Array) -> Array:
        """The controls that are handed over: inside their constant bounds."""
        return self._bounded(self.of(self.controls, interval, local))

    def _bounded(self, controls: Array) -> Array:
        return np.asarray(np.minimum(np.maximum(controls, self.bounds[2]), self.bounds[3]))

    @property
    def _ends(self) -> slice:
        """Where the ends of the stretch stand among the inputs."""
        first = self.point.states + self.point.controls
        return slice(first, first + 2)

    def inputs(self, interval: Indices, states: Array, controls: Array) -> Array:
        """The inputs v of the point function."""
        n, ends = self.point.states, self._ends
        v = np.empty((len(interval), self.point.inputs))
        v[:, :n], v[:, n : ends.start], v[:, ends.stop :] = states, controls, self.path.parameters
        v[:, ends.start], v[:, ends.start + 1] = self.start[interval], self.end[interval]
        return v

    def data(self, interval: Indices, local: Array) -> Array:
        """The inputs d of the point function."""
        d = np.empty((len(interval), 1 + len(self.constants)))
        d[:, 0], d[:, 1:] = self.fraction[interval] + self.width[interval] * local, self.constants
        return d

    def outputs(self, sample: Sample) -> Array:
        """All outputs of the point function, per fraction of the stretch where they are rates or integrands."""
        return mapped(self.point.value, sample.v, sample.d)

    def slopes(self, sample: Sample) -> Array:
        """The nonzeros of the outputs' Jacobian."""
        return mapped(self.point.jacobian, sample.v, sample.d)

    @cached_property
    def halves(self) -> Sample:
        """The grid that all integrals of first-order conditions use."""
        return self.grid(HALVES, HALF_WEIGHTS)

    @cached_property
    def halves_outputs(self) -> Array:
        """The outputs on that grid."""
        return self.outputs(self.halves)

    @cached_property
    def halves_slopes(self) -> Array:
        """The Jacobian's nonzeros on that grid."""
        return self.slopes(self.halves)

    @cached_property
    def halves_weights(self) -> Array:
        """What each output counts in the Hamiltonian on that grid, the costates integrated anew."""
        return self._counted(self.halves, self.continued.values)

    @cached_property
    def halves_gradient(self) -> Array:
        """The derivatives of the outputs that count so on that grid."""
        return self.gradient(self.halves, self.halves_slopes, self.halves_weights)

    @cached_property
    def halves_bends(self) -> Array:
        """The nonzeros of the second derivatives of the outputs that count so on that grid."""
        return mapped(self.point.hessian, self.halves.v, self.halves.d, self.halves_weights)

    def weights(self, sample: Sample, *, constraints: bool = True, costates: Array | None = None) -> Array:
        """What each output counts in the Hamiltonian per fraction: costates, multipliers, sign of the integrand.

        Where no `costates` are given they are, on the grid of halves, integrated anew, and elsewhere as stored.
        """
        if costates is not None:
            weights = self._counted(sample, costates)
        elif sample is self.halves:
            weights = self.halves_weights.copy()
        else:
            weights = self._counted(sample, self.of(self.costates, sample.interval, sample.local))
        if not constraints:
            weights[:, self.point.states : self.point.states + self.point.constraints] = 0.0
        return weights

    def _counted(self, sample: Sample, costates: Array) -> Array:
        n, c = self.point.states, self.point.constraints
        weights = np.empty((len(sample.local), self.point.outputs))
        weights[:, :n] = costates
        if c:
            density = self.of(self.path.multiplier_modes, sample.interval, sample.local)
            weights[:, n : n + c] = density * (self.end - self.start)[sample.interval, None]
        weights[:, n + c : -1] = -self.path.row_multipliers[self._integral_rows]
        weights[:, -1] = self.sign
        return weights

    @cached_property
    def continued(self) -> Continued:
        """The costates on the grid of halves, integrated anew from the nodes."""
        return continued(self, _STEPS)

    @cached_property
    def control_ends(self) -> Array:
        """The controls at both ends of every interval (N x 2 x m)."""
        controls = self._bounded(self.in_each(self.controls, np.array([0.0, 1.0])))
        return controls.reshape(self.count, 2, self.point.controls)

    @cached_property
    def costate_ends(self) -> Array:
        """The stored costates at both ends of every interval (N x 2 x n)."""
        return self.in_each(self.costates, np.array([0.0, 1.0])).reshape(self.count, 2, self.point.states)

    @cached_property
    def fixed_ends(self) -> list[tuple[bool, bool]]:
        """For each state whether its value at the first and at the last place is given."""
        last = len(self.problem.places) - 1
        held = {(state, place) for state, place, condition in self.compiled.fixed if condition.equality}
        return [((j, 0) in held, (j, last) in held) for j in range(self.point.states)]

    @cached_property
    def anew(self) -> tuple[Array, float]:
        """The integrals of the conditions and that of the functional (SI), taken anew."""
        first = self.point.states + self.point.constraints
        least = np.append(np.zeros(len(self.path.program.layout.integrals)), self.program_value)
        totals = integrate(self, 0.01 * self.tolerance, lambda sample: self.outputs(sample)[:, first:], least)
        return totals[:-1], float(totals[-1])

    @property
    def end_inputs(self) -> Array:
        """The inputs of the end function."""
        path, where = self.path, self.path.program.layout
        return np.concatenate(
            [path.nodes[where.at_place].ravel(), path.places, path.parameters, path.z[where.integrals]]
        )

    @property
    def end_weights(self) -> Array:
        """What the outputs of the end function count: the multipliers of its conditions, the sign of the functional."""
        return np.append(self.path.row_multipliers[self.path.program.rows.conditions :], self.sign)

    @cached_property
    def end_slopes(self) -> tuple[Array, Array]:
        """The inputs of the end function, and the slopes of endpoint term + multipliers x conditions by them."""
        end, y, weights = self.compiled.end, self.end_inputs, self.end_weights
        numbers = mapped(end.jacobian, y[None, :], self.constants[None, :])[0]
        slopes = np.zeros(len(y))
        for row, column, number in zip(end.jacobian_rows, end.jacobian_columns, numbers, strict=True):
            slopes[column] += weights[row] * number
        return y, slopes

    def holds_controls(self, output: int) -> bool:
        """True where an output of the point function depends on a control."""
        n, m = self.point.states, self.point.controls
        pairs = zip(self.point.jacobian_rows, self.point.jacobian_columns, strict=True)
        return any(row == output and n <= column < n + m for row, column in pairs)

    @property
    def _integral_rows(self) -> slice:
        rows = self.path.program.rows
        return slice(rows.integrals, rows.conditions)

    def gradient(self, sample: Sample, slopes: Array, weights: Array) -> Array:
        """Derivative of the weighed outputs per unit of the independent variable, by every input (P x inputs)."""
        rows = np.array(self.point.jacobian_rows, dtype=int)
        columns = np.array(self.point.jacobian_columns, dtype=int)
        total = np.zeros((len(slopes), self.point.inputs))
        weighed = slopes * weights[:, rows]
        for entry, column in enumerate(columns):
            total[:, column] += weighed[:, entry]
        return np.asarray(total / (self.end - self.start)[sample.interval, None])

    def mean(self, values: Array) -> Array:
        """The mean over the curve of values on the grid of halves."""
        return np.asarray(self.halves.measure @ values / self.span)

    @cached_property
    def state_sizes(self) -> Array:
        """The largest absolute value of each state, or its scale where it is zero all along."""
        n = self.point.states
        sizes = np.abs(np.vstack([self.path.nodes, self.halves.v[:, :n]])).max(axis=0, initial=0.0)
        scale = self.path.program.scale[self.path.program.layout.nodes[0]]
        return np.asarray(np.where(sizes > 1e-12 * scale, sizes, scale))

    @cached_property
    def state_extents(self) -> Array:
        """How far each state moves; its size where it hardly does."""
        extent = np.ptp(np.vstack([self.path.nodes, self.halves.v[:, : self.point.states]]), axis=0)
        return np.asarray(np.where(extent > 1e-3 * self.state_sizes, extent, self.state_sizes))

    @cached_property
    def control_sizes(self) -> Array:
        """The mean absolute value of each control (finite also where a slope is not), or its scale."""
        n, m = self.point.states, self.point.controls
        sizes = self.mean(np.abs(self.halves.v[:, n : n + m]))
        scale = self.path.program.scale[self.path.program.layout.controls].min(axis=0)
        return np.asarray(np.where(sizes > 1e-9 * scale, sizes, scale))

    @cached_property
    def input_sizes(self) -> Array:
        """A size for each input of the point function."""
        parameters = self.path.program.scale[self.path.program.layout.parameters]
        return np.concatenate([self.state_sizes, self.control_sizes, [abs(self.span)] * 2, parameters])

    @cached_property
    def power(self) -> float:
        """The size of the Hamiltonian: the mean of |integrand| + sum |costate x rate|, per unit of the variable."""
        n = self.point.states
        terms = np.abs(self.halves_outputs * self.weights(self.halves, constraints=False))
        terms[:, n : n + self.point.constraints] = 0.0
        per_unit = np.nansum(terms, axis=1) / np.abs(self.end - self.start)[self.halves.interval]
        floor = 1e-3 * abs(self.path.program.value_scale) / abs(self.span)
        return max(float(self.mean(per_unit)), float(floor))

    @cached_property
    def value_size(self) -> float:
        """The size of the functional that first-order changes are compared with."""
        return float(self.power * abs(self.span))

    @property
    def lowers(self) -> str:
        """What a better curve does to the user's functional, as a word."""
        return "raises" if self.asked.seek is Seek.MAXIMUM else "lowers"

    def told(self, value: float) -> str:
        """A value of the solved form as one of the user's functional, in its unit."""
        unit = self.problem.value_unit
        return f"{self.asked.value(value) / unit.factor:.10g}{' ' if unit.text else ''}{unit.text}"

    @property
    def program_value(self) -> float:
        """A first size of the functional, before costates are at hand."""
        return max(abs(self.path.value), 1e-3 * abs(self.path.program.value_scale))

    @cached_property
    def output_sizes(self) -> Array:
        """For each output the mean over the curve of what its slopes make of the sizes of its inputs."""
        sizes = np.zeros(self.point.outputs)
        means = self.mean(np.nan_to_num(np.abs(self.halves_slopes), nan=0.0, posinf=0.0))
        for row, column, value in zip(self.point.jacobian_rows, self.point.jacobian_columns, means, strict=True):
            sizes[row] += value * self.input_sizes[column]
        return sizes
