"""The curves of arcs as functions of t, from what was found beside each other on a common variable.

A change with a constant is found where the common variable, or the parameter along the curve, is fixed; in t each piece
moves too, with its ends.  What is told is the change at a fixed t.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.answers.response import less_movement
from solvers.curve import Curve
from solvers.forms.beside import Beside, Piece
from solvers.forms.gauge import Way
from solvers.forms.graph import along_way
from solvers.formula.derivative import derivative
from solvers.formula.nodes import Name, Node
from solvers.problem import Problem
from solvers.solution import ArcCurve, Change
from solvers.transcription.limits import number
from solvers.transcription.lowering import primed

Array = NDArray[np.float64]
Functions = dict[str, tuple[Array, ...]]

VANISHED = 1e-9
"""Length, relative to the whole, below which a piece of an arc is left out of the curve: it has none."""


@dataclass(frozen=True, slots=True)
class OnCommon:
    """What was found on the common variable: the curve, its costates if they are wanted, and its changes."""

    beside: Beside
    curve: Curve
    costates: Curve | None
    changes: tuple[Change, ...]
    places: Array  # in t

    def arcs(self) -> tuple[tuple[ArcCurve, ...], tuple[Change, ...]]:
        """The arcs that have a length, and their changes."""
        span = self.places[-1] - self.places[0]
        arcs: list[ArcCurve] = []
        altered: list[list[ArcCurve]] = [[] for _ in self.changes]
        for index, arc in enumerate(self.beside.original.arcs):
            told = [
                self.upright(piece) if self.x(piece) in self.curve.functions else self.stretched(piece)
                for piece in self.beside.pieces
                if piece.arc == index and self.length(piece) > VANISHED * span
            ]
            if not told:
                continue
            costates = [part.costates for part in told if part.costates is not None]
            shape = _joined([part.shape for part in told])
            arcs.append(ArcCurve(arc.name, shape, _joined(costates) if costates else None))
            for row, *parts in zip(altered, *(part.changes for part in told), strict=True):
                row.append(ArcCurve(arc.name, _joined(parts)))
        changes = (replace(c, curve=None, arcs=tuple(row)) for c, row in zip(self.changes, altered, strict=True))
        return tuple(arcs), tuple(changes)

    def x(self, piece: Piece) -> str:
        """What t is called on a piece where it is an unknown."""
        return piece.own(self.beside.original.independent)

    def length(self, piece: Piece) -> float:
        """How long a piece is in t."""
        return float(self.places[piece.place + 1] - self.places[piece.place])

    def upright(self, piece: Piece) -> _Told:
        """A piece that was found in parametric form."""
        names = {piece.own(unknown.name): unknown.name for unknown in self.beside.original.arcs[piece.arc].unknowns}
        way = Way(self.x(piece), tuple(names))
        shape, costates, changes = along_way(
            way, self.curve, self.costates or Curve(self.curve.breaks, {}), self.changes
        )
        breaks = shape.breaks.copy()
        breaks[0], breaks[-1] = self.places[piece.place : piece.place + 2]
        names |= {f"{own}'": f"{name}'" for own, name in names.items()}

        def renamed(part: Curve) -> Curve:
            return Curve(breaks, {names[own]: modes for own, modes in part.functions.items()})

        altered = tuple(renamed(change.curve) for change in changes if change.curve is not None)
        return _Told(renamed(shape), None if self.costates is None else renamed(costates), altered)

    def stretched(self, piece: Piece) -> _Told:
        """A piece along which t runs evenly with the common variable."""
        start, length = self.places[piece.place], self.length(piece)
        breaks = np.append(start + length * self.curve.breaks[:-1], start + length)
        shape = Curve(breaks, self.functions(piece, self.curve, np.diff(breaks)))
        costates = None if self.costates is None else Curve(breaks, self.multipliers(piece, self.costates, length))
        return _Told(shape, costates, tuple(self.changed(piece, change, shape) for change in self.changes))

    def functions(self, piece: Piece, curve: Curve, widths: Array) -> Functions:
        """The unknowns of a piece with their derivatives in t; `widths` are those of the intervals."""

        def stored(own: str, name: str) -> tuple[Array, ...]:
            return curve.functions[own]

        return self.by_orders(piece, curve, widths, stored)

    def by_orders(
        self, piece: Piece, curve: Curve, widths: Array, stored: Callable[[str, str], tuple[Array, ...]]
    ) -> Functions:
        """All derivatives of a piece: those that the curve holds by `stored(own name, name)`, else from one below."""
        functions: Functions = {}
        for unknown in self.beside.original.arcs[piece.arc].unknowns:
            for order in range(unknown.order + 1):
                name = primed((unknown.name, order))
                if (unknown.name, order) not in piece.lowered.given and piece.own(name) in curve.functions:
                    functions[name] = stored(piece.own(name), name)
                else:
                    rows = zip(functions[primed((unknown.name, order - 1))], widths, strict=True)
                    functions[name] = tuple(
                        np.asarray(legendre.legder(part) * (2 / w), dtype=float) for part, w in rows
                    )
        return functions

    def multipliers(self, piece: Piece, costates: Curve, length: float) -> Functions:
        """The costates of a piece, and per unit of t the multipliers of what binds on it."""
        states = {primed(state) for state in piece.lowered.states}
        functions: Functions = {}
        for copy, parts in costates.functions.items():
            name, of = self.beside.parted(copy)
            if of == piece:
                functions[name] = parts if name in states else tuple(part / length for part in parts)
        return functions

    def changed(self, piece: Piece, change: Change, shape: Curve) -> Curve:
        """The change of a piece at fixed t: what its ends carry along is taken off."""
        assert change.curve is not None
        moved = _movement(self.beside.original, change)[piece.place : piece.place + 2]
        movement = moved[0] + (moved[1] - moved[0]) * change.curve.breaks
        widths, curve = np.diff(shape.breaks), change.curve

        def at_fixed_place(own: str, name: str) -> tuple[Array, ...]:
            rows = zip(curve.functions[own], shape.functions[name], widths, movement, movement[1:], strict=False)
            return tuple(less_movement(*row) for row in rows)

        return Curve(shape.breaks, self.by_orders(piece, curve, widths, at_fixed_place))


@dataclass(frozen=True, slots=True)
class _Told:
    """A piece in t: its curve, its costates, its changes."""

    shape: Curve
    costates: Curve | None
    changes: tuple[Curve, ...]


def _movement(problem: Problem, change: Change) -> Array:
    """How far every place moves with one standard deviation of a constant."""
    constant = next(c for c in problem.constants if c.name == change.constant)
    constants = {c.name: c.value for c in problem.constants}

    def of(place: Node) -> float:
        if isinstance(place, Name) and place.name in change.parameters:
            return change.parameters[place.name]
        return number(derivative(place, Name(constant.name)), constants) * (constant.tolerance or 0.0)

    return np.array([of(place.tree) for place in problem.places])


def _joined(curves: Sequence[Curve]) -> Curve:
    """Curves that follow each other as one; a function that one of them lacks is zero there."""
    if len(curves) == 1:
        return curves[0]
    names = dict.fromkeys(name for curve in curves for name in curve.functions)
    nothing = np.zeros(1)
    return Curve(
        np.concatenate([curves[0].breaks, *(curve.breaks[1:] for curve in curves[1:])]),
        {
            name: tuple(part for c in curves for part in c.functions.get(name, (nothing,) * (len(c.breaks) - 1)))
            for name in names
        },
    )
