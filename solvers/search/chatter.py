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
from numpy.typing import NDArray

from solvers.formula.nodes import Name
from solvers.problem import Held, Parameter, Place, Problem
from solvers.search.signals import SWITCH
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]

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
    """The problem of a chattering path with its next switch as one more place; None where it does not chatter.

    The last switch makes up for all that would follow: where two times before it tell the series, it is moved too.
    """
    found = chatter(path)
    if found is None:
        return None
    problem = path.program.compiled.lowered.problem
    new, end = found.last + 1, float(path.places[found.last + 2])
    times = np.diff(path.places)[found.first + 1 : new]
    ratio, time = found.ratio or EXPECTED, float(times[-1])
    if len(times) > 2:
        ratio = float(np.median(times[1:-1] / times[:-2]))
        time = ratio * float(times[-2])
    at = float(path.places[found.last]) + time
    place = at + ratio * time
    places = np.insert(path.places, new + 1, place)
    places[new] = at
    changed = divided(problem, new, places, (place - 0.9 * (place - at), place + 0.45 * (end - place)))
    return replace(changed, held=(*changed.held, Held(new, *found.control, -_side(problem, found.control, found.last))))


def divided(problem: Problem, stretch: int, places: Array, room: tuple[float, float]) -> Problem:
    """The problem with one more switch that divides a stretch: what is said of that holds of its second part.

    `places` are the values from which all start then, `room` is between what the new one may lie.
    """
    name = f"{SWITCH} {1 + sum(place.label.startswith(SWITCH + ' ') for place in problem.places)}"
    after = (*problem.places[: stretch + 1], Place(Name(name), name), *problem.places[stretch + 1 :])
    labels = [place.label for place in after]

    def moved(index: int) -> int:
        return index + (index >= stretch)

    return replace(
        problem,
        places=after,
        parameters=(*(_roomy(parameter, places, labels) for parameter in problem.parameters),
                    Parameter(name, *room, float(places[stretch + 1]))),
        held=tuple(replace(h, stretch=moved(h.stretch)) for h in problem.held),
        implied=tuple(replace(h, stretch=moved(h.stretch)) for h in problem.implied),
        calm=tuple(replace(c, stretch=moved(c.stretch)) for c in problem.calm),
    )  # fmt: skip


def _roomy(parameter: Parameter, places: Array, labels: list[str]) -> Parameter:
    """A switch with the room that its neighbours leave now."""
    if parameter.name not in labels or not parameter.name.startswith(SWITCH + " "):
        return parameter
    at = float(places[labels.index(parameter.name)])
    low, high = places[places < at].max(), places[places > at].min()
    return Parameter(parameter.name, at - 0.45 * (at - low), at + 0.45 * (high - at), at, parameter.unit)
