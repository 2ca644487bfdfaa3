"""The slope of the optimal value with every constant.

By the envelope theorem the least value changes with a constant as the Lagrangian does at the solution, curve and
multipliers held: the formulas' own partial derivative, and the shift of every limit times the limit's multiplier.  So
the slopes cost one evaluation of the formulas, however the curve itself would change.

Reference: Fiacco (1983), Introduction to Sensitivity and Stability Analysis in Nonlinear Programming, section 3.4 (from
memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from solvers.formula.nodes import Name, walk
from solvers.problem import Constant, Seek
from solvers.solution import Slope
from solvers.transcription.evaluation import end_inputs, point_inputs
from solvers.transcription.functions import Compiled, with_constants
from solvers.transcription.limits import limits
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]

STEP = 1e-3
"""Step, relative to a constant, of the differences of limits; their error is of the fourth order, so below rounding."""


def slopes(path: Trajectory, shifts: Sequence[Shift]) -> tuple[Slope, ...]:
    """Of every constant in SI, in the user's sense of the value; NaN where the value has no slope with it.

    `shifts` are those of the limits with every constant.
    """
    problem = path.program.compiled.lowered.problem
    if not problem.constants:
        return ()
    by_constants, by_places = partial_of_formulas(path)
    places = np.array([shift.lower[path.program.layout.places] for shift in shifts])
    total = by_constants + places @ by_places - shift_of_limits(path, shifts)
    sign = -1.0 if problem.seek is Seek.MAXIMUM else 1.0
    return tuple(
        Slope(constant.name, sign * float(slope) + 0.0, constant.tolerance)
        for constant, slope in zip(problem.constants, total, strict=True)
    )


def point_weights(path: Trajectory) -> Array:
    """What each output of the point function counts in the Lagrangian, at all M points (M x outputs; SI)."""
    program = path.program
    where, rows, point = program.layout, program.rows, program.compiled.point
    count = len(where.fractions)
    widths = program.mesh.widths[program.mesh.owner]
    multipliers = path.row_multipliers
    sign = np.sign(program.value_scale)
    return np.hstack([
        -widths[:, None] * multipliers[: rows.ends].reshape(count, point.states),
        multipliers[rows.pointwise : rows.rims].reshape(count, point.constraints),
        -where.measures[:, None] * multipliers[rows.integrals : rows.conditions],
        sign * where.measures[:, None],
    ])  # fmt: skip


def end_weights(path: Trajectory) -> Array:
    """The same for the outputs of the end function."""
    return np.append(path.row_multipliers[path.program.rows.conditions :], np.sign(path.program.value_scale))


def partial_of_formulas(path: Trajectory) -> tuple[Array, Array]:
    """The partial derivative of the Lagrangian by every constant, limits held, and by every place.

    Places are variables of the program, but where they are given it has no derivatives by them.
    """
    compiled, where = path.program.compiled, path.program.layout
    v, d = point_inputs(compiled, where, path.z)
    weights = point_weights(path)
    along = compiled.point.value.reverse(1).map(len(v))(v.T, d.T, np.zeros(weights.shape[::-1]), weights.T)
    by_v, by_d = (np.asarray(part) for part in along)
    none = np.zeros(compiled.end.outputs)
    at_ends = compiled.end.value.reverse(1)(end_inputs(where, path.z), compiled.constants, none, end_weights(path))
    by_y, by_constants = (np.asarray(part).ravel() for part in at_ends)
    first = compiled.point.states + compiled.point.controls
    count, before = len(where.places), len(where.places) * compiled.point.states
    by_places = by_y[before : before + count].copy()
    np.add.at(by_places, where.stretch, by_v[first])
    np.add.at(by_places, where.stretch + 1, by_v[first + 1])
    return by_constants + by_d[1:].sum(axis=1), by_places


@dataclass(frozen=True, slots=True)
class Shift:
    """How the bounds of z and of g (SI) move per unit of a constant; zero where they do not, or are infinite."""

    lower: Array
    upper: Array
    row_lower: Array
    row_upper: Array


def shift_of_limits(path: Trajectory, shifts: Sequence[Shift]) -> Array:
    """For every constant the shift of all limits but places, each times its multiplier, summed."""
    bounds = path.bound_multipliers.copy()
    bounds[path.program.layout.places] = 0.0
    rows = path.row_multipliers
    return np.array([
        bounds @ np.where(bounds > 0, shift.upper, shift.lower)
        + rows @ np.where(rows > 0, shift.row_upper, shift.row_lower)
        for shift in shifts
    ])  # fmt: skip


def limit_shifts(path: Trajectory) -> tuple[Shift, ...]:
    """The shift of all limits with every constant."""
    compiled = path.program.compiled
    used = _in_limits(compiled)
    where, rows = path.program.layout, path.program.rows
    still = Shift(*(np.zeros(size) for size in (where.size, where.size, rows.count, rows.count)))
    constants = compiled.lowered.problem.constants
    return tuple(_shift(path, constant) if constant.name in used else still for constant in constants)


def _shift(path: Trajectory, constant: Constant) -> Shift:
    """By differences: limits are short formulas of constants, nearly always linear ones."""
    program = path.program
    step = STEP * (abs(constant.value) or 1.0)

    def moved(share: int) -> tuple[Array, ...]:
        changed = with_constants(program.compiled, {constant.name: constant.value + share * step})
        return limits(changed, program.layout, program.rows)

    with np.errstate(invalid="ignore"):  # infinite limits do not move
        slopes_ = ((8 * (one - two) - (three - four)) / (12 * step)
                   for one, two, three, four in zip(*map(moved, (1, -1, 2, -2)), strict=True))  # fmt: skip
        return Shift(*(np.where(np.isfinite(slope), slope, 0.0) for slope in slopes_))


def _in_limits(compiled: Compiled) -> set[str]:
    """The names in the formulas of limits and places."""
    problem = compiled.lowered.problem
    conditions = (*problem.endpoints, *problem.constraints, *problem.integrals, *compiled.conditions)
    trees = [tree for c in conditions for tree in (c.lower, c.upper) if tree is not None]
    trees += [place.tree for place in problem.places]
    return {node.name for tree in trees for node in walk(tree) if isinstance(node, Name)}
