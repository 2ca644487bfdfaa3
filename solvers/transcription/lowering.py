"""A problem of any order as one of first order: which quantities are states, which are free, what moves each state."""

from __future__ import annotations

from dataclasses import dataclass

from solvers.formula.nodes import Name, Node, walk
from solvers.problem import Condition, Equation, Problem

Quantity = tuple[str, int]
"""An unknown's name and the order of its derivative."""


def primed(quantity: Quantity) -> str:
    """The quantity as people write it: `x''`."""
    return quantity[0] + "'" * quantity[1]


@dataclass(frozen=True, slots=True)
class Lowered:
    """The first-order form.

    `states` are continuous along the curve; `controls` are free at every point; `given` maps a highest derivative to
    the formula that determines it.  `equalities` are the lines of the dynamics that determine nothing by themselves and
    so hold as constraints at every point.
    """

    problem: Problem
    states: tuple[Quantity, ...]
    controls: tuple[Quantity, ...]
    given: dict[Quantity, Node]
    equalities: tuple[Equation, ...]

    def slope_of(self, state: Quantity) -> Quantity | None:
        """The state that is the derivative of another, by its primes or by the dynamics (x' = v), if any is."""
        slope = (state[0], state[1] + 1)
        right = self.given.get(slope)
        if isinstance(right, Name):
            slope = (right.name, right.order)
        return slope if slope in self.states else None


def lower(problem: Problem) -> Lowered:
    """Give every derivative its role."""
    orders = {unknown.name: unknown.order for unknown in problem.unknowns}
    explicit: dict[Quantity, Equation] = {}
    equalities = []
    for equation in problem.dynamics:
        target = equation.determines
        if target and target[1] == orders[target[0]] and target[1] > 0 and target not in explicit:
            explicit[target] = equation
        else:
            equalities.append(equation)
    for target in _in_a_circle(problem, explicit):
        equalities.append(explicit.pop(target))
    states = tuple((name, k) for name, order in orders.items() for k in range(order))
    controls = tuple((name, order) for name, order in orders.items() if (name, order) not in explicit)
    given = {target: equation.right for target, equation in explicit.items()}
    return Lowered(problem, states, controls, given, tuple(equalities))


def _in_a_circle(problem: Problem, explicit: dict[Quantity, Equation]) -> list[Quantity]:
    """Highest derivatives whose formulas need each other; all but what breaks the circle stay explicit."""
    through: dict[str, set[Quantity]] = {}  # what each abbreviation needs

    def needs(tree: Node) -> set[Quantity]:
        found: set[Quantity] = set()
        for node in walk(tree):
            if isinstance(node, Name):
                if node.name in through:
                    found |= through[node.name]
                elif (node.name, node.order) in explicit:
                    found.add((node.name, node.order))
        return found

    for name, tree in problem.where:  # each uses only earlier ones
        through[name] = needs(tree)
    graph = {target: needs(equation.right) for target, equation in explicit.items()}
    removed: list[Quantity] = []
    settled: set[Quantity] = set()
    while len(settled) + len(removed) < len(graph):
        ready = [t for t in graph if t not in settled and t not in removed and graph[t] <= settled | set(removed)]
        if ready:
            settled.update(ready)
        else:
            removed.append(next(t for t in graph if t not in settled and t not in removed))
    return removed


def simple_bound(condition: Condition) -> Quantity | None:
    """The quantity that a pointwise condition bounds, where its body is nothing but that quantity."""
    body = condition.body
    return (body.name, body.order) if isinstance(body, Name) else None
