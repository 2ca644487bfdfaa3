"""Single places of the independent variable, fixed or free, before they are put in order."""

from __future__ import annotations

import math
from dataclasses import dataclass

from service.assemble.dimensions import Units
from service.assemble.domain import literal, value_of
from solvers.formula.nodes import Name, Node, Number, Product, walk
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
        if literal(tree):
            return Spot(Place(Number(value, label), label), value, None)
        if by.factor != 1:
            tree = Product((tree, Number(by.factor, repr(by.factor))), (False, False))
    return Spot(Place(tree, label), value, None)


def range_of(spot: Spot, parameters: dict[str, Parameter]) -> tuple[float, float]:
    """Where a place may be."""
    if spot.value is not None:
        return spot.value, spot.value
    parameter = parameters[spot.name or ""]
    return parameter.lower, parameter.upper


def outside(spot: Spot, first: Spot, last: Spot, parameters: dict[str, Parameter]) -> str | None:
    """A sentence where the place can never lie between the ends."""
    lower, upper = range_of(spot, parameters)
    if upper <= range_of(first, parameters)[0]:
        return f"The place {spot.place.label} lies before the first end, {first.place.label}."
    if lower >= range_of(last, parameters)[1]:
        return f"The place {spot.place.label} lies beyond the last end, {last.place.label}."
    return None


def order_of(one: Spot, other: Spot, parameters: dict[str, Parameter]) -> bool | None:
    """Whether `one` comes before `other`; two free places come in the order of `parameters`; None: undecided."""
    (low, high), (lower, upper) = range_of(one, parameters), range_of(other, parameters)
    if high <= lower:
        return True
    if low >= upper:
        return False
    if one.name is not None and other.name is not None:
        return list(parameters).index(one.name) < list(parameters).index(other.name)
    return None
