"""The necessary conditions of a problem in symbols, as a textbook would print them.

Without dynamics: the Euler-Lagrange equation of every unknown and the natural boundary conditions.  With dynamics: the
costate equations, the stationarity of the Hamiltonian and the transversality conditions.  Equalities join by their
multipliers: λ for integral conditions, μ for pointwise ones, ν for conditions on ends.

References: Gelfand and Fomin (1963), Calculus of Variations, sections 11, 12, 15, 35; Bryson and Ho (1975), Applied
Optimal Control, sections 2.3 to 2.8, 3.1 to 3.4.                                                 # (from memory)
"""

from __future__ import annotations

import re
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from html import escape

from solvers.formula.algebra import ZERO, add, bare, factored, multiply, negative
from solvers.formula.derivative import derivative, total_derivative
from solvers.formula.mathml import GREEK, Range, element, fragment
from solvers.formula.nodes import At, Call, Name, Node, Relation, size, walk
from solvers.formula.parser import DEPTH_LIMIT
from solvers.formula.printer import text
from solvers.formula.substitute import TooLargeError, expander, substitute
from solvers.lowering import Lowered, Quantity, lower, primed
from solvers.problem import Condition, Place, Problem, Seek

EXPANDED_LIMIT = 4_000
"""Nodes of a formula whose abbreviations are written out."""

DISPLAY_LIMIT = 300
"""Nodes of a condition that is still worth reading."""

READABLE_RATE = 16
"""Nodes up to which a derivative along the curve is carried out; longer ones stay as d/dx of a formula."""


@dataclass(frozen=True, slots=True)
class Necessary:
    """One condition.  `place` is where it holds ("t = T"), or empty where it holds everywhere."""

    kind: str  # "Euler-Lagrange", "costate", "stationarity", "natural boundary", "first integral", or what L or H is
    subject: str  # the quantity or parameter that it belongs to
    relation: Relation
    extent: Range
    place: str = ""

    @property
    def text(self) -> str:
        """The condition as plain text."""
        return text(self.relation) + (f" at {self.place}" if self.place else "")

    @property
    def mathml(self) -> str:
        """The condition as a `<math>` element."""
        where = f"<mtext>\u2002at {escape(self.place)}</mtext>" if self.place else ""
        return element(fragment(self.relation, self.extent) + where, self.text, block=True)


@dataclass(frozen=True, slots=True)
class NecessaryConditions:
    """All conditions, and what the reader has to know about them."""

    conditions: tuple[Necessary, ...]
    notes: tuple[str, ...]


def necessary_conditions(problem: Problem, deadline: float | None = None) -> NecessaryConditions:
    """The necessary conditions of `problem`.

    What is too large to be read, or is not done when `time.monotonic()` passes `deadline`, is left out with a note.
    """
    derivation = _Derivation(problem, deadline)
    found: list[Necessary] = []
    notes: list[str] = []
    try:
        derivation.prepare()
        for condition in derivation.conditions():
            parts = sum(size(side) for side in condition.relation.sides)
            if parts > DISPLAY_LIMIT:
                notes.append(
                    f"The {condition.kind} condition of {condition.subject} is left out: it has {parts:,} parts."
                )
            else:
                found.append(condition)
    except TooLargeError as error:
        notes.append(f"Necessary conditions are left out: {error}.")
    except TimeoutError:
        notes.append("Some necessary conditions are left out: deriving them takes too long.")
    except ValueError as error:  # a table in a formula
        notes.append(f"Some necessary conditions are left out: {error}.")
    return NecessaryConditions(tuple(found), (*notes, *derivation.notes))


@dataclass(slots=True)
class _Derivation:
    problem: Problem
    deadline: float | None
    notes: list[str] = field(default_factory=list)
    lagrangian: Node = ZERO  # integrand and the equalities' multipliers
    terminal: Node = ZERO  # endpoint term and the multipliers of what holds at the ends
    functions: set[str] = field(default_factory=set)  # names of what varies along the curve
    orders: dict[str, int] = field(init=False)
    lowered: Lowered = field(init=False)
    expand: Callable[[Node], Node] = field(init=False)
    start: Place = field(init=False)
    end: Place = field(init=False)

    def __post_init__(self) -> None:
        self.lowered = lower(self.problem)
        self.orders = {unknown.name: unknown.order for unknown in self.problem.unknowns}
        self.functions = set(self.orders)
        self.start, self.end = self.problem.places[0], self.problem.places[-1]

    # ---- the functional with its multipliers ----

    def prepare(self) -> None:
        """Write the abbreviations out and append the equalities with their multipliers."""
        problem = self.problem
        self.expand = expander(
            [(name, bare(tree)) for name, tree in problem.where], problem.independent, self.functions, self.rate,
            nodes=EXPANDED_LIMIT, levels=DEPTH_LIMIT,
        )  # fmt: skip
        integrand = [self.expand(bare(problem.integrand))] if problem.integrand is not None else []
        terminal = [self.expand(bare(problem.endpoint))] if problem.endpoint is not None else []
        coupling = [c for c in problem.endpoints if self.fixed(c) is None]
        for letter, conditions in (("λ", problem.integrals), ("ν", tuple(coupling))):
            for multiplier, condition in zip(self.multipliers(letter, len(conditions)), conditions, strict=True):
                excess = self.excess(condition)
                integrals = dict.fromkeys(n for n in walk(excess) if isinstance(n, Call) and n.function == "integral")
                for integral in integrals:
                    weight = derivative(excess, integral, self.check)
                    integrand.append(multiply([Name(multiplier), weight, integral.arguments[0]]))
                if any(isinstance(n, At) for n in walk(excess)) or self.parameters(excess):
                    terminal.append(multiply([Name(multiplier), excess]))
                self.explain(multiplier, condition)
        equal = [c for c in problem.constraints if c.equality]
        implicit = [(add([self.tree(e.left), negative(self.tree(e.right))]), e.label) for e in self.lowered.equalities]
        along = [*implicit, *((self.excess(c), c.label) for c in equal)]
        for multiplier, (excess, label) in zip(self.multipliers("μ", len(along)), along, strict=True):
            integrand.append(multiply([Name(multiplier), excess]))
            self.functions.add(multiplier)
            self.notes.append(f"{multiplier} is the multiplier of {label}; it varies along the curve.")
        self.lagrangian, self.terminal = add(integrand), add(terminal)
        self.warn_of_limits()

    def tree(self, tree: Node) -> Node:
        """A tree of the problem, bare and with its abbreviations written out."""
        return self.expand(bare(tree))

    def excess(self, condition: Condition) -> Node:
        """What an equality sets to zero."""
        limit = condition.lower if condition.lower is not None else condition.upper
        body = self.tree(condition.body)
        return body if limit is None else add([body, negative(self.tree(limit))])

    def explain(self, multiplier: str, condition: Condition) -> None:
        zero = "" if condition.equality else "; it is zero where that does not bind"
        self.notes.append(f"{multiplier} is the multiplier of {condition.label}{zero}.")

    def warn_of_limits(self) -> None:
        """Say which inequalities the formulas leave out."""
        problem, infinity = self.problem, float("inf")
        limits = [c.label for c in problem.constraints if not c.equality]
        limits += [f"bounds of {u.name}" for u in problem.unknowns if (u.lower, u.upper) != (-infinity, infinity)]
        if limits:
            named = ", ".join(dict.fromkeys(limits))
            self.notes.append(
                f"The equations hold where no limit binds ({named}); where one binds, its multiplier joins."
            )
        if len(problem.places) > 2:
            inner = ", ".join(place.label for place in problem.places[1:-1])
            self.notes.append(f"At {inner} the momenta or costates may jump.")

    def multipliers(self, letter: str, count: int) -> list[str]:
        """Names that the problem does not use yet, numbered where there are several."""
        letter = self.unused(letter)
        return [letter] if count == 1 else [f"{letter}{i + 1}" for i in range(count)]

    def unused(self, letter: str) -> str:
        """The letter, repeated until no name of the problem looks like it with an index."""
        problem = self.problem
        taken = [problem.independent, *self.orders, *(name for name, _ in problem.where)]
        taken += [c.name for c in problem.constants] + [p.name for p in problem.parameters]
        bases = {re.split(r"[\d_]", name)[0] for name in taken}
        bases |= {GREEK.get(base, base) for base in bases}
        while letter in bases:
            letter += letter[0]
        return letter

    def fixed(self, condition: Condition) -> At | None:
        """The value at an end that the condition prescribes, where it does nothing else."""
        body = bare(condition.body)
        known = dict(self.problem.where)
        return body if condition.equality and isinstance(body, At) and body.name not in known else None

    def parameters(self, tree: Node) -> list[str]:
        names = {n.name for n in walk(tree) if isinstance(n, Name)}
        return [p.name for p in self.problem.parameters if p.name in names]

    def check(self) -> None:
        if self.deadline is not None and time.monotonic() > self.deadline:
            raise TimeoutError

    # ---- the conditions ----

    def conditions(self) -> Iterator[Necessary]:
        if self.lowered.given:
            yield from self.hamiltonian_system()
        else:
            yield from self.variational_system()

    def variational_system(self) -> Iterator[Necessary]:
        lagrangian, shown = self.lagrangian, Name(self.unused("L"))
        if self.problem.integrals or self.functions - self.orders.keys():
            yield self.condition("Lagrangian", shown.name, shown, lagrangian)
        momenta: dict[Quantity, Node] = {}
        for name, order in self.orders.items():
            slopes = [derivative(lagrangian, Name(name, k), self.check) for k in range(order + 1)]
            for k in range(order):
                momenta[name, k] = self.alternating(slopes[k + 1 :])
            if order == 1:
                yield self.condition("Euler-Lagrange", name, self.along(slopes[1]), slopes[0])
            else:
                yield self.condition("Euler-Lagrange", name, self.alternating(slopes), ZERO)
        yield from self.boundary(momenta, sign=1)
        lost = (multiply([momentum, Name(name, k + 1)]) for (name, k), momentum in momenta.items())
        yield from self.free_numbers(add([lagrangian, negative(add(lost))]), lagrangian)

    def hamiltonian_system(self) -> Iterator[Necessary]:
        lowered, letter = self.lowered, self.unused("p")
        costates = {q: Name(f"{letter}_{q[0]}" + (f"_{q[1]}" if q[1] else "")) for q in lowered.states}
        terms = [self.explicit(self.lagrangian)]
        for (name, k), costate in costates.items():
            terms.append(multiply([costate, self.explicit(Name(name, k + 1))]))
        hamiltonian, shown = add(terms), Name(self.unused("H"))
        yield self.condition("Hamiltonian", shown.name, shown, hamiltonian)
        for quantity, costate in costates.items():
            slope = derivative(hamiltonian, Name(*quantity), self.check)
            yield self.condition("costate", primed(quantity), Name(costate.name, 1), negative(slope))
        for quantity in lowered.controls:
            yield self.condition(
                "stationarity", primed(quantity), derivative(hamiltonian, Name(*quantity), self.check), ZERO
            )
        extreme = {Seek.MINIMUM: "least", Seek.MAXIMUM: "greatest"}.get(self.problem.seek)
        if extreme and lowered.controls:
            names = ", ".join(primed(quantity) for quantity in lowered.controls)
            self.notes.append(f"Of all allowed values of {names}, those of the optimum make {shown.name} {extreme}.")
        yield from self.boundary(dict(costates), sign=-1)
        yield from self.free_numbers(shown, hamiltonian)

    def boundary(self, momenta: dict[Quantity, Node], sign: int) -> Iterator[Necessary]:
        """What holds at an end for every value that nothing fixes there.

        The momentum of a variational problem is minus the slope of the endpoint term at the last end (`sign` 1),
        a costate is the slope itself (`sign` -1); at the first end each is the other way round.
        """
        fixed = {self.fixed(condition) for condition in self.problem.endpoints}
        for place, side in ((self.start, -1), (self.end, 1)):
            where = bare(place.tree)
            for (name, k), momentum in momenta.items():
                value = At(name, k, where)
                if value in fixed:
                    continue
                slope = self.here(derivative(self.terminal, value, self.check), where)
                right = negative(slope) if sign * side > 0 else slope
                yield self.condition("natural boundary", primed((name, k)), momentum, right, self.at(place))

    def free_numbers(self, energy: Node, density: Node) -> Iterator[Necessary]:
        """What holds for every parameter, be it a free end or a number that the formulas use; and the first integral.

        `energy` is the Hamiltonian, or the Lagrangian less momenta times slopes: what the functional gains where the
        curve is made longer.  `density` is the integrand with its multipliers, or the Hamiltonian written out.
        """
        inner = {bare(place.tree) for place in self.problem.places[1:-1]}
        for parameter in self.problem.parameters:
            name = Name(parameter.name)
            slope, inside = (derivative(tree, name, self.check) for tree in (self.terminal, density))
            if inside != ZERO:
                slope = add([slope, Call("integral", (inside,))])
            if name == bare(self.end.tree):
                right = self.here(negative(slope), name)
                yield self.condition("natural boundary", parameter.name, energy, right, self.at(self.end))
            elif name == bare(self.start.tree):
                yield self.condition(
                    "natural boundary", parameter.name, energy, self.here(slope, name), self.at(self.start)
                )
            elif slope != ZERO and name not in inner:
                yield self.condition("stationarity", parameter.name, slope, ZERO)
        if derivative(density, Name(self.problem.independent), self.check) == ZERO and density != ZERO:
            yield self.condition("first integral", self.problem.independent, energy, Name(self.unused("C")))

    # ---- parts of conditions ----

    def condition(self, kind: str, subject: str, left: Node, right: Node, place: str = "") -> Necessary:
        extent = Range(self.problem.independent, self.start.tree, self.end.tree)
        return Necessary(kind, subject, Relation((factored(left), factored(right)), ("=",)), extent, place)

    def alternating(self, slopes: list[Node]) -> Node:
        """slopes[0] - d/dx slopes[1] + d²/dx² slopes[2] - ..."""
        rates = [self.along(slope, times) for times, slope in enumerate(slopes)]
        return add(negative(rate) if times % 2 else rate for times, rate in enumerate(rates))

    def explicit(self, tree: Node) -> Node:
        """The tree with every highest derivative that the dynamics give replaced by its formula."""
        given = {Name(*quantity): self.tree(right) for quantity, right in self.lowered.given.items()}
        while any(node in given for node in walk(tree)):
            self.check()
            if size(tree) > EXPANDED_LIMIT:
                raise TooLargeError(f"with its dynamics put in, a formula has more than {EXPANDED_LIMIT:,} parts")
            tree = substitute(tree, lambda node: given.get(node) if isinstance(node, Name) else None)
        return tree

    def rate(self, tree: Node) -> Node:
        return total_derivative(tree, self.problem.independent, self.functions, self.check)

    def along(self, tree: Node, times: int = 1) -> Node:
        """The derivative along the curve: carried out where it stays short, else only written down."""
        if tree == ZERO:
            return ZERO
        carried_out: Node = tree
        for _ in range(times):
            carried_out = self.rate(carried_out)
            if size(carried_out) > READABLE_RATE:
                power = f"^{times}" if times > 1 else ""
                return Call(f"d{power}/d{self.problem.independent}{power}", (tree,))
        return carried_out

    def here(self, tree: Node, where: Node) -> Node:
        """Values at `where` written as plain names, since the condition says where it holds."""
        return substitute(tree, lambda n: Name(n.name, n.order) if isinstance(n, At) and n.place == where else None)

    def at(self, place: Place) -> str:
        return f"{self.problem.independent} = {text(place.tree)}"
