"""Whether a problem is well posed, as far as one can tell before solving: conditions counted, contradictions named."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from service.assemble.freedom import Freedom, Structure
from service.assemble.matching import Matching
from service.assemble.orders import derivatives, reach_of
from service.assemble.quoting import quoted
from service.assemble.ranges import empty_ranges, excluded_values
from service.assemble.values import FixedValues
from service.complaints import Complaint, Refused, Stage, listing, refuse
from solvers.forms.beside import side_by_side
from solvers.formula.nodes import At, Name, Node, walk
from solvers.observations import placed, terminal
from solvers.problem import Condition, Problem

MOST_NAMED = 4
"""Most equations that a complaint about too many conditions names."""


def check(problem: Problem) -> None:
    """Raise `Refused` (stage conditions) where the problem cannot have a solution, or not one solution."""
    if not problem.arcs:
        _check(problem)
        return
    beside = side_by_side(problem)
    try:
        _check(beside.problem)
    except Refused as refused:
        told: dict[tuple[str, str], Complaint] = {}
        for complaint in refused.complaints:
            place = beside.parted(complaint.pointer)[0]
            message, hint = beside.told(complaint.message), beside.told(complaint.hint)
            told.setdefault((place, complaint.code), replace(complaint, pointer=place, message=message, hint=hint))
        raise Refused(refused.stage, told.values()) from None


def _check(problem: Problem) -> None:
    refuse(Stage.CONDITIONS, _pointless(problem))
    structure = Structure(problem)
    refuse(Stage.CONDITIONS, _unused(problem, structure))
    refuse(Stage.CONDITIONS, _too_many_equations(structure))
    refuse(Stage.CONDITIONS, _floating_values(problem, structure))
    values = FixedValues(problem)
    refuse(Stage.CONDITIONS, values.conflicts())
    refuse(Stage.CONDITIONS, _too_many_conditions(problem, structure))
    refuse(Stage.CONDITIONS, empty_ranges(problem, values.constants))
    refuse(Stage.CONDITIONS, excluded_values(problem, values))


def _pointless(problem: Problem) -> Iterator[Complaint]:
    """Lines of dynamics without an unknown, limits without anything that could meet them."""
    names = {unknown.name for unknown in problem.unknowns}
    reach = reach_of(problem.where)
    parameters = {parameter.name for parameter in problem.parameters}
    open_names = names | parameters
    if any(isinstance(place.tree, Name) and place.tree.name in parameters for place in problem.places):
        open_names.add(problem.independent)  # how far it runs is to be found
    for condition in (*problem.constraints, *problem.integrals):
        if not open_names & {name for name, _ in derivatives([condition.body], reach)}:
            message = f"{quoted(condition.label)} says nothing about an unknown or a parameter."
            yield Complaint(condition.pointer, None, "says-nothing", message, "Leave it out, or bring in an unknown.")
    for line in problem.dynamics:
        if not names & {name for name, _ in derivatives([line.left, line.right], reach)}:
            message = f"{quoted(line.label)} says nothing about an unknown."
            yield Complaint(line.pointer, None, "no-unknown", message, f"The unknowns are {listing(sorted(names))}.")


def _unused(problem: Problem, structure: Structure) -> Iterator[Complaint]:
    """Unknowns and parameters that are in no formula."""
    trees = [tree for tree in (problem.integrand, terminal(problem)) if tree is not None]
    trees += [tree for line in problem.dynamics for tree in (line.left, line.right)]
    trees += [condition.body for condition in (*problem.endpoints, *problem.constraints, *problem.integrals)]
    used = structure.names([*trees, *(place.tree for place in problem.places)])
    for member, names in (("unknowns", structure.orders), ("parameters", structure.parameters)):
        for name in sorted(set(names) - used):
            message = f"Nothing determines or uses “{name}”: it is in no formula."
            yield Complaint(f"/{member}/{name}", None, "unused", message, "Use it, or leave it out.")


def _too_many_equations(structure: Structure) -> Iterator[Complaint]:
    """More equations along the curve than unknown functions in them."""
    for index in structure.matching.unmet:
        together = structure.matching.too_much(index)
        equation = structure.equations[index]
        names = sorted({name for other in together for name in structure.mentions[other]} & structure.orders.keys())
        labels = listing(quoted(structure.equations[other].label) for other in together)
        unknowns = f"{len(names)} unknown{'s' * (len(names) != 1)} ({listing(names)})" if names else "no unknown"
        message = f"{len(together)} equations hold everywhere for {unknowns}: {labels}."
        hint = "Leave one out, or add an unknown that makes it possible (a force, a control)."
        if not names:
            message = f"{quoted(equation.label)} holds everywhere but is about no unknown."
            hint = "Put it into endpoints."
        yield Complaint(equation.pointer, None, "too-many-equations", message, hint)


def _floating_values(problem: Problem, structure: Structure) -> Iterator[Complaint]:
    """Conditions on highest derivatives at single places, where nothing but their course counts."""

    def open_at_a_point(node: At) -> tuple[str, int] | None:
        for name, order in sorted(derivatives([Name(node.name, node.order)], structure.reach)):
            if name in structure.floating and order == structure.orders[name]:
                return name, order
        return None

    def found(tree: Node, pointer: str) -> Iterator[Complaint]:
        for node in walk(tree):
            value = open_at_a_point(node) if isinstance(node, At) else None
            if value is None:
                continue
            shown = value[0] + "'" * value[1]
            message = f"“{shown}({_label(problem, node)})” is a single value of what is free: it changes nothing else."
            hint = f"Leave this out, or let {shown}' appear in integrand or constraints so that {shown} is continuous."
            yield Complaint(pointer, None, "free-derivative", message, hint)
            return

    for condition in (*problem.endpoints, *problem.integrals):
        yield from found(condition.body, condition.pointer)
    if problem.endpoint is not None:
        yield from found(problem.endpoint, "/functional/endpoint")
    for observation in problem.observations:
        yield from found(placed(problem, observation.body, observation.points[0].place), observation.pointer)


def _label(problem: Problem, node: Node) -> str:
    assert isinstance(node, At)
    return next(place.label for place in problem.places if place.tree is node.place)


def _too_many_conditions(problem: Problem, structure: Structure) -> Iterator[Complaint]:
    """More conditions on values than are free."""
    conditions: list[Condition] = []
    wants = []
    for condition in (*problem.endpoints, *problem.integrals):
        wanted = structure.wants(condition) if condition.equality else None
        if wanted is not None:
            conditions.append(condition)
            wants.append(wanted)
    matching = Matching(wants)
    for index in matching.unmet:
        together = matching.too_much(index)
        free = {freedom for other in together for freedom in wants[other]}
        labels = listing(quoted(conditions[other].label) for other in together)
        message = f"{len(together)} conditions for {_count(free)}: {labels}{_given(structure, free)}."
        hint = "Leave one of them out, or free something: an end, a parameter, a control."
        if len(together) == 1:
            message = f"Nothing can meet {quoted(conditions[index].label)}: there is nothing free in it."
        yield Complaint(conditions[index].pointer, None, "too-many-conditions", message, hint)


def _given(structure: Structure, free: set[Freedom]) -> str:
    """Which equations took the freedom: those that give the course of what the conditions are about."""
    named = {item[0] for item in free if isinstance(item, tuple)} - structure.free
    serves = structure.matching.serves
    given = {serves[other] for name in named for other in structure.influences(name) if other in serves}
    labels = [quoted(structure.equations[index].label) for index in sorted(given)]
    if not labels:
        return ""
    if len(labels) > MOST_NAMED:
        labels[MOST_NAMED - 1 :] = [f"{len(labels) - MOST_NAMED + 1} more equations"]
    return f"; {listing(labels)} {'give' if len(labels) > 1 else 'gives'} the course of {listing(sorted(named))}"


def _count(free: set[Freedom]) -> str:
    values = sorted({name + "'" * order for name, order, _ in (item for item in free if isinstance(item, tuple))})
    parameters = sorted(item for item in free if isinstance(item, str))
    return f"{len(free)} free number{'s' * (len(free) != 1)} ({listing([*values, *parameters])})"
