"""Constants, parameters and the units of all declared names."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from service.assemble.dimensions import UNCHECKED, Sort
from service.assemble.names import Names
from service.complaints import Complaint, Stage, pointer, refuse, sentence
from service.spec import Document
from service.units import ONE, Measure, Quantity, parse_quantity, parse_unit
from solvers.problem import Constant, Parameter
from solvers.unit_text import UnitTextError
from solvers.units import PLAIN, Unit


@dataclass(frozen=True, slots=True)
class Declared:
    """What the document says of its names, in SI."""

    sorts: Mapping[str, Sort]
    units: Mapping[str, Unit]
    constants: Mapping[str, Constant]
    parameters: Mapping[str, Parameter]
    bounds: Mapping[str, tuple[float, float]]  # of unknowns


def read_declared(document: Document, names: Names, others: Iterable[Complaint] = ()) -> Declared:
    """Units, constants and bounds.  Raises `Refused`: stage units for units and values, conditions for bounds.

    `others` are complaints about units that were found before.
    """
    complaints: list[Complaint] = list(others)
    sorts: dict[str, Sort] = {}
    units: dict[str, Unit] = {}

    def declare(name: str, unit: str, *place: str) -> None:
        try:
            measure = parse_unit(unit)
        except UnitTextError as error:
            complaints.append(_complaint(pointer(*place), error))
            measure = ONE
        sorts[names.written[name]] = Sort(measure) if unit.strip() else UNCHECKED
        units[names.written[name]] = Unit(unit.strip(), measure.factor)

    declare(document.independent.name, document.independent.unit, "independent", "unit")
    for name, parameter in document.parameters.items():
        declare(name, parameter.unit, "parameters", name, "unit")
    for name, unknown in document.unknowns.items():
        declare(name, unknown.unit, "unknowns", name, "unit")
    constants: dict[str, Constant] = {}
    for name, given in document.constants.items():
        spelling = names.written[name]
        try:
            quantity = Quantity(given, None, None) if isinstance(given, float) else parse_quantity(given)
        except UnitTextError as error:
            complaints.append(_complaint(pointer("constants", name), error, "bad-value"))
            continue
        measure: Measure | None = quantity.measure
        sorts[spelling] = Sort(measure) if measure else Sort(ONE, checked=False, bare=True)
        units[spelling] = measure.unit if measure else PLAIN
        constants[spelling] = Constant(spelling, quantity.value, quantity.tolerance, units[spelling])
    refuse(Stage.UNITS, complaints)

    bounds: dict[str, tuple[float, float]] = {}
    out_of_range: list[Complaint] = []
    for member, table in (("parameters", document.parameters), ("unknowns", document.unknowns)):
        for name, part in table.items():
            place, factor = pointer(member, name, "within"), units[names.written[name]].factor
            complaints += _bounds(place, *part.within)
            out_of_range += [beyond(place) for bound in part.within if bound and not math.isfinite(bound * factor)]
            lower, upper = (bound if bound is None else bound * factor for bound in part.within)
            bounds[names.written[name]] = (
                -math.inf if lower is None else lower,
                math.inf if upper is None else upper,
            )
    refuse(Stage.UNITS, out_of_range)
    refuse(Stage.CONDITIONS, complaints)
    parameters = {
        spelling: Parameter(spelling, *bounds[spelling], guess=None, unit=units[spelling])
        for spelling in (names.written[name] for name in document.parameters)
    }
    return Declared(sorts, units, constants, parameters, bounds)


def beyond(place: str) -> Complaint:
    """A number that is too large in SI units."""
    message = "This number is beyond the range of numbers in SI units."
    return Complaint(place, None, "number-range", message, "Choose a smaller number or unit.")


def _bounds(place: str, lower: float | None, upper: float | None) -> list[Complaint]:
    if lower is None or upper is None or lower < upper:
        return []
    if lower == upper:
        hint = "Make it a constant, or an equality in constraints."
        return [Complaint(place, None, "bounds-equal", f"Both bounds are {lower:g}.", hint)]
    message = f"The lower bound {lower:g} is above the upper bound {upper:g}."
    return [Complaint(place, None, "bounds-order", message, f"Write [{upper:g}, {lower:g}].")]


def _complaint(place: str, error: UnitTextError, code: str = "bad-unit") -> Complaint:
    return Complaint(place, None, code, sentence(error.message), sentence(error.hint))
