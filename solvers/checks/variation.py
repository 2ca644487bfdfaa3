"""The second variation of the functional as a quadratic form of the program's variables, and the size of a variation.

The variations are those of the stored polynomials, but the integral of the Hamiltonian's second derivatives over them
is taken between the nodes.  So a variation that hides from all collocation points (on a singular arc nothing else would
notice it) counts for what it is.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.checks.sampling import HALF_WEIGHTS, HALVES, Sampler
from solvers.checks.scattered import Scattered, scattered
from solvers.series import basis
from solvers.transcription.collocation import Family, scheme
from solvers.transcription.evaluation import mapped

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


def second_variation(sampler: Sampler) -> tuple[Scattered, Scattered]:
    """The second variation, and the mean square of a variation of the states times the size of the functional.

    Both for scaled variables and relative to the program's scale of the value.  Where there are no states the controls'
    mean square is taken.
    """
    program, where, point = sampler.path.program, sampler.path.program.layout, sampler.point
    unit, shape = abs(program.value_scale), (where.size, where.size)
    places, forms, norms = [], [], []
    for group in program.mesh.alike:
        members, degree = group.members, group.scheme.degree
        local, weights = grid_for(degree)
        trial = _trial(group.scheme.family, degree, point.states, point.controls, len(where.parameters))
        own = _local(sampler, members, degree)
        scale = program.scale[own]
        units = scale[:, :, None] * scale[:, None, :] / unit
        places.append((own[:, :, None] * where.size + own[:, None, :]).ravel())
        forms.append((_condensed(trial, _bends(sampler, members, local, weights)) * units).ravel())
        norms.append((_squares(sampler, members, trial, weights) * units).ravel())
    place = np.concatenate(places)
    hessian, metric = (_without_zeros(Scattered(shape, place, np.concatenate(parts))) for parts in (forms, norms))
    hessian = hessian.plus(_at_places(sampler))
    numbers = np.full(len(where.parameters), sampler.value_size / unit)
    return hessian, metric.plus(scattered(shape, where.parameters, where.parameters, numbers))


def _without_zeros(matrix: Scattered) -> Scattered:
    """The same by its other entries: of many states most have nothing to do with each other."""
    there = matrix.values != 0
    return Scattered(matrix.shape, matrix.places[there], matrix.values[there])


def grid_for(degree: int) -> tuple[Array, Array]:
    """Gauss points of both halves of an interval and their weights: so many that no control of the degree is zero at
    all of them, since it could then wiggle unseen."""
    if len(HALVES) > degree:
        return HALVES, HALF_WEIGHTS
    nodes, weights = legendre.leggauss(degree // 2 + 1)
    return np.concatenate([(nodes + 1) / 4, (nodes + 3) / 4]), np.concatenate([weights, weights]) / 4


def _bends(sampler: Sampler, members: Indices, local: Array, weights: Array) -> Array:
    """Second derivatives of the weighed outputs by the inputs on a grid of some intervals, times the quadrature weights
    (G x Q x I x I)."""
    point, each = sampler.point, len(local)
    if local is HALVES:
        numbers = sampler.halves_bends[(members[:, None] * each + np.arange(each)).ravel()]
    else:
        sample = sampler.sample(np.repeat(members, each), np.tile(local, len(members)))
        numbers = mapped(point.hessian, sample.v, sample.d, sampler.weights(sample))
    numbers = numbers * (weights * sampler.width[members, None]).reshape(-1, 1)
    bends = np.zeros((len(numbers), point.inputs, point.inputs))
    for entry, (row, column) in enumerate(zip(point.hessian_rows, point.hessian_columns, strict=True)):
        bends[:, row, column] = bends[:, column, row] = numbers[:, entry]
    return bends.reshape(-1, each, point.inputs, point.inputs)


def _squares(sampler: Sampler, members: Indices, trial: Array, weights: Array) -> Array:
    """The form of the mean square of the states relative to their sizes, times the value's, for each interval."""
    n, m = sampler.point.states, sampler.point.controls
    kind = slice(0, n) if n else slice(n, n + m)
    relative = trial[:, kind] / sampler.input_sizes[kind][:, None] * np.sqrt(weights)[:, None, None]
    flat = relative.reshape(-1, trial.shape[2])
    share = np.abs(sampler.length[members] / sampler.span) * sampler.value_size
    return np.asarray(share[:, None, None] * (flat.T @ flat))


@lru_cache(maxsize=64)
def _trial(family: Family, degree: int, n: int, m: int, parameters: int) -> Array:
    """The inputs on the grid of an interval from its own variables (Q x I x D)."""
    used, local, rest = scheme(family, degree), grid_for(degree)[0], 2 + parameters
    states = basis(2 * local - 1, degree) @ used.state_modes
    controls = basis(2 * local - 1, degree - 1) @ used.control_modes
    trial = np.zeros((len(local), n + m + rest, (degree + 1) * n + degree * m + rest))
    for i in range(n):
        trial[:, i, i : (degree + 1) * n : n] = states
    for i in range(m):
        trial[:, n + i, (degree + 1) * n + i : (degree + 1) * n + degree * m : m] = controls
    trial[:, n + m :, (degree + 1) * n + degree * m :] = np.eye(rest)
    trial.setflags(write=False)
    return trial


def _local(sampler: Sampler, members: Indices, degree: int) -> Indices:
    """Where the variables of each interval stand in z (G x D), in the order of the trial's columns."""
    where = sampler.path.program.layout
    n, m = where.nodes.shape[1], where.controls.shape[1]
    points = where.first[members][:, None] + np.arange(degree)
    stretch, count = sampler.stretch[members], len(members)
    own = np.empty((count, (degree + 1) * n + degree * m + 2 + len(where.parameters)), dtype=np.int64)
    controls, ends = (degree + 1) * n, (degree + 1) * n + degree * m
    own[:, :n] = where.nodes[members]
    own[:, n:controls] = where.inner[points].reshape(count, -1)
    own[:, controls:ends] = where.controls[points].reshape(count, -1)
    own[:, ends], own[:, ends + 1] = where.places[stretch], where.places[stretch + 1]
    own[:, ends + 2 :] = where.parameters
    return own


def _condensed(trial: Array, forms: Array) -> Array:
    """Sum over the grid of trial' form trial, for each interval (G x D x D)."""
    count, places, inputs, _ = forms.shape
    applied = (forms @ trial).reshape(count, places * inputs, -1)
    return np.asarray(trial.reshape(places * inputs, -1).T @ applied)


def _at_places(sampler: Sampler) -> Scattered:
    """Second derivatives of the endpoint term and of the conditions, weighed."""
    path, program, end = sampler.path, sampler.path.program, sampler.compiled.end
    y = path.z[program.layout.end_gather]
    weights = np.append(path.row_multipliers[program.rows.conditions :], sampler.sign)
    numbers = mapped(end.hessian, y[None, :], sampler.constants[None, :], weights[None, :])[0]
    rows, columns = np.array(end.hessian_rows, dtype=int), np.array(end.hessian_columns, dtype=int)
    mixed = rows != columns
    row = program.layout.end_gather[np.concatenate([rows, columns[mixed]])]
    column = program.layout.end_gather[np.concatenate([columns, rows[mixed]])]
    scale = program.scale[row] * program.scale[column] / abs(program.value_scale)
    return scattered((program.layout.size,) * 2, row, column, np.concatenate([numbers, numbers[mixed]]) * scale)
