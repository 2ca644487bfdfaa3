"""The two functions of a compiled problem at the variables of a layout, as plain arrays in SI units."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from solvers.functions import Compiled

if TYPE_CHECKING:
    from solvers.layout import Layout

Array = NDArray[np.float64]


def point_inputs(compiled: Compiled, where: Layout, z: Array) -> tuple[Array, Array]:
    """The inputs v (M x inputs) and d (M x (1 + constants)) of the point function at all M points."""
    count = len(where.fractions)
    starts, ends = where.places[where.stretch], where.places[where.stretch + 1]
    v = np.hstack([z[where.inner], z[where.controls], z[starts][:, None], z[ends][:, None],
                   np.tile(z[where.parameters], (count, 1))])  # fmt: skip
    return v, np.hstack([where.fractions[:, None], np.tile(compiled.constants, (count, 1))])


def point_outputs(compiled: Compiled, where: Layout, z: Array) -> Array:
    """All outputs of the point function (M x outputs)."""
    v, d = point_inputs(compiled, where, z)
    return np.asarray(compiled.point.value.map(len(v))(v.T, d.T)).T


def point_slopes(compiled: Compiled, where: Layout, z: Array) -> Array:
    """The nonzeros of the point function's Jacobian (M x nonzeros)."""
    v, d = point_inputs(compiled, where, z)
    return np.asarray(compiled.point.jacobian.map(len(v))(v.T, d.T)).T.reshape(len(v), -1)


def end_inputs(where: Layout, z: Array) -> Array:
    """The input y of the end function: states at every place, places, parameters, integrals."""
    parts = (z[where.nodes[where.at_place]].ravel(), z[where.places], z[where.parameters], z[where.integrals])
    return np.concatenate(parts)
