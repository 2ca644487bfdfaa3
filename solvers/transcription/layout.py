"""Where every quantity of a transcribed problem stands among the variables, and every constraint among the rows."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from solvers.formula.nodes import Name
from solvers.transcription.functions import Compiled
from solvers.transcription.mesh import Mesh
from solvers.transcription.scaling import Scales

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Layout:
    """Where each quantity stands in z (N intervals, M points, n states, m controls).

    `nodes` ((N+1) x n), `inner` (M x n: states at the points), `controls` (M x m), `places`, `parameters`,
    `integrals`; `first` (N+1) the index of each interval's first point; `fractions` (M) and `measures` (M) of each
    point: its place as a fraction of its stretch, and its quadrature weight in fractions of the stretch;
    `stretch` (M) the stretch of each point; `at_place` (places) the node at each place; `gather` (M x inputs) and
    `end_gather` what the point function takes at each point, and the end function.
    """

    size: int
    nodes: Indices
    inner: Indices
    controls: Indices
    places: Indices
    parameters: Indices
    integrals: Indices
    first: Indices
    fractions: Array
    measures: Array
    stretch: Indices
    at_place: Indices
    gather: Indices
    end_gather: Indices

    def lengths(self, places: Array) -> Array:
        """The length of each point's stretch (M), from the values of the places."""
        return np.asarray(places[self.stretch + 1] - places[self.stretch])

    def ends_on_point(self, point: int) -> bool:
        """Whether the last point of an interval is its right end."""
        return bool(np.isin(self.inner[point], self.nodes).all())

    def points(self, places: Array) -> Array:
        """Where the points are (M), from the values of the places."""
        return np.asarray(places[self.stretch] + self.fractions * self.lengths(places))


@dataclass(frozen=True, slots=True)
class Rows:
    """Where each kind of constraint begins, and how many there are in all."""

    defects: int  # M x n, point by point
    ends: int  # n for each Gauss interval
    pointwise: int  # M x c, point by point
    rims: int
    integrals: int
    conditions: int
    count: int


def layout(compiled: Compiled, mesh: Mesh) -> Layout:
    """Give every quantity its place in z."""
    problem = compiled.lowered.problem
    n, m = compiled.point.states, compiled.point.controls
    degrees, owner, radau = mesh.counts, mesh.owner, ~mesh.gauss
    own = degrees - radau  # points whose states are not shared with the next node
    sizes = n + own * n + degrees * m
    starts = np.concatenate([[0], np.cumsum(sizes)])
    nodes = starts[:, None] + np.arange(n)[None, :]
    first = np.concatenate([[0], np.cumsum(degrees)])
    local = np.arange(first[-1]) - first[owner]
    inner = (starts[owner] + n + local * n)[:, None] + np.arange(n)[None, :]
    shared = radau[owner] & (local == degrees[owner] - 1)
    inner[shared] = nodes[owner[shared] + 1]
    controls = (starts[owner] + n + own[owner] * n + local * m)[:, None] + np.arange(m)[None, :]
    position = int(starts[-1]) + n
    parameters = position + np.arange(len(problem.parameters))
    position += len(problem.parameters)
    names = [p.name for p in problem.parameters]
    places = np.empty(len(problem.places), dtype=np.int64)
    for index, place in enumerate(problem.places):
        if isinstance(place.tree, Name) and place.tree.name in names:
            places[index] = parameters[names.index(place.tree.name)]
        else:
            places[index] = position
            position += 1
    integrals = position + np.arange(compiled.point.integrals)
    widths = mesh.widths[owner]
    fractions = mesh.starts[owner] + widths * mesh.local
    measures = widths * mesh.weights
    at_place = np.concatenate([[0], np.flatnonzero(np.diff(mesh.stretch)) + 1, [len(degrees)]])
    stretch = mesh.stretch[owner]
    gather = np.hstack([inner, controls, places[stretch][:, None], places[stretch + 1][:, None],
                        np.tile(parameters, (len(owner), 1))]).astype(np.int64)  # fmt: skip
    end_gather = np.concatenate([nodes[at_place].ravel(), places, parameters, integrals]).astype(np.int64)
    return Layout(position + compiled.point.integrals, nodes, inner, controls, places, parameters, integrals, first,
                  fractions, measures, stretch, at_place, gather, end_gather)  # fmt: skip


def row_order(compiled: Compiled, mesh: Mesh, where: Layout) -> Rows:
    """Give every constraint its row."""
    count, point = len(where.fractions), compiled.point
    ends = count * point.states
    pointwise = ends + int(mesh.gauss.sum()) * point.states
    rims = pointwise + count * point.constraints
    integrals = rims + len(compiled.rims) + len(calm_entries(compiled, mesh))
    conditions = integrals + point.integrals
    return Rows(0, ends, pointwise, rims, integrals, conditions, conditions + compiled.end.outputs - 1)


def spread(compiled: Compiled, where: Layout, scales: Scales) -> Array:
    """One scale for every variable of z."""
    scale = np.ones(where.size)
    scale[where.nodes] = scales.states
    scale[where.inner] = scales.states
    scale[where.controls] = scales.controls
    scale[where.places] = scales.places
    scale[where.parameters] = scales.parameters
    scale[where.integrals] = scales.integrals
    return scale


def calm_entries(compiled: Compiled, mesh: Mesh) -> list[tuple[int, int, int]]:
    """Control, interval and Legendre coefficient of everything that is kept at zero along calm stretches."""
    lowered = compiled.lowered
    calm = [(c.stretch, lowered.controls.index((c.name, c.order))) for c in lowered.problem.calm]
    return [
        (control, owner, mode)
        for stretch, control in calm
        for owner, interval in enumerate(mesh.intervals)
        if interval.stretch == stretch
        for mode in range((interval.scheme.degree + 1) // 2, interval.scheme.degree)
    ]
