"""A unit as the solver's records carry it: its text and its size in coherent SI units."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from solvers.unit_text import merged, raised, read_symbols, write_symbols


@dataclass(frozen=True, slots=True)
class Unit:
    """`text` is what the user wrote ("mm/s^2"); one of it is `factor` coherent SI units."""

    text: str
    factor: float = 1.0


PLAIN = Unit("", 1.0)
"""The unit of what has none."""


def derivative_unit(unit: Unit, independent_unit: Unit, order: int) -> Unit:
    """The unit of a derivative: of `mm` by `s`, order 3, it is `mm/s^3`; "" where everything cancels."""
    divisor = raised(read_symbols(independent_unit.text), Fraction(-order))
    text = write_symbols(merged(read_symbols(unit.text) + divisor)) if order and divisor else unit.text
    return Unit(text, unit.factor / independent_unit.factor**order)
