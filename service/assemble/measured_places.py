"""Places of observations put in order among the others; there may be many, so they are sorted at once."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

from service.assemble.dimensions import Units
from service.assemble.spots import Spot, order_of, outside, range_of
from service.complaints import Complaint
from solvers.formula.nodes import Number
from solvers.problem import Parameter, Place


@dataclass(frozen=True, slots=True)
class Measured:
    """The place (SI) of a point with its pointer, and the name of the arc that it is said to be of, or ""."""

    pointer: str
    value: float
    arc: str


@dataclass(frozen=True, slots=True)
class Known:
    """What is known of the places already: the ends, those between them in order, and the ends of every arc.

    `room` is how far apart two names for one place may be.
    """

    ends: tuple[Spot, Spot]
    inner: list[Spot]
    room: float
    arcs: Mapping[str, tuple[Spot, Spot]]
    parameters: dict[str, Parameter]
    units: Units

    def order(self, one: Spot, other: Spot, arc: str) -> bool | None:
        """Whether `one` comes before `other`, a place on an arc (or ""); None where that is open."""
        certain = order_of(one, other, self.parameters)
        if certain is None and arc:
            names = list(self.arcs)
            position = names.index(arc)
            if one.name in {self.arcs[name][1].name for name in names[:position]}:
                return True
            if one.name in {self.arcs[name][1].name for name in names[position:]}:
                return False
        return certain


def observed_spot(value: float, units: Units) -> Spot:
    """The spot of a place (SI) where something was measured."""
    label = f"{value / units.sorts[units.independent].measure.factor:.12g}"
    return Spot(Place(Number(value, label), label), value, None)


def add_measured(measured: Iterable[Measured], known: Known) -> Iterator[Complaint]:
    """Put the places of observations among the others; what is wrong with one is told and the place left out."""
    first, last = known.ends
    fixed = sorted(spot.value for spot in (*known.ends, *known.inner) if spot.value is not None)
    fresh: list[tuple[Spot, str]] = []
    for point in sorted(measured, key=lambda point: point.value):
        spot = observed_spot(point.value, known.units)
        near = bisect_left(fixed, point.value)
        there = (Spot(spot.place, value, None) for value in fixed[max(near - 1, 0) : near + 1])
        present = any(spot.same(other, known.room) for other in there)
        wrong = None if present else outside(spot, first, last, known.parameters)
        if wrong:
            hint = f"Places lie from {first.place.label} to {last.place.label}."
            yield Complaint(point.pointer, None, "outside", wrong, hint)
            continue
        off = _off_its_arc(spot, point, known)
        if off is not None:
            yield off
            continue
        if present:
            continue
        if fresh and spot.same(fresh[-1][0], known.room):
            if not fresh[-1][1]:
                fresh[-1] = spot, point.arc
            elif point.arc and point.arc != fresh[-1][1]:
                yield _earlier_arc(point, fresh[-1])
            continue
        free = [place for place in known.inner if place.name]
        clash = next((place for place in free if known.order(place, spot, point.arc) is None), None)
        if clash is not None:
            message = f"Whether {spot.place.label} comes before or after {clash.place.label} is open."
            hint = f"Bound the parameter by `within` so that it stays on one side of {spot.place.label}"
            hint += ', or say which arc it is: "arc": "…".' if known.arcs else "."
            yield Complaint(point.pointer, None, "place-order", message, hint)
            continue
        names = list(known.arcs)
        if point.arc and any(arc and names.index(arc) > names.index(point.arc) for _, arc in fresh):
            yield _earlier_arc(point, max(fresh, key=lambda one: names.index(one[1]) if one[1] else -1))
            continue
        fresh.append((spot, point.arc))
    _insert(fresh, known)


def _off_its_arc(spot: Spot, point: Measured, known: Known) -> Complaint | None:
    """The complaint about a place that can never be on the arc that is named with it."""
    if not point.arc:
        return None
    start, end = known.arcs[point.arc]
    beyond = range_of(end, known.parameters)[1]
    before = range_of(start, known.parameters)[0]
    if before - known.room <= point.value <= beyond + known.room:
        return None
    told = f"begins at {start.place.label}" if point.value < before else f"ends at {end.place.label}"
    message = f"{spot.place.label} is not on the arc {point.arc}, which {told}."
    return Complaint(point.pointer, None, "outside-arc", message, "Name the arc on which it lies, or leave that out.")


def _earlier_arc(point: Measured, other: tuple[Spot, str]) -> Complaint:
    spot, arc = other
    message = (
        f"This point of the arc {point.arc} does not lie on the same side of {spot.place.label}, of the arc {arc}."
    )
    return Complaint(point.pointer, None, "outside-arc", message, "Arcs follow each other in their order.")


def _insert(fresh: list[tuple[Spot, str]], known: Known) -> None:
    """Put places of observations between the others, which stay in their order."""
    arcs = {id(spot): arc for spot, arc in fresh}
    spots = [spot for spot in known.inner if spot.value is not None] + [spot for spot, _ in fresh]
    spots.sort(key=lambda spot: spot.value or 0.0)
    position = 0
    for place in known.inner:
        if place.value is None:
            behind = [at for at, spot in enumerate(spots, start=1)
                      if id(spot) in arcs and known.order(place, spot, arcs[id(spot)]) is False]  # fmt: skip
            spots.insert(max([position, *behind]), place)
        position = spots.index(place) + 1
    known.inner[:] = spots
