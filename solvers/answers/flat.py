"""Directions in which a found curve may be moved and nothing changes: what is free that nothing determines there.

Where the second variation is not decided, some variation may keep all conditions and change the functional by nothing,
as along a family of equally good curves: shifted, turned, begun elsewhere.  Such variations are the kernel of the
reduced Hessian, for both quadratures (`curvature`); but a minimum that is only very flat has one too.  So the curve is
really moved along them, put back onto the conditions, and its value compared.  What then stays the same along a whole
unknown is named; a control between two switches, say, that is free on one interval only, is not.

Reference: Nocedal, Wright (2006), Numerical Optimization, section 16.1 (reduced Hessian; from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Collection

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigh, pinv

from solvers.checks import inertia
from solvers.checks.sampling import Sampler
from solvers.checks.second_order import Second, hessian_of_program, second_order
from solvers.transcription.trajectory import Trajectory
from solvers.undetermined import Undetermined

Array = NDArray[np.float64]

LARGEST = 800
"""Up to so many variables: the kernel is a full matrix."""
FLAT = 1e-6
"""Second variation, relative to the functional and to a change as large as the curve, that counts as none."""
STEP = 0.03
"""How far the curve is moved, relative to its size."""
RETURNS = 4
"""Newton steps that put it back onto the conditions."""
SAME = 1e-8
"""The least relative change of the value by that which is noticed."""
WHOLE = 0.5
"""Least share of its range along which an unknown has to be free: (mean |d|)^2 over the mean of d^2."""
TAKES_PART = 0.1
"""Least movement of what is named, beside that of what moves most."""
UNEVEN = 1.5
"""How much more than on average the movement at a place has to be, for the place to be told."""


def flat_directions(
    path: Trajectory, names: Collection[str], value_error: float, to_place: Callable[[float], float] = lambda at: at
) -> tuple[Undetermined, ...]:
    """Which of the unknowns and parameters (by `names`) may move together while nothing else changes.

    `value_error` (SI) is how well the value is known; `to_place` turns a place of the path into one of the problem.
    """
    if path.program.layout.size > LARGEST:
        return ()
    sampler = Sampler(path)
    second = second_order(sampler)
    if not second.hessian.finite:
        return ()
    directions = _directions(sampler, second)
    if not directions.shape[1]:
        return ()
    kept = _that_keep_all(sampler, second, directions, value_error)
    return _named(sampler, np.array(kept).T, names, to_place) if kept else ()


def _directions(sampler: Sampler, second: Second) -> Array:
    """Variations (columns, scaled as z) that keep what is active and change the functional by nothing in second order.

    They are orthonormal in the mean square of the curve relative to its size.
    """
    columns = np.flatnonzero(~(second.fixed | second.resting))
    rows = np.flatnonzero(second.equalities | second.at_limit)
    kernel = inertia.kernel(inertia.normal(second.jacobian.sparse()[rows][:, columns]).toarray())
    size = np.zeros(len(sampler.path.z))
    if not kernel.shape[1]:
        return np.zeros((len(size), 0))

    def reduced(form: Array, space: Array) -> Array:
        return np.asarray(space.T @ form @ space)

    norm = reduced(_norm(sampler, second)[np.ix_(columns, columns)], kernel)
    norm += 1e-12 * np.trace(norm) / len(norm) * np.eye(len(norm))
    for hessian in (second.hessian, hessian_of_program(sampler.path)):
        bend = reduced(hessian.dense()[np.ix_(columns, columns)], kernel)
        values, vectors = eigh((bend + bend.T) / 2, norm)
        kernel = kernel @ vectors[:, np.abs(values) <= FLAT]
        norm = np.eye(kernel.shape[1])
        if not kernel.shape[1]:
            break
    found = np.zeros((len(size), kernel.shape[1]))
    found[columns] = kernel
    return found


def _norm(sampler: Sampler, second: Second) -> Array:
    """The mean square of states, controls and parameters relative to their sizes, times the size of the functional."""
    path, where = sampler.path, sampler.path.program.layout
    norm = second.metric.dense()
    share = np.abs(where.measures * where.lengths(path.places) / sampler.span)
    unit = sampler.value_size / abs(path.program.value_scale)
    scale = path.program.scale[where.controls] / sampler.control_sizes
    norm[where.controls, where.controls] += unit * share[:, None] * scale**2
    return np.asarray(norm)


def _that_keep_all(sampler: Sampler, second: Second, directions: Array, value_error: float) -> list[Array]:
    """The directions in which the curve, moved either way and put back onto the conditions, is worth the same."""
    program = sampler.path.program
    z = sampler.path.z / program.scale
    rows = np.flatnonzero(second.equalities | second.at_limit)
    free = np.flatnonzero(~(second.fixed | second.resting))
    back = pinv(second.jacobian.dense()[np.ix_(rows, free)])
    before, numbers = program.numbers.value(z), program.numbers
    allowed = SAME * max(abs(before), 1e-3) + value_error / abs(program.value_scale)
    target = numbers.constraints(z)[rows]

    def same(moved: Array) -> bool:
        for _ in range(RETURNS):
            moved[free] -= back @ (numbers.constraints(moved)[rows] - target)
        missed = np.abs(numbers.constraints(moved)[rows] - target).max(initial=0.0)
        inside = ((moved >= program.lower - SAME) & (moved <= program.upper + SAME)).all()
        return bool(inside and missed <= SAME and abs(numbers.value(moved) - before) <= allowed)

    steps = STEP / np.abs(directions).max(axis=0)
    return [direction for direction, step in zip(directions.T, steps, strict=True)
            if same(z + step * direction) and same(z - step * direction)]  # fmt: skip


def _named(
    sampler: Sampler, directions: Array, names: Collection[str], to_place: Callable[[float], float]
) -> tuple[Undetermined, ...]:
    """The unknowns and parameters that move most, where they do so all along."""
    path, where = sampler.path, sampler.path.program.layout
    lowered, scale = path.program.compiled.lowered, path.program.scale
    moves: dict[str, Array] = {}
    for quantities, table, sizes in (
        (lowered.states, where.inner, sampler.state_sizes),
        (lowered.controls, where.controls, sampler.control_sizes),
    ):
        for k, (name, order) in enumerate(quantities):
            if order == 0:
                moved = directions[table[:, k]] * (scale[table[:, k]] / sizes[k])[:, None]
                moves[name] = np.sqrt((moved**2).sum(axis=1))
    share = np.abs(where.measures * where.lengths(path.places) / sampler.span)
    whole = {name: float(share @ move) for name, move in moves.items()}
    even = {name: whole[name] ** 2 / max(float(share @ move**2), 1e-300) for name, move in moves.items()}
    for parameter, index in zip(sampler.problem.parameters, where.parameters, strict=True):
        whole[parameter.name] = float(np.sqrt((directions[index] ** 2).sum()))
    most = max(whole.values(), default=0.0)
    chosen = [name for name, size in whole.items() if size >= TAKES_PART * most and name in names]
    chosen = [name for name in chosen if even.get(name, 1.0) >= WHOLE]
    found = []
    for name in chosen:
        place = None
        if name in moves and moves[name].max() > UNEVEN * whole[name]:
            place = to_place(float(path.points[int(np.argmax(moves[name]))]))
        member = "unknowns" if name in moves else "parameters"
        found.append(Undetermined(name, f"/{member}/{name}", _sentence(name, chosen), place))
    return tuple(found)


def _sentence(name: str, chosen: list[str]) -> str:
    others = [other for other in chosen if other != name]
    together = f" together with {listed(others)}" if others else ""
    return (f"Nothing determines {name} here: when it is moved{together} by {STEP:.0%} of its size, so that all "
            "conditions hold, the value stays the same, as along a family of equally good curves.")  # fmt: skip


def listed(names: list[str]) -> str:
    """Names in a sentence."""
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
