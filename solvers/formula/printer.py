"""Syntax tree -> formula text, with as few parentheses as the grammar needs: read again it gives the same tree."""

from __future__ import annotations

import re

from solvers.formula.errors import FormulaError
from solvers.formula.nodes import At, Call, Lookup, Name, Negative, Node, Number, Power, Product, Relation, Sum
from solvers.formula.parser import parse_expression

SUM, SIGNED, PRODUCT, POWER, ATOM = range(5)
"""How tightly the parts of a node hold together."""

_LITERAL = re.compile(r"(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)


def text(tree: Node | Relation) -> str:
    """The formula as one would type it."""
    match tree:
        case Relation(sides=sides, signs=signs):
            return _joined(sides, ("", *(f" {sign} " for sign in signs)), SUM, SUM)
        case Number():
            shown = written(tree)
            return numeral(shown) if isinstance(shown, Number) else text(shown)
        case Name(name=name, order=order):
            return name + "'" * order
        case At(name=name, order=order, place=place, side=side):
            return f"{name}{chr(39) * order}({text(place)}{side})"
        case Call(function=function, arguments=arguments):
            return f"{function}({_joined(arguments, ('', *[', '] * (len(arguments) - 1)), SUM, SUM)})"
        case Lookup(arguments=arguments):
            return f"{tree.spelling}({_joined(arguments, ('', *[', '] * (len(arguments) - 1)), SUM, SUM)})"
        case Negative(operand=operand):
            return "-" + _part(operand, PRODUCT)
        case Sum(terms=terms, minus=minus):
            return _joined(terms, ("", *(" - " if negative else " + " for negative in minus[1:])), SIGNED, PRODUCT)
        case Product(factors=factors, over=over):
            return _joined(factors, ("", *("/" if divides else "*" for divides in over[1:])), POWER, POWER)
        case Power(base=base, exponent=exponent):
            return f"{_part(base, ATOM)}^{_exponent(exponent)}"


def _joined(parts: tuple[Node, ...], signs: tuple[str, ...], first: int, others: int) -> str:
    """The parts with a sign before each, in parentheses where they hold together less than they must."""
    pieces: list[str] = []  # a loop, since this recurses: a generator would double its depth
    for sign, part in zip(signs, parts, strict=True):
        pieces.append(sign + _part(part, others if pieces else first))
    return "".join(pieces)


def numeral(number: Number) -> str:
    """What the user wrote, or the shortest text that gives the value."""
    return number.text or repr(number.value).removesuffix(".0")


def written(number: Number) -> Node:
    """The number as the tree that its text stands for: assembly may have made one number of `3/2` or of `-12`."""
    if _LITERAL.fullmatch(numeral(number)):
        return number
    try:
        return parse_expression(numeral(number))
    except FormulaError:
        return Number(abs(number.value), "") if number.value >= 0 else Negative(Number(-number.value, ""))


def tightness(tree: Node) -> int:
    """The level of a node in the grammar."""
    match tree:
        case Sum():
            return SUM
        case Negative():
            return SIGNED
        case Number():
            shown = written(tree)
            return ATOM if isinstance(shown, Number) else tightness(shown)
        case Product():
            return PRODUCT
        case Power():
            return POWER
        case _:
            return ATOM


def _part(tree: Node, least: int) -> str:
    return text(tree) if tightness(tree) >= least else f"({text(tree)})"


def _exponent(tree: Node) -> str:
    """A sign needs no parentheses in an exponent, where it binds as tightly as there is need."""
    if isinstance(tree, Number):
        tree = written(tree)
    if isinstance(tree, Negative) and tightness(tree.operand) >= POWER:
        return text(tree)
    return _part(tree, POWER)
