"""Values of formulas at points of a curve, as arrays in SI."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import Call, Lookup, Node, walk
from solvers.problem import MIDDLE, Problem
from solvers.starts.sketch import ARRAYS
from solvers.transcription.functions import Compiled
from solvers.transcription.limits import constants_of
from solvers.transcription.lowering import Quantity

Array = NDArray[np.float64]


class Along:
    """P points of a curve: their places, states (P x n), controls (P x m), and the parameters."""

    def __init__(self, compiled: Compiled, points: Array, states: Array, controls: Array, parameters: Array) -> None:
        self._lowered = compiled.lowered
        self._shape = points.shape
        problem = self._lowered.problem
        self._abbreviations = dict(problem.where)
        self._values: dict[Quantity, Array] = {(problem.independent, 0): points, (MIDDLE, 0): points}
        numbers = constants_of(compiled) | dict(zip((p.name for p in problem.parameters), parameters, strict=True))
        self._values |= {(name, 0): np.full_like(points, number) for name, number in numbers.items()}
        self._values |= dict(zip(self._lowered.states, states.T, strict=True))
        self._values |= dict(zip(self._lowered.controls, controls.T, strict=True))

    def value(self, tree: Node) -> Array:
        """The values of a formula without values at places; what is not defined is no finite number."""
        with np.errstate(all="ignore"):
            return np.broadcast_to(np.array(evaluate(tree, self._look_up, ARRAYS), dtype=np.float64), self._shape)

    def size(self, tree: Node) -> Array:
        """As large as a formula is: what is at places is taken for what runs along the curve, integrals for means."""
        span = float(np.ptp(self._values[self._lowered.problem.independent, 0]))
        rough = ARRAYS | {"integral": lambda body: np.mean(body) * span}
        with np.errstate(all="ignore"):
            value = evaluate(tree, self._look_up, rough, lambda name, order, place, side: self._look_up(name, order))
            return np.broadcast_to(np.array(value, dtype=np.float64), self._shape)

    def _look_up(self, name: str, order: int) -> Array:
        if name in self._abbreviations:
            return self.value(self._abbreviations[name])
        if (name, order) not in self._values:
            self._values[name, order] = self.value(self._lowered.given[name, order])
        return self._values[name, order]


def lookups_along(problem: Problem) -> Iterator[Lookup]:
    """Every use of a table along the curve."""
    trees: list[Node] = [tree for _, tree in problem.where]
    trees += [side for line in problem.dynamics for side in (line.left, line.right)]
    trees += [condition.body for condition in problem.constraints]
    trees += [] if problem.integrand is None else [problem.integrand]
    inside = [condition.body for condition in problem.integrals]
    trees += [node.arguments[0] for body in inside for node in walk(body)
              if isinstance(node, Call) and node.function == "integral"]  # fmt: skip
    yield from (node for tree in trees for node in walk(tree) if isinstance(node, Lookup))
