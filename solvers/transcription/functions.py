"""A lowered problem as small CasADi functions: one for a point of the curve, one for the ends, with exact derivatives.

Everything that is nonlinear happens in these two; the transcription maps the first over all points of any mesh, so
that its cost does not depend on how the mesh is cut.  Nothing here is scaled: all quantities are in SI units.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from functools import partial
from itertools import pairwise
from math import pi

import casadi as ca
import numpy as np

from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import SIDE, At, Call, Name, Node, Number, Sum, children, walk, with_children
from solvers.formula.printer import text
from solvers.observations import terminal
from solvers.problem import MIDDLE, Condition, Held, Place, Problem
from solvers.tables.lookups import Lookups
from solvers.transcription.derivatives import Differentiated
from solvers.transcription.limits import number, quantity_bounds
from solvers.transcription.lowering import Lowered, Quantity, simple_bound

Operation = Callable[..., ca.SX]

SMOOTHING = 1e-9
"""Width, relative to the size of the argument, over which `abs` and its kin are rounded so that they have derivatives.

Of an argument whose size is not known it is the width itself.
"""

SHARP = 1e-40
"""A width (SI) beyond anything that a curve shows, and far above the least of numbers when squared."""

WITHIN = " within"
"""What the names of rounded functions end with whose first argument is the width."""


def smooth_abs(width: ca.SX, x: ca.SX) -> ca.SX:
    """The absolute value, rounded over a width."""
    return ca.sqrt(x * x + width * width)


def smooth_sign(width: ca.SX, x: ca.SX) -> ca.SX:
    """The sign, rounded over a width."""
    return x / smooth_abs(width, x)


def with_kinks(absolute: Operation, sign: Operation) -> dict[str, Operation]:
    """The functions with kinks, made of an absolute value and a sign that take a width first; with and without one."""

    def least(width: ca.SX, *values: ca.SX) -> ca.SX:
        least = values[0]
        for value in values[1:]:
            least = (least + value - absolute(width, least - value)) / 2
        return least

    def most(width: ca.SX, *values: ca.SX) -> ca.SX:
        return -least(width, *(-value for value in values))

    made = {"abs": absolute, "sign": sign, "min": least, "max": most}
    given = {name + WITHIN: operation for name, operation in made.items()}
    return given | {name: partial(operation, ca.SX(SMOOTHING)) for name, operation in made.items()}


ROUNDED = frozenset({"abs", "min", "max", "sign"})
"""The functions with kinks, which are rounded."""


def nodes_of(problem: Problem) -> Iterator[Node]:
    """All nodes of all formulas of a problem without arcs."""
    trees = [tree for tree in (problem.integrand, problem.endpoint) if tree is not None]
    trees += [tree for _, tree in problem.where] + [c.body for c in problem.conditions]
    trees += [side for equation in problem.dynamics for side in (equation.left, equation.right)]
    trees += [observation.body for observation in problem.observations]
    yield from (node for tree in trees for node in walk(tree))


def bent_uses(problem: Problem) -> list[Call]:
    """All uses of functions with kinks in the formulas of a problem without arcs: they are rounded."""
    uses = (node for node in nodes_of(problem) if isinstance(node, Call) and node.function in ROUNDED)
    return list(dict.fromkeys(uses))


def rounded_functions(problem: Problem) -> set[str]:
    """The names of these functions."""
    return {use.function for use in bent_uses(problem)}


def without_rounding(problem: Problem) -> Problem:
    """The problem with kinks that are all but sharp, to be looked at from afar."""
    return replace(problem, widths=tuple((use, SHARP) for use in bent_uses(problem)))


OPERATIONS: dict[str, Operation] = {
    "sqrt": ca.sqrt, "exp": ca.exp, "log": ca.log, "sin": ca.sin, "cos": ca.cos, "tan": ca.tan,
    "asin": ca.asin, "acos": ca.acos, "atan": ca.atan, "atan2": ca.atan2,
    "sinh": ca.sinh, "cosh": ca.cosh, "tanh": ca.tanh,
    "hypot": lambda x, y: ca.sqrt(x * x + y * y), "power": lambda base, exponent: base**exponent,
    **with_kinks(smooth_abs, smooth_sign), SIDE: lambda at, place: ca.sign(at - place),
}  # fmt: skip


class PointFunction(Differentiated):
    """What happens at one point of the curve.

    Inputs: v = (states, controls, start and end of the stretch, parameters) and d = (fraction of the stretch,
    constants).  Outputs, in this order: the rates of the states, the pointwise constraints, the integrands of the
    integral conditions, the integrand of the functional.  Rates and integrands are per fraction of the stretch.
    """

    def __init__(self, v: ca.SX, d: ca.SX, outputs: ca.SX, lookups: Lookups, sizes: tuple[int, int, int, int]) -> None:
        super().__init__("point", v, d, outputs, lookups)
        self.states, self.controls, self.constraints, self.integrals = sizes


class EndFunction(Differentiated):
    """What depends on values at places only.

    Inputs: v = (states at every place, places, parameters, integrals) and d = the constants.  Outputs: the bodies of
    the conditions, then the endpoint term of the functional.
    """


@dataclass(frozen=True, slots=True)
class Compiled:
    """A problem ready to be transcribed: its two functions and the conditions that each output stands for."""

    lowered: Lowered
    point: PointFunction
    end: EndFunction
    pointwise: tuple[Condition, ...]  # the constraints that are outputs of the point function, dynamics lines first
    bounds: tuple[tuple[Quantity, Condition], ...]  # the constraints that are plain bounds on a state or control
    conditions: tuple[Condition, ...]  # the conditions that are outputs of the end function
    fixed: tuple[tuple[int, int, Condition], ...]  # (state, place, condition): conditions on a single value
    rims: tuple[tuple[int, int, Condition], ...]  # (control, place, condition): the same for a control at an end
    constants: tuple[float, ...]

    def rank_of(self, held: Held) -> int | None:
        """Which of the pointwise constraints is held; None where it is a state or a control."""
        rank = held.order
        return rank if rank < len(self.pointwise) and self.pointwise[rank].label == held.name else None

    def reached_by(self, output: int) -> tuple[int, set[Quantity]]:
        """The controls that first move an output of the point function, and in which derivative of it they appear.

        None of them, and the number of states, where no derivative has any (Bryson, Denham, Dreyfus, 1963, on the order
        of a constraint on states; from memory).
        """
        n, reached = self.point.states, {output}
        for order in range(n + 1):
            pairs = zip(self.point.jacobian_rows, self.point.jacobian_columns, strict=True)
            columns = {column for row, column in pairs if row in reached}
            controls = {self.lowered.controls[c - n] for c in columns if n <= c < n + self.point.controls}
            if controls:
                return order, controls
            reached = {column for column in columns if column < n}
        return n, set()


class Environment:
    """Symbols for one place of the curve, and the formulas that are made of them."""

    def __init__(
        self,
        lowered: Lowered,
        symbols: dict[Quantity, ca.SX],
        numbers: dict[str, ca.SX],
        lookups: Lookups,
        value_at: Callable[[str, int, Node, str], ca.SX] | None = None,
    ) -> None:
        self._lowered = lowered
        self._symbols = dict(symbols)
        self._numbers = dict(numbers)
        self._abbreviations = dict(lowered.problem.where)
        self._widths = dict(lowered.problem.widths)
        self._operations = OPERATIONS | lookups.operations
        self._value_at = value_at

    def formula(self, tree: Node) -> ca.SX:
        """The tree as an expression of the symbols."""
        tree = self._rounded(tree) if self._widths else tree
        value = evaluate(tree, self._look_up, self._operations, self._value_at)
        return value if isinstance(value, ca.SX) else ca.SX(value)  # a copy would cost more than a sum

    def _rounded(self, tree: Node) -> Node:
        """The tree with their widths for the functions with kinks that have one."""
        parts = tuple(self._rounded(part) for part in children(tree))
        if tree in self._widths:
            assert isinstance(tree, Call)
            return Call(tree.function + WITHIN, (Number(self._widths[tree], ""), *parts))
        return with_children(tree, parts)

    def _look_up(self, name: str, order: int) -> ca.SX:
        if name in self._abbreviations and name not in self._numbers:
            self._numbers[name] = self.formula(self._abbreviations[name])
        if name in self._numbers:
            return self._numbers[name]
        if (name, order) not in self._symbols:
            self._symbols[name, order] = self.formula(self._lowered.given[name, order])
        return self._symbols[name, order]


def _entries(column: ca.SX) -> list[ca.SX]:
    """The entries of a column, all at once, which costs as much as to ask for one."""
    return column.elements()  # type: ignore[return-value]  # the stubs know no scalar symbols


def compile_problem(lowered: Lowered, lookups: type[Lookups] = Lookups) -> Compiled:
    """Build both functions; costs some milliseconds, once per problem.  `lookups` makes what looks up their tables."""
    problem = lowered.problem
    constants = ca.SX.sym("c", len(problem.constants))
    parameters = ca.SX.sym("p", len(problem.parameters))
    numbers: dict[str, ca.SX] = {"pi": ca.SX(pi)}
    numbers |= dict(zip((c.name for c in problem.constants), _entries(constants), strict=True))
    numbers |= dict(zip((p.name for p in problem.parameters), _entries(parameters), strict=True))
    integrands: list[Node] = []
    conditions, fixed, rims, end = _end_function(lowered, numbers, parameters, constants, integrands, lookups())
    point, pointwise, bounds = _point_function(lowered, numbers, parameters, constants, integrands, lookups())
    values = tuple(c.value for c in problem.constants)
    return Compiled(lowered, point, end, pointwise, bounds, conditions, fixed, rims, values)


def _point_function(
    lowered: Lowered,
    numbers: dict[str, ca.SX],
    parameters: ca.SX,
    constants: ca.SX,
    integrands: list[Node],
    lookups: Lookups,
) -> tuple[PointFunction, tuple[Condition, ...], tuple[tuple[Quantity, Condition], ...]]:
    problem = lowered.problem
    x = ca.SX.sym("x", len(lowered.states))
    u = ca.SX.sym("u", len(lowered.controls))
    start, end, fraction = ca.SX.sym("a"), ca.SX.sym("b"), ca.SX.sym("s")
    length = end - start
    symbols = dict(zip((*lowered.states, *lowered.controls), (*_entries(x), *_entries(u)), strict=True))
    at = {problem.independent: start + fraction * length, MIDDLE: (start + end) / 2}
    here = Environment(lowered, symbols, numbers | at, lookups)
    rates = [length * here.formula(Name(name, order + 1)) for name, order in lowered.states]
    zero = Number(0.0, "0")
    pointwise = [Condition(Name("?"), zero, zero, e.label, e.pointer) for e in lowered.equalities]
    bodies = [here.formula(e.left) - here.formula(e.right) for e in lowered.equalities]
    bounds = []
    plain = set(lowered.states) | set(lowered.controls)
    for condition in problem.constraints:
        target = simple_bound(condition)
        if target in plain and not condition.equality:
            bounds.append((target, condition))
        else:
            pointwise.append(condition)
            bodies.append(here.formula(condition.body))
    weighed = [length * here.formula(tree) for tree in integrands]
    cost = length * here.formula(problem.integrand) if problem.integrand is not None else ca.SX(0)
    v, d = ca.vertcat(x, u, start, end, parameters), ca.vertcat(fraction, constants)
    outputs = ca.vertcat(*rates, *bodies, *weighed, cost)
    sizes = len(lowered.states), len(lowered.controls), len(bodies), len(weighed)
    function = PointFunction(v, d, outputs, lookups, sizes)
    return function, tuple(pointwise), tuple(bounds)


def _end_function(
    lowered: Lowered,
    numbers: dict[str, ca.SX],
    parameters: ca.SX,
    constants: ca.SX,
    integrands: list[Node],
    lookups: Lookups,
) -> tuple[
    tuple[Condition, ...], tuple[tuple[int, int, Condition], ...], tuple[tuple[int, int, Condition], ...], EndFunction
]:
    problem = lowered.problem
    values = [ca.SX.sym(f"x{i}", len(lowered.states)) for i in range(len(problem.places))]
    places = ca.SX.sym("t", len(problem.places))
    environments = [
        Environment(
            lowered,
            dict(zip(lowered.states, _entries(there), strict=True)),
            numbers | {problem.independent: place, MIDDLE: place},
            lookups,
        )
        for there, place in zip(values, _entries(places), strict=True)
    ]

    ordinals = {id(place.tree): index for index, place in enumerate(problem.places)}  # most trees are the very places

    def value_at(name: str, order: int, place: Node, side: str) -> ca.SX:
        index = ordinals.get(id(place))
        return environments[place_index(problem.places, place) if index is None else index].formula(Name(name, order))

    conditions, trees, fixed = [], [], []
    rims = []
    states = {q: k for k, q in enumerate(lowered.states)}
    controls = {q: k for k, q in enumerate(lowered.controls)}
    for condition in (*problem.endpoints, *problem.integrals, *_in_order(problem)):
        body = condition.body
        if isinstance(body, At) and (body.name, body.order) in states:
            fixed.append((states[body.name, body.order], place_index(problem.places, body.place), condition))
        elif isinstance(body, At) and (body.name, body.order) in controls:
            rims.append((controls[body.name, body.order], place_index(problem.places, body.place), condition))
        else:
            conditions.append(condition)
            trees.append(_lift_integrals(body, integrands))
    term = _lift_integrals(terminal(problem) or Number(0.0, "0"), integrands)
    totals = ca.SX.sym("q", len(integrands))
    numbers = numbers | {_total(k): total for k, total in enumerate(_entries(totals))}
    outside = Environment(lowered, {}, numbers, lookups, value_at)
    outputs = ca.vertcat(*(outside.formula(tree) for tree in (*trees, term)))
    y = ca.vertcat(*values, places, parameters, totals)
    function = EndFunction("end", y, constants, outputs, lookups)
    return tuple(conditions), tuple(fixed), tuple(rims), function


def _in_order(problem: Problem) -> Iterator[Condition]:
    """What keeps free places in order where their limits do not: a negative length could cost less than nothing."""
    constants = {c.name: c.value for c in problem.constants}
    free = {p.name: (p.lower, p.upper) for p in problem.parameters}

    def limits(place: Place) -> tuple[float, float]:
        if isinstance(place.tree, Name) and place.tree.name in free:
            return free[place.tree.name]
        return (number(place.tree, constants),) * 2

    for before, after in pairwise(problem.places):
        if limits(after)[0] < limits(before)[1]:
            length = Sum((after.tree, before.tree), (False, True))
            yield Condition(length, Number(0.0, "0"), None, f"{before.label} before {after.label}", "")


def _total(index: int) -> str:
    """The name that stands for an integral in a tree; no user can write it."""
    return f"∫{index}"


def _lift_integrals(tree: Node, integrands: list[Node]) -> Node:
    """The tree with every integral replaced by a name for its value; the integrands are collected."""
    if isinstance(tree, Call) and tree.function == "integral":
        integrands.append(tree.arguments[0])
        return Name(_total(len(integrands) - 1))
    return with_children(tree, tuple(_lift_integrals(part, integrands) for part in children(tree)))


def place_index(places: tuple[Place, ...], tree: Node) -> int:
    """Which of the places a tree names."""
    wanted = _key(tree)
    return next(i for i, place in enumerate(places) if _key(place.tree) == wanted)


def _key(tree: Node) -> float | str:
    """What makes two ways to write a place the same."""
    return tree.value if isinstance(tree, Number) else text(tree)


def with_constants(compiled: Compiled, values: Mapping[str, float]) -> Compiled:
    """The same compiled problem with other values of some constants; its functions take them as inputs."""
    lowered = compiled.lowered
    constants = tuple(replace(c, value=values.get(c.name, c.value)) for c in lowered.problem.constants)
    changed = replace(lowered, problem=replace(lowered.problem, constants=constants))
    return replace(compiled, lowered=changed, constants=tuple(c.value for c in constants))


def linear_controls(compiled: Compiled) -> list[int]:
    """Controls with a limit in which everything is linear, by structure: those that switch or run singular."""
    _, _, lower, upper = quantity_bounds(compiled)
    n = compiled.point.states
    own = {row for row, column in zip(compiled.point.hessian_rows, compiled.point.hessian_columns, strict=True)
           if row == column}  # fmt: skip
    return [
        index
        for index in range(compiled.point.controls)
        if n + index not in own and (np.isfinite(upper[index]) or np.isfinite(lower[index]))
    ]
