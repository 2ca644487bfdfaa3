"""The syntax tree of a formula: frozen records that keep the user's order, each with its place in the text."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from operator import attrgetter
from typing import Any, NamedTuple

from solvers.tables.table import Table

FUNCTIONS: dict[str, int] = {
    "sqrt": 1, "exp": 1, "log": 1, "sin": 1, "cos": 1, "tan": 1, "asin": 1, "acos": 1, "atan": 1, "atan2": 2,
    "sinh": 1, "cosh": 1, "tanh": 1, "abs": 1, "min": 2, "max": 2, "hypot": 2, "sign": 1,
}  # fmt: skip
"""Built-in functions and how many arguments they take (`min` and `max` take two or more)."""


SIDE = "side"
"""A function of a value and a place that no user can write: -1 before the place, 1 after it."""


class Span(NamedTuple):
    """Characters `start` up to, not including, `end` of the formula's text."""

    start: int
    end: int


NOWHERE = Span(0, 0)


@dataclass(frozen=True, slots=True)
class Number:
    """A literal.  `value` is what computation uses (SI after assembly), `text` what the user wrote."""

    value: float
    text: str
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class Name:
    """A name with its primes: `y` is order 0, `y''` order 2.  `pi` is a name too."""

    name: str
    order: int = 0
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class At:
    """The value of a name at a place: `x'(T)`, `m(t1-)`.  `side` is "", "-" or "+"."""

    name: str
    order: int
    place: Node
    side: str = ""
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class Call:
    """A built-in function, or `integral`."""

    function: str
    arguments: tuple[Node, ...]
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class Lookup:
    """The value of a table, or its derivative of these orders by its arguments."""

    table: Table
    orders: tuple[int, ...]
    arguments: tuple[Node, ...]
    span: Span = NOWHERE

    @property
    def spelling(self) -> str:
        """What stands before the parentheses: `n`, `n''` with one argument, `n_r_z` with two."""
        if len(self.orders) == 1:
            return self.table.name + "'" * self.orders[0]
        slopes = (name for name, order in zip(self.table.arguments, self.orders, strict=True) for _ in range(order))
        return "_".join((self.table.name, *slopes))


@dataclass(frozen=True, slots=True)
class Negative:
    """`-operand`."""

    operand: Node
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class Sum:
    """`a + b - c`: two or more terms; `minus[i]` says that term i is subtracted (never for the first)."""

    terms: tuple[Node, ...]
    minus: tuple[bool, ...]
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class Product:
    """`a * b / c`, read from left to right; `over[i]` says that factor i divides (never for the first)."""

    factors: tuple[Node, ...]
    over: tuple[bool, ...]
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class Power:
    """`base ^ exponent`; binds tighter than the sign before it and to the right."""

    base: Node
    exponent: Node
    span: Span = NOWHERE


@dataclass(frozen=True, slots=True)
class Relation:
    """`a <= b <= c` or `a = b`: sides and, between them, signs out of "=", "<=", ">="."""

    sides: tuple[Node, ...]
    signs: tuple[str, ...]
    span: Span = NOWHERE


Node = Number | Name | At | Call | Lookup | Negative | Sum | Product | Power
"""An expression: everything but a relation."""


_PARTS: Mapping[type, Callable[[Any], tuple[Node, ...]]] = {
    At: lambda node: (node.place,),
    Call: attrgetter("arguments"),
    Lookup: attrgetter("arguments"),
    Negative: lambda node: (node.operand,),
    Sum: attrgetter("terms"),
    Product: attrgetter("factors"),
    Power: attrgetter("base", "exponent"),
}
"""A table and not a `match`: trees are walked often, and most nodes are leaves, which are not in it."""


def children(node: Node) -> tuple[Node, ...]:
    """The direct parts of a node, in reading order."""
    parts = _PARTS.get(type(node))
    return parts(node) if parts else ()


def walk(node: Node) -> Iterator[Node]:
    """Every node of the tree, parents first."""
    stack = [node]
    while stack:
        node = stack.pop()
        yield node
        if parts := _PARTS.get(type(node)):
            stack.extend(reversed(parts(node)))


def size(node: Node) -> int:
    """How many nodes the tree has."""
    return sum(1 for _ in walk(node))


def with_children(node: Node, parts: tuple[Node, ...]) -> Node:
    """The same node with other direct parts, as many and in the same order as `children` gives."""
    match node:
        case At(name, order, _, side, span):
            return At(name, order, parts[0], side, span)
        case Call(function, _, span):
            return Call(function, parts, span)
        case Lookup(table, orders, _, span):
            return Lookup(table, orders, parts, span)
        case Negative(_, span):
            return Negative(parts[0], span)
        case Sum(_, minus, span):
            return Sum(parts, minus, span)
        case Product(_, over, span):
            return Product(parts, over, span)
        case Power(_, _, span):
            return Power(parts[0], parts[1], span)
        case _:
            return node
