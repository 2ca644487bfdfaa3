"""Curves of linear growth in parametric form, with a gauge that fixes the speed along them.

An integrand such as y*sqrt(1 + y'^2) grows only linearly with the slope: a jump costs finitely much, a vertical tangent
is allowed, and a polynomial y(x) can neither follow it nor be trusted near it.  Written in a parameter s with x(s) and
y(s) the integral is the same for every parametrisation, and one may choose the speed; the same where it is so from the
beginning, as for sqrt(x'^2 + y'^2):

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
from collections.abc import Callable, Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass, replace

from solvers.forms.affine import linear_by_parts
from solvers.forms.free_kinks import at_free_places
from solvers.forms.homogeneous import Homogeneous, OtherGrowthError
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
from solvers.problem import KINK, MIDDLE, Condition, Parameter, Place, Problem, Seek, Unknown
from solvers.transcription.limits import number

PARAMETER = "path fraction"
"""The new independent variable; no user can write this name."""
SPEED = "path speed"

ZERO, ONE = Number(0.0, "0"), Number(1.0, "1")
TWO = Number(2.0, "2")

EVENLY, STEADILY = "in which the cost grows evenly", "at constant speed"
GROWS = "The integrand grows linearly with the slope: the curve was found in parametric form, {}."
INVARIANT = "The integral is the same for every parametrisation: the curve is told in the one {}."

Sizes = Callable[[], Mapping[str, float]]
"""Finds typical sizes of the independent variable and of the unknowns."""


@dataclass(frozen=True, slots=True)
class Way:
    """A part of the curve along which the independent variable is an unknown too: what it and the others are called."""

    x: str
    unknowns: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Gauged:
    """A problem in parametric form; `squared` says that its value is the square of the original's.

    `roots` are the integrands whose squares are minimised then.  `note` says what was done.
    """

    original: Problem
    problem: Problem
    squared: bool
    roots: tuple[Node, ...]
    ways: tuple[Way, ...]
    note: str

    @property
    def graph(self) -> bool:
        """Whether the curve is found as x(s) and y(s), and wanted as y(x)."""
        return [way.x for way in self.ways] == [self.original.independent]

    def value(self, found: float) -> float:
        """The original's value for one of the parametric form."""
        if not self.squared:
            return found
        root = math.sqrt(max(found, 0.0))
        return -root if self.original.seek is Seek.MAXIMUM else root

    def slope(self, found: float) -> float:
        """The derivative of the original's value by that of the parametric form."""
        return 1 / (2 * self.value(found)) if self.squared else 1.0


Form = Callable[[Problem, Sizes, bool], Gauged | None]
"""A problem in parametric form, or None where that does not apply; True asks for the first of the two gauges, which is
granted where it is right."""


def in_parametric_form(problem: Problem, sizes: Sizes, squared: bool) -> Gauged | None:
    """The problem in parametric form, or None where that does not apply.

    It applies to pure variational problems of first order whose integrand grows linearly with the derivatives and that
    name no place between the ends; the solver's own at kinks are where x has their values.
    """
    if problem.integrand is None or problem.dynamics or problem.observations:
        return None
    if not all(place.label.startswith(KINK + " ") for place in problem.places[1:-1]):
        return None
    problem = at_free_places(problem)
    names = tuple(unknown.name for unknown in problem.unknowns)
    if any(unknown.order != 1 for unknown in problem.unknowns) or not names:
        return None
    assert problem.integrand is not None
    form = Homogeneous(problem.independent, set(names), dict(problem.where))
    integrals = list(integrals_of(problem))
    squared = squared and problem.seek is not Seek.STATIONARY and problem.endpoint is None and not integrals
    if len(names) > 1 and _given(problem) and is_invariant(problem, form, (problem.integrand, *integrals)):
        return _with_speed(problem, form, sizes, squared)
    if all(linear_by_parts(body, problem) for body in (problem.integrand, *integrals)):
        return None  # nothing in it bends with the slope: a parametric form would not be held by it either
    try:
        degrees = [form.of(body)[1] for body in (problem.integrand, *integrals)]
    except OtherGrowthError:
        return None
    return _upright(problem, form, sizes, squared) if max(degrees) == 1 else None


def integrals_of(problem: Problem) -> Iterator[Node]:
    """What is integrated in the conditions and in the endpoint term."""
    trees = [c.body for c in problem.integrals] + ([] if problem.endpoint is None else [problem.endpoint])
    for node in (node for tree in trees for node in walk(tree)):
        if isinstance(node, Call) and node.function == "integral":
            yield node.arguments[0]


def is_invariant(problem: Problem, form: Homogeneous, integrands: tuple[Node, ...]) -> bool:
    """Whether integrals and constraints are the same for every parametrisation already."""
    return all(form.invariant(body, 1) for body in integrands) and all(
        form.invariant(condition.body, 0) for condition in problem.constraints
    )


def constant_speed(rates: list[tuple[Name, float]], speed: str, label: str) -> Condition:
    """The sum of the squares of rates, each over its size, is the square of a parameter."""
    squares = [Power(Product((rate, Number(size, "")), (False, True)), TWO) for rate, size in rates]
    body = Sum((*squares, Power(Name(speed), TWO)), (*[False] * len(squares), True))
    return Condition(body, ZERO, ZERO, label, "")


def at_rest(names: tuple[str, ...], place: Node) -> Iterator[Condition]:
    """What holds where the integrand is infinite and its square is minimised."""
    for name in names:
        yield Condition(At(name, 1, place), ZERO, ZERO, f"{name} starts or ends at rest", "")


def root_of(integrand: Node, problem: Problem) -> Node:
    """What is squared in place of an integrand: where a maximum is sought its opposite."""
    return Negative(integrand) if problem.seek is Seek.MAXIMUM else integrand


def _given(problem: Problem) -> bool:
    """Whether both ends are given: where one is free, the curve does not say where."""
    free = {parameter.name for parameter in problem.parameters}
    return not any(isinstance(place.tree, Name) and place.tree.name in free for place in problem.places)


def _with_speed(problem: Problem, form: Homogeneous, sizes: Sizes, squared: bool) -> Gauged:
    """A problem that is the same for every parametrisation, with one of them fixed."""
    assert problem.integrand is not None
    names = tuple(sorted(unknown.name for unknown in problem.unknowns))
    note = INVARIANT.format(EVENLY if squared else STEADILY)
    if squared:
        length = Sum((problem.places[1].tree, problem.places[0].tree), (False, True))
        root = root_of(problem.integrand, problem)
        integrand = Product((length, Power(root, TWO)), (False, False))
        rest = [c for place in problem.places if infinite(problem, place) for c in at_rest(names, place.tree)]
        endpoints = (*problem.endpoints, *rest)
        changed = replace(problem, seek=Seek.MINIMUM, integrand=integrand, endpoints=endpoints)
        return Gauged(problem, changed, squared, (root,), (), note)
    size = sizes()
    span = size[problem.independent]
    gauge = constant_speed([(Name(name, 1), size[name] / span) for name in names], SPEED, "constant speed")
    changed = replace(
        problem,
        parameters=(*problem.parameters, Parameter(SPEED, 0.0, guess=2.0)),
        constraints=(*problem.constraints, gauge),
    )
    return Gauged(problem, changed, squared, (), (), note)


def _upright(problem: Problem, form: Homogeneous, sizes: Sizes, squared: bool) -> Gauged:
    """The problem with x(s) as an unknown, so that the curve may stand upright."""
    assert problem.integrand is not None
    homogeneous, degree = form.of(problem.integrand)
    integrand = form.raised(homogeneous, 1 - degree)
    integrand = root_of(integrand, problem) if squared else integrand
    x = problem.independent
    names = (x, *sorted(unknown.name for unknown in problem.unknowns))
    unknowns = [
        Unknown(x, 1, unit=problem.independent_unit, guess=_straight(problem)),
        *(replace(u, guess=_along(u, problem)) for u in problem.unknowns),
    ]
    constraints = [replace(c, body=form.plain(c.body)) for c in problem.constraints]
    constraints.append(Condition(Name(x, 1), ZERO, None, f"{x} runs forward", ""))
    parameters = list(problem.parameters)
    if not squared:
        size = sizes()
        rates = [(Name(name, 1), size[name]) for name in names]
        constraints.append(constant_speed(rates, SPEED, "constant speed along the curve"))
        parameters.append(Parameter(SPEED, 0.0, guess=2.0))
    endpoints = [replace(c, body=_moved(c.body, problem)) for c in problem.endpoints]
    kinks = tuple(Place(Name(place.label), place.label) for place in problem.places[1:-1])
    places = (ZERO, *(place.tree for place in kinks), ONE)
    for place, at in zip(problem.places, places, strict=True):
        endpoints.append(tied(x, at, place, problem))
    if squared:
        endpoints += [c for at, place in zip(places, problem.places, strict=True) if infinite(problem, place)
                      for c in at_rest(names, at)]  # fmt: skip
    changed = replace(
        problem,
        independent=PARAMETER,
        places=(Place(ZERO, "0"), *kinks, Place(ONE, "1")),
        unknowns=tuple(unknowns),
        seek=Seek.MINIMUM if squared else problem.seek,
        integrand=Power(integrand, TWO) if squared else integrand,
        endpoint=None if problem.endpoint is None else form.integrals(_moved(problem.endpoint, problem)),
        parameters=tuple(parameters),
        where=tuple((name, form.plain(tree)) for name, tree in problem.where),
        endpoints=tuple(endpoints),
        constraints=tuple(constraints),
        integrals=tuple(replace(c, body=form.integrals(_moved(c.body, problem))) for c in problem.integrals),
    )
    way = Way(x, tuple(unknown.name for unknown in problem.unknowns))
    note = GROWS.format(EVENLY if squared else STEADILY)
    return Gauged(problem, changed, squared, (integrand,) if squared else (), (way,), note)


def tied(x: str, at: Node, place: Place, problem: Problem) -> Condition:
    """The condition that x is a place of the problem at an end of its parameter."""
    here = At(x, 0, at)
    if isinstance(place.tree, Name) and place.tree.name in {p.name for p in problem.parameters}:
        return Condition(Sum((here, place.tree), (False, True)), ZERO, ZERO, place.label, "")
    return Condition(here, place.tree, place.tree, place.label, "")


def infinite(problem: Problem, place: Place) -> bool:
    """Whether the integrand is infinite at an end where all values are fixed, so that the curve is at rest there."""
    values = {c.name: c.value for c in problem.constants}
    with suppress(KeyError):  # a free place says nothing about x
        values[problem.independent] = values[MIDDLE] = number(place.tree, values)
        values |= {kink.label: number(kink.tree, values) for kink in problem.places[1:-1]}
    try:
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


def _moved(tree: Node, problem: Problem) -> Node:
    """A tree of values at places with the ends at 0 and 1, and kinks where x has their values."""
    if isinstance(tree, At):
        inner = {place.tree: Name(place.label) for place in problem.places[1:-1]}
        if tree.place in inner:
            return replace(tree, place=inner[tree.place])
        first = text(tree.place) == text(problem.places[0].tree)
        return replace(tree, place=ZERO if first else ONE)
    return with_children(tree, tuple(_moved(part, problem) for part in children(tree)))


def _straight(problem: Problem) -> Node:
    """x as a straight line; a free end is at the guess of its parameter."""
    start, end = (problem.places[k].tree for k in (0, -1))
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
