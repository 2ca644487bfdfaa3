"""How a document was understood: roles and orders, what is free, units, and every formula as mathematics."""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping
from typing import Any

from service.assemble.matching import Matching
from service.assemble.orders import Reach, derivatives, reach_of
from service.complaints import listing, pointer
from service.reading_arcs import arcs_read
from service.spec import Document
from service.spec.model import ArcPart
from solvers.formula.mathml import Misfit, Range, functional_mathml, mathml
from solvers.formula.nodes import At, Call, Name, Node, Number, Relation, walk
from solvers.formula.parser import Tables, parse_expression, parse_relation
from solvers.formula.printer import numeral, text
from solvers.formula.tokens import read_name
from solvers.necessary.conditions import necessary_conditions
from solvers.necessary.on_arcs import necessary_on_arcs
from solvers.problem import Place, Problem, Unknown
from solvers.tables.table import Between, Outside, Table
from solvers.transcription.lowering import Quantity, lower, primed
from solvers.undetermined import undetermined
from solvers.units import Unit
from web.unit_text import per

Json = dict[str, Any]

NECESSARY_SECONDS = 1.0
"""How long the necessary conditions may take."""


def read_back(problem: Problem, document: Document) -> Json:
    """The reading of the developers' guide without `necessary`: as JSON, all numbers in the user's units.

    `problem` is what the document was assembled to; formulas are shown as the document has them.
    """
    roles = _RolesOnArcs(problem) if problem.arcs else _Roles(problem)
    return {
        "independent": {
            "name": problem.independent,
            "unit": problem.independent_unit.text,
            "from": _end(document.independent.start),
            "to": _end(document.independent.end),
        },
        "arcs": list(arcs_read(problem)),
        "unknowns": [roles.unknown(unknown) for unknown in problem.unknowns],
        "parameters": [{"name": parameter.name, "unit": parameter.unit.text} for parameter in problem.parameters],
        "constants": [
            {
                "name": constant.name,
                "value": _shown(constant.value, constant.unit.factor),
                "unit": constant.unit.text,
                "tolerance": _shown(constant.tolerance, constant.unit.factor),
            }
            for constant in problem.constants
        ],
        "tables": [_table(table) for table in problem.tables],
        "functional": _functional(problem, document),
        "relations": list(_relations(problem, document)),
        "freedom": roles.freedom(),
        "notes": list(_notes(problem, document)),
    }


def with_necessary(reading: Mapping[str, Any], problem: Problem, seconds: float = NECESSARY_SECONDS) -> Json:
    """The reading with the necessary conditions in symbols, as far as they are found within `seconds`."""
    derive = necessary_on_arcs if problem.arcs else necessary_conditions
    result = derive(problem, time.monotonic() + seconds)
    necessary = [
        {"kind": found.kind, "for": found.subject, "mathml": found.mathml, "text": found.text}
        for found in result.conditions
    ]
    return {**reading, "necessary": necessary, "notes": [*reading["notes"], *result.notes]}


class _Roles:
    """What determines each unknown, and what is left to choose."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.lowered = lower(problem)
        self.reach = reach_of(problem.where)
        equations: list[tuple[tuple[Node, ...], str]] = [
            ((line.left, line.right), line.label) for line in self.lowered.equalities
        ]
        equations += [((c.body,), c.label) for c in problem.constraints if c.equality]
        self.labels = [label for _, label in equations]
        open_quantities = {primed(quantity): quantity for quantity in self.lowered.controls}
        self.matching = Matching([self._served(trees, open_quantities) for trees, _ in equations])

    def _served(self, trees: tuple[Node, ...], quantities: Mapping[str, Quantity]) -> list[str]:
        """What an equation can determine: higher derivatives first, so that a force stays a choice."""
        named = derivatives(trees, self.reach)
        return sorted((shown for shown, q in quantities.items() if q in named), key=lambda s: (-quantities[s][1], s))

    def unknown(self, unknown: Unknown) -> Json:
        """One entry of `unknowns`."""
        free, sentence = self.sentence(unknown)
        return {
            "name": unknown.name,
            "order": unknown.order,
            "unit": unknown.unit.text,
            "role": unknown.role.value,
            "free": free,
            "sentence": f"{unknown.name}: {sentence}",
        }

    def sentence(self, unknown: Unknown) -> tuple[bool, str]:
        """Whether its highest derivative is free, and what determines it otherwise."""
        highest = (unknown.name, unknown.order)
        kind = f"state of order {unknown.order}" if unknown.order else "control"
        if highest in self.lowered.given:
            return False, f"{kind}, given by its dynamics"
        if primed(highest) in self.matching.serves:
            label = self.labels[self.matching.serves[primed(highest)]]
            return False, f"{kind if unknown.order else 'function'}, determined by {label}"
        if unknown.order:
            return True, f"function whose derivative {primed(highest)} is free"
        return True, "control, free everywhere"

    def freedom(self) -> Json:
        """What there is to choose, and how many conditions there are for it."""
        problem = self.problem
        free = [u.name for u in problem.unknowns if self.sentence(u)[0]]
        conditions = [c for c in (*problem.endpoints, *problem.integrals) if c.equality]
        chosen = free + [parameter.name for parameter in problem.parameters]
        sentences = [f"To be found: {listing(chosen)}." if chosen else "Nothing is left to choose along the curve."]
        count = len(conditions)
        kinds = "at single places or in the integral" if problem.integrals else "at single places"
        sentences.append(f"{count or 'No'} condition{'' if count == 1 else 's'} {kinds}.")
        natural = list(self.natural()) if chosen else []
        if natural:
            takes = "its natural boundary condition takes" if len(natural) == 1 else "natural boundary conditions take"
            sentences.append(f"Nothing fixes {listing(natural)}: {takes} that place.")
        return {"unknown_functions": len(free), "conditions": count, "sentence": " ".join(sentences)}

    def natural(self) -> Iterator[str]:
        """The values at the ends that no condition is about."""
        bodies = [condition.body for condition in (*self.problem.endpoints, *self.problem.integrals)]
        values = [node for body in bodies for node in walk(body) if isinstance(node, At)]
        for place, states, reach in self.at_ends():
            here = [Name(node.name, node.order) for node in values if node.place == place.tree]
            named = derivatives(here, reach)
            yield from (f"{primed(state)}({place.label})" for state in states if state not in named)

    def at_ends(self) -> Iterator[tuple[Place, tuple[Quantity, ...], Reach]]:
        """Both ends, each with the states there and what abbreviations depend on."""
        yield self.problem.places[0], self.lowered.states, self.reach
        yield self.problem.places[-1], self.lowered.states, self.reach


class _RolesOnArcs(_Roles):
    """The same for arcs: an unknown may be something else on each of them."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.arcs = [(arc, _Roles(problem.along(arc))) for arc in problem.arcs]

    def sentence(self, unknown: Unknown) -> tuple[bool, str]:
        """Whether it is free on any arc, and what determines it on each."""
        said: dict[str, list[str]] = {}
        free = False
        for arc, roles in self.arcs:
            here = next((one for one in arc.unknowns if one.name == unknown.name), None)
            free_here, what = (False, "in no law") if here is None else roles.sentence(here)
            free |= free_here
            said.setdefault(what, []).append(arc.name)
        if len(said) == 1:
            return free, f"{next(iter(said))} on all arcs"
        return free, "; ".join(f"{what} on {listing(arcs)}" for what, arcs in said.items())

    def at_ends(self) -> Iterator[tuple[Place, tuple[Quantity, ...], Reach]]:
        """Both ends, with what the outermost arcs have there."""
        first, last = self.arcs[0][1], self.arcs[-1][1]
        yield self.problem.places[0], first.lowered.states, first.reach
        yield self.problem.places[-1], last.lowered.states, last.reach


def _table(table: Table) -> Json:
    """What was measured, and what holds between the points and beyond them."""
    arguments = list(zip(table.arguments, table.argument_units, table.knots, strict=True))
    ranges = [f"{name} from {_amount(knots[0], unit)} to {_amount(knots[-1], unit)}" for name, unit, knots in arguments]
    count = " x ".join(str(len(knots)) for *_, knots in arguments)
    between = {
        Between.SMOOTH: "smooth between",
        Between.MONOTONE: "between them it rises and falls only where they do",
        Between.LINEAR: "straight between",
    }[table.between]
    beyond = {
        Outside.REFUSE: "arguments stay inside",
        Outside.HOLD: "beyond them the last value holds",
        Outside.EXTEND: "beyond them it goes on along its tangent",
    }[table.outside]
    shown = f"{table.name}({', '.join(table.arguments)})"
    return {
        "name": table.name,
        "of": [{"name": name, "unit": unit.text} for name, unit, _ in arguments],
        "unit": table.unit.text,
        "sentence": f"{shown}: {count} points, {listing(ranges)}; {between}; {beyond}",
    }


def _amount(number: float, unit: Unit) -> str:
    return f"{number / unit.factor:.6g} {unit.text}".strip()


def _functional(problem: Problem, document: Document) -> Json:
    functional, extent, tables = document.functional, _extent(document), _tables(problem)
    integrand = parse_expression(functional.integrand, tables) if functional.integrand else None
    endpoint = parse_expression(functional.endpoint, tables) if functional.endpoint else None
    parts = []
    if document.observations:
        count = sum(len(observation.points) for observation in document.observations)
        parts.append(f"the sum of the squares of the misfits of {count} observation{'s' if count > 1 else ''}")
    if endpoint is not None:
        parts.append(f"the endpoint term {text(endpoint)}" if integrand is not None or parts else text(endpoint))
    if integrand is not None:
        parts.append(f"the integral of {text(integrand)} over {_told(extent)}")
    over = [
        (parse_expression(arc.integrand, tables), _extent_of(document, arc)) for arc in document.arcs if arc.integrand
    ]
    parts += [f"the integral of {text(tree)} over {_told(range_)}" for tree, range_ in over]
    sought = "a stationary value" if functional.seek == "stationary" else f"the {functional.seek}"
    return {
        "sentence": f"Sought is {sought} of {' plus '.join(parts)}.",
        "mathml": functional_mathml(functional.seek, integrand, endpoint, extent, over, _misfits(problem, document)),
        "unit": problem.value_unit.text,
    }


def _misfits(problem: Problem, document: Document) -> tuple[Misfit, ...]:
    """What was measured, for the sums of squares in the functional."""
    return tuple(
        Misfit(parse_expression(part.of, _tables(problem)), part.sigma is not None or len(part.points[0]) > 2)
        for part in document.observations
    )


def _relations(problem: Problem, document: Document) -> Iterator[Json]:
    """Every relation of the document in its order, abbreviations and bounds included."""
    extent, tables = _extent(document), _tables(problem)
    arcs = problem.arcs
    pointwise = (*problem.constraints, *(condition for arc in arcs for condition in arc.constraints))
    integrals = (*problem.integrals, *(condition for arc in arcs for condition in arc.integrals))
    groups = {"endpoint": problem.endpoints, "pointwise": pointwise, "integral": integrals}
    conditions = {c.pointer: (kind, c.unit.text) for kind, group in groups.items() for c in group}
    lines = (*problem.dynamics, *(line for arc in arcs for line in arc.dynamics))
    rates = {line.pointer: _rate_unit(problem, line.determines) for line in lines}

    def relation(place: str, kind: str, tree: Relation, unit: str, over: Range, label: str | None = None) -> Json:
        shown = mathml(tree, label=label, block=True, integrals=over)
        return {"pointer": place, "kind": kind, "mathml": shown, "unit": unit}

    def laws(part: Document | ArcPart, over: Range, *way: str | int) -> Iterator[Json]:
        for name, formula in part.where.items():
            tree = Relation((Name(read_name(name)), parse_expression(formula, tables)), ("=",))
            yield relation(pointer(*way, "where", name), "abbreviation", tree, "", over)
        for index, formula in enumerate(part.dynamics):
            place = pointer(*way, "dynamics", index)
            yield relation(place, "dynamics", parse_relation(formula, tables), rates.get(place, ""), over, formula)
        for member, kind in (("endpoints", "endpoint"), ("constraints", "pointwise")):
            for index, formula in enumerate(getattr(part, member, ())):
                place = pointer(*way, member, index)
                kind, unit = conditions.get(place, (kind, ""))
                yield relation(place, kind, parse_relation(formula, tables), unit, over, formula)

    yield from laws(document, extent)
    for index, arc in enumerate(document.arcs):
        yield from laws(arc, _extent_of(document, arc), "arcs", index)
    for member, parts, kind in (
        ("unknowns", document.unknowns, "pointwise"), ("parameters", document.parameters, "parameter"),
    ):  # fmt: skip
        for name, part in parts.items():
            bounds = _bounds(name, part.within)
            if bounds is not None:
                yield relation(pointer(member, name, "within"), kind, bounds, part.unit, extent)


def _bounds(name: str, within: tuple[float | None, float | None]) -> Relation | None:
    lower, upper = (None if bound is None else Number(bound, "") for bound in within)
    subject = Name(read_name(name))
    if lower is not None and upper is not None:
        return Relation((lower, subject, upper), ("<=", "<="))
    if lower is not None:
        return Relation((subject, lower), (">=",))
    return None if upper is None else Relation((subject, upper), ("<=",))


def _rate_unit(problem: Problem, quantity: Quantity | None) -> str:
    """The unit of a line of dynamics that gives a highest derivative; "" where it cannot be told."""
    if quantity is None:
        return ""
    unit = next(unknown.unit.text for unknown in problem.unknowns if unknown.name == quantity[0])
    return per(unit, problem.independent_unit.text, quantity[1]) if unit else ""


def _notes(problem: Problem, document: Document) -> Iterator[str]:
    """What someone could have meant otherwise."""
    functional = document.functional
    formulas = [*document.where.values(), functional.integrand, functional.endpoint]
    relations = [*document.dynamics, *document.endpoints, *document.constraints]
    for arc in document.arcs:
        formulas += [*arc.where.values(), arc.integrand]
        relations += [*arc.dynamics, *arc.constraints]
    formulas += [observation.of for observation in document.observations]
    tables = _tables(problem)
    trees: list[Node] = [parse_expression(formula, tables) for formula in formulas if formula]
    for formula in relations:
        trees += parse_relation(formula, tables).sides
    used = {node.function for tree in trees for node in walk(tree) if isinstance(node, Call)}
    if "log" in used:
        yield "log is the natural logarithm."
    yield from (found.sentence for found in undetermined(problem))


def _tables(problem: Problem) -> Tables:
    return {table.name: table for table in problem.tables}


def _extent_of(document: Document, arc: ArcPart) -> Range:
    start, end = (parse_expression(_end(end)) for end in (arc.start, arc.end))
    return Range(read_name(document.independent.name), start, end)


def _told(extent: Range) -> str:
    return f"{extent.independent} from {text(extent.start)} to {text(extent.end)}"


def _extent(document: Document) -> Range:
    start, end = (parse_expression(_end(end)) for end in (document.independent.start, document.independent.end))
    return Range(read_name(document.independent.name), start, end)


def _end(end: float | str) -> str:
    return end.strip() if isinstance(end, str) else numeral(Number(end, ""))


def _shown(value: float | None, factor: float) -> float | None:
    """In the user's unit, without the last digit's noise of the conversion."""
    return None if value is None else float(f"{value / factor:.15g}")
