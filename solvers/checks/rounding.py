"""What the rounding of functions with kinks changes of the value, and whether the curve runs along a concave kink.

To first order the best value changes by what the Hamiltonian changes along the curve, as the curve itself is
stationary: costates, multipliers and prices weigh what the deviations do to rates, constraints and conditions.

In a concave kink a curve may be stationary for the rounded function only: -|y| falls to both sides of y = 0, and
so does the functional, to first order, wherever the curve stays there along a stretch.

References: Fiacco (1983), Introduction to Sensitivity and Stability Analysis in Nonlinear Programming; Clarke (1983),
Optimization and Nonsmooth Analysis, chapter 2 (both from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks.quadrature import integrate
from solvers.checks.sampling import Sample, Sampler
from solvers.transcription.rounding import kinks_of

Array = NDArray[np.float64]

ACCURACY = 0.01
"""Relative accuracy of the integral of deviations."""
STRETCH = 1e-3
"""Least share of the range along which a curve runs in a kink; shorter ones are passed."""
FAINT = 1e-6
"""What a kink counts, relative to its most along the curve, below which it counts nothing."""


def effect(sampler: Sampler) -> float:
    """By how much the rounding may change the value (SI)."""
    along, ends = kinks_of(sampler.compiled)
    total = 0.0
    if along is not None:

        def deviating(sample: Sample) -> Array:
            found = along(sample.v, sample.d)
            counted = np.abs(np.einsum("po,pok->pk", sampler.weights(sample), found.slopes))
            return np.asarray(np.nan_to_num(counted * found.most, posinf=0.0).sum(axis=1, keepdims=True))

        total += float(integrate(sampler, ACCURACY, deviating)[0])
    if ends is not None:
        y, weights = sampler.end_inputs, sampler.end_weights
        found = ends(y[None, :], sampler.constants[None, :])
        total += float(np.abs(weights @ found.slopes[0]) @ found.most[0])
    return total


def concave(sampler: Sampler) -> tuple[float, float] | None:
    """The share of the range on which the curve runs along a concave kink, and where; None where there is no kink."""
    along, _ = kinks_of(sampler.compiled)
    if along is None:
        return None
    sample = sampler.halves
    found = along(sample.v, sample.d)
    counted = np.nan_to_num(np.einsum("po,pok->pk", sampler.weights(sample), found.slopes))
    counted[np.abs(counted) <= FAINT * np.abs(counted).max(axis=0, initial=0.0)] = 0.0
    inside = (counted * found.bends < 0).any(axis=1)
    share = float(sampler.mean(inside.astype(float)))
    return share, float(sample.places[int(np.argmax(inside))])
