"""Relations in SI: numbers that stand alone take the unit of the other side, and chains become conditions."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from itertools import pairwise

from service.assemble.branches import in_branches
from service.assemble.dimensions import Sort, Units, leader
from service.assemble.domain import Values, literal, value_of
from service.assemble.formulas import Formula, Statement
from service.assemble.meaning import Meaning
from service.assemble.quoting import quoted
from service.complaints import Complaint
from service.units import PURE, Measure
from solvers.formula.nodes import Name, Node, Number, Product, Span, Sum, walk
from solvers.formula.printer import text
from solvers.problem import Condition
from solvers.units import PLAIN, Unit

ZERO = Number(0.0, "0")
ROUNDING = 1e-12
"""Given numbers that differ by less, relatively, are equal in other units."""


@dataclass(frozen=True, slots=True)
class Sides:
    """The sides of a relation in SI, and the unit that its limits are in."""

    trees: tuple[Node, ...]
    unit: Unit


def convert(statement: Statement, units: Units) -> Sides:
    """Check the sides against each other and scale bare numbers; complaints gather in `units`."""
    nodes = statement.tree.sides
    sorts = [units.sort(node, statement) for node in nodes]
    leading = leader(sorts)
    lead = sorts[leading]
    if lead.bare:
        return Sides(nodes, PLAIN)
    trees = []
    for index, (node, sort) in enumerate(zip(nodes, sorts, strict=True)):
        if sort.bare and not sort.zero:
            trees.append(scaled(node, lead, statement, units))
            continue
        if index != leading and not sort.zero:
            units.compare((nodes[leading], lead), (node, sort), statement)
        trees.append(node)
    return Sides(tuple(trees), shown_unit([sort.measure for sort in sorts if not sort.bare and not sort.zero]))


def scaled(node: Node, lead: Sort, formula: Formula, units: Units) -> Node:
    """A side of numbers (and constants without unit) in the unit of the leading side, converted to SI."""
    measure = lead.measure
    if measure.factor == 1 and not lead.mixed:
        return node
    if measure.ambiguous or lead.mixed:
        message = f"In which unit {quoted(node)} is cannot be told: the other side mixes several of a kind."
        unit = measure.text if measure.dimension == PURE else measure.coherent.text
        hint = f'Give it a unit: a constant such as "c": "{text(node)[:20]} {unit}".'
        units.complaints.append(formula.complaint(node.span, "bare-number", message, hint))
        return node
    if measure.dimension == PURE and any(isinstance(part, Name) and part.name == "pi" for part in walk(node)):
        message = f"{quoted(node)} would be in {measure.text}, the unit of the other side: with pi hardly meant."
        hint = f"Write it in {measure.text}, or give a constant in rad."
        units.complaints.append(formula.complaint(node.span, "bare-number", message, hint))
        return node
    if literal(node):
        value = value_of(node, units.constants) * measure.factor
        if not math.isfinite(value):
            message = f"{quoted(node)} in {measure.text} is beyond the range of numbers."
            units.complaints.append(formula.complaint(node.span, "number-range", message, "Choose another number."))
        return Number(value, text(node), node.span)
    return Product((Number(measure.factor, repr(measure.factor), node.span), node), (False, False), node.span)


def shown_unit(measures: list[Measure]) -> Unit:
    """The unit to show limits in: the first that mixes no two units of one kind (mm and m), else the SI unit."""
    clear = [measure for measure in measures if not measure.ambiguous]
    if clear:
        return clear[0].without_angles.unit
    return measures[0].coherent.unit if measures else PLAIN


def says_nothing(statement: Statement, sides: Sides, meaning: Meaning, constants: Values) -> Iterator[Complaint]:
    """Given numbers side by side: true or false whatever the curve is."""
    numbers = zip(pairwise(statement.tree.sides), pairwise(sides.trees), statement.tree.signs, strict=True)
    for (left, right), converted, sign in numbers:
        if meaning.of(left, right).fixed:
            span = Span(left.span.start, right.span.end)
            code, message = "says-nothing", f"{quoted(left)} and {quoted(right)} are both given numbers: this says "
            message += "nothing about the curve."
            if _false(*converted, sign, constants):
                code, message = "contradiction", f"{quoted(left)} {sign} {quoted(right)} is false, whatever the curve."
            yield statement.complaint(span, code, message, "Leave it out, or compare with an unknown.")


def _false(left: Node, right: Node, sign: str, constants: Values) -> bool:
    """Whether given numbers do not compare like this; False also where one of them has no value by itself."""
    try:
        one, other = value_of(left, constants), value_of(right, constants)
    except (ArithmeticError, ValueError, LookupError):
        return False
    if math.isclose(one, other, rel_tol=ROUNDING):
        return False
    return sign == "=" or (one > other) == (sign == "<=")


def conditions(
    statement: Statement, sides: Sides, meaning: Meaning, settle: Callable[[Node], Node]
) -> Iterator[Condition]:
    """The conditions of a relation, branch by branch."""
    for condition in _as_stated(statement, sides, meaning, settle):
        yield from in_branches(condition, meaning)


def _as_stated(
    statement: Statement, sides: Sides, meaning: Meaning, settle: Callable[[Node], Node]
) -> Iterator[Condition]:
    """The conditions of a relation as it is written.

    Neighbours of which one is a given number limit the other; `lower <= body <= upper` is one condition.  Where both
    depend on the curve, their difference is compared with zero, so that the middle of a chain is what is limited.
    """
    fixed = [meaning.of(tree).fixed for tree in sides.trees]
    trees = [settle(tree) for tree in sides.trees]
    label, place = statement.text.strip(), statement.pointer
    pending: Condition | None = None  # a limit on the side to its right, which may get a second one
    for index, sign in enumerate(statement.tree.signs):
        left, right = trees[index], trees[index + 1]
        if fixed[index]:
            pending = _limited(right, left, sign, True, label, place, sides.unit)
            if pending.equality or index + 1 == len(statement.tree.signs) or not fixed[index + 2]:
                yield pending
                pending = None
        elif fixed[index + 1]:
            limited = _limited(left, right, sign, False, label, place, sides.unit)
            if pending is not None and not limited.equality:
                limited = replace(pending, lower=pending.lower or limited.lower, upper=pending.upper or limited.upper)
            elif pending is not None:
                yield pending
            yield limited
            pending = None
        else:
            last = index + 1 == len(statement.tree.signs)
            body, limit = (left, right) if last else (right, left)
            difference = Sum((body, limit), (False, True), statement.tree.span)
            yield _limited(difference, ZERO, sign, not last, label, place, sides.unit)


def _limited(body: Node, limit: Node, sign: str, limit_on_left: bool, label: str, place: str, unit: Unit) -> Condition:
    if sign == "=":
        return Condition(body, limit, limit, label, place, unit)
    below = (sign == "<=") == limit_on_left
    return Condition(body, limit if below else None, None if below else limit, label, place, unit)
