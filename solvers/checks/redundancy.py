"""Where a state rests on its limit because a control is held on its own, both limits say the same.

Then their multipliers are not unique: a minimiser that has the control fixed may find any of them, with signs that no
inequality may have.  Here the limit on the state is dropped along such an arc and its costate found anew from the
stationarity of the program in that state: continued from where the arc begins (a push of the limit may then remain
where it ends), or from where it ends.  What comes out are multipliers of the same problem; whether they prove anything
is for the checks to say, which weigh every sign and every equation as usual.

Reference: Hartl, Sethi, Vickson (1995), SIAM Review 37, section 4, on multipliers of state limits (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks import free_ends, stationarity
from solvers.checks.sampling import Sampler
from solvers.collocation import Family
from solvers.limits import quantity_bounds
from solvers.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

RESTING = 1e-6
"""How near to its limit, relative to its scale, a state has to stay all along."""


@dataclass(frozen=True, slots=True)
class Arc:
    """A state along a stretch: its variables between the ends, those at both ends, and the rows of its rate."""

    inside: Indices
    entry: int
    exit: int
    rows: Indices


def unambiguous(path: Trajectory) -> Trajectory:
    """The path with those of its possible multipliers that come nearest to what the checks of first order ask for."""

    def figure(candidate: Trajectory) -> float:
        with np.errstate(all="ignore"):
            sampler = Sampler(candidate)
            return max(stationarity.check(sampler).figure or 0.0, free_ends.check(sampler).figure or 0.0)

    others = list(without_redundancy(path))
    return min([path, *others], key=figure) if others else path


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
                arcs.append(Arc(inside, first, last, _rows(path, points, entry, end, state)))
    return arcs


def _rows(path: Trajectory, points: Indices, entry: int, end: int, state: int) -> Indices:
    """The rows of the program that hold the rate of a state along a stretch, and its end value where it has one."""
    program, n = path.program, path.nodes.shape[1]
    gauss = np.array([i.scheme.family is Family.GAUSS for i in program.mesh.intervals])
    rank = np.cumsum(gauss) - 1
    ends = [int(rank[k]) for k in range(entry, end) if gauss[k]]
    return np.concatenate([program.rows.defects + points * n + state,
                           program.rows.ends + np.array(ends, dtype=np.int64) * n + state])  # fmt: skip


def without_redundancy(path: Trajectory) -> Iterator[Trajectory]:
    """The same curve with other multipliers: those limits dropped, costates continued from either side."""
    arcs = redundant_arcs(path)
    if not arcs:
        return
    for forwards in (True, False):
        found = _continued(path, arcs, forwards)
        if found is not None:
            yield found


def _continued(path: Trajectory, arcs: list[Arc], forwards: bool) -> Trajectory | None:
    """Multipliers with the limits dropped; None where they are not determined."""
    from scipy.sparse.linalg import splu

    program, where = path.program, path.program.layout
    size = abs(program.value_scale)
    z, constants = path.z / program.scale, list(program.compiled.constants)
    gradient = np.asarray(program.functions["grad_f"](z, constants)[1]).ravel()
    jacobian = program.functions["jac_g"](z, constants)[1].sparse().tocsc()
    rows = path.row_multipliers * program.row_scale / size
    bounds = path.bound_multipliers * program.scale / size
    for arc in arcs:
        columns = np.append(arc.inside, arc.entry if forwards else arc.exit)
        bounds[columns] = 0.0
        rows[arc.rows] = 0.0
        try:
            factors = splu(jacobian[arc.rows][:, columns].T.tocsc())
        except (RuntimeError, ValueError):  # singular, or not square
            return None
        rows[arc.rows] = factors.solve(-(gradient + jacobian.T @ rows)[columns])
    if not np.isfinite(rows).all():
        return None
    pull = -(gradient + jacobian.T @ rows)
    ends = np.array([arc.exit if forwards else arc.entry for arc in arcs])
    bounds[ends] = pull[ends]
    fixed = program.lower == program.upper
    bounds[fixed] = pull[fixed]
    physical = rows / program.row_scale * size
    weights = np.concatenate([i.scheme.weights for i in program.mesh.intervals])
    defects = physical[: len(where.fractions) * path.nodes.shape[1]].reshape(path.costates.shape)
    return replace(path, costates=-defects / weights[:, None], row_multipliers=physical,
                   bound_multipliers=bounds * size / program.scale)  # fmt: skip
