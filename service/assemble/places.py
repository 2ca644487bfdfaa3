"""The places of a problem in order: the two ends and every place between them that a formula names."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Iterable, Iterator, Sequence

from service.assemble.chain import unchained
from service.assemble.dimensions import Units
from service.assemble.formulas import Expression, Formula, Formulas
from service.assemble.spots import SAME, Spot, spot_of
from service.complaints import Complaint, Stage, refuse
from solvers.formula.nodes import At, Node, Number, Span
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
    formulas: Formulas, units: Units, parameters: dict[str, Parameter], observed: Iterable[tuple[str, float]] = ()
) -> Places:
    """Every place in order.  Raises `Refused` (stage conditions).

    `observed` are the places of observations, each with its pointer, in SI.
    """
    complaints: list[Complaint] = []
    first, last = _spots(formulas.ends, units, parameters)
    refuse(Stage.CONDITIONS, _ends(formulas.ends[1], "The ends", first, last, parameters))
    inner = _junctions(formulas, (first, last), units, parameters)
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
    complaints += _add_observed(observed, (first, last), inner, room, parameters, units)
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


def observed_spot(value: float, units: Units) -> Spot:
    """The spot of a place (SI) where something was measured."""
    label = f"{value / units.sorts[units.independent].measure.factor:.12g}"
    return Spot(Place(Number(value, label), label), value, None)


def _add_observed(
    observed: Iterable[tuple[str, float]],
    ends: tuple[Spot, Spot],
    inner: list[Spot],
    room: float,
    parameters: dict[str, Parameter],
    units: Units,
) -> Iterator[Complaint]:
    """Put the places of observations among the others: there may be many, so they are sorted at once."""
    first, last = ends
    fixed = sorted(spot.value for spot in (*ends, *inner) if spot.value is not None)
    fresh: list[float] = []
    for where, value in sorted(observed, key=lambda pair: pair[1]):
        spot = observed_spot(value, units)
        near = bisect_left(fixed, value)
        if any(
            spot.same(Spot(spot.place, known, None), room)
            for known in (*fixed[max(near - 1, 0) : near + 1], *fresh[-1:])
        ):
            continue
        wrong = _outside(spot, first, last, parameters, units)
        if wrong:
            yield Complaint(
                where, None, "outside", wrong, f"Places lie from {first.place.label} to {last.place.label}."
            )
            continue
        clash = next((known for known in inner if known.name and _order(known, spot, parameters) is None), None)
        if clash is not None:
            message = f"Whether {spot.place.label} comes before or after {clash.place.label} is open."
            hint = f"Bound the parameter by `within` so that it stays on one side of {spot.place.label}."
            yield Complaint(where, None, "place-order", message, hint)
            continue
        fresh.append(value)
    free = [spot for spot in inner if spot.value is None]
    spots = [spot for spot in inner if spot.value is not None] + [observed_spot(value, units) for value in fresh]
    spots.sort(key=lambda spot: spot.value or 0.0)
    for spot in free:
        spots.insert(sum(_order(known, spot, parameters) is True for known in spots), spot)
    inner[:] = spots


def _room(spots: Sequence[Spot]) -> float:
    """How far apart two names for one place may be: rounding of the largest of the places."""
    return SAME * max((abs(spot.value) for spot in spots if spot.value is not None), default=0.0)


def _named(formulas: Formulas) -> Iterator[tuple[Formula, At]]:
    for formula in formulas.moving():
        yield from ((formula, node) for node in formula.nodes if isinstance(node, At))


def _range(spot: Spot, parameters: dict[str, Parameter]) -> tuple[float, float]:
    if spot.value is not None:
        return spot.value, spot.value
    parameter = parameters[spot.name or ""]
    return parameter.lower, parameter.upper


def _ends(end: Expression, what: str, first: Spot, last: Spot, parameters: dict[str, Parameter]) -> Iterator[Complaint]:
    if first.same(last):
        message = f"{what}, from ({first.place.label}) and to ({last.place.label}), are the same place."
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
    place = places.spots[places.index(spot)].place.tree
    return At(node.name, node.order, place, node.side, node.span)
