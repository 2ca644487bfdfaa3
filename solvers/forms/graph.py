"""A result that was found in parametric form, told as functions of the problem's own independent variable."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from solvers.curve import Curve
from solvers.forms.gauge import Gauged, Way
from solvers.forms.regraph import regraph
from solvers.solution import Change, Check, Finding, MeshStep, Price
from solvers.transcription.limits import number

Array = NDArray[np.float64]

MIDDLES = (np.arange(16) + 0.5) / 16
"""Where every interval is looked at."""


STEEPEST = 1e-9
"""Speed along x, relative to its greatest, below which the curve counts as no steeper: there y(x) is vertical."""


def as_graph(
    gauged: Gauged, shape: Curve, multipliers: Curve, factor: float, changes: tuple[Change, ...] = ()
) -> tuple[Curve, Curve, tuple[Change, ...]]:
    """Curve, costates and changes of the curve in the original's terms: as functions of x where that was an unknown.

    `factor` turns costates of the gauged problem into the original's.
    """
    scaled = Curve(multipliers.breaks, {name: tuple(factor * part for part in parts)
                                        for name, parts in multipliers.functions.items()})  # fmt: skip
    if not gauged.graph:
        return shape, scaled, changes
    graph, costates, changed = along_way(gauged.ways[0], shape, scaled, changes)
    breaks = graph.breaks.copy()
    breaks[0], breaks[-1] = _end(gauged, 0, breaks[0]), _end(gauged, -1, breaks[-1])
    altered = tuple(replace(c, curve=None if c.curve is None else replace(c.curve, breaks=breaks)) for c in changed)
    return replace(graph, breaks=breaks), replace(costates, breaks=breaks), altered


def along_way(
    way: Way, shape: Curve, multipliers: Curve, changes: tuple[Change, ...]
) -> tuple[Curve, Curve, tuple[Change, ...]]:
    """The unknowns of a way with their slopes, their costates and their changes, all as functions of x."""
    x = way.x
    functions: dict[str, Callable[[Array], Array]] = {}
    for name in way.unknowns:
        functions[name] = partial(shape.evaluate, name)
        functions[name + "'"] = partial(_slope, shape, x, name)
    kept = [name for name in way.unknowns if name in multipliers.functions]
    wanted = functions | {f"costate {name}": partial(multipliers.evaluate, name) for name in kept}
    for change in changes:
        assert change.curve is not None
        for name in way.unknowns:
            wanted[f"{change.constant} {name}"] = partial(_changed, shape, change.curve, x, name)
    graph = regraph(shape.breaks, partial(shape.evaluate, x), wanted, way.unknowns[0])

    def own(prefix: str, names: Iterable[str]) -> Curve:
        return Curve(graph.breaks, {name: graph.functions[prefix + name] for name in names})

    altered = tuple(replace(change, curve=own(f"{change.constant} ", way.unknowns)) for change in changes)
    return own("", functions), own("costate ", kept), altered


UPRIGHT = ((1e-6, 1e-2), (1e-3, 0.1))
"""A curve stands upright where the slope of x along it, relative to its mean, stays below the first number over a rise,
relative to the extent of the unknown, of more than the second: more than a vertical tangent has (x = y^3: 0.03)."""


def uprights(gauged: Gauged, shape: Curve) -> tuple[Finding, ...]:
    """The pieces along which an unknown changes while x stands still: a function of x jumps there.

    The place of a finding is that in x where the curve is told in x, else that in its parameter.
    """
    edges = shape.breaks
    at = (edges[:-1, None] + np.diff(edges)[:, None] * MIDDLES).ravel()
    step = np.repeat(np.diff(edges), len(MIDDLES)) / len(MIDDLES)
    advance = [shape.evaluate(way.x + "'", at) for way in gauged.ways]
    mean = sum(abs(float(forward @ step)) for forward in advance) / float(step.sum())
    for slope, rise in UPRIGHT:
        found: list[Finding] = []
        for way, forward in zip(gauged.ways, advance, strict=True):
            still = np.concatenate([[False], forward <= slope * mean, [False]])
            first, last = np.flatnonzero(still[1:-1] & ~still[:-2]), np.flatnonzero(still[1:-1] & ~still[2:])
            places = shape.evaluate(way.x, at) if gauged.graph else at
            for name in way.unknowns:
                values = shape.evaluate(name, at)
                least = rise * (float(np.ptp(values)) or 1.0)
                jumps = np.abs(values[last] - values[first]) > least
                found += [Finding(name, "", None, float(place), "jumps") for place in places[first[jumps]]]
        if found:
            return tuple(found)
    return ()


def _end(gauged: Gauged, place: int, found: float) -> float:
    """An end that is given exactly as it was given; one that is free where it was found."""
    constants = {c.name: c.value for c in gauged.original.constants}
    try:
        return number(gauged.original.places[place].tree, constants)
    except KeyError:
        return found


def _slope(shape: Curve, x: str, name: str, at: Array) -> Array:
    return shape.evaluate(name + "'", at) / np.maximum(shape.evaluate(x + "'", at), 1e-300)


def _changed(shape: Curve, change: Curve, x: str, name: str, at: Array) -> Array:
    """The change at a fixed x: what moves along the curve is no change of it."""
    speed = shape.evaluate(x + "'", at)
    slope = shape.evaluate(name + "'", at) / np.maximum(speed, STEEPEST * max(float(speed.max()), 1e-300))
    return np.asarray(change.evaluate(name, at) - slope * change.evaluate(x, at))


def checks_on_graph(gauged: Gauged, shape: Curve, checks: tuple[Check, ...]) -> tuple[Check, ...]:
    """The checks with their places on the problem's own independent variable."""
    x = gauged.original.independent
    return tuple(
        check if check.place is None else replace(check, place=float(shape.evaluate(x, np.array([check.place]))[0]))
        for check in checks
    )


def steps_of_original(gauged: Gauged, steps: Sequence[MeshStep]) -> tuple[MeshStep, ...]:
    """The meshes with the original's values."""
    return tuple(step if step.value is None else replace(step, value=gauged.value(step.value)) for step in steps)


def prices_of_original(prices: tuple[Price, ...], factor: float) -> tuple[Price, ...]:
    """The prices of the conditions that the user gave, per unit of the original value."""
    return tuple(replace(price, price=factor * price.price) for price in prices if price.pointer)
