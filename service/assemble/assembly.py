"""The steps from a document to a problem, in order; each refuses with everything that it finds."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import chain

from service.assemble.arcs import ArcBuilder
from service.assemble.counting import check
from service.assemble.covering import covered
from service.assemble.declared import Declared, read_declared
from service.assemble.dimensions import Sort, Units
from service.assemble.domain import undefined
from service.assemble.formulas import ArcFormulas, Expression, Formulas, Statement, parse_all
from service.assemble.guesses import Guess, check_guess_names, read_guesses, with_guess
from service.assemble.meaning import Meaning, read_meaning
from service.assemble.measured import read_tables
from service.assemble.names import Kind, declare
from service.assemble.observing import Readings, check_points, read_observations, unknown_arcs
from service.assemble.orders import explicit, find_orders, reach_of
from service.assemble.placement import misplaced
from service.assemble.places import Places, find_places, settle
from service.assemble.relations import Sides, conditions, convert, says_nothing, shown_unit
from service.assemble.resolving import wrong_names
from service.assemble.scopes import out_of_scope, without_place
from service.assemble.spots import Spot, spot_of
from service.assemble.sweeps import (
    check_extremes,
    check_places,
    check_varied_names,
    check_varied_use,
    read_continuation,
    read_sweeps,
)
from service.complaints import Complaint, Stage, refuse
from service.spec import Document
from service.units import Measure
from solvers.formula.nodes import At, Call, Name, Node, Number, children, walk, with_children
from solvers.formula.printer import text
from solvers.problem import Condition, Equation, Options, Problem, Seek, Unknown
from solvers.tables.table import Table
from solvers.units import PLAIN, Unit

LARGEST_SIZE = 10_000
"""Nodes of all formulas together."""

LONGEST_TEXT = 40_000
"""Characters of all formulas together."""


def assemble(document: Document) -> Problem:
    """The problem that a document states, in SI.

    Raises `Refused` with all complaints of the first stage that fails: names, formulas, units, conditions, size.
    """
    _check_length(document)
    names = declare(document)
    check_guess_names(document, names)
    check_varied_names(document, names)
    measured = read_tables(document, names)
    formulas = parse_all(document, names, measured.tables)
    _check_size(formulas)
    refuse(Stage.NAMES, [*wrong_names(formulas, names), *out_of_scope(formulas), *unknown_arcs(document)])
    meaning = read_meaning(formulas, names)
    refuse(Stage.FORMULAS, [*misplaced(formulas, meaning), *without_place(formulas, meaning)])
    _check_written_out(formulas, meaning)
    declared = read_declared(document, names, measured.complaints)
    constants = {name: constant.value for name, constant in declared.constants.items()}
    refuse(Stage.FORMULAS, [found for formula in formulas.all() for found in undefined(formula, constants)])

    units = Units(names.independent, declared.sorts, constants, measured.sorts)
    for name in meaning.order:
        units.sorts[name] = units.sort_of_all(formulas.definitions[name])
    _check_ends(formulas, units)
    sides = {statement.pointer: convert(statement, units) for statement in _statements(formulas)}
    readings = read_observations(document, formulas, units)
    value_unit = _value_unit(formulas, units, readings)
    guesses = read_guesses(document, names, formulas, declared, units)
    declared = with_guess(declared, guesses)
    refuse(Stage.UNITS, units.complaints)

    stated = (*formulas.endpoints, *formulas.constraints, *(c for arc in formulas.arcs for c in arc.constraints))
    pointless = (says_nothing(statement, sides[statement.pointer], meaning, constants) for statement in stated)
    refuse(Stage.CONDITIONS, [complaint for found in pointless for complaint in found])
    check_points(document, readings)
    measured_at = (place for found in readings for place in found.places)
    places = find_places(formulas, units, dict(declared.parameters), measured_at)
    builder = _Builder(document, formulas, meaning, declared, guesses, units, places, sides, readings)
    problem = covered(builder.problem(value_unit, tuple(measured.tables.values())), formulas, meaning, builder.settle)
    check(problem)
    check_varied_use(document, names, formulas)
    continuation = read_continuation(document, names, declared)
    problem = replace(problem, continuation=continuation, sweeps=read_sweeps(document, names, declared))
    check_places(problem, document, names)
    check_extremes(problem, document, names)
    return problem


def _statements(formulas: Formulas) -> chain[Statement]:
    of_arcs = (statement for arc in formulas.arcs for statement in (*arc.dynamics, *arc.constraints))
    return chain(formulas.dynamics, formulas.endpoints, formulas.constraints, of_arcs)


def _check_length(document: Document) -> None:
    guesses = [guess for guess in document.guess.values() if isinstance(guess, str)]
    observed = [observation.of for observation in document.observations]
    of_arcs = (text for arc in document.arcs for text in (*arc.where.values(), *arc.dynamics, *arc.constraints))
    formulas = chain(
        document.where.values(), document.dynamics, document.endpoints, document.constraints, guesses, of_arcs, observed
    )
    length = sum(len(formula) for formula in formulas)
    if length > LONGEST_TEXT:
        _too_large(f"The formulas have {length:,} characters together; at most {LONGEST_TEXT:,} are solved.")


def _too_large(message: str) -> None:
    hint = "Name repeated parts in where, and leave out what is not needed."
    refuse(Stage.SIZE, [Complaint("", None, "problem-too-large", message, hint)])


def _check_size(formulas: Formulas) -> None:
    size = sum(len(formula.nodes) for formula in formulas.all())
    if size > LARGEST_SIZE:
        _too_large(f"The formulas have {size:,} parts together; at most {LARGEST_SIZE:,} are solved.")


def _check_written_out(formulas: Formulas, meaning: Meaning) -> None:
    """Abbreviations that do not run along the curve are written out where they are used: not too often."""
    sizes: dict[str, int] = {}

    def size(tree: Node) -> int:
        return sum(sizes.get(node.name, 1) if isinstance(node, Name) else 1 for node in walk(tree))

    for name in meaning.order:
        if not meaning.traits[name].moving:
            sizes[name] = max(size(formula.tree) for formula in formulas.definitions[name])
    stated = chain(formulas.endpoints, formulas.constraints, *(arc.constraints for arc in formulas.arcs))
    used = [formula.tree.sides for formula in stated]
    used += [(formulas.endpoint.tree,)] if formulas.endpoint else []
    total = sum(size(part) for parts in used for part in parts)
    if total > LARGEST_SIZE:
        message = (
            f"Written out, the abbreviations of fixed values have {_figure(total)} parts; at most {LARGEST_SIZE:,}."
        )
        hint = "Make the values that are used over and over parameters, fixed by a condition."
        refuse(Stage.SIZE, [Complaint("/where", None, "problem-too-large", message, hint)])


def _figure(number: int) -> str:
    return f"{number:,}" if number < 10**9 else "more than a billion"


def _check_ends(formulas: Formulas, units: Units) -> None:
    for end in chain(formulas.ends, *(arc.ends for arc in formulas.arcs)):
        units.place(end.tree, end)


def _value_unit(formulas: Formulas, units: Units, readings: Sequence[Readings]) -> Unit:
    """The unit of the functional; its terms have to agree, the squares of observations included."""
    terms: list[tuple[Node, Sort, Expression]] = []
    for integrand in formulas.integrands:
        tree = integrand.tree
        terms.append((tree, units.sort(Call("integral", (tree,), tree.span), integrand), integrand))
    if formulas.endpoint is not None:
        tree = formulas.endpoint.tree
        terms.append((tree, units.sort(tree, formulas.endpoint), formulas.endpoint))
    told = [term for term in terms if not term[1].zero]
    for tree, sort, formula in told[1:]:
        units.compare(told[0][:2], (tree, sort), formula)
    measures: list[Measure] = [sort.measure for _, sort, _ in told]
    for found in readings:
        measures.append(found.squares)
        if found.squares.dimension != measures[0].dimension:
            units.complaints.append(found.clash(measures[0]))
    return shown_unit(measures) if measures else PLAIN


@dataclass(frozen=True, slots=True)
class _Builder:
    """Puts the records together once everything is checked."""

    document: Document
    formulas: Formulas
    meaning: Meaning
    declared: Declared
    guesses: Mapping[str, Guess | float]
    units: Units
    places: Places
    sides: dict[str, Sides]
    readings: tuple[Readings, ...]

    def problem(self, value_unit: Unit, tables: tuple[Table, ...]) -> Problem:
        traits = self.meaning.traits
        written = self.formulas.where
        where = [(n, written[n].tree) for n in self.meaning.order if n in written and not traits[n].placed]
        orders = find_orders(self.formulas, self.meaning.names)
        functional, formulas = self.document.functional, self.formulas
        endpoints, constraints, integrals = self.sorted_conditions()
        solve = self.document.solve
        problem = Problem(
            independent=self.meaning.names.independent,
            places=self.places.records,
            unknowns=tuple(self.unknown(name, orders[name]) for name in self.meaning.names.of(Kind.UNKNOWN)),
            seek=Seek(functional.seek),
            integrand=formulas.integrand.tree if formulas.integrand else None,
            endpoint=self.settle(formulas.endpoint.tree) if formulas.endpoint else None,
            constants=tuple(self.declared.constants.values()),
            parameters=tuple(self.declared.parameters.values()),
            tables=tables,
            where=tuple(where),
            dynamics=tuple(explicit(self.equations(), orders, reach_of(where))),
            endpoints=endpoints,
            constraints=constraints,
            integrals=integrals,
            observations=tuple(found.record(self.places, self.units) for found in self.readings),
            options=Options(solve.tolerance, solve.time_limit, solve.starts, solve.points),
            independent_unit=self.declared.units[self.meaning.names.independent],
            value_unit=value_unit,
        )
        return self.arcs().on(problem) if formulas.arcs else problem

    def arcs(self) -> ArcBuilder:
        """What puts the arcs together."""
        parameters = dict(self.declared.parameters)

        def spot(node: At) -> Spot:
            return spot_of(node.place, text(node.place), self.units, parameters)

        def ends(arc: ArcFormulas) -> tuple[Spot, Spot]:
            start, end = (spot_of(end.tree, end.text.strip(), self.units, parameters) for end in arc.ends)
            return start, end

        return ArcBuilder(self.formulas, self.meaning, self.places, self.sides, self.settle, spot, ends, self.unknown)

    def unknown(self, name: str, order: int) -> Unknown:
        lower, upper = self.declared.bounds[name]
        guess = self.guesses.get(name)
        assert not isinstance(guess, float)  # numbers are for parameters
        return Unknown(name, order, lower, upper, guess, self.declared.units[name])

    def equations(self) -> list[Equation]:
        lines = []
        for statement in self.formulas.dynamics:
            left, right = self.sides[statement.pointer].trees
            lines.append(Equation(left, right, None, statement.text.strip(), statement.pointer))
        return lines

    def sorted_conditions(self) -> tuple[tuple[Condition, ...], tuple[Condition, ...], tuple[Condition, ...]]:
        """Endpoint, pointwise and integral conditions, by what they depend on."""
        endpoints: list[Condition] = []
        constraints: list[Condition] = []
        integrals: list[Condition] = []
        for statement in (*self.formulas.endpoints, *self.formulas.constraints):
            for condition in conditions(statement, self.sides[statement.pointer], self.meaning, self.settle):
                traits = self.meaning.of(condition.body)
                (integrals if traits.integral else constraints if traits.moving else endpoints).append(condition)
        return tuple(endpoints), tuple(constraints), tuple(integrals)

    def settle(self, node: Node, written: Mapping[str, Expression] | None = None) -> Node:
        """Places become those of the problem, and abbreviations that do not run along the curve are written out.

        `written` are the abbreviations where they are those of an arc; else what differs from arc to arc stays.
        """
        where = self.formulas.where if written is None else written
        match node:
            case At():
                return settle(node, self.places, self.units, dict(self.declared.parameters))
            case Name(name=name) if name in where and not self.meaning.traits[name].moving:
                return self.settle(where[name].tree, written)
            case Number() | Name():
                return node
        return with_children(node, tuple(self.settle(part, written) for part in children(node)))
