"""Touches that accumulate: a state of which a control moves only the third derivative or a higher one.

It cannot come to rest on a limit at once: it would have to arrive there with all its lower derivatives zero, for which
no costate pays.  It touches the limit ever faster instead, after times that shrink like a geometric series, and rests
on it from where they accumulate.  An arc that is entered at once does a little worse; each touch before it takes that
down by some power of the ratio, and a few do.

References: Robbins (1980), Junction phenomena for optimal control with state-variable inequality constraints of third
order, Journal of Optimization Theory and Applications 31; Jacobson, Lele, Speyer (1971), New necessary conditions of
optimality for control problems with state-variable inequality constraints, Journal of Mathematical Analysis and
Applications 35 (both from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from solvers.problem import Held, Problem, Touch
from solvers.search.chatter import divided
from solvers.search.signals import SWITCH
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]

LEAST_ORDER = 3
"""The least derivative of a state in which a control appears, where it cannot come to rest on a limit."""
EXPECTED = 0.3
"""The ratio of successive times that is tried where fewer than two are known."""
FASTEST = 0.6
"""Greatest ratio of successive times that counts as shrinking."""


@dataclass(frozen=True, slots=True)
class Accumulation:
    """Touches of a state before it rests on its limit from the place with the index `rest` on.

    `places` are those of the touches, with the range's start or the arc before as the first; `ratio` is that of the
    last two times between them, None where there are fewer or they do not shrink.
    """

    state: Quantity
    side: int
    order: int  # of its first derivative in which a control appears
    rest: int
    places: tuple[float, ...]

    @property
    def ratio(self) -> float | None:
        times = np.diff(self.places)
        shrinks = len(times) > 1 and times[-1] < FASTEST * times[-2]
        return float(times[-1] / times[-2]) if shrinks else None


def accumulation(path: Trajectory) -> Accumulation | None:
    """The first arc of a path on which a state rests that cannot come to rest there at once, if there is any."""
    compiled = path.program.compiled
    problem, states = compiled.lowered.problem, compiled.lowered.states
    labels = [place.label for place in problem.places]
    for held in sorted(problem.held, key=lambda held: held.stretch):
        quantity, start = (held.name, held.order), held.stretch
        if quantity not in states or _on(problem.held, held, start - 1) or not labels[start].startswith(SWITCH + " "):
            continue
        order, controls = compiled.reached_by(states.index(quantity))
        if not controls or order + 1 < LEAST_ORDER:
            continue
        touched = {touch.place for touch in problem.touches
                   if (touch.name, touch.order, touch.side) == (*quantity, held.side)}  # fmt: skip
        first = start - 1
        while first > 0 and labels[first] in touched:
            first -= 1
        return Accumulation(quantity, held.side, order + 1, start, tuple(path.places[first:start].tolist()))
    return None


def _on(held: tuple[Held, ...], one: Held, stretch: int) -> bool:
    return any((h.stretch, h.name, h.order) == (stretch, one.name, one.order) for h in held)


def one_touch_more(path: Trajectory) -> Problem | None:
    """The problem of a path with one more touch before an arc that cannot be entered at once; None where there is none.

    Where the arc begins now it has to make up for all touches that are missing: the first of these lies near there.
    """
    found = accumulation(path)
    if found is None:
        return None
    problem, old = path.program.compiled.lowered.problem, found.rest
    ratio = found.ratio or EXPECTED
    touch, end = float(path.places[old]), float(path.places[old + 1])
    if found.ratio is not None:
        touch = found.places[-1] + ratio * (found.places[-1] - found.places[-2])
    rest = touch + ratio * (touch - found.places[-1])
    if not rest < end:
        return None
    places = np.insert(path.places, old + 1, rest)
    places[old] = touch
    changed = divided(problem, old, places, (rest - 0.9 * (rest - touch), rest + 0.45 * (end - rest)))
    touched = Touch(problem.places[old].label, *found.state, found.side)
    return replace(changed, touches=(*changed.touches, touched))
