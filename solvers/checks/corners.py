"""Do the corners stand where they should (Weierstrass, Erdmann)?

At a corner the controls jump while curve and costates go on.  Whatever its place, moving it a little must gain nothing:
the Hamiltonian is the same on both sides.  (For dynamics y' = u that is: y' L_y' - L is continuous; that L_y' is, the
check of stationarity sees on both sides.)  Left out are the places of the problem itself, which nothing lets move,
and places where the costates jump as well, as at the ends of arcs along limits of the states.  The figure is the
largest jump of the Hamiltonian, relative to its size, times the share of the range by which the corner could move to
either side before it meets another one: what moving it could gain.

References: Erdmann (1877), Journal fuer die reine und angewandte Mathematik 82; Gelfand, Fomin (1963), Calculus of
Variations, section 15 (from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import Sampler
from solvers.search.signals import SWITCH
from solvers.solution import Check, Status
from solvers.transcription.evaluation import mapped
from solvers.transcription.functions import rounded_functions

Array = NDArray[np.float64]

NAME = "corners"
SHARP = 0.05
"""Least jump of a control, relative to its size, that makes a corner."""
SAME = 1e-3
"""Jump of a costate, relative to its size, up to which it counts as continuous."""


def check(sampler: Sampler) -> Check:
    """The largest jump of the Hamiltonian at a corner, against the square root of the tolerance."""
    found = corners(sampler)
    if not len(found):
        return Check(NAME, Status.NOT_APPLICABLE, "The curve has no corner that could move.")
    if rounded_functions(sampler.problem):
        return Check(NAME, Status.NOT_APPLICABLE, "Formulas with kinks may make corners of their own.")
    threshold = float(np.sqrt(sampler.tolerance))
    left, right = (_hamiltonian(sampler, found - 1, 1.0), _hamiltonian(sampler, found, 0.0))
    jumps = np.abs(right - left) / sampler.power
    jumps = np.where(np.isfinite(jumps), jumps, np.inf)
    jumps *= _room(sampler, found)
    worst = int(np.argmax(jumps))
    figure = float(jumps[worst])
    status = Status.PASSED if figure <= threshold else Status.FAILED
    count = "1 corner" if len(found) == 1 else f"{len(found)} corners"
    place = float(sampler.path.breaks[found[worst]])
    sentence = f"{count}; moving one could gain at most {figure:.1e} of the functional."
    return Check(NAME, status, sentence, figure, threshold, place)


def corners(sampler: Sampler) -> NDArray[np.int64]:
    """The inner breaks at which a control jumps, the costates do not, and that something lets move."""
    if not sampler.point.controls or sampler.count < 2:
        return np.zeros(0, dtype=np.int64)
    controls, costates = sampler.control_ends, sampler.costate_ends
    jump = np.abs(controls[1:, 0] - controls[:-1, 1]) / sampler.control_sizes
    leap = np.abs(costates[1:, 0] - costates[:-1, 1])
    sizes = np.abs(sampler.continued.values).max(axis=0, initial=0.0)
    whole = np.all(leap <= SAME * np.where(sizes > 0, sizes, 1.0), axis=1)
    places = sampler.problem.places
    movable = np.ones(sampler.count + 1, bool)
    movable[[node for node, place in zip(sampler.path.program.layout.at_place, places, strict=True)
             if not place.label.startswith(SWITCH + " ")]] = False  # fmt: skip
    return np.flatnonzero((jump.max(axis=1) > SHARP) & whole & movable[1:-1]) + 1


def _room(sampler: Sampler, found: NDArray[np.int64]) -> Array:
    """How far each corner is from the next corner or place, relative to the range."""
    breaks = sampler.path.breaks
    stops = np.unique(np.concatenate([breaks[found], sampler.path.places, breaks[[0, -1]]]))
    at = np.searchsorted(stops, breaks[found])
    return np.asarray(np.minimum(stops[at] - stops[at - 1], stops[at + 1] - stops[at]) / sampler.span)


def _hamiltonian(sampler: Sampler, interval: NDArray[np.int64], local: float) -> Array:
    """H at one end of intervals, without the constraints."""
    n, c = sampler.point.states, sampler.point.constraints
    sample = sampler.sample(interval, np.full(len(interval), local))
    terms = mapped(sampler.point.value, sample.v, sample.d) * sampler.weights(sample, constraints=False)
    terms[:, n : n + c] = 0.0
    return np.asarray(terms.sum(axis=1) / (sampler.end - sampler.start)[interval])
