"""Where a formula has no value, or no finite derivatives: the smallest sub-expression that fails, the place, its parts.

Newton's method takes first and second derivatives, part by part.  (y'^2)^0.75 is zero where y' is, and so is its slope,
but that of the power by y'^2 is infinite there, and so is its second derivative by y': the search can begin from such a
curve no more than from one on which a formula has no value.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterator

import numpy as np
from numpy.typing import NDArray

from solvers.forms.along import Along
from solvers.formula.derivative import derivative
from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import Lookup, Name, Node, Number, children, walk, with_children
from solvers.formula.printer import text
from solvers.solution import Finding
from solvers.starts.sketch import ARRAYS
from solvers.transcription.functions import Compiled
from solvers.transcription.layout import Layout

Array = NDArray[np.float64]
Values = Callable[[Node], Array]


def undefined_places(compiled: Compiled, where: Layout, z: Array) -> tuple[Finding, ...]:
    """The sub-expressions that are not finite although their parts are, on values (SI) of a mesh; where all are, those
    of which a first or second derivative is not."""
    points = where.points(z[where.places])
    value_of = Along(compiled, points, z[where.inner], z[where.controls], z[where.parameters]).value
    problem = compiled.lowered.problem
    given = {problem.independent, "pi", *(constant.name for constant in problem.constants)}
    return _places(compiled, points, value_of, _without_value, "") or _places(
        compiled,
        points,
        value_of,
        lambda node, values: _without_derivative(node, values, given),
        "no finite derivatives by its parts, ",
    )


def _places(
    compiled: Compiled, points: Array, value_of: Values, fails: Callable[[Node, Values], Array], what: str
) -> tuple[Finding, ...]:
    """Each sub-expression that fails somewhere, with the first place."""
    found: dict[str, Finding] = {}
    for tree, pointer in _formulas(compiled):
        for node in walk(tree):
            bad = fails(node, value_of)
            if isinstance(node, Name) or not bad.any():
                continue
            at = int(np.flatnonzero(bad)[0])
            named = [part for part in children(node) if not isinstance(part, Number)]
            parts = ", ".join(f"{text(part)} = {value_of(part)[at]:.6g}" for part in named)
            found.setdefault(text(node), Finding(text(node), pointer, None, float(points[at]), f"{what}with {parts}"))
    return tuple(found.values())


def _without_value(node: Node, value_of: Values) -> Array:
    """Where a node is not finite; nowhere, if that is so because of one of its parts."""
    bad = ~np.isfinite(value_of(node))
    if any(~np.isfinite(value_of(part))[bad].all() for part in children(node)):
        return np.zeros_like(bad)
    return bad


def _without_derivative(node: Node, value_of: Values, given: Collection[str]) -> Array:
    """Where some first or second derivative of a node, with respect to its parts that vary, is not finite."""
    parts = children(node)
    bad = np.zeros(value_of(node).shape, dtype=bool)
    if isinstance(node, Lookup) or not parts:
        return bad
    values = {f"part {k}": value_of(part) for k, part in enumerate(parts)}
    alone = with_children(node, tuple(
        Number(float(values[name][0]), "") if np.ptp(values[name]) == 0 and not _varies(part, given) else Name(name)
        for name, part in zip(values, parts, strict=True)
    ))  # fmt: skip
    varying = [Name(name) for name, part in zip(values, parts, strict=True) if _varies(part, given)]
    slopes = [derivative(alone, name) for name in varying]
    for tree in [*slopes, *(derivative(slope, name) for slope in slopes for name in varying)]:
        with np.errstate(all="ignore"):
            bad = bad | ~np.isfinite(evaluate(tree, lambda name, order: values[name], ARRAYS))
    return np.broadcast_to(bad, values["part 0"].shape)


def _varies(part: Node, given: Collection[str]) -> bool:
    return any(isinstance(node, Name) and node.name not in given for node in walk(part))


def _formulas(compiled: Compiled) -> Iterator[tuple[Node, str]]:
    problem = compiled.lowered.problem
    yield from ((tree, f"/where/{name}") for name, tree in problem.where)
    for equation in problem.dynamics:
        yield equation.left, equation.pointer
        yield equation.right, equation.pointer
    yield from ((condition.body, condition.pointer) for condition in problem.constraints)
    if problem.integrand is not None:
        yield problem.integrand, "/functional/integrand"
