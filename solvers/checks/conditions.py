"""Do the conditions at places and the integral conditions hold, and is the value what the curve is worth?

All integrals are taken anew along the stored polynomials by adaptive Gauss-Kronrod quadrature, whose pieces are cut
towards their ends until both rules agree; it touches no end, so an integrand may be infinite there.

Reference: Piessens et al. (1983), QUADPACK (from memory).
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
CUTS = np.array([0.0, 0.1, 0.5, 0.9, 1.0])
ROUNDS = 12
MOST_PIECES = 500
"""How many pieces may be cut further at once: more than the ends and kinks of any curve need."""

_KRONROD = np.array([0.991455371120812639206854697526329, 0.949107912342758524526189684047851,
                     0.864864423359769072789712788640926, 0.741531185599394439863864773280788,
                     0.586087235467691130294144691693910, 0.405845151377397166906606412076961,
                     0.207784955007898467600689403773245, 0.0])  # fmt: skip
_KRONROD_WEIGHTS = np.array([0.022935322010529224963732008058970, 0.063092092629978553290700663189204,
                             0.104790010322250183839876322541518, 0.140653259715525918745189590510238,
                             0.169004726639267902826583426598550, 0.190350578064785409913256402421014,
                             0.204432940075298892414161999234649, 0.209482141084727828012999174891714])  # fmt: skip
_GAUSS_WEIGHTS = np.array([0.129484966168869693270611432679082, 0.279705391489276667901467771423780,
                           0.381830050505118944950369775488975, 0.417959183673469387755102040816327])  # fmt: skip
POINTS = (np.concatenate([-_KRONROD[:-1], _KRONROD[::-1]]) + 1) / 2
WEIGHTS = np.concatenate([_KRONROD_WEIGHTS[:-1], _KRONROD_WEIGHTS[::-1]]) / 2
COARSE = np.zeros(15)
COARSE[1::2] = np.concatenate([_GAUSS_WEIGHTS[:-1], _GAUSS_WEIGHTS[::-1]]) / 2


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
    allowed = max(1.0, (value_error or 0.0) / (threshold * max(abs(path.value), sampler.value_size)))
    gap = abs(value - path.value) / max(abs(path.value), sampler.value_size) / allowed
    findings.append((gap if np.isfinite(gap) else np.inf, None, "the value"))
    figure, place, subject = max(findings, key=lambda finding: finding[0])
    if subject == "the value":
        sentence = f"The functional, integrated anew, is {value:.10g}; that is {figure:.1e} off the value."
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
    integrals, cost = integrate(sampler, 0.01 * sampler.tolerance)
    path, end = sampler.path, sampler.compiled.end
    y = np.concatenate([path.nodes[path.program.layout.at_place].ravel(), path.places, path.parameters, integrals])
    return y, mapped(end.value, y[None, :], sampler.constants[None, :])[0], cost


def integrate(sampler: Sampler, accuracy: float) -> tuple[Array, float]:
    """The integrals of the conditions and that of the functional (SI), to a relative accuracy where it can be had."""
    kept = slice(sampler.point.states + sampler.point.constraints, None)
    interval = np.arange(sampler.count)
    left, width = np.zeros(sampler.count), np.ones(sampler.count)
    total = np.zeros(sampler.point.outputs - kept.start)
    size = np.zeros_like(total)
    for turn in range(ROUNDS):
        local = left[:, None] + width[:, None] * POINTS
        sample = sampler.sample(np.repeat(interval, len(POINTS)), local.ravel()) if turn else sampler.grid(POINTS)
        values = sampler.outputs(sample)[:, kept].reshape(len(interval), len(POINTS), -1)
        values = values * (sampler.width[interval] * width)[:, None, None]
        fine, coarse = np.einsum("q,kqi->ki", WEIGHTS, values), np.einsum("q,kqi->ki", COARSE, values)
        if turn == 0:
            size = np.nansum(np.abs(fine), axis=0)
        good = np.all(np.abs(fine - coarse) <= accuracy * size / 10 + 1e-300, axis=1)
        good |= ~np.isfinite(fine).all(axis=1)  # undefined stays undefined, however finely it is cut
        good |= turn == ROUNDS - 1 or np.count_nonzero(~good) > max(MOST_PIECES, 2 * sampler.count)
        total += fine[good].sum(axis=0)
        interval, left, width = interval[~good], left[~good], width[~good]
        if not len(interval):
            break
        left = (left[:, None] + width[:, None] * CUTS[:-1]).ravel()
        width = (width[:, None] * np.diff(CUTS)).ravel()
        interval = np.repeat(interval, len(CUTS) - 1)
    return total[:-1], float(total[-1])


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
