"""What is held on a limit along an arc: whether that is right, and what is to be let go where it is not."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from solvers.problem import Held
from solvers.search.signals import signals
from solvers.search.structure import Release, shrinking
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

WRONG = 0.2
"""How far, relative to the largest on its arc, the slope of the value may point away from the limit that is held."""


def held_rightly(path: Trajectory) -> bool:
    """Whether leaving any held limit would make the value worse."""
    return not wrongly_held(path)


def wrongly_held(path: Trajectory) -> list[Held]:
    """The held limits that it would be better to leave: the slope of the Lagrangian has the wrong sign.

    For a control at any point of its arc, but for what discretisation blurs near its ends; for a state, whose
    multiplier may be spread in many ways, in the sum.
    """
    program = path.program
    where, problem = program.layout, program.compiled.lowered.problem
    slopes = -path.bound_multipliers * program.scale / abs(program.value_scale)
    lowered = program.compiled.lowered
    resting = [signal for signal in signals(path) if signal.state]
    found = []
    for held in problem.held:
        quantity = (held.name, held.order)
        inside = where.stretch == held.stretch
        if any(signal.quantity != quantity and signal.labels[inside].all() for signal in resting):
            continue  # a state rests on its limit besides: the multipliers are not unique
        if quantity in lowered.controls:
            outward = -held.side * slopes[where.controls[inside, lowered.controls.index(quantity)]]
            outward = outward / where.measures[inside]
            wrong = outward.min(initial=0.0) < -WRONG * np.abs(outward).max(initial=0.0)
        else:
            wrong = -held.side * slopes[where.inner[inside, lowered.states.index(quantity)]].sum() < 0
        if wrong:
            found.append(held)
    return found


def released(path: Trajectory, wrong: Sequence[Held]) -> list[Release]:
    """What is to be let go, and between which places: up to the next ones beyond which it is held again.

    A control that runs singular close to its limit looks held here and there, wherever it is looked at.
    """
    held = path.program.compiled.lowered.problem.held
    found = []
    for one in wrong:
        first = last = one.stretch
        others = {h.stretch for h in held if (h.name, h.order) == (one.name, one.order)}
        while first > 0 and first - 1 not in others:
            first -= 1
        while last + 2 < len(path.places) and last + 1 not in others:
            last += 1
        found.append(((one.name, one.order), float(path.places[first]), float(path.places[last + 1])))
    return found


def shrunk(path: Trajectory) -> list[Held]:
    """What is held along stretches that shrink towards nothing beside others where it is free."""
    held = path.program.compiled.lowered.problem.held
    found = []
    for start, end in shrinking(path):
        at = int(np.argmin(np.abs(path.places - start)))
        stretch, beside = (at, at - 1) if end > start else (at - 1, at)
        across = {(h.name, h.order) for h in held if h.stretch == beside}
        found += [h for h in held if h.stretch == stretch and (h.name, h.order) not in across]
    return found
