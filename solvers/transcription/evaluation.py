"""The two functions of a compiled problem at the variables of a layout, as plain arrays in SI units."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Any, TypeVar

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.transcription.functions import Compiled

if TYPE_CHECKING:
    from solvers.transcription.layout import Layout

Array = NDArray[np.float64]
Number = TypeVar("Number", np.float64, np.int64)


CHUNK = 32
"""Sets of inputs that a function takes at once: mapping it costs some microseconds for each, so it is done but once."""


@dataclass(frozen=True, slots=True)
class _Bound:
    """A function mapped over so many sets of inputs, bound once and for all to memory on both sides."""

    buffer: Any  # what `evaluate` works with: it has to live as long, and so has all memory
    evaluate: Callable[[], None]
    inputs: tuple[Array, ...]
    outputs: Array


def _bind(function: ca.Function, inputs: tuple[Array, ...], outputs: Array) -> _Bound:
    buffer: Any  # the stubs take its arguments for pairs of memory and size
    buffer, evaluate = function.buffer()
    for k, memory in enumerate(inputs):
        buffer.set_arg(k, memoryview(memory))  # type: ignore[arg-type]
    buffer.set_res(0, memoryview(outputs))  # type: ignore[arg-type]
    return _Bound(buffer, evaluate, inputs, outputs)


@lru_cache(maxsize=256)
def _by_chunks(function: ca.Function, at_once: int) -> ca.Function:
    return function.map(at_once) if at_once > 1 else function


@lru_cache(maxsize=256)
def _bound(function: ca.Function, at_once: int) -> _Bound:
    """A function with memory of its own."""
    inputs = tuple(np.zeros((at_once, function.numel_in(k))) for k in range(function.n_in()))
    return _bind(_by_chunks(function, at_once), inputs, np.empty((at_once, function.nnz_out(0))))


def mapped(function: ca.Function, *arguments: Array) -> Array:
    """A function at P sets of inputs (P x entries), once: P x nonzeros.  Undefined values come as NaN."""
    count = len(arguments[0])
    bound = _bound(function, CHUNK if count > 1 else 1)
    step, nonzeros = bound.outputs.shape
    result = np.empty((count, nonzeros))
    if not result.size:
        return result
    for first in range(0, count, step):
        chosen = slice(first, min(first + step, count))
        size = chosen.stop - first
        for memory, given in zip(bound.inputs, arguments, strict=True):
            memory[:size] = given[chosen]
            if size < step:
                memory[size:] = memory[0]
        bound.evaluate()
        result[chosen] = bound.outputs[:size]
    return result


def whole_chunks(rows: NDArray[Number]) -> NDArray[Number]:
    """Rows, one for each set of inputs, filled up to whole chunks by the first one."""
    missing = -len(rows) % CHUNK if len(rows) > 1 else 0
    return np.concatenate([rows, np.repeat(rows[:1], missing, axis=0)]) if missing else rows


class Evaluation:
    """A function at many sets of inputs, time and again: it reads them where they stand, and writes over what it made.

    All arrays have whole chunks of rows.
    """

    def __init__(self, function: ca.Function, inputs: Sequence[Array], outputs: Array) -> None:
        step = CHUNK if len(outputs) > 1 else 1
        chunks = (slice(first, first + step) for first in range(0, len(outputs) if outputs.size else 0, step))
        each = _by_chunks(function, step)
        self._chunks = [_bind(each, tuple(array[chunk] for array in inputs), outputs[chunk]) for chunk in chunks]

    def __call__(self) -> None:
        for chunk in self._chunks:
            chunk.evaluate()


def point_inputs(compiled: Compiled, where: Layout, z: Array) -> tuple[Array, Array]:
    """The inputs v (M x inputs) and d (M x (1 + constants)) of the point function at all M points.

    Of several curves, each a row of z, one after the other.
    """
    v = z[..., where.gather].reshape(-1, where.gather.shape[1])
    d = np.hstack([where.fractions[:, None], np.tile(compiled.constants, (len(where.fractions), 1))])
    return v, d if z.ndim == 1 else np.tile(d, (len(z), 1))


def point_outputs(compiled: Compiled, where: Layout, z: Array) -> Array:
    """All outputs of the point function (M x outputs)."""
    v, d = point_inputs(compiled, where, z)
    return mapped(compiled.point.value, v, d)


def point_slopes(compiled: Compiled, where: Layout, z: Array) -> Array:
    """The nonzeros of the point function's Jacobian (M x nonzeros)."""
    v, d = point_inputs(compiled, where, z)
    return mapped(compiled.point.jacobian, v, d)


def end_inputs(where: Layout, z: Array) -> Array:
    """The input y of the end function: states at every place, places, parameters, integrals; of each row of z."""
    return np.asarray(z[..., where.end_gather])
