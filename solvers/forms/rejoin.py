"""The solution of a problem whose arcs were put beside each other, told again in the terms of the arcs."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.checks import free_ends
from solvers.curve import Curve
from solvers.forms.beside import Beside, Piece
from solvers.forms.gauge import Way
from solvers.forms.graph import along_way
from solvers.solution import ArcCurve, Check, Diagnosis, Finding, Price, Solution, Status, SweepPoint, SwitchPlace
from solvers.transcription.limits import number
from solvers.transcription.lowering import primed

Array = NDArray[np.float64]

VANISHED = 1e-9
"""Length, relative to the whole, below which a piece of an arc is left out of the curve: it has none."""


def rejoin(beside: Beside, found: Solution) -> Solution:
    """The solution of the original problem from that of the equivalent one."""
    where = Where(beside, found.curve, _places(beside, found.parameters))
    curves = tuple(_curves(beside, found.curve, found.costates, where.places))
    notes = [*found.notes, *_notes(beside, curves)]
    return replace(
        found,
        curve=None,
        costates=None,
        arcs=curves,
        prices=tuple(_prices(beside, found.prices)),
        checks=tuple(_check(beside, check, where) for check in found.checks),
        diagnosis=None if found.diagnosis is None else _diagnosis(beside, found.diagnosis, where),
        notes=tuple(notes),
        sweep=tuple(_point(beside, point) for point in found.sweep),
        extremals=tuple(replace(one, solution=rejoin(beside, one.solution)) for one in found.extremals),
        changes=(),
        switches=tuple(sorted(set(_switches(beside, found, where)), key=lambda switch: switch.place)),
    )


@dataclass(frozen=True, slots=True)
class Where:
    """Where in t a place of the common variable is on a piece; `places` are those of the problem."""

    beside: Beside
    curve: Curve | None
    places: Array

    def at(self, piece: Piece | None, place: float | None) -> float | None:
        """None where it is on no arc, or where t was not found."""
        if piece is None or place is None:
            return None
        own = piece.own(self.beside.original.independent)
        if self.curve is not None and own in self.curve.functions:
            return float(self.curve.evaluate(own, np.array([place]))[0])
        start, end = self.places[piece.place], self.places[piece.place + 1]
        return float(start + (end - start) * place) if np.isfinite(start + end) else None


def _point(beside: Beside, point: SweepPoint) -> SweepPoint:
    """A point of a sweep with its curve by arcs."""
    swept = {sweep.constant: value for sweep, value in zip(beside.original.sweeps, point.at, strict=True)}
    curves = _curves(beside, point.curve, None, _places(beside, point.parameters, swept))
    return replace(point, curve=None, arcs=tuple(curves))


def _places(beside: Beside, parameters: Mapping[str, float], constants: Mapping[str, float] | None = None) -> Array:
    """The values of all places; not a number where no parameters were found that they depend on.

    `constants` are those that are not as the problem has them.
    """
    problem = beside.original
    values = {c.name: c.value for c in problem.constants} | dict(constants or {}) | dict(parameters)
    free = {p.name for p in problem.parameters} - values.keys()
    values |= dict.fromkeys(free, float("nan"))
    return np.array([number(place.tree, values) for place in problem.places])


def _curves(beside: Beside, curve: Curve | None, along: Curve | None, places: Array) -> Iterator[ArcCurve]:
    """The arcs of a curve and of its costates."""
    if curve is None or not np.isfinite(places).all():
        return
    span = places[-1] - places[0]
    for index, arc in enumerate(beside.original.arcs):
        told = []
        for piece in beside.pieces:
            start, end = places[piece.place], places[piece.place + 1]
            if piece.arc != index or end - start <= VANISHED * span:
                continue
            one = _upright if piece.own(beside.original.independent) in curve.functions else _stretched
            told.append(one(beside, piece, curve, along, start, end))
        if told:
            costates = [part for _, part in told if part is not None]
            yield ArcCurve(arc.name, _joined([part for part, _ in told]), _joined(costates) if costates else None)


Functions = dict[str, tuple[Array, ...]]


def _upright(
    beside: Beside, piece: Piece, curve: Curve, along: Curve | None, start: float, end: float
) -> tuple[Curve, Curve | None]:
    """A piece that was found in parametric form, and its costates."""
    names = {piece.own(unknown.name): unknown.name for unknown in beside.original.arcs[piece.arc].unknowns}
    way = Way(piece.own(beside.original.independent), tuple(names))
    shape, costates, _ = along_way(way, curve, along or Curve(curve.breaks, {}), ())
    breaks = np.concatenate([[start], shape.breaks[1:-1], [end]])
    names |= {f"{own}'": f"{name}'" for own, name in names.items()}

    def renamed(part: Curve) -> Curve:
        return Curve(breaks, {names[own]: modes for own, modes in part.functions.items()})

    return renamed(shape), None if along is None else renamed(costates)


def _stretched(
    beside: Beside, piece: Piece, curve: Curve, along: Curve | None, start: float, end: float
) -> tuple[Curve, Curve | None]:
    """A piece along which t runs evenly with the common variable, and its costates."""
    length = end - start
    breaks = np.append(start + length * curve.breaks[:-1], end)
    costates = None if along is None else Curve(breaks, _multipliers(beside, piece, along, length))
    return Curve(breaks, _functions(beside, piece, curve, length)), costates


def _functions(beside: Beside, piece: Piece, curve: Curve, length: float) -> Functions:
    """The unknowns of a piece with their derivatives in t."""
    functions: Functions = {}
    widths = np.diff(curve.breaks) * length
    for unknown in beside.original.arcs[piece.arc].unknowns:
        for order in range(unknown.order + 1):
            quantity = (unknown.name, order)
            own = piece.own(primed(quantity))
            if quantity in piece.lowered.given or own not in curve.functions:  # not known better than by the function
                below = functions[primed((unknown.name, order - 1))]
                functions[primed(quantity)] = tuple(
                    np.asarray(legendre.legder(part) * (2 / width), dtype=float)
                    for part, width in zip(below, widths, strict=True)
                )
            else:
                functions[primed(quantity)] = curve.functions[own]
    return functions


def _multipliers(beside: Beside, piece: Piece, costates: Curve, length: float) -> Functions:
    """The costates of a piece, and per unit of t the multipliers of what binds on it."""
    states = {primed(state) for state in piece.lowered.states}
    functions: Functions = {}
    for copy, parts in costates.functions.items():
        name, of = beside.parted(copy)
        if of == piece:
            functions[name] = parts if name in states else tuple(part / length for part in parts)
    return functions


def _joined(curves: list[Curve]) -> Curve:
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


def _prices(beside: Beside, prices: Iterable[Price]) -> Iterator[Price]:
    """The prices of the user's conditions: what holds on several arcs is raised on all of them at once."""
    total: dict[tuple[str, str], float] = {}
    for price in prices:
        key = beside.parted(price.label)[0], beside.parted(price.pointer)[0]
        total[key] = total.get(key, 0.0) + price.price
    yield from (Price(label, pointer, worth) for (label, pointer), worth in total.items())


def _check(beside: Beside, check: Check, where: Where) -> Check:
    _, piece = beside.parted(check.subject)
    sentence = beside.with_sides(check.sentence)
    if check.name == free_ends.NAME and check.status is Status.PASSED:
        sentence += " At junctions the costates jump by the prices of what is asked there, and no more; the Hamiltonian"
        sentence += " is continuous where the place is free."
    return replace(
        check, place=where.at(piece, check.place), subject=beside.with_sides(check.subject), sentence=sentence
    )


def _switches(beside: Beside, found: Solution, where: Where) -> Iterator[SwitchPlace]:
    for switch in found.switches:
        for name, piece in map(beside.parted, switch.of):
            at = where.at(piece, switch.place)
            if at is not None:
                yield SwitchPlace(at, frozenset({name}))


def _diagnosis(beside: Beside, diagnosis: Diagnosis, where: Where) -> Diagnosis:
    return replace(diagnosis, findings=tuple(_finding(beside, finding, where) for finding in diagnosis.findings))


def _finding(beside: Beside, finding: Finding, where: Where) -> Finding:
    label, piece = beside.parted(finding.label)
    pointer, _ = beside.parted(finding.pointer)
    note = finding.note if piece is None else f"{finding.note} on {piece.label}".strip()
    return replace(finding, label=label, pointer=pointer, place=where.at(piece, finding.place), note=note)


def _notes(beside: Beside, curves: tuple[ArcCurve, ...]) -> Iterator[str]:
    """How the arcs were treated, and which of them vanished."""
    problem = beside.original
    orders = [c.label for c in beside.problem.endpoints if not c.pointer and not c.equality]
    if orders:
        yield f"Kept in order: {', '.join(orders)}."
    kept = {curve.name for curve in curves}
    for arc in problem.arcs:
        if curves and arc.name not in kept:
            yield f"The arc {arc.name} has no length in this result."
