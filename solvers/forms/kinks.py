"""Kinks of what is given along the range: their places become places of the problem, and between them nothing is bent.

Where `abs`, `sign`, `max` and `min` are of the independent variable and constants only, as in sign(x - 1), it is known
beforehand where they have a kink or jump.  With a place there no interval of a mesh lies across it, and on every
stretch the function is one of its smooth branches: abs(x - 1) is s (x - 1) with s = -1 on the stretches before 1 and
s = 1 on those after it.  Nothing is rounded then, and polynomials converge as fast as without the kink.
"""

from __future__ import annotations

from collections.abc import Sequence
from contextlib import suppress
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.forms.free_kinks import reformulated
from solvers.forms.kink_limits import with_limits_at_kinks
from solvers.forms.levels import half_more, numeral, opposite, plus, times
from solvers.forms.sign_changes import UndefinedError, sign_changes
from solvers.formula.derivative import derivative
from solvers.formula.evaluate import evaluate
from solvers.formula.nodes import (
    SIDE,
    At,
    Call,
    Name,
    Node,
    Number,
    Product,
    Sum,
    children,
    walk,
    with_children,
)
from solvers.formula.substitute import at_place, substitute
from solvers.problem import KINK, MIDDLE, Parameter, Place, Problem
from solvers.starts.sketch import ARRAYS
from solvers.transcription.functions import ROUNDED, rounded_functions
from solvers.transcription.limits import number

Array = NDArray[np.float64]

MOST = 120
"""Kinks of one function beyond this are left to the rounding: so many stretches help nobody."""
SAME = 1e-12
"""Places closer than this, relative to the range, are one."""


def at_kinks(problem: Problem) -> Problem:
    """The problem with places at all kinks that are known beforehand; the same problem where there are none.

    Left as they are: kinks where a place is free, and those that move with a constant that is swept.
    """
    if problem.arcs or not rounded_functions(problem) or free_places(problem):
        return problem
    constants = {c.name: c.value for c in problem.constants}
    return Kinks(problem, [number(place.tree, constants) for place in problem.places]).resolved


def free_places(problem: Problem) -> dict[str, Parameter]:
    """The parameters that are places, by name."""
    names = {place.tree.name for place in problem.places if isinstance(place.tree, Name)}
    return {parameter.name: parameter for parameter in problem.parameters if parameter.name in names}


class Kinks:
    """The kinks of a problem without arcs, given the values of its places.

    They are looked for from `low` to `high`, from the first place to the last where nothing else is said.  `places` has
    those found, with their values; `resolved` is the problem with those inside the range at places.  Where places are
    free it is the same problem as long as none of them passes a kink.
    """

    def __init__(
        self, problem: Problem, values: Sequence[float], low: float | None = None, high: float | None = None
    ) -> None:
        self.places: list[tuple[float, Place]] = []
        self._problem = problem
        self._first, self._last = values[0], values[-1]
        self._low, self._high = self._first if low is None else low, self._last if high is None else high
        self._same = SAME * (self._last - self._first)
        free = free_places(problem)
        self._own = list(zip(values, problem.places, strict=True))
        self._fixed = [(at, own) for at, own in self._own if not (isinstance(own.tree, Name) and own.tree.name in free)]
        swept = {sweep.constant for sweep in problem.sweeps}
        if problem.continuation is not None:
            swept.add(problem.continuation.constant)
        self._constants = {c.name: c.value for c in problem.constants if c.name not in swept}
        self._where: dict[str, Node] = {}  # the abbreviations that are given, written out
        for name, tree in problem.where:
            if self._given(tree):
                self._where[name] = self._written_out(tree)
        self.resolved = self._resolved()

    def _resolved(self) -> Problem:
        """The problem with its kinks at places."""
        changed = reformulated(self._problem, self._branched)
        inside = [(at, kink) for at, kink in self.places if self._first < at < self._last]
        places = tuple(place for _, place in sorted([*self._own, *inside], key=lambda spot: spot[0]))
        changed = replace(changed, places=places)
        return with_limits_at_kinks(changed, "sign" in rounded_functions(self._problem))

    def _branched(self, tree: Node) -> Node:
        """A formula with its branches in place of given kinks."""
        if isinstance(tree, At):
            return tree
        before = children(tree)
        parts = tuple(self._branched(part) for part in before)
        if isinstance(tree, Call) and tree.function in ROUNDED and self._given(tree):
            with suppress(_LeftError):
                return self._branch(tree, parts)
        same = all(one is other for one, other in zip(parts, before, strict=True))
        return tree if same else with_children(tree, parts)

    def _branch(self, kink: Call, parts: Sequence[Node]) -> Node:
        """The branches of a kink; `parts` are its arguments with branches of their own."""
        first, *others = kink.arguments
        if kink.function in ("sign", "abs"):
            level = self._level(first)
            return level if kink.function == "sign" else times(level, parts[0])
        chosen, best = parts[0], first
        for other, part in zip(others, parts[1:], strict=True):
            level = self._level(Sum((best, other), (False, True)))
            level = level if kink.function == "max" else opposite(level)
            chosen = plus(times(half_more(level), chosen), times(half_more(opposite(level)), part))
            best = Call(kink.function, (best, other))
        return chosen

    def _level(self, argument: Node) -> Node:
        """The sign of a formula as a number for every stretch."""
        tree = self._written_out(argument)
        names = {node.name for node in walk(tree) if isinstance(node, Name)}
        low, high, room = self._low, self._high, self._same
        if self._problem.independent not in names:
            return numeral(float(np.sign(self._value(tree, np.zeros(1))[0])))
        try:
            found = [t for t in sign_changes(lambda t: self._value(tree, t), low, high) if low + room < t < high - room]
        except UndefinedError:
            raise _LeftError from None
        kinks: list[float] = []
        for t in found:
            if not kinks or t - kinks[-1] > room:
                kinks.append(t)
        if len(kinks) > MOST:
            raise _LeftError
        edges = np.array([low, *kinks, high])
        signs = np.sign(self._value(tree, (edges[1:] + edges[:-1]) / 2))
        level: Node = numeral(float(signs[0] + signs[-1]) / 2)
        for t, jump in zip(kinks, np.diff(signs), strict=True):
            if jump:
                place = self._place(t, tree, names)
                side = Call(SIDE, (Name(MIDDLE), place))
                level = plus(level, times(numeral(float(jump) / 2), side))
        return level

    def _place(self, value: float, tree: Node, names: set[str]) -> Node:
        """The tree of the place where a formula changes sign, which is a new one where there is none yet."""
        for known, place in (*self._fixed, *self.places):
            if abs(known - value) <= self._same:
                return place.tree
        place = Place(self._root(value, tree, names), f"{KINK} {len(self.places) + 1}")
        self.places.append((value, place))
        return place.tree

    def _root(self, value: float, tree: Node, names: set[str]) -> Node:
        """The root of a formula near its value, which moves with the constants: one step of Newton's method."""
        root = Number(value, repr(value))
        if not names & self._constants.keys():
            return root
        x, tree = self._problem.independent, self._straight(tree, np.array([value]))
        slope = at_place(derivative(tree, Name(x)), root, "", x, ())
        steepness = float(self._value(slope, np.zeros(1))[0])
        if not np.isfinite(steepness) or steepness == 0:
            raise _LeftError
        return Sum((root, Product((at_place(tree, root, "", x, ()), slope), (False, True))), (False, True))

    def _straight(self, tree: Node, at: Array) -> Node:
        """A formula with those of its branches in place of kinks that it has at a place."""
        parts = tuple(self._straight(part, at) for part in children(tree))
        if not (isinstance(tree, Call) and tree.function in ROUNDED):
            return with_children(tree, parts)
        values = [float(self._value(part, at)[0]) for part in parts]
        if tree.function in ("sign", "abs"):
            side = numeral(float(np.sign(values[0])))
            return side if tree.function == "sign" else times(side, parts[0])
        return parts[int(np.argmax(values) if tree.function == "max" else np.argmin(values))]

    def _given(self, tree: Node) -> bool:
        """Whether a formula holds nothing but the independent variable and constants."""
        known = {self._problem.independent, "pi", *self._constants, *self._where}
        return all(
            node.name in known and not node.order
            if isinstance(node, Name)
            else not isinstance(node, At) and not (isinstance(node, Call) and node.function == "integral")
            for node in walk(tree)
        )

    def _written_out(self, tree: Node) -> Node:
        return substitute(tree, lambda node: self._where.get(node.name) if isinstance(node, Name) else None)

    def _value(self, tree: Node, at: Array) -> Array:
        def look_up(name: str, order: int) -> Array | float:
            return at if name == self._problem.independent else self._constants[name]

        with np.errstate(all="ignore"):
            return np.broadcast_to(np.asarray(evaluate(tree, look_up, ARRAYS), dtype=np.float64), at.shape)


class _LeftError(Exception):
    """A kink is left to the rounding."""
