"""Does the curve obey its dynamics?  Every interval is integrated anew from its left end.

The states start from the stored value at the left end of each interval and move by the dynamics under the stored
controls; all intervals advance together by the midpoint rule, extrapolated to order eight, whose steps are halved until
the last two extrapolations agree.  Where they hardly come nearer to each other (stiff dynamics, singular ends), or
small changes are blown up, the slopes of the stored curve are compared with the dynamics instead; only where these
differ an implicit integrator decides.  Lines of the dynamics that determine no derivative must hold between the nodes;
they count by their effect, a violation times its duration.

Reference: Hairer, Norsett, Wanner (1993), Solving Ordinary Differential Equations I, section II.9 (from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from itertools import pairwise

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.checks.sampling import HALF_WEIGHTS, HALVES, Sampler
from solvers.deadline import FOREVER, Deadline
from solvers.solution import Check, Status
from solvers.transcription.evaluation import mapped

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

NAME = "motion"
MOST_STEPS = 64
MOST_STIFF = 40
ENOUGH = 4
HELPED = 0.25
"""After so many steps, halved ones have to bring the extrapolations so much nearer to each other."""
PARTS = np.array([2, 4, 6, 8])
"""Into how many parts the midpoint rule divides a step: extrapolated, its error is of order eight."""


def check(sampler: Sampler, deadline: Deadline = FOREVER) -> Check:
    """The largest end mismatch of an interval relative to the size of the state, against ten times the tolerance."""
    threshold = 10 * sampler.tolerance
    n = sampler.point.states
    equalities = sampler.compiled.lowered.equalities
    if n == 0 and not equalities:
        return Check(NAME, Status.NOT_APPLICABLE, "Nothing moves: the problem has no dynamics.")
    figure, place, subject, what = 0.0, None, "", "No state moves by dynamics"
    if n:
        misses, along, settled = _missed(sampler, threshold, deadline)
        interval, state = np.unravel_index(int(np.argmax(misses)), misses.shape)
        figure, subject = float(misses[interval, state]), sampler.state_names[state]
        place = float(sampler.path.breaks[interval + (not along[interval])])
        if not settled:
            return Check(NAME, Status.FAILED, "The dynamics could not be integrated anew: two step sizes do not agree, "
                         "or it took too long.", figure, threshold, place, subject)  # fmt: skip
        what = f"Integrated anew, {subject} misses its stored end by {figure:.1e} of its size at worst"
        if along[interval]:
            what = (f"The dynamics blow up small changes; along the curve the rate of {subject} is off by "
                    f"{figure:.1e} of its size, weighed by how long")  # fmt: skip
        elif along.any():
            what += ", or where the dynamics blow up small changes its rate is off by no more"
    if equalities:
        worst, where, line = _held(sampler)
        if worst > figure:
            figure, place, subject = worst, where, equalities[line].label
            what = f"The line '{subject}' is off by {worst:.1e} of its size, weighed by how long"
    passed = figure <= threshold
    return Check(NAME, Status.PASSED if passed else Status.FAILED, what + ".", figure, threshold, place, subject)


def _missed(sampler: Sampler, threshold: float, deadline: Deadline) -> tuple[Array, Flags, bool]:
    """By how much every interval misses its end, relative to the sizes (N x n), where the rates along the curve say so
    instead, and whether one of both can be said everywhere."""
    accuracy = 0.02 * threshold
    defects = cache(lambda: _defects(sampler))

    def smooth(intervals: Indices) -> Flags:
        return np.asarray(defects()[intervals].max(axis=1) <= threshold)

    ends, open_ = _integrated(sampler, accuracy, smooth, deadline)
    misses = _relative(sampler, ends, np.arange(sampler.count))
    if len(open_):
        misses[open_] = defects()[open_]
    along = np.zeros(sampler.count, bool)
    doubtful = np.union1d(open_, np.flatnonzero(misses.max(axis=1) > threshold))
    if len(doubtful):
        along[doubtful] = smooth(doubtful)
        misses[along] = defects()[along]
    left = open_[~along[open_]]
    if len(left) > MOST_STIFF:
        return misses, along, False
    for interval in left:
        end = _stiff(sampler, int(interval), accuracy, deadline)
        if end is None:
            return misses, along, False
        misses[interval] = _relative(sampler, end, interval)
    return misses, along, True


def _relative(sampler: Sampler, ends: Array, intervals: Indices) -> Array:
    """How far ends of intervals are from the stored ones, relative to the sizes of states."""
    misses = np.abs(ends - sampler.path.nodes[intervals + 1]) / sampler.state_sizes
    return np.where(np.isfinite(misses), misses, np.inf)


def _integrated(
    sampler: Sampler, accuracy: float, smooth: Callable[[Indices], Flags], deadline: Deadline
) -> tuple[Array, Indices]:
    """The states at the right end of every interval, and the intervals of which they are not that accurate.

    Where smaller steps hardly help and the curve is smooth by itself, these are given up early.
    """
    waiting = np.arange(sampler.count)
    ends, gaps = np.empty((sampler.count, sampler.point.states)), np.full(sampler.count, np.inf)
    given_up = [waiting[:0]]
    steps = 1
    while len(waiting) and steps <= MOST_STEPS and not deadline.over:
        ends[waiting], gap = _advanced(sampler, waiting, steps)
        gap = (gap / sampler.state_sizes).max(axis=1)
        helped = gap <= HELPED * gaps[waiting]
        gaps[waiting] = gap
        waiting, helped = waiting[~(gap <= accuracy)], helped[~(gap <= accuracy)]
        if steps >= ENOUGH and not helped.all():
            hopeless = ~helped
            hopeless[hopeless] = smooth(waiting[hopeless])
            given_up.append(waiting[hopeless])
            waiting = waiting[~hopeless]
        steps *= 2
    return ends, np.concatenate([waiting, *given_up])


def _defects(sampler: Sampler) -> Array:
    """What the slopes of the stored states lack of the dynamics, summed over each interval, and what their ends lack of
    the stored ones (N x n, relative to sizes).

    In a short time no dynamics make more of it than that, but for what they blow up of any change, as at a singular
    end: there a new integration says nothing of the curve.
    """
    n, sample = sampler.point.states, sampler.halves
    modes = np.asarray(legendre.legder(sampler.states, axis=1), dtype=np.float64) * 2
    slopes = sampler.in_each(modes, HALVES)
    rates = sampler.halves_outputs[:, :n] * sampler.width[sample.interval, None]
    gaps = np.abs(slopes - rates) / sampler.state_sizes
    gaps = np.where(np.isfinite(gaps), gaps, np.inf).reshape(sampler.count, -1, n)
    off = _relative(sampler, sampler.states.sum(axis=1), np.arange(sampler.count))  # all Legendre polynomials end at 1
    return np.asarray(np.einsum("q,kqi->ki", HALF_WEIGHTS, gaps) + off)


def _advanced(sampler: Sampler, intervals: Indices, steps: int) -> tuple[Array, Array]:
    """Intervals integrated side by side in equal steps: the states at their ends, and a bound of their error.

    All subdivisions of a step advance side by side too.
    """
    count, rows = len(intervals), len(PARTS)
    state: Array = sampler.path.nodes[intervals].copy()
    error = np.zeros_like(state)
    owner, width = np.tile(intervals, rows), np.repeat(1 / (steps * PARTS), count)
    parts = range(1, int(PARTS[-1]))
    open_ = [slice(count * np.count_nonzero(part >= PARTS), None) for part in parts]  # the finer ones go on
    visited = [intervals, *(owner[own] for own in open_)]  # all subdivisions take the same first slope
    local = np.concatenate([np.zeros(count), *(part * width[own] for part, own in zip(parts, open_, strict=True))])
    turns = [slice(*pair) for pair in pairwise(np.cumsum([0, *map(len, visited)]))]
    with np.errstate(all="ignore"):
        for step in range(steps):
            rates = _Rates(sampler, np.concatenate(visited), step / steps + local)
            before = np.tile(state, (rows, 1))
            now = before + width[:, None] * np.tile(rates(state, turns[0]), (rows, 1))
            for own, turn in zip(open_, turns[1:], strict=True):
                slope = rates(now[own], turn)
                before[own], now[own] = now[own], before[own] + 2 * width[own, None] * slope
            table = list(now.reshape(rows, count, -1))
            for column in range(1, rows):
                coarse = table[-1]
                table = [fine + (fine - rough) / ((PARTS[k + column] / PARTS[k]) ** 2 - 1)
                         for k, (rough, fine) in enumerate(pairwise(table))]  # fmt: skip
            state = table[0]
            error += np.abs(state - coarse)
    return state, error


class _Rates:
    """Slopes in the local variable of any states at places that are known beforehand, some of them at a time."""

    def __init__(self, sampler: Sampler, intervals: Indices, local: Array) -> None:
        n = sampler.point.states
        self._function, self._n = sampler.point.value, n
        self._v = sampler.inputs(intervals, np.zeros((len(intervals), n)), sampler.controls_at(intervals, local))
        self._d = sampler.data(intervals, local)
        self._width = sampler.width[intervals, None]

    def __call__(self, states: Array, turn: slice) -> Array:
        v = self._v[turn]
        v[:, : self._n] = states
        return np.asarray(mapped(self._function, v, self._d[turn])[:, : self._n] * self._width[turn])


def _stiff(sampler: Sampler, interval: int, accuracy: float, deadline: Deadline) -> Array | None:
    """One interval by an implicit method, or None where it gives up or the time is over."""
    from scipy.integrate import solve_ivp

    chosen = np.array([interval])

    def slope(local: float, state: Array) -> Array:
        if deadline.over:
            raise TimeoutError
        return np.asarray(_Rates(sampler, chosen, np.array([local]))(state, slice(None))[0])

    try:
        answer = solve_ivp(slope, (0.0, 1.0), sampler.path.nodes[interval], method="LSODA", rtol=max(accuracy, 1e-12),
                           atol=accuracy * sampler.state_sizes, max_step=0.25)  # fmt: skip
    except (ValueError, TimeoutError):  # a slope was undefined, or it takes too long
        return None
    return np.asarray(answer.y[:, -1]) if answer.success else None


def _held(sampler: Sampler) -> tuple[float, float, int]:
    """The worst violation of a line that is an equality: figure, place, which line."""
    n, lines = sampler.point.states, len(sampler.compiled.lowered.equalities)
    values = np.abs(sampler.halves_outputs[:, n : n + lines]) / _positive(sampler.output_sizes[n : n + lines])
    values = np.where(np.isfinite(values), values, 1e300)
    shares = np.abs(sampler.halves.measure / sampler.span)[:, None] * values
    per_interval = np.add.reduceat(shares, np.arange(0, len(shares), len(shares) // sampler.count), axis=0)
    interval, line = np.unravel_index(int(np.argmax(per_interval)), per_interval.shape)
    return float(per_interval[interval, line]), float(sampler.path.breaks[interval]), int(line)


def _positive(sizes: Array) -> Array:
    return np.where(sizes > 0, sizes, 1.0)
