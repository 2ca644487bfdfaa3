"""Observations of a document in SI: units, sigmas and places checked, the squares that join the functional."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from service.assemble.declared import beyond
from service.assemble.dimensions import Sort, Units
from service.assemble.formulas import Expression, Formulas
from service.assemble.measured_places import Measured, observed_spot
from service.assemble.places import Places
from service.assemble.quoting import quoted
from service.assemble.relations import shown_unit
from service.complaints import Complaint, Stage, listing, pointer, refuse, sentence
from service.spec import Document
from service.spec.model import ObservationPart
from service.units import ONE, Measure, parse_unit
from solvers.problem import Observation, Observed
from solvers.unit_text import UnitTextError
from solvers.units import Unit

MOST_SQUARES = 2_000
"""Points of all observations together."""


@dataclass(frozen=True, slots=True)
class Readings:
    """One list of observations: `points` are (place, value, sigma) in SI, `squares` is the unit of a squared misfit."""

    of: Expression
    unit: Unit
    squares: Measure
    points: tuple[tuple[float, float, float | None], ...]
    pointer: str
    arc: str  # its name where it is given

    @property
    def places(self) -> Iterator[Measured]:
        """Each place with the pointer of its point."""
        for index, (place, _, _) in enumerate(self.points):
            yield Measured(f"{self.pointer}/points/{index}", place, self.arc)

    def clash(self, other: Measure) -> Complaint:
        """The squares cannot be added to what else is minimised."""
        own = f"in {self.squares.text}" if self.squares.symbols else "pure numbers"
        message = f"The squares of these misfits are {own}, what else is minimised is in {other.text}."
        hint = "Give the sigmas: then the squares are pure numbers."
        if self.points[0][2] is not None:
            hint = f"Divide the functional by a constant in {other.text}, which says how much it counts."
        return Complaint(self.pointer, None, "unit-clash", message, hint)

    def record(self, places: Places, units: Units) -> Observation:
        """For the solver; the places become those of the problem."""
        points = tuple(
            Observed(
                places.records[places.index(observed_spot(at, units))].tree, value, 1.0 if sigma is None else sigma
            )
            for at, value, sigma in self.points
        )
        weighted = self.points[0][2] is not None
        pointer = f"{self.pointer}/of"
        return Observation(self.of.tree, points, weighted, self.of.text.strip(), pointer, self.unit, self.arc)


def read_observations(document: Document, formulas: Formulas, units: Units) -> tuple[Readings, ...]:
    """All observations in SI.  Complaints about units gather in `units`."""
    by = units.sorts[units.independent].measure.factor
    return tuple(
        _read(part, of, pointer("observations", index), units, by)
        for index, (part, of) in enumerate(zip(document.observations, formulas.observed, strict=True))
    )


def _read(part: ObservationPart, of: Expression, place: str, units: Units, by: float) -> Readings:
    sort = units.sort(of.tree, of)
    unit, measure = _unit(part, of, sort, place, units)
    points = []
    for index, (at, value, *own) in enumerate(part.points):
        sigma = own[0] if own else part.sigma
        point = (at * by, value * unit.factor, None if sigma is None else sigma * unit.factor)
        if not all(math.isfinite(number) for number in point if number is not None):
            units.complaints.append(beyond(f"{place}/points/{index}"))
        points.append(point)
    weighted = points[0][2] is not None
    squares = ONE if weighted else measure.power(2)
    return Readings(of, unit, squares, tuple(points), place, part.arc)


def _unit(part: ObservationPart, of: Expression, sort: Sort, place: str, units: Units) -> tuple[Unit, Measure]:
    """The unit of the values: as given, where it fits the formula; else the formula's own."""
    if not part.unit.strip():
        if sort.mixed:
            message = f"{quoted(of.tree)} adds different units: nobody can tell which of them the values are in."
            units.complaints.append(of.complaint(of.tree.span, "mixed-units", message, "Give the unit of the values."))
        return shown_unit([sort.measure]), sort.measure
    try:
        measure = parse_unit(part.unit)
    except UnitTextError as error:
        found = Complaint(f"{place}/unit", None, "bad-unit", sentence(error.message), sentence(error.hint))
        units.complaints.append(found)
        return shown_unit([ONE]), ONE
    if not sort.checked and measure.factor != 1.0:
        message = f"The values are in {part.unit.strip()}, but some names in {quoted(of.tree)} have no unit."
        hint = "Give units to all of them, or leave this one out."
        units.complaints.append(Complaint(f"{place}/unit", None, "mixed-units", message, hint))
    elif sort.checked and measure.dimension != sort.measure.dimension:
        message = f"The values are in {part.unit.strip()}, {quoted(of.tree)} is {sort.told}."
        hint = f"Give them in {sort.measure.text}." if sort.measure.symbols else "Leave the unit out."
        units.complaints.append(Complaint(f"{place}/unit", None, "unit-clash", message, hint))
    return Unit(part.unit.strip(), measure.factor), measure


def check_points(document: Document, readings: Sequence[Readings]) -> None:
    """Raise `Refused` where sigmas are none or partly missing, or where a maximum is sought."""
    complaints = [*_sigmas(document), *_sought(document)]
    refuse(Stage.CONDITIONS, complaints)
    count = sum(len(found.points) for found in readings)
    if count > MOST_SQUARES:
        message = f"There are {count:,} observed points together; at most {MOST_SQUARES:,} are fitted."
        refuse(
            Stage.SIZE, [Complaint("/observations", None, "problem-too-large", message, "Take means of neighbours.")]
        )


def unknown_arcs(document: Document) -> Iterator[Complaint]:
    """Arcs that observations name and that there are not."""
    names = [arc.name for arc in document.arcs]
    for index, part in enumerate(document.observations):
        if part.arc and part.arc not in names:
            message = f"There is no arc “{part.arc}”."
            hint = f"The arcs are {listing(names)}." if names else "Leave it out: this problem has no arcs."
            yield Complaint(pointer("observations", index, "arc"), None, "unknown-arc", message, hint)


def _sigmas(document: Document) -> Iterator[Complaint]:
    known: dict[bool, str] = {}
    for number, part in enumerate(document.observations):
        for index, (_, _, *own) in enumerate(part.points):
            place = pointer("observations", number, "points", index)
            if own and own[0] <= 0:
                message = f"The sigma {own[0]:g} is not above zero."
                yield Complaint(f"{place}/2", None, "bad-sigma", message, "It is one standard deviation of the value.")
            known.setdefault(bool(own) or part.sigma is not None, place)
    if len(known) == 2:
        message = "This point has no sigma, others have one: their weights cannot be compared."
        hint = "Give a sigma to all points (`sigma` is for those without their own), or to none."
        yield Complaint(known[False], None, "sigma-missing", message, hint)


def _sought(document: Document) -> Iterator[Complaint]:
    if document.observations and document.functional.seek != "minimum":
        message = f"Sought is {document.functional.seek}, but observations are fitted by least squares."
        yield Complaint("/functional/seek", None, "fit-is-a-minimum", message, 'Write "minimum".')
