"""Where pointwise constraints bind along a solved mesh, and which of them can be held on their limits.

How near to its limit a constraint lies says little on a coarse mesh: a curve may run along a limit at a small distance,
and a barrier keeps the more distance the less the limit pushes.  But where it binds, its push outweighs that distance,
and where it does not, the distance outweighs the push.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.evaluation import point_outputs
from solvers.transcription.functions import Compiled
from solvers.transcription.limits import constants_of, interval_of
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

HIGHEST_ORDER = 1
"""The highest derivative of a body in which a control may first appear: of more, entries fix several derivatives."""


@dataclass(frozen=True, slots=True)
class Contact:
    """A pointwise constraint, by its label and rank: at the points its body, and how much its limits push that upwards.

    All relative to the size of the body, and pushes to that of the functional. `state`: it holds states alone.
    """

    quantity: tuple[str, int]
    values: Array
    lower: float
    upper: float
    state: bool
    pushes: Array

    @property
    def labels(self) -> Indices:
        """-1 where the lower limit binds, 1 where the upper one does, 0 where none does, at every point."""
        labels = np.zeros(len(self.values), dtype=np.int64)
        labels[self.pushes > np.maximum(self.values - self.lower, 0.0)] = -1
        labels[-self.pushes > np.maximum(self.upper - self.values, 0.0)] = 1
        return labels


def contacts(path: Trajectory) -> list[Contact]:
    """All pointwise constraints of the user's that bind somewhere and can be held on their limits."""
    compiled, program = path.program.compiled, path.program
    chosen = [rank for rank in range(len(compiled.pointwise)) if _can_be_held(compiled, rank)]
    if not chosen:
        return []
    n, rows = compiled.point.states, program.rows
    bodies = point_outputs(compiled, program.layout, path.z)
    pace = abs(program.value_scale) / abs(float(np.ptp(path.places)))
    found = []
    for rank in chosen:
        condition, size = compiled.pointwise[rank], program.row_scale[rows.pointwise + rank]
        lower, upper = (limit / size for limit in interval_of(condition, constants_of(compiled)))
        order, _ = compiled.reached_by(n + rank)
        pushes = -path.multipliers[:, rank] * size / pace
        contact = Contact((condition.label, rank), bodies[:, n + rank] / size, lower, upper, order > 0, pushes)
        if contact.labels.any():
            found.append(contact)
    return found


def _can_be_held(compiled: Compiled, rank: int) -> bool:
    """Whether a constraint is an inequality of the user's whose arcs determine a control."""
    condition = compiled.pointwise[rank]
    order, controls = compiled.reached_by(compiled.point.states + rank)
    return bool(condition.pointer) and not condition.equality and bool(controls) and order <= HIGHEST_ORDER


def well_begun(path: Trajectory, contact: Contact, start: float, end: float) -> bool:
    """Whether an arc between two places neither begins beside its limit nor ends where the states are given.

    One on states alone says nothing of the curve's first node, and what is on its limit at all points of an interval
    has no freedom left at its end.
    """
    if not contact.state:
        return True
    compiled = path.program.compiled
    output = compiled.point.states + contact.quantity[1]
    pairs = zip(compiled.point.jacobian_rows, compiled.point.jacobian_columns, strict=True)
    own = {column for row, column in pairs if row == output and column < compiled.point.states}
    given: dict[float, set[int]] = {}
    for state, place, condition in compiled.fixed:
        if condition.equality:
            given.setdefault(float(path.places[place]), set()).add(state)
    begun = start > path.places[0] or own <= given.get(start, set())
    return bool(begun) and not own & given.get(end, set())
