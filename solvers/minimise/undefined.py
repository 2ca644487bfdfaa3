"""Where a formula has no value: the smallest sub-expression that fails, the place, and the values that go into it."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from solvers.forms.along import Along
from solvers.formula.nodes import Name, Node, children, walk
from solvers.formula.printer import text
from solvers.solution import Finding
from solvers.transcription.functions import Compiled
from solvers.transcription.layout import Layout

Array = NDArray[np.float64]


def undefined_places(compiled: Compiled, where: Layout, z: Array) -> tuple[Finding, ...]:
    """The sub-expressions that are not finite although their parts are, on values (SI) of a mesh."""
    points = where.points(z[where.places])
    value_of = Along(compiled, points, z[where.inner], z[where.controls], z[where.parameters]).value
    found: dict[str, Finding] = {}
    for tree, pointer in _formulas(compiled):
        for node in walk(tree):
            here = value_of(node)
            bad = ~np.isfinite(here)
            if not bad.any() or any(~np.isfinite(value_of(part))[bad].all() for part in children(node)):
                continue
            at = int(np.flatnonzero(bad)[0])
            parts = ", ".join(f"{text(part)} = {value_of(part)[at]:.6g}" for part in children(node))
            if not isinstance(node, Name):
                found.setdefault(text(node), Finding(text(node), pointer, None, float(points[at]), f"with {parts}"))
    return tuple(found.values())


def _formulas(compiled: Compiled) -> Iterator[tuple[Node, str]]:
    problem = compiled.lowered.problem
    yield from ((tree, f"/where/{name}") for name, tree in problem.where)
    for equation in problem.dynamics:
        yield equation.left, equation.pointer
        yield equation.right, equation.pointer
    yield from ((condition.body, condition.pointer) for condition in problem.constraints)
    if problem.integrand is not None:
        yield problem.integrand, "/functional/integrand"
