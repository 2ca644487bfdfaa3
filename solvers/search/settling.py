"""Whether to stop refining: the errors of value and curve, and curves that tear."""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from solvers.minimise.ipopt import FLOOR
from solvers.search import refinement
from solvers.search.record import End, Pursuit
from solvers.search.unresolved import unresolved
from solvers.solution import Finding
from solvers.transcription.lowering import primed
from solvers.transcription.trajectory import Trajectory, distance

CURVE_ROOM = 100.0
"""How much more than the tolerance the curve may still have moved: a switch that hardly matters moves freely."""
LEAST_GAIN = 0.005
"""How much of the last change of the value counts as its error at the least, however much the mesh has improved."""
SLOWEST = 0.95
"""The slowest fall of the changes from mesh to mesh that is counted on ..."""
SERIES = 1.25
"""... and how much more than such a series adds up to its rest may be, as the factor itself grows."""
ROUNDING = float(np.finfo(float).eps)
ROOT = 3
"""The value may grow as fast as the third root of what is missing of the conditions, where no curve reaches beyond."""
TORN_MESHES = 4
"""So many meshes in a row ..."""
TORN_ERROR = 0.05
"""... with such an error at one place that hardly falls, although it is cut finer each time: the curve jumps ..."""
NARROWER = 0.5
STAYING = 0.7
"""... if within so much of the width, or less, it rises by so much of what it did or more."""
THIN = 0.1
"""A piece, relative to the whole, in which a state that jumps makes most of its way."""

TREND = 4
"""So many meshes, one after the other, tell how the error falls and the effort grows ..."""
RESOLVED = 0.1
"""... once the error is below this: before, the curve is hardly seen."""
LATE = 0.05
"""Share of the time limit from which on it is asked whether the rest may suffice ..."""
TIMES_OVER = 30.0
"""... and how many times it would have to be there."""


def estimate_errors(pursuit: Pursuit, found: refinement.Estimate) -> None:
    """Errors of value and curve from the last meshes: their difference, and how much the mesh has improved since.

    The difference alone is the error of the mesh before; local errors that fell by a factor f let the value's error
    fall at least by f.  Where they hardly fall, and the changes from mesh to mesh hardly either, all that are to come
    add up like a geometric series (Aitken, 1926; from memory).  What the curve gains by leaving limits between the
    points is seen on one mesh alone, and so is what it gains by what the minimiser left of the conditions, and what is
    open where it is not resolved.
    """
    now, before = pursuit.paths[-1], pursuit.paths[-2]
    last = pursuit.steps[-2].error or 0.0
    gain = float(np.clip(found.worst / last, LEAST_GAIN, 1.0)) if last > 0 else 1.0
    size = max(abs(now.value), abs(now.program.value_scale))
    change = abs(now.value - before.value)
    rate = min(gain, _rate(pursuit, change))
    own = max(2 * gain, SERIES * rate / (1 - rate)) * change + size * found.worst**2 + FLOOR * size
    pursuit.value_error = own + unresolved(now, found) + found.gained + worth_of_misses(now)
    pursuit.curve_error = gain * distance(now, before) + found.worst


def _rate(pursuit: Pursuit, change: float) -> float:
    """By which factor the value's changes fall from mesh to mesh; the slowest where only two meshes are known."""
    if len(pursuit.paths) < 3:
        return SLOWEST
    before = abs(pursuit.paths[-2].value - pursuit.paths[-3].value)
    return min(change / before, SLOWEST) if before > 0 else SLOWEST


def worth_of_misses(path: Trajectory) -> float:
    """What the value may gain (SI) by what the minimiser missed of the conditions: how far, times their multipliers.

    That is nothing unless multipliers are huge.  So they are at abnormal extremals, whose end lies at the rim of what
    can be reached: near there the value V grows like a root of the distance d, and for V = d^(1/p) its whole change is
    p times its slope times d.  Reference: Bryson, Ho (1975), Applied Optimal Control, section 2.4 (from memory).
    """
    program = path.program
    values = program.numbers.constraints(path.z / program.scale)
    missed = np.maximum(np.maximum(program.row_lower - values, values - program.row_upper), 0.0)
    missed += ROUNDING * np.abs(values)  # (y(1) - 1)^2 + 1 = 1 holds for all that is within 1e-8 of it
    return ROOT * float(missed @ np.abs(path.row_multipliers * program.row_scale))


def settled(pursuit: Pursuit) -> End | None:
    """Whether to stop refining."""
    tolerance = pursuit.problem.options.tolerance
    errors = [step.error or 0.0 for step in pursuit.steps]
    value_met = pursuit.value_met
    if value_met and errors[-1] <= tolerance and pursuit.curve_error <= tolerance:
        return End.CONVERGED
    if len(errors) > TORN_MESHES and min(errors[-TORN_MESHES:]) > max(TORN_ERROR, 0.5 * errors[-TORN_MESHES - 1]):
        pursuit.findings = _jump(pursuit) or _leap(pursuit)
        if pursuit.findings:
            return End.TORN
    stuck = len(errors) > 6 and min(errors[-6:]) > 0.3 * errors[-7]
    slow = len(errors) > 2 and min(errors[-2:]) > 0.5 * errors[-3] and pursuit.curve_error <= CURVE_ROOM * tolerance
    if value_met and (stuck or (slow and pursuit.value_met_before)):
        return End.SETTLED
    pursuit.value_met_before = value_met
    return None


def out_of_reach(pursuit: Pursuit, left: float, meshes: int) -> bool:
    """Whether so many more meshes, or as many as are needed, take far more than the seconds that are `left`.

    Said only where the error falls steadily and the effort grows: else anything may happen on the next mesh.  How it
    grows is counted in iterations times points, which no load of the machine changes.
    """
    options, steps = pursuit.problem.options, pursuit.steps[-TREND:]
    errors, efforts = [step.error or 0.0 for step in steps], [step.iterations * step.points for step in steps]
    steady = all(after < before for before, after in pairwise(errors)) and 0 < efforts[0] < efforts[-1]
    spent = sum(step.seconds for step in pursuit.steps)
    if len(steps) < TREND or not steady or errors[-1] > RESOLVED or pursuit.value_met:
        return False
    fall, growth = ((of[-1] / of[0]) ** (1 / (TREND - 1)) for of in (errors, efforts))
    needed = min(np.log(options.tolerance / errors[-1]) / np.log(fall), meshes)
    seconds = steps[-1].seconds * (growth**needed - 1) / (1 - 1 / growth)
    return bool(spent >= LATE * options.time_limit and seconds > TIMES_OVER * left)


def _jump(pursuit: Pursuit) -> tuple[Finding, ...]:
    """Which state jumps where: over an ever narrower interval at one place on each of the last meshes.

    At a blurred switch of a control states rise the less the narrower the interval is; where one jumps the rise stays.
    """
    edges, rises = [], []
    for path, found in zip(pursuit.paths[-TORN_MESHES:], pursuit.estimates[-TORN_MESHES:], strict=True):
        worst = int(np.argmax(found.errors))
        edges.append(path.breaks[worst : worst + 2])
        inside = slice(*path.program.layout.first[worst : worst + 2])
        rise = np.ptp(np.vstack([path.nodes[worst : worst + 2], path.states[inside]]), axis=0)
        rises.append(rise / np.maximum(np.abs(path.states).max(axis=0), 1e-300))
    if not all(after[0] >= before[0] - 1e-12 and after[1] <= before[1] + 1e-12 for before, after in pairwise(edges)):
        return ()
    narrower = float(np.ptp(edges[-1]) / np.ptp(edges[0]))
    staying = (rises[-1] > STAYING * rises[0]) & (rises[-1] > 0)
    if narrower >= NARROWER or not staying.any():
        return ()
    name = primed(pursuit.compiled.lowered.states[int(np.argmax(np.where(staying, rises[-1], 0.0)))])
    return (Finding(name, "", None, float(edges[-1].mean()), "jumps"),)


def _leap(pursuit: Pursuit) -> tuple[Finding, ...]:
    """Which state makes most of its way over an ever shorter piece, which may lie to either side of one place.

    So it does where moving costs nothing, as turning does at a pole.
    """
    names = pursuit.compiled.lowered.states
    for k, name in enumerate(names):
        pieces = np.array([_shortest(path, k) for path in pursuit.paths[-TORN_MESHES:]])
        widths = np.diff(pieces, axis=1)[:, 0]
        apart = np.maximum(pieces[1:, 0] - pieces[:-1, 1], pieces[:-1, 0] - pieces[1:, 1])
        falling = np.all(widths[1:] <= widths[:-1]) and widths[-1] < NARROWER * widths[0]
        if falling and widths[0] < THIN * np.ptp(pursuit.paths[-1].breaks) and np.all(apart <= widths[:-1]):
            return (Finding(primed(name), "", None, float(pieces[-1].mean()), "jumps"),)
    return ()


def _shortest(path: Trajectory, state: int) -> tuple[float, float]:
    """The shortest piece, from break to break, over which a state makes most of its way."""
    way = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(path.nodes[:, state])))])
    ends = np.searchsorted(way, way + STAYING * way[-1])
    starts = np.flatnonzero(ends < len(way))
    shortest = starts[np.argmin(path.breaks[ends[starts]] - path.breaks[starts])]
    return float(path.breaks[shortest]), float(path.breaks[ends[shortest]])
