"""How far a curve leaves its limits between the points of a mesh, and what that may gain of the value.

Limits hold at the points only.  Where a limit pushes, the value is too good by how far it is left times the push, to
first order: at a touch the push may be so large that next to nothing counts, over a stretch that no even grid sees.  So
there the farthest place is looked for.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from solvers.series import basis
from solvers.transcription.evaluation import mapped
from solvers.transcription.limits import constants_of, interval_of, quantity_bounds
from solvers.transcription.trajectory import Trajectory, sizes_of

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

GRID = np.linspace(-1.0, 1.0, 15)
"""Places, in the local variable, at which limits are looked at between the points."""
CLOSE = -np.cos(np.linspace(0.0, np.pi, 65))
"""The same for bounds of states, which need no formula: closest at the ends, where a state may just reach its bound."""
CLOSER = 2
"""How often such a grid is drawn together around the farthest place, to a step on either side of it each time; then
that place is the vertex of a parabola."""


def excess(path: Trajectory) -> tuple[Array, float]:
    """How far the limits are left on each interval (N), relative to the sizes of what they limit, and the gain (SI)."""
    compiled, where, rows = path.program.compiled, path.program.layout, path.program.rows
    count = len(path.program.mesh.intervals)
    worst, gained = np.zeros(count), 0.0
    lower, upper, _, _ = quantity_bounds(compiled)
    bounded = np.flatnonzero(np.isfinite(lower) | np.isfinite(upper))
    if bounded.size:
        pushes = np.abs(path.bound_multipliers[where.inner])[:, bounded]
        found = _of(path, _states, CLOSE, bounded, (lower[bounded], upper[bounded]), pushes, sizes_of(path)[0][bounded])
        worst, gained = found
    lower, upper = quantity_bounds(compiled)[2:]
    arcs, bounded = on_arcs(path), np.flatnonzero(np.isfinite(lower) | np.isfinite(upper))
    if arcs.any() and bounded.size:
        pushes = np.abs(path.bound_multipliers[where.controls])[:, bounded]
        sizes = sizes_of(path)[1][bounded]
        more, gain = _of(path, _controls, CLOSE, bounded, (lower[bounded], upper[bounded]), pushes, sizes, arcs)
        worst, gained = np.maximum(worst, more), gained + gain
    limits = np.array([interval_of(c, constants_of(compiled)) for c in compiled.pointwise]).reshape(-1, 2)
    unequal = np.flatnonzero(limits[:, 0] < limits[:, 1])
    if unequal.size:
        sizes = path.program.row_scale[rows.pointwise :][: len(limits)][unequal]
        pushes = np.abs(path.row_multipliers[rows.pointwise : rows.rims]).reshape(-1, len(limits))[:, unequal]
        more, gain = _of(path, _bodies, GRID, unequal, (limits[unequal, 0], limits[unequal, 1]), pushes, sizes)
        worst, gained = np.maximum(worst, more), gained + gain
    return worst, gained


Values = Callable[[Trajectory, Indices, Array], Array]
"""Values of several quantities on chosen intervals (K) at local places (K x P) there: K x P x quantities."""


def _of(
    path: Trajectory,
    values: Values,
    grid: Array,
    chosen: Indices,
    limits: tuple[Array, Array],
    pushes: Array,
    sizes: Array,
    where: NDArray[np.bool_] | None = None,
) -> tuple[Array, float]:
    """The same for some quantities J with their limits, pushes at the points (M x J) and sizes, `where` it counts."""

    def outside(intervals: Indices, places: Array) -> Array:
        found = values(path, intervals, places)[:, :, chosen]
        left = np.nan_to_num(np.maximum(limits[0] - found, found - limits[1]))
        return left if where is None else np.where(where[intervals, None, None], left, 0.0)

    mesh = path.program.mesh
    each = np.arange(len(mesh.intervals))
    first = outside(each, np.tile(grid, (len(each), 1)))
    left = first.max(axis=1)
    pushed = np.add.reduceat(pushes, path.program.layout.first[:-1], axis=0)
    counts = pushed * sizes > path.program.compiled.lowered.problem.options.tolerance * abs(path.program.value_scale)
    for j in np.flatnonzero(counts.any(axis=0)):
        here = np.flatnonzero(counts[:, j])
        at, step = grid[first[here, :, j].argmax(axis=1)], float(np.diff(grid).max())
        for _ in range(CLOSER):
            places = np.clip(at, step - 1, 1 - step)[:, None] + step * GRID  # all apart, or no parabola is theirs
            there = outside(here, places)[:, :, j]
            at, step = places[np.arange(len(here)), there.argmax(axis=1)], step * (GRID[1] - GRID[0])
        left[here, j] = np.maximum(left[here, j], _vertex(there))
    left = np.maximum(left, 0.0)
    return (left / sizes).max(axis=1), float((pushed * left).sum())


def _vertex(values: Array) -> Array:
    """The largest value of the parabola through the largest of each row of values (K x P) and its neighbours."""
    each, most = np.arange(len(values)), np.clip(values.argmax(axis=1), 1, values.shape[1] - 2)
    before, here, after = (values[each, most + k] for k in (-1, 0, 1))
    bend = 2 * here - before - after
    inner = (bend > 0) & (np.abs(after - before) <= 2 * bend)
    return np.asarray(
        np.where(inner, here + (after - before) ** 2 / np.where(inner, 8 * bend, 1.0), values.max(axis=1))
    )


def _at(modes: Array, intervals: Indices, places: Array) -> Array:
    """Piecewise polynomials (N x degrees x components) on some intervals at local places there (K x P x components)."""
    table = basis(places.ravel(), modes.shape[1] - 1).reshape(*places.shape, -1)
    return np.asarray(table @ modes[intervals])


def _states(path: Trajectory, intervals: Indices, places: Array) -> Array:
    return _at(path.state_modes, intervals, places)


def _controls(path: Trajectory, intervals: Indices, places: Array) -> Array:
    return _at(path.control_modes, intervals, places)


def on_arcs(path: Trajectory) -> NDArray[np.bool_]:
    """The intervals along which a state is held on its limit: it determines a control there, which may jump at the ends
    of the arc only.  Elsewhere controls are taken as far as their bounds, whatever polynomials do where they switch."""
    lowered = path.program.compiled.lowered
    stretches = [held.stretch for held in lowered.problem.held if (held.name, held.order) in lowered.states]
    return np.isin(path.program.mesh.stretch, stretches)


def _bodies(path: Trajectory, intervals: Indices, places: Array) -> Array:
    """Bodies of the pointwise constraints."""
    mesh, compiled = path.program.mesh, path.program.compiled
    lower, upper = quantity_bounds(compiled)[2:]
    states, controls = _states(path, intervals, places), _at(path.control_modes, intervals, places)
    shape = (*places.shape, 1)
    starts, ends = (path.places[mesh.stretch[intervals] + side][:, None, None] for side in (0, 1))
    fractions = (mesh.starts[intervals, None] + mesh.widths[intervals, None] * (places + 1) / 2)[:, :, None]
    parameters = np.broadcast_to(path.parameters, (*shape[:2], len(path.parameters)))
    constants = np.broadcast_to(np.array(compiled.constants), (*shape[:2], len(compiled.constants)))
    v = np.concatenate([states, np.clip(controls, lower, upper), np.broadcast_to(starts, shape),
                        np.broadcast_to(ends, shape), parameters], axis=2)  # fmt: skip
    d = np.concatenate([fractions, constants], axis=2)
    count = shape[0] * shape[1]
    outputs = mapped(compiled.point.value, v.reshape(count, -1), d.reshape(count, -1))
    first = compiled.point.states
    return outputs[:, first : first + compiled.point.constraints].reshape(*shape[:2], -1)
