"""Does the value run away by ever steeper zigzags?  Told by how the integrand grows with the slope.

Up by h with slope q and down again with slope -r costs h (f(q)/q + f(-r)/r) and takes h/q + h/r of the range.  Where
f grows like a power d of the slope, with factors f+ and f-, that is without bound from below as soon as

* d > 1 and one of the factors is negative: the steeper a spike the better, however small;
* d = 1 and their sum is: the steeper the zigzags, the more of them fit into the range.

What is said here of slopes holds of the highest derivative of an unknown, as all below it hardly notice such zigzags.
They need a curve that keeps all conditions with some room around it, and nothing that holds the slope or an integral.

Reference: Dacorogna (2008), Direct Methods in the Calculus of Variations, section 3.3 (growth from below), from memory.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks.composition import shape_of
from solvers.checks.convexity import known, unfolding
from solvers.deadline import Deadline
from solvers.forms.affine import written_out
from solvers.forms.gauge import TWO, ZERO, root_of
from solvers.forms.homogeneous import Homogeneous, OtherGrowthError
from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import SIDE, At, Call, Name, Negative, Node, Number, Power, Sum, walk
from solvers.formula.substitute import substitute
from solvers.problem import Problem, Seek
from solvers.search.pursuit import pursue
from solvers.search.record import End, Pursuit
from solvers.solution import Finding, Watch
from solvers.starts.sketch import ARRAYS
from solvers.transcription.limits import interval_of, number
from solvers.transcription.lowering import primed
from solvers.transcription.trajectory import Trajectory, curve

Array = NDArray[np.float64]

CLEARLY = 1e-6
"""How far below zero, relative to what is added up, a growth has to be."""
ROOM = 1e-3
"""Distance from limits, relative to the size of what is limited, that leaves room for zigzags."""
STEEPNESS = "the steeper zigzags of the curve are, the better the value"

Growth = tuple[tuple[str, int], Node]
"""A highest derivative and a formula: where it is negative, zigzags of that one gain without end."""


def runs_away(
    problem: Problem, guess: Callable[[], Mapping[str, Array]], watch: Watch | None, deadline: Deadline
) -> Pursuit | None:
    """The pursuit of a problem whose value is proved to run away by zigzags; None where it is not.

    `guess` draws the first guess, by name; only where that shows them to gain a curve that keeps all conditions is
    looked for.
    """
    found = list(_growths(problem))
    values = dict(guess()) if found else {}
    if not any(_negative(tree, problem, values).any() for _, tree in found):
        return None
    squares = [Power(Name(unknown.name, unknown.order), TWO) for unknown in problem.unknowns if unknown.order]
    other = replace(problem, seek=Seek.MINIMUM, integrand=Sum(tuple(squares), (False,) * len(squares)), endpoint=None)
    feasible = pursue(other, watch, deadline, meshes=1)
    if not feasible.solved:
        return None
    path = feasible.paths[-1]
    values = _along(path)
    room = _with_room(problem, values)
    for quantity, tree in found:
        gains = _negative(tree, problem, values) & room
        if gains.any():
            middle = path.points[gains][np.count_nonzero(gains) // 2]
            finding = Finding(primed(quantity), place=float(middle), note=STEEPNESS)
            return Pursuit(problem, feasible.compiled, End.UNBOUNDED, steps=feasible.steps,
                           iterations=feasible.iterations, findings=(finding,))  # fmt: skip
    return None


def _growths(problem: Problem) -> Iterator[Growth]:
    """What would have to be negative somewhere, unless it is proved to be so nowhere."""
    extras = (problem.dynamics, problem.observations, problem.integrals, problem.arcs)
    if problem.integrand is None or any(extras) or problem.seek is Seek.STATIONARY:
        return
    slopes = {(unknown.name, unknown.order): f"slope of {unknown.name}" for unknown in problem.unknowns}
    trees = [condition.body for condition in problem.constraints]
    trees += [problem.endpoint] if problem.endpoint is not None else []
    if any(_holds(written_out(tree, problem), slopes) for tree in trees):
        return
    integrand = root_of(written_out(problem.integrand, problem), problem)
    if any(isinstance(node, Call) and node.function == SIDE for node in walk(integrand)):
        return
    integrand = substitute(integrand, lambda node: _renamed(node, slopes))
    form = Homogeneous(problem.independent, set(slopes.values()), {})
    try:
        homogeneous, degree = form.of(integrand)
    except OtherGrowthError:
        return
    if degree < 1:
        return
    leaf = known(problem, {c.name: c.value for c in problem.constants}, *_range(problem))
    one = Number(1.0, "1")
    for quantity, own in slopes.items():
        if not quantity[1]:
            continue
        rise, fall = (_upright(homogeneous, problem, slopes, own, level) for level in (one, Negative(one)))
        for tree in (rise, fall) if degree > 1 else (Sum((rise, fall), (False, False)),):
            if not shape_of(tree, leaf, unfolding(problem)).low >= 0:
                yield quantity, tree


def _holds(tree: Node, slopes: Mapping[tuple[str, int], str]) -> bool:
    """Whether a highest derivative or an integral occurs."""
    return any((isinstance(node, Name | At) and (node.name, node.order) in slopes and node.order > 0)
               or (isinstance(node, Call) and node.function == "integral") for node in walk(tree))  # fmt: skip


def _renamed(node: Node, slopes: Mapping[tuple[str, int], str]) -> Node | None:
    if isinstance(node, Name) and node.order and (node.name, node.order) in slopes:
        return Name(slopes[node.name, node.order], 1)
    return None


def _upright(tree: Node, problem: Problem, slopes: Mapping[tuple[str, int], str], own: str, level: Node) -> Node:
    """A homogeneous formula on a curve that runs straight up or down in one of the unknowns."""

    def slope(node: Node) -> Node | None:
        if not isinstance(node, Name) or node.order != 1:
            return None
        if node.name == own:
            return level
        return ZERO if node.name == problem.independent or node.name in slopes.values() else None

    return substitute(tree, slope)


def _range(problem: Problem) -> tuple[float, float]:
    constants = {c.name: c.value for c in problem.constants}
    try:
        first, last = sorted(number(problem.places[k].tree, constants) for k in (0, -1))
    except KeyError:  # an end is free
        return -np.inf, np.inf
    return first, last


def _negative(tree: Node, problem: Problem, values: Mapping[str, Array]) -> NDArray[np.bool_]:
    """Where along a curve a formula is clearly negative; nowhere where it has no value."""
    terms = tree.terms if isinstance(tree, Sum) else (tree,)
    with np.errstate(all="ignore"):
        try:
            size = sum(np.abs(_value(term, problem, values)) for term in terms)
            return np.asarray(_value(tree, problem, values) < -CLEARLY * size)
        except KeyError:  # the guess does not tell
            return np.ones(1, dtype=bool)


def _value(tree: Node, problem: Problem, values: Mapping[str, Array]) -> Array:
    constants = {c.name: c.value for c in problem.constants}

    def look_up(name: str, order: int) -> Array | float:
        return constants[name] if name in constants else values[primed((name, order))]

    return np.asarray(evaluate(tree, look_up, ARRAYS))


def _along(path: Trajectory) -> dict[str, Array]:
    """The values of all functions and parameters at the points of a curve."""
    problem, drawn = path.program.compiled.lowered.problem, curve(path)
    values = {name: drawn.evaluate(name, path.points) for name in drawn.functions}
    values |= {p.name: np.full_like(path.points, value)
               for p, value in zip(problem.parameters, path.parameters, strict=True)}  # fmt: skip
    return values | {problem.independent: path.points}


def _with_room(problem: Problem, values: Mapping[str, Array]) -> NDArray[np.bool_]:
    """Where along a curve no limit is near."""
    room = np.ones(len(values[problem.independent]), dtype=bool)
    constants = {c.name: c.value for c in problem.constants}
    limits = [(values[u.name], u.lower, u.upper) for u in problem.unknowns]
    limits += [(_value(written_out(c.body, problem), problem, values), *interval_of(c, constants))
               for c in problem.constraints]  # fmt: skip
    for value, lower, upper in limits:
        size = float(np.abs(value).max()) + sum(abs(limit) for limit in (lower, upper) if np.isfinite(limit))
        room &= (value > lower + ROOM * size) & (value < upper - ROOM * size)
    return room
