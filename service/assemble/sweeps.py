"""Which constants are varied: the values of sweeps, and the way of a continuation, in SI."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import replace
from itertools import pairwise, product

import numpy as np

from service.assemble.counting import check
from service.assemble.declared import Declared, beyond
from service.assemble.domain import value_of
from service.assemble.formulas import Formula, Formulas
from service.assemble.names import Kind, Names
from service.assemble.spots import SAME
from service.complaints import Complaint, Refused, Stage, closest, listing, pointer, refuse
from service.spec import Document
from service.spec.model import SweepPart
from solvers.formula.nodes import Name
from solvers.problem import Continuation, Problem, Sweep

MOST_POINTS = 2_000
"""Points of a sweep, all values of two constants together."""


STEPS = 32
"""Values on the way of a continuation at which the order of the places is looked at."""


def check_varied_names(document: Document, names: Names) -> None:
    """What is varied is a constant.  Raises `Refused` (stage names)."""
    complaints = []
    for name, place in _varied(document).items():
        kind = names.kinds.get(names.written.get(name, name))
        if kind is not Kind.CONSTANT:
            near = closest(name, names.of(Kind.CONSTANT))
            what = f"“{name[:40]}” is {kind.value}" if kind else f"There is no “{name[:40]}”"
            hint = f"Did you mean “{near}”?" if near else "Only constants are varied; declare it under constants."
            complaints.append(Complaint(place, None, "unknown-name", f"{what}; no values can be put in.", hint))
    refuse(Stage.NAMES, complaints)


def _varied(document: Document) -> dict[str, str]:
    """What is varied, as written, with the JSON pointer of that."""
    places = {name: pointer("sweep", name) for name in document.sweep}
    if document.continuation is not None:
        places[document.continuation.constant] = pointer("continuation", "constant")
    return places


def check_varied_use(document: Document, names: Names, formulas: Formulas) -> None:
    """What is varied is in a formula that counts.  Raises `Refused` (stage conditions)."""
    definitions = {name: _names(parts) for name, parts in formulas.definitions.items()}
    abbreviations = {id(part) for parts in formulas.definitions.values() for part in parts}
    used, rest = set[str](), _names(formula for formula in formulas.all() if id(formula) not in abbreviations)
    while rest:
        used |= rest
        rest = {name for found in rest for name in definitions.get(found, ())} - used
    complaints = [
        Complaint(place, None, "unused", f"“{name}” is in no formula: varying it changes nothing.",
                  "Use it in a formula, or vary another constant.")
        for name, place in _varied(document).items() if names.written[name] not in used
    ]  # fmt: skip
    refuse(Stage.CONDITIONS, complaints)


def _names(formulas: Iterable[Formula]) -> set[str]:
    return {node.name for formula in formulas for node in formula.nodes if isinstance(node, Name)}


def read_sweeps(document: Document, names: Names, declared: Declared) -> tuple[Sweep, ...]:
    """Raises `Refused`: stage conditions for values out of order, size for too many."""
    refuse(Stage.CONDITIONS, (found for name, part in document.sweep.items() for found in _wrong(name, part)))
    total = math.prod(len(_values(part)) for part in document.sweep.values())
    if total > MOST_POINTS:
        message = f"The sweep has {total:,} points; at most {MOST_POINTS:,} are solved."
        refuse(Stage.SIZE, [Complaint("/sweep", None, "problem-too-large", message, "Take fewer values.")])
    sweeps = []
    for name, part in document.sweep.items():
        factor = declared.units[names.written[name]].factor
        values = tuple(value * factor for value in _values(part))
        refuse(Stage.UNITS, [beyond(pointer("sweep", name))] if not all(map(math.isfinite, values)) else [])
        sweeps.append(Sweep(names.written[name], values))
    return tuple(sweeps)


def read_continuation(document: Document, names: Names, declared: Declared) -> Continuation | None:
    """Raises `Refused` (stage conditions) where there is no way to go."""
    part = document.continuation
    if part is None:
        return None
    name = names.written[part.constant]
    to = part.to * declared.units[name].factor
    place = pointer("continuation", "to")
    refuse(Stage.UNITS, [] if math.isfinite(to) else [beyond(place)])
    if math.isclose(to, declared.constants[name].value, rel_tol=1e-9):
        message = f"{part.constant} has this value already."
        refuse(Stage.CONDITIONS, [Complaint(place, None, "empty-interval", message, "Choose another value.")])
    return Continuation(name, to)


def check_places(problem: Problem, document: Document, names: Names) -> None:
    """The places keep their order for every value.  Raises `Refused` (stage conditions) at the first that does not."""
    given = {constant.name: constant.value for constant in problem.constants}
    written = {names.written[name]: name for name in _varied(document)}
    if problem.sweeps:
        points = product(*(sweep.values for sweep in problem.sweeps))
        swept = [sweep.constant for sweep in problem.sweeps]
        varied = [(dict(zip(swept, point, strict=True)), pointer("sweep", written[swept[0]])) for point in points]
    elif problem.continuation is not None:
        constant, to = problem.continuation.constant, problem.continuation.to
        way = np.linspace(given[constant], to, STEPS + 1)[1:].tolist()
        varied = [({constant: value}, pointer("continuation", "to")) for value in way]
    else:
        return
    units = {constant.name: constant.unit for constant in problem.constants}
    for values, place in varied:
        wrong = _out_of_order(problem, given | values)
        if wrong:
            shown = (f"{written[name]} = {value / units[name].factor:g}" for name, value in values.items())
            message = f"For {listing(shown)}, {wrong}"
            hint = "Take only values for which the places keep their order and lie apart."
            refuse(Stage.CONDITIONS, [Complaint(place, None, "empty-interval", message, hint)])


def _out_of_order(problem: Problem, constants: Mapping[str, float]) -> str:
    """Which place never lies beyond one that should be before it; empty where the order can be kept."""
    rooms = {parameter.name: (parameter.lower, parameter.upper) for parameter in problem.parameters}
    farthest, before = -math.inf, problem.places[0].label
    for place in problem.places:
        if isinstance(place.tree, Name) and place.tree.name in rooms:
            low, high = rooms[place.tree.name]
        else:
            try:
                low = high = value_of(place.tree, constants)
            except (ArithmeticError, ValueError):
                return f"the place {place.label} has no value."
        rounding = SAME * max(abs(high), abs(farthest)) if math.isfinite(high - farthest) else 0.0
        if high <= farthest + rounding:
            return f"the place {place.label} does not lie beyond {before}."
        if low > farthest:
            farthest, before = low, place.label
    return ""


def check_extremes(problem: Problem, document: Document, names: Names) -> None:
    """The problem is well posed for the first and the last value too.  Raises `Refused` at the place of the sweep."""
    written = {names.written[name]: name for name in document.sweep}
    for sweep in problem.sweeps:
        name = written[sweep.constant]
        shown = _values(document.sweep[name])
        for value, said in ((sweep.values[0], shown[0]), (sweep.values[-1], shown[-1])):
            constants = tuple(replace(c, value=value) if c.name == sweep.constant else c for c in problem.constants)
            try:
                check(replace(problem, constants=constants))
            except Refused as refused:
                first = refused.complaints[0]
                message = f"For {name} = {said:g}: {first.message}"
                refuse(refused.stage, [Complaint(pointer("sweep", name), None, first.code, message, first.hint)])


def _values(part: SweepPart) -> tuple[float, ...]:
    if part.values is not None:
        return part.values
    assert part.start is not None  # the model sees to it that all three are given
    assert part.end is not None
    assert part.count is not None
    return tuple(float(value) for value in np.linspace(part.start, part.end, part.count))


def _wrong(name: str, part: SweepPart) -> Iterator[Complaint]:
    values = _values(part)
    if all(before < after for before, after in pairwise(values)):
        return
    if part.values is not None:
        message = "The values do not increase."
        yield Complaint(pointer("sweep", name, "values"), None, "values-order", message, "Sort them; each value once.")
    else:
        message = f"The values do not increase from {part.start:g} to {part.end:g}."
        hint = "Let `from` be less than `to`; the order in which they are solved does not matter."
        yield Complaint(pointer("sweep", name, "to"), None, "values-order", message, hint)
