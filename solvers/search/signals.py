"""Switches read off a solved mesh: where a control or state with limits meets or leaves one of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.search.contacts import Contact, contacts
from solvers.transcription.limits import quantity_bounds
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

SWITCH = "switch"
"""How the names of places begin that were made of switches; no user can write such a name."""
MOST_SWITCHES = 16
ON_LIMIT = 1e-3
"""How near to a limit, relative to the room it leaves, a control counts as on it."""
TOUCH = 0.02
"""How short, relative to the whole, a stay of a state on its limit counts as a touch."""
FAINT = 1e-2
"""Values of a quantity that moves less than this, relative to its size, are all alike."""
CLOSE = 3e-3
"""How near to a switch, relative to the whole, a touch counts as the same where both are read off a mesh ..."""
CLOSEST = 3e-4
"""... and how near to a place of the problem, which is known better."""
STATE_ON_LIMIT = 1e-4
"""How near to a limit a state counts as on it: it may come close without resting there."""


@dataclass(frozen=True, slots=True)
class Switch:
    """A switch at `place`, which lies between `low` and `high` for certain; or a touch of the `touching` state."""

    place: float
    low: float
    high: float
    touching: tuple[Quantity, int] | None = None  # with the side that is touched
    of: frozenset[str] = frozenset()  # the unknowns that switch there, where that is known
    bent: Quantity | None = None  # the control that does not act linearly: two of its switches are never one


@dataclass(frozen=True, slots=True)
class Signal:
    """A control or state with limits, by its values at the points; it switches where it meets or leaves a limit."""

    quantity: Quantity
    values: Array
    lower: float
    upper: float
    state: bool
    size: float

    @property
    def labels(self) -> Indices:
        """-1 on the lower limit, 1 on the upper one, 0 between them, at every point."""
        room = self.upper - self.lower
        if not np.isfinite(room):
            room = max(float(np.ptp(self.values)), FAINT * self.size)
        near = room * (STATE_ON_LIMIT if self.state else ON_LIMIT)
        labels = np.zeros(len(self.values), dtype=np.int64)
        labels[self.values - self.lower < near] = -1
        labels[self.upper - self.values < near] = 1
        return labels


def signals(path: Trajectory) -> list[Signal]:
    """All controls and states of a path that have limits and lie on one of them somewhere."""
    lowered = path.program.compiled.lowered
    state_lower, state_upper, control_lower, control_upper = quantity_bounds(path.program.compiled)
    found = []
    scales = path.program.scales
    for quantities, table, lowers, uppers, state, sizes in (
        (lowered.controls, path.controls, control_lower, control_upper, False, scales.controls),
        (lowered.states, path.states, state_lower, state_upper, True, scales.states),
    ):
        for index, quantity in enumerate(quantities):
            size = float(sizes[index])
            signal = Signal(quantity, table[:, index], float(lowers[index]), float(uppers[index]), state, size)
            if signal.labels.any():
                found.append(signal)
    return found


def limited(path: Trajectory) -> list[Signal | Contact]:
    """All that lies on a limit somewhere: controls and constraints on them, then states and constraints on these."""
    return sorted([*signals(path), *contacts(path)], key=lambda signal: signal.state)


def switches(path: Trajectory, linear: Sequence[Quantity]) -> list[Switch]:
    """The switches of a solved mesh, in order; none where there are too many to be a structure.

    `linear` are the controls that act linearly in the problem itself, of which this may be a softened form.
    """
    found = [switch for signal in limited(path) for switch in _changes(path, signal, linear)]
    merged = _merged(sorted(found, key=lambda switch: switch.place), path)
    return merged if len(merged) <= MOST_SWITCHES else []


LEAP = 0.1
"""How far a control leaps at a break, relative to its size, where it switches just there."""


def jumps_at_breaks(path: Trajectory) -> bool:
    """Whether a control that has limits, or a constraint on some, leaps at a break of the mesh that is no place.

    That is an accident, and the points do not notice it: but where between the points beside it the control wants to
    switch, and with it the costate, remains open.
    """
    where = path.program.layout
    inner = np.setdiff1d(where.first[1:-1], where.first[where.at_place])
    rows = [signal.values for signal in limited(path) if not signal.state]
    return any((np.abs(row[inner] - row[inner - 1]) > LEAP * np.abs(row).max(initial=1e-300)).any() for row in rows)


def _changes(path: Trajectory, signal: Signal | Contact, linear: Sequence[Quantity]) -> list[Switch]:
    """Places where the label of a signal changes.

    A short passage of a control between two limits is one switch where it acts linearly; else it may not jump, and the
    passage stays.  A state that is at its limit for a point or two only touches it there.
    """
    bent = not signal.state and signal.quantity not in linear
    lowered = path.program.compiled.lowered
    slope = lowered.slope_of(signal.quantity) if signal.quantity in lowered.states else None
    labels, points, where = signal.labels, path.points, path.program.layout
    span = float(np.ptp(path.places))
    owner = np.repeat(np.arange(len(where.first) - 1), np.diff(where.first))
    kept: list[tuple[int, int]] = []
    found = []
    for first, last in _runs(labels):
        inner = first > 0 and last < len(labels) - 1
        short = owner[last] - owner[first] <= 1
        if inner and short and not bent and labels[first] == 0 and labels[first - 1] != labels[last + 1]:
            continue
        brief = last - first < 2 or points[last] - points[first] < TOUCH * span
        if signal.state and labels[first] != 0 and brief:
            if inner and slope is not None:
                place = _turning(path, lowered.states.index(slope), first, last)
                touching = (signal.quantity, int(labels[first]))
                found.append(Switch(place, float(points[first - 1]), float(points[last + 1]), touching))
            continue
        kept.append((first, last))
    for before, after in pairwise(kept):
        left, right = before[1], after[0]
        if labels[left] == labels[right]:
            continue
        low, high = float(points[left]), float(points[right])
        place = (low + high) / 2
        if labels[left] * labels[right] == -1 and bent:
            found += [Switch(place, low, high, bent=signal.quantity) for place in (low, high)]
            continue
        if labels[left] * labels[right] == -1:
            start, end = int(owner[left]), int(owner[right])
            low, high = float(path.breaks[start]), float(path.breaks[end + 1])
            place = _clean_jump(path, signal, slice(where.first[start], where.first[end + 1]), low, high, labels[left])
        found.append(Switch(place, low, high, bent=signal.quantity if bent else None))
    return found


def _turning(path: Trajectory, slope: int, first: int, last: int) -> float:
    """Where a state turns back that is at its limit from one point to another; halfway where its slope, which is the
    state of that index, does not tell."""
    points, slopes = path.points, path.states[:, slope]
    turns = [k for k in range(first - 1, last + 1) if slopes[k] * slopes[k + 1] < 0]
    if len(turns) != 1:
        return float(points[first] + points[last]) / 2
    k = turns[0]
    return float(points[k] + slopes[k] / (slopes[k] - slopes[k + 1]) * (points[k + 1] - points[k]))


def _runs(labels: Indices) -> list[tuple[int, int]]:
    """First and last index of every run of equal labels."""
    starts = np.concatenate([[0], np.flatnonzero(np.diff(labels)) + 1])
    ends = np.concatenate([starts[1:] - 1, [len(labels) - 1]])
    return [(int(first), int(last)) for first, last in zip(starts, ends, strict=True)]


def _clean_jump(path: Trajectory, signal: Signal | Contact, inside: slice, low: float, high: float, side: int) -> float:
    """Where a clean jump from one limit to the other has the same integral between `low` and `high`."""
    where = path.program.layout
    total = float((where.measures * where.lengths(path.places))[inside] @ signal.values[inside])
    first, second = (signal.lower, signal.upper) if side < 0 else (signal.upper, signal.lower)
    return float(np.clip((total - second * high + first * low) / (first - second), low, high))


def _merged(found: list[Switch], path: Trajectory) -> list[Switch]:
    """Switches of several quantities at one place as one; those at a place that is there already as none."""
    span = float(np.ptp(path.places))
    widths = np.diff(path.breaks)
    groups: list[list[Switch]] = []
    for switch in found:
        if switch.touching is not None or np.abs(path.places - switch.place).min() < 1e-3 * span:
            continue
        width = float(widths[np.clip(np.searchsorted(path.breaks, switch.place) - 1, 0, len(widths) - 1)])
        apart = groups and switch.bent is not None and any(other.bent == switch.bent for other in groups[-1])
        if groups and not apart and switch.place - groups[-1][-1].place < min(width, 0.05 * span):
            groups[-1].append(switch)
        else:
            groups.append([switch])
    merged = [
        Switch(float(np.mean([s.place for s in group])), min(s.low for s in group), max(s.high for s in group))
        for group in groups
    ]
    for touch in (switch for switch in found if switch.touching is not None):
        read = [abs(switch.place - touch.place) > CLOSE * span for switch in merged]
        if all(read) and np.abs(path.places - touch.place).min() > CLOSEST * span:
            merged.append(touch)
    return sorted(merged, key=lambda switch: switch.place)
