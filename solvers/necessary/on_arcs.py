"""The necessary conditions of a problem of arcs in symbols: those along every arc, and what holds where arcs meet.

At a junction the momenta (or costates) of what is continuous and otherwise free there are continuous, and so is the
energy (or the Hamiltonian) where the place is free: the corner conditions.

References: Gelfand and Fomin (1963), Calculus of Variations, section 15 (Weierstrass-Erdmann); Bryson and Ho (1975),
Applied Optimal Control, section 3.7.                                                             # (from memory)
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from itertools import pairwise

from solvers.formula.algebra import bare
from solvers.formula.mathml import Range
from solvers.formula.nodes import At, Name, Node, Relation, children, walk
from solvers.formula.substitute import TooLargeError, at_place
from solvers.necessary.augmented import unused
from solvers.necessary.conditions import (
    Derivation,
    Necessary,
    NecessaryConditions,
    derive,
    extreme_controls,
    in_time,
    left_out,
    limits_left_out,
)
from solvers.problem import Arc, Problem

ALONG = ("Lagrangian", "Hamiltonian", "Euler-Lagrange", "costate", "stationarity", "first integral")


def necessary_on_arcs(problem: Problem, deadline: float | None = None) -> NecessaryConditions:
    """The conditions along every arc and at the junctions; too long ones and what comes too late are left out."""

    check = in_time(deadline)
    found: list[Necessary] = []
    notes: list[str] = []
    try:
        derivations = [derive(problem.along(arc), check) for arc in problem.arcs]
        for arc, derivation in zip(problem.arcs, derivations, strict=True):
            notes += [f"On {arc.name}: {note}" for note in _notes(derivation)]
            for condition in _along(arc, derivation):
                if (note := left_out(condition)) is None:
                    found.append(condition)
                else:
                    notes.append(note)
        for before, after in pairwise(zip(problem.arcs, derivations, strict=True)):
            found += [c for c in _junction(problem, before, after, check) if left_out(c) is None]
        if problem.observations:
            notes.append(
                "At each place of an observation the momenta or costates jump by the slope of the squares there."
            )
        notes.append("At the outer ends and at places between, what nothing fixes has its natural condition.")
    except TooLargeError as error:
        notes.append(f"The necessary conditions are left out: {error}.")
    except TimeoutError:
        notes.append("Some necessary conditions are left out: deriving them takes too long.")
    except ValueError as error:  # a table in a formula
        notes.append(f"Some necessary conditions are left out: {error}.")
    return NecessaryConditions(tuple(found), tuple(notes))


def _notes(derivation: Derivation) -> Iterator[str]:
    yield from derivation.augmented.notes
    yield from limits_left_out(derivation.problem)
    if not derivation.variational and (extreme := extreme_controls(derivation.problem, derivation.lowered)):
        yield extreme


def _along(arc: Arc, derivation: Derivation) -> Iterator[Necessary]:
    """What holds along an arc; numbers that may be free concern several arcs and are left out."""
    parameters = {parameter.name for parameter in derivation.problem.parameters}
    for condition in derivation.conditions():
        if condition.kind in ALONG and condition.subject not in parameters:
            yield replace(condition, subject=f"{condition.subject} on {arc.name}")


def _junction(
    problem: Problem, before: tuple[Arc, Derivation], after: tuple[Arc, Derivation], check: Callable[[], None]
) -> Iterator[Necessary]:
    """What is continuous where two arcs meet because nothing is asked of it there."""
    (left, first), (right, second) = before, after
    check()
    place = problem.places[left.last]
    momenta = [derivation.momenta if derivation.variational else derivation.costates() for _, derivation in
               (before, after)]  # fmt: skip
    asked = _asked(problem, left.last, left, right)
    jumping = {(jump.name, jump.order) for jump in problem.jumps if jump.place == left.last}
    extent = Range(problem.independent, problem.places[0].tree, problem.places[-1].tree)

    def corner(subject: str, one: Node, other: Node) -> Necessary:
        sides = (_sided(problem, one, place.tree, "-"), _sided(problem, other, place.tree, "+"))
        where = Relation((Name(problem.independent), place.tree), ("=",))
        return Necessary("corner", subject, Relation(sides, ("=",)), extent, where)

    for quantity in momenta[0]:
        if quantity in momenta[1] and quantity not in asked and quantity not in jumping:
            yield corner(quantity[0] + "'" * quantity[1], momenta[0][quantity], momenta[1][quantity])
    if _only_a_place(problem, place.tree):
        energies = [
            derivation.energy if derivation.variational else Name(unused(derivation.problem, "H"))
            for derivation in (first, second)
        ]
        yield corner(problem.independent, *energies)


def _asked(problem: Problem, place: int, before: Arc, after: Arc) -> set[tuple[str, int]]:
    """The quantities that a condition or the endpoint term is about at a place."""
    trees = [condition.body for condition in (*problem.endpoints, *problem.integrals)]
    trees += [condition.body for arc in problem.arcs for condition in arc.integrals]
    trees += [] if problem.endpoint is None else [problem.endpoint]
    found: set[tuple[str, int]] = set()
    for node in (node for tree in trees for node in walk(tree)):
        if isinstance(node, At) and node.place is problem.places[place].tree:
            found |= _behind(node, before) | _behind(node, after)
    return found


def _behind(node: At, arc: Arc) -> set[tuple[str, int]]:
    """What a value depends on, abbreviations opened."""
    where, found = dict(arc.where), set()
    stack: list[Node] = [Name(node.name, node.order)]
    while stack:
        for part in walk(stack.pop()):
            if isinstance(part, Name) and part.name in where:
                stack.append(where[part.name])
            elif isinstance(part, Name):
                found.add((part.name, part.order))
    return found


def _only_a_place(problem: Problem, tree: Node) -> bool:
    """Whether a place is a parameter that no formula uses otherwise."""
    if not isinstance(tree, Name) or tree.name not in {parameter.name for parameter in problem.parameters}:
        return False
    trees = [condition.body for condition in problem.conditions]
    trees += [] if problem.endpoint is None else [problem.endpoint]
    for arc in problem.arcs:
        trees += [
            *(part for _, part in arc.where),
            *(side for line in arc.dynamics for side in (line.left, line.right)),
        ]
        trees += [] if arc.integrand is None else [arc.integrand]
    stack = list(trees)
    while stack:
        node = stack.pop()
        if isinstance(node, Name) and node.name == tree.name:
            return False
        if not isinstance(node, At):
            stack.extend(children(node))
    return True


def _sided(problem: Problem, tree: Node, place: Node, side: str) -> Node:
    """A formula along the curve with its values on one side of a place."""
    fixed = {c.name for c in problem.constants} | {p.name for p in problem.parameters} | {"pi", problem.independent}
    names = {node.name for node in walk(tree) if isinstance(node, Name)} - fixed
    return at_place(tree, bare(place), side, problem.independent, names)
