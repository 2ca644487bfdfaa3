"""Limits on `abs`, `max` and `min` as limits on their branches: abs(u) <= 1 says u <= 1 and u >= -1.

That holds where such a function is not to be large (`min`: not small), and is exact: nothing of it has to be rounded,
and the solver sees which branch rests on its limit.  Kinks that are given along the curve stay: their places are known.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from itertools import product

from service.assemble.meaning import Meaning
from solvers.formula.nodes import Call, Negative, Node, Number, Product, Sum
from solvers.formula.printer import text
from solvers.problem import Condition

MOST = 16
"""Branches of one condition beyond which it is left as it is."""


def in_branches(condition: Condition, meaning: Meaning) -> Iterator[Condition]:
    """The conditions on the branches of a condition's body; the condition itself where it has none."""
    upper = [] if condition.upper is None else _branches(condition.body, True, meaning)
    lower = [] if condition.lower is None else _branches(condition.body, False, meaning)
    if condition.equality or max(len(upper), len(lower)) <= 1 or len(upper) + len(lower) > MOST:
        yield condition
        return
    for branches, side in ((upper, replace(condition, lower=None)), (lower, replace(condition, upper=None))):
        yield from (_limited(branch, side) for branch in branches) if len(branches) > 1 else [side] * len(branches)


def _branches(tree: Node, greatest: bool, meaning: Meaning) -> list[Node]:
    """Formulas of which the value of a tree is always the greatest, or the least; only itself where there are none."""

    def of(part: Node, greatest: bool) -> list[Node]:
        return _branches(part, greatest, meaning)

    match tree:
        case Call(function="abs", arguments=(inner,)) if greatest and meaning.of(inner).sought:
            return [*of(inner, True), *(Negative(branch) for branch in of(inner, False))]
        case Call(function="max" | "min" as function, arguments=arguments) if (
            greatest is (function == "max") and meaning.of(*arguments).sought
        ):
            return [branch for argument in arguments for branch in of(argument, greatest)]
        case Negative(operand=operand):
            return [replace(tree, operand=branch) for branch in of(operand, not greatest)]
        case Sum(terms=terms, minus=minus):
            parts = (of(term, greatest is not less) for term, less in zip(terms, minus, strict=True))
            return [replace(tree, terms=found) for found in product(*parts)]
        case Product(factors=factors, over=over):
            others = [k for k, part in enumerate(factors) if not (isinstance(part, Number) and part.value >= 0)]
            if len(others) == 1 and not over[others[0]]:
                at = others[0]
                found = of(factors[at], greatest)
                return [replace(tree, factors=(*factors[:at], branch, *factors[at + 1 :])) for branch in found]
    return [tree]


def _limited(branch: Node, side: Condition) -> Condition:
    """One branch limited on the side on which its condition is."""
    while isinstance(branch, Negative):
        lower, upper = (None if limit is None else _opposite(limit) for limit in (side.upper, side.lower))
        side, branch = replace(side, lower=lower, upper=upper), branch.operand
    limit, sign = (side.upper, "<=") if side.lower is None else (side.lower, ">=")
    assert limit is not None
    match branch, limit:
        case Sum(terms=(left, right), minus=(False, True)), Number(value=0.0):
            label = f"{text(left)} {sign} {text(right)}"
        case _:
            label = f"{text(branch)} {sign} {text(limit)}"
    return replace(side, body=branch, label=label)


def _opposite(tree: Node) -> Node:
    return tree.operand if isinstance(tree, Negative) else Negative(tree)
