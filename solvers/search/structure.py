"""Switches: where a limit begins or ceases to bind, found on a solved mesh and made unknown places of the problem.

A control that jumps from one bound to the other, a singular arc, a state that comes to lie on its limit: at the place
where it happens the curve has a corner, and no polynomial across it converges.  With the place itself as an unknown
(a junction of the mesh) all pieces are smooth again and few intervals of high degree suffice.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.formula.nodes import Name, Node, Number, Power, Product, Sum
from solvers.problem import Calm, Held, Parameter, Place, Problem, Touch
from solvers.transcription.functions import Compiled
from solvers.transcription.limits import quantity_bounds
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

MOST_SWITCHES = 16
ON_LIMIT = 1e-3
"""How near to a limit, relative to the room it leaves, a control counts as on it."""
TOUCH = 0.02
"""How short, relative to the whole, a stay of a state on its limit counts as a touch."""
EDGE = 1e-4
"""How near to the end of its room, relative to the room, a switch counts as at its edge."""
COLLAPSED = 3e-3
"""Width, relative to the whole, of a stretch that is about to vanish."""
FREE = 0.9
"""Share of the points off all limits at which a control counts as free all along."""
STATE_ON_LIMIT = 1e-4
"""The same for a state, which may come near to its limit without resting on it."""


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

    @property
    def labels(self) -> Indices:
        """-1 on the lower limit, 1 on the upper one, 0 between them, at every point."""
        room = self.upper - self.lower
        if not np.isfinite(room):
            room = max(float(np.ptp(self.values)), 1e-300)
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
    for quantities, table, lowers, uppers, state in (
        (lowered.controls, path.controls, control_lower, control_upper, False),
        (lowered.states, path.states, state_lower, state_upper, True),
    ):
        for index, quantity in enumerate(quantities):
            signal = Signal(quantity, table[:, index], float(lowers[index]), float(uppers[index]), state)
            if signal.labels.any():
                found.append(signal)
    return found


def switches(path: Trajectory, linear: Sequence[Quantity]) -> list[Switch]:
    """The switches of a solved mesh, in order; none where there are too many to be a structure.

    `linear` are the controls that act linearly in the problem itself, of which this may be a softened form.
    """
    found = [switch for signal in signals(path) for switch in _changes(path, signal, linear)]
    merged = _merged(sorted(found, key=lambda switch: switch.place), path)
    return merged if len(merged) <= MOST_SWITCHES else []


LEAP = 0.1
"""How far a control leaps at a break, relative to its size, where it switches just there."""


def jumps_at_breaks(path: Trajectory) -> bool:
    """Whether a control that has limits leaps at a break of a plain mesh.

    That is an accident, and the points do not notice it: but where between the points beside it the control wants to
    switch, and with it the costate, remains open.
    """
    where = path.program.layout
    if any(place.label.startswith(SWITCH + " ") for place in path.program.compiled.lowered.problem.places):
        return False
    inner = np.setdiff1d(where.first[1:-1], where.first[where.at_place])
    controls = path.program.compiled.lowered.controls
    limited = [controls.index(signal.quantity) for signal in signals(path) if not signal.state]
    leaps = np.abs(path.controls[inner] - path.controls[inner - 1])[:, limited]
    return bool((leaps > LEAP * np.abs(path.controls[:, limited]).max(axis=0, initial=1e-300)).any())


def _changes(path: Trajectory, signal: Signal, linear: Sequence[Quantity]) -> list[Switch]:
    """Places where the label of a signal changes.

    A short passage of a control between two limits is one switch where it acts linearly; else it may not jump, and the
    passage stays.  A state that is at its limit for a point or two only touches it there.
    """
    bent = not signal.state and signal.quantity not in linear
    states = path.program.compiled.lowered.states
    smooth = signal.state and (signal.quantity[0], signal.quantity[1] + 1) in states
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
            if inner and smooth:
                middle = float(points[first] + points[last]) / 2
                touching = (signal.quantity, int(labels[first]))
                found.append(Switch(middle, float(points[first - 1]), float(points[last + 1]), touching))
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


def _runs(labels: Indices) -> list[tuple[int, int]]:
    """First and last index of every run of equal labels."""
    starts = np.concatenate([[0], np.flatnonzero(np.diff(labels)) + 1])
    ends = np.concatenate([starts[1:] - 1, [len(labels) - 1]])
    return [(int(first), int(last)) for first, last in zip(starts, ends, strict=True)]


def _clean_jump(path: Trajectory, signal: Signal, inside: slice, low: float, high: float, side: int) -> float:
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
        taken = np.array([*path.places, *(switch.place for switch in merged)])
        if np.abs(taken - touch.place).min() > 5e-3 * span:
            merged.append(touch)
    return sorted(merged, key=lambda switch: switch.place)


Release = tuple[Quantity, float, float]
"""A quantity that is not to be held between two places."""


def with_switches(
    problem: Problem, found: list[Switch], path: Trajectory, linear: list[Quantity], loose: Sequence[Release] = ()
) -> Problem | None:
    """The problem with its switches as free places, each between its neighbours, and with its bang arcs held.

    `linear` are the controls that act linearly; they are calm where they are free, which may be all along.  `loose` is
    not held again.

    A switch on both sides of which the same controls are held on the same limits is none; None where neither a switch
    is left nor a control to be calmed.
    """
    own = _own_places(problem, path)
    kept = _without_collapsed(found, COLLAPSED * float(np.ptp(path.places)))
    while True:
        spots: list[Spot] = sorted([*own, *((switch.place, switch) for switch in kept)], key=lambda spot: spot[0])
        held, implied = _held(path, np.array([place for place, _ in spots]), loose)
        simpler = _without_contradiction(kept, spots, held)
        if simpler is None:
            simpler = _without_needless(kept, spots, held)
        if simpler is None:
            break
        kept = simpler
    calm = _calm(linear, len(spots) - 1, held, path.program.compiled)
    if not kept and not (calm and _free_all_along(path, linear)):
        return None
    places: list[Place] = []
    parameters: list[Parameter] = []
    touches = []
    for index, (at, place) in enumerate(spots):
        if isinstance(place, Switch):
            name = f"{SWITCH} {len(parameters) + 1}"
            if place.touching is not None:
                touches.append(Touch(name, *place.touching[0], place.touching[1]))
            low, high = spots[index - 1][0], spots[index + 1][0]
            parameters.append(Parameter(name, at - 0.45 * (at - low), at + 0.45 * (high - at), at))
            places.append(Place(Name(name), name))
        else:
            places.append(place)
    parameters = [*problem.parameters, *parameters]
    return replace(problem, places=tuple(places), parameters=tuple(parameters), held=held, implied=implied, calm=calm,
                   touches=tuple(touches))  # fmt: skip


def _free_all_along(path: Trajectory, linear: list[Quantity]) -> bool:
    """Whether the controls hardly ever rest on a limit."""
    return all(np.mean(s.labels == 0) > FREE for s in signals(path) if s.quantity in linear)


def _without_collapsed(found: list[Switch], width: float) -> list[Switch]:
    """Two switches with next to nothing between them as one."""
    kept: list[Switch] = []
    for switch in found:
        if kept and switch.place - kept[-1].place < width:
            low, high = kept[-1].place, switch.place
            kept[-1] = Switch((low + high) / 2, low, high, kept[-1].touching or switch.touching)
        else:
            kept.append(switch)
    return kept


def _without_contradiction(kept: list[Switch], spots: list[Spot], held: tuple[Held, ...]) -> list[Switch] | None:
    """Fewer switches where a stretch holds an unknown and a derivative of it, whose ends are one switch seen twice."""
    for stretch in range(len(spots) - 1):
        orders: dict[str, int] = {}
        for h in held:
            if h.stretch == stretch:
                orders[h.name] = orders.get(h.name, 0) + 1
        if max(orders.values(), default=0) < 2:
            continue
        ends = [spots[stretch], spots[stretch + 1]]
        inner = [at for at, place in ends if isinstance(place, Switch)]
        rest = [switch for switch in kept if switch.place not in inner]
        if len(inner) == 2:
            low, high = inner
            rest = sorted([*rest, Switch((low + high) / 2, low, high)], key=lambda switch: switch.place)
        return rest
    return None


def _without_needless(kept: list[Switch], spots: list[Spot], held: tuple[Held, ...]) -> list[Switch] | None:
    """Fewer switches where one has the same on both sides."""
    for index, (at, place) in enumerate(spots):
        same = on_limits(held, index - 1) == on_limits(held, index)
        if isinstance(place, Switch) and place.touching is None and same:
            return [switch for switch in kept if switch.place != at]
    return None


SWITCH = "switch"


Spot = tuple[float, Place | Switch]
"""A value of the independent variable, and what is there."""


def _own_places(problem: Problem, path: Trajectory) -> list[Spot]:
    """The places of the problem itself with their values on a path that may have switches besides."""
    own = path.program.compiled.lowered.problem.places
    values = [float(v) for v, place in zip(path.places, own, strict=True) if not place.label.startswith(SWITCH + " ")]
    return list(zip(values, problem.places, strict=True))


def present_switches(path: Trajectory) -> list[Switch]:
    """The switches that are places of a path already, with what is held otherwise on both sides or jumps there."""
    problem, where = path.program.compiled.lowered.problem, path.program.layout
    labelled = [(signal.quantity[0], signal.labels) for signal in signals(path) if not signal.state]
    touches = {touch.place: ((touch.name, touch.order), touch.side) for touch in problem.touches}
    found = []
    for index, place in enumerate(problem.places):
        if not place.label.startswith(SWITCH + " "):
            continue
        at, touching = float(path.places[index]), touches.get(place.label)
        changed = on_limits(problem.held, index - 1) ^ on_limits(problem.held, index)
        names = {name for name, _, _ in changed} | ({touching[0][0]} if touching else set())
        after = where.first[where.at_place[index]]
        names |= {name for name, labels in labelled if labels[after - 1] * labels[after] == -1}
        found.append(Switch(at, at, at, touching, frozenset(names)))
    return found


def at_the_edge(path: Trajectory) -> bool:
    """Whether any switch has run into a neighbour's room."""
    return bool(shrinking(path))


def shrinking(path: Trajectory) -> list[tuple[float, float]]:
    """The stretches towards whose other end a switch has run, as far as it could: from that switch to that end."""
    problem = path.program.compiled.lowered.problem
    values = {p.name: (p, float(v)) for p, v in zip(problem.parameters, path.parameters, strict=True)}
    found = []
    for index, place in enumerate(problem.places):
        if not place.label.startswith(SWITCH + " "):
            continue
        parameter, at = values[place.label]
        near = EDGE * (parameter.upper - parameter.lower)
        if parameter.upper - at < near:
            found.append((at, float(path.places[index + 1])))
        elif at - parameter.lower < near:
            found.append((at, float(path.places[index - 1])))
    return found


def on_limits(held: tuple[Held, ...], stretch: int) -> set[tuple[str, int, int]]:
    """What is held along a stretch, and on which side."""
    return {(h.name, h.order, h.side) for h in held if h.stretch == stretch}


def _held(path: Trajectory, places: Array, loose: Sequence[Release]) -> tuple[tuple[Held, ...], tuple[Held, ...]]:
    """What stays on a limit along which stretch, and what rests there besides because of that.

    Never more is held than there are controls, controls before states; states beyond that follow from the dynamics.
    """
    room = len(path.program.compiled.lowered.controls)
    found: list[Held] = []
    implied: list[Held] = []
    for stretch, (start, end) in enumerate(pairwise(places)):
        margin = 0.15 * (end - start)
        inside = (path.points > start + margin) & (path.points < end - margin)
        here = [
            Held(stretch, *signal.quantity, side)
            for signal in signals(path)
            for side in (-1, 1)
            if inside.any()
            and np.mean(signal.labels[inside] == side) > 0.8
            and not any(signal.quantity == q and low < (start + end) / 2 < high for q, low, high in loose)
        ]
        most = room if len({held.name for held in here}) > 1 else len(here)
        found += here[:most]
        implied += here[most:]
    return tuple(found), tuple(implied)


def _calm(linear: list[Quantity], stretches: int, held: tuple[Held, ...], compiled: Compiled) -> tuple[Calm, ...]:
    """The linear controls along the stretches where nothing holds them: they run singular there."""
    found = []
    for stretch in range(stretches):
        taken = {q for h in held if h.stretch == stretch for q in determined_by((h.name, h.order), compiled)}
        found += [Calm(stretch, *quantity) for quantity in linear if quantity not in taken]
    return tuple(found)


def determined_by(held: Quantity, compiled: Compiled) -> set[Quantity]:
    """The controls that are no longer free where a quantity is held: itself, or those that first move a held state.

    A state on a limit has all derivatives zero; the first of them in which controls appear determines these
    (Bryson, Denham, Dreyfus, 1963, on the order of a constraint on states; from memory).
    """
    lowered, n = compiled.lowered, compiled.point.states
    if held in lowered.controls:
        return {held}
    reached = {lowered.states.index(held)}
    for _ in range(n):
        columns = {column for row, column in zip(compiled.point.jacobian_rows, compiled.point.jacobian_columns,
                                                 strict=True) if row in reached}  # fmt: skip
        controls = {lowered.controls[c - n] for c in columns if n <= c < n + len(lowered.controls)}
        if controls or columns <= reached:
            return controls
        reached = {column for column in columns if column < n}
    return set()


def softened(path: Trajectory, chosen: list[int], softness: float) -> Problem:
    """The problem with a weight, relative to the value's size, on the squares of controls: it calms singular arcs."""
    compiled = path.program.compiled
    problem = compiled.lowered.problem
    span = float(np.ptp(path.places))
    size = abs(path.program.value_scale) / span * softness
    terms: list[Node] = [] if problem.integrand is None else [problem.integrand]
    sign = -1.0 if path.program.value_scale < 0 else 1.0
    for index in chosen:
        name, order = compiled.lowered.controls[index]
        largest = float(np.abs(path.controls[:, index]).max()) or 1.0
        weight = Number(sign * size / largest**2, "")
        terms.append(Product((weight, Power(Name(name, order), Number(2.0, "2"))), (False, False)))
    integrand = terms[0] if len(terms) == 1 else Sum(tuple(terms), (False,) * len(terms))
    return replace(problem, integrand=integrand)


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
