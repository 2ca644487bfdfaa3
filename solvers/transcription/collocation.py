"""The points, matrices and weights of one collocation interval, in the local variable that runs from 0 to 1.

Two families of points: Radau points end with the right end, which damps the ringing that index-raised constraints
and singular arcs provoke; Gauss points touch neither end, so an integrand may be infinite there.
References: Hairer, Wanner (1996), Solving Ordinary Differential Equations II, sections IV.5 and VI.1; Garg et al.
(2010), A unified framework for the numerical solution of optimal control problems using pseudospectral methods,
Automatica 46.  (Both from memory.)
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from functools import lru_cache

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

Array = NDArray[np.float64]


class Family(Enum):
    """Which points an interval is collocated at."""

    RADAU = "radau"
    GAUSS = "gauss"


@dataclass(frozen=True, slots=True)
class Scheme:
    """One interval with `degree` collocation points.

    `points` (K), `weights` (K, they integrate from 0 to 1), `differentiate` (K x (K+1): slopes at the points from the
    values at 0 and at the points), `extrapolate` (K+1: value at 1), `state_modes` ((K+1) x (K+1): Legendre coefficients
    from the values at 0 and at the points), `control_modes` (K x K: the same from the values at the points).
    """

    family: Family
    degree: int
    points: Array
    weights: Array
    differentiate: Array
    extrapolate: Array
    state_modes: Array
    control_modes: Array


def _radau_points(degree: int) -> Array:
    """Zeros of P_K - P_(K-1), the Radau points that end with 1."""
    series = np.zeros(degree + 1)
    series[degree], series[degree - 1] = 1.0, -1.0
    points = np.sort(np.real(legendre.legroots(series)))
    slope = legendre.legder(series)
    for _ in range(2):  # Newton polish: the companion matrix loses a few digits at high degree
        points[:-1] -= legendre.legval(points[:-1], series) / legendre.legval(points[:-1], slope)
    points[-1] = 1.0
    return points


@lru_cache(maxsize=256)
def scheme(family: Family, degree: int) -> Scheme:
    """The scheme of a family with `degree` >= 1 points."""
    points = _radau_points(degree) if family is Family.RADAU else legendre.leggauss(degree)[0]
    support = np.concatenate([[-1.0], points])
    state_modes = np.linalg.inv(legendre.legvander(support, degree))
    control_modes: Array = np.linalg.inv(legendre.legvander(points, degree - 1)).astype(np.float64)
    slopes = legendre.legvander(points, degree - 1) @ legendre.legder(np.eye(degree + 1)).reshape(degree, degree + 1)
    return Scheme(
        family=family,
        degree=degree,
        points=(points + 1) / 2,
        weights=control_modes[0].copy(),  # the mean of a Legendre series is its first coefficient
        differentiate=2 * slopes @ state_modes,
        extrapolate=np.ones(degree + 1) @ state_modes,
        state_modes=state_modes,
        control_modes=control_modes,
    )
