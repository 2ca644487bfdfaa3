"""Do the conditions at places and the integral conditions hold, and is the value what the curve is worth?

All integrals are taken anew along the stored polynomials.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.sampling import Sampler
from solvers.solution import Check, Status
from solvers.transcription.evaluation import mapped
from solvers.transcription.limits import constants_of, interval_of

Array = NDArray[np.float64]

NAME = "conditions"


def check(sampler: Sampler, value_error: float | None = None) -> Check:
    """The largest violation relative to the size of the condition, against ten times the tolerance.

    `value_error` is the stated error of the value (SI): the value taken anew may differ by as much.
    """
    threshold = 10 * sampler.tolerance
    path = sampler.path
    y, bodies, cost = _anew(sampler)
    sizes = _sizes(sampler, y)
    findings: list[tuple[float, float | None, str]] = [(0.0, None, "")]
    constants = constants_of(sampler.compiled)
    for state, at, condition in sampler.compiled.fixed:
        value = float(path.nodes[path.program.layout.at_place[at], state])
        outside = _outside(value, *interval_of(condition, constants)) / sampler.state_sizes[state]
        findings.append((outside, float(path.places[at]), condition.label))
    for index, condition in enumerate(sampler.compiled.conditions):
        least, most = interval_of(condition, constants)
        size = max([sizes[index], *(abs(limit) for limit in (least, most) if np.isfinite(limit))]) or 1.0
        findings.append((_outside(float(bodies[index]), least, most) / size, None, condition.label))
    value = cost + float(bodies[-1])
    worth = sampler.asked.value  # what the user's functional makes of it
    size = abs(worth(max(abs(path.value), sampler.value_size)))
    known = abs(worth(path.value + (value_error or 0.0)) - worth(path.value))
    gap = abs(worth(value) - worth(path.value)) / size / max(1.0, known / (threshold * size))
    findings.append((gap if np.isfinite(gap) else np.inf, None, "the value"))
    figure, place, subject = max(findings, key=lambda finding: finding[0])
    if subject == "the value":
        sentence = f"The functional, integrated anew, is {sampler.told(value)}; that is {figure:.1e} off the value."
    elif figure == 0:
        sentence = "Every condition holds exactly."
    else:
        sentence = f"'{subject}' is missed by {figure:.1e} of its size at worst; integrals were taken anew."
    status = Status.PASSED if figure <= threshold else Status.FAILED
    return Check(NAME, status, sentence, figure, threshold, place, subject)


def value_anew(sampler: Sampler) -> float:
    """The functional (SI), integrated anew."""
    _, bodies, cost = _anew(sampler)
    return cost + float(bodies[-1])


def _anew(sampler: Sampler) -> tuple[Array, Array, float]:
    """The inputs of the end function with all integrals taken anew, its outputs, and the integral of the functional."""
    integrals, cost = sampler.anew
    path, end = sampler.path, sampler.compiled.end
    y = np.concatenate([path.nodes[path.program.layout.at_place].ravel(), path.places, path.parameters, integrals])
    return y, mapped(end.value, y[None, :], sampler.constants[None, :])[0], cost


def _sizes(sampler: Sampler, y: Array) -> Array:
    """What the slopes of each condition make of the sizes of its variables."""
    end, where, scale = sampler.compiled.end, sampler.path.program.layout, sampler.path.program.scale
    slopes = mapped(end.jacobian, y[None, :], sampler.constants[None, :])[0]
    inputs = np.concatenate([np.tile(sampler.state_sizes, len(where.places)), scale[where.places],
                             scale[where.parameters], scale[where.integrals]])  # fmt: skip
    sizes = np.zeros(end.outputs)
    for row, column, slope in zip(end.jacobian_rows, end.jacobian_columns, slopes, strict=True):
        sizes[row] += abs(slope) * inputs[column] if np.isfinite(slope) else 0.0
    return sizes


def _outside(value: float, lower: float, upper: float) -> float:
    """How far a value is outside of its limits; infinite where it is undefined."""
    return max(lower - value, value - upper, 0.0) if np.isfinite(value) else np.inf
