"""The user's units of everything that a solution names, and numbers told in them.

The solver works in coherent SI units.  What is not a finite number becomes null: JSON (RFC 8259) has no other word for
it.
"""

from __future__ import annotations

import math
import re

import numpy as np

from solvers.curve import Array
from solvers.problem import Condition, Problem
from solvers.units import PLAIN, Unit
from web.unit_text import per

_PRIMED = re.compile(r"(.*?)('*)", re.DOTALL)


class Units:
    """The user's unit of everything that a solution names."""

    def __init__(self, problem: Problem) -> None:
        self.independent = problem.independent_unit
        self._unknowns = {unknown.name: unknown.unit for unknown in problem.unknowns}
        self._parameters = {parameter.name: parameter.unit for parameter in problem.parameters}
        self._conditions: dict[tuple[str, str], Condition] = {}
        self._pointers: dict[str, Condition] = {}
        for condition in problem.conditions:
            self._conditions[condition.label, condition.pointer] = condition
            self._pointers.setdefault(condition.pointer, condition)

    def parameter(self, name: str) -> Unit:
        """The unit of a parameter."""
        return self._parameters.get(name, PLAIN)

    def function(self, primed: str) -> Unit:
        """The unit of an unknown or of its derivative, `x''`."""
        match = _PRIMED.fullmatch(primed)
        assert match is not None  # the pattern takes any text
        name, order = match[1], len(match[2])
        unit = self._unknowns.get(name, PLAIN)
        if not order:
            return unit
        return Unit(per(unit.text, self.independent.text, order), unit.factor / self.independent.factor**order)

    def condition(self, label: str, pointer: str) -> Unit | None:
        """The unit of a condition, a bound, or the unknown that a pointer means; None where it cannot be told."""
        found = self._conditions.get((label, pointer)) or self._pointers.get(pointer)
        if found is not None:
            return found.unit
        match pointer.split("/")[1:]:
            case ["unknowns" | "guess", name, *_] if (plain := _plain(name)) in self._unknowns:
                return self._unknowns[plain]
            case ["parameters" | "guess", name, *_] if (plain := _plain(name)) in self._parameters:
                return self._parameters[plain]
        return None


def _plain(token: str) -> str:
    """A token of a JSON pointer without its escapes (RFC 6901, section 4)."""
    return token.replace("~1", "/").replace("~0", "~")


def finite(number: float | None) -> float | None:
    """The number, or None where there is no finite one."""
    return float(number) if number is not None and math.isfinite(number) else None


def in_unit(number: float | None, unit: Unit) -> float | None:
    """An SI number in `unit`."""
    return None if number is None else finite(number / unit.factor)


def numbers(values: Array, unit: Unit) -> list[float | None]:
    """SI numbers in `unit`."""
    with np.errstate(over="ignore"):
        found = values / unit.factor
    told: list[float | None] = found.tolist()
    return told if np.isfinite(found).all() else [finite(number) for number in told]
