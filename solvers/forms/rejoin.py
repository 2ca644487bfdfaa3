"""The solution of a problem whose arcs were put beside each other, told again in the terms of the arcs."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import replace

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.checks import free_ends
from solvers.curve import Curve
from solvers.forms.beside import ON, Beside, Piece
from solvers.solution import ArcCurve, Check, Diagnosis, Finding, Price, Solution, Status, SweepPoint, SwitchPlace
from solvers.transcription.limits import number
from solvers.transcription.lowering import primed

Array = NDArray[np.float64]

VANISHED = 1e-9
"""Length, relative to the whole, below which a piece of an arc is left out of the curve: it has none."""


def rejoin(beside: Beside, found: Solution) -> Solution:
    """The solution of the original problem from that of the equivalent one."""
    places = _places(beside, found.parameters)
    curves = tuple(_curves(beside, found.curve, found.costates, places))
    notes = [*found.notes, *_notes(beside, places, curves)]
    return replace(
        found,
        curve=None,
        costates=None,
        arcs=curves,
        prices=tuple(_prices(beside, found.prices)),
        checks=tuple(_check(beside, check, places) for check in found.checks),
        diagnosis=None if found.diagnosis is None else _diagnosis(beside, found.diagnosis, places),
        notes=tuple(notes),
        sweep=tuple(_point(beside, point) for point in found.sweep),
        extremals=tuple(replace(one, solution=rejoin(beside, one.solution)) for one in found.extremals),
        changes=(),
        switches=tuple(sorted(set(_switches(beside, found, places)), key=lambda switch: switch.place)),
    )


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
        curves, costates = [], []
        for piece in beside.pieces:
            start, length = places[piece.place], places[piece.place + 1] - places[piece.place]
            if piece.arc != index or length <= VANISHED * span:
                continue
            curves.append(_moved(curve, _functions(beside, piece, curve, length), start, length))
            if along is not None:
                costates.append(_moved(along, _multipliers(beside, piece, along, length), start, length))
        if curves:
            yield ArcCurve(arc.name, _joined(curves), _joined(costates) if costates else None)


Functions = dict[str, tuple[Array, ...]]


def _functions(beside: Beside, piece: Piece, curve: Curve, length: float) -> Functions:
    """The unknowns of a piece with their derivatives in t."""
    functions: Functions = {}
    widths = np.diff(curve.breaks) * length
    for unknown in beside.original.arcs[piece.arc].unknowns:
        for order in range(unknown.order + 1):
            quantity = (unknown.name, order)
            if quantity in piece.lowered.given:
                below = functions[primed((unknown.name, order - 1))]
                functions[primed(quantity)] = tuple(
                    np.asarray(legendre.legder(part) * (2 / width), dtype=float)
                    for part, width in zip(below, widths, strict=True)
                )
            else:
                functions[primed(quantity)] = curve.functions[piece.own(primed(quantity))]
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


def _moved(curve: Curve, functions: Functions, start: float, length: float) -> Curve:
    return Curve(np.append(start + length * curve.breaks[:-1], start + length), functions)


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


def _at(piece: Piece | None, place: float | None, places: Array) -> float | None:
    """A place of the common variable in t; None where it is on no arc, or where t was not found."""
    if piece is None or place is None:
        return None
    start, end = places[piece.place], places[piece.place + 1]
    return float(start + (end - start) * place) if np.isfinite(start + end) else None


def _check(beside: Beside, check: Check, places: Array) -> Check:
    _, piece = beside.parted(check.subject)
    sentence = _told(beside, check.sentence)
    if check.name == free_ends.NAME and check.status is Status.PASSED:
        sentence += " At junctions the costates jump by the prices of what is asked there, and no more; the Hamiltonian"
        sentence += " is continuous where the place is free."
    return replace(
        check, place=_at(piece, check.place, places), subject=_told(beside, check.subject), sentence=sentence
    )


def _told(beside: Beside, text: str) -> str:
    """A text with the ends of copies as sides of places: `x on burn(end)` is x(t1-)."""
    last = len(beside.original.places) - 1
    for piece in beside.pieces:
        for end, place, side in (("(start)", piece.place, "+"), ("(end)", piece.place + 1, "-")):
            label = beside.original.places[place].label + (side if 0 < place < last else "")
            text = text.replace(f"{ON}{piece.label}{end}", f"({label})")
    return text


def _switches(beside: Beside, found: Solution, places: Array) -> Iterator[SwitchPlace]:
    for switch in found.switches:
        for name, piece in map(beside.parted, switch.of):
            at = _at(piece, switch.place, places)
            if at is not None:
                yield SwitchPlace(at, frozenset({name}))


def _diagnosis(beside: Beside, diagnosis: Diagnosis, places: Array) -> Diagnosis:
    return replace(diagnosis, findings=tuple(_finding(beside, finding, places) for finding in diagnosis.findings))


def _finding(beside: Beside, finding: Finding, places: Array) -> Finding:
    label, piece = beside.parted(finding.label)
    pointer, _ = beside.parted(finding.pointer)
    note = finding.note if piece is None else f"{finding.note} on {piece.label}".strip()
    return replace(finding, label=label, pointer=pointer, place=_at(piece, finding.place, places), note=note)


def _notes(beside: Beside, places: Array, curves: tuple[ArcCurve, ...]) -> Iterator[str]:
    """How the arcs were treated, and which of them vanished."""
    problem = beside.original
    orders = [c.label for c in beside.problem.endpoints if not c.pointer and not c.equality]
    if orders:
        yield f"Kept in order: {', '.join(orders)}."
    kept = {curve.name for curve in curves}
    for arc in problem.arcs:
        if curves and arc.name not in kept:
            yield f"The arc {arc.name} has no length in this result."
