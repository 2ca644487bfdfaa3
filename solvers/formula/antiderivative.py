"""Antiderivatives of the formulas for which a few rules suffice: polynomials, and functions of what is linear.

A term is taken apart into what does not depend on the variable, a polynomial, and at most one of exp, sin, cos, sinh
and cosh of something linear; the latter two are integrated by parts, until the polynomial is used up.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction

from solvers.formula.algebra import ONE, ZERO, add, bare, multiply, negative, product_of
from solvers.formula.derivative import derivative
from solvers.formula.nodes import Call, Lookup, Name, Negative, Node, Number, Product, Sum, walk
from solvers.formula.substitute import substitute

_PRIMITIVES: Mapping[str, tuple[str, bool]] = {
    "exp": ("exp", False),
    "sin": ("cos", True),
    "cos": ("sin", False),
    "sinh": ("cosh", False),
    "cosh": ("sinh", False),
}
"""The antiderivative of each function, and whether it has the other sign."""
HIGHEST = 12
"""Degree of polynomials up to which they are recognised."""


def antiderivative(tree: Node, variable: Name) -> Node | None:
    """An antiderivative by a variable, everything else being held; None where the rules do not reach."""
    parts = [_of_term(term, variable) for term in _terms(bare(tree))]
    return None if any(part is None for part in parts) else add(part for part in parts if part is not None)


def depends(tree: Node, variable: Name) -> bool:
    """Whether a name with its primes occurs in a tree."""
    return any(isinstance(node, Name) and (node.name, node.order) == (variable.name, variable.order)
               for node in walk(tree))  # fmt: skip


def _terms(tree: Node) -> Iterator[Node]:
    match tree:
        case Sum(terms=terms, minus=minus):
            for term, subtracted in zip(terms, minus, strict=True):
                for part in _terms(term):
                    yield negative(part) if subtracted else part
        case Negative(operand=operand):
            yield from (negative(part) for part in _terms(operand))
        case _:
            yield tree


def _of_term(term: Node, variable: Name) -> Node | None:
    """The antiderivative of a product."""
    factors = list(_factors(term))
    given = product_of([(f, Fraction(-1 if over else 1)) for f, over in factors if not depends(f, variable)])
    moving = [(f, over) for f, over in factors if depends(f, variable)]
    waves = [f for f, over in moving if not over and _linear_inside(f, variable) is not None]
    rest = [(f, over) for f, over in moving if f not in waves]
    polynomial = product_of([(f, Fraction(-1 if over else 1)) for f, over in rest])
    slopes = _slopes(polynomial, variable)
    if len(waves) > 1 or slopes is None:
        return None
    if not waves:  # Taylor's series at zero, which ends
        at_zero = [substitute(slope, lambda node: ZERO if node == variable else None) for slope in slopes]
        series = (_over_factorial(multiply([value, _power(variable, k + 1)]), k + 1) for k, value in enumerate(at_zero))
        return multiply([given, add(series)])
    inside = _linear_inside(waves[0], variable)
    assert inside is not None and isinstance(waves[0], Call)
    function, parts, sign = waves[0].function, [], False
    for k, slope in enumerate(slopes):
        function, turned = _PRIMITIVES[function]
        sign ^= turned
        part = product_of([(slope, Fraction(1)), (Call(function, waves[0].arguments), Fraction(1)),
                           (inside, Fraction(-k - 1))])  # fmt: skip
        parts.append(negative(part) if sign ^ (k % 2 == 1) else part)
    return multiply([given, add(parts)])


def _factors(term: Node) -> Iterator[tuple[Node, bool]]:
    """The factors of a term, and whether each divides."""
    if isinstance(term, Negative):
        yield Number(-1.0, "-1"), False
        term = term.operand
    if isinstance(term, Product):
        for factor, over in zip(term.factors, term.over, strict=True):
            yield from ((part, below ^ over) for part, below in _factors(factor))
    else:
        yield term, False


def _linear_inside(tree: Node, variable: Name) -> Node | None:
    """The slope of what a function in the table is of, where that is linear."""
    if not (isinstance(tree, Call) and tree.function in _PRIMITIVES):
        return None
    slope = derivative(tree.arguments[0], variable)
    return None if depends(slope, variable) or slope == ZERO else slope


def _slopes(tree: Node, variable: Name) -> list[Node] | None:
    """A polynomial and its derivatives until none is left; None where it is no polynomial (of moderate degree)."""
    if any(isinstance(node, Call | Lookup) and depends(node, variable) for node in walk(tree)):
        return None
    slopes = [tree]
    while depends(slopes[-1], variable):
        if len(slopes) > HIGHEST:
            return None
        slopes.append(derivative(slopes[-1], variable))
    return slopes if slopes[-1] != ZERO else slopes[:-1]


def _power(variable: Name, exponent: int) -> Node:
    return product_of([(variable, Fraction(exponent))]) if exponent else ONE


def _over_factorial(tree: Node, k: int) -> Node:
    factors: list[tuple[Node, Fraction]] = [(tree, Fraction(1))]
    factors += [(Number(float(j), str(j)), Fraction(-1)) for j in range(2, k + 1)]
    return product_of(factors)
