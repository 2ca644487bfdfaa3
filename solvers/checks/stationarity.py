"""Is the curve an extremal?  Costate equations and stationarity of the Hamiltonian, looked at between the nodes.

With H = integrand + costates x rates + multipliers x constraints, the first variation of the functional is
integral of (H_u du + (p' + H_x) dx).  Figures are taken, most as the share of the functional that variations as
large as the curve itself could gain by it:

- *controls*: the step that the projected gradient of H would take in each control, averaged over the curve (at a bound
  only a gradient that points inside counts);
- *costates*: the weak form of p' = -H_x on every interval, so that no noise is differentiated; the variation vanishes
  towards an end where the state is fixed, as it must, which also gives infinite costates there their right weight;
  multipliers of constraints on states count as measures, so a costate may jump where such a constraint is touched;
- *multipliers*: of inequalities, times the distance from their limit, which must vanish;
- *kinks*: how long the curve runs along concave kinks of formulas, where rounded functions are stationary but the
  exact ones fall to both sides;
- *gain*: what a part of that step of the controls gains in H, averaged over the curve; a few times the tolerance of the
  value is its limit, however short the stretch is on which it could be had.

The threshold is the square root of the tolerance: at a minimum a relative gradient of e leaves a gain of the order e^2
in the value, and polynomials of control and costate are one order less accurate than those of the states.

Reference: Bryson, Ho (1975), Applied Optimal Control, chapters 2 and 3 (from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks import rounding
from solvers.checks.adjoint import variation
from solvers.checks.sampling import HALVES, Sampler
from solvers.solution import Check, Status
from solvers.transcription.collocation import Family
from solvers.transcription.evaluation import mapped
from solvers.transcription.limits import constants_of, interval_of

Array = NDArray[np.float64]

NAME = "stationarity"

RESTING = 1e-6
"""How near to its limit, relative to its size, a state rests on it."""

Finding = tuple[float, float, str, str]
"""Figure, place, subject, sentence."""


def check(sampler: Sampler) -> Check:
    """The largest of these figures against the square root of the tolerance."""
    threshold = float(np.sqrt(sampler.tolerance))
    step = _projected_step(sampler)
    findings = [*_controls(sampler, step), *_costates(sampler), *_multipliers(sampler),
                *_gain(sampler, step, threshold), *_kinks(sampler, threshold)]  # fmt: skip
    if not findings:
        return Check(NAME, Status.NOT_APPLICABLE, "There is no function to vary.")
    figure, place, subject, sentence = max(findings, key=lambda finding: finding[0])
    status = Status.PASSED if figure <= threshold else Status.FAILED
    return Check(NAME, status, sentence, figure, threshold, place, subject)


def _finite(values: Array) -> Array:
    return np.where(np.isfinite(values), values, np.inf)


def _controls(sampler: Sampler, step: Array) -> list[Finding]:
    """For each control the mean projected step, relative to its size."""
    m, sample = sampler.point.controls, sampler.halves
    steps = np.abs(step) / sampler.control_sizes
    findings = []
    for j in range(m):
        figure = float(sampler.mean(steps[:, j]))
        worst = int(np.argmax(steps[:, j] * np.abs(sample.measure)))
        findings.append((figure, float(sample.places[worst]), sampler.control_names[j],
                         f"The Hamiltonian is stationary in {sampler.control_names[j]} to {figure:.1e} "
                         f"(mean step of its gradient relative to the control)."))  # fmt: skip
    return findings


PARTS = (1.0, 0.3, 0.1, 0.03)
"""Parts of the projected step that are tried."""
ROOM = 10.0
"""How much more than the tolerance of the value they may gain."""


def _gain(sampler: Sampler, step: Array, threshold: float) -> list[Finding]:
    """The mean gain of the best part of the projected step, so scaled that its limit is the threshold."""
    n, m, sample = sampler.point.states, sampler.point.controls, sampler.halves
    if m == 0:
        return []
    weights = sampler.weights(sample)
    length = (sampler.end - sampler.start)[sample.interval]
    own = (sampler.halves_outputs * weights).sum(axis=1)
    gains = np.zeros(len(own))
    for part in PARTS:
        v = sample.v.copy()
        v[:, n : n + m] += part * step
        there = (mapped(sampler.point.value, v, sample.d) * weights).sum(axis=1)
        gains = np.fmax(gains, (own - there) / length / sampler.power)
    gains[(sample.interval == 0) | (sample.interval == sampler.count - 1)] = 0.0  # slopes may be infinite at an end
    figure, worst = float(sampler.mean(gains)), int(np.argmax(gains * np.abs(sample.measure)))
    name = sampler.control_names[int(np.argmax(np.abs(step[worst]) / sampler.control_sizes))]
    return [(threshold * figure / (ROOM * sampler.tolerance), float(sample.places[worst]), name,
             f"Other values of {name} could gain {figure:.1e} of the functional.")]  # fmt: skip


def _kinks(sampler: Sampler, threshold: float) -> list[Finding]:
    """The share of the range along concave kinks, so scaled that its limit is the threshold."""
    found = rounding.concave(sampler)
    if found is None:
        return []
    share, place = found
    return [(threshold * share / rounding.STRETCH, place, "", f"On {share:.1%} of the range the curve runs along a "
             "kink from which the functional falls to both sides.")]  # fmt: skip


def _projected_step(sampler: Sampler) -> Array:
    """The step of the controls on the grid of halves against the gradient of H, inside their bounds.

    Its length is that of the gradient if both are relative: H to its size, each control to its own.
    """
    n, m = sampler.point.states, sampler.point.controls
    controls, sizes = sampler.halves.v[:, n : n + m], sampler.control_sizes
    slopes = sampler.halves_gradient[:, n : n + m] * sizes / sampler.power
    return np.asarray(np.clip(controls - sizes * _finite(slopes), *sampler.bounds[2:]) - controls)


def _costates(sampler: Sampler) -> list[Finding]:
    """For each state the sum over all intervals of the jump, or of the weak form's residual where one is touched."""
    n = sampler.point.states
    if n == 0:
        return []
    found, weak = sampler.continued, _weak_residuals(sampler)
    shares = (sampler.path.breaks[found.far] - sampler.path.breaks[0]) / sampler.span
    findings = []
    for j in range(n):
        weight = variation(shares, sampler.fixed_ends[j])[0]
        jumps = np.where(weight > 0, weight * found.jumps[:, j], 0.0)
        residual = _finite(np.abs(np.where(found.kept, weak[:, j], jumps)))
        residual *= sampler.state_extents[j] / sampler.value_size
        figure, worst = float(residual.sum()), int(np.argmax(residual))
        name = sampler.state_names[j]
        findings.append((figure, float(sampler.path.breaks[worst]), name,
                         f"The costate equation of {name} holds to {figure:.1e} of the functional."))  # fmt: skip
    return findings


def _weak_residuals(sampler: Sampler) -> Array:
    """The weak form of the costate equations on every interval, with the stored costates (N x n)."""
    n, sample, count = sampler.point.states, sampler.halves, sampler.count
    costates = sampler.in_each(sampler.costates, HALVES)
    weights = sampler.weights(sample, constraints=False, costates=costates)
    gradient = sampler.gradient(sample, sampler.halves_slopes, weights)
    left, right = sampler.costate_ends[:, 0], sampler.costate_ends[:, 1].copy()
    before_place = np.append(np.diff(sampler.stretch) > 0, True)
    right[:-1] = np.where(before_place[:-1, None], right[:-1], left[1:])
    edges = (sampler.path.breaks - sampler.path.breaks[0]) / sampler.span
    share = (sample.places - sampler.path.breaks[0]) / sampler.span
    put, owner, at = _measures(sampler)
    residuals = np.empty((count, n))
    for j, fixed in enumerate(sampler.fixed_ends):
        weight, slope = variation(share, fixed)
        terms = (weight * gradient[:, j] - slope / sampler.span * costates[:, j]) * sample.measure
        ends = variation(edges, fixed)[0]
        residuals[:, j] = terms.reshape(count, -1).sum(axis=1) + ends[1:] * right[:, j] - ends[:-1] * left[:, j]
        residuals[:, j] += np.bincount(owner, variation(at, fixed)[0] * put[:, j], count)
    return residuals


def _measures(sampler: Sampler) -> tuple[Array, NDArray[np.int64], Array]:
    """What multipliers of constraints and bounds put on each state (P x n), in which interval, at which share."""
    path, n, c = sampler.path, sampler.point.states, sampler.point.constraints
    where = path.program.layout
    degrees = np.diff(where.first)
    owner = np.repeat(np.arange(sampler.count), degrees)
    shares = (path.points - path.breaks[0]) / sampler.span
    put = path.bound_multipliers[where.inner].copy()
    if c:
        local = (where.fractions - sampler.fraction[owner]) / sampler.width[owner]
        sample = sampler.sample(owner, local)
        rows = np.array(sampler.point.jacobian_rows, dtype=int)
        columns = np.array(sampler.point.jacobian_columns, dtype=int)
        chosen = np.flatnonzero((rows >= n) & (rows < n + c) & (columns < n))
        slopes = sampler.slopes(sample)
        multipliers = path.row_multipliers[path.program.rows.pointwise : path.program.rows.rims].reshape(-1, c)
        for entry in chosen:
            put[:, columns[entry]] += slopes[:, entry] * multipliers[:, rows[entry] - n]
    gauss = np.array([i.scheme.family is Family.GAUSS for i in path.program.mesh.intervals])
    at_place = np.zeros(sampler.count + 1, bool)
    at_place[where.at_place] = True
    at_place = at_place[1:]
    last = where.first[1:] - 1
    ending = np.flatnonzero(at_place & ~gauss)
    put[last[ending]] = _before_places(sampler, ending, put[last[ending]])
    extra = np.flatnonzero(gauss & ~at_place)  # a Gauss interval's right node is no point of its own
    put = np.vstack([put, path.bound_multipliers[where.nodes[extra + 1]].reshape(len(extra), n)])
    owner = np.concatenate([owner, extra])
    shares = np.concatenate([shares, (path.breaks[extra + 1] - path.breaks[0]) / sampler.span])
    return put, owner, shares


def _before_places(sampler: Sampler, ending: NDArray[np.int64], total: Array) -> Array:
    """The part of what is put on the states at a place that belongs to the interval which ends there (E x n).

    The rest is an atom, by which the costate jumps at the place (`free_ends` weighs it).  Only a limit has a part: what
    conditions put at a place, and what the transcription fixes there, is an atom altogether.
    """
    path, n = sampler.path, sampler.point.states
    nodes = ending + 1
    values, (lower, upper) = path.nodes[nodes], sampler.bounds[:2]
    near = RESTING * sampler.state_sizes
    bound = path.bound_multipliers[path.program.layout.nodes[nodes]]
    given = np.where((values - lower > near) & (upper - values > near), bound, 0.0)
    total = total - given
    left = np.zeros((len(ending), n))
    inner = nodes < sampler.count
    left[inner] = sampler.costate_ends[nodes[inner], 0]
    right = sampler.costate_ends[ending, 1]
    place = np.searchsorted(path.program.layout.at_place, nodes)
    conditions = sampler.end_slopes[1][: len(path.places) * n].reshape(-1, n)[place]
    part = total + given + left - right + conditions
    return np.asarray(np.clip(part, np.minimum(total, 0.0), np.maximum(total, 0.0)))


def _multipliers(sampler: Sampler) -> list[Finding]:
    """Multipliers of inequalities times their distance from the limit, summed, relative to the functional."""
    path, n, c = sampler.path, sampler.point.states, sampler.point.constraints
    where, findings = path.program.layout, []
    place = float(path.breaks[0])
    for j in np.flatnonzero(np.isfinite(sampler.bounds[0]) | np.isfinite(sampler.bounds[1])):
        lower, upper = (float(bounds[j]) for bounds in sampler.bounds[:2])
        figure = complementarity(_spread(sampler, int(j)), path.states[:, j], lower, upper, sampler.state_sizes[j])
        figure /= sampler.value_size
        findings.append((figure, place, sampler.state_names[j]))
    lines = len(sampler.compiled.lowered.equalities)
    if c > lines:
        degrees = np.diff(where.first)
        owner = np.repeat(np.arange(sampler.count), degrees)
        sample = sampler.sample(owner, (where.fractions - sampler.fraction[owner]) / sampler.width[owner])
        values = mapped(sampler.point.value, sample.v, sample.d)[:, n + lines : n + c]
        rows = path.row_multipliers[path.program.rows.pointwise : path.program.rows.rims].reshape(-1, c)
        sizes = sampler.output_sizes[n + lines : n + c]
        constants = constants_of(sampler.compiled)
        for k, condition in enumerate(sampler.compiled.pointwise[lines:]):
            if not condition.equality:
                held = {h.stretch for h in sampler.problem.held if sampler.compiled.rank_of(h) == lines + k}
                alone = not sampler.holds_controls(n + lines + k)
                pushes = _even(sampler, rows[:, lines + k], held if alone else set())
                figure = complementarity(pushes, values[:, k], *interval_of(condition, constants), sizes[k])
                findings.append((figure / sampler.value_size, place, condition.label))
    return [(figure, at, subject, f"The multiplier of '{subject}' times the distance from the limit "
             f"is {figure:.1e} of the functional.") for figure, at, subject in findings]  # fmt: skip


def _spread(sampler: Sampler, state: int) -> Array:
    """The multipliers of a state's bounds at the points; where the state is held on one, the mean of each interval.

    What a condition at a place puts on the state there belongs to that condition.
    """
    quantity, where = sampler.compiled.lowered.states[state], sampler.path.program.layout
    multipliers = sampler.path.bound_multipliers[where.inner[:, state]]
    for conditioned, place, _ in sampler.compiled.fixed:
        last = int(where.first[where.at_place[place]]) - 1
        if conditioned == state and last >= 0 and where.ends_on_point(last):
            multipliers[last] = 0.0
    return _even(sampler, multipliers, {h.stretch for h in sampler.problem.held if (h.name, h.order) == quantity})


def _even(sampler: Sampler, multipliers: Array, held: set[int]) -> Array:
    """Multipliers of a limit on states at the points; along the stretches where it is held, the mean of each interval.

    There the minimiser sees equalities, whose multipliers may alternate from point to point although nothing pulls.
    What a place puts on the state beside the arc stays apart.
    """
    where, multipliers = sampler.path.program.layout, multipliers.copy()
    last = np.append(np.diff(sampler.stretch) > 0, True)
    for k in np.flatnonzero(np.isin(sampler.stretch, list(held))):
        inside = slice(where.first[k], where.first[k + 1] - int(last[k]))
        multipliers[inside] = multipliers[inside].mean() if inside.stop > inside.start else 0.0
    return multipliers


def complementarity(multipliers: Array, values: Array, lower: float, upper: float, size: float) -> float:
    """Sum of |multiplier| times distance from the limit that its sign belongs to (at most the size of the body)."""
    above = np.minimum(np.abs(upper - values), size) * np.maximum(multipliers, 0.0)
    below = np.minimum(np.abs(values - lower), size) * np.maximum(-multipliers, 0.0)
    return float(np.nansum(above) + np.nansum(below))
