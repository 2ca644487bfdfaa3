"""Kinks at given values of x in a problem that is about to be told in a parameter: where x has them becomes free."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from solvers.formula.nodes import SIDE, Call, Name, Node, Number
from solvers.formula.substitute import substitute
from solvers.problem import Parameter, Problem
from solvers.transcription.limits import number

BEFORE, BEHIND = Number(-1.0, "-1"), Number(2.0, "2")
"""Where in the parameter, from 0 to 1, kinks lie that are outside; what is proved of all ranges must not know it."""


def reformulated(problem: Problem, change: Callable[[Node], Node]) -> Problem:
    """A problem without arcs with all formulas changed that hold along the curve or of its ends."""
    return replace(
        problem,
        integrand=None if problem.integrand is None else change(problem.integrand),
        endpoint=None if problem.endpoint is None else change(problem.endpoint),
        where=tuple((name, change(tree)) for name, tree in problem.where),
        dynamics=tuple(replace(line, left=change(line.left), right=change(line.right)) for line in problem.dynamics),
        endpoints=tuple(replace(c, body=change(c.body)) for c in problem.endpoints),
        constraints=tuple(replace(c, body=change(c.body)) for c in problem.constraints),
        integrals=tuple(replace(c, body=change(c.body)) for c in problem.integrals),
    )


def at_free_places(problem: Problem) -> Problem:
    """The problem with a parameter, a share of the way from end to end, for every kink inside; its places stay."""
    inner = problem.places[1:-1]
    if not inner:
        return problem
    constants = {c.name: c.value for c in problem.constants}
    constants |= {p.name: p.guess for p in problem.parameters if p.guess is not None}  # where an end is free
    first, *values, last = (number(place.tree, constants) for place in problem.places)
    free = tuple(
        Parameter(place.label, 0.0, 1.0, guess=(value - first) / (last - first))
        for place, value in zip(inner, values, strict=True)
    )
    names: dict[Node, Node] = {place.tree: Name(place.label) for place in inner}

    def moved(node: Node) -> Node | None:
        if isinstance(node, Call) and node.function == SIDE:
            middle, place = node.arguments
            outside = BEFORE if number(place, constants) <= first else BEHIND
            return Call(SIDE, (middle, names.get(place, outside)))
        return None

    changed = reformulated(problem, lambda tree: substitute(tree, moved))
    return replace(changed, parameters=(*problem.parameters, *free))
