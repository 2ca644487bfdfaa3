"""The order of every unknown, and which dynamics equations give a highest derivative outright."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from service.assemble.formulas import Formulas
from service.assemble.names import Kind, Names
from solvers.formula.nodes import At, Name, Node, walk
from solvers.problem import Equation


def find_orders(formulas: Formulas, names: Names) -> dict[str, int]:
    """The highest derivative of every unknown anywhere, abbreviations and conditions at places included."""
    orders = dict.fromkeys(names.of(Kind.UNKNOWN), 0)
    for formula in formulas.moving():
        for node in formula.nodes:
            if isinstance(node, Name | At) and node.name in orders:
                orders[node.name] = max(orders[node.name], node.order)
    return orders


Reach = Mapping[str, frozenset[tuple[str, int]]]
"""What every abbreviation depends on: names with their orders, none of them an abbreviation."""


def reach_of(where: Iterable[tuple[str, Node]]) -> Reach:
    """The reach of abbreviations that come in an order in which each uses only earlier ones."""
    reach: dict[str, frozenset[tuple[str, int]]] = {}
    for name, tree in where:
        reach[name] = frozenset(derivatives([tree], reach))
    return reach


def derivatives(trees: Iterable[Node], reach: Reach) -> set[tuple[str, int]]:
    """Every (name, order) that the trees depend on, places left aside, abbreviations opened."""
    found: set[tuple[str, int]] = set()
    for tree in trees:
        for node in walk(tree):
            if isinstance(node, Name | At):
                found |= reach.get(node.name) or {(node.name, node.order)}
    return found


def explicit(equations: Iterable[Equation], orders: Mapping[str, int], reach: Reach) -> list[Equation]:
    """The equations, with `determines` where one side is just a highest derivative that the other is free of."""
    taken: set[tuple[str, int]] = set()
    turned: list[Equation] = []
    for equation in equations:
        turned.append(equation)
        for left, right in ((equation.left, equation.right), (equation.right, equation.left)):
            if not isinstance(left, Name) or not left.order or orders.get(left.name) != left.order:
                continue
            target = (left.name, left.order)
            if target not in taken and target not in derivatives([right], reach):
                taken.add(target)
                turned[-1] = replace(equation, left=left, right=right, determines=target)
                break
    return turned
