"""Tables that are refused beyond their range: conditions that keep their arguments inside.

An argument that depends on unknowns is bounded all along the curve, one that depends on parameters or on values at
places by a condition there; what depends on neither is looked at now.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from service.assemble.domain import value_of
from service.assemble.formulas import Expression, Formula, Formulas
from service.assemble.meaning import Meaning
from service.assemble.names import Kind
from service.assemble.orders import Reach, derivatives, reach_of
from service.assemble.quoting import quoted
from service.complaints import Complaint, Stage, pointer, refuse
from solvers.formula.algebra import bare
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import Lookup, Name, Node, Number
from solvers.formula.printer import text
from solvers.problem import Condition, Problem
from solvers.tables.table import Outside
from solvers.units import Unit

TRIED = 201
"""Places at which an argument is tried that nothing can change."""

ROUNDING = 1e-12
"""How far beyond a range still counts as its end, relative to its size."""


@dataclass(frozen=True, slots=True)
class _Use:
    """A table's argument somewhere in a formula, and where it has to stay."""

    lookup: Lookup
    index: int
    formula: Formula

    @property
    def argument(self) -> Node:
        return self.lookup.arguments[self.index]

    @property
    def range(self) -> tuple[float, float]:
        return self.lookup.table.ranges[self.index]

    @property
    def unit(self) -> Unit:
        return self.lookup.table.argument_units[self.index]

    def condition(self, body: Node) -> Condition:
        """That a form of the argument stays inside."""
        low, high = (Number(limit, f"{limit / self.unit.factor:.12g}") for limit in self.range)
        name = self.lookup.table.name
        label = f"{text(self.argument)} in the range of {name}"
        return Condition(body, low, high, label, pointer("tables", name, "points"), self.unit)

    def complaint(self, what: str, value: float) -> Complaint:
        """That the argument leaves the range, whatever the curve is."""
        low, high, shown = (f"{number / self.unit.factor:.6g}" for number in (*self.range, value))
        unit = f" {self.unit.text}" if self.unit.text else ""
        name = self.lookup.table.name
        message = f"{what}{shown}{unit}: outside of the range of {name}, {low} to {high}{unit}."
        hint = "Measure further, stay inside, or say what holds beyond the range: `outside` hold or extend."
        return self.formula.complaint(self.argument.span, "outside-range", message, hint)


Settle = Callable[[Node, Mapping[str, Expression] | None], Node]
"""Brings a formula into the terms of the problem; the abbreviations are those of an arc, or None."""


def covered(problem: Problem, formulas: Formulas, meaning: Meaning, settle: Settle) -> Problem:
    """The problem with the conditions on arguments.  Raises `Refused` (stage conditions)."""
    if problem.arcs:
        return _covered_arcs(problem, formulas, meaning, settle)
    cover = _Cover(problem, meaning, reach_of(problem.where))
    for use in _uses(formulas.moving()):
        cover.add(use, settle(use.argument, None))
    refuse(Stage.CONDITIONS, cover.complaints)
    return replace(
        problem,
        constraints=(*problem.constraints, *cover.along),
        endpoints=(*problem.endpoints, *cover.at_places),
    )


def _covered_arcs(problem: Problem, formulas: Formulas, meaning: Meaning, settle: Settle) -> Problem:
    """The same on every arc, by the formulas that hold there."""
    own = {formula.pointer for arc in formulas.arcs for formula in arc.running()}
    everywhere = [formula for formula in formulas.moving() if formula.pointer not in own]
    unknowns = {unknown.name for unknown in problem.unknowns}
    arcs = []
    at_places: dict[tuple[str, str], Condition] = {}
    complaints: dict[tuple[str, str], Complaint] = {}
    for arc, stated in zip(problem.arcs, formulas.arcs, strict=True):
        part = problem.along(arc)
        cover = _Cover(part, meaning, reach_of(part.where))
        missing = unknowns - {unknown.name for unknown in arc.unknowns}
        for use in _uses([*everywhere, *stated.running()]):
            settled = settle(use.argument, {**formulas.where, **stated.where})
            if not missing & {name for name, _ in derivatives([settled], cover.reach)}:
                cover.add(use, settled)
        arcs.append(replace(arc, constraints=(*arc.constraints, *cover.along)))
        at_places |= {(condition.label, condition.pointer): condition for condition in cover.at_places}
        complaints |= {(complaint.pointer, complaint.message): complaint for complaint in cover.complaints}
    refuse(Stage.CONDITIONS, complaints.values())
    return replace(problem, arcs=tuple(arcs), endpoints=(*problem.endpoints, *at_places.values()))


def _uses(formulas: Iterable[Formula]) -> Iterator[_Use]:
    """Each argument of each table once."""
    known: set[tuple[str, int, Node]] = set()
    for use in _all_uses(formulas):
        key = (use.lookup.table.name, use.index, bare(use.argument))
        if key not in known:
            known.add(key)
            yield use


def _all_uses(formulas: Iterable[Formula]) -> Iterator[_Use]:
    for formula in formulas:
        for node in formula.nodes:
            if isinstance(node, Lookup) and node.table.outside is Outside.REFUSE:
                yield from (_Use(node, index, formula) for index in range(len(node.arguments)))


@dataclass(slots=True)
class _Cover:
    problem: Problem
    meaning: Meaning
    reach: Reach
    along: list[Condition] = field(default_factory=list)
    at_places: list[Condition] = field(default_factory=list)
    complaints: list[Complaint] = field(default_factory=list)

    def add(self, use: _Use, settled: Node) -> None:
        """Take in one use; `settled` is its argument in the terms of the problem."""
        kinds = self.meaning.names.kinds
        named = {kinds.get(name) for name, _ in derivatives([settled], self.reach)}
        traits = self.meaning.of(use.argument)
        if traits.fixed:
            self.fixed(use, settled)
        elif Kind.UNKNOWN in named and traits.moving:
            if not self.bounded(settled, use.range):
                self.along.append(use.condition(settled))
        elif traits.placed or not traits.moving:
            self.at_places.append(use.condition(settled))
        elif Kind.PARAMETER in named:
            self.along.append(use.condition(settled))
        else:
            self.running(use, settled)

    def bounded(self, tree: Node, within: tuple[float, float]) -> bool:
        """Whether the bounds of an unknown keep it inside anyway."""
        known = {unknown.name: unknown for unknown in self.problem.unknowns}
        if not isinstance(tree, Name) or tree.order or tree.name not in known:
            return False
        return within[0] <= known[tree.name].lower and known[tree.name].upper <= within[1]

    def fixed(self, use: _Use, tree: Node) -> None:
        """A given number."""
        value = self.value(tree, 0.0)
        if value is not None and not _inside(value, use.range):
            self.complaints.append(use.complaint(f"{quoted(use.argument)} is ", value))

    def running(self, use: _Use, tree: Node) -> None:
        """What depends on the independent variable only: it is tried from end to end."""
        places = [self.problem.places[0], self.problem.places[-1]]
        parameters = {parameter.name: parameter for parameter in self.problem.parameters}
        free = [place for place in places if isinstance(place.tree, Name) and place.tree.name in parameters]
        plain = isinstance(tree, Name) and tree.name == self.problem.independent
        if plain:
            self.at_places += [use.condition(place.tree) for place in free]
        elif free:
            self.along.append(use.condition(tree))
        ends = []
        for place in places:
            if place in free:
                assert isinstance(place.tree, Name)
                parameter = parameters[place.tree.name]
                nearest = parameter.lower if place is places[1] else parameter.upper
                ends.append(nearest if np.isfinite(nearest) else None)
            else:
                ends.append(value_of(place.tree, self.constants))
        first, last = (end if end is not None else other for end, other in zip(ends, reversed(ends), strict=True))
        if first is None or last is None:
            return
        for at in np.linspace(first, last, TRIED):
            value = self.value(tree, float(at))
            if value is not None and not _inside(value, use.range):
                unit, name = self.problem.independent_unit, self.problem.independent
                there = f"{at / unit.factor:.6g} {unit.text}".strip()
                what = "is " if plain else f"at {name} = {there} is "
                self.complaints.append(use.complaint(f"{quoted(use.argument)} {what}", value))
                return

    @property
    def constants(self) -> Mapping[str, float]:
        return {constant.name: constant.value for constant in self.problem.constants}

    def value(self, tree: Node, place: float) -> float | None:
        """The value of a tree of constants and the independent variable; None where it has none."""
        numbers: dict[str, Any] = {**self.constants, self.problem.independent: place}
        where = dict(self.problem.where)

        def look_up(name: str, order: int) -> float:
            return numbers[name] if name in numbers else float(evaluate(where[name], look_up, REAL))

        try:
            return float(evaluate(tree, look_up, REAL))
        except (ArithmeticError, ValueError, LookupError):
            return None


def _inside(value: float, within: tuple[float, float]) -> bool:
    room = ROUNDING * max(abs(within[0]), abs(within[1]))
    return within[0] - room <= value <= within[1] + room
