"""How far the rounded functions of a compiled problem are from their exact ones, and how much that counts.

`abs`, `sign`, `min`, `max` and the corners of tables are rounded over a narrow zone.  Every use of one gets a symbol
that is added to it.  The slopes of the outputs by these symbols tell, to first order, what its deviation does.
Along the curve itself the deviation may be small while that of the exact problem's curve is not: one rests beside the
corner, the other in it.  So what counts is the largest deviation within the zone.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import product
from weakref import WeakKeyDictionary

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.formula.nodes import Lookup
from solvers.problem import Problem
from solvers.tables.lookups import Lookups
from solvers.tables.table import Table
from solvers.transcription.derivatives import Differentiated
from solvers.transcription.evaluation import mapped
from solvers.transcription.functions import (
    Compiled,
    PointFunction,
    compile_problem,
    nodes_of,
    rounded_functions,
    smooth_abs,
    smooth_sign,
    with_kinks,
)

Array = NDArray[np.float64]

ZONE = 1e3
"""How near to a kink of `abs`, in widths, the curve of the exact problem may run in it."""
BESIDE = 10
"""How near to one a curve lies in it; farther off the rounded function is as straight as the exact one."""
SHIFTS = (-1.0, -0.5, 0.0, 0.5, 1.0)
"""Where a table is compared with its exact one, around an argument and relative to the reach of its roundings."""
BETWEEN_SHIFTS = 2.0
"""How much larger the deviation between these may be: it falls with the square of the distance from the corner."""
NOISE = 1e-9
"""Deviations below this, relative to the extent of a table, are those of its arithmetic."""


@dataclass(frozen=True, slots=True)
class Deviations:
    """The K uses of rounded functions at P sets of inputs.

    `slopes` (P x outputs x K) of the outputs by the value of each, the most by which it may deviate (`most`, P x K),
    and how it `bends` (P x K): 1 in the zone of a convex kink, -1 in that of a concave one, 0 elsewhere.
    """

    slopes: Array
    most: Array
    bends: Array


Kinks = Callable[[Array, Array], Deviations]
"""The deviations at inputs v and d of a function."""


@dataclass(frozen=True, slots=True)
class _Use:
    symbol: ca.SX
    most: ca.SX
    bends: ca.SX
    arguments: ca.SX


class _Marking(Lookups):
    """Lookups that mark every use of a function that is rounded."""

    def __init__(self) -> None:
        super().__init__()
        self.uses: list[_Use] = []

    @property
    def operations(self) -> dict[str, Callable[..., ca.SX]]:
        return {**with_kinks(self._absolute, self._sign), "table": self._table}

    def _absolute(self, width: ca.SX, x: ca.SX) -> ca.SX:
        most = ca.if_else(ca.fabs(x) < ZONE * width, width, smooth_abs(width, x) - ca.fabs(x))
        return smooth_abs(width, x) + self._mark(most, ca.fabs(x) < BESIDE * width, x)

    def _sign(self, width: ca.SX, x: ca.SX) -> ca.SX:
        rounded = smooth_sign(width, x)
        return rounded + self._mark(1 - ca.fabs(rounded), ca.SX(0), x)

    def _table(self, table: Table, orders: tuple[int, ...], *arguments: ca.SX) -> ca.SX:
        value = self.value(table, orders, *arguments)
        if not table.has_corners:
            return value
        most, total = ca.SX(0), ca.SX(0)
        for shifts in product(SHIFTS, repeat=len(arguments)):
            moved = [a + shift * reach for a, shift, reach in zip(arguments, shifts, table.reaches, strict=True)]
            deviation = self.value(table, orders, *moved) - self.value(table.exact, orders, *moved)
            most, total = ca.fmax(most, ca.fabs(deviation)), total + deviation
        least = NOISE * float(np.ptp(table.values))
        bends = ca.SX(0) if any(orders) else (total > least) - (total < -least)
        return value + self._mark(BETWEEN_SHIFTS * most, bends, *arguments)

    def _mark(self, most: ca.SX, bends: ca.SX, *arguments: ca.SX) -> ca.SX:
        symbol = ca.SX.sym("e")
        self.uses.append(_Use(symbol, ca.SX(most), ca.SX(bends), ca.vertcat(*arguments)))
        return symbol


_KNOWN: WeakKeyDictionary[PointFunction, tuple[Kinks | None, Kinks | None]] = WeakKeyDictionary()


def kinks_of(compiled: Compiled) -> tuple[Kinks | None, Kinks | None]:
    """The rounded functions in the point function and in the end function; None where there are none."""
    if not _any(compiled.lowered.problem):
        return None, None
    if compiled.point not in _KNOWN:
        marked = compile_problem(compiled.lowered, _Marking)
        _KNOWN[compiled.point] = _kinks(marked.point), _kinks(marked.end)
    return _KNOWN[compiled.point]


def _any(problem: Problem) -> bool:
    """Whether anything in the formulas of a problem is rounded."""
    tables = (node.table for node in nodes_of(problem) if isinstance(node, Lookup))
    return bool(rounded_functions(problem)) or any(table.has_corners for table in tables)


def _kinks(marked: Differentiated) -> Kinks | None:
    lookups = marked.lookups
    assert isinstance(lookups, _Marking)
    uses = [use for use in lookups.uses if ca.depends_on(marked.expressions, use.symbol)]
    if not uses:
        return None
    symbols, count = ca.vertcat(*(use.symbol for use in uses)), len(uses)
    # One whose arguments do not depend on the curve bends nothing, however long it stays in a kink.
    bends = [use.bends if ca.depends_on(use.arguments, marked.varied) else ca.SX(0) for use in uses]
    told = ca.vertcat(
        ca.vec(ca.densify(ca.jacobian(marked.expressions, symbols)).T), *(use.most for use in uses), *bends
    )
    (told,) = ca.substitute([told], [symbols], [ca.SX.zeros(count)])
    function = marked.beside("kinks", told)

    def deviations(v: Array, d: Array) -> Deviations:
        values = mapped(function, v, d)
        slopes = values[:, : -2 * count].reshape(len(v), -1, count)
        return Deviations(slopes, values[:, -2 * count : -count], values[:, -count:])

    return deviations
