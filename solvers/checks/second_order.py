"""The second-order problem of a solved mesh: its matrices, and which limits are active at the solution."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from solvers.checks.condensed import SHARED
from solvers.checks.sampling import Sampler
from solvers.checks.scattered import Scattered, both_triangles, scattered
from solvers.checks.variation import second_variation
from solvers.search.signals import SWITCH
from solvers.transcription.layout import Layout
from solvers.transcription.limits import contacts
from solvers.transcription.program import Program
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

AT_BOUND = 1e-6
"""How near to a limit, scaled, counts as resting on it."""
PUSHED = 1e-6
"""Multipliers, times the size of the variable and relative to its measure, that count as holding a limit."""
SMOOTH = 1e-3
"""Jump of a control, relative to its size, up to which it goes on smoothly."""


@dataclass(frozen=True, slots=True)
class Second:
    """The second-order problem of a solved mesh: all scaled as the program is."""

    hessian: Scattered
    jacobian: Scattered
    metric: Scattered  # dz' metric dz is the mean square of a variation, times the size of the functional
    fixed: Flags
    resting: Flags  # on a bound
    pushed: Flags  # and held there by a multiplier
    equalities: Flags
    at_limit: Flags
    forced: Flags
    long: Flags  # rows that couple the whole curve
    border: Flags  # variables that do, and those of the last interval
    owner: Indices  # the interval inside of which each variable is, or `SHARED`


def second_order(sampler: Sampler) -> Second:
    """Hessian, Jacobian and what is active at the solution."""
    path, program = sampler.path, sampler.path.program
    where, rows, numbers = program.layout, program.rows, program.numbers
    z = path.z / program.scale
    size = abs(program.value_scale)
    multipliers = path.row_multipliers * program.row_scale / size
    bounds = path.bound_multipliers * program.scale / size
    hessian, metric = second_variation(sampler)
    pattern, nonzeros = numbers.jacobian_pattern, numbers.jacobian(z)
    jacobian = scattered(pattern.shape, pattern.rows, pattern.columns(), nonzeros)
    values = numbers.constraints(z)
    share = sampler.value_size / size
    weight = where.measures * np.abs((path.places[where.stretch + 1] - path.places[where.stretch]) / sampler.span)
    fixed = program.lower == program.upper
    held = np.zeros(where.size, bool)
    held[where.controls] = fixed[where.controls]  # arcs on a bound: not given, so they have to be pushed against it
    pull = -(numbers.gradient(z) + pattern.times_from_left(multipliers, nonzeros))
    bounds = np.where(held, pull, bounds)
    fixed &= ~held
    fixed[smooth_junctions(sampler)] = True
    resting = ~fixed & (held | (z - program.lower <= AT_BOUND) | (program.upper - z <= AT_BOUND))
    measure = np.ones(where.size)
    measure[where.inner] = measure[where.controls] = weight[:, None]
    pushed = resting & (np.abs(bounds) > PUSHED * share * measure)
    pushed[where.controls] |= _pushed_throughout(sampler, resting, bounds, PUSHED * share * weight)
    equalities = program.row_lower == program.row_upper
    touched = contacts(program.compiled, where, sampler.problem.held) != 0
    equalities[rows.pointwise : rows.rims] &= ~touched.ravel()  # arcs on a constraint: not given either
    at_limit = ~equalities & ((values - program.row_lower <= AT_BOUND) | (program.row_upper - values <= AT_BOUND))
    row_measure = np.ones(rows.count)
    if sampler.point.constraints:
        row_measure[rows.pointwise : rows.rims] = np.repeat(weight, sampler.point.constraints)
    forced = at_limit & (np.abs(multipliers) > PUSHED * share * row_measure)
    long = np.zeros(rows.count, bool)
    long[rows.integrals :] = True
    border = np.zeros(where.size, bool)
    border[where.nodes[-2].min(initial=where.size) :] = True  # the last interval, places, parameters, integrals
    if not sampler.point.states:
        border[where.controls[where.first[-2], 0] :] = True
    return Second(hessian, jacobian, metric, fixed, resting, pushed, equalities, at_limit, forced,
                  long, border, owners(where))  # fmt: skip


def owners(where: Layout) -> Indices:
    """The interval inside of which each variable is, or `SHARED`."""
    owner = np.full(where.size, SHARED)
    interval = np.repeat(np.arange(len(where.first) - 1), np.diff(where.first))[:, None]
    owner[where.inner] = owner[where.controls] = interval
    owner[where.nodes] = SHARED
    return owner


def smooth_junctions(sampler: Sampler) -> Indices:
    """The switches at which no control jumps, by where their places stand in z.

    Moving such a place alone changes the curve by nothing of second order: the variation of the controls says already
    where the arcs meet (Maurer, 1981, on first- and second-order conditions with control constraints; from memory).
    """
    where, problem = sampler.path.program.layout, sampler.problem
    found = []
    for place, node in zip(problem.places, where.at_place, strict=True):
        names = [parameter.name for parameter in problem.parameters]
        if not place.label.startswith(SWITCH + " ") or place.label not in names:
            continue
        jump = np.abs(sampler.control_ends[node, 0] - sampler.control_ends[node - 1, 1]) / sampler.control_sizes
        if jump.max(initial=0.0) <= SMOOTH:
            found.append(where.parameters[names.index(place.label)])
    return np.array(found, dtype=np.int64)


def hessian_of_program(path: Trajectory) -> Scattered:
    """The second derivatives of the program's own Lagrangian, whose quadrature is at the collocation points."""
    program = path.program
    return hessian_at(
        program, path.z / program.scale, path.row_multipliers * program.row_scale / abs(program.value_scale)
    )


def hessian_at(program: Program, z: Array, multipliers: Array) -> Scattered:
    """The same at any z and multipliers of the rows, both scaled."""
    pattern, numbers = program.numbers.hessian_pattern, program.numbers
    upper = numbers.hessian(z, 1.0, multipliers)
    return both_triangles(scattered(pattern.shape, pattern.rows, pattern.columns(), upper))


def _pushed_throughout(sampler: Sampler, resting: Flags, bounds: Array, least: Array) -> Flags:
    """Controls that rest on one bound all through an interval that pushes on the whole: a switch may touch its end."""
    where, values = sampler.path.program.layout, sampler.path.controls
    controls, first = where.controls, where.first[:-1]
    if not resting[controls].any():
        return np.zeros(values.shape, bool)
    above = np.abs(sampler.bounds[3] - values) < np.abs(values - sampler.bounds[2])
    push = np.where(above, bounds[controls], -bounds[controls])
    whole = np.minimum.reduceat(np.where(resting[controls], push, -np.inf), first, axis=0) >= -least.max()
    whole &= np.add.reduceat(push, first, axis=0) > np.add.reduceat(least, first)[:, None]
    return np.asarray(np.repeat(whole, np.diff(where.first), axis=0))
