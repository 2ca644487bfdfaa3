"""Does the curve keep its limits everywhere, also between the nodes?

Every bound and every pointwise constraint is looked at on a grid ten times finer than the collocation points.
Controls with constant bounds are handed over clipped, so those bounds hold by construction.  A constraint on states
alone counts by its largest violation.  One that holds controls too counts by violation times duration: a control may
jump, and a polynomial through a jump overshoots on an interval that the refinement has made as narrow as the tolerance
asks for.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import Sample, Sampler
from solvers.solution import Check, Status
from solvers.transcription.limits import constants_of, interval_of

Array = NDArray[np.float64]

NAME = "limits"
FINER = 10


@dataclass(frozen=True, slots=True)
class Body:
    """A quantity on the grid with its limits, its size, and whether it may jump because it holds controls."""

    label: str
    values: Array
    lower: float
    upper: float
    size: float
    jumps: bool

    def violation(self) -> Array:
        """How far the body is outside, relative to its size; infinite where it is undefined."""
        outside = np.maximum(np.maximum(self.lower - self.values, self.values - self.upper), 0.0) / self.size
        return np.where(np.isfinite(outside), outside, np.inf)


def check(sampler: Sampler) -> Check:
    """The largest violation relative to the size of the body, against ten times the tolerance."""
    threshold = 10 * sampler.tolerance
    states_bounded = any(np.isfinite(bound).any() for bound in sampler.bounds[:2])
    if not states_bounded and sampler.point.constraints == len(sampler.compiled.lowered.equalities):
        if any(np.isfinite(bound).any() for bound in sampler.bounds[2:]):
            return Check(NAME, Status.PASSED, "Controls are kept inside their bounds everywhere.", 0.0, threshold)
        return Check(NAME, Status.NOT_APPLICABLE, "There are no bounds and no pointwise constraints.")
    sample = fine_grid(sampler)
    worst: tuple[float, float | None, str] = (0.0, None, "")
    for body in bodies(sampler, sample):
        outside = body.violation()
        if body.jumps:
            outside = outside * np.abs(sampler.length / sampler.span)[sample.interval]
            share = np.bincount(sample.interval, outside, sampler.count) / np.bincount(sample.interval)
            interval = int(np.argmax(share))
            figure, place = float(share[interval]), float(sampler.path.breaks[interval])
        else:
            index = int(np.argmax(outside))
            figure, place = float(outside[index]), float(sample.places[index])
        if figure > worst[0]:
            worst = (figure, place, body.label)
    largest, at, subject = worst
    if largest == 0:
        sentence = f"Every limit holds at all {len(sample.places)} places looked at."
    else:
        sentence = f"'{subject}' is exceeded by at most {largest:.1e} of its size."
    status = Status.PASSED if largest <= threshold else Status.FAILED
    return Check(NAME, status, sentence, largest, threshold, at, subject)


def fine_grid(sampler: Sampler) -> Sample:
    """Places in every interval, both ends among them, denser towards the ends where polynomials overshoot."""
    degrees = [i.scheme.degree for i in sampler.path.program.mesh.intervals]
    count = FINER * max(degrees) if len(degrees) <= 200 else FINER * int(np.ceil(np.mean(degrees)))
    return sampler.grid((1 - np.cos(np.linspace(0.0, np.pi, count + 1))) / 2)


def bodies(sampler: Sampler, sample: Sample) -> Iterator[Body]:
    """Every bounded state and every pointwise constraint that is not a line of the dynamics."""
    n, point = sampler.point.states, sampler.point
    lower, upper = sampler.bounds[:2]
    for state in np.flatnonzero(np.isfinite(lower) | np.isfinite(upper)):
        values = sample.v[:, state]
        size = max(_limit_size(lower[state], upper[state]), float(sampler.state_sizes[state]))
        yield Body(sampler.state_names[state], values, float(lower[state]), float(upper[state]), size, False)
    lines = len(sampler.compiled.lowered.equalities)
    if point.constraints == lines:
        return
    outputs = sampler.outputs(sample)
    sizes = sampler.output_sizes
    constants = constants_of(sampler.compiled)
    for index, condition in enumerate(sampler.compiled.pointwise[lines:], start=n + lines):
        values = outputs[:, index]
        least, most = interval_of(condition, constants)
        largest = float(np.abs(values[np.isfinite(values)]).max(initial=0.0))
        size = max(_limit_size(least, most), largest, sizes[index]) or 1.0
        yield Body(condition.label, values, least, most, size, sampler.holds_controls(index))


def _limit_size(lower: float, upper: float) -> float:
    return max((abs(float(limit)) for limit in (lower, upper) if np.isfinite(limit)), default=0.0)
