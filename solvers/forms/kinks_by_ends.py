"""Kinks that are given along the range where a place of it is free: between which of them it lies is found by solving.

The places of the first guess say where they lie at first.  A solution with a place that is pressed against a kink is
followed by one with this place beyond it; where that is pressed back, the place lies on the kink.
"""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import chain
from typing import TYPE_CHECKING

import numpy as np

from solvers.forms.kinks import Kinks, free_places
from solvers.formula.nodes import Name, Node, Number, Sum
from solvers.problem import Condition, Place, Problem
from solvers.search.attempt import first_mesh
from solvers.starts.guess import first_guess
from solvers.transcription.functions import bent_uses, compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.limits import number
from solvers.transcription.lowering import lower

if TYPE_CHECKING:
    from solvers.forms.choice import Found

TURNS = 6
"""How often places may move past kinks."""
REACH = 3.0
"""How far beyond a free end, relative to the range, kinks are looked for at once."""
PRESSED = 1e-6
"""Distance from a kink, relative to the range, up to which a free place counts as pressed against it."""
BEYOND = 0.25
"""How far beyond a kink it begins anew, relative to the range, where no other kink is nearer."""

ZERO = Number(0.0, "0")


def by_ends(problem: Problem, solve: Callable[[Problem], Found]) -> Found | None:
    """The solution of a problem with a free place and given kinks, with places at these; None where that fails."""
    if problem.arcs or problem.sweeps or problem.continuation or not (bent_uses(problem) and free_places(problem)):
        return None
    waiting, seen = [_first_places(problem)], set[tuple[str, ...]]()
    passed: list[str] = []
    before: Found | None = None
    while waiting and len(seen) < TURNS:
        cell = _Cell(problem, waiting.pop())
        if len(bent_uses(cell.problem)) == len(bent_uses(problem)):
            return None
        if cell.name in seen:
            continue
        seen.add(cell.name)
        found = solve(cell.problem)
        if not found.pursuit.solved:
            waiting += cell.beside
            continue
        values, pressed = cell.moved(_places(problem, found))
        if not pressed:
            return found
        if before is not None and pressed == passed:  # also from the other side: it lies there
            return max(before, found, key=_shortest)
        waiting, passed, before = [values], pressed, found
    return None


def _shortest(found: Found) -> float:
    """The length of the shortest stretch: on one side of the kink that a place lies on there may be none."""
    return float(np.diff(found.pursuit.paths[-1].places).min())


def _first_places(problem: Problem) -> list[float]:
    """The places of the first guess."""
    compiled, mesh = compile_problem(lower(problem)), first_mesh(len(problem.places) - 1)
    where = layout(compiled, mesh)
    return [float(at) for at in first_guess(compiled, mesh, where).z[where.places]]


def _places(problem: Problem, found: Found) -> list[float]:
    """The places of a solution."""
    numbers = {c.name: c.value for c in problem.constants}
    names = (parameter.name for parameter in found.pursuit.problem.parameters)
    numbers |= dict(zip(names, found.pursuit.paths[-1].parameters.tolist(), strict=True))
    return [number(place.tree, numbers) for place in problem.places]


@dataclass(frozen=True, slots=True)
class _Edge:
    """A kink next to a free place, or how far they are known, with where the place would lie `beyond` it."""

    index: int
    at: float
    tree: Node
    beyond: float
    before: bool


class _Cell:
    """A problem with each free place between two kinks."""

    def __init__(self, problem: Problem, values: Sequence[float]) -> None:
        self._values, self._span = list(values), values[-1] - values[0]
        self._free = free_places(problem)
        ends = [self._limits(problem.places, k) for k in range(len(values))]
        kinks = Kinks(problem, values, ends[0][0], ends[-1][1])
        known = sorted(((at, kink.tree) for at, kink in kinks.places), key=lambda spot: spot[0])
        each = (self._beside(k, place, known, *ends[k]) for k, place in enumerate(problem.places))
        self._edges = list(chain.from_iterable(each))
        self.problem = self._held(kinks.resolved, problem.places)

    @property
    def name(self) -> tuple[str, ...]:
        """What tells a cell from others: the kinks around the free places."""
        return tuple(f"{edge.index} {edge.before} {edge.at:.9g}" for edge in self._edges)

    @property
    def beside(self) -> list[list[float]]:
        """Places with one of them beyond a kink next to it."""
        return [[*self._values[: e.index], e.beyond, *self._values[e.index + 1 :]] for e in self._edges]

    def moved(self, found: Sequence[float]) -> tuple[list[float], list[str]]:
        """Places that were found, those pressed against a kink moved beyond it, and these kinks."""
        places, passed = list(found), []
        for edge in self._edges:
            if abs(found[edge.index] - edge.at) < PRESSED * self._span:
                places[edge.index] = edge.beyond
                passed.append(f"{edge.at:.9g}")
        return places, passed

    def _limits(self, places: Sequence[Place], index: int) -> tuple[float, float]:
        """Between what a place lies, as far as kinks are looked for."""
        value, tree = self._values[index], places[index].tree
        if not (isinstance(tree, Name) and tree.name in self._free):
            return value, value
        own, reach = self._free[tree.name], REACH * self._span
        low = self._values[index - 1] if index else value - reach
        high = self._values[index + 1] if index < len(places) - 1 else value + reach
        return max(own.lower, low), min(own.upper, high)

    def _beside(
        self, index: int, place: Place, known: Sequence[tuple[float, Node]], low: float, high: float
    ) -> Iterator[_Edge]:
        """The kinks next to a free place."""
        if low == high:
            return
        assert isinstance(place.tree, Name)
        own = self._free[place.tree.name]
        edges = [(at, tree) for at, tree in known if low < at < high]
        if index == 0 and low > own.lower:
            edges.insert(0, (low, Number(low, repr(low))))
        if index == len(self._values) - 1 and high < own.upper:
            edges.append((high, Number(high, repr(high))))
        step = BEYOND * self._span
        after = bisect_left([at for at, _ in edges], self._values[index])
        if after > 0:
            at, tree = edges[after - 1]
            beyond = edges[after - 2][0] if after > 1 else min(low, at - 2 * step) if index == 0 else low
            yield _Edge(index, at, tree, at - min(step, (at - beyond) / 2), True)
        if after < len(edges):
            at, tree = edges[after]
            last = index == len(self._values) - 1
            beyond = edges[after + 1][0] if after + 1 < len(edges) else max(high, at + 2 * step) if last else high
            yield _Edge(index, at, tree, at + min(step, (beyond - at) / 2), False)

    def _held(self, resolved: Problem, places: Sequence[Place]) -> Problem:
        """The problem with guesses of free places and with what keeps them in the cell, beside their order."""
        guesses = {place.tree.name: at for at, place in zip(self._values, places, strict=True)
                   if isinstance(place.tree, Name)}  # fmt: skip
        parameters = tuple(replace(p, guess=guesses.get(p.name, p.guess)) for p in resolved.parameters)
        kept = []
        for edge in self._edges:
            if edge.index == 0 or not edge.before:
                place = places[edge.index]
                body = Sum((place.tree, edge.tree) if edge.before else (edge.tree, place.tree), (False, True))
                kept.append(Condition(body, ZERO, None, f"{place.label} on its side of a kink", ""))
        return replace(resolved, parameters=parameters, endpoints=(*resolved.endpoints, *kept))
