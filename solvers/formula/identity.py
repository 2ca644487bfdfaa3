"""Does a formula vanish identically?  By its algebra, or else at many places that no formula was made for.

What remains of a sum that vanishes is rounding: small beside its terms.  A formula made of functions without kinks that
vanishes at so many unrelated places vanishes everywhere (Schwartz, 1980, for polynomials; from memory).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from random import Random

from solvers.formula.algebra import ZERO
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import Name, Negative, Node, Sum, walk

PLACES = 60
LEAST = 20
"""So many places at the least have to be in the domain of the formula."""
ROUNDING = 1e-11
LARGEST = 3.0
"""The logarithms of the sizes that names are given reach so far to both sides."""


def vanishes(tree: Node) -> bool:
    """Whether a formula without kinks, in names only, is zero whatever their values."""
    if tree == ZERO:
        return True
    names = sorted({(node.name, node.order) for node in walk(tree) if isinstance(node, Name)})
    random, seen = Random(1), 0
    for k in range(PLACES):
        reach = LARGEST if k % 2 else 0.5
        values = {name: random.choice((-1.0, 1.0)) * 10 ** random.uniform(-reach, reach) for name in names}
        if k % 4 < 2:  # roots and logarithms have values for positive numbers
            values = {name: abs(value) for name, value in values.items()}
        try:
            total, size = _value(tree, values), sum(abs(_value(term, values)) for term in _terms(tree))
        except (ValueError, ZeroDivisionError, OverflowError):
            continue
        if not abs(total) <= ROUNDING * size:
            return False
        seen += 1
    return seen >= LEAST


def _value(tree: Node, values: Mapping[tuple[str, int], float]) -> float:
    return float(evaluate(tree, lambda name, order: values[name, order], REAL))


def _terms(tree: Node) -> Iterator[Node]:
    """What is added up in a formula; what a sum is multiplied by is left out, and so is a common sign."""
    match tree:
        case Sum(terms=terms):
            for term in terms:
                yield from _terms(term)
        case Negative(operand=operand):
            yield from _terms(operand)
        case _:
            yield tree
