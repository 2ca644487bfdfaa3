"""What the names inside formulas mean: all known, each used as what it is, abbreviations in an order without cycles."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from graphlib import CycleError, TopologicalSorter

from service.assemble.formulas import Expression, Formula, Formulas
from service.assemble.names import Kind, Names
from service.complaints import Complaint, Stage, listing, refuse, sentence
from solvers.formula.nodes import FUNCTIONS, At, Call, Name, Node, Relation, Span, children, walk

HIGHEST_ORDER = 6
"""The highest derivative of an unknown."""


@dataclass(frozen=True, slots=True)
class Traits:
    """What a formula depends on, abbreviations included.

    `moving`: the independent variable or an unknown, so that it varies along the curve; `placed`: values at places;
    `integral`: an integral; `parameter`: a parameter.  With none of them it is a given number.
    """

    moving: bool = False
    placed: bool = False
    integral: bool = False
    parameter: bool = False

    @property
    def fixed(self) -> bool:
        """Whether it is a given number."""
        return not (self.moving or self.placed or self.integral or self.parameter)


@dataclass(frozen=True, slots=True)
class Meaning:
    """Names understood: their kinds, the abbreviations in an order in which each uses earlier ones, their traits."""

    names: Names
    order: tuple[str, ...]
    traits: Mapping[str, Traits]

    def of(self, *trees: Node | Relation) -> Traits:
        """The traits of trees taken together."""
        moving = placed = integral = parameter = False
        stack = [part for tree in trees for part in (tree.sides if isinstance(tree, Relation) else (tree,))]
        while stack:
            node = stack.pop()
            match node:
                case At():
                    placed = True
                case Call(function="integral"):
                    integral = True
                case Name(name=name):
                    kind = self.names.kinds.get(name)
                    moving |= kind in (Kind.UNKNOWN, Kind.INDEPENDENT)
                    parameter |= kind is Kind.PARAMETER
                    if kind is Kind.ABBREVIATION and name in self.traits:
                        of = self.traits[name]
                        moving, placed = moving or of.moving, placed or of.placed
                        integral, parameter = integral or of.integral, parameter or of.parameter
                case _:
                    stack.extend(children(node))
        return Traits(moving, placed, integral, parameter)


def understand(formulas: Formulas, names: Names) -> Meaning:
    """Check every name in every formula.  Raises `Refused` (stage names, then formulas)."""
    complaints = [found for formula in formulas.all() for found in _Checker(formula, names).complaints()]
    complaints += [found for formula in formulas.guesses.values() for found in _guess(formula, names)]
    refuse(Stage.NAMES, complaints)
    order = _order(formulas, names)
    traits: dict[str, Traits] = {}
    meaning = Meaning(names, order, traits)
    for name in order:
        traits[name] = meaning.of(formulas.where[name].tree)
    refuse(Stage.FORMULAS, _misplaced(formulas, meaning))
    return meaning


class _Checker:
    """Walks one formula."""

    def __init__(self, formula: Formula, names: Names) -> None:
        self.formula = formula
        self.names = names

    def complaints(self) -> Iterator[Complaint]:
        tree = self.formula.tree
        for part in tree.sides if isinstance(tree, Relation) else (tree,):
            yield from self.node(part)

    def node(self, node: Node) -> Iterator[Complaint]:
        match node:
            case Name():
                yield from self.name(node)
            case At():
                yield from self.at(node)
            case Call(function=function) if function not in FUNCTIONS and function != "integral":
                hint = self.names.suggestion(function)
                yield self.complaint(node.span, "unknown-function", f"There is no function “{function}”", hint)
            case _:
                for part in children(node):
                    yield from self.node(part)

    def name(self, node: Name) -> Iterator[Complaint]:
        kind = self.names.kinds.get(node.name)
        if node.name == "pi":
            return
        if kind is None:
            yield self.unknown(node.span, node.name)
        elif node.order and kind is not Kind.UNKNOWN:
            yield self.no_derivative(node.span, node.name, kind)
        elif node.order > HIGHEST_ORDER:
            yield self.too_high(node.span, node.order)

    def at(self, node: At) -> Iterator[Complaint]:
        kind = self.names.kinds.get(node.name)
        if kind is None:
            word = "function or unknown" if not node.order else "unknown"
            hint = self.names.suggestion(node.name)
            yield self.complaint(node.span, "unknown-name", f"There is no {word} “{node.name}”", hint)
            return
        if kind not in (Kind.UNKNOWN, Kind.ABBREVIATION):
            hint = f"write {node.name}, or {node.name}*(…) for a product"
            message = f"“{node.name}” is {kind.value} and has no value at a place"
            yield self.complaint(node.span, "no-place", message, hint)
        elif node.order and kind is Kind.ABBREVIATION:
            yield self.no_derivative(node.span, node.name, kind)
        elif node.order > HIGHEST_ORDER:
            yield self.too_high(node.span, node.order)
        if node.side:
            hint = f"write {node.name}({self.text(node.place.span)}) for the value there"
            yield self.complaint(node.span, "not-yet", "One-sided values need arcs, which are not solved yet", hint)
        yield from self.place(node)

    def place(self, node: At) -> Iterator[Complaint]:
        """A place is made of numbers, constants and parameters."""
        for part in walk(node.place):
            if not isinstance(part, Name | At) or part.name == "pi":
                continue
            kind = self.names.kinds.get(part.name)
            if isinstance(part, Name) and kind is None:
                yield self.unknown(part.span, part.name)
            elif kind is Kind.INDEPENDENT:
                shown = node.name + "'" * node.order
                hint = f"write {shown} alone for its value everywhere, or name a place as in {shown}(0)"
                yield self.complaint(node.span, "bad-place", f"“{part.name}” is no place: it runs", hint)
            elif kind in (Kind.UNKNOWN, Kind.ABBREVIATION) or isinstance(part, At):
                hint = "a place is a number, a formula of constants, or a parameter"
                yield self.complaint(part.span, "bad-place", "A place cannot depend on the curve", hint)
                return

    def unknown(self, span: Span, name: str) -> Complaint:
        return self.complaint(span, "unknown-name", f"There is no “{name}”", self.names.suggestion(name))

    def no_derivative(self, span: Span, name: str, kind: Kind) -> Complaint:
        hint = "write out its derivative" if kind is Kind.ABBREVIATION else "primes stand on unknowns only"
        return self.complaint(span, "no-derivative", f"“{name}” is {kind.value} and has no derivative here", hint)

    def too_high(self, span: Span, order: int) -> Complaint:
        message = f"A derivative of order {order}; at most {HIGHEST_ORDER} are solved"
        return self.complaint(span, "order-limit", message, "name a lower derivative as an unknown of its own")

    def complaint(self, span: Span, code: str, message: str, hint: str) -> Complaint:
        return self.formula.complaint(span, code, sentence(message), sentence(hint))

    def text(self, span: Span) -> str:
        return self.formula.text[span.start : span.end]


def _guess(guess: Expression, names: Names) -> Iterator[Complaint]:
    """A guess is made of the independent variable, constants and parameters."""
    for node in walk(guess.tree):
        inside = isinstance(node, Name) and names.kinds.get(node.name) in (Kind.UNKNOWN, Kind.ABBREVIATION)
        if inside or isinstance(node, At) or (isinstance(node, Call) and node.function == "integral"):
            message = "A guess is a formula of the independent variable, constants and parameters."
            yield guess.complaint(node.span, "misplaced", message, "Write it out without unknowns and abbreviations.")
            return


def _order(formulas: Formulas, names: Names) -> tuple[str, ...]:
    """The abbreviations so that each uses earlier ones.  Raises `Refused` where they go round in a circle."""
    graph = {
        name: [
            node.name
            for node in walk(formula.tree)
            if isinstance(node, Name | At) and names.kinds.get(node.name) is Kind.ABBREVIATION
        ]
        for name, formula in formulas.where.items()
    }
    try:
        return tuple(TopologicalSorter(graph).static_order())
    except CycleError as error:
        circle: list[str] = error.args[1]
        first = min(circle[:-1], key=list(formulas.where).index)
        formula = formulas.where[first]
        round_trip = " -> ".join(reversed(circle))
        message = f"The abbreviations use each other in a circle: {round_trip}."
        if len(circle) == 2:
            message = f"The abbreviation “{first}” uses itself."
        complaint = formula.complaint(formula.tree.span, "circle", message, "Take one of them out of the circle.")
        refuse(Stage.NAMES, [complaint])
        raise AssertionError from error


def _misplaced(formulas: Formulas, meaning: Meaning) -> Iterator[Complaint]:
    """Values at places and integrals where a formula holds at every point, and the other way round."""
    if formulas.integrand is not None:
        yield from _nonlocal(formulas.integrand, meaning, "holds at every point")
    for equation in formulas.dynamics:
        yield from _nonlocal(equation, meaning, "holds at every point")
    for abbreviation in formulas.where.values():
        traits = meaning.of(abbreviation.tree)
        if traits.moving and (traits.placed or traits.integral):
            message = "This abbreviation mixes what runs along the curve with values at places or integrals."
            hint = "Split it in two; a value that other formulas need can be a parameter, fixed by a condition."
            yield abbreviation.complaint(abbreviation.tree.span, "misplaced", message, hint)
    if formulas.endpoint is not None:
        yield from _running(formulas.endpoint, meaning)
    for statement in formulas.endpoints:
        yield from _running(statement, meaning)
    for formula in formulas.constraints:
        traits = meaning.of(formula.tree)
        if traits.moving and (traits.placed or traits.integral):
            yield from _nonlocal(formula, meaning, "holds at every point because of the other names in it")
    for any_formula in formulas.all():
        yield from _inside_integral(any_formula, meaning)
        yield from _placed_twice(any_formula, meaning)
    for end in formulas.ends:
        yield from _end(end, meaning)


def _top(formula: Formula) -> tuple[Node, ...]:
    return formula.tree.sides if isinstance(formula.tree, Relation) else (formula.tree,)


def _nonlocal(formula: Formula, meaning: Meaning, why: str) -> Iterator[Complaint]:
    for node in (node for part in _top(formula) for node in walk(part)):
        traits = meaning.of(node) if isinstance(node, Name | At | Call) else Traits()
        if traits.placed and isinstance(node, Name | At):
            message = f"A value at a place cannot stand here: the formula {why}."
            yield formula.complaint(node.span, "misplaced", message, _BY_PARAMETER)
            return
        if traits.integral and isinstance(node, Name | Call):
            message = f"An integral cannot stand here: the formula {why}."
            yield formula.complaint(node.span, "misplaced", message, _BY_PARAMETER)
            return


_BY_PARAMETER = "Make it a parameter and fix that by a condition: p = integral(…), or p = x(0)."


def _running(formula: Formula, meaning: Meaning) -> Iterator[Complaint]:
    """In a formula of values at places: names without a place, and integrals."""
    stack = list(reversed(_top(formula)))
    while stack:
        node = stack.pop()
        traits = meaning.of(node) if isinstance(node, Name | Call) else Traits()
        if isinstance(node, At):
            continue
        if isinstance(node, Name) and traits.moving:
            shown = node.name + "'" * node.order
            independent = node.name == meaning.names.independent
            message = f"“{shown}” needs a place here: this holds at places, not all along."
            hint = "Write the place itself." if independent else f"Write {shown}(0), for instance, or use constraints."
            yield formula.complaint(node.span, "misplaced", message, hint)
        elif traits.integral:
            message = "An integral cannot stand here."
            yield formula.complaint(node.span, "misplaced", message, _INTEGRALS)
        else:
            stack.extend(reversed(children(node)))


_INTEGRALS = "Put it into integrand or constraints; or make it a parameter p with the constraint p = integral(…)."


def _inside_integral(formula: Formula, meaning: Meaning) -> Iterator[Complaint]:
    for node in (node for part in _top(formula) for node in walk(part)):
        if isinstance(node, Call) and node.function == "integral":
            traits = meaning.of(*node.arguments)
            if traits.placed or traits.integral:
                message = "Inside an integral no other integral and no value at a place can stand."
                yield formula.complaint(node.span, "misplaced", message, _BY_PARAMETER)
                return


def _placed_twice(formula: Formula, meaning: Meaning) -> Iterator[Complaint]:
    for node in (node for part in _top(formula) for node in walk(part)):
        traits = meaning.traits.get(node.name) if isinstance(node, At) else None
        if isinstance(node, At) and traits is not None and not traits.moving:
            message = f"The abbreviation “{node.name}” does not run along the curve: it has no value at a place."
            yield formula.complaint(node.span, "no-place", message, f"Write {node.name} alone.")


def _end(end: Expression, meaning: Meaning) -> Iterator[Complaint]:
    traits = meaning.of(end.tree)
    if traits.moving or traits.placed or traits.integral or (traits.parameter and not isinstance(end.tree, Name)):
        message = f"An end of {meaning.names.independent} is a number, a formula of constants, or a parameter's name."
        hint = f"{listing(meaning.names.of(Kind.PARAMETER), 'or') or 'a parameter'} can be a free end."
        yield end.complaint(end.tree.span, "bad-place", message, sentence(hint))
