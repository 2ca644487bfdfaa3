"""Sizes of all quantities, found from the problem itself, so that no result depends on the units chosen."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.evaluation import end_inputs, mapped, point_outputs, point_slopes
from solvers.transcription.limits import quantity_bounds

if TYPE_CHECKING:
    from solvers.transcription.functions import Compiled
    from solvers.transcription.layout import Layout

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Scales:
    """One positive size per state, control, place, parameter and integral; all in SI."""

    states: Array
    controls: Array
    places: Array
    parameters: Array
    integrals: Array


@dataclass(frozen=True, slots=True)
class RowSizes:
    """Sizes of the outputs that have no natural scale: pointwise constraints, conditions, the functional."""

    pointwise: Array
    conditions: Array
    value: float


def _finite_size(lower: float, upper: float) -> float:
    """The larger of two limits, of those that are finite; 0 where neither is."""
    return max((abs(limit) for limit in (lower, upper) if np.isfinite(limit)), default=0.0)


SPIKE = 0.01
"""Where the mean absolute value of a control is less than this share of the largest, it is large in a spike only."""
SHARP = 1e-5
"""The same where rounding, times the largest, is no longer nothing beside the mean: to a root of its digits."""

SHRINKAGE = 1e-3
"""How much smaller a size may become from one mesh to the next: what tends to zero must not be blown up."""

ROUNDING = 1e-10
"""What is smaller than this, relative to its size before, is zero to the minimiser: its size is left as it was."""

FAINT = 1e-3
"""The least size of a derivative, relative to that of what it is the derivative of over the whole range: where a
function hardly moves, its slope is the minimiser's noise, which no mesh resolves."""


def find_scales(
    compiled: Compiled, where: Layout, z: Array, before: Scales | None = None, faint: float = FAINT
) -> Scales:
    """Sizes from values (SI) on a mesh: the largest value of each quantity, else its bounds, else its neighbours.

    A quantity that is zero all along gets the size that its derivative or integral has over the whole range; a control
    of which nothing is known that at which it moves a state.  `before` are the sizes on the mesh before, if any;
    `faint` is the least size of a slope, relative to what it is the slope of over the whole range.
    """
    lowered = compiled.lowered
    places = z[where.places]
    span = max(float(np.ptp(places)), 1e-300)
    sizes: dict[tuple[str, int], float] = {}
    state_lower, state_upper, control_lower, control_upper = quantity_bounds(compiled)
    for quantities, values, lower, upper in (
        (lowered.states, np.vstack([z[where.nodes], z[where.inner]]), state_lower, state_upper),
        (lowered.controls, z[where.controls], control_lower, control_upper),
    ):
        for index, quantity in enumerate(quantities):
            size = float(np.abs(values[:, index]).max())
            sizes[quantity] = size or _finite_size(lower[index], upper[index])
    known_names = {name for (name, _), size in sizes.items() if size > 0}
    unknown = [quantity for quantity in lowered.controls if quantity[0] not in known_names]
    for name in {name for name, _ in sizes}:
        orders = sorted(order for other, order in sizes if other == name)
        known = [order for order in orders if sizes[name, order] > 0]
        for order in orders:
            if sizes[name, order] == 0:
                near = min(known, key=lambda k: abs(k - order), default=None)
                sizes[name, order] = span**-order if near is None else sizes[name, near] * span ** (near - order)
    for index, quantity in enumerate(lowered.controls):
        if quantity in unknown:
            states = np.array([sizes[q] for q in lowered.states])
            sizes[quantity] = _moving(compiled, where, z, index, states) or sizes[quantity]
    not_faint(sizes, span, faint)
    parameters = np.abs(z[where.parameters])
    integrals = _integral_sizes(compiled, where, z)
    for index, parameter in enumerate(lowered.problem.parameters):
        if parameters[index] == 0:
            parameters[index] = _finite_size(parameter.lower, parameter.upper)
    found = Scales(
        states=np.array([sizes[q] for q in lowered.states]),
        controls=np.array([sizes[q] for q in lowered.controls]),
        places=np.full(len(places), max(span, 1e-3 * float(np.abs(places).max()))),
        parameters=np.where(parameters > 0, parameters, 1.0),
        integrals=np.where(integrals > 0, integrals, 1.0),
    )
    if before is None:
        return found
    return Scales(*(_kept(getattr(found, f.name), getattr(before, f.name)) for f in fields(Scales)))


def _kept(found: Array, before: Array) -> Array:
    """Sizes that do not fall too fast, nor to what is nothing but rounding."""
    return np.where(found < ROUNDING * before, before, np.maximum(found, SHRINKAGE * before))


def not_faint(sizes: dict[tuple[str, int], float], span: float, faint: float = FAINT) -> None:
    """Raise the sizes of derivatives, in place, to what still moves the function below them noticeably."""
    for name, order in sorted(sizes):
        if (name, order - 1) in sizes:
            sizes[name, order] = max(sizes[name, order], faint * sizes[name, order - 1] / span)


def _moving(compiled: Compiled, where: Layout, z: Array, control: int, states: Array) -> float:
    """The least size at which a control moves some state by its size, or changes what moves it; 0 where it does not."""
    point = compiled.point
    rates = np.abs(point_outputs(compiled, where, z)[:, : point.states]).max(axis=0, initial=0.0)
    moves = np.maximum(states, np.where(np.isfinite(rates), rates, 0.0))
    slopes = np.median(np.abs(point_slopes(compiled, where, z)), axis=0)
    entries = zip(point.jacobian_rows, point.jacobian_columns, slopes, strict=True)
    sizes = [moves[row] / slope for row, column, slope in entries
             if column == point.states + control and row < point.states and 0 < slope < np.inf]  # fmt: skip
    return float(min(sizes, default=0.0))


def _integral_sizes(compiled: Compiled, where: Layout, z: Array) -> Array:
    """Integrals of the absolute values: an integral that cancels to zero is not small for that."""
    point = compiled.point
    if not point.integrals:
        return np.zeros(0)
    outputs = point_outputs(compiled, where, z)
    first = point.states + point.constraints
    integrands = np.abs(outputs[:, first : first + point.integrals])
    return np.asarray(where.measures @ np.where(np.isfinite(integrands), integrands, 0.0))


EXACT = 1e-4
"""The least share of the squares that counts as the size of their sum: where a model fits exactly it would vanish."""


def find_row_sizes(compiled: Compiled, where: Layout, scales: Scales, z: Array, before: float = 0.0) -> RowSizes:
    """Sizes of the outputs from their slopes at values (SI) on a mesh: how much each changes over the scales.

    `before` is the size of the functional on the mesh before, if any: where all of the integrand is least at zero, as a
    square is, its slopes vanish along the best curve.
    """
    point, end = compiled.point, compiled.end

    def row_sums(z: Array, controls: Array) -> Array:
        sizes = np.concatenate([scales.states, controls, [scales.places[0]] * 2, scales.parameters])
        numbers = point_slopes(compiled, where, z)
        return _row_sums(numbers, point.jacobian_rows, point.jacobian_columns, point.outputs, sizes)

    slopes = row_sums(z, scales.controls)
    calm = _without_spikes(where, z, scales.controls)
    integrand = slopes[:, -1] if calm is None else row_sums(*calm)[:, -1]
    sizes = np.concatenate([np.tile(scales.states, len(where.places)), scales.places, scales.parameters,
                            scales.integrals])  # fmt: skip
    numbers = mapped(end.jacobian, end_inputs(where, z)[None], np.array(compiled.constants, dtype=float)[None])
    end_slopes = _row_sums(numbers, end.jacobian_rows, end.jacobian_columns, end.outputs, sizes)[0]
    n = point.states
    pointwise = slopes[:, n : n + point.constraints]
    value = float(where.measures @ integrand) + float(end_slopes[-1])
    value = max(value, EXACT * _squares(compiled))
    value = max(value, SHRINKAGE * before) if value > 0 else before
    return RowSizes(
        pointwise=_positive(np.median(pointwise, axis=0)) if point.constraints else np.zeros(0),
        conditions=_positive(end_slopes[:-1]),
        value=value if value > 0 and np.isfinite(value) else 1.0,
    )


def _squares(compiled: Compiled) -> float:
    """The size of the squares of all observations: what they would come to if nothing were fitted."""
    points = (point for observation in compiled.lowered.problem.observations for point in observation.points)
    return sum((point.value / point.sigma) ** 2 for point in points)


def _without_spikes(where: Layout, z: Array, scales: Array) -> tuple[Array, Array] | None:
    """Values and sizes of the controls, those that are large in a spike only at their mean; None where none is.

    A slope that is not bounded would else blow up what counts as a noticeable change of the functional.
    """
    controls = z[where.controls]
    means, spikes = _spikes(where, z)
    if not spikes.any():
        return None
    calm = z.copy()
    calm[where.controls] = np.where(spikes, np.copysign(means, controls), controls)
    return calm, np.where(spikes, np.minimum(means, scales), scales)


def sizes_along(compiled: Compiled, where: Layout, scales: Scales, z: Array) -> Array:
    """The size of every control at every point: of one without limits that is large in a spike only, its interval's.

    With the size of the spike for all, the equations of all the other points would be known to rounding times it only:
    beside a singular end a slope may be as large as the end is resolved.
    """
    sizes = np.tile(scales.controls, (len(where.fractions), 1))
    means, spikes = _spikes(where, z, SHARP)
    lower, upper = quantity_bounds(compiled)[2:]
    spikes = spikes & np.isinf(lower) & np.isinf(upper)
    if spikes.any():
        largest = np.maximum.reduceat(np.abs(z[where.controls]), where.first[:-1], axis=0)
        largest = np.repeat(largest, np.diff(where.first), axis=0)
        sizes = np.where(spikes, np.clip(largest, means, np.maximum(means, scales.controls)), sizes)
    return sizes


def _spikes(where: Layout, z: Array, share: float = SPIKE) -> tuple[Array, NDArray[np.bool_]]:
    """The mean absolute value of every control, and for which controls that is less than a share of the largest."""
    controls = np.abs(z[where.controls])
    means = where.measures @ controls / max(float(where.measures.sum()), 1e-300)
    return means, (means > 0) & (means < share * controls.max(axis=0, initial=0.0))


def _row_sums(numbers: Array, rows: list[int], columns: list[int], outputs: int, sizes: Array) -> Array:
    """Sum over a row of |slope| times the size of what it is the slope of; for each set of numbers."""
    total = np.zeros((len(numbers), outputs))
    finite = np.where(np.isfinite(numbers), np.abs(numbers), 0.0)
    for entry, (row, column) in enumerate(zip(rows, columns, strict=True)):
        total[:, row] += finite[:, entry] * sizes[column]
    return total


def _positive(sizes: Array) -> Array:
    return np.where((sizes > 0) & np.isfinite(sizes), sizes, 1.0)
