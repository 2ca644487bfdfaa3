"""Would any other slope, far from the curve's own, lower the Hamiltonian (Weierstrass, Pontryagin)?

Legendre's condition looks at slopes near the curve's own only.  A minimum among all curves that stay near, whatever
their slopes, needs more: at every place the Hamiltonian must be least at the curve's own controls among all that are
admissible there.  For dynamics y' = u the difference is Weierstrass's excess function E(x, y, p, q) = L(q) - L(p) -
(q - p) L_p.  Each control is tried at values spread over its range, the others being kept; what is of first order is
left to the check of stationarity, so no error of a multiplier can fail a curve here.  The figure is the mean over the
curve of what the best trial gains, relative to the Hamiltonian.

References: Weierstrass (1879), lectures; Gelfand, Fomin (1963), Calculus of Variations, section 34; Pontryagin and
others (1962), The Mathematical Theory of Optimal Processes, chapter 1 (from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import Sampler
from solvers.solution import Check, Status
from solvers.transcription.evaluation import mapped
from solvers.transcription.limits import constants_of, interval_of

Array = NDArray[np.float64]

NAME = "Weierstrass"
STEPS = np.array([0.3, 1.0, 1.5, 2.0, 3.0, 10.0])
"""Steps that are tried to both sides, in sizes of the control, where it has no range of its own."""
SHARES = np.linspace(0.0, 1.0, 9)
"""Shares of its range that are tried where it has one."""


def check(sampler: Sampler) -> Check:
    """The mean gain of the best trial, against the square root of the tolerance."""
    m = sampler.point.controls
    if m == 0:
        return Check(NAME, Status.NOT_APPLICABLE, "There is no control.")
    if any(c.equality and sampler.holds_controls(sampler.point.states + k)
           for k, c in enumerate(sampler.compiled.pointwise)):  # fmt: skip
        return Check(NAME, Status.NOT_APPLICABLE, "Equations tie the controls together: no other value is admissible "
                     "by itself.")  # fmt: skip
    if not bent_controls(sampler):
        return Check(NAME, Status.NOT_APPLICABLE, "The Hamiltonian is linear in the controls: no value far away can "
                     "be better where none nearby is.")  # fmt: skip
    gains, values, controls = best_trials(sampler)
    threshold = float(np.sqrt(sampler.tolerance))
    figure = float(sampler.mean(gains))
    worst = int(np.argmax(gains * np.abs(sampler.halves.measure)))
    place, name = float(sampler.halves.places[worst]), sampler.control_names[int(controls[worst])]
    if figure > threshold:
        own = sampler.halves.v[worst, sampler.point.states + int(controls[worst])]
        side = "below" if values[worst] < own else "above"
        return Check(NAME, Status.FAILED, f"The Hamiltonian is better at a value of {name} far {side} the curve's "
                     "own: curves that stay near, but take that value for short times, do better.", figure, threshold,
                     place, name)  # fmt: skip
    return Check(NAME, Status.PASSED, "At no place does any admissible value of a control that was tried make the "
                 "Hamiltonian better than the curve's own.", figure, threshold)  # fmt: skip


def bent_controls(sampler: Sampler) -> list[int]:
    """The controls in which the Hamiltonian is not linear, by structure."""
    n, m = sampler.point.states, sampler.point.controls
    pairs = zip(sampler.point.hessian_rows, sampler.point.hessian_columns, strict=True)
    return sorted({row - n for row, column in pairs if row == column and n <= row < n + m})


def best_trials(sampler: Sampler) -> tuple[Array, Array, NDArray[np.int64]]:
    """On the grid of halves: the largest relative gain of any trial (0: none), its value, and the control."""
    n, m, sample = sampler.point.states, sampler.point.controls, sampler.halves
    weights = sampler.weights(sample, constraints=False)
    length = (sampler.end - sampler.start)[sample.interval]
    slopes = sampler.gradient(sample, sampler.halves_slopes, weights)[:, n : n + m]
    own = _hamiltonian(sampler, sampler.halves_outputs, weights) / length
    admissible = _Admissible(sampler)
    best, value = np.zeros(len(own)), np.zeros(len(own))
    control = np.zeros(len(own), dtype=np.int64)
    for j in bent_controls(sampler):
        trials = _trials(sampler, j)
        v = np.tile(sample.v, (len(trials), 1))
        v[:, n + j] = trials.ravel()
        made = mapped(sampler.point.value, v, np.tile(sample.d, (len(trials), 1))).reshape(*trials.shape, -1)
        there = _hamiltonian(sampler, made, weights) / length
        first = np.minimum((trials - sample.v[:, n + j]) * slopes[:, j], 0.0)
        gains = (own - there + first) / sampler.power
        gains[~(np.isfinite(gains) & admissible(made))] = 0.0
        chosen = np.argmax(gains, axis=0), np.arange(len(own))
        better = gains[chosen] > best
        best[better], value[better], control[better] = gains[chosen][better], trials[chosen][better], j
    return best, value, control


def _hamiltonian(sampler: Sampler, outputs: Array, weights: Array) -> Array:
    """H per fraction without the constraints."""
    n, c = sampler.point.states, sampler.point.constraints
    terms = outputs * weights
    terms[..., n : n + c] = 0.0
    return np.asarray(terms.sum(axis=-1))


def _trials(sampler: Sampler, j: int) -> Array:
    """Values of a control at every place of the grid of halves (trials x places)."""
    own = sampler.halves.v[:, sampler.point.states + j]
    lower, upper = sampler.bounds[2][j], sampler.bounds[3][j]
    if np.isfinite(upper - lower):
        return np.repeat((lower + SHARES * (upper - lower))[:, None], len(own), axis=1)
    size = sampler.control_sizes[j]
    both = np.column_stack([-STEPS, STEPS]).ravel()
    trials = np.vstack([own + both[:, None] * size, -own, np.zeros_like(own)])
    return np.asarray(np.clip(trials, lower, upper))


class _Admissible:
    """Whether outputs keep the inequalities that hold controls."""

    def __init__(self, sampler: Sampler) -> None:
        n, constants = sampler.point.states, constants_of(sampler.compiled)
        self.rows = [n + k for k in range(sampler.point.constraints) if sampler.holds_controls(n + k)]
        limits = [interval_of(sampler.compiled.pointwise[row - n], constants) for row in self.rows]
        self.lower, self.upper = np.array(limits).reshape(-1, 2).T

    def __call__(self, outputs: Array) -> NDArray[np.bool_]:
        values = outputs[..., self.rows]
        return np.asarray(np.all((values >= self.lower) & (values <= self.upper), axis=-1))
