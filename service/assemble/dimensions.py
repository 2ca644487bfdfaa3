"""The unit of every part of a formula, and the clashes."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from types import MappingProxyType

from service.assemble.domain import Values, literal, value_of
from service.assemble.formulas import Expression, Formula
from service.assemble.quoting import quoted
from service.complaints import Complaint
from service.units import ONE, PURE, Measure, ratio
from solvers.formula.nodes import At, Call, Lookup, Name, Negative, Node, Number, Power, Product, Sum, walk
from solvers.formula.printer import text

PURE_FUNCTIONS = frozenset({"exp", "log", "sin", "cos", "tan", "asin", "acos", "atan", "sinh", "cosh", "tanh"})
ALIKE = {"atan2": True, "hypot": False, "min": False, "max": False}
"""Functions of arguments of one kind, and whether their value is a pure number."""


@dataclass(frozen=True, slots=True)
class Sort:
    """What is known of the unit of an expression.

    `measure` is its unit where names without a unit count as pure numbers; `checked` says that there are none;
    `bare` that it is made of numbers and of constants without unit only; `zero` that it is a literal 0; `mixed` that
    it adds mm to m or the like, so that nobody can tell which of them a bare number beside it would be in.
    """

    measure: Measure = ONE
    checked: bool = True
    bare: bool = False
    zero: bool = False
    mixed: bool = False

    @property
    def told(self) -> str:
        """For a message: "in m/s", or what stands for no unit."""
        return f"in {self.measure.text}" if self.measure.symbols else "a pure number"


UNCHECKED = Sort(ONE, checked=False)


@dataclass(frozen=True, slots=True)
class TableSorts:
    """The sort of a table's values and of its arguments."""

    value: Sort
    arguments: tuple[Sort, ...]


class Units:
    """Finds the unit of formulas; complaints gather in `complaints`.

    `sorts` has every name (order 0); abbreviations are added by the caller in their order.
    """

    def __init__(
        self,
        independent: str,
        sorts: Mapping[str, Sort],
        constants: Values,
        tables: Mapping[str, TableSorts] = MappingProxyType({}),
    ) -> None:
        self.independent = independent
        self.tables = tables
        self.sorts = dict(sorts)
        self.constants = constants
        self.complaints: list[Complaint] = []

    def derivative(self, name: str, order: int) -> Sort:
        """The sort of a name with primes."""
        sort, by = self.sorts[name], self.sorts[self.independent]
        if not order:
            return sort
        return Sort(sort.measure.times(by.measure, -order), sort.checked and by.checked)

    def sort_of_all(self, formulas: Sequence[Expression]) -> Sort:
        """The sort of an abbreviation that may have a formula for each arc: they have to be of one kind and unit."""
        sorts = [self.sort(formula.tree, formula) for formula in formulas]
        leading = leader(sorts)
        lead = sorts[leading]
        for sort, formula in zip(sorts, formulas, strict=True):
            same = sort.measure.dimension == lead.measure.dimension and math.isclose(
                sort.measure.factor, lead.measure.factor, rel_tol=1e-12
            )
            if not (same or sort.zero):
                message = f"This is {sort.told} here and {lead.told} on another arc."
                hint = "One name has one unit; a number gets one as a constant."
                self.complaints.append(formula.complaint(formula.tree.span, "unit-clash", message, hint))
        return replace(lead, checked=all(sort.checked or sort.zero for sort in sorts), zero=False)

    def sort(self, node: Node, formula: Formula) -> Sort:
        """The sort of a tree; after a clash the rest goes on unchecked."""
        sort = self._sort(node, formula)
        if sort.measure.computable:
            return sort
        message = f"{quoted(node)} is {sort.told}: beyond the range of numbers."
        self.complaints.append(formula.complaint(node.span, "unit-range", message, "Choose other units or powers."))
        return UNCHECKED

    def _sort(self, node: Node, formula: Formula) -> Sort:
        match node:
            case Number(value=value):
                return Sort(ONE, bare=True, zero=value == 0)
            case Name(name="pi"):
                return Sort(ONE, bare=True)
            case Name(name=name, order=order):
                return self.derivative(name, order)
            case At(name=name, order=order, place=place):
                self.place(place, formula)
                return self.derivative(name, order)
            case Negative(operand=operand):
                return self.sort(operand, formula)
            case Sum(terms=terms):
                return self.alike(terms, formula)
            case Product():
                return self.product(node, formula)
            case Power():
                return self.power(node, formula)
            case Call():
                return self.call(node, formula)
            case Lookup():
                return self.lookup(node, formula)

    def product(self, node: Product, formula: Formula) -> Sort:
        total = Sort(ONE, bare=True)
        for factor, over in zip(node.factors, node.over, strict=True):
            part = self.sort(factor, formula)
            measure = total.measure.times(part.measure, -1 if over else 1)
            zero = total.zero or (part.zero and not over)
            mixed = total.mixed or part.mixed
            total = Sort(measure, total.checked and part.checked, total.bare and part.bare, zero, mixed)
        return total

    def power(self, node: Power, formula: Formula) -> Sort:
        base, exponent = self.sort(node.base, formula), self.sort(node.exponent, formula)
        self.pure(exponent, node.exponent, formula, "an exponent")
        checked, bare = base.checked and exponent.checked, base.bare and exponent.bare
        if not base.measure.symbols:
            return Sort(ONE, checked, bare)
        try:
            value = value_of(node.exponent, self.constants)
        except (ArithmeticError, ValueError, LookupError):
            if base.measure.dimension == PURE:
                return Sort(ONE, checked)
            message = f"{quoted(node.base)} is {base.told}: only a fixed number can be its exponent."
            hint = "Divide the base by a constant of the same unit."
            self.complaints.append(formula.complaint(node.exponent.span, "unit-exponent", message, hint))
            return UNCHECKED
        if abs(value) > 100:
            return Sort(ONE, checked=False)
        measure = base.measure.power(ratio(value))
        return Sort(measure, base.checked, bare, mixed=base.mixed)

    def call(self, node: Call, formula: Formula) -> Sort:
        if node.function in ALIKE:
            sort = self.alike(node.arguments, formula)
            return replace(sort, measure=ONE, zero=False) if ALIKE[node.function] else replace(sort, zero=False)
        sort = self.sort(node.arguments[0], formula)
        if node.function in PURE_FUNCTIONS:
            self.pure(sort, node.arguments[0], formula, f"the argument of {node.function}")
            return Sort(ONE, sort.checked, sort.bare)
        match node.function:
            case "sqrt":
                return replace(sort, measure=sort.measure.power(Fraction(1, 2)))
            case "sign":
                return Sort(ONE, sort.checked, sort.bare)
            case "integral":
                by = self.sorts[self.independent]
                return Sort(sort.measure.times(by.measure), sort.checked and by.checked, mixed=sort.mixed)
        return sort  # abs

    def lookup(self, node: Lookup, formula: Formula) -> Sort:
        """A table has its own unit; each argument has to be of the kind that was measured."""
        known = self.tables[node.table.name]
        total = known.value
        for argument, name, wanted, order in zip(
            node.arguments, node.table.arguments, known.arguments, node.orders, strict=True
        ):
            self.fits(argument, wanted, f"the argument {name} of {node.table.name}", formula)
            if order:
                measure = total.measure.times(wanted.measure, -order)
                total = Sort(measure, total.checked and wanted.checked)
        return total

    def fits(self, node: Node, wanted: Sort, what: str, formula: Formula) -> None:
        """Complain where an expression is not of the kind that is wanted."""
        sort = self.sort(node, formula)
        if sort.zero or isinstance(node, Number) or (isinstance(node, Negative) and isinstance(node.operand, Number)):
            return  # a bare number has been read in the unit that is wanted
        if sort.measure.dimension == wanted.measure.dimension:
            if sort.bare and wanted.measure.factor != 1:
                message = f"{quoted(node)} is a pure number, {what} is {wanted.told}."
                hint = f'Give it a unit: a constant such as "c": "30 {wanted.measure.text}".'
                self.complaints.append(formula.complaint(node.span, "bare-number", message, hint))
            return
        message = f"{quoted(node)} is {sort.told}, {what} is {wanted.told}."
        if sort.checked and wanted.checked:
            hint = f"Both have to be of one kind, for instance {wanted.measure.text}."
            if sort.bare and literal(node):
                hint = f'Give it a unit: a constant such as "c": "{text(node)[:20]} {wanted.measure.text}".'
            self.complaints.append(formula.complaint(node.span, "unit-clash", message, hint))
        elif not math.isclose(sort.measure.factor, wanted.measure.factor, rel_tol=1e-12):
            hint = "Give all of them a unit, or none."
            self.complaints.append(formula.complaint(node.span, "mixed-units", message, hint))

    def alike(self, nodes: Sequence[Node], formula: Formula) -> Sort:
        """The sort of parts that have to be of one kind: terms of a sum, arguments of max."""
        sorts = [self.sort(node, formula) for node in nodes]
        leading = leader(sorts)
        lead = sorts[leading]
        clashed = False
        for index, (node, sort) in enumerate(zip(nodes, sorts, strict=True)):
            if index != leading and not sort.zero:
                clashed |= self.compare((nodes[leading], lead), (node, sort), formula)
        checked = all(sort.checked for sort in sorts) and not clashed
        bare, zero = all(sort.bare for sort in sorts), all(sort.zero for sort in sorts)
        told = [sort for sort in sorts if not sort.zero]
        if lead.measure.dimension == PURE and any(sort.bare for sort in told):
            return Sort(ONE, checked, bare, zero)  # 1 + y'^2 is a pure number whatever y' is in
        factors = [sort.measure.factor for sort in told]
        mixed = any(sort.mixed for sort in told) or (
            bool(factors) and not math.isclose(min(factors), max(factors), rel_tol=1e-12)
        )
        return Sort(lead.measure, checked, bare, zero, mixed)

    def compare(self, lead: tuple[Node, Sort], other: tuple[Node, Sort], formula: Formula) -> bool:
        """Complain (and return True) where two parts cannot be added or compared."""
        (node, first), (part, second) = lead, other
        same = first.measure.dimension == second.measure.dimension
        if same:
            return self.angle(part if second.bare else node, first, second, formula)
        if first.checked and second.checked:
            message = f"{quoted(node)} is {first.told} and {quoted(part)} is {second.told}."
            hint = f"Both have to be of one kind, for instance {first.measure.text}."
            if second.bare and literal(part):
                value = text(part)
                hint = f'Give the number a unit: a constant such as "c": "{value[:20]} {first.measure.text}".'
            self.complaints.append(formula.complaint(part.span, "unit-clash", message, hint))
            return True
        if math.isclose(first.measure.factor, second.measure.factor, rel_tol=1e-12):
            return False
        message = (
            f"{quoted(node)} is {first.told}, {quoted(part)} is {second.told}, and some names in them "
            "have no unit: nobody can tell which size is meant."
        )
        hint = f"Give a unit to {_plain_names(self, node, part)}, or to nothing at all."
        self.complaints.append(formula.complaint(part.span, "mixed-units", message, hint))
        return True

    def angle(self, part: Node, first: Sort, second: Sort, formula: Formula) -> bool:
        """A bare number beside an angle in degrees would be taken as radians: hardly meant."""
        measured = second if first.bare else first
        bare = first.bare != second.bare and literal(part)
        symbols = measured.measure.symbols
        if not bare or len(symbols) != 1 or symbols[0][1] != 1 or measured.measure.dimension != PURE:
            return False
        if measured.measure.factor == 1:
            return False
        name = symbols[0][0]
        message = f"The number {quoted(part)} stands beside a quantity in {name}."
        hint = f'Give it a unit: a constant such as "c": "{text(part)[:20]} {name}".'
        self.complaints.append(formula.complaint(part.span, "bare-number", message, hint))
        return True

    def pure(self, sort: Sort, node: Node, formula: Formula, what: str) -> None:
        """Complain where something with a unit stands for a pure number."""
        if sort.measure.dimension == PURE:
            return
        if sort.checked:
            message = f"{quoted(node)} is {sort.told}; {what} has to be a pure number or an angle."
            hint = f"Divide it by a constant in {sort.measure.text}."
            self.complaints.append(formula.complaint(node.span, "unit-clash", message, hint))
        elif not math.isclose(sort.measure.factor, 1.0, rel_tol=1e-12):
            message = f"{what[:1].upper()}{what[1:]} is {sort.told} and holds names without unit."
            hint = f"Give a unit to {_plain_names(self, node)}."
            self.complaints.append(formula.complaint(node.span, "mixed-units", message, hint))

    def place(self, place: Node, formula: Formula) -> None:
        """A place has to fit the independent variable."""
        sort, by = self.sort(place, formula), self.sorts[self.independent]
        if sort.bare or sort.zero or not (sort.checked and by.checked):
            return
        if sort.measure.dimension != by.measure.dimension:
            message = f"The place {quoted(place)} is {sort.told}, {self.independent} is {by.told}."
            hint = f"Name a place in {by.measure.text}."
            self.complaints.append(formula.complaint(place.span, "unit-clash", message, hint))


def leader(sorts: Sequence[Sort]) -> int:
    """Which of several parts says what the others have to be: the first with a checked unit, or the next best."""

    def weight(index: int) -> tuple[bool, bool, bool]:
        sort = sorts[index]
        return sort.zero, sort.bare, not sort.checked

    return min(range(len(sorts)), key=weight)


def _plain_names(units: Units, *nodes: Node) -> str:
    """The names without unit in some trees."""
    found: dict[str, None] = {}
    for node in nodes:
        for part in walk(node):
            if not isinstance(part, Name | At) or part.name == "pi":
                continue
            if not units.derivative(part.name, part.order).checked:
                found[units.independent if units.sorts[part.name].checked else part.name] = None
    return ", ".join(found) or "all names"
