"""Chattering: a control that switches ever faster towards a place, where a singular arc begins.

Between a bang-bang arc and a singular arc of even second order there are infinitely many switches (Fuller); the times
between them shrink like a geometric series.  No mesh has them all, and none needs to: what the k-th counts shrinks
with a high power of that ratio.  So the switches that a mesh shows are continued by the series, a few of them are made
places like others, and what follows runs calm, as their mean does.

References: Fuller (1963), Study of an optimum non-linear control system, Journal of Electronics and Control 15 (the
ratio 0.2421... for x'' = u and x^2); Zelikin, Borisov (1994), Theory of Chattering Control (both from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from solvers.formula.nodes import Name
from solvers.problem import Held, Parameter, Place, Problem
from solvers.search.structure import SWITCH
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

FASTEST = 0.6
"""Greatest ratio of successive times that counts as shrinking."""
LIKE = 0.25
"""How much, relative to each other, successive ratios may differ where chattering is said."""
EXPECTED = 0.25
"""The ratio that is tried where only one time between two switches is known."""


@dataclass(frozen=True, slots=True)
class Chatter:
    """Bang arcs of a control on alternating sides, from stretch `first` to `last`, with a calm stretch after them.

    `ratio` is that of two successive times between switches, None where there is but one; `ends` is where they crowd.
    """

    control: Quantity
    first: int
    last: int
    ratio: float | None
    ends: float
    steady: bool  # two successive ratios agree: a geometric series


def chatter(path: Trajectory) -> Chatter | None:
    """The chattering of a path with switches as places; None where its arcs do not look like that."""
    problem = path.program.compiled.lowered.problem
    for calm in problem.calm:
        last = calm.stretch - 1
        side = _side(problem, (calm.name, calm.order), last)
        first = last
        while side and _side(problem, (calm.name, calm.order), first - 1) == -side:
            first, side = first - 1, -side
        times = np.diff(path.places)[first + 1 : last + 1]  # the first arc begins at an end, not with a switch
        if side == 0 or not len(times):
            continue
        ratios = times[1:] / times[:-1]
        ratio = float(np.median(ratios)) if len(ratios) else None
        if ratio is not None and ratio > FASTEST:
            continue
        steady = bool(np.any(np.abs(np.diff(ratios)) < LIKE * ratios[:-1]))
        sound = max(len(times) - 2, 0)  # the last time makes up for all that would follow
        ends = float(path.places[first + 1 + sound] + times[sound] / (1 - (ratio or EXPECTED)))
        if ends < path.places[last + 2]:
            return Chatter((calm.name, calm.order), first, last, ratio, ends, steady)
    return None


def _side(problem: Problem, quantity: Quantity, stretch: int) -> int:
    """The limit that a control is held on along a stretch, 0 where on none."""
    return next((h.side for h in problem.held if h.stretch == stretch and (h.name, h.order) == quantity), 0)


def one_more(path: Trajectory) -> Problem | None:
    """The problem of a chattering path with its next switch as one more place; None where it does not chatter."""
    found = chatter(path)
    if found is None:
        return None
    problem = path.program.compiled.lowered.problem
    new, ratio = found.last + 1, found.ratio or EXPECTED
    at, end = float(path.places[new]), float(path.places[new + 1])
    place = at + ratio * (at - float(path.places[found.last]))
    name = f"{SWITCH} {1 + sum(p.label.startswith(SWITCH + ' ') for p in problem.places)}"
    side = -_side(problem, found.control, found.last)
    parameter = Parameter(name, place - 0.9 * (place - at), place + 0.45 * (end - place), place)
    return replace(
        problem,
        places=(*problem.places[: new + 1], Place(Name(name), name), *problem.places[new + 1 :]),
        parameters=(*(_roomy(p, path, problem, place) for p in problem.parameters), parameter),
        held=(*(replace(h, stretch=h.stretch + (h.stretch >= new)) for h in problem.held),
              Held(new, *found.control, side)),
        calm=tuple(replace(c, stretch=c.stretch + (c.stretch >= new)) for c in problem.calm),
    )  # fmt: skip


def _roomy(parameter: Parameter, path: Trajectory, problem: Problem, new: float) -> Parameter:
    """A switch with the room that its neighbours leave now, the new one included."""
    labels = [place.label for place in problem.places]
    if parameter.name not in labels or not parameter.name.startswith(SWITCH + " "):
        return parameter
    at = float(path.places[labels.index(parameter.name)])
    others = np.append(path.places, new)
    low, high = others[others < at].max(), others[others > at].min()
    return Parameter(parameter.name, at - 0.45 * (at - low), at + 0.45 * (high - at), at, parameter.unit)
