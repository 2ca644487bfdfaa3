"""Does the curve obey its dynamics?  Every interval is integrated anew from its left end.

The states start from the stored value at the left end of each interval and move by the dynamics under the stored
controls; all intervals advance together by an explicit method of order eight whose steps are halved until two
results agree, and where that is slow (stiff dynamics) an implicit integrator takes over.  Lines of the dynamics that
determine no derivative must hold between the nodes; they count by their effect, a violation times its duration.

Reference: Hairer, Norsett, Wanner (1993), Solving Ordinary Differential Equations I, section II.5 (from memory).
"""

from __future__ import annotations

import time
from functools import cache

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import Sampler, mapped
from solvers.solution import Check, Status

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

NAME = "motion"
MOST_STEPS = 64
MOST_STIFF = 40


def check(sampler: Sampler, deadline: float = float("inf")) -> Check:
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


def _integrated(sampler: Sampler, accuracy: float, deadline: float) -> tuple[Array, bool]:
    """The states at the right end of every interval, and whether all of them are that accurate."""
    waiting = np.arange(sampler.count)
    ends = _advanced(sampler, waiting, 1)
    steps = 2
    while len(waiting) and steps <= MOST_STEPS and time.perf_counter() < deadline:
        finer = _advanced(sampler, waiting, steps)
        gap = np.abs(finer - ends[waiting]) / sampler.state_sizes
        ends[waiting] = finer
        waiting = waiting[~(gap.max(axis=1) <= accuracy)]
        steps *= 2
    if len(waiting) > MOST_STIFF:
        return ends, False
    for interval in waiting:
        end = _stiff(sampler, int(interval), accuracy, deadline)
        if end is None:
            return ends, False
        ends[interval] = end
    return ends, True


@cache
def _order_eight() -> tuple[int, Array, Array, Array]:
    """Number of stages and coefficients of the explicit method of order eight."""
    from scipy.integrate import DOP853  # here, so that a worker that waits has not loaded it

    stages = DOP853.n_stages
    return stages, np.asarray(DOP853.A)[:stages, :stages], np.asarray(DOP853.B), np.asarray(DOP853.C)[:stages]


def _advanced(sampler: Sampler, intervals: Indices, steps: int) -> Array:
    """Intervals integrated side by side in equal steps."""
    stages, a, b, c = _order_eight()
    count, n = len(intervals), sampler.point.states
    local = (np.arange(steps)[:, None] + c) / steps
    controls = sampler.controls_at(np.repeat(intervals, local.size), np.tile(local.ravel(), count))
    controls = controls.reshape(count, steps, stages, -1)
    state: Array = sampler.path.nodes[intervals].copy()
    with np.errstate(all="ignore"):
        for step in range(steps):
            slopes = np.zeros((stages, count, n))
            for stage in range(stages):
                inner = state + np.tensordot(a[stage, :stage], slopes[:stage], 1) / steps
                slopes[stage] = _rates(sampler, intervals, inner, controls[:, step, stage], local[step, stage])
            state += np.tensordot(b, slopes, 1) / steps
    return state


def _rates(sampler: Sampler, intervals: Indices, states: Array, controls: Array, local: float) -> Array:
    """Slopes of the states in the local variable."""
    v = sampler.inputs(intervals, states, controls)
    d = sampler.data(sampler.fraction[intervals] + sampler.width[intervals] * local)
    rates = mapped(sampler.point.value, v, d)[:, : sampler.point.states]
    return np.asarray(rates * sampler.width[intervals, None])


def _stiff(sampler: Sampler, interval: int, accuracy: float, deadline: float) -> Array | None:
    """One interval by an implicit method, or None where it gives up or the time is over."""
    from scipy.integrate import solve_ivp

    chosen = np.array([interval])

    def slope(local: float, state: Array) -> Array:
        if time.perf_counter() > deadline:
            raise TimeoutError
        controls = sampler.controls_at(chosen, np.array([local]))
        return np.asarray(_rates(sampler, chosen, state[None, :], controls, local)[0])

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
