"""Values of the parts of formulas that are given numbers, and the parts that have no value."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from service.assemble.formulas import Formula
from service.assemble.quoting import quoted
from service.complaints import Complaint
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import At, Call, Name, Node, Number, Power, Product, children, walk, with_children
from solvers.tables.table import OutsideRangeError

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


def undefined(formula: Formula, constants: Values) -> list[Complaint]:
    """The smallest parts of a formula that have no value whatever the curve is: `1/0`, `sqrt(-1)`."""
    walk_through = _Walk(formula, constants)
    for part in formula.sides:
        walk_through.value(part)
    return walk_through.complaints


class _Walk:
    """Evaluates what it can, bottom up, each part once."""

    def __init__(self, formula: Formula, constants: Values) -> None:
        self.formula = formula
        self.constants = constants
        self.complaints: list[Complaint] = []

    def value(self, node: Node) -> float | None:
        """The value of a part, None where it depends on the curve or has none."""
        match node:
            case At():
                return None
            case Number(value=value):
                return value
            case Name(name="pi"):
                return math.pi
            case Name(name=name):
                return self.constants.get(name)
        parts = [self.value(part) for part in children(node)]
        if self.divides_by_zero(node, parts):
            return None
        given = [part for part in parts if part is not None]
        if len(given) < len(parts) or (isinstance(node, Call) and node.function == "integral"):
            return None
        numbers = [Number(part, "") for part in given]
        try:
            return value_of(with_children(node, tuple(numbers)), self.constants)
        except LookupError:
            return None
        except (ArithmeticError, ValueError) as error:
            reason = "too large" if isinstance(error, OverflowError) else "no real number is its value"
            if isinstance(error, OutsideRangeError):
                reason = str(error)
            self.complain(node, f"{quoted(node)} is not defined: {reason}.", "Change the numbers or constants in it.")
            return None

    def divides_by_zero(self, node: Node, parts: Sequence[float | None]) -> bool:
        """Complain (and return True) about a zero below the line, also where the rest depends on the curve."""
        if isinstance(node, Product):
            for factor, over, value in zip(node.factors, node.over, parts, strict=True):
                if over and value == 0:
                    self.complain(factor, f"Division by zero: {quoted(factor)} is 0.", "Divide by something else.")
                    return True
        if isinstance(node, Power) and parts[0] == 0 and parts[1] is not None and parts[1] < 0:
            self.complain(node, f"{quoted(node)} is a division by zero.", "Use a positive exponent.")
            return True
        return False

    def complain(self, node: Node, message: str, hint: str) -> None:
        self.complaints.append(self.formula.complaint(node.span, "undefined", message, hint))
