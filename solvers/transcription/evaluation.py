"""The two functions of a compiled problem at the variables of a layout, as plain arrays in SI units."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.transcription.functions import Compiled

if TYPE_CHECKING:
    from solvers.transcription.layout import Layout

Array = NDArray[np.float64]


CHUNK = 32
"""Sets of inputs that a function takes at once: mapping it costs some microseconds for each, so it is done but once."""


@lru_cache(maxsize=256)
def _by_chunks(function: ca.Function, at_once: int) -> tuple[Any, Callable[[], None]]:
    """The memory of a function mapped over so many sets of inputs, and what evaluates it there."""
    return (function.map(at_once) if at_once > 1 else function).buffer()


class Mapped:
    """A CasADi function at many sets of inputs; the arrays on both sides are the function's own memory."""

    def __init__(self, function: ca.Function, count: int) -> None:
        self._count, self._step = count, CHUNK if count > 1 else 1
        self._padded = -(-count // self._step) * self._step
        self._inputs = [np.zeros((self._padded, function.numel_in(k))) for k in range(function.n_in())]
        self._outputs = int(function.nnz_out(0))
        self._buffer, self._evaluate = _by_chunks(function, self._step)

    def __call__(self, *arguments: Array) -> Array:
        """The nonzeros of the output (sets x nonzeros) from inputs (sets x entries, or what spreads to that)."""
        result = np.empty((self._padded, self._outputs))
        if not result.size:
            return result[: self._count]
        for own, given in zip(self._inputs, arguments, strict=True):
            own[: self._count] = given
            own[self._count :] = own[0]
        views = [memoryview(own) for own in (*self._inputs, result)]  # type: ignore[arg-type]
        for start in range(0, self._padded, self._step):
            *inputs, made = (view[start : start + self._step] for view in views)
            for k, view in enumerate(inputs):
                self._buffer.set_arg(k, view)
            self._buffer.set_res(0, made)
            self._evaluate()
        return result[: self._count]


def mapped(function: ca.Function, *arguments: Array) -> Array:
    """A function at P sets of inputs, once: P x nonzeros.  Undefined values come as NaN."""
    return Mapped(function, len(arguments[0]))(*arguments)


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
    return mapped(compiled.point.value, v, d)


def point_slopes(compiled: Compiled, where: Layout, z: Array) -> Array:
    """The nonzeros of the point function's Jacobian (M x nonzeros)."""
    v, d = point_inputs(compiled, where, z)
    return mapped(compiled.point.jacobian, v, d)


def end_inputs(where: Layout, z: Array) -> Array:
    """The input y of the end function: states at every place, places, parameters, integrals."""
    parts = (z[where.nodes[where.at_place]].ravel(), z[where.places], z[where.parameters], z[where.integrals])
    return np.concatenate(parts)
