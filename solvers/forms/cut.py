"""Arcs cut where their controls switch, so that every switch is a place of its own.

Beside each other arcs share one variable, and a place of it: two arcs that switch at the same share of their lengths
would have one unknown for two switches.  Cut there instead, an arc consists of pieces between places in t, on each of
which a control rests on one limit or is free; each place is free for itself.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.forms.arc_guess import with_sketches
from solvers.forms.beside import Beside, side_by_side
from solvers.formula.nodes import Name
from solvers.problem import Arc, Held, Parameter, Place, Problem, Unknown
from solvers.search.signals import MOST_SWITCHES, ON_LIMIT, SWITCH
from solvers.solution import ArcCurve, Solution, SwitchPlace
from solvers.transcription.limits import interval_of
from solvers.transcription.lowering import Quantity, lower, primed, simple_bound

Array = NDArray[np.float64]

PLACES = 801
"""Places of an arc at which its controls are looked at."""
BRIEF = 0.05
"""Share of an arc below which a stay between two limits is the blur of one switch."""
ROOM = 0.45
"""How far a switch may move towards its neighbours."""


@dataclass(frozen=True, slots=True)
class Run:
    """A stretch of an arc from `start` to `end` on which a control is on its lower (-1) or upper (1) limit, or free."""

    start: float
    end: float
    side: int


@dataclass(frozen=True, slots=True)
class Cut:
    """A problem whose arcs are cut, put beside each other, with its controls held."""

    beside: Beside
    problem: Problem
    of: dict[str, str]  # the unknown that switches, by the parameter

    def told(self, solution: Solution) -> Solution:
        """A solution of the cut problem, told by arcs, as one of the problem itself."""
        own = {name: value for name, value in solution.parameters.items() if name not in self.of}
        places = sorted((solution.parameters[name], name) for name in self.of)
        breaks = [arc.curve.breaks for arc in solution.arcs]
        off = 1.0 if solution.curve_error is None else min(solution.curve_error, 1.0)
        error = off * float(breaks[-1][-1] - breaks[0][0]) if breaks else 0.0
        switches = tuple(SwitchPlace(place, frozenset({self.of[name]}), error) for place, name in places)
        return replace(solution, parameters=own, switches=switches)


def cut_at_switches(problem: Problem, found: Solution) -> Cut | None:
    """The problem cut where controls switch in a solution by arcs; None where none does or it is no clear picture.

    A control that is neither on a limit nor switches from one to the other leaves its arc as it is.
    """
    curves = {curve.name: curve for curve in found.arcs}
    if set(curves) != {arc.name for arc in problem.arcs}:
        return None
    seen: list[list[tuple[Quantity, Run]]] = [list(_runs(problem, arc, curves[arc.name])) for arc in problem.arcs]
    cuts = [sorted((run.end, quantity[0]) for quantity, run in arc if run.end < curves[own.name].curve.breaks[-1])
            for arc, own in zip(seen, problem.arcs, strict=True)]  # fmt: skip
    count = sum(map(len, cuts))
    inner = [place for arc in problem.arcs for place in range(arc.first + 1, arc.last)]
    if not 0 < count <= MOST_SWITCHES or inner:
        return None
    places, spans, of = [problem.places[0]], [], {}
    arcs: list[Arc] = []
    parameters: list[Parameter] = []
    for arc, switches in zip(problem.arcs, cuts, strict=True):
        edges = [*curves[arc.name].curve.breaks[:1], *(at for at, _ in switches), *curves[arc.name].curve.breaks[-1:]]
        spans += list(pairwise(map(float, edges)))
        first = len(places) - 1
        for (at, unknown), before, after in zip(switches, edges[:-2], edges[2:], strict=True):
            name = f"{SWITCH} {len(parameters) + 1}"
            parameters.append(Parameter(name, at - ROOM * (at - before), at + ROOM * (after - at), at))
            places.append(Place(Name(name), name))
            of[name] = unknown
        places.append(problem.places[arc.last])
        guessed = tuple(_guessed(unknown, curves[arc.name]) for unknown in arc.unknowns)
        arcs.append(replace(arc, first=first, last=len(places) - 1, unknowns=guessed))
    junctions = {arc.last: new.last for arc, new in zip(problem.arcs, arcs, strict=True)}
    known = tuple(replace(p, guess=found.parameters.get(p.name, p.guess)) for p in problem.parameters)
    cut = replace(
        problem,
        places=tuple(places),
        arcs=tuple(arcs),
        parameters=(*known, *parameters),
        jumps=frozenset(replace(jump, place=junctions[jump.place]) for jump in problem.jumps),
    )
    beside = side_by_side(cut)
    held = tuple(
        Held(0, piece.own(primed(quantity)), 0, run.side)
        for piece, (start, end) in zip(beside.pieces, spans, strict=True)
        for quantity, run in seen[piece.arc]
        if run.start < (start + end) / 2 < run.end
    )
    return Cut(beside, replace(with_sketches(beside), held=held), of)


def _limits(problem: Problem, arc: Arc) -> Iterator[tuple[Quantity, float, float]]:
    """The free quantities of an arc that have a limit on both sides."""
    constants = {c.name: c.value for c in problem.constants}
    bounds = {(u.name, 0): (u.lower, u.upper) for u in arc.unknowns}
    for condition in arc.constraints:
        target = simple_bound(condition)
        if target is not None and not condition.equality:
            low, high = interval_of(condition, constants)
            lower_, upper_ = bounds.get(target, (-np.inf, np.inf))
            bounds[target] = max(low, lower_), min(high, upper_)
    for quantity in lower(problem.along(arc)).controls:
        low, high = bounds.get(quantity, (-np.inf, np.inf))
        if np.isfinite(high - low):
            yield quantity, low, high


def _runs(problem: Problem, arc: Arc, told: ArcCurve) -> Iterator[tuple[Quantity, Run]]:
    """What every limited control does along an arc; a brief stay between two limits is taken for one switch."""
    start, end = told.curve.breaks[[0, -1]]
    at = np.linspace(start, end, PLACES)
    for quantity, low, high in _limits(problem, arc):
        values = told.curve.evaluate(primed(quantity), at)
        near = ON_LIMIT * (high - low)
        sides = np.where(values < low + near, -1, np.where(values > high - near, 1, 0))
        edges = np.flatnonzero(np.diff(sides)) + 1
        runs = [Run(float(at[a]), float(at[b - 1]), int(sides[a])) for a, b in pairwise([0, *edges, PLACES])]
        kept = _together([run for run in runs if run.end - run.start > BRIEF * (end - start)])
        if len(kept) < 2 or any(run.side == 0 for run in kept):
            continue
        middles = [(one.end + other.start) / 2 for one, other in pairwise(kept)]
        for run, (left, right) in zip(kept, pairwise([start, *middles, end]), strict=True):
            yield quantity, Run(float(left), float(right), run.side)


def _together(runs: Sequence[Run]) -> list[Run]:
    """Neighbours on the same side as one."""
    kept: list[Run] = []
    for run in runs:
        if kept and kept[-1].side == run.side:
            kept[-1] = replace(kept[-1], end=run.end)
        else:
            kept.append(run)
    return kept


def _guessed(unknown: Unknown, told: ArcCurve) -> Unknown:
    """An unknown with the course that was found as its guess."""
    start, end = told.curve.breaks[[0, -1]]
    at = np.linspace(start, end, PLACES)
    values = told.curve.evaluate(unknown.name, at)
    return replace(unknown, guess=tuple(zip(at.tolist(), values.tolist(), strict=True)))
