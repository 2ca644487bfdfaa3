"""Which values at places the conditions fix outright, and which conditions say too much about them."""

from __future__ import annotations

from collections.abc import Iterator

from service.assemble.linear import Form, System, Variable, linear
from service.assemble.quoting import quoted
from service.complaints import Complaint, listing
from solvers.formula.nodes import At, Name, Node
from solvers.problem import Condition, Problem


class FixedValues:
    """The linear equalities of a problem, solved.

    A variable is (unknown, order, place index), or the name of a parameter.
    """

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.constants = {constant.name: constant.value for constant in problem.constants}
        self.parameters = {parameter.name for parameter in problem.parameters}
        self.unknowns = {unknown.name for unknown in problem.unknowns}
        self.equalities: list[Condition] = []
        self.system = System()
        for condition in problem.endpoints:
            form = self.form(condition.body)
            limit = self.form(condition.lower) if condition.equality and condition.lower is not None else None
            if form is not None and limit is not None:
                self.system.add(len(self.equalities), form.plus(limit, -1.0))
                self.equalities.append(condition)
        self.fixed = self.system.fixed()

    def form(self, node: Node) -> Form | None:
        """The linear form of a tree in values at places and parameters, or None."""
        return linear(node, self.constants, self.variable)

    def variable(self, node: Node) -> Variable | None:
        """What a name or a value at a place is in the linear forms."""
        if isinstance(node, At) and node.name in self.unknowns:
            return node.name, node.order, self.place(node.place)
        if isinstance(node, Name) and node.name in self.parameters:
            return node.name
        return None

    def place(self, tree: Node) -> int:
        """Which place a tree is."""
        return next(index for index, place in enumerate(self.problem.places) if place.tree is tree)

    def value(self, variable: Variable) -> float | None:
        """The value of a variable where the conditions fix it."""
        found = self.fixed.get(variable)
        return None if found is None else found[0]

    def told_by(self, variables: set[Variable]) -> list[str]:
        """The conditions, as the user wrote them, that fix some variables."""
        return [
            quoted(self.equalities[index].label)
            for index in sorted({index for variable in variables for index in self.fixed[variable][1]})
        ]

    def conflicts(self) -> Iterator[Complaint]:
        """Equalities that repeat or contradict others."""
        for conflict in self.system.conflicts:
            condition = self.equalities[conflict.condition]
            others = listing(quoted(self.equalities[index].label) for index in conflict.others)
            if not others:
                message, hint = f"{quoted(condition.label)} says nothing about the curve.", "Leave it out."
                code = "contradiction" if conflict.contradicts else "repetition"
                if conflict.contradicts:
                    message = f"{quoted(condition.label)} can never hold."
            elif conflict.contradicts:
                code, message = "contradiction", f"{quoted(condition.label)} contradicts {others}."
                hint = "Leave one of them out, or change its number."
            else:
                code, message = "repetition", f"{quoted(condition.label)} follows from {others} already."
                hint = "Leave it out."
            yield Complaint(condition.pointer, None, code, message, hint)
