"""A problem stated in another way: other units, origin, direction, sign, order.  The answer has to stay the same.

Every change is one of variables, t = a s + b, y(t) = c Y(s), p = d P, J = e J', written into the formulas as whoever
had these variables before them would write them.  Nothing is left out: tables, places, guesses, observations follow.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from random import Random

from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import At, Name, Negative, Node, Number, Product, Sum
from solvers.formula.substitute import substitute
from solvers.problem import Arc, Condition, Equation, Jump, Observation, Parameter, Place, Problem, Seek, Unknown


@dataclass(frozen=True, slots=True)
class Restated:
    """A problem in other variables, with what leads back: y = `sizes` Y, p = `factors` P + `offsets`, J = `value` J'.

    `turned` says that the curve runs the other way.
    """

    problem: Problem
    sizes: Mapping[str, float] = field(default_factory=dict)
    factors: Mapping[str, float] = field(default_factory=dict)
    offsets: Mapping[str, float] = field(default_factory=dict)
    value: float = 1.0
    turned: bool = False


def in_other_units(problem: Problem, random: Random, power: int = 6) -> Restated:
    """Every variable, parameter and the value in another unit: powers of ten, no two more than 10^`power` apart.

    What is fitted to observations has one unit, and so have the parameters of the fit.
    """
    lowest = random.randint(-power, 0)

    def size() -> float:
        return 10.0 ** random.randint(lowest, lowest + power)

    step = size()
    if problem.observations:
        one, rate = size(), size()
        sizes = dict.fromkeys((unknown.name for unknown in problem.unknowns), one)
        factors = dict.fromkeys((parameter.name for parameter in problem.parameters), rate)
        return _changed(problem, step, 0.0, sizes, factors, one**2)
    sizes = {unknown.name: size() for unknown in problem.unknowns}
    factors = {parameter.name: size() for parameter in problem.parameters}
    return _changed(problem, step, 0.0, sizes, factors, size())


def from_another_origin(problem: Problem, random: Random) -> Restated:
    """The independent variable counted from elsewhere, a hundred to a thousand times its largest given value away."""
    constants = {c.name: c.value for c in problem.constants}
    given = [abs(v) for place in problem.places if (v := _fixed(place.tree, constants)) is not None]
    origin = random.choice((-1, 1)) * round(random.uniform(100, 1000)) * (max(given, default=0.0) or 1.0)
    return _changed(problem, 1.0, origin)


def the_other_way(problem: Problem, random: Random) -> Restated:
    """From the last end to the first: s = first + last - t where these stay what they are, else s = -t."""
    constants = {c.name: c.value for c in problem.constants}
    first, last = (place.tree for place in problem.places[:: len(problem.places) - 1])
    both = (_fixed(first, constants), _fixed(last, constants))
    if None not in both:
        return _changed(problem, -1.0, both[0] + both[1])
    if len(problem.places) == 2:
        return _changed(problem, -1.0, Sum((first, last), (False, False)))
    return _changed(problem, -1.0, 0.0)


def with_the_other_sign(problem: Problem, random: Random) -> Restated:
    """The least of a functional as the greatest of its opposite."""
    return _changed(problem, value=-1.0)


def mirrored(problem: Problem, random: Random) -> Restated:
    """Every unknown as its opposite."""
    return _changed(problem, sizes={unknown.name: -1.0 for unknown in problem.unknowns})


def in_another_order(problem: Problem, random: Random) -> Restated:
    """All lists the other way round, but abbreviations, of which each may use earlier ones, and arcs."""

    def turned(record: Problem | Arc, *members: str) -> Problem | Arc:
        return replace(record, **{member: getattr(record, member)[::-1] for member in members})

    laws = ("unknowns", "dynamics", "constraints", "integrals")
    arcs = tuple(turned(arc, *laws) for arc in problem.arcs)
    rest = (*laws, "constants", "parameters", "endpoints", "observations", "tables")
    return Restated(turned(replace(problem, arcs=arcs), *rest))


CHANGES: dict[str, Callable[[Problem, Random], Restated]] = {
    "units": in_other_units,
    "origin": from_another_origin,
    "direction": the_other_way,
    "sign": with_the_other_sign,
    "mirror": mirrored,
    "order": in_another_order,
}
"""All changes by name."""

OPPOSITE = {Seek.MINIMUM: Seek.MAXIMUM, Seek.MAXIMUM: Seek.MINIMUM, Seek.STATIONARY: Seek.STATIONARY}


def _fixed(place: Node, constants: Mapping[str, float]) -> float | None:
    """Where a place is; None where it is free."""
    try:
        return float(evaluate(place, lambda name, order: constants[name], REAL))
    except KeyError:
        return None


def _times(tree: Node, factor: float) -> Node:
    """The tree times a number."""
    if factor == 1.0:
        return tree
    if factor == -1.0:
        return Negative(tree)
    if isinstance(tree, Number):
        return Number(factor * tree.value, repr(factor * tree.value))
    return Product((Number(factor, repr(factor)), tree), (False, False))


def _bounds(lower: float, upper: float, factor: float, offset: float = 0.0) -> tuple[float, float]:
    """Where X lies when lower <= factor X + offset <= upper."""
    ends = ((lower - offset) / factor, (upper - offset) / factor)
    return (ends[1], ends[0]) if factor < 0 else ends


def _changed(
    problem: Problem,
    step: float = 1.0,
    origin: float | Node = 0.0,
    sizes: Mapping[str, float] | None = None,
    factors: Mapping[str, float] | None = None,
    value: float = 1.0,
) -> Restated:
    """The problem in s, Y, P and J'; an origin that is a tree is the sum of the ends, which then stay what they are."""
    return _Change(problem, step, origin, sizes or {}, factors or {}, value).restated()


class _Change:
    """One change of variables."""

    def __init__(
        self,
        problem: Problem,
        step: float,
        origin: float | Node,
        sizes: Mapping[str, float],
        factors: Mapping[str, float],
        value: float,
    ) -> None:
        self._problem, self._step, self._value = problem, step, value
        self._sizes = {u.name: sizes.get(u.name, 1.0) for u in problem.unknowns}
        self._origin = origin if isinstance(origin, int | float) else None
        self._sum_of_ends = None if self._origin is not None else origin
        places = {place.tree.name for place in problem.places if isinstance(place.tree, Name)}
        names = [parameter.name for parameter in problem.parameters]
        moved = self._origin is not None
        self._factors = {n: step if n in places and moved else factors.get(n, 1.0) for n in names}
        self._offsets = {n: self._origin if n in places and moved else 0.0 for n in names}
        self._running = {name for name, _ in problem.where} | {name for arc in problem.arcs for name, _ in arc.where}
        self._places = {id(place.tree): self._place(place.tree) for place in problem.places}
        if not moved:  # each end becomes the other one
            first, last = problem.places[0].tree, problem.places[-1].tree
            self._places = {id(first): last, id(last): first}

    def restated(self) -> Restated:
        problem, at_ends = self._problem, self._places
        places = tuple(Place(at_ends[id(place.tree)], place.label) for place in problem.places)
        arcs = tuple(self._arc(arc) for arc in problem.arcs)
        jumps = problem.jumps
        if self._step < 0:
            places, arcs = places[::-1], arcs[::-1]
            jumps = frozenset(Jump(j.name, j.order, len(places) - 1 - j.place) for j in jumps)
        changed = replace(
            problem,
            places=places,
            unknowns=tuple(self._unknown(unknown) for unknown in problem.unknowns),
            parameters=tuple(self._parameter(parameter) for parameter in problem.parameters),
            seek=problem.seek if self._value > 0 else OPPOSITE[problem.seek],
            integrand=self._integrand(problem.integrand),
            endpoint=None if problem.endpoint is None else _times(self.tree(problem.endpoint), 1 / self._value),
            where=tuple((name, self.tree(tree)) for name, tree in problem.where),
            dynamics=tuple(self._equation(line) for line in problem.dynamics),
            endpoints=tuple(self._condition(c) for c in problem.endpoints),
            constraints=tuple(self._condition(c) for c in problem.constraints),
            integrals=tuple(self._condition(c) for c in problem.integrals),
            observations=tuple(self._observation(o) for o in problem.observations),
            arcs=arcs,
            jumps=jumps,
            sweeps=(),
            continuation=None,
        )  # fmt: skip
        return Restated(changed, self._sizes, self._factors, self._offsets, self._value, self._step < 0)

    def tree(self, tree: Node) -> Node:
        """A formula in the new variables."""
        return substitute(tree, self._part)

    def _part(self, node: Node) -> Node | None:
        match node:
            case Name(name=name) if name == self._problem.independent:
                return self._mapped(node)
            case Name(name=name) if name in self._factors:
                return self._added(_times(node, self._factors[name]), self._offsets[name])
            case Name(name=name, order=order) if name in self._sizes or name in self._running:
                return _times(node, self._size(name, order))
            case At(name=name, order=order):
                return _times(self._at(node), self._size(name, order))
        if getattr(node, "function", "") == "integral":
            inner = replace(node, arguments=(self.tree(node.arguments[0]),))
            return _times(inner, abs(self._step))
        return None

    def _at(self, node: At) -> At:
        side = node.side
        if self._step < 0 and (side or self._problem.arcs):
            side = "-" if side == "+" else "+"
        return replace(node, place=self._places[id(node.place)], side=side)

    def _mapped(self, node: Node) -> Node:
        """t in terms of s."""
        if self._origin is None:
            return Sum((self._sum_of_ends, node), (False, True))
        return self._added(_times(node, self._step), self._origin)

    def _place(self, tree: Node) -> Node:
        """A place in terms of s."""
        if isinstance(tree, Name) and tree.name in self._factors:
            return Name(tree.name)
        if isinstance(tree, Number) and self._origin is not None:
            at = (tree.value - self._origin) / self._step
            return Number(at, repr(at))
        return _times(self._added(tree, -(self._origin or 0.0)), 1 / self._step)

    @staticmethod
    def _added(tree: Node, offset: float) -> Node:
        return Sum((tree, Number(offset, repr(offset))), (False, False)) if offset else tree

    def _size(self, name: str, order: int) -> float:
        """By what a derivative of something that runs along the curve is multiplied."""
        return self._sizes.get(name, 1.0) / self._step**order

    def _integrand(self, tree: Node | None) -> Node | None:
        return None if tree is None else _times(self.tree(tree), abs(self._step) / self._value)

    def _unknown(self, unknown: Unknown) -> Unknown:
        size = self._sizes[unknown.name]
        lower, upper = _bounds(unknown.lower, unknown.upper, size)
        guess = unknown.guess
        if isinstance(guess, tuple):
            if self._origin is None:
                raise NotImplementedError("points of a guess between ends that are free")
            points = tuple(((t - self._origin) / self._step, y / size) for t, y in guess)
            guess = points if self._step > 0 else points[::-1]
        elif guess is not None:
            guess = _times(self.tree(guess), 1 / size)
        return replace(unknown, lower=lower, upper=upper, guess=guess)

    def _parameter(self, parameter: Parameter) -> Parameter:
        factor, offset = self._factors[parameter.name], self._offsets[parameter.name]
        lower, upper = _bounds(parameter.lower, parameter.upper, factor, offset)
        guess = None if parameter.guess is None else (parameter.guess - offset) / factor
        return replace(parameter, lower=lower, upper=upper, guess=guess)

    def _equation(self, line: Equation) -> Equation:
        if line.determines is None:
            return replace(line, left=self.tree(line.left), right=self.tree(line.right))
        return replace(line, right=_times(self.tree(line.right), 1 / self._size(*line.determines)))

    def _condition(self, condition: Condition) -> Condition:
        """A bound on a single quantity stays one."""
        body, factor = condition.body, 1.0
        match body:
            case Name(name=name, order=order) if name in self._sizes:
                factor = self._size(name, order)
            case At(name=name, order=order) if name in self._sizes:
                body, factor = self._at(body), self._size(name, order)
            case _:
                body = self.tree(body)
        lower, upper = condition.lower, condition.upper
        scaled_lower = None if lower is None else _times(lower, 1 / factor)
        scaled_upper = scaled_lower if condition.equality else None if upper is None else _times(upper, 1 / factor)
        if factor < 0:
            scaled_lower, scaled_upper = scaled_upper, scaled_lower
        return replace(condition, body=body, lower=scaled_lower, upper=scaled_upper)

    def _observation(self, observation: Observation) -> Observation:
        """What was measured is one of the unknowns; the unit of a misfit is its own."""
        assert isinstance(observation.body, Name) and observation.body.order == 0
        size = self._sizes[observation.body.name]
        points = (replace(p, place=self._places[id(p.place)], value=p.value / size) for p in observation.points)
        return replace(observation, points=tuple(points))

    def _arc(self, arc: Arc) -> Arc:
        last = len(self._problem.places) - 1
        first, end = (last - arc.last, last - arc.first) if self._step < 0 else (arc.first, arc.last)
        return replace(
            arc,
            first=first,
            last=end,
            unknowns=tuple(self._unknown(unknown) for unknown in arc.unknowns),
            integrand=self._integrand(arc.integrand),
            where=tuple((name, self.tree(tree)) for name, tree in arc.where),
            dynamics=tuple(self._equation(line) for line in arc.dynamics),
            constraints=tuple(self._condition(c) for c in arc.constraints),
            integrals=tuple(self._condition(c) for c in arc.integrals),
        )
