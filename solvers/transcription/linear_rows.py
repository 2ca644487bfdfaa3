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
    """The intervals of one scheme, their points (G x K) and the states that span them (G x (K+1) x n)."""

    scheme: Scheme
    points: Indices
    support: Indices


def spanned(placed: Placement) -> list[Spanned]:
    """The intervals of a mesh by scheme."""
    where = placed.layout
    return [
        Spanned(
            group.scheme,
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
"""Rows, columns and values (SI) of constant entries of g."""


def slope_entries(placed: Placement, groups: list[Spanned]) -> Iterator[Block]:
    """The entries of the slopes of the states."""
    n = placed.compiled.point.states
    for group in groups:
        degree = group.scheme.degree
        row = placed.rows.defects + group.points[:, :, None] * n + np.arange(n)  # G x K x n
        shape = (len(group.points), degree, degree + 1, n)
        yield (
            np.broadcast_to(row[:, :, None, :], shape).ravel(),
            np.broadcast_to(group.support[:, None, :, :], shape).ravel(),
            np.broadcast_to(group.scheme.differentiate[None, :, :, None], shape).ravel(),
        )


def loose_rows(placed: Placement) -> Iterator[Block]:
    """The entries of the other linear rows: end values of Gauss intervals, rims, calm controls, the integrals."""
    where, rows, mesh, compiled = placed.layout, placed.rows, placed.mesh, placed.compiled
    n = compiled.point.states
    yield rows.integrals + np.arange(len(where.integrals)), where.integrals, np.ones(len(where.integrals))
    rank = 0
    for k, interval in enumerate(mesh.intervals):
        if interval.scheme.family is Family.GAUSS and n:
            row = rows.ends + rank * n + np.arange(n)
            support = np.vstack([where.nodes[k], where.inner[where.first[k] : where.first[k + 1]]])
            values = np.repeat(interval.scheme.extrapolate, n)
            yield np.tile(row, len(support)), support.ravel(), values
            yield row, where.nodes[k + 1], -np.ones(n)
            rank += 1
    for rank, (control, place, _) in enumerate(compiled.rims):
        owner = int(where.at_place[place]) - (1 if place else 0)
        scheme = mesh.intervals[owner].scheme
        side = np.ones(scheme.degree) if place else (-1.0) ** np.arange(scheme.degree)
        columns = where.controls[where.first[owner] : where.first[owner + 1], control]
        yield np.full(scheme.degree, rows.rims + rank), columns, side @ scheme.control_modes
    for rank, (control, owner, mode) in enumerate(calm_entries(compiled, mesh), start=len(compiled.rims)):
        scheme = mesh.intervals[owner].scheme
        columns = where.controls[where.first[owner] : where.first[owner + 1], control]
        yield np.full(scheme.degree, rows.rims + rank), columns, scheme.control_modes[mode]
