"""Corners of tables on the curve: where they lie, and a mesh that has its breaks there.

A corner near the end of an interval lies between the points and would go unnoticed: polynomials on both sides of it
converge fast, one polynomial across it does not, and says so only sometimes.  The curve of one mesh tells the next one
where its arguments pass the nodes of their tables.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from solvers.forms.along import Along, lookups_along
from solvers.formula.nodes import Node
from solvers.tables.table import Between
from solvers.transcription.collocation import Family
from solvers.transcription.mesh import Interval, Mesh, interval
from solvers.transcription.trajectory import Trajectory, at_points

Array = NDArray[np.float64]

GRID = np.linspace(1e-9, 1 - 1e-9, 17)
"""Places in every interval at which arguments are looked at."""

MOST = 120
"""Corners beyond this are not followed: each of so many matters little."""

NEAR = 0.1
"""A break so near to a corner, relative to its shorter neighbour, is moved there; else the interval is cut."""

SAME = 1e-13
"""Corners closer than this, as fractions of a stretch, are one."""

STEPS = 4
"""Steps of the rule of false position that place a corner: between points so close arguments are nearly straight."""


def at_corners(mesh: Mesh, path: Trajectory) -> Mesh:
    """The mesh with breaks where the curve passes corners of tables; the same mesh where there are none."""
    problem = path.program.compiled.lowered.problem
    sharp = [(argument, edges) for lookup in lookups_along(problem) if lookup.table.between is not Between.SMOOTH
             for argument, edges in zip(lookup.arguments, lookup.table.pieces.edges, strict=True)]  # fmt: skip
    if not sharp:
        return mesh
    places = np.unique(np.concatenate([_crossings(path, argument, edges) for argument, edges in sharp]))
    if not 0 < len(places) <= MOST:
        return mesh
    owners = np.clip(np.searchsorted(path.places, places, side="right") - 1, 0, len(path.places) - 2)
    fractions = (places - path.places[owners]) / np.diff(path.places)[owners]
    pieces: list[Interval] = []
    for stretch in range(mesh.stretches):
        own = [piece for piece in mesh.intervals if piece.stretch == stretch]
        pieces += _cut(own, fractions[owners == stretch])
    return Mesh(tuple(pieces))


def _crossings(path: Trajectory, argument: Node, edges: Array) -> Array:
    """Where along the curve an argument takes one of the values `edges`."""
    starts, widths = path.breaks[:-1, None], np.diff(path.breaks)[:, None]
    grid = starts + widths * GRID
    values = _values(path, argument, grid.ravel()).reshape(grid.shape)
    level, interval_, step = np.nonzero(
        (values[:, :-1] <= edges[:, None, None]) != (values[:, 1:] <= edges[:, None, None])
    )
    if not 0 < len(level) <= MOST:
        return np.empty(0)
    left, right = grid[interval_, step], grid[interval_, step + 1]
    low, high = values[interval_, step] - edges[level], values[interval_, step + 1] - edges[level]
    at = left
    for _ in range(STEPS):
        at = left - low * (right - left) / (high - low)
        here = _values(path, argument, at) - edges[level]
        same = (here <= 0) == (low <= 0)
        left, low = np.where(same, at, left), np.where(same, here, low)
        right, high = np.where(same, right, at), np.where(same, high, here)
    return np.asarray(at[np.isfinite(at)])


def _values(path: Trajectory, argument: Node, places: Array) -> Array:
    states, controls = (at_points(path.breaks, modes, places) for modes in (path.state_modes, path.control_modes))
    return Along(path.program.compiled, places, states, controls, path.parameters).value(argument)


def _cut(pieces: list[Interval], corners: Array) -> Iterator[Interval]:
    """Intervals of one stretch with breaks at corners (fractions)."""
    edges = [pieces[0].start, *(piece.start + piece.width for piece in pieces)]
    schemes = [piece.scheme for piece in pieces]
    held: set[float] = set()
    for corner in corners.tolist():
        k = int(np.searchsorted(edges, corner, side="right")) - 1
        if not 0 <= k < len(schemes) or min(corner - edges[k], edges[k + 1] - corner) < SAME:
            continue
        near = k if corner - edges[k] <= edges[k + 1] - corner else k + 1
        if 0 < near < len(schemes) and edges[near] not in held:
            shorter = min(edges[near] - edges[near - 1], edges[near + 1] - edges[near])
            if abs(edges[near] - corner) < NEAR * shorter:
                edges[near] = corner
                held.add(corner)
                continue
        edges.insert(k + 1, corner)
        schemes.insert(k + 1, schemes[k])
        held.add(corner)
    for k, chosen in enumerate(schemes):
        outermost = k in (0, len(schemes) - 1)
        family = chosen.family if outermost else Family.RADAU
        yield interval(pieces[0].stretch, edges[k], edges[k + 1], family, chosen.degree)
