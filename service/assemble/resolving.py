"""Every name in a formula is known, and used as what it is."""

from __future__ import annotations

from collections.abc import Iterator

from service.assemble.formulas import Expression, Formula, Formulas
from service.assemble.names import Kind, Names
from service.complaints import Complaint, sentence
from solvers.formula.nodes import FUNCTIONS, At, Call, Name, Node, Span, children, walk

HIGHEST_ORDER = 6
"""The highest derivative of an unknown."""


def wrong_names(formulas: Formulas, names: Names) -> Iterator[Complaint]:
    """Names that are not declared, or used as what they are not."""
    for formula in formulas.all():
        yield from _Checker(formula, names, sided=bool(formulas.arcs)).complaints()
    for guess in formulas.guesses.values():
        yield from _guess(guess, names)


class _Checker:
    """Walks one formula."""

    def __init__(self, formula: Formula, names: Names, *, sided: bool) -> None:
        self.formula = formula
        self.names = names
        self.sided = sided

    def complaints(self) -> Iterator[Complaint]:
        for part in self.formula.sides:
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
        elif kind is Kind.TABLE:
            message = f"“{node.name}” is a table: it has a value for each argument only"
            yield self.complaint(node.span, "table-name", message, f"write {node.name}(…)")
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
        if node.side and not self.sided:
            hint = f"write {node.name}({self.text(node.place.span)}) for the value there"
            yield self.complaint(node.span, "no-junction", "Only where arcs meet there are two values", hint)
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
    for node in guess.nodes:
        inside = isinstance(node, Name) and names.kinds.get(node.name) in (Kind.UNKNOWN, Kind.ABBREVIATION)
        if inside or isinstance(node, At) or (isinstance(node, Call) and node.function == "integral"):
            message = "A guess is a formula of the independent variable, constants and parameters."
            yield guess.complaint(node.span, "misplaced", message, "Write it out without unknowns and abbreviations.")
            return
