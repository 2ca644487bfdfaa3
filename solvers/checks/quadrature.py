"""Integrals along the stored polynomials, by adaptive Gauss-Kronrod quadrature.

Pieces are cut towards their ends until both rules agree; it touches no end, so an integrand may be infinite there.

Reference: Piessens et al. (1983), QUADPACK (from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from solvers.checks.sampling import Sample, Sampler

Array = NDArray[np.float64]

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


def integrate(
    sampler: Sampler, accuracy: float, integrands: Callable[[Sample], Array], least: Array | float = 0.0
) -> Array:
    """The integrals of integrands (P x k, per fraction of the stretch), to a relative accuracy where it can be had.

    It is relative to the integral of absolute values, or to the `least` size of each that matters.
    """
    interval = np.arange(sampler.count)
    left, width = np.zeros(sampler.count), np.ones(sampler.count)
    total = size = np.zeros(0)
    for turn in range(ROUNDS):
        local = left[:, None] + width[:, None] * POINTS
        sample = sampler.sample(np.repeat(interval, len(POINTS)), local.ravel()) if turn else sampler.grid(POINTS)
        values = integrands(sample).reshape(len(interval), len(POINTS), -1)
        values = values * (sampler.width[interval] * width)[:, None, None]
        fine, coarse = np.einsum("q,kqi->ki", WEIGHTS, values), np.einsum("q,kqi->ki", COARSE, values)
        if turn == 0:
            size = np.maximum(np.nansum(np.abs(fine), axis=0), least)
            total = np.zeros_like(size)
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
    return total
