"""Multipliers that are not unique, chosen anew.

Where a state rests on its limit because a control is held on its own, both limits say the same.  Then their
multipliers are not unique: a minimiser that has the control fixed may find any of them, with signs that no inequality
may have.  Here the limit on the state is dropped along such an arc and its costate found anew from the stationarity of
the program in that state: continued from where the arc begins (a push of the limit may then remain where it ends), or
from where it ends.  What comes out are multipliers of the same problem; whether they prove anything is for the checks
to say, which weigh every sign and every equation as usual.

The same holds where a control that acts linearly is kept calm while active constraints determine it anyhow.

Reference: Hartl, Sethi, Vickson (1995), SIAM Review 37, section 4, on multipliers of state limits (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from solvers.checks import free_ends, stationarity
from solvers.checks.idle import idle_arcs, with_right_signs
from solvers.checks.multipliers import rate_rows, with_multipliers
from solvers.checks.sampling import Sampler
from solvers.transcription.limits import quantity_bounds
from solvers.transcription.trajectory import Trajectory

if TYPE_CHECKING:
    import scipy.sparse as sp

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Indices = NDArray[np.int64]

RESTING = 1e-6
"""How near to its limit, relative to its scale, a state has to stay all along."""
GOOD = 1e-6
"""Figures of the checks of first order up to which multipliers are as good as any."""


@dataclass(frozen=True, slots=True)
class Arc:
    """A state along a stretch: its variables between the ends, those at both ends, and the rows of its rate."""

    inside: Indices
    entry: int
    exit: int
    rows: Indices


def unambiguous(path: Trajectory) -> Trajectory:
    """The path with those of its possible multipliers that come nearest to what the checks of first order ask for.

    With its own where these leave nothing to ask for.
    """

    def figure(candidate: Trajectory) -> float:
        with np.errstate(all="ignore"):
            sampler = Sampler(candidate)
            return max(stationarity.check(sampler).figure or 0.0, free_ends.check(sampler).figure or 0.0)

    if not redundant_arcs(path) and not len(_calm_points(path)) and not idle_arcs(path):
        return path
    best, least, others = path, figure(path), without_redundancy(path)
    while least > GOOD and (other := next(others, None)) is not None:
        if (reached := figure(other)) < least:
            best, least = other, reached
    return best


def redundant_arcs(path: Trajectory) -> list[Arc]:
    """The arcs where a control is held and a state, itself not held, rests on a limit all along."""
    program = path.program
    where, lowered = program.layout, program.compiled.lowered
    lower, upper = quantity_bounds(program.compiled)[:2]
    held = [(h.stretch, (h.name, h.order)) for h in lowered.problem.held]
    arcs = []
    for stretch in sorted({s for s, quantity in held if quantity in lowered.controls}):
        points = np.flatnonzero(where.stretch == stretch)
        entry, end = int(where.at_place[stretch]), int(where.at_place[stretch + 1])
        for state, quantity in enumerate(lowered.states):
            if (stretch, quantity) in held:
                continue
            values = np.concatenate([path.nodes[[entry, end], state], path.states[points, state]])
            near = RESTING * float(program.scale[where.nodes[0, state]])
            if min(np.abs(values - lower[state]).max(), np.abs(values - upper[state]).max()) <= near:
                first, last = int(where.nodes[entry, state]), int(where.nodes[end, state])
                own = np.union1d(where.inner[points, state], where.nodes[entry : end + 1, state])
                inside = own[(own != first) & (own != last)]
                arcs.append(Arc(inside, first, last, rate_rows(path, points, entry, end, state)))
    return arcs


def without_redundancy(path: Trajectory) -> Iterator[Trajectory]:
    """The same curve with other multipliers: those limits dropped, costates continued from either side; then those
    with the right signs along idle arcs."""
    arcs, calm = redundant_arcs(path), _calm_points(path)
    for forwards in (True, False) if arcs else (True,):
        found = _chosen_anew(path, arcs, calm, forwards) if arcs or len(calm) else None
        if found is not None:
            yield found
    if idle := idle_arcs(path):
        yield with_right_signs(path, idle)


def _calm_points(path: Trajectory) -> Indices:
    """The points where a control is kept calm while constraints that hold it may say the same."""
    program, where = path.program, path.program.layout
    stretches = {c.stretch for c in program.compiled.lowered.problem.calm}
    if not stretches or not program.compiled.point.constraints:
        return np.empty(0, dtype=np.int64)
    return np.flatnonzero(np.isin(where.stretch, sorted(stretches)))


def _chosen_anew(path: Trajectory, arcs: list[Arc], calm: Indices, forwards: bool) -> Trajectory | None:
    """Multipliers with the limits dropped; None where they are not determined."""
    program = path.program
    size = abs(program.value_scale)
    z, numbers = path.z / program.scale, program.numbers
    gradient = numbers.gradient(z)
    jacobian = numbers.jacobian_pattern.filled(numbers.jacobian(z))
    rows = path.row_multipliers * program.row_scale / size
    bounds = path.bound_multipliers * program.scale / size
    if len(calm):
        values = numbers.constraints(z)
        active = np.minimum(values - program.row_lower, program.row_upper - values) <= RESTING
        _without_calm(path, jacobian, gradient + bounds, rows, calm, active)
    for arc in arcs:
        columns = np.append(arc.inside, arc.entry if forwards else arc.exit)
        bounds[columns] = 0.0
        rows[arc.rows] = 0.0
        found = _determined(jacobian[arc.rows][:, columns], -(gradient + jacobian.T @ rows)[columns])
        if found is None:
            return None
        rows[arc.rows] = found
    pull = -(gradient + jacobian.T @ rows)
    ends = np.array([arc.exit if forwards else arc.entry for arc in arcs], dtype=np.int64)
    bounds[ends] = pull[ends]
    return with_multipliers(path, rows, bounds, pull)


def _determined(matrix: sp.csc_matrix, wanted: Array) -> Array | None:
    """The multipliers of rows that have wanted effects; None where the matrix is singular or not square."""
    from scipy.sparse.linalg import splu

    try:
        found = splu(matrix.T.tocsc()).solve(wanted)
    except (RuntimeError, ValueError):
        return None
    return np.asarray(found) if np.isfinite(found).all() else None


def _without_calm(
    path: Trajectory, jacobian: sp.csc_matrix, push: Array, rows: Array, points: Indices, active: Flags
) -> None:
    """Take back what the calming of a control says, and let the active constraints at each point say it instead.

    `rows` is changed in place; `push` is what objective and bounds add to the slope of the Lagrangian.
    """
    program, where = path.program, path.program.layout
    count, controls = program.compiled.point.constraints, where.controls.shape[1]
    rows[program.rows.rims + len(program.compiled.rims) : program.rows.integrals] = 0.0
    own = program.rows.pointwise + points[:, None] * count + np.arange(count)
    rows[own] = 0.0
    columns = where.controls[points]
    block = jacobian[:, columns.ravel()].tocsr()[own.ravel()].tocoo()
    same = block.row // count == block.col // controls
    effects = np.zeros((len(points), controls, count))
    row, column = block.row[same], block.col[same]
    effects[row // count, column % controls, row % count] = block.data[same]
    effects *= active[own][:, None, :]
    wanted = -(push + jacobian.T @ rows)[columns]
    rows[own] = np.einsum("pci,pi->pc", np.linalg.pinv(effects), wanted)
