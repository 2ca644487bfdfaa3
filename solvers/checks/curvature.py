"""Is the second variation positive (no conjugate point)?

The second variation (`variation`) must be positive on all variations that keep dynamics and active limits.  Constraints
that couple neighbours only enter as a penalty, (J dz)^2 / e, which keeps the matrix banded in the order of the curve;
the few that couple everything (integrals, conditions) and the free numbers stand in a border, together with the last
interval (without it an eigenvalue problem's band would be singular at its very eigenvalue).  The pivots of the band
count its negative directions (Sylvester), those of the Schur complement the rest (Haynsworth).  Where there is one and
nothing but the dynamics holds the neighbours, `jacobi` finds the first conjugate point.

Both answers are safe.  A pass holds for any e, since the penalty vanishes on the variations in question.  A negative
direction keeps the constraints (of few variables their kernel is computed, of many the direction is put back onto them)
and its second variation is computed before the curve is condemned, by two quadratures, that between the nodes and that
of the program: at a singular end one alone may err.  A margin decides between both: the second variation is compared
with the mean square of the variation itself, relative to the functional; in between nothing is said (a closed curve may
be turned, an eigenvector may be scaled).

References: Gelfand, Fomin (1963), Calculus of Variations, chapter 5; Nocedal, Wright (2006), Numerical Optimization,
section 16.2 (from memory).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks import legendre
from solvers.checks.sampling import Sampler
from solvers.checks.second_order import Second, hessian_of_program, second_order
from solvers.deadline import FOREVER, Deadline
from solvers.problem import Seek
from solvers.solution import Check, Status

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

NAME = "conjugate points"
MARGIN = 1e-5
NOTICEABLE = 10.0
"""By how much a negative second variation must exceed the relative error of the curve."""
DENSE = 1200
"""Up to so many variables the kernel of the constraints is computed where the penalty leaves doubts."""
FINE_MARGIN = 1e-7
"""The margin then: only the multipliers' own errors remain."""
LARGEST = 60_000
SLIVER = 1e-6
"""Width of an interval, relative to the range, below which a mesh only approaches a singular place."""


def check(sampler: Sampler, deadline: Deadline = FOREVER, curve_error: float = 0.0) -> Check:
    """Passed where the second variation is positive, failed where a direction is proved negative.

    `curve_error` (relative) is how well the curve is known: what a direction gains must stand out against it.
    What is not decided at the deadline stays undecided.
    """
    try:
        return _decided(sampler, deadline, max(MARGIN, NOTICEABLE * curve_error))
    except TimeoutError:
        return Check(NAME, Status.NOT_APPLICABLE, "The second variation could not be decided in the time there was.")


def falling(sampler: Sampler, curve_error: float = 0.0, deadline: Deadline = FOREVER) -> Array | None:
    """The direction (in all variables, scaled) in which the second variation falls most; None where none is known."""
    from solvers.checks import inertia

    second, margin = second_order(sampler), max(MARGIN, NOTICEABLE * curve_error)
    if sampler.path.program.layout.size > LARGEST or not second.hessian.finite:
        return None
    free, rows = ~(second.fixed | second.resting), second.equalities | second.at_limit
    try:
        directions = inertia.negative_directions(second, free, rows, margin, deadline)
    except TimeoutError:
        return None
    directions = None if directions is None else _clear_of_slivers(sampler, directions)
    if directions is None or not directions.shape[1]:
        return None
    return np.asarray(directions[:, np.argmin(inertia.quotients(second, directions))])


def _decided(sampler: Sampler, deadline: Deadline, margin: float) -> Check:
    from solvers.checks import inertia, jacobi  # here, so that a worker that waits has not loaded SciPy

    program = sampler.path.program
    if program.layout.size > LARGEST:
        return Check(NAME, Status.NOT_APPLICABLE, f"The mesh has more than {LARGEST} unknowns; this was not tried.")
    second = second_order(sampler)
    if not second.hessian.finite:
        return Check(NAME, Status.NOT_APPLICABLE, "The second variation is undefined somewhere along the curve.")
    strict = ~(second.fixed | second.pushed)
    rows = second.equalities | second.forced
    if inertia.count_negative(second, strict, rows, -MARGIN, deadline) == 0:
        return Check(NAME, Status.PASSED, _sentence(sampler, second, strict))
    if np.count_nonzero(strict) <= DENSE and inertia.least_quotient(second, strict, rows) > FINE_MARGIN:
        return Check(NAME, Status.PASSED, _sentence(sampler, second, strict))
    free = ~(second.fixed | second.resting)
    rows = second.equalities | second.at_limit
    directions = inertia.negative_directions(second, free, rows, margin, deadline)
    if directions is None:
        return Check(NAME, Status.NOT_APPLICABLE, "The second variation could not be decided: its matrix is singular.")
    directions = _clear_of_slivers(sampler, directions)
    if directions.shape[1]:
        again = replace(second, hessian=hessian_of_program(sampler.path))
        share = float(np.maximum(*(inertia.quotients(form, directions) for form in (second, again))).min())
        if share < -margin:
            place = jacobi.first_conjugate(sampler) if jacobi.applies(sampler, second) else None
            where = ("better curves lie in that direction" if place is None else
                     "the first point conjugate to the beginning is the place given")  # fmt: skip
            return Check(NAME, Status.FAILED, f"A variation that keeps all conditions {sampler.lowers} the functional "
                         f"in second order by {-share:.1e} of its size: {where}.", -share, margin, place)  # fmt: skip
    return Check(NAME, Status.NOT_APPLICABLE, "Not decided: the second variation vanishes in some direction (within "
                 f"{margin:.0e} of the functional), as along families of equally good curves.")  # fmt: skip


def _clear_of_slivers(sampler: Sampler, directions: Array) -> Array:
    """The directions (columns, in all variables) that do not lie mostly in slivers at a singular place.

    There the discrete problem differs from the problem itself, however fine the mesh is, and proves nothing.
    """
    where, mesh = sampler.path.program.layout, sampler.path.program.mesh
    thin = np.abs(sampler.length) < SLIVER * np.abs(sampler.span)
    at = thin[mesh.owner]
    inside = np.concatenate([where.inner[at].ravel(), where.controls[at].ravel()])
    everywhere = np.concatenate([where.inner.ravel(), where.controls.ravel()])
    share = (directions[inside] ** 2).sum(axis=0) / np.maximum((directions[everywhere] ** 2).sum(axis=0), 1e-300)
    return np.asarray(directions[:, share < 0.5])


def _sentence(sampler: Sampler, second: Second, free: Flags) -> str:
    controls = sampler.path.program.layout.controls
    if controls.size and not free[controls].all():
        held = legendre.held_controls(sampler) if sampler.point.controls else np.zeros((0, 0), bool)
        share = float(sampler.mean(held.all(axis=1).astype(float)))
        if share > 0.9:
            return ("Bang-bang: the controls are pushed against their bounds strictly, but for the switches, and no "
                    f"change of the switches that keeps the conditions {sampler.lowers} the functional.")  # fmt: skip
    sign = "negative" if sampler.asked.seek is Seek.MAXIMUM else "positive"
    return f"The second variation is {sign} on all variations that keep the conditions: no conjugate point."
