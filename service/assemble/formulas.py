"""All formulas of a document as trees, each with its text and its place in the document."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property, partial
from itertools import chain
from typing import TypeVar

from service.assemble.names import Names
from service.complaints import Complaint, Stage, pointer, refuse, sentence
from service.spec import Document
from service.spec.model import ArcPart
from solvers.formula.errors import FormulaError
from solvers.formula.nodes import Node, Number, Relation, Span, walk
from solvers.formula.parser import Tables, parse_expression, parse_relation

Tree = TypeVar("Tree", Node, Relation, Node | Relation)


@dataclass(frozen=True)
class Expression:
    """A formula without a sign of relation."""

    tree: Node
    text: str
    pointer: str
    written: bool = True  # False where the document has a number: it has no characters to mark

    @property
    def sides(self) -> tuple[Node, ...]:
        """The tree, as the only one."""
        return (self.tree,)

    @cached_property
    def nodes(self) -> tuple[Node, ...]:
        """Every part of it, parents first."""
        return tuple(walk(self.tree))

    def complaint(self, span: Span, code: str, message: str, hint: str) -> Complaint:
        """A finding at these characters of the formula."""
        return Complaint(self.pointer, (span.start, span.end) if self.written else None, code, message, hint)


@dataclass(frozen=True)
class Statement:
    """A formula with signs of relation."""

    tree: Relation
    text: str
    pointer: str

    @property
    def sides(self) -> tuple[Node, ...]:
        """What stands between the signs."""
        return self.tree.sides

    @cached_property
    def nodes(self) -> tuple[Node, ...]:
        """Every part of its sides, parents first."""
        return tuple(node for side in self.tree.sides for node in walk(side))

    def complaint(self, span: Span, code: str, message: str, hint: str) -> Complaint:
        """A finding at these characters of the formula."""
        return Complaint(self.pointer, (span.start, span.end), code, message, hint)


Formula = Expression | Statement


@dataclass(frozen=True, slots=True)
class ArcFormulas:
    """The formulas that an arc has of its own."""

    name: str
    pointer: str
    ends: tuple[Expression, Expression]
    integrand: Expression | None
    where: Mapping[str, Expression]
    dynamics: tuple[Statement, ...]
    constraints: tuple[Statement, ...]

    def running(self) -> Iterator[Formula]:
        """All but the ends."""
        yield from self.where.values()
        yield from self.dynamics
        yield from () if self.integrand is None else (self.integrand,)
        yield from self.constraints


@dataclass(frozen=True, slots=True)
class Formulas:
    """Every formula of a document; `where` and `guesses` are by name."""

    ends: tuple[Expression, Expression]
    integrand: Expression | None
    endpoint: Expression | None
    where: Mapping[str, Expression]
    dynamics: tuple[Statement, ...]
    endpoints: tuple[Statement, ...]
    constraints: tuple[Statement, ...]
    guesses: Mapping[str, Expression]
    arcs: tuple[ArcFormulas, ...] = ()
    observed: tuple[Expression, ...] = ()  # what was measured
    observed_on: tuple[str, ...] = ()  # the arc that each of these is said to be of, or ""

    @property
    def integrands(self) -> tuple[Expression, ...]:
        """The integrands, of the whole and of arcs."""
        found = (self.integrand, *(arc.integrand for arc in self.arcs))
        return tuple(integrand for integrand in found if integrand is not None)

    @property
    def definitions(self) -> dict[str, tuple[Expression, ...]]:
        """The abbreviations; one of arcs has a formula for each of them."""
        found: dict[str, tuple[Expression, ...]] = {name: (formula,) for name, formula in self.where.items()}
        for arc in self.arcs:
            for name, formula in arc.where.items():
                found[name] = (*found.get(name, ()), formula)
        return found

    def all(self) -> Iterator[Formula]:
        """Every formula."""
        yield from self.ends
        yield from (end for arc in self.arcs for end in arc.ends)
        yield from self.moving()
        yield from self.guesses.values()

    def moving(self) -> Iterator[Formula]:
        """Those that say something about the curve: all but the ends and the guesses."""
        yield from self.where.values()
        yield from self.dynamics
        yield from (part for part in (self.integrand, self.endpoint) if part is not None)
        yield from self.endpoints
        yield from self.constraints
        yield from (formula for arc in self.arcs for formula in arc.running())
        yield from self.observed


def parse_all(document: Document, names: Names, tables: Tables) -> Formulas:
    """Read every formula.  Raises `Refused` (stage formulas) with the first error of each."""
    complaints: list[Complaint] = []

    def expression(text: str | float, *place: str | int) -> Expression:
        if isinstance(text, float):
            shown = repr(text).removesuffix(".0")
            return Expression(Number(text, shown), shown, pointer(*place), written=False)
        tree = _read(partial(parse_expression, tables=tables), text, Number(0.0, "0"), place, complaints)
        return Expression(tree, text, pointer(*place))

    def statements(texts: tuple[str, ...], *member: str | int) -> tuple[Statement, ...]:
        parse = partial(parse_relation, tables=tables)
        nothing = Relation((Number(0.0, "0"), Number(0.0, "0")), ("=",))
        return tuple(
            Statement(_read(parse, text, nothing, (*member, index), complaints), text, pointer(*member, index))
            for index, text in enumerate(texts)
        )

    def arc(part: ArcPart, *place: str | int) -> ArcFormulas:
        return ArcFormulas(
            name=part.name,
            pointer=pointer(*place),
            ends=(expression(part.start, *place, "from"), expression(part.end, *place, "to")),
            integrand=expression(part.integrand, *place, "integrand") if part.integrand else None,
            where={names.written[name]: expression(text, *place, "where", name) for name, text in part.where.items()},
            dynamics=statements(part.dynamics, *place, "dynamics"),
            constraints=statements(part.constraints, *place, "constraints"),
        )

    functional = document.functional
    formulas = Formulas(
        ends=(
            expression(document.independent.start, "independent", "from"),
            expression(document.independent.end, "independent", "to"),
        ),
        where={names.written[name]: expression(text, "where", name) for name, text in document.where.items()},
        dynamics=statements(document.dynamics, "dynamics"),
        integrand=expression(functional.integrand, "functional", "integrand") if functional.integrand else None,
        endpoint=expression(functional.endpoint, "functional", "endpoint") if functional.endpoint else None,
        endpoints=statements(document.endpoints, "endpoints"),
        constraints=statements(document.constraints, "constraints"),
        guesses={
            names.written.get(name, name): expression(guess, "guess", name)
            for name, guess in document.guess.items()
            if isinstance(guess, str | float)
        },
        arcs=tuple(arc(part, "arcs", index) for index, part in enumerate(document.arcs)),
        observed=tuple(
            expression(observation.of, "observations", index, "of")
            for index, observation in enumerate(document.observations)
        ),
        observed_on=tuple(observation.arc for observation in document.observations),
    )
    lines = chain(formulas.dynamics, *(arc.dynamics for arc in formulas.arcs))
    complaints += [found for line in lines for found in _no_equation(line)]
    refuse(Stage.FORMULAS, complaints)
    return formulas


def _no_equation(line: Statement) -> Iterator[Complaint]:
    if line.tree.signs != ("=",):
        message = "A line of dynamics is an equation, with one =."
        yield line.complaint(line.tree.span, "not-an-equation", message, "Put limits into constraints.")


def _read(
    parse: Callable[[str], Tree], text: str, instead: Tree, place: tuple[str | int, ...], complaints: list[Complaint]
) -> Tree:
    """The tree, or on an error a complaint and `instead`."""
    try:
        return parse(text)
    except FormulaError as error:
        hint = error.hint or "a formula has numbers, names, + - * / ^ ( ), = <= >= and the built-in functions"
        span = (error.span.start, error.span.end)
        complaints.append(Complaint(pointer(*place), span, error.code, sentence(error.message), sentence(hint)))
        return instead
