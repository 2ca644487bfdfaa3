"""Integrands that are linear in the slopes, M(x, y) + N(x, y) y': nothing in them holds a slope.

The Euler-Lagrange equation M_y = N_x has no derivative in it.  With P_y = N the integrand is the derivative of
P(x, y(x)) along the curve and G = M - P_x, so that the integral is that of G and what P is at the ends:

* where G does not depend on y the value is the same for every curve between the same ends;
* else the slope no longer occurs.  As a jump costs no more than P says, curves come as near to the least value of
  G at every x as one likes, whatever is held at the ends, and none of them has that value unless the least happens to
  lie on a continuous curve that starts and ends where it should;
* with several unknowns there need not be a P: then going round a small loop in ever less x gains as often as one likes.

With limits on the slopes nothing of that holds: such problems are left as they are.

References: Gelfand, Fomin (1963), Calculus of Variations, section 4, case 4; Miele (1962), in Leitmann, Optimization
Techniques, chapter 4 (linear integrands by Green's theorem); both from memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import combinations, product

from solvers.formula.algebra import ZERO, add, bare, negative
from solvers.formula.antiderivative import antiderivative
from solvers.formula.derivative import derivative
from solvers.formula.identity import vanishes
from solvers.formula.nodes import SIDE, At, Call, Lookup, Name, Node, Number, Sum, walk
from solvers.formula.substitute import at_place, substitute
from solvers.formula.substitute import written_out as with_abbreviations
from solvers.problem import Condition, Parameter, Problem, Seek
from solvers.transcription.functions import ROUNDED
from solvers.transcription.lowering import Quantity, simple_bound
from solvers.undetermined import Undetermined

SAME_FOR_ALL = (
    "The integrand is the derivative of a function along the curve: the Euler-Lagrange equation holds identically, and "
    "the value depends on the ends only."
)
FOUND_BY_PLACE = (
    "The integrand is linear in the slope: the Euler-Lagrange equation holds no derivative and determines the curve at "
    "every place by itself, whatever is held at the ends."
)
UNDETERMINED = (
    "Nothing determines {name} between the ends: every curve has the same value. The one shown is one of many."
)


@dataclass(frozen=True, slots=True)
class Reduced:
    """A problem with a linear integrand, written without slopes: `problem` has the same value on every curve.

    In `relaxed` the unknowns may jump, and its values at the ends are parameters or given: its least value is the
    infimum; `ends` tells for each unknown at the start and at the end which.  `alike` says that the integral is the
    same for all curves between the same ends.  In `judged` the values that are given at the ends are written out.
    """

    problem: Problem
    relaxed: Problem
    ends: tuple[tuple[str, int, Node], ...]
    alike: bool
    judged: Problem

    @property
    def note(self) -> str:
        """What a reader should know."""
        return SAME_FOR_ALL if self.alike else FOUND_BY_PLACE

    @property
    def undetermined(self) -> tuple[Undetermined, ...]:
        """The unknowns that nothing determines between the ends."""
        names = dict.fromkeys(name for name, _, _ in self.ends if self.alike)
        return tuple(Undetermined(name, f"/unknowns/{name}", UNDETERMINED.format(name=name)) for name in names)


@dataclass(frozen=True, slots=True)
class Turning:
    """A problem whose value falls with every turn around a small loop; `problem` has the same curves."""

    problem: Problem


def linear(tree: Node, problem: Problem) -> bool:
    """Whether a formula is proved to be linear in the highest derivatives of all unknowns together, and without kinks
    in them."""
    return _linear(written_out(tree, problem), _slopes(problem), kinks=False)


def linear_by_parts(tree: Node, problem: Problem, quantity: Quantity | None = None) -> bool:
    """The same, but for kinks of abs, max and min: linear between them; or only in one quantity."""
    names = _slopes(problem) if quantity is None else [Name(*quantity)]
    return _linear(written_out(tree, problem), names, kinks=True)


def linear_in(tree: Node, names: Sequence[Name]) -> bool:
    """Whether a formula is proved to be linear in all these names together, and without kinks in them."""
    return _linear(bare(tree), names, kinks=False)


def reduced(problem: Problem) -> Reduced | Turning | None:
    """A problem whose integrand is linear in the slopes without them; None where it is no such problem."""
    if problem.integrand is None or not _pure(problem):
        return None
    slopes = _slopes(problem)
    integrand = written_out(problem.integrand, problem)
    moving = [Name(unknown.name) for unknown in problem.unknowns if unknown.order]
    if not _smooth(integrand) or not _linear(integrand, slopes, kinks=False) or not _convex_sections(problem):
        return None
    factors = [derivative(integrand, slope) for slope in slopes]
    rest = _at_zero(integrand, slopes)
    if all(factor == ZERO for factor in factors):
        return None
    for (one, at_one), (other, at_other) in combinations(zip(moving, factors, strict=True), 2):
        if not vanishes(_valued(_minus(derivative(at_one, other), derivative(at_other, one)), problem)):
            return Turning(_with(problem, ZERO, problem.endpoint))
    primitive = _primitive(moving, factors)
    if primitive is None:
        return None
    left = _minus(bare(rest), derivative(primitive, Name(problem.independent)))
    turns = [derivative(left, Name(unknown.name)) for unknown in problem.unknowns]
    alike = all(vanishes(_valued(turn, problem)) for turn in turns)
    if alike and not all(vanishes(turn) for turn in turns):  # with other constants it would not be so
        return None
    if alike:
        left = _at_zero(left, [Name(unknown.name) for unknown in problem.unknowns])
    start, end = (at_place(primitive, place.tree, "", problem.independent, [name.name for name in moving])
                  for place in problem.places)  # fmt: skip
    ends = _minus(end, start)
    endpoint = ends if problem.endpoint is None else Sum((problem.endpoint, ends), (False, False))
    return _with_loose_ends(_with(problem, left, endpoint), alike)


def _with(problem: Problem, integrand: Node, endpoint: Node | None) -> Problem:
    return replace(problem, integrand=integrand, endpoint=endpoint)


def _minus(one: Node, other: Node) -> Node:
    return add([one, negative(other)])


def _slopes(problem: Problem) -> list[Name]:
    """The highest derivatives."""
    return [Name(unknown.name, unknown.order) for unknown in problem.unknowns if unknown.order]


def written_out(tree: Node, problem: Problem) -> Node:
    """A formula with its abbreviations written out; without places in any text."""
    return with_abbreviations(bare(tree), [(name, bare(whole)) for name, whole in problem.where])


def _valued(tree: Node, problem: Problem) -> Node:
    """A formula with the values of constants in it."""
    values = {c.name: Number(c.value, repr(c.value)) for c in problem.constants}
    return substitute(tree, lambda node: values.get(node.name) if isinstance(node, Name) else None)


def _pure(problem: Problem) -> bool:
    """Whether a curve of first order is sought between two ends, and nothing holds its slope or any integral."""
    extras = (problem.dynamics, problem.observations, problem.integrals, problem.arcs, problem.sweeps)
    if any(extras) or problem.continuation is not None or problem.seek is Seek.STATIONARY or len(problem.places) != 2:
        return False
    if any(unknown.order > 1 for unknown in problem.unknowns) or not any(u.order for u in problem.unknowns):
        return False
    known = {unknown.name for unknown in problem.unknowns}
    trees = [condition.body for condition in problem.conditions]
    trees += [problem.endpoint] if problem.endpoint is not None else []
    nodes = [node for tree in trees for node in walk(tree)]
    return not any(
        (isinstance(node, Name | At) and node.order > 0)
        or (isinstance(node, At) and node.name not in known)
        or (isinstance(node, Call) and node.function == "integral")
        or (isinstance(node, Name) and node.name in {name for name, _ in problem.where})
        for node in nodes
    )


def _smooth(tree: Node) -> bool:
    """Whether a formula has derivatives of every order, and none that a table would have to give."""
    return not any(isinstance(node, Lookup | At) or (isinstance(node, Call) and node.function in {*ROUNDED, SIDE})
                   for node in walk(tree))  # fmt: skip


def _linear(tree: Node, slopes: Sequence[Name], kinks: bool) -> bool:
    """Whether all second derivatives by the slopes vanish, by the algebra alone: of functions with slopes inside only
    those with kinks are straight anywhere."""
    for node in walk(tree):
        bent = isinstance(node, Call) and not (kinks and node.function in ROUNDED)
        if bent and any(part in slopes for part in walk(node)):
            return False
    found = [derivative(tree, slope) for slope in slopes]
    return all(derivative(one, slope) == ZERO for k, one in enumerate(found) for slope in slopes[k:])


def _convex_sections(problem: Problem) -> bool:
    """Whether at every place the constraints leave an interval, or a convex set: a jump then passes through it."""
    for condition in problem.constraints:
        if simple_bound(condition) is not None:
            continue
        body = written_out(condition.body, problem)
        names = [Name(unknown.name) for unknown in problem.unknowns]
        if condition.equality or not _smooth(body) or not _linear(body, names, kinks=False):
            return False
    return True


def _primitive(moving: Sequence[Name], factors: Sequence[Node]) -> Node | None:
    """P with the given derivatives, which are known to fit together."""
    found: list[Node] = []
    for k, (name, factor) in enumerate(zip(moving, factors, strict=True)):
        left = _at_zero(_minus(factor, derivative(add(found), name)), moving[:k])  # it does not depend on those before
        part = antiderivative(left, name)
        if part is None:
            return None
        found.append(part)
    return add(found)


def _at_zero(tree: Node, names: Sequence[Name]) -> Node:
    return substitute(tree, lambda node: ZERO if node in names else None)


def _with_loose_ends(problem: Problem, alike: bool) -> Reduced:
    """A problem without slopes together with the one whose unknowns may jump: what they are at the ends has nothing to
    do with what they are inside."""
    moving = [unknown for unknown in problem.unknowns if unknown.order]
    given = {
        (c.body.name, bare(c.body.place)): c.lower for c in problem.endpoints if isinstance(c.body, At) and _fixed(c)
    }
    ends, parameters = [], []
    for unknown, (place, label) in product(moving, zip((0, -1), ("start", "end"), strict=True)):
        value = given.get((unknown.name, bare(problem.places[place].tree)))
        if value is None:
            name = f"{unknown.name} at the {label}"
            parameters.append(Parameter(name, unknown.lower, unknown.upper, unit=unknown.unit))
            value = Name(name)
        ends.append((unknown.name, place, value))
    known = {(name, bare(problem.places[place].tree)): value for name, place, value in ends}

    def loose(tree: Node) -> Node:
        return substitute(tree, lambda node: known.get((node.name, bare(node.place))) if isinstance(node, At) else None)

    def with_given(tree: Node) -> Node:
        return substitute(tree, lambda node: given.get((node.name, bare(node.place))) if isinstance(node, At) else None)

    held = [replace(c, body=loose(c.body)) for c in problem.endpoints if not _fixed(c)]
    names = [unknown.name for unknown in moving]
    held += [replace(c, body=loose(at_place(c.body, place.tree, "", problem.independent, names)))
             for c, place in product(problem.constraints, problem.places)]  # fmt: skip
    relaxed = replace(
        problem,
        unknowns=tuple(replace(unknown, order=0) for unknown in problem.unknowns),
        parameters=(*problem.parameters, *parameters),
        endpoints=tuple(c for c in held if any(isinstance(node, Name) for node in walk(c.body))),
        endpoint=None if problem.endpoint is None else loose(problem.endpoint),
    )
    judged = replace(problem, endpoint=None if problem.endpoint is None else with_given(problem.endpoint))
    return Reduced(problem, relaxed, tuple(ends), alike, judged)


def _fixed(condition: Condition) -> bool:
    """Whether a condition gives the value of one unknown at an end."""
    return isinstance(condition.body, At) and condition.equality
