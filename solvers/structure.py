"""Switches: where a limit begins or ceases to bind, found on a solved mesh and made unknown places of the problem.

A control that jumps from one bound to the other, a singular arc, a state that comes to lie on its limit: at the place
where it happens the curve has a corner, and no polynomial across it converges.  With the place itself as an unknown
(a junction of the mesh) all pieces are smooth again and few intervals of high degree suffice.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from solvers.formula.nodes import Name, Node, Number, Power, Product, Sum
from solvers.limits import quantity_bounds
from solvers.problem import Held, Parameter, Place, Problem
from solvers.trajectory import Trajectory

Array = NDArray[np.float64]

MOST_SWITCHES = 16
ON_LIMIT = 1e-3
"""How near to a limit, relative to the room it leaves, a quantity counts as on it."""


@dataclass(frozen=True, slots=True)
class Switch:
    """A switch at `place`, which lies between `low` and `high` for certain."""

    place: float
    low: float
    high: float


def switches(path: Trajectory, chosen: list[int]) -> list[Switch] | None:
    """The switches of the chosen controls on a solved mesh, in order; None where there are none, or too many."""
    _, _, lower, upper = quantity_bounds(path.program.compiled)
    found: list[Switch] = []
    for index in chosen:
        values = path.controls[:, index]
        labels = _labels(values, float(lower[index]), float(upper[index]))
        if len(set(labels.tolist())) > 1:
            found += _changes(path, values, labels, float(lower[index]), float(upper[index]))
    merged = _merged(sorted(found, key=lambda switch: switch.place), path)
    return merged if 0 < len(merged) <= MOST_SWITCHES else None


def _labels(values: Array, lower: float, upper: float) -> Array:
    """-1 on the lower limit, 1 on the upper one, 0 between them."""
    room = upper - lower if np.isfinite(upper - lower) else max(float(np.ptp(values)), 1e-300)
    labels = np.zeros(len(values), dtype=int)
    labels[values - lower < ON_LIMIT * room] = -1
    labels[upper - values < ON_LIMIT * room] = 1
    return labels


def _changes(path: Trajectory, values: Array, labels: Array, lower: float, upper: float) -> list[Switch]:
    """Places where the label changes; a short passage between two limits is one switch."""
    points, places = path.points, path.places
    where = path.program.layout
    owner = np.repeat(np.arange(len(where.first) - 1), np.diff(where.first))
    runs: list[list[int]] = []  # first and last point of each run of equal labels
    for k, label in enumerate(labels):
        if runs and labels[runs[-1][0]] == label:
            runs[-1][1] = k
        else:
            runs.append([k, k])
    kept: list[list[int]] = []
    for run in runs:
        first, last = run
        passing = labels[first] == 0 and owner[last] - owner[first] <= 1 and first > 0 and last < len(labels) - 1
        if passing and labels[first - 1] != labels[last + 1]:
            continue
        kept.append(run)
    found = []
    for before, after in pairwise(kept):
        left, right = before[1], after[0]
        if labels[before[0]] == labels[after[0]]:
            continue
        low, high = float(points[left]), float(points[right])
        place = (low + high) / 2
        if labels[left] * labels[right] == -1:  # from one limit to the other: where a clean jump has the same integral
            start, end = owner[left], owner[right]
            inside = slice(where.first[start], where.first[end + 1])
            a, b = path.breaks[start], path.breaks[end + 1]
            stretch = (
                np.ptp(places) if len(places) < 2 else places[where.stretch[left] + 1] - places[where.stretch[left]]
            )
            total = float(where.measures[inside] * stretch @ values[inside])
            first_value, second_value = (lower, upper) if labels[left] < 0 else (upper, lower)
            place = float((total - second_value * b + first_value * a) / (first_value - second_value))
            low, high = min(low, a), max(high, b)
            place = min(max(place, low), high)
        found.append(Switch(place, low, high))
    return found


def _merged(found: list[Switch], path: Trajectory) -> list[Switch]:
    """Switches of several quantities at one place as one; those at a place that is there already as none."""
    span = float(np.ptp(path.places))
    widths = np.diff(path.breaks)
    groups: list[list[Switch]] = []
    for switch in found:
        if np.abs(path.places - switch.place).min() < 1e-3 * span:
            continue
        width = float(widths[np.clip(np.searchsorted(path.breaks, switch.place) - 1, 0, len(widths) - 1)])
        if groups and switch.place - groups[-1][-1].place < min(width, 0.05 * span):
            groups[-1].append(switch)
        else:
            groups.append([switch])
    return [
        Switch(float(np.mean([s.place for s in group])), min(s.low for s in group), max(s.high for s in group))
        for group in groups
    ]


def with_switches(problem: Problem, found: list[Switch], path: Trajectory, chosen: list[int]) -> Problem | None:
    """The problem with its switches as free places, each between its neighbours, and with its bang arcs held.

    A switch on both sides of which the same controls are held on the same limits is none; None where none is left.
    """
    own = _own_places(problem, path)
    kept = list(found)
    while True:
        spots: list[tuple[float, Place | None]] = [*own, *((switch.place, None) for switch in kept)]
        spots.sort(key=lambda spot: spot[0])
        held = _held(path, np.array([place for place, _ in spots]), chosen)
        needless = [
            index for index, (_, place) in enumerate(spots)
            if place is None and _on(held, index - 1) == _on(held, index)
        ]  # fmt: skip
        if not needless:
            break
        kept = [switch for switch in kept if switch.place != spots[needless[0]][0]]
    if not kept:
        return None
    places: list[Place] = []
    parameters: list[Parameter] = []
    for index, (at, place) in enumerate(spots):
        if place is None:
            name = f"{SWITCH} {len(parameters) + 1}"
            low, high = spots[index - 1][0], spots[index + 1][0]
            parameters.append(Parameter(name, at - 0.45 * (at - low), at + 0.45 * (high - at), at))
            place = Place(Name(name), name)
        places.append(place)
    return replace(problem, places=tuple(places), parameters=(*problem.parameters, *parameters), held=held)


SWITCH = "switch"


def _own_places(problem: Problem, path: Trajectory) -> list[tuple[float, Place | None]]:
    """The places of the problem itself with their values on a path that may have switches besides."""
    own = path.program.compiled.lowered.problem.places
    values = [float(v) for v, place in zip(path.places, own, strict=True) if not place.label.startswith(SWITCH + " ")]
    return list(zip(values, problem.places, strict=True))


def present_switches(path: Trajectory) -> list[Switch]:
    """The switches that are places of a path already."""
    own = path.program.compiled.lowered.problem.places
    return [Switch(float(v), float(v), float(v)) for v, place in zip(path.places, own, strict=True)
            if place.label.startswith(SWITCH + " ")]  # fmt: skip


def _on(held: tuple[Held, ...], stretch: int) -> set[tuple[str, int, int]]:
    return {(h.name, h.order, h.side) for h in held if h.stretch == stretch}


def _held(path: Trajectory, places: Array, chosen: list[int]) -> tuple[Held, ...]:
    """Which linear controls stay on a limit along which stretch."""
    compiled = path.program.compiled
    _, _, lower, upper = quantity_bounds(compiled)
    found = []
    for index in chosen:
        labels = _labels(path.controls[:, index], float(lower[index]), float(upper[index]))
        for stretch, (start, end) in enumerate(pairwise(places)):
            margin = 0.15 * (end - start)
            inside = labels[(path.points > start + margin) & (path.points < end - margin)]
            for side in (-1, 1):
                if len(inside) and np.mean(inside == side) > 0.8:
                    found.append(Held(stretch, *compiled.lowered.controls[index], side))
    return tuple(found)


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
