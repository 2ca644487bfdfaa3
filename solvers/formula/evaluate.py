"""The value of a syntax tree, over whatever numbers the caller computes with: floats, arrays, CasADi's symbols."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from solvers.formula.nodes import SIDE, At, Call, Lookup, Name, Negative, Node, Number, Power, Product, Sum, children

LookUp = Callable[[str, int], Any]
"""(name, order) -> value."""

ValueAt = Callable[[str, int, Node, str], Any]
"""(name, order, place, side) -> value there; the place comes as a tree."""


def evaluate(
    node: Node, look_up: LookUp, operations: Mapping[str, Callable[..., Any]], value_at: ValueAt | None = None
) -> Any:
    """The value of `node`.

    `operations` gives every function by its name, "power" of base and exponent, and "table" of a table, the orders of
    its derivative and the arguments; `+ - * /` are those of the values.  `look_up` is asked for every name but `pi`,
    `value_at` for every value at a place.  Errors of the operations (ValueError, ZeroDivisionError of floats) pass
    through.
    """
    values: list[Any] = []
    waiting = [(node, False)]
    while waiting:  # no recursion: trees that were put together may be deep
        node, ready = waiting.pop()
        match node:
            case Number(value=value):
                values.append(value)
            case Name(name="pi"):
                values.append(math.pi)
            case Name(name=name, order=order):
                values.append(look_up(name, order))
            case At(name=name, order=order, place=place, side=side):
                if value_at is None:
                    raise LookupError(f"no value of '{name}' at a place is known here")
                values.append(value_at(name, order, place, side))
            case _ if not ready:
                waiting.append((node, True))
                waiting.extend((part, False) for part in reversed(children(node)))
            case _:
                count = len(children(node))
                parts = values[-count:]
                del values[-count:]
                values.append(_combined(node, parts, operations))
    return values[0]


def _combined(node: Node, parts: Sequence[Any], operations: Mapping[str, Callable[..., Any]]) -> Any:
    match node:
        case Negative():
            return -parts[0]
        case Sum(minus=minus):
            total = parts[0]
            for part, negative in zip(parts[1:], minus[1:], strict=True):
                total = total - part if negative else total + part
            return total
        case Product(over=over):
            total = parts[0]
            for part, divides in zip(parts[1:], over[1:], strict=True):
                total = total / part if divides else total * part
            return total
        case Power():
            return operations["power"](parts[0], parts[1])
        case Call(function=function):
            return operations[function](*parts)
        case Lookup(table=table, orders=orders):
            return operations["table"](table, orders, *parts)
    raise TypeError(f"no value for a {type(node).__name__}")


def _sign(value: float) -> float:
    return 0.0 if value == 0 else math.copysign(1.0, value)


REAL: dict[str, Callable[..., Any]] = {
    **{name: getattr(math, name) for name in ("sqrt", "exp", "log", "sin", "cos", "tan", "asin", "acos", "atan")},
    **{name: getattr(math, name) for name in ("atan2", "sinh", "cosh", "tanh", "hypot")},
    "abs": abs, "min": min, "max": max, "sign": _sign, "power": math.pow, SIDE: lambda at, place: _sign(at - place),
    "table": lambda table, orders, *arguments: table.strict_value(*arguments, orders=orders),
}  # fmt: skip
"""The operations on plain floats; an argument outside of a function's domain raises ValueError."""
