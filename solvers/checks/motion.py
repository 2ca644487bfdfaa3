"""Does the curve obey its dynamics?  Every interval is integrated anew from its left end.

The states start from the stored value at the left end of each interval and move by the dynamics under the stored
controls; all intervals advance together by the midpoint rule, extrapolated to order eight, whose steps are halved until
the last two extrapolations agree, and where that is slow (stiff dynamics) an implicit integrator takes over.  Lines of
the dynamics that determine no derivative must hold between the nodes; they count by their effect, a violation times its
duration.

Reference: Hairer, Norsett, Wanner (1993), Solving Ordinary Differential Equations I, section II.9 (from memory).
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from solvers.checks.sampling import HALF_WEIGHTS, HALVES, Sampler
from solvers.deadline import FOREVER, Deadline
from solvers.solution import Check, Status
from solvers.transcription.evaluation import mapped

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

NAME = "motion"
MOST_STEPS = 64
MOST_STIFF = 40
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
        ends, settled = _integrated(sampler, 0.02 * threshold, deadline)
        misses = np.abs(ends - sampler.path.nodes[1:]) / sampler.state_sizes
        misses = np.where(np.isfinite(misses), misses, np.inf)
        interval, state = np.unravel_index(int(np.argmax(misses)), misses.shape)
        figure, subject = float(misses[interval, state]), sampler.state_names[state]
        place = float(sampler.path.breaks[interval + 1])
        what = f"Integrated anew, {subject} misses its stored end by {figure:.1e} of its size at worst"
        if not (settled and figure <= threshold):
            defects = _defects(sampler)
            interval, state = np.unravel_index(int(np.argmax(defects)), defects.shape)
            if defects[interval, state] <= threshold:
                settled, figure, subject = True, float(defects[interval, state]), sampler.state_names[state]
                place = float(sampler.path.breaks[interval])
                what = (f"The dynamics blow up small changes; along the curve the rate of {subject} is off by "
                        f"{figure:.1e} of its size, weighed by how long")  # fmt: skip
        if not settled:
            return Check(NAME, Status.FAILED, "The dynamics could not be integrated anew: two step sizes do not agree, "
                         "or it took too long.", figure, threshold, place, subject)  # fmt: skip
    if equalities:
        worst, where, line = _held(sampler)
        if worst > figure:
            figure, place, subject = worst, where, equalities[line].label
            what = f"The line '{subject}' is off by {worst:.1e} of its size, weighed by how long"
    passed = figure <= threshold
    return Check(NAME, Status.PASSED if passed else Status.FAILED, what + ".", figure, threshold, place, subject)


def _integrated(sampler: Sampler, accuracy: float, deadline: Deadline) -> tuple[Array, bool]:
    """The states at the right end of every interval, and whether all of them are that accurate."""
    waiting = np.arange(sampler.count)
    ends = np.empty((sampler.count, sampler.point.states))
    steps = 1
    while len(waiting) and steps <= MOST_STEPS and not deadline.over:
        ends[waiting], gap = _advanced(sampler, waiting, steps)
        waiting = waiting[~((gap / sampler.state_sizes).max(axis=1) <= accuracy)]
        steps *= 2
    if len(waiting) > MOST_STIFF:
        return ends, False
    for interval in waiting:
        end = _stiff(sampler, int(interval), accuracy, deadline)
        if end is None:
            return ends, False
        ends[interval] = end
    return ends, True


def _defects(sampler: Sampler) -> Array:
    """What the slopes of the stored states lack of the dynamics, summed over each interval (N x n, relative to sizes).

    In a short time no dynamics make more of it than that, but for what they blow up of any change, as at a singular
    end: there a new integration says nothing of the curve.
    """
    n, sample = sampler.point.states, sampler.halves
    modes = np.asarray(legendre.legder(sampler.states, axis=1), dtype=np.float64) * 2
    slopes = sampler.in_each(modes, HALVES)
    rates = sampler.halves_outputs[:, :n] * sampler.width[sample.interval, None]
    gaps = np.abs(slopes - rates) / sampler.state_sizes
    gaps = np.where(np.isfinite(gaps), gaps, np.inf).reshape(sampler.count, -1, n)
    return np.asarray(np.einsum("q,kqi->ki", HALF_WEIGHTS, gaps))


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
