"""Is conserved what must be conserved?

Where neither dynamics nor integrands nor constraints hold the independent variable itself, the Hamiltonian is constant
between places (Beltrami); where they do not hold a state, its costate is (momentum).  Both are looked at between the
nodes; the figure is the mean deviation from the mean, relative to the size of the Hamiltonian.

The threshold is that of stationarity, for the same reason.

Reference: Gelfand, Fomin (1963), Calculus of Variations, sections 4 and 20 (from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import HALVES, Sampler
from solvers.solution import Check, Status

Array = NDArray[np.float64]

NAME = "first integral"


def check(sampler: Sampler) -> Check:
    """The largest mean deviation against the square root of the tolerance."""
    threshold = float(np.sqrt(sampler.tolerance))
    findings: list[tuple[float, float, str, str]] = []
    if autonomous(sampler):
        deviation, place = _deviation(sampler, hamiltonian(sampler)[:, None])
        figure = float(deviation[0] / sampler.power)
        findings.append((figure, float(place[0]), "Hamiltonian", f"The Hamiltonian is constant to {figure:.1e}."))
    cyclic = cyclic_states(sampler)
    if len(cyclic):
        costates = sampler.in_each(sampler.costates[:, :, cyclic], HALVES)
        deviation, place = _deviation(sampler, costates)
        for k, state in enumerate(cyclic):
            figure = float(deviation[k] * sampler.state_extents[state] / sampler.value_size)
            name = sampler.state_names[state]
            findings.append((figure, float(place[k]), name, f"The momentum of {name} is constant to {figure:.1e}."))
    if not findings:
        return Check(NAME, Status.NOT_APPLICABLE, f"Nothing is conserved: {sampler.problem.independent} appears by "
                     "itself, and so does every state.")  # fmt: skip
    figure, at, subject, sentence = max(findings, key=lambda finding: finding[0])
    status = Status.PASSED if figure <= threshold else Status.FAILED
    return Check(NAME, status, sentence, figure, threshold, at, subject)


def autonomous(sampler: Sampler) -> bool:
    """True where no output of the point function depends on the place itself."""
    return 0 not in sampler.point.value.jac_sparsity(0, 1).get_triplet()[1]


def hamiltonian(sampler: Sampler) -> Array:
    """H on the grid of halves, without the constraints (multipliers vanish off them)."""
    n, c = sampler.point.states, sampler.point.constraints
    terms = sampler.halves_outputs * sampler.weights(sampler.halves, constraints=False)
    terms[:, n : n + c] = 0.0
    return np.asarray(terms.sum(axis=1) / (sampler.end - sampler.start)[sampler.halves.interval])


def cyclic_states(sampler: Sampler) -> NDArray[np.int64]:
    """States that appear nowhere but by their rate, and that nothing bounds between the ends."""
    lower, upper = sampler.bounds[:2]
    free = ~(np.isfinite(lower) | np.isfinite(upper))
    free[[c for c in sampler.point.jacobian_columns if c < sampler.point.states]] = False
    return np.flatnonzero(free)


def _deviation(sampler: Sampler, values: Array) -> tuple[Array, Array]:
    """Mean |value - mean of its stretch| over the curve, and where it is worst, for each column."""
    weight = np.abs(sampler.halves.measure)[:, None]
    stretch = sampler.stretch[sampler.halves.interval]
    gaps = np.empty_like(values)
    for part in range(int(stretch[-1]) + 1):
        inside = stretch == part
        middle = (values[inside] * weight[inside]).sum(axis=0) / weight[inside].sum()
        gaps[inside] = np.abs(values[inside] - middle)
    gaps = np.where(np.isfinite(gaps), gaps, np.inf)
    worst = np.argmax(gaps * weight, axis=0)
    return (gaps * weight).sum(axis=0) / abs(sampler.span), sampler.halves.places[worst]
