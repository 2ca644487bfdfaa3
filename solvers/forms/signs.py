"""Is the integrand of one sign?  Only then is the least integral of its square that of the integrand itself.

Where its square is minimised instead (`gauge`), a negative integrand would be driven to zero; for a maximum the
opposite of the integrand is meant.  Interval arithmetic
proves the sign for all curves; where it cannot, the sign is looked at along the first guess and along the curve found:
near a curve on which the integrand is positive both problems have the same extremals.
"""

from __future__ import annotations

from dataclasses import replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from solvers.checks.composition import Shape, shape_of
from solvers.checks.convexity import known, unfolding
from solvers.curve import Curve
from solvers.forms.gauge import ZERO, Gauged
from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import At, Call, Name, Node, walk
from solvers.problem import MIDDLE, Condition, Problem, Seek
from solvers.starts.sketch import ARRAYS
from solvers.transcription.limits import number
from solvers.transcription.trajectory import Trajectory, curve

Array = NDArray[np.float64]

TINY = 1e-100
"""So far below zero is below it, to interval arithmetic."""

MIDDLES = (np.arange(8) + 0.5) / 8
"""Where every interval is looked at."""


def better_below(problem: Problem) -> float:
    """1 where a lower value is the better one, else -1."""
    return -1.0 if problem.seek is Seek.MAXIMUM else 1.0


def interval(tree: Node, problem: Problem) -> tuple[float, float]:
    """Between which values a formula is proved to lie, whatever the curve within its bounds."""
    constants = {c.name: c.value for c in problem.constants}
    try:
        first, last = (number(problem.places[k].tree, constants) for k in (0, -1))
    except KeyError:  # an end is free
        first, last = -np.inf, np.inf
    if not first < last:
        return -np.inf, np.inf
    shape = shape_of(tree, known(problem, constants, first, last), unfolding(problem))
    return shape.low, shape.high


def one_signed(problem: Problem) -> bool:
    """Whether the integrand is proved to be nowhere negative, for a maximum nowhere positive, whatever the curve within
    its bounds."""
    if problem.integrand is None:
        return False
    low, high = interval(problem.integrand, problem)
    return high <= 0 if problem.seek is Seek.MAXIMUM else low >= 0


def where_defined(gauged: Gauged) -> Gauged:
    """The same with unknowns held where square roots have values that are squared: (1 + y'^2)/y has one below 0 too.

    Held is an unknown below zero of which what is under a root is proved to be nowhere positive, whatever else.
    """
    problem = gauged.problem
    leaf = known(problem, {c.name: c.value for c in problem.constants}, 0.0, 1.0)
    unfold = unfolding(problem)

    def below(name: str, node: Name | At) -> Shape:
        found = leaf(node)
        own = isinstance(node, Name) and (node.name, node.order) == (name, 0)
        return replace(found, high=-TINY) if own else found

    radicands = [node.arguments[0] for tree in gauged.roots for node in walk(tree)
                 if isinstance(node, Call) and node.function == "sqrt"]  # fmt: skip
    held = [unknown.name for unknown in problem.unknowns
            if any(shape_of(tree, partial(below, unknown.name), unfold).high <= 0 for tree in radicands)]  # fmt: skip
    limits = [Condition(Name(name), ZERO, None, f"{name} where the integrand has values", "") for name in held]
    return replace(gauged, problem=replace(problem, constraints=(*problem.constraints, *limits)))


def positive(values: Array) -> bool:
    """Whether values of an integrand are positive somewhere and negative nowhere; undefined ones say nothing."""
    return bool(np.nanmax(values, initial=-np.inf) > 0 and np.nanmin(values, initial=np.inf) >= 0)


def positive_along(gauged: Gauged, path: Trajectory) -> bool:
    """Whether the integrand whose square was minimised is positive along the curve."""
    shape = curve(path)
    places = (shape.breaks[:-1, None] + np.diff(shape.breaks)[:, None] * MIDDLES).ravel()
    with np.errstate(all="ignore"):
        return all(positive(_along(root, gauged.problem, shape, path, places)) for root in gauged.roots)


def _along(tree: Node, problem: Problem, shape: Curve, path: Trajectory, places: Array) -> Array:
    """A formula at places of a curve."""
    numbers = {c.name: c.value for c in problem.constants}
    numbers |= {p.name: float(value) for p, value in zip(problem.parameters, path.parameters, strict=True)}
    abbreviations = dict(problem.where)

    def look_up(name: str, order: int) -> Array | float:
        if name in numbers:
            return numbers[name]
        if name in abbreviations:
            return np.asarray(evaluate(abbreviations[name], look_up, ARRAYS))
        return places if name in (problem.independent, MIDDLE) else shape.evaluate(name + "'" * order, places)

    return np.asarray(evaluate(tree, look_up, ARRAYS))
