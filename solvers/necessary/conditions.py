"""The necessary conditions of a problem in symbols, as a textbook would print them.

Without dynamics: the Euler-Lagrange equation of every unknown and the natural boundary conditions.  With dynamics: the
costate equations, the stationarity of the Hamiltonian and the transversality conditions.

References: Gelfand and Fomin (1963), Calculus of Variations, sections 11, 12, 15, 35; Bryson and Ho (1975), Applied
Optimal Control, sections 2.3 to 2.8, 3.1 to 3.4.                                                 # (from memory)
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property

from solvers.formula.algebra import ZERO, add, bare, factored, factors_of, monic, multiply, negative
from solvers.formula.derivative import derivative, total_derivative
from solvers.formula.mathml import Range, element, fragment
from solvers.formula.nodes import At, Call, Name, Negative, Node, Relation, Sum, size, walk
from solvers.formula.printer import text
from solvers.formula.substitute import TooLargeError, substitute
from solvers.necessary.augmented import EXPANDED_LIMIT, Augmented, augment, prescribed, unused
from solvers.problem import Place, Problem, Seek
from solvers.transcription.lowering import Lowered, Quantity, lower, primed

DISPLAY_LIMIT = 300
"""Nodes of a condition that is still worth reading."""

READABLE_RATE = 16
"""Nodes up to which a derivative along the curve is carried out; longer ones stay as d/dx of a formula."""


@dataclass(frozen=True)
class Necessary:
    """One condition.  `place` ("t = T") is where it holds, or None where it holds everywhere.

    `kind` is "Euler-Lagrange", "costate", "stationarity", "natural boundary", "first integral"; "Lagrangian" and
    "Hamiltonian" say what the letters L and H in the others stand for.  `subject` is the quantity or parameter that
    the condition belongs to.
    """

    kind: str
    subject: str
    relation: Relation
    extent: Range
    place: Relation | None = None

    @cached_property
    def text(self) -> str:
        """The condition as plain text."""
        return text(self.relation) + (f" at {text(self.place)}" if self.place else "")

    @property
    def mathml(self) -> str:
        """The condition as a `<math>` element."""
        where = f"<mtext>\u2002at\u2002</mtext>{fragment(self.place)}" if self.place else ""
        return element(fragment(self.relation, self.extent) + where, self.text, block=True)


@dataclass(frozen=True, slots=True)
class NecessaryConditions:
    """All conditions, and what the reader has to know about them."""

    conditions: tuple[Necessary, ...]
    notes: tuple[str, ...]


def in_time(deadline: float | None) -> Callable[[], None]:
    """What raises TimeoutError once `time.monotonic()` has passed the deadline."""

    def check() -> None:
        if deadline is not None and time.monotonic() > deadline:
            raise TimeoutError

    return check


def necessary_conditions(problem: Problem, deadline: float | None = None) -> NecessaryConditions:
    """The necessary conditions of `problem`.

    What is too large to be read, or is not done when `time.monotonic()` passes `deadline`, is left out with a note.
    """

    check = in_time(deadline)
    found: list[Necessary] = []
    notes: list[str] = []
    try:
        derivation = derive(problem, check)
        notes += [*derivation.augmented.notes, *limits_left_out(problem), *jumps(problem)]
        for condition in derivation.conditions():
            if condition.kind == "Hamiltonian" and (extreme := extreme_controls(problem, derivation.lowered)):
                notes.append(extreme)
            if (note := left_out(condition)) is None:
                found.append(condition)
            else:
                notes.append(note)
    except TooLargeError as error:
        notes.append(f"The necessary conditions are left out: {error}.")
    except TimeoutError:
        notes.append("Some necessary conditions are left out: deriving them takes too long.")
    return NecessaryConditions(tuple(found), tuple(notes))


def derive(problem: Problem, check: Callable[[], None]) -> Derivation:
    """The derivation of a problem's conditions.  Raises TooLargeError, ValueError, and what `check` raises."""
    lowered = lower(problem)
    return Derivation(problem, lowered, augment(problem, lowered, check), check)


def left_out(condition: Necessary) -> str | None:
    """A note where a condition is too long to be read, else None."""
    parts = sum(size(side) for side in condition.relation.sides)
    if parts <= DISPLAY_LIMIT:
        return None
    return f"The {condition.kind} condition of {condition.subject} is left out: {parts:,} parts."


def extreme_controls(problem: Problem, lowered: Lowered) -> str:
    """What the controls do where the Hamiltonian has no stationary point among the allowed values."""
    extreme = {Seek.MINIMUM: "least", Seek.MAXIMUM: "greatest"}.get(problem.seek)
    if extreme is None or not lowered.controls:
        return ""
    names = ", ".join(primed(quantity) for quantity in lowered.controls)
    return f"Of all allowed values of {names}, those of the optimum make the Hamiltonian {extreme}."


def limits_left_out(problem: Problem) -> Iterator[str]:
    """Say which inequalities the formulas leave out."""
    infinity = float("inf")
    limits = [condition.label for condition in problem.constraints if not condition.equality]
    limits += [f"bounds of {u.name}" for u in problem.unknowns if (u.lower, u.upper) != (-infinity, infinity)]
    if limits:
        named = "; ".join(dict.fromkeys(limits))
        yield f"The equations hold where no limit binds ({named}); where one binds, its multiplier joins."


def jumps(problem: Problem) -> Iterator[str]:
    """Say where the costates need not be continuous."""
    observed = {id(point.place) for observation in problem.observations for point in observation.points}
    if observed:
        yield "At each place of an observation the momenta or costates jump by the slope of the squares there."
    inner = ", ".join(place.label for place in problem.places[1:-1] if id(place.tree) not in observed)
    if inner:
        yield f"At {inner} the momenta or costates may jump."


@dataclass(frozen=True)
class Derivation:
    """What the conditions of one problem are made from."""

    problem: Problem
    lowered: Lowered
    augmented: Augmented
    check: Callable[[], None]
    slopes: dict[tuple[Node, Node], Node] = field(default_factory=dict)  # those found so far

    def conditions(self) -> Iterator[Necessary]:
        """Those of the calculus of variations where they say more, else those of optimal control."""
        return self.variational_system() if self.variational else self.hamiltonian_system()

    @property
    def variational(self) -> bool:
        """Whether the integrand holds every highest derivative and no dynamics give one."""
        highest = [Name(unknown.name, unknown.order) for unknown in self.problem.unknowns if unknown.order]
        held = all(self.slope(self.lagrangian, name) != ZERO for name in highest)
        return held and not self.lowered.given

    @cached_property
    def lagrangian(self) -> Node:
        return factored(add([self.augmented.integrand, self.augmented.along]))

    def variational_system(self) -> Iterator[Necessary]:
        lagrangian = self.lagrangian
        orders = {unknown.name: unknown.order for unknown in self.problem.unknowns}
        if self.problem.integrals or self.augmented.functions - orders.keys():
            shown = Name(unused(self.problem, "L"))
            yield self.definition("Lagrangian", shown, lagrangian)
        momenta = self.momenta
        for name, order in orders.items():
            slopes = self.slopes_of_lagrangian[name]
            if order == 1:
                yield self.condition("Euler-Lagrange", name, self.along(slopes[1]), slopes[0])
            else:
                yield self.condition("Euler-Lagrange", name, self.alternating(slopes), ZERO)
        yield from self.boundary(momenta, sign=1)
        yield from self.free_numbers(self.energy, lagrangian)

    @cached_property
    def slopes_of_lagrangian(self) -> dict[str, list[Node]]:
        """The slopes of the Lagrangian in every unknown and its derivatives, lowest first."""
        return {
            unknown.name: [
                factored(self.slope(self.lagrangian, Name(unknown.name, k))) for k in range(unknown.order + 1)
            ]
            for unknown in self.problem.unknowns
        }

    @cached_property
    def momenta(self) -> dict[Quantity, Node]:
        """What a change of each derivative below the highest costs at the last end, by the Lagrangian."""
        return {
            (unknown.name, k): factored(self.alternating(self.slopes_of_lagrangian[unknown.name][k + 1 :]))
            for unknown in self.problem.unknowns
            for k in range(unknown.order)
        }

    @property
    def energy(self) -> Node:
        """What the functional gains where the curve is made longer: the Lagrangian less momenta times slopes."""
        lost = [_spread(momentum, Name(name, k + 1)) for (name, k), momentum in self.momenta.items()]
        return factored(add([factored(self.augmented.integrand), *(negative(term) for term in lost)]))

    def costates(self) -> dict[Quantity, Name]:
        """The costate of every state, by its name."""
        letter = unused(self.problem, "p")
        return {q: Name(f"{letter}_{q[0]}" + (f"_{q[1]}" if q[1] else "")) for q in self.lowered.states}

    def hamiltonian_system(self) -> Iterator[Necessary]:
        costates = self.costates()
        terms = [self.explicit(self.lagrangian)]
        for (name, k), costate in costates.items():
            terms.append(multiply([costate, add([self.explicit(Name(name, k + 1))])]))
        hamiltonian, shown = add(terms), Name(unused(self.problem, "H"))
        yield self.definition("Hamiltonian", shown, hamiltonian)
        for quantity, costate in costates.items():
            rate = negative(self.slope(hamiltonian, Name(*quantity)))
            yield self.condition("costate", primed(quantity), Name(costate.name, 1), rate)
        for quantity in self.lowered.controls:
            yield self.condition("stationarity", primed(quantity), self.slope(hamiltonian, Name(*quantity)), ZERO)
        yield from self.boundary(costates, sign=-1)
        yield from self.free_numbers(shown, hamiltonian)

    def boundary(self, momenta: Mapping[Quantity, Node], sign: int) -> Iterator[Necessary]:
        """What holds at an end for every value that nothing fixes there.

        The momentum of a variational problem is minus the slope of the endpoint term at the last end (`sign` 1),
        a costate is the slope itself (`sign` -1); at the first end each is the other way round.
        """
        fixed = {prescribed(self.problem, condition) for condition in self.problem.endpoints}
        for place, side in ((self.problem.places[0], -1), (self.problem.places[-1], 1)):
            where = bare(place.tree)
            for (name, k), momentum in momenta.items():
                value = At(name, k, where)
                if value in fixed:
                    continue
                slope = _here(self.slope(self.augmented.terminal, value), where)
                right = negative(slope) if sign * side > 0 else slope
                yield self.condition("natural boundary", primed((name, k)), momentum, right, place)

    def free_numbers(self, energy: Node, density: Node) -> Iterator[Necessary]:
        """What holds for every parameter, be it a free end or a number that the formulas use; and the first integral.

        `energy` is the Hamiltonian, or the Lagrangian less momenta times slopes: what the functional gains where the
        curve is made longer.  `density` is the integrand with its multipliers, or the Hamiltonian written out.
        """
        first, *inner, last = self.problem.places
        for parameter in self.problem.parameters:
            name = Name(parameter.name)
            slope, inside = self.slope(self.augmented.terminal, name), self.slope(density, name)
            if inside != ZERO:
                number, _ = factors_of(inside)
                slope = add([slope, multiply([number, Call("integral", (monic(inside),))])])
            if name == bare(last.tree):
                yield self.condition("natural boundary", name.name, energy, _here(negative(slope), name), last)
            elif name == bare(first.tree):
                yield self.condition("natural boundary", name.name, energy, _here(slope, name), first)
            elif slope != ZERO and name not in {bare(place.tree) for place in inner}:
                yield self.condition("stationarity", name.name, slope, ZERO)
        if density != ZERO and not inner and self.autonomous(density):
            constant = Name(unused(self.problem, "C"))
            yield self.condition("first integral", self.problem.independent, monic(energy), constant)

    def autonomous(self, density: Node) -> bool:
        """Whether nothing depends on the independent variable by itself, so that the energy is constant."""
        bodies = [self.augmented.expand(condition.body) for condition in self.problem.constraints]
        return all(self.slope(tree, Name(self.problem.independent)) == ZERO for tree in (density, *bodies))

    # ---- parts of conditions ----

    def condition(self, kind: str, subject: str, left: Node, right: Node, place: Place | None = None) -> Necessary:
        """The condition left = right with what does not matter taken off: a common sign, a number before zero."""
        left, right = factored(left), factored(right)
        if right == ZERO:
            left = monic(left)
        elif left == ZERO:
            left, right = monic(right), ZERO
        elif isinstance(left, Negative) and not isinstance(right, Sum):
            left, right = negative(left), negative(right)
        where = Relation((Name(self.problem.independent), place.tree), ("=",)) if place else None
        return Necessary(kind, subject, Relation((left, right), ("=",)), self.extent, where)

    def definition(self, kind: str, shown: Name, tree: Node) -> Necessary:
        return Necessary(kind, shown.name, Relation((shown, tree), ("=",)), self.extent)

    @property
    def extent(self) -> Range:
        return Range(self.problem.independent, self.problem.places[0].tree, self.problem.places[-1].tree)

    def slope(self, tree: Node, target: Node) -> Node:
        """The partial derivative; most are asked for twice, and many formulas do not hold the target at all."""
        if (tree, target) not in self.slopes:
            held = any(node == target for node in walk(tree))
            self.slopes[tree, target] = derivative(tree, target, self.check) if held else ZERO
        return self.slopes[tree, target]

    def explicit(self, tree: Node) -> Node:
        """The tree with every highest derivative that the dynamics give replaced by its formula."""
        given = {Name(*quantity): self.augmented.expand(right) for quantity, right in self.lowered.given.items()}
        while any(node in given for node in walk(tree)):
            self.check()
            if size(tree) > EXPANDED_LIMIT:
                raise TooLargeError(f"with its dynamics put in, a formula has more than {EXPANDED_LIMIT:,} parts")
            tree = substitute(tree, lambda node: given.get(node) if isinstance(node, Name) else None)
        return tree

    def along(self, tree: Node, times: int = 1) -> Node:
        """The derivative along the curve: carried out where it stays short, else only written down."""
        rate, independent = tree, self.problem.independent
        for _ in range(times):
            if self.least_rate(rate) <= READABLE_RATE:
                rate = total_derivative(rate, independent, self.augmented.functions, self.check)
                if size(rate) <= READABLE_RATE:
                    continue
            power = f"^{times}" if times > 1 else ""
            return Call(f"d{power}/d{independent}{power}", (tree,))
        return rate

    def least_rate(self, tree: Node) -> int:
        """Nodes that the derivative along the curve has at least: each factor that varies makes a term with the others.

        Cheap, and most derivatives are too long to be carried out.
        """
        if isinstance(tree, Sum):
            return sum(map(self.least_rate, tree.terms))
        parts = [(size(base), self.varies(base)) for base, _ in factors_of(tree)[1]]
        varying = sum(varies for _, varies in parts)
        return sum(length * (varying - varies) for length, varies in parts)

    def varies(self, tree: Node) -> bool:
        names = {*self.augmented.functions, self.problem.independent}
        return any(isinstance(node, Name) and node.name in names for node in walk(tree))

    def alternating(self, slopes: list[Node]) -> Node:
        """slopes[0] - d/dx slopes[1] + d²/dx² slopes[2] - ..."""
        rates = [self.along(slope, times) for times, slope in enumerate(slopes)]
        return add(negative(rate) if times % 2 else rate for times, rate in enumerate(rates))


def _spread(tree: Node, factor: Node) -> Node:
    """The product, with a sum multiplied out."""
    if not isinstance(tree, Sum):
        return multiply([tree, factor])
    terms = (multiply([term, factor]) for term in tree.terms)
    return add(negative(term) if minus else term for term, minus in zip(terms, tree.minus, strict=True))


def _here(tree: Node, where: Node) -> Node:
    """Values at `where` written as plain names, since the condition says where it holds."""
    return substitute(tree, lambda n: Name(n.name, n.order) if isinstance(n, At) and n.place == where else None)
