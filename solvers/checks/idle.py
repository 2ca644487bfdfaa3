"""Idle arcs: a state rests on its limit while controls, or constraints on them, rest on theirs and keep it there.

A store that is full stays full while nothing goes in or out.  More limits bind than there are controls, and their
multipliers are not unique: the price of what is stored may be anything for which neither filling nor emptying pays.  A
minimiser finds some of them, with jumps that no limit may make.  Here those with the right signs are found that push
as evenly as can be, from the stationarity of the program in the state and the controls along each such arc.

Reference: Lawson, Hanson (1974), Solving Least Squares Problems, chapter 23 (with bounds; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.checks.multipliers import rate_rows, with_multipliers
from solvers.transcription.limits import quantity_bounds
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

RESTING = 1e-6
"""How near to its limit, relative to its scale, something has to stay."""
EVENLY = 1e-4
"""Weight of an even push beside the stationarity."""
LARGEST = 400
"""Unknown multipliers of an arc up to which they are found."""


@dataclass(frozen=True, slots=True)
class Idle:
    """A state along a stretch on one side of its limits."""

    stretch: int
    state: int
    side: int


def idle_arcs(path: Trajectory) -> list[Idle]:
    """The arcs where a state rests on its limit all along, and more limits bind than there are controls."""
    program, where = path.program, path.program.layout
    held = {h.stretch for h in program.compiled.lowered.problem.held}
    if not held:
        return []
    lower, upper, control_lower, control_upper = quantity_bounds(program.compiled)
    near = RESTING * program.scale
    rows = slice(program.rows.pointwise, program.rows.rims)
    values = program.numbers.constraints(path.z / program.scale)[rows]
    unequal = program.row_lower[rows] < program.row_upper[rows]
    binding = unequal & (np.minimum(values - program.row_lower[rows], program.row_upper[rows] - values) <= RESTING)
    binding = binding.reshape(len(path.points), -1).sum(axis=1)
    off = np.minimum(path.controls - control_lower, control_upper - path.controls)
    binding = binding + (off <= near[where.controls]).sum(axis=1)
    found = []
    for stretch in sorted(held):
        on = where.stretch == stretch
        for state in np.flatnonzero(np.isfinite(lower) | np.isfinite(upper)):
            for side, limit in ((-1, lower[state]), (1, upper[state])):
                rests = np.abs(path.states[on, state] - limit).max() <= near[where.nodes[0, state]]
                if rests and np.all(binding[on] >= path.controls.shape[1]):
                    found.append(Idle(stretch, int(state), side))
    return found


def with_right_signs(path: Trajectory, arcs: list[Idle]) -> Trajectory:
    """The same curve with multipliers along its idle arcs that have the signs which limits may have."""
    program, size = path.program, abs(path.program.value_scale)
    z, numbers = path.z / program.scale, program.numbers
    gradient = numbers.gradient(z)
    jacobian = numbers.jacobian_pattern.filled(numbers.jacobian(z)).tocsc()
    rows = path.row_multipliers * program.row_scale / size
    bounds = path.bound_multipliers * program.scale / size
    values = numbers.constraints(z)
    for idle in arcs:
        _change(path, idle, (gradient, jacobian, values), rows, bounds)
    return with_multipliers(path, rows, bounds, -(gradient + jacobian.T @ rows))


def _change(path: Trajectory, idle: Idle, made: tuple[Array, Any, Array], rows: Array, bounds: Array) -> None:
    """Find the multipliers (scaled) of one arc anew; `rows` and `bounds` are changed in place."""
    from scipy.optimize import lsq_linear

    gradient, jacobian, values = made
    program, where = path.program, path.program.layout
    points = np.flatnonzero(where.stretch == idle.stretch)
    entry, end = int(where.at_place[idle.stretch]), int(where.at_place[idle.stretch + 1])
    own = np.union1d(where.inner[points, idle.state], where.nodes[entry : end + 1, idle.state])
    controls = where.controls[points].ravel()
    rates = rate_rows(path, points, entry, end, idle.state)
    count = program.compiled.point.constraints
    limits = (program.rows.pointwise + points[:, None] * count + np.arange(count)).ravel()
    limits = limits[program.row_lower[limits] < program.row_upper[limits]]
    lower, upper = quantity_bounds(program.compiled)[2:]
    near = RESTING * program.scale[controls]
    at = path.z[controls]
    signs = np.concatenate([
        np.full(len(rates), np.nan),
        _sides(values[limits], program.row_lower[limits], program.row_upper[limits], RESTING),
        np.full(len(own), float(idle.side)),
        _sides(at, np.tile(lower, len(points)), np.tile(upper, len(points)), near),
    ])  # fmt: skip
    if len(signs) > LARGEST:
        return
    changed = np.concatenate([rates, limits])
    rest = rows.copy()
    rest[changed] = 0.0
    wanted = -(gradient + jacobian.T @ rest)
    variables = np.concatenate([own, controls])
    block = jacobian[changed][:, variables].toarray().T
    matrix = np.hstack([block, np.eye(len(variables))])
    share = where.measures[points] * len(points)
    sizes = np.ones(len(signs))
    sizes[len(changed) + np.searchsorted(own, where.inner[points, idle.state])] = share
    sizes[len(changed) + len(own) :] = np.repeat(share, len(controls) // len(points))
    evenly = np.diag(EVENLY / np.maximum(sizes, 1e-3))[len(changed) :]
    kept = signs != 0.0
    least = np.where(np.isnan(signs) | (signs < 0), -np.inf, 0.0)[kept]
    most = np.where(np.isnan(signs) | (signs > 0), np.inf, 0.0)[kept]
    system = np.vstack([matrix, evenly])[:, kept]
    right = np.concatenate([wanted[variables], np.zeros(len(evenly))])
    solution = np.zeros(len(signs))
    solution[kept] = lsq_linear(system, right, (least, most), method="bvls", max_iter=3 * len(signs)).x
    rows[changed] = solution[: len(changed)]
    bounds[variables] = solution[len(changed) :]


def _sides(values: Array, lower: Array, upper: Array, near: Array | float) -> Array:
    """1 on the upper limit, -1 on the lower one, 0 on none."""
    return np.where(upper - values <= near, 1.0, np.where(values - lower <= near, -1.0, 0.0))
