"""Guesses for unknowns and parameters, in SI."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise

from service.assemble.declared import Declared, beyond
from service.assemble.dimensions import Units
from service.assemble.domain import literal, value_of
from service.assemble.formulas import Formulas
from service.assemble.names import Kind, Names
from service.complaints import Complaint, Stage, closest, pointer, refuse
from service.spec import Document
from service.units import PURE
from solvers.formula.nodes import Node, Number, Product
from solvers.formula.printer import text

Guess = Node | tuple[tuple[float, float], ...]


def check_guess_names(document: Document, names: Names) -> None:
    """Every guess is for an unknown or a parameter, of the right form.  Raises `Refused` (stage names)."""
    complaints = []
    for name, guess in document.guess.items():
        place = pointer("guess", name)
        kind = names.kinds.get(names.written.get(name, name))
        known = (*names.of(Kind.UNKNOWN), *names.of(Kind.PARAMETER))
        if kind not in (Kind.UNKNOWN, Kind.PARAMETER):
            near = closest(name, known)
            what = f"“{name[:40]}” is {kind.value}" if kind else f"There is no “{name[:40]}”"
            hint = f"Did you mean “{near}”?" if near else "Guesses are for unknowns and parameters."
            complaints.append(Complaint(place, None, "unknown-name", f"{what}; nothing to guess.", hint))
        elif kind is Kind.PARAMETER and not isinstance(guess, float):
            message = f"The guess for the parameter “{name}” is no number."
            complaints.append(Complaint(place, None, "wrong-guess", message, "Write a number in its unit."))
        elif isinstance(guess, tuple):
            places = [at for at, _ in guess]
            if any(later <= earlier for earlier, later in pairwise(places)):
                message = "The places of the points do not increase."
                complaints.append(Complaint(place, None, "points-order", message, "Sort the points; each place once."))
    refuse(Stage.NAMES, complaints)


def read_guesses(
    document: Document, names: Names, formulas: Formulas, declared: Declared, units: Units
) -> dict[str, Guess | float]:
    """Guesses by name: numbers for parameters, trees or points for unknowns.  Complaints gather in `units`."""
    found: dict[str, Guess | float] = {}
    by = declared.units[units.independent].factor
    for written, guess in document.guess.items():
        name = names.written[written]
        if isinstance(guess, tuple):
            factor = declared.units[name].factor
            points = tuple((place * by, value * factor) for place, value in guess)
            if not all(math.isfinite(number) for point in points for number in point):
                units.complaints.append(beyond(pointer("guess", written)))
            found[name] = points
        elif name in declared.parameters:
            assert isinstance(guess, float)
            value = guess * declared.units[name].factor
            if not math.isfinite(value):
                units.complaints.append(beyond(pointer("guess", written)))
            found[name] = value
            _check_inside(guess, written, document.parameters[written].within)
        else:
            found[name] = _formula(name, formulas, declared, units)
    return found


def _check_inside(guess: float, name: str, within: tuple[float | None, float | None]) -> None:
    lower, upper = within
    if (lower is not None and guess < lower) or (upper is not None and guess > upper):
        message = f"The guess {guess:g} lies outside of the bounds of {name}."
        shown = " to ".join("open" if bound is None else f"{bound:g}" for bound in within)
        complaint = Complaint(pointer("guess", name), None, "guess-outside", message, f"The bounds are {shown}.")
        refuse(Stage.CONDITIONS, [complaint])


def _formula(name: str, formulas: Formulas, declared: Declared, units: Units) -> Node:
    """A formula without unit is in the unit of the unknown; one with a unit has to fit it."""
    guess = formulas.guesses[name]
    sort = units.sort(guess.tree, guess)
    factor = declared.units[name].factor
    if literal(guess.tree):
        return Number(value_of(guess.tree, units.constants) * factor, text(guess.tree), guess.tree.span)
    own = units.sorts[name]
    plain = not sort.measure.symbols
    if own.checked and sort.checked and not plain and sort.measure.dimension != own.measure.dimension:
        message = f"The guess is {sort.told}, {name} is {own.told}."
        hint = f"Write a formula in {own.measure.text}, or a pure number: it is taken in {own.measure.text}."
        units.complaints.append(guess.complaint(guess.tree.span, "unit-clash", message, hint))
    if factor == 1 or not plain or (sort.measure.dimension != PURE):
        return guess.tree
    return Product((Number(factor, repr(factor)), guess.tree), (False, False), guess.tree.span)


def with_guess(declared: Declared, guesses: dict[str, Guess | float]) -> Declared:
    """The parameters with their guesses."""
    parameters = {
        name: replace(parameter, guess=guess) if isinstance(guess := guesses.get(name), float) else parameter
        for name, parameter in declared.parameters.items()
    }
    return replace(declared, parameters=parameters)
