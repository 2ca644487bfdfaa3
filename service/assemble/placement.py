"""Values at places, integrals and what runs along the curve: each in the formulas where it has a meaning."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import chain

from service.assemble.formulas import Expression, Formula, Formulas
from service.assemble.meaning import GIVEN, Meaning
from service.assemble.names import Kind
from service.complaints import Complaint, listing, sentence
from solvers.formula.nodes import At, Call, Name, children


def misplaced(formulas: Formulas, meaning: Meaning) -> Iterator[Complaint]:
    """Values at places and integrals where a formula holds at every point, and the other way round."""
    for integrand in formulas.integrands:
        yield from _nonlocal(integrand, meaning, "holds at every point")
    for equation in chain(formulas.dynamics, *(arc.dynamics for arc in formulas.arcs)):
        yield from _nonlocal(equation, meaning, "holds at every point")
    for abbreviation in chain(*formulas.definitions.values()):
        traits = meaning.of(abbreviation.tree)
        if traits.moving and (traits.placed or traits.integral):
            message = "This abbreviation mixes what runs along the curve with values at places or integrals."
            hint = "Split it in two; a value that other formulas need can be a parameter, fixed by a condition."
            yield abbreviation.complaint(abbreviation.tree.span, "misplaced", message, hint)
    if formulas.endpoint is not None:
        yield from _running(formulas.endpoint, meaning)
    for statement in formulas.endpoints:
        yield from _running(statement, meaning)
    for formula in chain(formulas.constraints, *(arc.constraints for arc in formulas.arcs)):
        traits = meaning.of(formula.tree)
        if traits.moving and (traits.placed or traits.integral):
            yield from _nonlocal(formula, meaning, "holds at every point because of the other names in it")
    for observed in formulas.observed:
        yield from _nonlocal(observed, meaning, "is taken at the place of each point")
        if meaning.of(observed.tree).fixed:
            message = "Nothing in this formula depends on the curve or a parameter: there is nothing to fit."
            yield observed.complaint(observed.tree.span, "says-nothing", message, "Name the unknown that was measured.")
    for any_formula in formulas.all():
        yield from _inside_integral(any_formula, meaning)
        yield from _placed_twice(any_formula, meaning)
    for end in chain(formulas.ends, *(arc.ends for arc in formulas.arcs)):
        yield from _end(end, meaning)


def _nonlocal(formula: Formula, meaning: Meaning, why: str) -> Iterator[Complaint]:
    for node in formula.nodes:
        traits = meaning.of(node) if isinstance(node, Name | At | Call) else GIVEN
        if traits.placed and isinstance(node, Name | At):
            message = f"A value at a place cannot stand here: the formula {why}."
            yield formula.complaint(node.span, "misplaced", message, _BY_PARAMETER)
            return
        if traits.integral and isinstance(node, Name | Call):
            message = f"An integral cannot stand here: the formula {why}."
            yield formula.complaint(node.span, "misplaced", message, _BY_PARAMETER)
            return


_BY_PARAMETER = "Make it a parameter and fix that by a condition: p = integral(…), or p = x(0)."


def _running(formula: Formula, meaning: Meaning) -> Iterator[Complaint]:
    """In a formula of values at places: names without a place, and integrals."""
    stack = list(reversed(formula.sides))
    while stack:
        node = stack.pop()
        traits = meaning.of(node) if isinstance(node, Name | Call) else GIVEN
        if isinstance(node, At):
            continue
        if isinstance(node, Name) and traits.moving:
            shown = node.name + "'" * node.order
            independent = node.name == meaning.names.independent
            message = f"“{shown}” needs a place here: this holds at places, not all along."
            hint = "Write the place itself." if independent else f"Write {shown}(0), for instance, or use constraints."
            yield formula.complaint(node.span, "misplaced", message, hint)
        elif traits.integral:
            message = "An integral cannot stand here."
            yield formula.complaint(node.span, "misplaced", message, _INTEGRALS)
        else:
            stack.extend(reversed(children(node)))


_INTEGRALS = "Put it into integrand or constraints; or make it a parameter p with the constraint p = integral(…)."


def _inside_integral(formula: Formula, meaning: Meaning) -> Iterator[Complaint]:
    for node in formula.nodes:
        if isinstance(node, Call) and node.function == "integral":
            traits = meaning.of(*node.arguments)
            if traits.placed or traits.integral:
                message = "Inside an integral no other integral and no value at a place can stand."
                yield formula.complaint(node.span, "misplaced", message, _BY_PARAMETER)
                return


def _placed_twice(formula: Formula, meaning: Meaning) -> Iterator[Complaint]:
    for node in formula.nodes:
        traits = meaning.traits.get(node.name) if isinstance(node, At) else None
        if isinstance(node, At) and traits is not None and not traits.moving:
            message = f"The abbreviation “{node.name}” does not run along the curve: it has no value at a place."
            yield formula.complaint(node.span, "no-place", message, f"Write {node.name} alone.")


def _end(end: Expression, meaning: Meaning) -> Iterator[Complaint]:
    traits = meaning.of(end.tree)
    if traits.moving or traits.placed or traits.integral or (traits.parameter and not isinstance(end.tree, Name)):
        message = f"An end of {meaning.names.independent} is a number, a formula of constants, or a parameter's name."
        hint = f"{listing(meaning.names.of(Kind.PARAMETER), 'or') or 'a parameter'} can be a free end."
        yield end.complaint(end.tree.span, "bad-place", message, sentence(hint))
