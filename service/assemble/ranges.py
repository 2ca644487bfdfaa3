"""Bounds and limits against each other, and against the values that the conditions fix."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from contextlib import suppress

from service.assemble.domain import value_of
from service.assemble.linear import Variable, linear
from service.assemble.quoting import quoted
from service.assemble.values import FixedValues
from service.complaints import Complaint, listing, pointer
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import At, Name, Node, walk
from solvers.problem import Condition, Problem
from solvers.units import Unit

MOST_EVALUATED = 100_000
"""Nodes that are evaluated at places in one document."""

SLACK = 1e-9
"""Relative to the larger of value and limit: rounding."""


def excluded_values(problem: Problem, values: FixedValues) -> Iterator[Complaint]:
    """Bounds that leave out a fixed value, and conditions that fail at fixed values."""
    for unknown in problem.unknowns:
        for index, place in enumerate(problem.places):
            variable = (unknown.name, 0, index)
            what = f"{unknown.name}({place.label})"
            yield from _bounds(
                "unknowns", unknown.name, what, variable, (unknown.lower, unknown.upper), unknown.unit, values
            )
    for parameter in problem.parameters:
        within = (parameter.lower, parameter.upper)
        yield from _bounds("parameters", parameter.name, parameter.name, parameter.name, within, parameter.unit, values)
    evaluation = _Evaluation(problem, values)
    for condition in problem.constraints:
        for index in evaluation.places:
            yield from _limit(condition, index, evaluation)
    for condition in problem.endpoints:
        yield from _limit(condition, None, evaluation)


def _bounds(
    member: str, name: str, what: str, variable: Variable, within: tuple[float, float], unit: Unit, values: FixedValues
) -> Iterator[Complaint]:
    value = values.value(variable)
    if value is None or _inside(value, *within):
        return
    by = listing(values.told_by({variable}))
    lower, upper = (f"{limit / unit.factor:.6g}" for limit in within)
    shown = f"{value / unit.factor:.6g} {unit.text}".strip()
    message = f"By {by}, {what} is {shown}: outside of the bounds {lower} to {upper}."
    hint = "Widen the bounds, or change the condition."
    yield Complaint(pointer(member, name, "within"), None, "excluded", message, hint)


def _inside(value: float, lower: float, upper: float) -> bool:
    above = value >= lower - SLACK * max(abs(value), abs(lower)) if math.isfinite(lower) else True
    below = value <= upper + SLACK * max(abs(value), abs(upper)) if math.isfinite(upper) else True
    return above and below


def _examined(problem: Problem) -> Sequence[int]:
    """The places at which limits are tried: all, or only the ends where that would take long."""
    trees = [tree for _, tree in problem.where] + [condition.body for condition in problem.constraints]
    size = sum(1 for tree in trees for _ in walk(tree))
    last = len(problem.places) - 1
    return range(last + 1) if size * len(problem.places) <= MOST_EVALUATED else (0, last)


class _Evaluation:
    """Values of formulas from the values that conditions fix, each with the variables that went into it."""

    def __init__(self, problem: Problem, values: FixedValues) -> None:
        self.problem = problem
        self.values = values
        self.places = _examined(problem)
        self.abbreviations: dict[tuple[str, int], tuple[float, frozenset[Variable]]] = {}
        for index in self.places:
            for name, tree in problem.where:  # each uses only earlier ones
                with suppress(ArithmeticError, ValueError, LookupError):
                    self.abbreviations[name, index] = self.value(tree, index)

    def value(self, tree: Node, index: int | None) -> tuple[float, frozenset[Variable]]:
        """The value of a tree along the curve at place `index`, or of values at places and parameters (None).

        Raises LookupError where it depends on more than is fixed, ArithmeticError and ValueError where it has none.
        """
        used: set[Variable] = set()

        def look_up(name: str, order: int, at: int | None) -> float:
            if name in self.values.constants:
                return self.values.constants[name]
            variable: Variable = name if name in self.values.parameters else (name, order, at)
            if at is not None and (name, at) in self.abbreviations:
                found, through = self.abbreviations[name, at]
                used.update(through)
                return found
            if at is not None and name == self.problem.independent:
                place = self.problem.places[at].tree
                if not (isinstance(place, Name) and place.name in self.values.parameters):
                    return value_of(place, self.values.constants)
                variable = place.name
            found = self.values.fixed[variable][0]
            used.add(variable)
            return found

        def at_place(name: str, order: int, place: Node, side: str) -> float:
            return look_up(name, order, self.values.place(place))

        found = evaluate(tree, lambda name, order: look_up(name, order, index), REAL, at_place)
        return float(found), frozenset(used)


def _limit(condition: Condition, index: int | None, evaluation: _Evaluation) -> Iterator[Complaint]:
    """A condition that fails on fixed values."""
    values = evaluation.values
    try:
        found, used = evaluation.value(condition.body, index)
        lower, upper = (
            otherwise if limit is None else value_of(limit, values.constants)
            for otherwise, limit in ((-math.inf, condition.lower), (math.inf, condition.upper))
        )
    except (ArithmeticError, ValueError, LookupError):
        return
    # Rounding of differences such as x^2 + y^2 - r^2 is not small beside the result, so equalities get some room.
    room = 1e-6 if condition.equality else 0.0
    if not used or not math.isfinite(found) or _inside(found, lower - room, upper + room):
        return
    place = "" if index is None else f" at {evaluation.problem.places[index].label}"
    by = values.told_by(set(used))
    message = f"{quoted(condition.label)} cannot hold{place} with {listing(by)}."
    yield Complaint(condition.pointer, None, "excluded", message, "Change the condition, or the values at the places.")


def empty_ranges(problem: Problem, constants: Mapping[str, float]) -> Iterator[Complaint]:
    """Limits on one and the same linear form that leave no value, or only one."""
    unknowns = {unknown.name for unknown in problem.unknowns}
    parameters = {parameter.name for parameter in problem.parameters}
    ranges: dict[tuple[tuple[Variable, float], ...], tuple[float, float, str]] = {}
    for unknown in problem.unknowns:
        ranges[((unknown.name, 0), 1.0),] = (unknown.lower, unknown.upper, f"the bounds of {unknown.name}")
    for parameter in problem.parameters:
        ranges[(parameter.name, 1.0),] = (parameter.lower, parameter.upper, f"the bounds of {parameter.name}")

    def variable(node: Node) -> Variable | None:
        if isinstance(node, At) and node.name in unknowns:
            place = next(index for index, place in enumerate(problem.places) if place.tree is node.place)
            return node.name, node.order, place
        if isinstance(node, Name):
            return node.name if node.name in parameters else (node.name, node.order) if node.name in unknowns else None
        return None

    for condition in (*problem.constraints, *(one for one in problem.endpoints if not one.equality)):
        try:
            lower = -math.inf if condition.lower is None else value_of(condition.lower, constants)
            upper = math.inf if condition.upper is None else value_of(condition.upper, constants)
        except (ArithmeticError, ValueError, LookupError):
            continue
        if not condition.equality and condition.lower is not None and condition.upper is not None and lower >= upper:
            left = "one value only" if lower == upper else "no value"
            message = f"The limits in {quoted(condition.label)} leave {left}."
            hint = "Write an equality with =." if lower == upper else "Swap the limits."
            yield Complaint(condition.pointer, None, "empty-range", message, hint)
            continue
        form = linear(condition.body, constants, variable)
        if form is None or not form.terms:
            continue
        first = min(form.terms, key=repr)
        scale = form.terms[first]
        key = tuple(sorted(((name, weight / scale) for name, weight in form.terms.items()), key=repr))
        low, high = sorted(((lower - form.constant) / scale, (upper - form.constant) / scale))
        before = ranges.get(key)
        if before is not None and not (_inside(max(low, before[0]), -math.inf, min(high, before[1]))):
            message = f"{quoted(condition.label)} leaves no value within {before[2]}."
            yield Complaint(condition.pointer, None, "empty-range", message, "Change one of the limits.")
            continue
        both = (low, high) if before is None else (max(low, before[0]), min(high, before[1]))
        told = quoted(condition.label)
        ranges[key] = (*both, told if before is None else f"{before[2]} and {told}")
