"""The two functions of a compiled problem at the variables of a layout, as plain arrays in SI units."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
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


@dataclass(frozen=True, slots=True)
class _Bound:
    """A function mapped over so many sets of inputs, bound once and for all to memory on both sides."""

    buffer: Any  # what `evaluate` works with: it has to live as long
    evaluate: Callable[[], None]
    inputs: tuple[Array, ...]
    outputs: Array


@lru_cache(maxsize=256)
def _bound(function: ca.Function, at_once: int) -> _Bound:
    buffer: Any  # the stubs take its arguments for pairs of memory and size
    buffer, evaluate = (function.map(at_once) if at_once > 1 else function).buffer()
    inputs = tuple(np.zeros((at_once, function.numel_in(k))) for k in range(function.n_in()))
    outputs = np.empty((at_once, function.nnz_out(0)))
    for k, memory in enumerate(inputs):
        buffer.set_arg(k, memoryview(memory))  # type: ignore[arg-type]
    buffer.set_res(0, memoryview(outputs))  # type: ignore[arg-type]
    return _Bound(buffer, evaluate, inputs, outputs)


class Mapped:
    """A CasADi function at many sets of inputs."""

    def __init__(self, function: ca.Function, count: int) -> None:
        self._count = count
        self._bound = _bound(function, CHUNK if count > 1 else 1)

    def __call__(self, *arguments: Array) -> Array:
        """The nonzeros of the output (sets x nonzeros) from inputs (sets x entries; a single set also as a vector)."""
        bound, count = self._bound, self._count
        step, nonzeros = bound.outputs.shape
        result = np.empty((count, nonzeros))
        if not result.size:
            return result
        if count == 1:
            arguments = tuple(given.reshape(1, -1) for given in arguments)
        for first in range(0, count, step):
            chosen = slice(first, min(first + step, count))
            size = chosen.stop - first
            for memory, given in zip(bound.inputs, arguments, strict=True):
                memory[:size] = given[chosen]
                memory[size:] = memory[0]
            bound.evaluate()
            result[chosen] = bound.outputs[:size]
        return result


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
