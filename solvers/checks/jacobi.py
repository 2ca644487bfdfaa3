"""Where is the first point conjugate to the beginning?  Jacobi's equation, integrated along the curve.

Where nothing but the dynamics holds the neighbours of a curve, the best of them follow a linear Hamiltonian system: the
accessory problem of the second variation.  Its solutions that vanish at the beginning are a frame of n columns (x, p);
a place where some combination of them vanishes again is conjugate to the beginning.  The frame is carried from step to
step by Magnus's series of fourth order and kept orthonormal.  Whether x is singular shows in the eigenvalues of the
unitary matrix (p - i x)(p + i x)^-1: at the beginning all are one, from there they turn forwards, and the first that
has come round to one again is at the first conjugate point, however many come at once.

References: Gelfand, Fomin (1963), Calculus of Variations, chapter 5; Bryson, Ho (1975), Applied Optimal Control,
section 6.3; Magnus (1954), Communications on Pure and Applied Mathematics 7; Arnold (1967), Functional Analysis and its
Applications 1 (the turning of Lagrangian frames).  (All from memory.)
"""

from __future__ import annotations

from bisect import bisect_left

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

from solvers.checks.sampling import Sampler
from solvers.checks.second_order import Second
from solvers.transcription.evaluation import mapped

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

NODES = (1 + np.array([-1.0, 1.0]) / np.sqrt(3)) / 2
"""Gauss points of a step."""
LEAST_STEPS = 4
"""Least number of steps in an interval of the mesh."""
MOST_STEPS = 4000
"""Where the system is so stiff that it takes more, nothing is said."""
TURN = 0.5
"""How far the frame may turn in a step, in all its directions together."""
ROUNDING = 1e-12
"""Angles nearer to zero than this, from below, are zero."""
SECTIONS, ROUNDS = 32, 6
"""Into how many parts a step is cut, and how often, to find the place within."""


def applies(sampler: Sampler, second: Second) -> bool:
    """Whether the curve begins at a given state and nothing but the dynamics holds its neighbours.

    What holds at the end does not matter: neighbours that vanish before it keep whatever that is.
    """
    where, rows = sampler.path.program.layout, sampler.path.program.rows
    if not (sampler.point.states and sampler.point.controls) or len(where.places) > 2:
        return False
    begins = all(first for first, _ in sampler.fixed_ends)
    pointwise = slice(rows.pointwise, rows.rims)
    held = second.equalities[pointwise] | second.at_limit[pointwise]
    resting = second.resting[: where.nodes.max() + 1].any() or second.fixed[where.controls].any()
    return begins and not resting and not held.any() and rows.conditions == rows.integrals


def first_conjugate(sampler: Sampler) -> float | None:
    """The first place conjugate to the beginning; None where there is none, or where this cannot tell.

    It cannot where the Hamiltonian is not strictly convex in the controls, and where the system is too stiff.
    """
    n = sampler.point.states
    each = len(sampler.halves.local) // sampler.count
    try:
        unit = _balancing(_system(sampler, sampler.halves.interval, sampler.halves.local, 1.0), n)
        sizes = np.abs(_system(sampler, sampler.halves.interval, sampler.halves.local, unit)).sum(axis=2).max(axis=1)
        turns = n * sizes.reshape(sampler.count, each).max(axis=1) * sampler.width / TURN
        if not turns.sum() <= MOST_STEPS:
            return None
        steps = np.maximum(np.ceil(turns), LEAST_STEPS).astype(np.int64)
        interval = np.repeat(np.arange(sampler.count), steps)
        width = 1 / steps[interval]
        start = (np.arange(len(interval)) - (np.cumsum(steps) - steps)[interval]) * width
        carried = _carried(sampler, interval, start, width, unit)
        if not np.isfinite(carried).all():
            return None
        frame = np.vstack([np.zeros((n, n)), np.eye(n)])
        for k, step in enumerate(carried):
            after = np.linalg.qr(step @ frame)[0]
            if _come_round(frame, after):
                local = start[k] + width[k] * _within(sampler, frame, interval[k], start[k], width[k], unit)
                return float(sampler.sample(interval[k : k + 1], np.array([local])).places[0])
            frame = after
    except np.linalg.LinAlgError:  # not strictly convex
        return None
    return None


def _within(sampler: Sampler, frame: Array, interval: int, start: float, width: float, unit: float) -> float:
    """The share of a step after which the first direction has come round."""
    low, high = 0.0, 1.0
    for _ in range(ROUNDS):
        shares = low + (high - low) * np.arange(1, SECTIONS + 1) / SECTIONS
        here, begun = np.full(SECTIONS, interval), np.full(SECTIONS, start)
        steps = _carried(sampler, here, begun, shares * width, unit)
        first = bisect_left(
            range(SECTIONS - 1), True, key=lambda k: _come_round(frame, np.linalg.qr(steps[k] @ frame)[0])
        )
        low, high = float(shares[first - 1]) if first else low, float(shares[first])
    return high


def _carried(sampler: Sampler, interval: Indices, start: Array, width: Array, unit: float) -> Array:
    """What steps (K), given by their local start and width in an interval, do to the frame (K x 2n x 2n)."""
    local = (start[:, None] + width[:, None] * NODES).ravel()
    systems = _system(sampler, np.repeat(interval, 2), local, unit)
    first, second = systems[::2], systems[1::2]
    h = (width * sampler.width[interval])[:, None, None]
    return np.asarray(expm(h / 2 * (first + second) + np.sqrt(3) / 12 * h**2 * (second @ first - first @ second)))


def _balancing(systems: Array, n: int) -> float:
    """The unit of the value in which states and costates answer each other equally."""
    by_costates, by_states = np.abs(systems[:, :n, n:]).mean(), np.abs(systems[:, n:, :n]).mean()
    return float(np.sqrt(by_states / by_costates)) if by_states > 0 and by_costates > 0 else 1.0


def _system(sampler: Sampler, interval: Indices, local: Array, unit: float) -> Array:
    """The matrix of the accessory system per fraction of the curve at places, in the sizes of states, value in `unit`.

    Raises LinAlgError where the Hamiltonian is not strictly convex in the controls, or has no second derivatives.
    """
    point, sample = sampler.point, sampler.sample(interval, local)
    n, used = point.states, point.states + point.controls
    size = sampler.input_sizes[:used]
    rates, bends = np.zeros((len(local), n, used)), np.zeros((len(local), used, used))
    slopes = sampler.slopes(sample)
    for entry, (row, column) in enumerate(zip(point.jacobian_rows, point.jacobian_columns, strict=True)):
        if row < n and column < used:
            rates[:, row, column] = slopes[:, entry] * size[column] / size[row]
    numbers = mapped(point.hessian, sample.v, sample.d, sampler.weights(sample))
    for entry, (row, column) in enumerate(zip(point.hessian_rows, point.hessian_columns, strict=True)):
        if max(row, column) < used:
            scaled = numbers[:, entry] * size[row] * size[column] / unit
            bends[:, row, column] = bends[:, column, row] = scaled
    if not (np.isfinite(rates).all() and np.isfinite(bends).all()):
        raise np.linalg.LinAlgError
    by_control, cross = rates[:, :, n:], bends[:, n:, :n]
    root = np.linalg.cholesky(bends[:, n:, n:])
    answer = np.linalg.solve(root, cross)
    pull = np.linalg.solve(root, np.swapaxes(by_control, 1, 2))
    drift = rates[:, :, :n] - np.swapaxes(pull, 1, 2) @ answer
    return np.block([
        [drift, -np.swapaxes(pull, 1, 2) @ pull],
        [np.swapaxes(answer, 1, 2) @ answer - bends[:, :n, :n], -np.swapaxes(drift, 1, 2)],
    ])  # fmt: skip


def _come_round(before: Array, after: Array) -> bool:
    """Whether a direction of the frame has come round from one frame to the next."""
    first, last = _turned(before), _turned(after)
    ratio = np.linalg.det(last) / np.linalg.det(first)
    return bool(_angles(first) + np.angle(ratio) - _angles(last) > np.pi)


def _turned(frame: Array) -> NDArray[np.complex128]:
    x, p = np.split(frame, 2)
    return np.asarray((p - 1j * x) @ np.linalg.inv(p + 1j * x))


def _angles(turned: NDArray[np.complex128]) -> float:
    """The sum of the angles of its eigenvalues, each from zero up to a whole turn."""
    angles = np.angle(np.linalg.eigvals(turned))
    return float(np.where(angles < -ROUNDING, angles + 2 * np.pi, angles).sum())
