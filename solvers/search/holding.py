"""What is held on a limit along an arc: whether that is right, and what is to be let go where it is not."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
from numpy.typing import NDArray

from solvers.problem import Held
from solvers.search.signals import signals
from solvers.search.structure import Release, shrinking
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

WRONG = 0.2
"""How far, relative to the largest on its arc, the slope of the value may point away from the limit that is held."""


SURELY = 1e-3
"""The same where nothing is to remain in doubt."""


def held_rightly(path: Trajectory) -> bool:
    """Whether leaving any held limit would make the value worse."""
    return not wrongly_held(path)


def surely_held_rightly(path: Trajectory) -> bool:
    """The same beyond what discretisation blurs; for a state nearly all that pushes has to push towards the limit."""
    return not any(
        outward.min(initial=0.0) < -SURELY * np.abs(outward).max(initial=0.0)
        if control
        else -outward[outward < 0].sum() > SURELY * np.abs(outward).sum()
        for _, outward, control in _slopes(path)
    )


def wrongly_held(path: Trajectory) -> list[Held]:
    """The held limits that it would be better to leave: the slope of the Lagrangian has the wrong sign.

    For a control or a pointwise constraint anywhere on its arc, but for what discretisation blurs near its ends; for a
    state, whose multiplier may be spread in many ways, in the sum.
    """
    return [
        held
        for held, outward, control in _slopes(path)
        if (outward.min(initial=0.0) < -WRONG * np.abs(outward).max(initial=0.0) if control else outward.sum() < 0)
    ]


def _slopes(path: Trajectory) -> Iterator[tuple[Held, Array, bool]]:
    """What is held, how much the value loses along it by leaving its limit, and whether that counts at each place.

    By the measure of each point for a control, and for a pointwise constraint; in all for a state.
    """
    program = path.program
    where, problem = program.layout, program.compiled.lowered.problem
    slopes = -path.bound_multipliers * program.scale / abs(program.value_scale)
    lowered = program.compiled.lowered
    resting = [signal for signal in signals(path) if signal.state]
    for held in problem.held:
        quantity = (held.name, held.order)
        inside = where.stretch == held.stretch
        if any(signal.quantity != quantity and signal.labels[inside].all() for signal in resting):
            continue  # a state rests on its limit besides: the multipliers are not unique
        rank = program.compiled.rank_of(held)
        if rank is not None:
            yield held, held.side * _pushes(path, inside, rank), True
        elif quantity in lowered.controls:
            outward = -held.side * slopes[where.controls[inside, lowered.controls.index(quantity)]]
            yield held, outward / where.measures[inside], True
        else:
            yield held, -held.side * slopes[where.inner[inside, lowered.states.index(quantity)]], False


def _pushes(path: Trajectory, inside: Flags, rank: int) -> Array:
    """The multipliers of a pointwise constraint along an arc, by their measure; on states alone the mean of each
    interval, as they may alternate from point to point."""
    program, where = path.program, path.program.layout
    count = program.compiled.point.constraints
    rows = path.row_multipliers[program.rows.pointwise : program.rows.rims].reshape(-1, count)
    pushes: Array = rows[inside, rank]
    measures: Array = (where.measures * where.lengths(path.places))[inside]
    if program.compiled.reached_by(program.compiled.point.states + rank)[0] > 0:
        owner = np.repeat(np.arange(len(where.first) - 1), np.diff(where.first))[inside]
        pushes, measures = (np.bincount(owner - owner[0], values).astype(float) for values in (pushes, measures))
    return np.asarray(pushes / measures) / abs(program.value_scale)


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
