"""The solution of a problem whose arcs were put beside each other, told again in the terms of the arcs."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks import free_ends
from solvers.curve import Curve
from solvers.forms.arcs_in_t import OnCommon
from solvers.forms.beside import Beside, Piece
from solvers.search.signals import SWITCH
from solvers.solution import (
    ArcCurve,
    Change,
    Check,
    Diagnosis,
    Finding,
    Fit,
    Price,
    Solution,
    Status,
    Stretch,
    SweepPoint,
    SwitchPlace,
)
from solvers.transcription.limits import number
from solvers.undetermined import Undetermined

Array = NDArray[np.float64]


def rejoin(beside: Beside, found: Solution) -> Solution:
    """The solution of the original problem from that of the equivalent one."""
    where = Where(beside, found.curve, _places(beside, found.parameters))
    curves, changes = _arcs(beside, found.curve, found.costates, where.places, found.changes)
    notes = [*found.notes, *_notes(beside, curves)]
    return replace(
        found,
        curve=None,
        costates=None,
        arcs=curves,
        prices=tuple(_prices(beside, found.prices)),
        checks=tuple(_check(beside, check, where) for check in found.checks),
        diagnosis=None if found.diagnosis is None else _diagnosis(beside, found.diagnosis, where),
        undetermined=tuple(_undetermined(beside, one, where) for one in found.undetermined),
        notes=tuple(notes),
        sweep=tuple(_point(beside, point) for point in found.sweep),
        extremals=tuple(replace(one, solution=rejoin(beside, one.solution)) for one in found.extremals),
        changes=changes,
        fit=None if found.fit is None else _fit(beside, found.fit),
        switches=tuple(sorted(_switches(beside, found, where), key=lambda switch: switch.place)),
        stretches=_stretches(beside, found, where),
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

    def error(self, piece: Piece, place: float, error: float | None, curve_error: float | None) -> float | None:
        """How far off that may be: as the place is, and as the curve with the ends of its arc, where these are free."""
        ends = self.places[piece.place : piece.place + 2]
        free = not np.isfinite(_places(self.beside, {})[piece.place : piece.place + 2]).all()
        if error is None and not free:
            return None
        own = piece.own(self.beside.original.independent)
        slope = float(np.ptp(ends))
        if self.curve is not None and own in self.curve.functions:
            slope = abs(float(self.curve.evaluate(own, np.array([place]), 1)[0]))
        off = np.inf if curve_error is None else curve_error
        return float(slope * (error or 0.0) + min(off, 1.0) * np.ptp(self.places) * free)


def _point(beside: Beside, point: SweepPoint) -> SweepPoint:
    """A point of a sweep with its curve by arcs."""
    swept = {sweep.constant: value for sweep, value in zip(beside.original.sweeps, point.at, strict=True)}
    curves, _ = _arcs(beside, point.curve, None, _places(beside, point.parameters, swept))
    return replace(point, curve=None, arcs=curves)


def _arcs(
    beside: Beside, curve: Curve | None, costates: Curve | None, places: Array, changes: tuple[Change, ...] = ()
) -> tuple[tuple[ArcCurve, ...], tuple[Change, ...]]:
    """The arcs of a curve and of its changes; none where there is no curve, or no places were found."""
    if curve is None or not np.isfinite(places).all():
        return (), ()
    return OnCommon(beside, curve, costates, changes, places).arcs()


def _places(beside: Beside, parameters: Mapping[str, float], constants: Mapping[str, float] | None = None) -> Array:
    """The values of all places; not a number where no parameters were found that they depend on.

    `constants` are those that are not as the problem has them.
    """
    problem = beside.original
    values = {c.name: c.value for c in problem.constants} | dict(constants or {}) | dict(parameters)
    free = {p.name for p in problem.parameters} - values.keys()
    values |= dict.fromkeys(free, float("nan"))
    return np.array([number(place.tree, values) for place in problem.places])


def _fit(beside: Beside, fit: Fit) -> Fit:
    """The fit with all points of a list together again, in their order."""
    original = beside.original
    places = dict(zip((id(place.tree) for place in original.places), _places(beside, {}), strict=True))
    told = []
    for which, own in enumerate(original.observations):
        shares = [(points, part) for (of, points), part in zip(beside.measured, fit.observations, strict=True)
                  if of == which]  # fmt: skip
        parts = [part for _, part in shares]
        order = np.argsort([index for points, _ in shares for index in points])
        told.append(
            replace(
                parts[0],
                label=own.label,
                pointer=own.pointer,
                places=np.array([places[id(point.place)] for point in own.points]),
                observed=np.concatenate([part.observed for part in parts])[order],
                fitted=np.concatenate([part.fitted for part in parts])[order],
                sigma=_together([part.sigma for part in parts], order),
                normalised=_together([part.normalised for part in parts], order),
                fitted_sigma=_together([part.fitted_sigma for part in parts], order),
            )
        )
    return replace(fit, observations=tuple(told))


def _together(parts: list[Array | None], order: NDArray[np.intp]) -> Array | None:
    """The parts as one, in the given order; None where one is not known."""
    known = [part for part in parts if part is not None]
    return np.concatenate(known)[order] if len(known) == len(parts) else None


def _prices(beside: Beside, prices: Iterable[Price]) -> Iterator[Price]:
    """The prices of the user's conditions: what holds on several arcs is raised on all of them at once."""
    total: dict[tuple[str, str], float] = {}
    for price in prices:
        key = beside.parted(price.label)[0], beside.parted(price.pointer)[0]
        total[key] = total.get(key, 0.0) + price.price
    yield from (Price(label, pointer, worth) for (label, pointer), worth in total.items())


def _check(beside: Beside, check: Check, where: Where) -> Check:
    _, piece = beside.parted(check.subject)
    sentence = beside.by_arc(check.sentence)
    if check.name == free_ends.NAME and check.status is Status.PASSED:
        sentence += " At junctions the costates jump by the prices of what is asked there, and no more; the Hamiltonian"
        sentence += " is continuous where the place is free."
    return replace(check, place=where.at(piece, check.place), subject=beside.by_arc(check.subject), sentence=sentence)


def _switches(beside: Beside, found: Solution, where: Where) -> list[SwitchPlace]:
    """Each switch at the place of the arc whose unknowns it is about: of several of one arc it is one switch."""
    told: dict[float, SwitchPlace] = {}
    for switch in found.switches:
        for name, piece in map(beside.parted, switch.of):
            at = where.at(piece, switch.place)
            if piece is not None and at is not None:
                error = where.error(piece, switch.place, switch.error, found.curve_error) or 0.0
                same = told.get(at, SwitchPlace(at, frozenset(), 0.0))
                told[at] = SwitchPlace(at, same.of | {name}, max(error, same.error))
    return list(told.values())


def _stretches(beside: Beside, found: Solution, where: Where) -> tuple[Stretch, ...]:
    """What lies between switches, by quantity and then in order; pieces of an arc with the same to say as one."""
    told: dict[str, list[Stretch]] = {}
    for stretch in found.stretches:
        name, piece = beside.parted(stretch.of)
        start, end = where.at(piece, stretch.start), where.at(piece, stretch.end)
        if piece is not None and start is not None and end is not None and end > start:
            arc = beside.original.arcs[piece.arc].name
            early = where.error(piece, stretch.start, stretch.start_error, found.curve_error)
            late = where.error(piece, stretch.end, stretch.end_error, found.curve_error)
            own = replace(stretch, start=start, start_error=early, end=end, end_error=late, of=name, arc=arc)
            told.setdefault(name, []).append(own)
    kept: list[Stretch] = []
    for parts in told.values():
        for part in sorted(parts, key=lambda part: part.start):
            last = kept[-1] if kept else None
            near = 1e-9 * (part.end - part.start)
            same = last and (last.arc, last.course, last.control) == (part.arc, part.course, part.control)
            if last and same and part.start - last.end <= near:
                kept[-1] = replace(last, end=part.end, end_error=part.end_error)
            else:
                kept.append(part)
    return tuple(kept)


def _diagnosis(beside: Beside, diagnosis: Diagnosis, where: Where) -> Diagnosis:
    return replace(diagnosis, findings=tuple(_finding(beside, finding, where) for finding in diagnosis.findings))


def _undetermined(beside: Beside, found: Undetermined, where: Where) -> Undetermined:
    name, piece = beside.parted(found.name)
    pointer = beside.parted(found.pointer)[0]
    return replace(found, name=name, pointer=pointer, place=where.at(piece, found.place))


def _finding(beside: Beside, finding: Finding, where: Where) -> Finding:
    label, piece = beside.parted(finding.label)
    pointer, _ = beside.parted(finding.pointer)
    note = finding.note if piece is None else f"{finding.note} on {piece.label}".strip()
    return replace(finding, label=label, pointer=pointer, place=where.at(piece, finding.place), note=note)


def _notes(beside: Beside, curves: tuple[ArcCurve, ...]) -> Iterator[str]:
    """How the arcs were treated, and which of them vanished."""
    problem = beside.original
    orders = [
        c.label for c in beside.problem.endpoints if not c.pointer and not c.equality and f"{SWITCH} " not in c.label
    ]
    if orders:
        yield f"Kept in order: {', '.join(orders)}."
    kept = {curve.name for curve in curves}
    for arc in problem.arcs:
        if curves and arc.name not in kept:
            yield f"The arc {arc.name} has no length in this result."
