"""The functional with its equalities appended by multipliers, in symbols."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from itertools import chain, count

from solvers.formula.algebra import add, bare, multiply, negative
from solvers.formula.derivative import derivative, total_derivative
from solvers.formula.mathml import GREEK
from solvers.formula.nodes import At, Call, Name, Node, walk
from solvers.formula.parser import DEPTH_LIMIT
from solvers.formula.substitute import expander
from solvers.observations import terminal as terminal_of
from solvers.problem import Condition, Problem
from solvers.transcription.lowering import Lowered

_SECOND_CHOICE = {"H": "ℋ", "L": "ℒ", "p": "ψ", "λ": "Λ", "μ": "κ", "ν": "χ", "C": "E"}

EXPANDED_LIMIT = 4_000
"""Nodes of a formula whose abbreviations are written out."""


@dataclass(frozen=True, slots=True)
class Augmented:
    """Integrand and endpoint term with their multipliers; no abbreviation is left.

    `along` are the equalities that hold everywhere times their multipliers: it belongs to the integrand, but is zero on
    the curve.  `functions` are the names that vary along the curve: the unknowns and those multipliers.
    """

    integrand: Node
    along: Node
    terminal: Node
    functions: frozenset[str]
    expand: Callable[[Node], Node]  # a tree of the problem, bare and with its abbreviations written out
    notes: tuple[str, ...]


def augment(problem: Problem, lowered: Lowered, check: Callable[[], None]) -> Augmented:
    """Append the equalities: λ for integral conditions, ν for conditions on ends, μ for pointwise ones.

    Values that a condition simply prescribes need no multiplier: their variation is zero.  Conditions on ends and in
    the integral have one even as inequalities.  Raises TooLargeError.
    """
    unknowns = frozenset(unknown.name for unknown in problem.unknowns)

    def rate(tree: Node) -> Node:
        return total_derivative(tree, problem.independent, unknowns, check)

    where = [(name, bare(tree)) for name, tree in problem.where]
    write_out = expander(where, problem.independent, unknowns, rate, nodes=EXPANDED_LIMIT, levels=DEPTH_LIMIT)

    def expand(tree: Node) -> Node:
        return write_out(bare(tree))

    def excess(condition: Condition) -> Node:
        limit = condition.lower if condition.lower is not None else condition.upper
        assert limit is not None
        return add([expand(condition.body), negative(expand(limit))])

    integrand = [expand(problem.integrand)] if problem.integrand is not None else []
    endpoint = terminal_of(problem, at_ends_only=True)  # what is observed between the ends makes costates jump there
    terminal = [expand(endpoint)] if endpoint is not None else []
    notes = []
    coupling = tuple(condition for condition in problem.endpoints if prescribed(problem, condition) is None)
    for letter, conditions in (("λ", problem.integrals), ("ν", coupling)):
        for multiplier, condition in zip(_numbered(problem, letter, len(conditions)), conditions, strict=True):
            body = excess(condition)
            integrals = dict.fromkeys(n for n in walk(body) if isinstance(n, Call) and n.function == "integral")
            for integral in integrals:
                weight = derivative(body, integral, check)
                integrand.append(multiply([Name(multiplier), weight, integral.arguments[0]]))
            if _varies(problem, body):
                terminal.append(multiply([Name(multiplier), body]))
            zero = "" if condition.equality else "; it is zero where that does not bind"
            notes.append(f"{multiplier} is the multiplier of {condition.label}{zero}.")
    along = [(add([expand(line.left), negative(expand(line.right))]), line.label) for line in lowered.equalities]
    along += [(excess(condition), condition.label) for condition in problem.constraints if condition.equality]
    varying = _numbered(problem, "μ", len(along))
    zero_terms = [multiply([Name(multiplier), body]) for multiplier, (body, _) in zip(varying, along, strict=True)]
    for multiplier, (_, label) in zip(varying, along, strict=True):
        notes.append(f"{multiplier} is the multiplier of {label}; it varies along the curve.")
    functions = unknowns | set(varying)
    return Augmented(add(integrand), add(zero_terms), add(terminal), functions, expand, tuple(notes))


def prescribed(problem: Problem, condition: Condition) -> At | None:
    """The value at a place that the condition sets, where it does nothing else."""
    body = bare(condition.body)
    abbreviations = {name for name, _ in problem.where}
    return body if condition.equality and isinstance(body, At) and body.name not in abbreviations else None


def unused(problem: Problem, letter: str) -> str:
    """The letter, or another one where a name of the problem looks like it."""
    taken = [problem.independent, *(name for name, _ in problem.where)]
    for records in (problem.unknowns, problem.constants, problem.parameters):
        taken += [record.name for record in records]
    bases = {re.split(r"[\d_]", name)[0] for name in taken}
    bases |= {GREEK.get(base, base) for base in bases}
    names = chain((letter, _SECOND_CHOICE[letter]), (letter * times for times in count(2)))
    return next(name for name in names if name not in bases)


def _numbered(problem: Problem, letter: str, number: int) -> list[str]:
    letter = unused(problem, letter)
    return [letter] if number == 1 else [f"{letter}{index + 1}" for index in range(number)]


def _varies(problem: Problem, tree: Node) -> bool:
    """Whether the tree holds a value at a place or a parameter."""
    parameters = {parameter.name for parameter in problem.parameters}
    return any(isinstance(n, At) or (isinstance(n, Name) and n.name in parameters) for n in walk(tree))
