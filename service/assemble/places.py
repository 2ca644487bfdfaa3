"""The places of a problem in order: the two ends and every place between them that a formula names."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from itertools import pairwise

from service.assemble.chain import unchained
from service.assemble.dimensions import Units
from service.assemble.formulas import Expression, Formula, Formulas
from service.assemble.measured_places import Known, Measured, add_measured
from service.assemble.spots import SAME, Spot, order_of, outside, range_of, spot_of
from service.complaints import Complaint, Stage, refuse
from solvers.formula.nodes import At, Node, Span
from solvers.formula.printer import text
from solvers.problem import Parameter, Place


class Places:
    """All places of a problem.  Made by `find_places`."""

    def __init__(self, spots: tuple[Spot, ...]) -> None:
        self.spots = spots
        self.room = _room(spots)

    @property
    def records(self) -> tuple[Place, ...]:
        """For the solver: the first is `from`, the last is `to`."""
        return tuple(spot.place for spot in self.spots)

    def index(self, spot: Spot) -> int:
        """Which of the places a spot is."""
        return next(index for index, known in enumerate(self.spots) if known.same(spot, self.room))


def find_places(
    formulas: Formulas, units: Units, parameters: dict[str, Parameter], observed: Iterable[Measured] = ()
) -> Places:
    """Every place in order, those of observations among them.  Raises `Refused` (stage conditions)."""
    complaints: list[Complaint] = []
    first, last = _spots(formulas.ends, units, parameters)
    refuse(Stage.CONDITIONS, _ends(formulas.ends[1], "The ends", first, last, parameters))
    junctions = _junctions(formulas, (first, last), units, parameters)
    inner = list(junctions)
    room = _room((first, last))
    for formula, node in _named(formulas):
        label = text(node.place)
        try:
            spot = spot_of(node.place, label, units, parameters)
        except (ArithmeticError, ValueError, LookupError):
            message = f"The place “{label}” has no fixed value."
            hint = "A place is a number, a formula of constants, or one parameter."
            complaints.append(formula.complaint(node.place.span, "bad-place", message, hint))
            continue
        if any(spot.same(known, room) for known in (first, last, *inner)):
            continue
        wrong = outside(spot, first, last, parameters)
        if wrong:
            hint = f"Places lie from {first.place.label} to {last.place.label}."
            complaints.append(formula.complaint(node.place.span, "outside", wrong, hint))
            continue
        clash = next((known for known in inner if order_of(known, spot, parameters) is None), None)
        if clash is not None:
            message = f"Whether {label} comes before or after {clash.place.label} is open."
            hint = f"Bound the parameter by `within` so that it stays on one side of {clash.place.label}."
            complaints.append(formula.complaint(node.place.span, "place-order", message, hint))
            continue
        position = sum(order_of(known, spot, parameters) is True for known in inner)
        inner.insert(position, spot)
    arcs = {arc.name: ends for arc, ends in zip(formulas.arcs, pairwise((first, *junctions, last)), strict=False)}
    complaints += add_measured(observed, Known((first, last), inner, room, arcs, parameters, units))
    refuse(Stage.CONDITIONS, complaints)
    return Places((first, *inner, last))


def _junctions(
    formulas: Formulas, ends: tuple[Spot, Spot], units: Units, parameters: dict[str, Parameter]
) -> list[Spot]:
    """The places where arcs meet, in order.  Raises `Refused` where an arc has no length, or where they do not meet."""
    if not formulas.arcs:
        return []
    spots = [_spots(arc.ends, units, parameters) for arc in formulas.arcs]
    refuse(Stage.CONDITIONS, unchained(formulas.arcs, spots, ends, units.independent))
    refuse(
        Stage.CONDITIONS,
        [
            complaint
            for arc, (start, end) in zip(formulas.arcs, spots, strict=True)
            for complaint in _ends(arc.ends[1], f"The ends of the arc {arc.name}", start, end, parameters)
        ],
    )
    return [end for _, end in spots[:-1]]


def _spots(ends: tuple[Expression, Expression], units: Units, parameters: dict[str, Parameter]) -> tuple[Spot, Spot]:
    """Two ends.  Raises `Refused` where one is no number."""
    complaints: list[Complaint] = []
    found: list[Spot] = []
    for end in ends:
        try:
            found.append(spot_of(end.tree, end.text.strip(), units, parameters))
        except ArithmeticError:
            message = f"The end {end.text} is beyond the range of numbers."
            complaints.append(end.complaint(end.tree.span, "number-range", message, "Choose another unit or number."))
    refuse(Stage.CONDITIONS, complaints)
    return found[0], found[1]


def _room(spots: Sequence[Spot]) -> float:
    """How far apart two names for one place may be: rounding of the largest of the places."""
    return SAME * max((abs(spot.value) for spot in spots if spot.value is not None), default=0.0)


def _named(formulas: Formulas) -> Iterator[tuple[Formula, At]]:
    for formula in formulas.moving():
        yield from ((formula, node) for node in formula.nodes if isinstance(node, At))


def _ends(end: Expression, what: str, first: Spot, last: Spot, parameters: dict[str, Parameter]) -> Iterator[Complaint]:
    if first.same(last):
        message = f"{what}, from ({first.place.label}) and to ({last.place.label}), are the same place."
        yield end.complaint(Span(0, len(end.text)), "empty-interval", message, "Let the curve have some length.")
    elif range_of(first, parameters)[0] >= range_of(last, parameters)[1]:
        message = f"The end, to ({last.place.label}), never lies beyond from ({first.place.label})."
        hint = "Swap from and to, or change the bounds."
        yield end.complaint(Span(0, len(end.text)), "empty-interval", message, hint)


def settle(node: Node, places: Places, units: Units, parameters: dict[str, Parameter]) -> At:
    """An `At` whose place is one of the problem's places, to the very tree."""
    assert isinstance(node, At)
    spot = spot_of(node.place, text(node.place), units, parameters)
    place = places.spots[places.index(spot)].place.tree
    return At(node.name, node.order, place, node.side, node.span)
