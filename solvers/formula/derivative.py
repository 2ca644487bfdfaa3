"""Partial derivatives of a syntax tree, kept readable."""

from __future__ import annotations

from collections.abc import Callable, Collection
from dataclasses import replace
from fractions import Fraction
from functools import cache

from solvers.formula.algebra import ONE, ZERO, add, bare, factors_of, multiply, negative, product_of, rational
from solvers.formula.nodes import (
    SIDE,
    At,
    Call,
    Lookup,
    Name,
    Negative,
    Node,
    Number,
    Power,
    Product,
    Sum,
    walk,
)
from solvers.formula.parser import parse_expression
from solvers.formula.substitute import substitute

_PARTIALS = {
    "exp": ("exp(u)",), "log": ("1/u",),
    "sin": ("cos(u)",), "cos": ("-sin(u)",), "tan": ("1/cos(u)^2",),
    "asin": ("1/sqrt(1 - u^2)",), "acos": ("-1/sqrt(1 - u^2)",), "atan": ("1/(1 + u^2)",),
    "atan2": ("v/(u^2 + v^2)", "-u/(u^2 + v^2)"),
    "sinh": ("cosh(u)",), "cosh": ("sinh(u)",), "tanh": ("1 - tanh(u)^2",),
    "hypot": ("u/hypot(u, v)", "v/hypot(u, v)"),
    "abs": ("sign(u)",), "sign": ("0",), SIDE: ("0", "0"),
    "min": ("(1 - sign(u - v))/2", "(1 + sign(u - v))/2"), "max": ("(1 + sign(u - v))/2", "(1 - sign(u - v))/2"),
}  # fmt: skip
"""The derivatives of each function of u (and v) with respect to its arguments; `sqrt` is a power."""


def derivative(tree: Node, target: Node, check: Callable[[], None] | None = None) -> Node:
    """The partial derivative of `tree` with respect to `target`: a name, a value at a place or an `integral(…)`.

    Names with different primes are independent of each other; values at places and integrals depend on no name.
    `check` is called at every step and may raise to end a derivation that takes too long.
    """
    return _derivative(bare(tree), bare(target), check or (lambda: None))


def total_derivative(
    tree: Node, independent: str, functions: Collection[str], check: Callable[[], None] | None = None
) -> Node:
    """The derivative along the curve: names out of `functions` gain a prime, everything else is a number."""
    slopes = [derivative(tree, Name(independent), check)]
    followed = dict.fromkeys(bare(n) for n in walk(tree) if isinstance(n, Name) and n.name in functions)
    for name in followed:
        assert isinstance(name, Name)
        slopes.append(multiply([derivative(tree, name, check), Name(name.name, name.order + 1)]))
    return add(slopes)


def _derivative(tree: Node, target: Node, check: Callable[[], None]) -> Node:
    check()
    if tree == target:
        return ONE
    match tree:
        case Number() | Name() | At() | Call(function="integral"):
            return ZERO
        case Negative(operand=operand):
            return negative(_derivative(operand, target, check))
        case Sum(terms=terms, minus=minus):
            slopes = [_derivative(term, target, check) for term in terms]
            return add(negative(slope) if m else slope for slope, m in zip(slopes, minus, strict=True))
        case Power(base=base, exponent=exponent) if rational(exponent) is None:
            return _power(tree, base, exponent, target, check)
        case Product() | Power() | Call(function="sqrt"):
            return _product(tree, target, check)
        case Call(function="min" | "max" as function, arguments=(first, second, third, *others)):
            folded = Call(function, (first, Call(function, (second, third, *others))))
            return _derivative(folded, target, check)
        case Call(function=function, arguments=arguments):
            slopes = [_derivative(argument, target, check) for argument in arguments]
            if all(slope == ZERO for slope in slopes):
                return ZERO
            partials = _partials(function, arguments)
            return add(multiply([p, s]) for p, s in zip(partials, slopes, strict=True) if s != ZERO)
        case Lookup(orders=orders, arguments=arguments):
            slopes = [_derivative(argument, target, check) for argument in arguments]
            raised = [tuple(order + (k == by) for k, order in enumerate(orders)) for by in range(len(orders))]
            partials = [replace(tree, orders=higher) for higher in raised]
            return add(multiply([p, s]) for p, s in zip(partials, slopes, strict=True) if s != ZERO)
    raise TypeError(f"no derivative of a {type(tree).__name__}")


def _product(tree: Node, target: Node, check: Callable[[], None]) -> Node:
    """Factor by factor, each a base with a constant exponent."""
    number, factors = factors_of(tree)
    slopes = []
    for base, exponent in factors:
        slope = _derivative(base, target, check)
        if slope == ZERO:
            continue
        place = factors.index((base, exponent))
        row = [*factors[:place], (slope, Fraction(1)), (base, exponent - 1), *factors[place + 1 :]]
        above, below = (Number(float(part), str(part)) for part in exponent.as_integer_ratio())
        slopes.append(product_of([(number, Fraction(1)), (above, Fraction(1)), (below, Fraction(-1)), *row]))
    return add(slopes)


def _power(tree: Node, base: Node, exponent: Node, target: Node, check: Callable[[], None]) -> Node:
    """b^e: e b^(e-1) b' + b^e ln(b) e'."""
    base_slope, exponent_slope = _derivative(base, target, check), _derivative(exponent, target, check)
    lower = Power(base, add([exponent, Number(-1.0, "-1")]))
    by_base = multiply([exponent, lower, base_slope])
    by_exponent = multiply([tree, Call("log", (base,)), exponent_slope])
    return add([by_base, by_exponent])


@cache
def _rules(function: str) -> tuple[Node, ...]:
    return tuple(bare(parse_expression(text)) for text in _PARTIALS[function])


def _partials(function: str, arguments: tuple[Node, ...]) -> list[Node]:
    given: dict[Node, Node] = dict(zip((Name("u"), Name("v")), arguments, strict=False))
    return [substitute(rule, given.get) for rule in _rules(function)]
