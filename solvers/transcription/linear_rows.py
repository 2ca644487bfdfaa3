"""The linear part of a program's constraints: slopes of the states, ends of Gauss intervals, and the like."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.collocation import Family, Scheme
from solvers.transcription.layout import calm_entries

if TYPE_CHECKING:
    from solvers.transcription.numbers import Placement

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Spanned:
    """The G intervals of one scheme, their points (G x K) and the states that span them (G x (K+1) x n)."""

    scheme: Scheme
    members: Indices
    points: Indices
    support: Indices


def spanned(placed: Placement) -> list[Spanned]:
    """The intervals of a mesh by scheme."""
    where = placed.layout
    return [
        Spanned(
            group.scheme,
            group.members,
            group.points,
            np.concatenate([where.nodes[group.members][:, None, :], where.inner[group.points]], axis=1),
        )
        for group in placed.mesh.alike
    ]


def slopes(groups: list[Spanned], z: Array) -> Array:
    """Slopes of the states at all points, point by point, relative to the states' sizes."""
    points = sum(group.points.size for group in groups)
    found = np.empty((points, groups[0].support.shape[2]))
    for group in groups:
        found[group.points] = group.scheme.differentiate @ z[group.support]
    return found.ravel()


Block = tuple[Indices, Indices, Array]
"""Rows, columns and values (SI) of constant entries of g: three arrays that spread to one shape."""


def slope_entries(placed: Placement, groups: list[Spanned]) -> Iterator[Block]:
    """The entries of the slopes of the states."""
    n = placed.compiled.point.states
    for group in groups:
        row = placed.rows.defects + group.points[:, :, None] * n + np.arange(n)  # G x K x n
        yield row[:, :, None, :], group.support[:, None, :, :], group.scheme.differentiate[:, :, None]


def loose_rows(placed: Placement, groups: list[Spanned]) -> Iterator[Block]:
    """The entries of the other linear rows: end values of Gauss intervals, rims, calm controls, the integrals."""
    where, rows, mesh, compiled = placed.layout, placed.rows, placed.mesh, placed.compiled
    n = compiled.point.states
    yield rows.integrals + np.arange(len(where.integrals)), where.integrals, np.ones(len(where.integrals))
    rank = np.cumsum(mesh.gauss) - 1
    for group in groups:
        if group.scheme.family is Family.GAUSS:
            row = rows.ends + rank[group.members][:, None] * n + np.arange(n)  # G x n
            yield row[:, None, :], group.support, group.scheme.extrapolate[:, None]
            yield row, where.nodes[group.members + 1], np.array(-1.0)
    for index, (control, place, _) in enumerate(compiled.rims, start=rows.rims):
        owner = int(where.at_place[place]) - (1 if place else 0)
        scheme = mesh.intervals[owner].scheme
        side = np.ones(scheme.degree) if place else (-1.0) ** np.arange(scheme.degree)
        columns = where.controls[where.first[owner] : where.first[owner + 1], control]
        yield np.array(index), columns, side @ scheme.control_modes
    first = rows.rims + len(compiled.rims)
    for index, (control, owner, mode) in enumerate(calm_entries(compiled, mesh), start=first):
        scheme = mesh.intervals[owner].scheme
        columns = where.controls[where.first[owner] : where.first[owner + 1], control]
        yield np.array(index), columns, scheme.control_modes[mode]
