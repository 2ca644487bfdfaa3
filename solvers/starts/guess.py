"""The first guess: straight lines through what is known, bent where that satisfies more of the problem.

A line, or a polynomial where slopes are known too, is all that the endpoint conditions say.  Where it is undefined (an
integrand that is infinite on it) or breaks a constraint or an integral condition (a hose longer than the distance), a
bend of low order is added to the unknowns, with the sign and the size that violate least.  Parameters of unknown size
get the power of ten at which the dynamics fit the lines best.  What the user gives as a guess is kept as it is.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from solvers.problem import Parameter, Problem, Seek
from solvers.starts.sketch import Bend, Sketch
from solvers.transcription.evaluation import end_inputs, mapped, point_inputs, point_outputs
from solvers.transcription.functions import Compiled
from solvers.transcription.layout import Layout
from solvers.transcription.limits import constants_of, interval_of, number
from solvers.transcription.mesh import Mesh
from solvers.transcription.natural import natural_sizes

Array = NDArray[np.float64]

BENDS = (*(Bend(size) for size in (0.1, -0.1, 0.3, -0.3, 1.0, -1.0)), Bend(0.3, 2), Bend(1.0, 2))
"""Bends that are tried."""
NEAR = (-1.0, *(sign * 10.0 ** (k / 8) for k in (-2, -1, 1, 2) for sign in (1, -1)))
"""Sizes that are tried beside that of the best of these, as factors."""

SATISFIED, NEARLY = 1e-3, 0.1
"""Violations as small as the first need no bend, nor do those as small as the second where a guess is given."""
ALIKE = 1.1
"""Violations that count as equal: within this factor."""

POWERS = range(-8, 9)
"""Powers of ten that are tried for parameters of unknown size."""


@dataclass(frozen=True, slots=True)
class Guess:
    """Values (SI) of all variables of a layout, how much of the problem they violate (0: nothing), and their value."""

    z: Array
    violation: float
    value: float
    bend: Bend


def first_guess(compiled: Compiled, mesh: Mesh, where: Layout) -> Guess:
    """The best guess on a mesh."""
    return next(guesses(compiled, mesh, where))


def guesses(compiled: Compiled, mesh: Mesh, where: Layout) -> Iterator[Guess]:
    """Guesses on a mesh, best first; bends are drawn where they are asked for."""
    problem = compiled.lowered.problem
    parameters = np.array([first_value(p) for p in problem.parameters])
    places = _places(problem, constants_of(compiled), parameters, where)
    for index, place in zip(where.places, places, strict=True):
        parameters[where.parameters == index] = place
    _size_parameters(compiled, mesh, where, places, parameters)
    _vary_parameters(problem, places, parameters, where)
    sketch = Sketch(compiled, mesh, where, places, parameters)
    (plain,) = _judged(compiled, where, sketch, [Bend()])
    drawn = all(unknown.guess is not None for unknown in problem.unknowns)
    varied = bool(problem.start.modes)  # a bend would undo what was asked for
    if varied or plain.violation <= (NEARLY if drawn else SATISFIED):
        yield plain
        if plain.violation <= SATISFIED:
            return
    sizes = natural_sizes(compiled, mesh, where, plain.z)
    bent = _judged(compiled, where, sketch, BENDS, sizes)
    near = [replace(bend, size=factor * bend.size) for bend in _best_of_each(bent) for factor in NEAR]
    found = sorted([plain, *bent, *_judged(compiled, where, sketch, near, sizes)], key=_rank)
    yield from _with_best_value_first(found, problem.seek)


def _best_of_each(bent: Sequence[Guess]) -> list[Bend]:
    """The bend that violates least for each number of half waves."""
    counts = sorted({guess.bend.waves for guess in bent})
    return [min((guess for guess in bent if guess.bend.waves == count), key=_rank).bend for count in counts]


def _rank(guess: Guess) -> float:
    """What a guess violates; a bend must be clearly better than none, and two half waves than one."""
    return guess.violation * (ALIKE * guess.bend.waves if guess.bend.size else 1.0)


def _with_best_value_first(found: list[Guess], seek: Seek) -> list[Guess]:
    """Where a bend is best, the one with the best value of those that violate hardly more comes first: chains sag."""
    if seek is Seek.STATIONARY or not found[0].bend.size:
        return found
    sign = -1.0 if seek is Seek.MAXIMUM else 1.0
    most = ALIKE * _rank(found[0]) + SATISFIED
    alike = [g for g in found if g.bend.size and _rank(g) <= most and np.isfinite(g.value)]
    best = min(alike, key=lambda guess: sign * guess.value, default=found[0])
    return [best, *(guess for guess in found if guess is not best)]


def _judged(
    compiled: Compiled,
    where: Layout,
    sketch: Sketch,
    bends: Sequence[Bend],
    sizes: Mapping[str, float] = MappingProxyType({}),
) -> list[Guess]:
    """Guesses with their integrals, what they violate and their values; all are evaluated at once."""
    point, constants = compiled.point, constants_of(compiled)
    first = point.states + point.constraints
    curves = np.stack([sketch.bent(bend, sizes) for bend in bends])
    outputs = mapped(point.value, *point_inputs(compiled, where, curves)).reshape(len(curves), -1, point.outputs)
    totals = where.measures @ outputs[:, :, first : first + point.integrals]
    curves[:, where.integrals] = np.where(np.isfinite(totals), totals, 0.0)
    ends = mapped(compiled.end.value, end_inputs(where, curves), np.tile(compiled.constants, (len(curves), 1)))
    limits = [interval_of(condition, constants) for condition in (*compiled.pointwise, *compiled.conditions)]
    violated = np.array([_excess(values, *limit) for values, limit in zip(
        (*np.moveaxis(outputs[:, :, point.states : first], 2, 0), *ends.T[:-1, :, None]), limits, strict=True)
    ]).reshape(-1, len(curves))  # fmt: skip
    undefined = np.mean(~np.isfinite(outputs), axis=(1, 2)) + np.mean(~np.isfinite(ends), axis=1)
    violations = 1e3 * undefined + violated.sum(axis=0)
    values = outputs[:, :, -1] @ where.measures + ends[:, -1]
    return [
        Guess(z, float(violation), float(value), bend)
        for z, violation, value, bend in zip(curves, violations, values, bends, strict=True)
    ]


def _excess(values: Array, lower: float, upper: float) -> Array:
    """The mean excess of rows of values beyond limits, relative to the sizes of both; undefined ones do not count.

    Beyond limits of zero the size is that of all rows: else what is rounding and what is all wrong would count alike.
    """
    defined = np.isfinite(values)
    known = np.where(defined, values, np.clip(0.0, lower, upper))
    excess = np.maximum(np.maximum(lower - known, known - upper), 0.0).sum(axis=1) / np.maximum(defined.sum(axis=1), 1)
    size = max((abs(limit) for limit in (lower, upper) if np.isfinite(limit)), default=0.0)
    largest = np.abs(np.where(defined, values, 0.0)).max(axis=1)
    sizes = np.maximum(largest, size) if size else np.full(len(values), largest.max())
    return np.asarray(excess / np.where(sizes > 0, sizes, 1.0))


WIDE = 20.0
"""Bounds so far apart, as a factor, have their middle in orders of magnitude."""


def first_value(parameter: Parameter) -> float:
    """A value inside the bounds, or the user's."""
    lower, upper = parameter.lower, parameter.upper
    if parameter.guess is not None:
        return parameter.guess
    if np.isfinite(lower) and np.isfinite(upper):
        if lower > 0 and upper > WIDE * lower:
            return float(np.sqrt(lower * upper))
        if upper < 0 and lower < WIDE * upper:
            return -float(np.sqrt(lower * upper))
        return (lower + upper) / 2
    if np.isfinite(lower):
        return lower + max(1.0, abs(lower))
    if np.isfinite(upper):
        return upper - max(1.0, abs(upper))
    return 1.0


def _places(problem: Problem, constants: dict[str, float], parameters: Array, where: Layout) -> Array:
    """Values of the places; free ones without a guess are spread between their neighbours."""
    values = np.full(len(problem.places), np.nan)
    for index, place in enumerate(problem.places):
        hit = np.flatnonzero(where.parameters == where.places[index])
        if len(hit) == 0:
            values[index] = number(place.tree, constants)
        elif index in (0, len(values) - 1) or problem.parameters[hit[0]].guess is not None:
            values[index] = parameters[hit[0]]
    if values[-1] <= values[0]:
        values[-1] = values[0] + max(1.0, abs(values[0]))
    known = np.flatnonzero(np.isfinite(values))
    return np.asarray(np.interp(np.arange(len(values)), known, values[known]))


def _size_parameters(compiled: Compiled, mesh: Mesh, where: Layout, places: Array, parameters: Array) -> None:
    """Give parameters that are open on a side and without a guess the size at which the dynamics fit the lines best."""
    problem = compiled.lowered.problem
    open_ended = np.array([
        p.guess is None and not np.isfinite(p.upper - p.lower) and index not in where.places
        and (p.lower == 0 or not np.isfinite(p.lower)) and (p.upper == 0 or not np.isfinite(p.upper))
        for p, index in zip(problem.parameters, where.parameters, strict=True)
    ], dtype=bool)  # fmt: skip
    if not open_ended.any() or not problem.dynamics:
        return
    base = parameters.copy()
    misfits = []
    sketch: Sketch | None = None
    guessed = any(unknown.guess is not None for unknown in problem.unknowns)  # else parameters do not move the lines
    for power in POWERS:
        parameters[open_ended] = base[open_ended] * 10.0**power
        if sketch is None or guessed:
            sketch = Sketch(compiled, mesh, where, places, parameters)
        z = sketch.bent(Bend())
        z[where.parameters] = parameters
        misfits.append(_misfit(compiled, where, z))
    least = min(misfits)
    # The size nearest to one among those that fit as well as the best.
    good = [power for power, misfit in zip(POWERS, misfits, strict=True) if misfit <= 1.1 * least]
    parameters[open_ended] = base[open_ended] * 10.0 ** min(good, key=abs)


def _vary_parameters(problem: Problem, places: Array, parameters: Array, where: Layout) -> None:
    """Move parameters through their ranges, or within a factor of four where these are open; places go with theirs."""
    for k, parameter in enumerate(problem.parameters):
        share = problem.start.parameters.get(parameter.name)
        if share is None:
            continue
        lower, upper = parameter.lower, parameter.upper
        if not np.isfinite(upper - lower):
            moved = parameters[k] * 4.0 ** (2 * share - 1)
        elif lower > 0 and upper > 20 * lower:
            moved = lower * (upper / lower) ** share
        else:
            moved = lower + share * (upper - lower)
        parameters[k] = np.clip(moved, lower, upper)
    _order_places(places, parameters, where)


def _order_places(places: Array, parameters: Array, where: Layout) -> None:
    """Places that are parameters, unless these would leave them out of order: then the parameters stay as they are."""
    free = {k: at for at, index in enumerate(where.places) for k in np.flatnonzero(where.parameters == index)}
    moved = places.copy()
    for k, at in free.items():
        moved[at] = parameters[k]
    if np.all(np.diff(moved) > 0):
        places[:] = moved
    for k, at in free.items():
        parameters[k] = places[at]


def _misfit(compiled: Compiled, where: Layout, z: Array) -> float:
    """How much the rates differ from the slopes of the lines over the whole range, relative to the states' sizes."""
    rates = point_outputs(compiled, where, z)[:, : compiled.point.states]
    slopes = z[where.nodes[-1]] - z[where.nodes[0]]
    sizes = np.abs(z[where.nodes]).max(axis=0)
    sizes = np.where(sizes > 0, sizes, float(sizes.max(initial=0.0)) or 1.0)
    misfit = float(np.mean(np.abs(rates - slopes) / sizes)) if rates.size else 0.0
    return misfit if np.isfinite(misfit) else np.inf
