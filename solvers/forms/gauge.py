"""Curves of linear growth in parametric form, with a gauge that fixes the speed along them.

An integrand such as y*sqrt(1 + y'^2) grows only linearly with the slope: a jump costs finitely much, a vertical tangent
is allowed, and a polynomial y(x) can neither follow it nor be trusted near it.  Written in a parameter s with x(s) and
y(s) the integral is the same for every parametrisation, and one may choose the speed:

* where nothing but the integral is minimised, its square is minimised instead: by the inequality of Cauchy and Schwarz
  the least integral of f^2 over s from 0 to 1 is the square of the least integral of f, at constant f.  The curve comes
  out in its own cost as parameter, in which even 1/sqrt(y) at y = 0 is smooth (the greatest integral of an f that is
  not positive is minus the least one of -f);
* else the speed (x'/X)^2 + (y'/Y)^2 is held constant by an equality.

References: Bliss (1946), Lectures on the Calculus of Variations, chapter V (parametric problems); Milnor (1963), Morse
Theory, section 12 (energy and length).  (Both from memory.)
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from fractions import Fraction

from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import (
    At,
    Call,
    Name,
    Negative,
    Node,
    Number,
    Power,
    Product,
    Sum,
    children,
    walk,
    with_children,
)
from solvers.formula.printer import text
from solvers.problem import Condition, Parameter, Place, Problem, Seek, Unknown
from solvers.transcription.limits import number

PARAMETER = "path fraction"
"""The new independent variable; no user can write this name."""
SPEED = "path speed"

ZERO, ONE = Number(0.0, "0"), Number(1.0, "1")


@dataclass(frozen=True, slots=True)
class Gauged:
    """A problem in parametric form; `squared` says that its value is the square of the original's."""

    original: Problem
    problem: Problem
    squared: bool

    def value(self, found: float) -> float:
        """The original's value for one of the parametric form."""
        if not self.squared:
            return found
        return -math.sqrt(found) if self.original.seek is Seek.MAXIMUM else math.sqrt(found)

    def slope(self, found: float) -> float:
        """The derivative of the original's value by that of the parametric form."""
        return 1 / (2 * self.value(found)) if self.squared else 1.0


def in_parametric_form(problem: Problem, sizes: Callable[[], dict[str, float]], squared: bool) -> Gauged | None:
    """The problem in parametric form, or None where that does not apply.

    It applies to pure variational problems of first order whose integrand grows linearly with the derivatives and that
    name no place between the ends.  `sizes` finds typical sizes of the independent variable and of the unknowns;
    `squared` asks for the first of the two gauges, which is granted where it is right.
    """
    if problem.integrand is None or problem.dynamics or problem.observations or len(problem.places) != 2:
        return None
    names = {unknown.name for unknown in problem.unknowns}
    if any(unknown.order != 1 for unknown in problem.unknowns) or not names:
        return None
    form = _Homogeneous(problem.independent, names, dict(problem.where))
    try:
        integrand, degree = form.of(problem.integrand)
        degrees = [degree, *(form.of(node.arguments[0])[1] for c in problem.integrals for node in walk(c.body)
                             if isinstance(node, Call) and node.function == "integral")]  # fmt: skip
    except _OtherGrowthError:
        return None
    if max(degrees) != 1:
        return None
    integrand = form.raised(integrand, 1 - degree)
    squared = squared and problem.seek is not Seek.STATIONARY and problem.endpoint is None and not problem.integrals
    x = problem.independent
    unknowns = [
        Unknown(x, 1, unit=problem.independent_unit, guess=_straight(problem)),
        *(replace(u, guess=_along(u, problem)) for u in problem.unknowns),
    ]
    constraints = [replace(c, body=form.plain(c.body)) for c in problem.constraints]
    constraints.append(Condition(Name(x, 1), ZERO, None, f"{x} runs forward", ""))
    parameters = list(problem.parameters)
    if not squared:
        two, size = Number(2.0, "2"), sizes()
        squares = [
            Power(Product((Name(name, 1), Number(size[name], "")), (False, True)), two) for name in (x, *sorted(names))
        ]
        body = Sum((*squares, Power(Name(SPEED), two)), (*[False] * len(squares), True))
        constraints.append(Condition(body, ZERO, ZERO, "constant speed along the curve", ""))
        parameters.append(Parameter(SPEED, 0.0, guess=2.0))
    endpoints = [replace(c, body=_moved(c.body, problem)) for c in problem.endpoints]
    for place, at in zip(problem.places, (ZERO, ONE), strict=True):
        here = At(x, 0, at)
        if isinstance(place.tree, Name) and place.tree.name in {p.name for p in parameters}:
            endpoints.append(Condition(Sum((here, place.tree), (False, True)), ZERO, ZERO, place.label, ""))
        else:
            endpoints.append(Condition(here, place.tree, place.tree, place.label, ""))
    if squared:
        integrand = Negative(integrand) if problem.seek is Seek.MAXIMUM else integrand
        endpoints += [Condition(At(name, 1, at), ZERO, ZERO, f"{name} starts or ends at rest", "")
                      for at, place in zip((ZERO, ONE), problem.places, strict=True) if _infinite(problem, place)
                      for name in (x, *sorted(names))]  # fmt: skip
    integrals = [replace(c, body=form.integrals(_moved(c.body, problem))) for c in problem.integrals]
    endpoint = None if problem.endpoint is None else form.integrals(_moved(problem.endpoint, problem))
    changed = replace(
        problem,
        independent=PARAMETER,
        places=(Place(ZERO, "0"), Place(ONE, "1")),
        unknowns=tuple(unknowns),
        seek=Seek.MINIMUM if squared else problem.seek,
        integrand=Power(integrand, Number(2.0, "2")) if squared else integrand,
        endpoint=endpoint,
        parameters=tuple(parameters),
        where=tuple((name, form.plain(tree)) for name, tree in problem.where),
        endpoints=tuple(endpoints),
        constraints=tuple(constraints),
        integrals=tuple(integrals),
    )
    return Gauged(problem, changed, squared)


class _OtherGrowthError(Exception):
    """A tree grows with the slope in another way than a power does."""


class _Homogeneous:
    """Trees in x, y(x), y'(x) rewritten in x(s), y(s), x'(s), y'(s), where y' becomes y'/x'."""

    def __init__(self, independent: str, unknowns: set[str], where: dict[str, Node]) -> None:
        self._slope = Name(independent, 1)
        self._unknowns = unknowns
        self._where = where

    def plain(self, tree: Node) -> Node:
        """The tree with every y' written as y'/x'."""
        if isinstance(tree, Name) and tree.name in self._unknowns and tree.order == 1:
            return Product((tree, self._slope), (False, True))
        return with_children(tree, tuple(self.plain(part) for part in children(tree)))

    def integrals(self, tree: Node) -> Node:
        """The tree with every integral over x as one over s."""
        if isinstance(tree, Call) and tree.function == "integral":
            body, degree = self.of(tree.arguments[0])
            return Call("integral", (self.raised(body, 1 - degree),))
        return with_children(tree, tuple(self.integrals(part) for part in children(tree)))

    def raised(self, tree: Node, power: Fraction) -> Node:
        """The tree times a power of x'."""
        if power == 0:
            return tree
        if power == 1:
            return Product((tree, self._slope), (False, False))
        return Product((tree, Power(self._slope, Number(float(power), str(power)))), (False, False))

    def of(self, tree: Node) -> tuple[Node, Fraction]:
        """A tree h and a degree d with h = tree * x'^d, homogeneous in (x', y') of degree d, free of 1/x'.

        Raises _OtherGrowthError where there is none, as for exp(y').
        """
        match tree:
            case Name(name=name, order=order) if name in self._unknowns and order == 1:
                return tree, Fraction(1)
            case Name(name=name) if name in self._where and self._moves(tree):
                return self.of(self._where[name])
            case Negative(operand=operand):
                inner, degree = self.of(operand)
                return Negative(inner), degree
            case Sum(terms=terms, minus=minus):
                parts = [self.of(term) for term in terms]
                degree = max(d for _, d in parts)
                return Sum(tuple(self.raised(part, degree - d) for part, d in parts), minus), degree
            case Product(factors=factors, over=over):
                parts = [self.of(factor) for factor in factors]
                degree = sum((-d if below else d for (_, d), below in zip(parts, over, strict=True)), Fraction(0))
                return Product(tuple(part for part, _ in parts), over), degree
            case Power(base=base, exponent=exponent) if isinstance(_number(exponent), float):
                inner, degree = self.of(base)
                return Power(inner, exponent), degree * Fraction(str(_number(exponent))).limit_denominator(1000)
            case Call(function="sqrt", arguments=(inside,)):
                inner, degree = self.of(inside)
                return Call("sqrt", (inner,)), degree / 2
            case Call(function="abs", arguments=(inside,)):
                inner, degree = self.of(inside)
                return Call("abs", (inner,)), degree
            case Call(function="hypot", arguments=sides):
                parts = [self.of(side) for side in sides]
                degree = max(d for _, d in parts)
                return Call("hypot", tuple(self.raised(part, degree - d) for part, d in parts)), degree
            case _ if self._moves(tree):
                raise _OtherGrowthError
            case _:
                return tree, Fraction(0)

    def _moves(self, tree: Node) -> bool:
        """Whether a tree, its abbreviations included, holds a derivative."""
        return any(
            isinstance(node, Name)
            and ((node.name in self._unknowns and node.order == 1)
                 or (node.name in self._where and self._moves(self._where[node.name])))
            for node in walk(tree)
        )  # fmt: skip


def _infinite(problem: Problem, place: Place) -> bool:
    """Whether the integrand is infinite at an end where all values are fixed, so that the curve is at rest there."""
    values = {c.name: c.value for c in problem.constants}
    try:
        values[problem.independent] = number(place.tree, values)
        for condition in problem.endpoints:
            body = condition.body
            if isinstance(body, At) and text(body.place) == text(place.tree) and condition.equality and condition.lower:
                values[body.name] = number(condition.lower, values)
        abbreviations = dict(problem.where)

        def look_up(name: str, order: int) -> float:
            if order:
                return 1.0
            return values[name] if name in values else float(evaluate(abbreviations[name], look_up, REAL))

        evaluate(problem.integrand or ZERO, look_up, REAL)
    except ZeroDivisionError:
        return True
    except (KeyError, ValueError, OverflowError):
        return False
    return False


def _number(tree: Node) -> float | None:
    match tree:
        case Number(value=value):
            return float(value)
        case Negative(operand=Number(value=value)):
            return -float(value)
        case Product(factors=(Number(value=above), Number(value=below)), over=(False, True)) if below:
            return above / below
        case _:
            return None


def _moved(tree: Node, problem: Problem) -> Node:
    """A tree of values at places with the ends at 0 and 1."""
    if isinstance(tree, At):
        first = text(tree.place) == text(problem.places[0].tree)
        return replace(tree, place=ZERO if first else ONE)
    return with_children(tree, tuple(_moved(part, problem) for part in children(tree)))


def _straight(problem: Problem) -> Node:
    """x as a straight line; a free end is at the guess of its parameter."""
    start, end = (place.tree for place in problem.places)
    step = Product((Name(PARAMETER), Sum((end, start), (False, True))), (False, False))
    return Sum((start, step), (False, False))


def _along(unknown: Unknown, problem: Problem) -> Node | tuple[tuple[float, float], ...] | None:
    """The user's guess in terms of s."""
    guess = unknown.guess
    if guess is None:
        return None
    if isinstance(guess, tuple):
        first, last = guess[0][0], guess[-1][0]  # points are meant to reach from end to end
        return tuple(((at - first) / (last - first), value) for at, value in guess)
    line = _straight(problem)

    def replaced(tree: Node) -> Node:
        if isinstance(tree, Name) and tree.name == problem.independent:
            return line
        return with_children(tree, tuple(replaced(part) for part in children(tree)))

    return replaced(guess)
