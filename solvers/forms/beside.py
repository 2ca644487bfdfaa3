"""Arcs beside each other: a problem of several arcs as an equivalent one on a single variable s from 0 to 1.

On a piece of an arc from a to b, t = a + (b - a) s.  Every unknown has a copy of its own on each piece, as has each of
its derivatives below the highest one, with the rate (b - a) times the next derivative: so values and costates at the
ends of a piece are those in t.  Integrals are summed with the lengths as factors, and what is continuous at a junction
becomes a condition between the end of one copy and the start of the next.  Free junctions are parameters like others.

Reference: Bryson, Ho (1975), Applied Optimal Control, section 3.7 (systems with discontinuities at interior points),
for the conditions at junctions that follow (from memory).
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from graphlib import TopologicalSorter
from itertools import pairwise

from solvers.formula.nodes import At, Call, Name, Node, Number, Product, Sum, children, walk, with_children
from solvers.problem import MIDDLE, Arc, Condition, Equation, Jump, Observation, Place, Problem, Unknown
from solvers.transcription.limits import number
from solvers.transcription.lowering import Lowered, lower, primed

FRACTION = "arc fraction"
"""The common variable; no user can write this name."""
START, END = Number(0.0, "0"), Number(1.0, "1")

ON = " on "
"""Stands between a name or a label and the arc that it belongs to."""


@dataclass(frozen=True, slots=True)
class Piece:
    """The part of an arc (by its index) between the place with index `place` and the next one."""

    label: str
    arc: int
    place: int
    lowered: Lowered

    def own(self, text: str) -> str:
        """The name or label of this piece's copy."""
        return text + ON + self.label


@dataclass(frozen=True, slots=True)
class Beside:
    """A problem of arcs and the equivalent one without.

    `measured` says for every list of observations of the equivalent problem which list of the original it is of, and
    which of its points it has.
    """

    original: Problem
    problem: Problem
    pieces: tuple[Piece, ...]
    measured: tuple[tuple[int, tuple[int, ...]], ...] = ()

    def parted(self, text: str) -> tuple[str, Piece | None]:
        """The user's name or label behind a copy's, and the piece that it is on; None where it is on none."""
        for piece in sorted(self.pieces, key=lambda piece: -len(piece.label)):
            head, found, tail = text.partition(ON + piece.label)
            if found and not re.match(r"[\w-]", tail):
                return head + tail, piece
        return text, None

    def with_sides(self, text: str) -> str:
        """A text with the ends of copies as sides of places: `x on burn(end)` is x(t1-)."""
        last = len(self.original.places) - 1
        for piece in self.pieces:
            for end, place, side in (("(start)", piece.place, "+"), ("(end)", piece.place + 1, "-")):
                label = self.original.places[place].label + (side if 0 < place < last else "")
                text = text.replace(f"{ON}{piece.label}{end}", f"({label})")
        return text

    def by_arc(self, text: str) -> str:
        """A text with sides of places and with the names of arcs, whatever their pieces are called."""
        text = self.with_sides(text)
        for piece in reversed(self.pieces):  # part 12 before part 1
            text = text.replace(ON + piece.label, ON + self.original.arcs[piece.arc].name)
        return text

    def told(self, text: str) -> str:
        """A text about copies as one about what they are copies of."""
        text = self.with_sides(text)
        while (shorter := self.parted(text)[0]) != text:
            text = shorter
        return text


def side_by_side(problem: Problem, copied: Callable[[Problem, Piece], Copy] | None = None) -> Beside:
    """The equivalent problem of a problem with arcs; `copied` makes the copy on a piece where it is of another kind."""
    pieces = tuple(_pieces(problem))
    copies = tuple((copied or Copy)(problem, piece) for piece in pieces)
    whole = _Whole(problem, copies)
    integrals = [replace(c, body=whole.tree(c.body)) for c in problem.integrals]
    for index, arc in enumerate(problem.arcs):
        own = _Whole(problem, copies, index)
        integrals += [replace(c, body=own.tree(c.body)) for c in arc.integrals]
    costs = [copy.over_arc(integrand) for copy in copies if (integrand := problem.arcs[copy.piece.arc].integrand)]
    placed = [replace(c, body=whole.tree(c.body)) for c in problem.endpoints]
    observed = list(_observed(problem, copies))
    equivalent = replace(
        problem,
        independent=FRACTION,
        places=(Place(START, "start"), Place(END, "end")),
        unknowns=tuple(unknown for copy in copies for unknown in copy.unknowns()),
        integrand=_sum(costs) if costs else None,
        endpoint=None if problem.endpoint is None else whole.tree(problem.endpoint),
        where=tuple(entry for copy in copies for entry in copy.where()),
        dynamics=tuple(line for copy in copies for line in copy.dynamics()),
        endpoints=(
            *_links(problem, pieces),
            *_lengths(problem),
            *placed,
            *(c for copy in copies for c in copy.endpoints()),
        ),
        constraints=tuple(condition for copy in copies for condition in copy.constraints()),
        integrals=tuple(integrals),
        observations=tuple(observation for observation, _ in observed),
        arcs=(),
        jumps=frozenset(),
    )
    return Beside(problem, equivalent, pieces, tuple(of for _, of in observed))


def length_of(problem: Problem, place: int) -> Node:
    """How far it is from a place to the next one."""
    start, end = problem.places[place].tree, problem.places[place + 1].tree
    return end if isinstance(start, Number) and start.value == 0 else Sum((end, start), (False, True))


def _pieces(problem: Problem) -> Iterator[Piece]:
    for index, arc in enumerate(problem.arcs):
        lowered = lower(problem.along(arc))
        for part, place in enumerate(range(arc.first, arc.last), start=1):
            label = arc.name if arc.last - arc.first == 1 else f"{arc.name}, part {part}"
            yield Piece(label, index, place, lowered)


class Copy:
    """The formulas of one piece in its copies of the unknowns, as functions of the common variable."""

    def __init__(self, problem: Problem, piece: Piece) -> None:
        self.piece = piece
        self.length = length_of(problem, piece.place)
        self.arc: Arc = problem.arcs[piece.arc]
        self._independent = problem.independent
        self._start, end = (place.tree for place in problem.places[piece.place : piece.place + 2])
        self.middle = Product((Sum((self._start, end), (False, False)), Number(2.0, "2")), (False, True))
        self._abbreviations = {name for name, _ in self.arc.where}
        self._names = {unknown.name for unknown in self.arc.unknowns}

    def tree(self, tree: Node) -> Node:
        """A formula that holds along the arc."""
        if not isinstance(tree, Name):
            return with_children(tree, tuple(self.tree(part) for part in children(tree)))
        if tree.name == self._independent:
            return self.here()
        if tree.name == MIDDLE:
            return self.middle
        if tree.name in self._names or tree.name in self._abbreviations:
            return self.quantity(tree.name, tree.order)
        return tree

    def here(self) -> Node:
        """Where on the user's variable a value of the common one is."""
        way = Product((self.length, Name(FRACTION)), (False, False))
        return way if self._start == START else Sum((self._start, way), (False, False))

    def quantity(self, name: str, order: int) -> Name:
        """The copy of a derivative of an unknown, or of an abbreviation."""
        return Name(self.piece.own(primed((name, order))))

    def over_arc(self, tree: Node) -> Node:
        """An integrand in t as one in s."""
        return Product((self.length, self.tree(tree)), (False, False))

    def unknowns(self) -> Iterator[Unknown]:
        """The copies of what is a state or free on the piece."""
        lowered = self.piece.lowered
        of = {unknown.name: unknown for unknown in self.arc.unknowns}
        for quantities, order in ((lowered.states, 1), (lowered.controls, 0)):
            for name, derivative in quantities:
                copy = Unknown(self.quantity(name, derivative).name, order)
                if derivative == 0:
                    copy = replace(copy, lower=of[name].lower, upper=of[name].upper, unit=of[name].unit)
                yield copy

    def where(self) -> tuple[tuple[str, Node], ...]:
        """Abbreviations, and the highest derivatives that the dynamics give; each uses only earlier ones."""
        entries = {self.quantity(name, 0).name: self.tree(tree) for name, tree in self.arc.where}
        entries |= {self.quantity(*q).name: self.tree(tree) for q, tree in self.piece.lowered.given.items()}
        uses = {
            name: {node.name for node in walk(tree) if isinstance(node, Name)} & entries.keys()
            for name, tree in entries.items()
        }
        return tuple((name, entries[name]) for name in TopologicalSorter(uses).static_order())

    def dynamics(self) -> Iterator[Equation]:
        """The rates of the states in s, and the lines that determine nothing by themselves."""
        explicit = {line.determines: line for line in self.arc.dynamics}
        for name, order in self.piece.lowered.states:
            state = self.quantity(name, order).name
            rate = Product((self.length, self.quantity(name, order + 1)), (False, False))
            line = explicit.get((name, order + 1))
            label, pointer = (self.piece.own(line.label), line.pointer) if line else (f"the rate of {state}", "")
            yield Equation(Name(state, 1), rate, (state, 1), label, pointer)
        for line in self.piece.lowered.equalities:
            yield Equation(self.tree(line.left), self.tree(line.right), None, self.piece.own(line.label), line.pointer)

    def constraints(self) -> Iterator[Condition]:
        """What holds everywhere on the piece."""
        for condition in self.arc.constraints:
            yield replace(condition, body=self.tree(condition.body), label=self.piece.own(condition.label))

    def endpoints(self) -> Iterator[Condition]:
        """What holds at the ends of the piece besides."""
        return iter(())


class _Whole:
    """Formulas of values at places and of integrals: over all arcs, or over one."""

    def __init__(self, problem: Problem, copies: tuple[Copy, ...], arc: int | None = None) -> None:
        self._places = problem.places
        self._copies = copies
        self._over = [copy for copy in copies if arc is None or copy.piece.arc == arc]

    def tree(self, tree: Node) -> Node:
        """The formula in the copies."""
        match tree:
            case At():
                return self.value(tree)
            case Call(function="integral", arguments=(body,)):
                return _sum([Call("integral", (copy.over_arc(body),)) for copy in self._over])
        return with_children(tree, tuple(self.tree(part) for part in children(tree)))

    def value(self, node: At) -> At:
        """A value at a place: from the piece that ends there, unless the side after it is meant."""
        index = next(index for index, place in enumerate(self._places) if place.tree is node.place)
        after = index == 0 or node.side == "+"
        copy = self._copies[index if after else index - 1]
        return At(copy.quantity(node.name, node.order).name, 0, START if after else END)


def _observed(problem: Problem, copies: tuple[Copy, ...]) -> Iterator[tuple[Observation, tuple[int, tuple[int, ...]]]]:
    """Every list of observations shared out among the ends of the pieces, with its number and those of its points."""
    places = {id(place.tree): index for index, place in enumerate(problem.places)}
    for which, observation in enumerate(problem.observations):
        shares: dict[tuple[int, bool], list[int]] = {}
        for index, point in enumerate(observation.points):
            place = places[id(point.place)]
            ends = place > 0 and point.side != "+"
            shares.setdefault((place - 1 if ends else place, ends), []).append(index)
        for (piece, ends), own in shares.items():
            copy = copies[piece]
            points = tuple(replace(observation.points[k], place=END if ends else START) for k in own)
            told = replace(
                observation, body=copy.tree(observation.body), points=points, label=copy.piece.own(observation.label)
            )
            yield told, (which, tuple(own))


def _sum(terms: list[Node]) -> Node:
    return terms[0] if len(terms) == 1 else Sum(tuple(terms), (False,) * len(terms))


def _links(problem: Problem, pieces: tuple[Piece, ...]) -> Iterator[Condition]:
    """What is continuous: below the orders on both sides, but for jumps."""
    for before, after in pairwise(pieces):
        for name, order in before.lowered.states:
            if (name, order) not in after.lowered.states or Jump(name, order, after.place) in problem.jumps:
                continue
            shown = primed((name, order))
            gap = Sum((At(after.own(shown), 0, START), At(before.own(shown), 0, END)), (False, True))
            place = problem.places[after.place].label
            yield Condition(gap, START, START, f"{shown} is continuous at {place}", "")


def _lengths(problem: Problem) -> Iterator[Condition]:
    """What keeps the places in order where their own limits do not."""
    constants = {constant.name: constant.value for constant in problem.constants}
    free = {parameter.name: (parameter.lower, parameter.upper) for parameter in problem.parameters}

    def limits(place: Place) -> tuple[float, float]:
        tree = place.tree
        return free[tree.name] if isinstance(tree, Name) and tree.name in free else (number(tree, constants),) * 2

    for index, (before, after) in enumerate(pairwise(problem.places)):
        if limits(after)[0] < limits(before)[1]:
            yield Condition(length_of(problem, index), START, None, f"{before.label} before {after.label}", "")
