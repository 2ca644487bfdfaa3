"""Tables in CasADi's expressions, with exact derivatives of any order at the price of one search.

A table is a polynomial wherever one looks; only which one it is depends on the arguments.  So its coefficients enter an
expression as symbols, derivatives are taken with these held fixed, and at last every symbol is replaced by a small
function that finds the piece and hands out its coefficients.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import perm
from weakref import WeakKeyDictionary

import casadi as ca
import numpy as np

from solvers.tables.table import Pieces, Table

BEYOND = 1e300
"""Ends of the outermost pieces, in place of infinity."""

_FINDERS: WeakKeyDictionary[Table, ca.Function] = WeakKeyDictionary()


@dataclass(frozen=True, slots=True)
class _Found:
    """The symbols of one piece, and what they stand for."""

    symbols: ca.SX  # origins, then coefficients
    arguments: ca.SX
    finder: ca.Function


class Lookups:
    """The tables that the expressions of one problem look up."""

    def __init__(self) -> None:
        self._found: dict[tuple[Table, tuple[int, ...]], _Found] = {}

    @property
    def operations(self) -> dict[str, Callable[..., ca.SX]]:
        """The operations of formulas that are done here."""
        return {"table": self.value}

    def value(self, table: Table, orders: Sequence[int], *arguments: ca.SX) -> ca.SX:
        """The value of a table or of its derivative, as a polynomial with symbols for its coefficients."""
        key = (table, tuple(argument.element_hash() for argument in arguments))
        if key not in self._found:
            if table not in _FINDERS:
                _FINDERS[table] = _finder(table.pieces)
            finder = _FINDERS[table]
            symbols = ca.SX.sym(table.name, finder.numel_out(0))
            self._found[key] = _Found(symbols, ca.vertcat(*arguments), finder)
        data = ca.vertsplit(self._found[key].symbols)
        origins, coefficients = data[: len(arguments)], data[len(arguments) :]
        away = [argument - origin for argument, origin in zip(arguments, origins, strict=True)]
        if len(arguments) == 1:
            return _polynomial(coefficients, orders, away)
        width = table.pieces.coefficients.shape[-1]
        rows = [coefficients[first : first + width] for first in range(0, len(coefficients), width)]
        return _polynomial([_polynomial(row, orders[1:], away[1:]) for row in rows], orders, away)

    def settled(self, expressions: list[ca.SX]) -> list[ca.SX]:
        """The expressions with every symbol replaced by what it stands for."""
        known: list[ca.SX] = []
        symbols: list[ca.SX] = []
        for found in self._found.values():  # arguments hold symbols of earlier ones only
            (arguments,) = ca.substitute([found.arguments], symbols, known) if symbols else [found.arguments]
            symbols.append(found.symbols)
            known.append(found.finder(arguments))
        return list(ca.substitute(expressions, symbols, known)) if symbols else expressions


def _polynomial(coefficients: Sequence[ca.SX], orders: Sequence[int], away: Sequence[ca.SX]) -> ca.SX:
    """The derivative of a polynomial of the first distance, by Horner's rule as in `Table.value`."""
    total = ca.SX(0)
    for power in range(len(coefficients) - 1, orders[0] - 1, -1):
        total = total * away[0] + perm(power, orders[0]) * coefficients[power]
    return total


def _finder(pieces: Pieces) -> ca.Function:
    """Arguments -> origins and coefficients of their piece: a search per argument, then one look into a stored grid."""
    count = len(pieces.edges)
    cells = pieces.coefficients.shape[:count]
    origins = np.stack(np.meshgrid(*pieces.origins, indexing="ij"), axis=-1)
    stored = np.concatenate([origins, pieces.coefficients.reshape(*cells, -1)], axis=-1)
    arguments = ca.MX.sym("arguments", count)
    found = [
        ca.low(ca.DM(np.concatenate([[-BEYOND], edges, [BEYOND]])), arguments[k], {"lookup_mode": "binary"})
        for k, edges in enumerate(pieces.edges)
    ]
    # A linear interpolant over whole numbers, only ever asked at these; a constant matrix would be copied every time.
    grid = [[float(number) for number in range(length)] for length in cells]
    flat = stored.transpose(*reversed(range(count)), count).ravel()  # the first argument runs fastest
    kept = ca.interpolant("pieces", "linear", grid, flat, {"lookup_mode": ["exact"] * count})
    return ca.Function("find", [arguments], [kept(ca.vertcat(*found))], {"never_inline": True})
