"""Values of the parts of formulas that are given numbers, and the parts that have no value."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping

from service.assemble.formulas import Formula
from service.complaints import Complaint
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import At, Call, Name, Node, Number, Power, Product, Relation, children, walk
from solvers.formula.printer import text

Values = Mapping[str, float]
"""Constants by name, in SI."""


def value_of(node: Node, constants: Values) -> float:
    """The value of a tree of numbers and constants.  Raises ArithmeticError, ValueError or KeyError (other names)."""
    value = evaluate(node, lambda name, order: constants[name], REAL)
    if not math.isfinite(value):
        raise OverflowError("beyond the range of numbers")
    return float(value)


def literal(node: Node) -> bool:
    """Whether a tree holds numbers only (and pi)."""
    return all(
        not isinstance(part, At) and not (isinstance(part, Name) and part.name != "pi") for part in walk(node)
    ) and not any(isinstance(part, Call) and part.function == "integral" for part in walk(node))


def undefined(formula: Formula, constants: Values) -> Iterator[Complaint]:
    """The smallest parts of a formula that have no value whatever the curve is: `1/0`, `sqrt(-1)`."""
    tree = formula.tree
    for part in tree.sides if isinstance(tree, Relation) else (tree,):
        yield from _parts(formula, part, constants)


def _parts(formula: Formula, node: Node, constants: Values) -> Iterator[Complaint]:
    inner = [found for part in children(node) for found in _parts(formula, part, constants)]
    if inner:
        yield from inner
        return
    if isinstance(node, Product):
        for factor, over in zip(node.factors, node.over, strict=True):
            if over and _zero(factor, constants):
                message = f"Division by zero: “{text(factor)}” is 0."
                yield formula.complaint(factor.span, "undefined", message, "Divide by something else.")
                return
    if isinstance(node, Power) and _zero(node.base, constants) and _negative(node.exponent, constants):
        message = f"“{text(node)}” is a division by zero."
        yield formula.complaint(node.span, "undefined", message, "Use a positive exponent.")
        return
    if isinstance(node, Number | Name | At) or (isinstance(node, Call) and node.function == "integral"):
        return
    try:
        value_of(node, constants)
    except (ArithmeticError, ValueError) as error:
        reason = "too large" if isinstance(error, OverflowError) else "no real number is its value"
        message = f"“{text(node)[:60]}” is not defined: {reason}."
        yield formula.complaint(node.span, "undefined", message, "Change the numbers or constants in it.")
    except LookupError:
        return  # depends on the curve: nothing to say before solving


def _zero(node: Node, constants: Values) -> bool:
    return _given(node, constants) == 0


def _negative(node: Node, constants: Values) -> bool:
    value = _given(node, constants)
    return value is not None and value < 0


def _given(node: Node, constants: Values) -> float | None:
    try:
        return value_of(node, constants)
    except (ArithmeticError, ValueError, LookupError):
        return None
