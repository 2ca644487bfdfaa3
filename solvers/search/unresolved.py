"""What the value of a mesh may still gain where a control grows without bound, told from that mesh alone.

The value is flat at an extremum: a control that is off by e changes it by half of H_uu e^2 (H: the Hamiltonian), added
up.  Where controls are bounded that is nothing beside the tolerance once they are known to its root.  Beside a singular
end all that matters may lie in one interval, where H_uu e^2 is huge, and coefficients fall so slowly that those that
are left out are worth as much as the last one many times over.  There the changes from mesh to mesh say little: an
interval that is not cut lets the values of two meshes agree.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.search.refinement import SMOOTH, Estimate, falls
from solvers.series import basis
from solvers.transcription.evaluation import mapped, point_inputs
from solvers.transcription.functions import linear_controls
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]

GROWN = 10.0
"""How many times its mean a control has grown to where it may grow without bound."""
REST = 4.0
"""How many times the last coefficient, times the degree, those are worth that are left out: squares that fall like
1/k^2 add up to the degree times the last one, and they may fall more slowly."""


def unresolved(path: Trajectory, found: Estimate) -> float:
    """What the value (SI) may gain where coefficients fall slowly, by the second difference of the Hamiltonian."""
    compiled, where, mesh = path.program.compiled, path.program.layout, path.program.mesh
    grown = _grown(path)
    grown[:, linear_controls(compiled)] = False
    grown[np.array(falls(found)) >= SMOOTH] = False
    if not grown.any():
        return 0.0
    left_out = np.where(grown[mesh.owner], _last(path), 0.0)
    chosen = np.asarray(grown.any(axis=1))[mesh.owner]
    v, d = (inputs[chosen] for inputs in point_inputs(compiled, where, path.z))
    n, m = compiled.point.states, compiled.point.controls
    step = np.zeros_like(v)
    step[:, n : n + m] = left_out[chosen]

    def hamiltonian(v: Array) -> Array:
        outputs = mapped(compiled.point.value, v, d)
        sign = np.sign(path.program.value_scale)
        return np.asarray(sign * outputs[:, -1] + (outputs[:, :n] * path.costates[chosen]).sum(axis=1))

    with np.errstate(all="ignore"):
        bends = (hamiltonian(v + step) + hamiltonian(v - step)) / 2 - hamiltonian(v)
    weights = where.measures[chosen] * mesh.counts[mesh.owner[chosen]]
    return REST * float(weights @ np.where(np.isfinite(bends), np.abs(bends), 0.0))


def _grown(path: Trajectory) -> NDArray[np.bool_]:
    """In which intervals which controls are that large (N x m)."""
    where, sizes = path.program.layout, np.abs(path.controls)
    measures = where.measures * np.abs(where.lengths(path.places))
    means = measures @ sizes / max(float(measures.sum()), 1e-300)
    return np.asarray(np.maximum.reduceat(sizes, where.first[:-1], axis=0) > GROWN * means)


def _last(path: Trajectory) -> Array:
    """The last coefficient of every control on every interval, as a function at the points (M x m)."""
    mesh = path.program.mesh
    values = np.zeros_like(path.controls)
    for group in mesh.alike:
        degree = group.scheme.degree
        shape = basis(2 * group.scheme.points - 1, degree - 1)[:, -1]
        values[group.points] = shape[None, :, None] * path.control_modes[group.members, degree - 1][:, None, :]
    return values
