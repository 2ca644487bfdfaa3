"""Limits of the states with kinks, stated at the places of these kinks too.

On the tip of an obstacle a curve may have a corner: there the limit pushes with a force of its own, as it does nowhere
else, and the costates jump.  A condition at that place has the multiplier for it.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from functools import partial

from solvers.formula.nodes import SIDE, Call, Name, Negative, Node, Number, walk
from solvers.formula.substitute import at_place, substitute, written_out
from solvers.problem import MIDDLE, Condition, Place, Problem

ONE = Number(1.0, "1")


def with_limits_at_kinks(problem: Problem, jumping: bool) -> Problem:
    """The problem with each limit of states that has kinks as a condition at their places besides.

    `jumping` says that formulas may jump there; then the limit holds on both sides.
    """
    return replace(problem, endpoints=(*problem.endpoints, *_stated(problem, jumping)))


def _stated(problem: Problem, jumping: bool) -> Iterator[Condition]:
    states = {(unknown.name, order) for unknown in problem.unknowns for order in range(unknown.order)}
    functions = {unknown.name for unknown in problem.unknowns}
    for constraint in problem.constraints:
        body = written_out(constraint.body, problem.where)
        names = {(node.name, node.order) for node in walk(body) if isinstance(node, Name) and node.name in functions}
        bent = {node.arguments[1] for node in walk(body) if isinstance(node, Call) and node.function == SIDE}
        if not names or not names <= states:
            continue
        for place in (place for place in problem.places[1:-1] if place.tree in bent):
            for side in (ONE, Negative(ONE)) if jumping else (ONE,):
                there = substitute(body, partial(_on_side, place=place, side=side))
                there = at_place(there, place.tree, "", problem.independent, functions)
                yield replace(constraint, body=there)


def _on_side(node: Node, place: Place, side: Node) -> Node | None:
    """What tells the side of a place, as it is on one side of this one."""
    if not (isinstance(node, Call) and node.function == SIDE):
        return None
    middle, other = node.arguments
    assert isinstance(middle, Name) and middle.name == MIDDLE
    return side if other == place.tree else Call(SIDE, (place.tree, other))
