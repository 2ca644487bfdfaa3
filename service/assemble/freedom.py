"""What is free in a problem: functions that no equation gives, and the values at places that conditions may fix."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from service.assemble.matching import Matching
from service.assemble.orders import derivatives, reach_of
from solvers.formula.nodes import At, Name, Node, children, walk
from solvers.problem import Condition, Problem

Freedom = tuple[str, int, int] | str
"""(unknown, derivative, place) for a value, or the name of a parameter."""


@dataclass(frozen=True, slots=True)
class EquationAlong:
    """An equation that holds at every point: a line of dynamics or a pointwise equality."""

    trees: tuple[Node, ...]
    label: str
    pointer: str


class Structure:
    """Who depends on whom, by the names in the equations only.

    `free` are the unknowns that some choice is left for along the curve, `equations` all that holds at every point,
    `matching` serves each equation one unknown that it determines.
    """

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.reach = reach_of(problem.where)
        self.orders = {unknown.name: unknown.order for unknown in problem.unknowns}
        self.parameters = {parameter.name for parameter in problem.parameters}
        self.place_parameters = {place.tree.name for place in problem.places if isinstance(place.tree, Name)}
        self.place_parameters &= self.parameters
        self.equations = [
            EquationAlong((line.left, line.right), line.label, line.pointer) for line in problem.dynamics
        ] + [
            EquationAlong((condition.body,), condition.label, condition.pointer)
            for condition in problem.constraints
            if condition.equality
        ]
        self.mentions = [self.names(equation.trees) for equation in self.equations]
        self.matching = Matching([sorted(found & self.orders.keys()) for found in self.mentions])
        self.free = self.matching.spare(self.orders)
        self.floating = self._floating()

    def names(self, trees: Iterable[Node]) -> set[str]:
        """The unknowns and parameters that trees depend on, abbreviations opened."""
        found = {name for name, _ in derivatives(trees, self.reach)}
        return found & (self.orders.keys() | self.parameters)

    def _floating(self) -> set[str]:
        """The unknowns whose highest derivative is open at a single point: only its course on intervals counts."""
        given = {line.determines[0]: line for line in self.problem.dynamics if line.determines}
        floating = {name for name in self.free if name not in given}
        while True:
            more = {
                name
                for name, line in given.items()
                if name not in floating
                and any(
                    other in floating and order == self.orders[other]
                    for other, order in derivatives([line.right], self.reach)
                )
            }
            if not more:
                return floating
            floating |= more

    def influences(self, name: str) -> set[str]:
        """Unknowns and parameters that have a say in the course of an unknown that the equations determine."""
        served = self.matching.serves
        found, waiting = {name}, [name]
        for current in waiting:
            for other in self.mentions[served[current]] if current in served else ():
                if other not in found:
                    found.add(other)
                    waiting.append(other)
        return found

    def wants(self, condition: Condition) -> set[Freedom] | None:
        """The freedoms that a condition can be met by; None where a free function leaves as many as one likes."""
        found: set[Freedom] = set()
        for node in walk(condition.body):
            if isinstance(node, At):
                for name, order in derivatives([Name(node.name, node.order)], self.reach):
                    found |= self.at(name, order, node.place)
            elif isinstance(node, Name) and node.name in self.parameters:
                found.add(node.name)
        along = self._along(condition.body)
        if along & self.free:
            return None
        for name in along:
            found |= {name} if name in self.parameters else self.determined(name)
        return found

    def _along(self, body: Node) -> set[str]:
        """What stands without a place: under an integral, or in an abbreviation of constants and parameters."""
        found: set[str] = set()
        stack = [body]
        while stack:
            node = stack.pop()
            if isinstance(node, At):
                continue
            if isinstance(node, Name):
                found |= self.names([node])
            stack.extend(children(node))
        return found

    def at(self, name: str, order: int, place: Node) -> set[Freedom]:
        """The freedoms behind the value of a name at a place."""
        if name in self.parameters:
            return {name}
        if name == self.problem.independent and isinstance(place, Name) and place.name in self.parameters:
            return {place.name}
        if name not in self.orders:
            return set()
        index = next(index for index, known in enumerate(self.problem.places) if known.tree is place)
        if order < self.orders[name] and (index == 0 or name in self.free):
            return {(name, order, index)}
        if name in self.free:  # a highest derivative that the dynamics give from the values there
            served = self.matching.serves
            others = self.mentions[served[name]] if name in served else {name}
            return {
                freedom
                for other in others
                for freedom in (
                    [other] if other in self.parameters else [(other, i, index) for i in range(self.orders[other])]
                )
            }
        return self.determined(name)

    def determined(self, name: str) -> set[Freedom]:
        """The initial values and parameters that fix the course of an unknown without freedom of its own."""
        found: set[Freedom] = set(self.place_parameters)
        for other in self.influences(name):
            if other in self.parameters:
                found.add(other)
            else:
                found |= {(other, order, 0) for order in range(self.orders[other])}
        return found
