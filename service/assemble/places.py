"""The places of a problem in order: the two ends and every place between them that a formula names."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from service.assemble.dimensions import Units
from service.assemble.domain import literal, value_of
from service.assemble.formulas import Formula, Formulas
from service.complaints import Complaint, Stage, refuse
from solvers.formula.nodes import At, Name, Node, Number, Relation, Span, walk
from solvers.formula.printer import text
from solvers.problem import Parameter, Place

SAME = 1e-12
"""Places closer than this, relative to their size, are one."""


@dataclass(frozen=True, slots=True)
class Spot:
    """A place before it is put in order: a fixed one has a `value` in SI, a free one is the parameter `name`."""

    place: Place
    value: float | None
    name: str | None

    def same(self, other: Spot, room: float = 0.0) -> bool:
        """Whether both are one place; fixed ones are within rounding, or within `room`."""
        if self.value is not None and other.value is not None:
            return math.isclose(self.value, other.value, rel_tol=SAME, abs_tol=room)
        return self.value is other.value and self.name == other.name


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


def spot_of(tree: Node, label: str, units: Units, parameters: dict[str, Parameter]) -> Spot:
    """The spot of a place's tree.  Raises ArithmeticError, ValueError or LookupError where it has no value."""
    if isinstance(tree, Name) and tree.name in parameters:
        return Spot(Place(Name(tree.name), label), None, tree.name)
    by = units.sorts[units.independent].measure
    value = value_of(tree, units.constants)
    names = [part.name for part in walk(tree) if isinstance(part, Name) and part.name != "pi"]
    if all(not units.sorts[name].checked for name in names):  # numbers, in the unit of the independent variable
        value *= by.factor
        if not math.isfinite(value):
            raise OverflowError("beyond the range of numbers")
        if literal(tree) or by.factor != 1:
            return Spot(Place(Number(value, label), label), value, None)
    return Spot(Place(tree, label), value, None)


def find_places(formulas: Formulas, units: Units, parameters: dict[str, Parameter]) -> Places:
    """Every place in order.  Raises `Refused` (stage conditions)."""
    complaints: list[Complaint] = []
    ends: list[Spot] = []
    for end in formulas.ends:
        try:
            ends.append(spot_of(end.tree, end.text.strip(), units, parameters))
        except ArithmeticError:
            message = f"The end {end.text} is beyond the range of numbers."
            complaints.append(end.complaint(end.tree.span, "number-range", message, "Choose another unit or number."))
    refuse(Stage.CONDITIONS, complaints)
    first, last = ends
    refuse(Stage.CONDITIONS, _ends(formulas, first, last, parameters))
    inner: list[Spot] = []
    room = _room(ends)
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
        wrong = _outside(spot, first, last, parameters, units)
        if wrong:
            hint = f"Places lie from {first.place.label} to {last.place.label}."
            complaints.append(formula.complaint(node.place.span, "outside", wrong, hint))
            continue
        clash = next((known for known in inner if _order(known, spot, parameters) is None), None)
        if clash is not None:
            message = f"Whether {label} comes before or after {clash.place.label} is open."
            hint = f"Bound the parameter by `within` so that it stays on one side of {clash.place.label}."
            complaints.append(formula.complaint(node.place.span, "place-order", message, hint))
            continue
        position = sum(_order(known, spot, parameters) is True for known in inner)
        inner.insert(position, spot)
    refuse(Stage.CONDITIONS, complaints)
    return Places((first, *inner, last))


def _room(spots: Sequence[Spot]) -> float:
    """How far apart two names for one place may be: rounding of the largest of the places."""
    return SAME * max((abs(spot.value) for spot in spots if spot.value is not None), default=0.0)


def _named(formulas: Formulas) -> Iterator[tuple[Formula, At]]:
    for formula in formulas.moving():
        tree = formula.tree
        for part in tree.sides if isinstance(tree, Relation) else (tree,):
            for node in walk(part):
                if isinstance(node, At):
                    yield formula, node


def _range(spot: Spot, parameters: dict[str, Parameter]) -> tuple[float, float]:
    if spot.value is not None:
        return spot.value, spot.value
    parameter = parameters[spot.name or ""]
    return parameter.lower, parameter.upper


def _ends(formulas: Formulas, first: Spot, last: Spot, parameters: dict[str, Parameter]) -> Iterator[Complaint]:
    end = formulas.ends[1]
    if first.same(last):
        message = f"The ends, from ({first.place.label}) and to ({last.place.label}), are the same place."
        yield end.complaint(Span(0, len(end.text)), "empty-interval", message, "Let the curve have some length.")
    elif _range(first, parameters)[0] >= _range(last, parameters)[1]:
        message = f"The end, to ({last.place.label}), never lies beyond from ({first.place.label})."
        hint = "Swap from and to, or change the bounds."
        yield end.complaint(Span(0, len(end.text)), "empty-interval", message, hint)


def _outside(spot: Spot, first: Spot, last: Spot, parameters: dict[str, Parameter], units: Units) -> str | None:
    """A sentence where the place can never lie between the ends."""
    lower, upper = _range(spot, parameters)
    if upper <= _range(first, parameters)[0]:
        return f"The place {spot.place.label} lies before the first end, {first.place.label}."
    if lower >= _range(last, parameters)[1]:
        return f"The place {spot.place.label} lies beyond the last end, {last.place.label}."
    return None


def _order(one: Spot, other: Spot, parameters: dict[str, Parameter]) -> bool | None:
    """Whether `one` comes before `other`; two free places come in the order of `parameters`; None: undecided."""
    (low, high), (lower, upper) = _range(one, parameters), _range(other, parameters)
    if high <= lower:
        return True
    if low >= upper:
        return False
    if one.name is not None and other.name is not None:
        return list(parameters).index(one.name) < list(parameters).index(other.name)
    return None


def settle(node: Node, places: Places, units: Units, parameters: dict[str, Parameter]) -> At:
    """An `At` whose place is one of the problem's places, to the very tree."""
    assert isinstance(node, At)
    spot = spot_of(node.place, text(node.place), units, parameters)
    return replace(node, place=places.spots[places.index(spot)].place.tree)
