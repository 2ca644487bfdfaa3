"""Linear conditions between values at places: which contradict each other, which repeat, which values they fix."""

from __future__ import annotations

import math
from collections.abc import Callable, Hashable, Mapping
from dataclasses import dataclass, field
from typing import TypeVar

from service.assemble.domain import Values, value_of
from solvers.formula.nodes import At, Call, Name, Negative, Node, Number, Power, Product, Sum

Variable = Hashable
SMALL = 1e-9
"""What is rounding, relative to the terms that cancel."""


@dataclass(frozen=True, slots=True)
class Form:
    """sum of coefficient * variable + constant; `size` is the largest term that went into the constant."""

    terms: Mapping[Variable, float] = field(default_factory=dict)
    constant: float = 0.0
    size: float = 0.0

    def plus(self, other: Form, factor: float = 1.0) -> Form:
        """self + factor * other; what cancels is gone."""
        terms = dict(self.terms)
        for variable, coefficient in other.terms.items():
            before = terms.get(variable, 0.0)
            total = before + factor * coefficient
            if abs(total) <= SMALL * max(abs(before), abs(factor * coefficient)):
                terms.pop(variable, None)
            else:
                terms[variable] = total
        constant = self.constant + factor * other.constant
        size = max(self.size, abs(factor) * other.size, abs(self.constant), abs(factor * other.constant))
        return Form(terms, constant, size)


def linear(node: Node, constants: Values, variable: Callable[[Node], Variable | None]) -> Form | None:
    """The linear form of a tree, or None where it is not linear.  `variable` names what a `Name` or `At` stands for."""
    match node:
        case Name() | At():
            known = variable(node)
            if known is not None:
                return Form({known: 1.0})
        case Negative(operand=operand):
            inner = linear(operand, constants, variable)
            return None if inner is None else Form().plus(inner, -1.0)
        case Sum(terms=terms, minus=minus):
            total = Form()
            for term, negative in zip(terms, minus, strict=True):
                part = linear(term, constants, variable)
                if part is None:
                    return None
                total = total.plus(part, -1.0 if negative else 1.0)
            return total
        case Product(factors=factors, over=over):
            total = Form(constant=1.0, size=1.0)
            for factor, divides in zip(factors, over, strict=True):
                part = linear(factor, constants, variable)
                if part is None or (part.terms and (total.terms or divides)) or (divides and not part.constant):
                    return None
                one, other = (part, total) if part.terms else (total, part)
                total = Form().plus(one, 1 / other.constant if divides else other.constant)
            return total
        case Number() | Power() | Call():
            pass
    try:
        value = value_of(node, constants)
    except (ArithmeticError, ValueError, LookupError):
        return None
    return Form(constant=value, size=abs(value))


Tag = TypeVar("Tag", bound=Hashable)


@dataclass(frozen=True, slots=True)
class _Row:
    """form = 0, the combination of the conditions in `parts`, and the variable that it gives."""

    form: Form
    parts: Mapping[int, float]
    pivot: Variable


@dataclass(frozen=True, slots=True)
class Conflict:
    """A condition that says nothing new: `residual` is zero where it repeats `others`, else it contradicts them."""

    condition: int
    others: tuple[int, ...]
    contradicts: bool


class System:
    """Linear equations form = 0, taken one by one (Gauss-Jordan elimination with a record of what was combined)."""

    def __init__(self) -> None:
        self.rows: list[_Row] = []
        self.conflicts: list[Conflict] = []

    def add(self, index: int, form: Form) -> None:
        """Take in condition `index`, or record that it repeats or contradicts earlier ones."""
        parts: dict[int, float] = {index: 1.0}
        form = Form(form.terms, form.constant, max(form.size, abs(form.constant)))
        for row in self.rows:
            factor = form.terms.get(row.pivot, 0.0)
            if factor:
                form = form.plus(row.form, -factor)
                for part, weight in row.parts.items():
                    parts[part] = parts.get(part, 0.0) - factor * weight
        if not form.terms:
            others = tuple(sorted(part for part, weight in parts.items() if part != index and weight))
            self.conflicts.append(Conflict(index, others, abs(form.constant) > SMALL * form.size))
            return
        pivot = max(form.terms, key=lambda variable: abs(form.terms[variable]))
        scale = form.terms[pivot]
        new = _Row(Form().plus(form, 1 / scale), {part: weight / scale for part, weight in parts.items()}, pivot)
        self.rows = [self._cleared(row, new) for row in self.rows]
        self.rows.append(new)

    @staticmethod
    def _cleared(row: _Row, new: _Row) -> _Row:
        factor = row.form.terms.get(new.pivot, 0.0)
        if not factor:
            return row
        parts = dict(row.parts)
        for part, weight in new.parts.items():
            parts[part] = parts.get(part, 0.0) - factor * weight
        return _Row(row.form.plus(new.form, -factor), parts, row.pivot)

    def fixed(self) -> dict[Variable, tuple[float, tuple[int, ...]]]:
        """Variables that the equations determine: their values, and the conditions that say so."""
        return {
            row.pivot: (0.0 - row.form.constant, tuple(sorted(row.parts)))
            for row in self.rows
            if len(row.form.terms) == 1 and math.isfinite(row.form.constant)
        }
