"""Switches: where a limit begins or ceases to bind, found on a solved mesh and made unknown places of the problem.

A control that jumps from one bound to the other, a singular arc, a state that comes to lie on its limit: at the place
where it happens the curve has a corner, and no polynomial across it converges.  With the place itself as an unknown
(a junction of the mesh) all pieces are smooth again and few intervals of high degree suffice.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.formula.nodes import Name, Node, Number, Power, Product, Sum
from solvers.problem import Calm, Held, Parameter, Place, Problem, Touch
from solvers.search.contacts import well_begun
from solvers.search.entries import smooth_entries
from solvers.search.resting import can_rest
from solvers.search.signals import SWITCH, Signal, Switch, limited, signals, switches
from solvers.transcription.functions import Compiled
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory, sizes_of

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

EDGE = 1e-4
"""How near to the end of its room, relative to the room, a switch counts as at its edge."""
SMOOTH = 1e-2
"""Jump of a control, relative to its size, up to which it goes on smoothly."""
COLLAPSED = 3e-3
"""Width, relative to the whole, of a stretch that is about to vanish."""
TOUCHING = 3e-4
"""The same where one of its ends is a touch."""
RESTING = 1e-6
"""How near to its limit, relative to its range, a state lies there all along, where a control is held besides."""
HIDDEN = 0.3
"""Share of the points of a stretch that a control spends on limits where it hides arcs."""
FREE = 0.9
"""Share of the points off all limits at which a control counts as free all along."""

Release = tuple[Quantity, float, float]
"""A quantity that is not to be held between two places."""


def without_switches(problem: Problem) -> Problem:
    """A problem as it was before its switches became places."""
    places = tuple(place for place in problem.places if not place.label.startswith(SWITCH + " "))
    parameters = tuple(p for p in problem.parameters if not p.name.startswith(SWITCH + " "))
    endpoints = tuple(c for c in problem.endpoints if not c.label.startswith(SWITCH + ":"))
    return replace(problem, places=places, parameters=parameters, endpoints=endpoints, held=(), implied=(), calm=(),
                   touches=())  # fmt: skip


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
    found = [switch for switch in found if own[0][0] < switch.place < own[-1][0]]  # a free end may have come to one
    kept = _without_collapsed(found, float(np.ptp(path.places)))
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
            if place.touching is not None and (*place.touching[0], place.touching[1]) not in _beside(held, index):
                touches.append(Touch(name, *place.touching[0], place.touching[1]))
            low, high = spots[index - 1][0], spots[index + 1][0]
            parameters.append(Parameter(name, at - 0.45 * (at - low), at + 0.45 * (high - at), at))
            places.append(Place(Name(name), name))
        else:
            places.append(place)
    parameters = [*problem.parameters, *parameters]
    entries = smooth_entries(path, places, [at for at, _ in spots], held)
    return replace(problem, places=tuple(places), parameters=tuple(parameters), held=held, implied=implied, calm=calm,
                   touches=tuple(touches), endpoints=(*problem.endpoints, *entries))  # fmt: skip


def _free_all_along(path: Trajectory, linear: list[Quantity]) -> bool:
    """Whether the controls hardly ever rest on a limit."""
    return all(np.mean(s.labels == 0) > FREE for s in signals(path) if s.quantity in linear)


def _without_collapsed(found: list[Switch], span: float) -> list[Switch]:
    """Two switches with next to nothing between them as one."""
    kept: list[Switch] = []
    for switch in found:
        last = kept[-1] if kept else None
        if last is None or switch.place - last.place >= nearest(last, switch) * span:
            kept.append(switch)
        else:
            low, high = last.place, switch.place
            kept[-1] = Switch((low + high) / 2, low, high, last.touching or switch.touching)
    return kept


def nearest(one: Switch, other: Switch) -> float:
    """How near to each other, relative to the whole, two switches may be.

    A state may touch its limit soon after a control has switched: that is no arc which vanishes.
    """
    return COLLAPSED if (one.touching is None) == (other.touching is None) else TOUCHING


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
    """Fewer switches where one has the same on both sides, unless a state touches its limit there and leaves it."""
    for index, (at, place) in enumerate(spots):
        before, after = on_limits(held, index - 1), on_limits(held, index)
        if not isinstance(place, Switch) or before != after:
            continue
        if place.touching is None or (*place.touching[0], place.touching[1]) in after:
            return [switch for switch in kept if switch.place != at]
    return None


Spot = tuple[float, Place | Switch]
"""A value of the independent variable, and what is there."""


def _own_places(problem: Problem, path: Trajectory) -> list[Spot]:
    """The places of the problem itself with their values on a path that may have switches besides."""
    own = path.program.compiled.lowered.problem.places
    values = [float(v) for v, place in zip(path.places, own, strict=True) if not place.label.startswith(SWITCH + " ")]
    return list(zip(values, problem.places, strict=True))


def first_places(problem: Problem, path: Trajectory) -> list[float]:
    """Where the places of a problem lie at first that has switches read off a path besides its own places."""
    known = {
        place.label: at for place, at in zip(path.program.compiled.lowered.problem.places, path.places, strict=True)
    }
    known |= {parameter.name: parameter.guess or 0.0 for parameter in problem.parameters
              if parameter.name.startswith(SWITCH + " ")}  # fmt: skip
    return [float(known[place.label]) for place in problem.places]


def shown_by(path: Trajectory, linear: list[Quantity]) -> list[Switch]:
    """The switches that a path shows, those that are places of it already among them, from first to last."""
    return sorted([*switches(path, linear), *present_switches(path)], key=lambda switch: switch.place)


def present_switches(path: Trajectory) -> list[Switch]:
    """The switches that are places of a path already, with what is held otherwise on both sides or jumps there."""
    problem, where = path.program.compiled.lowered.problem, path.program.layout
    if not any(place.label.startswith(SWITCH + " ") for place in problem.places):
        return []
    labelled = [(signal.quantity[0], signal.labels) for signal in signals(path) if not signal.state]
    touches = {touch.place: ((touch.name, touch.order), touch.side) for touch in problem.touches}
    found = []
    for index, place in enumerate(problem.places):
        if not place.label.startswith(SWITCH + " "):
            continue
        at, touching = float(path.places[index]), touches.get(place.label)
        if touching is not None and all(_rests_along(path, touching, stretch) for stretch in (index - 1, index)):
            continue  # within an arc that was seen as touches at its ends
        changed = on_limits(problem.held, index - 1) ^ on_limits(problem.held, index)
        names = {name for name, _, _ in changed} | ({touching[0][0]} if touching else set())
        after = where.first[where.at_place[index]]
        names |= {name for name, labels in labelled if labels[after - 1] * labels[after] == -1}
        found.append(Switch(at, at, at, touching, frozenset(names)))
    return found


def smooth_contacts(path: Trajectory) -> list[int]:
    """The places, by their rank among the parameters, at which an arc along a constraint meets one beside it smoothly.

    No control jumps there: moving such a place alone changes neither curve nor value to second order.
    """
    compiled, where = path.program.compiled, path.program.layout
    problem = compiled.lowered.problem
    names = [parameter.name for parameter in problem.parameters]
    labels = {condition.label for condition in compiled.pointwise}
    before, after = path.control_modes.sum(axis=1), path.control_modes.copy()
    after[:, 1::2] *= -1.0
    jumps = np.abs(after.sum(axis=1)[1:] - before[:-1]) / sizes_of(path)[1]
    return [
        names.index(place.label)
        for index, place in enumerate(problem.places)
        if place.label.startswith(SWITCH + " ")
        and {name for name, _, _ in on_limits(problem.held, index - 1) ^ on_limits(problem.held, index)} & labels
        and jumps[where.at_place[index] - 1].max(initial=0.0) <= SMOOTH
    ]


def hides_arcs(path: Trajectory) -> bool:
    """Whether a control rests on its limits along a good part of a stretch on which it is calmed: what switches there
    is blurred, and costs little, but no singular arc."""
    calm = path.program.compiled.lowered.problem.calm
    stretch = path.program.layout.stretch
    return any(
        np.mean(signal.labels[stretch == c.stretch] != 0) > HIDDEN
        for signal in (signals(path) if calm else ())
        for c in calm
        if signal.quantity == (c.name, c.order)
    )


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


def _beside(held: tuple[Held, ...], place: int) -> set[tuple[str, int, int]]:
    """What is held on either side of a place: to touch that limit there besides would be one condition too many."""
    return on_limits(held, place - 1) | on_limits(held, place)


def _held(path: Trajectory, places: Array, loose: Sequence[Release]) -> tuple[tuple[Held, ...], tuple[Held, ...]]:
    """What stays on a limit along which stretch, and what rests there besides because of that.

    Never more is held than there are controls, these and constraints on them before states; what rests on a limit
    beyond that follows from the dynamics.  Where several controls on their limits keep a state on its own, as a store
    is idle while it is full, it is one of them that follows: the push of the state's limit may change all along.
    """
    room = len(path.program.compiled.lowered.controls)
    on_limit = limited(path)
    found: list[Held] = []
    implied: list[Held] = []
    for stretch, (start, end) in enumerate(pairwise(places)):
        margin = 0.15 * (end - start)
        inside = (path.points > start + margin) & (path.points < end - margin)
        here = [
            Held(stretch, *signal.quantity, side)
            for signal in on_limit
            for side in (-1, 1)
            if inside.any()
            and np.mean(signal.labels[inside] == side) > 0.8
            and (isinstance(signal, Signal) or well_begun(path, signal, start, end))
            and not (isinstance(signal, Signal) and signal.state and not can_rest(path, signal.quantity, inside))
            and not any(signal.quantity == q and low < (start + end) / 2 < high for q, low, high in loose)
        ]
        most = room if len({held.name for held in here}) > 1 else len(here)
        here = _idle_last(here, most, path.program.compiled)
        found += here[:most]
        implied += [one for one in here[most:] if _rests(path, one, inside)]
    return tuple(found), tuple(implied)


def _idle_last(here: list[Held], most: int, compiled: Compiled) -> list[Held]:
    """What is on its limit, with a state that is one too many before the last of the controls that keep it there."""
    lowered = compiled.lowered
    if len(here) <= most or (here[most].name, here[most].order) not in lowered.states:
        return here
    order, moved = compiled.reached_by(lowered.states.index((here[most].name, here[most].order)))
    keeping = [one for one in here[:most] if (one.name, one.order) in moved]
    if order or len(moved) < 2 or len(keeping) < len(moved):
        return here
    return [*(one for one in here if one is not keeping[-1]), keeping[-1]]


def _rests_along(path: Trajectory, touching: tuple[Quantity, int], stretch: int) -> bool:
    """Whether a state that touches its limit lies there along a whole stretch."""
    inside = path.program.layout.stretch == stretch
    return bool(inside.any()) and _rests(path, Held(stretch, *touching[0], touching[1]), inside)


def _rests(path: Trajectory, held: Held, inside: NDArray[np.bool_]) -> bool:
    """Whether a state lies on its limit, and is not only near it for a while."""
    signal = next((s for s in signals(path) if s.quantity == (held.name, held.order)), None)
    if signal is None:
        return True
    limit, size = (signal.lower if held.side < 0 else signal.upper), max(float(np.ptp(signal.values)), 1e-300)
    return bool(np.abs(signal.values[inside] - limit).max() <= RESTING * size)


def _calm(linear: list[Quantity], stretches: int, held: tuple[Held, ...], compiled: Compiled) -> tuple[Calm, ...]:
    """The linear controls along the stretches where nothing holds them: they run singular there."""
    found = []
    for stretch in range(stretches):
        taken = {q for h in held if h.stretch == stretch for q in determined_by(h, compiled)}
        found += [Calm(stretch, *quantity) for quantity in linear if quantity not in taken]
    return tuple(found)


def determined_by(held: Held, compiled: Compiled) -> set[Quantity]:
    """The controls that are no longer free where something is held: itself, or those that first move it.

    What stays on a limit has all derivatives zero; the first of them in which controls appear determines these.
    """
    lowered, quantity, rank = compiled.lowered, (held.name, held.order), compiled.rank_of(held)
    if quantity in lowered.controls:
        return {quantity}
    return compiled.reached_by(lowered.states.index(quantity) if rank is None else compiled.point.states + rank)[1]


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
