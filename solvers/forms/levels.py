"""Sums and products with levels, which are numbers on every stretch: known ones are folded in.

A level is 1, 0 or -1, or a sum that has one of these values on every stretch.
"""

from __future__ import annotations

from solvers.formula.nodes import Negative, Node, Number, Product, Sum

ONE, HALF = Number(1.0, "1"), Number(0.5, "0.5")


def numeral(value: float) -> Node:
    return Number(value, f"{value:g}") if value >= 0 else Negative(Number(-value, f"{-value:g}"))


def _value(tree: Node) -> float | None:
    match tree:
        case Number(value=value):
            return value
        case Negative(operand=Number(value=value)):
            return -value
    return None


def times(one: Node, other: Node) -> Node:
    known, more = _value(one), _value(other)
    if known is not None and more is not None:
        return numeral(known * more + 0.0)
    match known:
        case 1.0:
            return other
        case -1.0:
            return Negative(other)
        case 0.0:
            return Number(0.0, "0")
    return Product((one, other), (False, False))


def plus(one: Node, other: Node) -> Node:
    known, more = _value(one), _value(other)
    if known is not None and more is not None:
        return numeral(known + more)
    return other if _value(one) == 0 else one if _value(other) == 0 else Sum((one, other), (False, False))


def opposite(level: Node) -> Node:
    value = _value(level)
    return Negative(level) if value is None else numeral(-value + 0.0)


def half_more(level: Node) -> Node:
    """(1 + level)/2, which is 1 or 0 where the level is 1 or -1."""
    value = _value(level)
    return numeral((1 + value) / 2) if value is not None else times(HALF, Sum((ONE, level), (False, False)))
