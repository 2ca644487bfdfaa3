"""The laws of every arc put together: what holds everywhere and what the arc has of its own."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, replace

from service.assemble.formulas import ArcFormulas, Expression, Formula, Formulas, Statement
from service.assemble.junctions import Junctions, Stretch
from service.assemble.meaning import Meaning
from service.assemble.measured_arcs import MeasuredOnArcs
from service.assemble.names import Kind
from service.assemble.orders import derivatives, explicit, reach_of
from service.assemble.places import Places
from service.assemble.quoting import quoted
from service.assemble.relations import Sides, conditions
from service.assemble.spots import Spot
from service.complaints import Complaint, Stage, refuse
from solvers.formula.nodes import At, Call, Name, Node, Number, Sum, children, walk, with_children
from solvers.problem import Arc, Condition, Equation, Problem, Unknown

MOST_PIECES = 24
"""Pieces of arcs between neighbouring places."""
MOST_OBSERVED_PIECES = 120
"""The same where something was observed: data lie densely, so that every piece is short."""

Written = Mapping[str, Expression]
"""Abbreviations by name."""


@dataclass(frozen=True, slots=True)
class Laws:
    """What holds on one arc, in SI, before it is known which unknowns occur on it."""

    formulas: ArcFormulas
    where: tuple[tuple[str, Node], ...]
    dynamics: tuple[Equation, ...]
    constraints: tuple[Condition, ...]
    integrals: tuple[Condition, ...]
    placed: tuple[Condition, ...]
    integrand: Node | None


@dataclass(frozen=True, slots=True)
class ArcBuilder:
    """Puts the arcs of a problem together.

    `settle(tree, where)` turns places into those of the problem and writes out abbreviations that do not run along the
    curve, `spot` finds the place of a value, `unknown` makes the record of an unknown with its order.
    """

    formulas: Formulas
    meaning: Meaning
    places: Places
    sides: Mapping[str, Sides]
    settle: Callable[[Node, Written], Node]
    spot: Callable[[At], Spot]
    ends: Callable[[ArcFormulas], tuple[Spot, Spot]]
    unknown: Callable[[str, int], Unknown]

    def on(self, problem: Problem) -> Problem:
        """A problem that has all but the laws along its arcs, completed.  Raises `Refused` (stage conditions)."""
        refuse(Stage.CONDITIONS, self.too_many_pieces())
        laws = [self.laws(arc) for arc in self.formulas.arcs]
        integrals = problem.integrals
        over_all = [*(c.body for c in integrals), *(() if problem.endpoint is None else (problem.endpoint,))]
        stretches = [self.stretch(law, over_all) for law in laws]
        junctions = Junctions(stretches, self.places, self.formulas)
        self.raise_orders(junctions)
        for observed in self.formulas.observed:
            for stretch in stretches:
                stretch.raise_orders(derivatives([observed.tree], stretch.reach))
        junctions.jumps = frozenset(
            jump for node in self.values(self.formulas.endpoints) for jump in junctions.jump(node, self.index(node))
        )
        stated = [*self.formulas.endpoints, *self.formulas.constraints]
        stated += [statement for arc in self.formulas.arcs for statement in arc.constraints]
        placed: list[Formula] = [*stated, *(() if self.formulas.endpoint is None else (self.formulas.endpoint,))]
        index = {id(node): self.index(node) for node in self.values(placed)}
        refuse(Stage.CONDITIONS, junctions.complaints(placed, index))
        refuse(Stage.CONDITIONS, [found for law, s in zip(laws, stretches, strict=True) for found in _twice(law, s)])
        refuse(Stage.CONDITIONS, self.unused(stretches))
        measured = MeasuredOnArcs(problem.observations, self.formulas, junctions, self.places)
        refuse(Stage.CONDITIONS, measured.complaints())
        arcs = tuple(self.arc(law, stretch, over_all) for law, stretch in zip(laws, stretches, strict=True))
        orders = {unknown.name: unknown.order for arc in arcs for unknown in arc.unknowns}
        orders |= {u.name: max(s.orders.get(u.name, 0) for s in stretches) for u in problem.unknowns}
        own_placed = [condition for law in laws for condition in law.placed]

        def sided(condition: Condition) -> Condition:
            return replace(condition, body=_sided(condition.body, junctions, self.places))

        return replace(
            problem,
            unknowns=tuple(replace(unknown, order=orders[unknown.name]) for unknown in problem.unknowns),
            integrand=None,
            where=(),
            dynamics=(),
            constraints=(),
            endpoints=tuple(sided(condition) for condition in (*problem.endpoints, *own_placed)),
            integrals=tuple(sided(condition) for condition in integrals),
            endpoint=None if problem.endpoint is None else _sided(problem.endpoint, junctions, self.places),
            arcs=tuple(replace(arc, integrals=tuple(sided(c) for c in arc.integrals)) for arc in arcs),
            jumps=junctions.jumps,
            observations=measured.sided(),
        )

    def too_many_pieces(self) -> Iterable[Complaint]:
        """Places within arcs cut them into pieces, each of which has all its unknowns for itself."""
        pieces = len(self.places.spots) - 1
        most, kind, hint = MOST_PIECES, "places named", "Name fewer places within arcs."
        if self.formulas.observed:
            most, kind, hint = MOST_OBSERVED_PIECES, "places named or observed", "Take means of neighbouring points."
        if pieces > most:
            message = f"With the {kind} within them the arcs have {pieces} pieces; at most {most}."
            yield Complaint("/arcs", None, "too-many", message, hint)

    def laws(self, arc: ArcFormulas) -> Laws:
        """All that holds on an arc."""
        written = {**self.formulas.where, **arc.where}
        traits = self.meaning.traits
        where = [(n, written[n].tree) for n in self.meaning.order if n in written and not traits[n].placed]
        pointwise: list[Condition] = []
        integrals: list[Condition] = []
        placed: list[Condition] = []

        def settled(tree: Node) -> Node:
            return self.settle(tree, written)

        for statement in self.formulas.constraints:
            found = conditions(statement, self.sides[statement.pointer], self.meaning, settled)
            pointwise += [condition for condition in found if self.meaning.of(condition.body).moving]
        for statement in arc.constraints:
            for condition in conditions(statement, self.sides[statement.pointer], self.meaning, settled):
                kind = self.meaning.of(condition.body)
                (integrals if kind.integral else pointwise if kind.moving else placed).append(condition)
        terms = [part.tree for part in (self.formulas.integrand, arc.integrand) if part is not None]
        return Laws(
            formulas=arc,
            where=tuple(where),
            dynamics=tuple(self.equations((*self.formulas.dynamics, *arc.dynamics))),
            constraints=tuple(pointwise),
            integrals=tuple(integrals),
            placed=tuple(placed),
            integrand=None if not terms else terms[0] if len(terms) == 1 else Sum(tuple(terms), (False, False)),
        )

    def equations(self, statements: Iterable[Statement]) -> Iterable[Equation]:
        """Lines of dynamics."""
        for statement in statements:
            left, right = self.sides[statement.pointer].trees
            yield Equation(left, right, None, statement.text.strip(), statement.pointer)

    def stretch(self, law: Laws, over_all: list[Node]) -> Stretch:
        """The unknowns that occur in the laws of an arc, with their orders."""
        reach = reach_of(law.where)
        found = derivatives(_running(law, over_all), reach)
        names = self.meaning.names.of(Kind.UNKNOWN)
        orders = {name: max(o for n, o in found if n == name) for name in names if any(n == name for n, _ in found)}
        start, end = self.ends(law.formulas)
        return Stretch(law.formulas, self.places.index(start), self.places.index(end), orders, reach, frozenset(names))

    def raise_orders(self, junctions: Junctions) -> None:
        """Let derivatives count that only occur in values at places."""
        stated: list[Formula] = [*self.formulas.endpoints, *self.formulas.constraints]
        stated += [statement for arc in self.formulas.arcs for statement in arc.constraints]
        stated += [] if self.formulas.endpoint is None else [self.formulas.endpoint]
        for node in self.values(stated):
            before, after = junctions.around(self.index(node))
            for stretch in {id(s): s for s in (before, after) if s is not None}.values():
                stretch.raise_orders(stretch.behind(node))

    def values(self, formulas: Iterable[Formula]) -> Iterable[At]:
        """The values at places in some formulas."""
        for formula in formulas:
            yield from (node for node in formula.nodes if isinstance(node, At))

    def index(self, node: At) -> int:
        """Which place a value is at."""
        return self.places.index(self.spot(node))

    def unused(self, stretches: list[Stretch]) -> Iterable[Complaint]:
        """Unknowns that are in no law of any arc."""
        for name in self.meaning.names.of(Kind.UNKNOWN):
            if not any(name in stretch.orders for stretch in stretches):
                message = f"Nothing determines or uses “{name}”: it is in no law of any arc."
                yield Complaint(f"/unknowns/{name}", None, "unused", message, "Use it, or leave it out.")

    def arc(self, law: Laws, stretch: Stretch, over_all: list[Node]) -> Arc:
        """The finished record of an arc."""
        orders = stretch.orders
        known = {*orders, *self.meaning.names.of(Kind.PARAMETER)}
        constraints = tuple(
            condition
            for condition in law.constraints
            if condition.pointer.startswith(stretch.formulas.pointer)
            or known & {name for name, _ in derivatives([condition.body], stretch.reach)}
        )
        used = _used(_running(law, over_all), dict(law.where))
        used |= _used([Name(node.name) for node in self.values(self.formulas.moving())], dict(law.where))
        used |= _used([formula.tree for formula in self.formulas.observed], dict(law.where))
        unknown = set(self.meaning.names.of(Kind.UNKNOWN)) - orders.keys()
        where = tuple(
            (name, tree)
            for name, tree in law.where
            if name in used and not unknown & {other for other, _ in stretch.reach[name]}
        )
        return Arc(
            law.formulas.name,
            stretch.first,
            stretch.last,
            tuple(self.unknown(name, order) for name, order in orders.items()),
            law.integrand,
            where,
            tuple(explicit(law.dynamics, orders, stretch.reach)),
            constraints,
            law.integrals,
        )


def _running(law: Laws, over_all: Iterable[Node]) -> list[Node]:
    """The trees that hold along an arc."""
    trees = [side for line in law.dynamics for side in (line.left, line.right)]
    trees += [condition.body for condition in law.constraints]
    trees += [] if law.integrand is None else [law.integrand]
    stack = [*over_all, *(condition.body for condition in law.integrals)]
    while stack:
        node = stack.pop()
        if isinstance(node, Call) and node.function == "integral":
            trees.append(node.arguments[0])
        else:
            stack.extend(children(node))
    return trees


def _used(trees: Iterable[Node], where: Mapping[str, Node]) -> set[str]:
    """The abbreviations that trees use, directly or by others."""
    found: set[str] = set()
    stack = list(trees)
    while stack:
        for node in walk(stack.pop()):
            if isinstance(node, Name | At) and node.name in where and node.name not in found:
                found.add(node.name)
                stack.append(where[node.name])
    return found


def _twice(law: Laws, stretch: Stretch) -> Iterable[Complaint]:
    """Derivatives that a line outside of the arcs gives and a line of the arc as well."""
    given: dict[tuple[str, int], Equation] = {}
    for line in law.dynamics:
        left = line.left
        if not isinstance(left, Name) or not left.order or stretch.orders.get(left.name) != left.order:
            continue
        before = given.setdefault((left.name, left.order), line)
        own = line.pointer.startswith(law.formulas.pointer)
        if before is not line and own and not before.pointer.startswith(law.formulas.pointer):
            message = f"“{left.name}{chr(39) * left.order}” is given by {quoted(before.label)} on all arcs already."
            hint = "Give it outside of the arcs, or on each of them."
            yield Complaint(line.pointer, None, "given-twice", message, hint)


def _sided(tree: Node, junctions: Junctions, places: Places) -> Node:
    """The tree with the side of every value at a place chosen."""
    if isinstance(tree, At):
        index = next(index for index, spot in enumerate(places.spots) if spot.place.tree is tree.place)
        return replace(tree, side=junctions.side(tree, index) or "-")
    if isinstance(tree, Number | Name):
        return tree
    return with_children(tree, tuple(_sided(part, junctions, places) for part in children(tree)))
