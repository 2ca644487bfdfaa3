"""Curves on a saddle: stationary, but along some direction the functional falls.

A symmetrical first guess leads to a symmetrical curve, also where that is no minimum: a straight strut under more than
its critical load, rest between two wells.  Where the second variation is proved negative in a direction, the search
begins again from the curve moved along it, as far as the Lagrangian falls: to second order that says what the
functional does once the conditions are met again.  What is found has to be clearly better.

Where Legendre's condition fails no such curve is looked for: ever faster wiggles of any curve do better.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks import curvature, legendre
from solvers.checks.sampling import Sampler
from solvers.deadline import Deadline
from solvers.forms.choice import Found, in_original_terms, rightly_squared
from solvers.forms.signs import one_signed
from solvers.minimise.ipopt import FLOOR, Minimum, Outcome
from solvers.problem import Problem, Seek
from solvers.search.given import solve_as_given
from solvers.search.record import End, Pursuit
from solvers.search.structure import without_switches
from solvers.solution import Solution, Status, Verdict, Watch
from solvers.transcription.trajectory import Trajectory, as_start, trajectory

Array = NDArray[np.float64]

STEPS = 2.0 ** np.arange(-24, 6)
"""Lengths that are tried in turn while the Lagrangian falls, in sizes of what moves most: formulas may bend sooner."""
ALIKE = 1e-6
"""Falls to both sides that differ by less, relative to either, are those of a symmetrical saddle."""
SHARE, PATIENCE, LEAST = 0.5, 20.0, 2.0
"""Time that it may take: this share of what is left, and so many times what the meshes before took, or so many
seconds."""
LED_TO = (End.CONVERGED, End.SETTLED, End.TORN)
"""Ends that say more than a saddle does, where the value is better."""


def on_saddle(solution: Solution) -> bool:
    """Whether a solution is refuted by a falling direction, and Legendre's condition leaves a better one possible."""
    status = {check.name: check.status for check in solution.checks}
    return (
        solution.verdict in (Verdict.NOT_A_MINIMUM, Verdict.NOT_A_MAXIMUM)
        and status.get(curvature.NAME) is Status.FAILED
        and status.get(legendre.NAME) is not Status.FAILED
    )


def left_behind(problem: Problem, saddle: Solution) -> str:
    """A sentence about a saddle that was left."""
    unit, sought = problem.value_unit, "maximum" if problem.seek is Seek.MAXIMUM else "minimum"
    value = f"{(saddle.value or 0.0) / unit.factor:.9g}" + (f" {unit.text}" if unit.text else "")
    return f"The first stationary curve, with the value {value}, is no {sought}: it was left along a falling direction."


def off_saddle(problem: Problem, found: Found, watch: Watch | None, deadline: Deadline) -> Found | None:
    """What is found from beside a saddle: a better curve, or that there is no best one; None where neither is."""
    base, gauged = found.pursuit, found.gauged
    form = without_switches(base.problem)
    hear = watch if gauged is None else in_original_terms(gauged, watch)
    spent = sum(step.seconds for step in base.steps)
    room = deadline.within(min(SHARE * deadline.left, PATIENCE * spent + LEAST))
    reached = []
    for start in _beside(base, room):
        pursuit = solve_as_given(form, hear, room, start)
        if pursuit.end is End.UNBOUNDED or (pursuit.end in LED_TO and _better(pursuit, base)):
            reached.append(pursuit)
    best = min(reached, key=_worth, default=None)
    if best is None:
        return None
    squared = gauged is not None and gauged.squared and best.solved
    if gauged is not None and squared and not rightly_squared(gauged, best, not one_signed(problem)):
        return None
    best.steps[:0] = base.steps
    best.iterations += base.iterations
    return replace(found, pursuit=best)


def _worth(pursuit: Pursuit) -> float:
    """The value as it is minimised."""
    if not pursuit.solved:
        return -np.inf
    return (-1.0 if pursuit.problem.seek is Seek.MAXIMUM else 1.0) * pursuit.paths[-1].value


def _better(pursuit: Pursuit, base: Pursuit) -> bool:
    """Whether a value is better by more than the errors of both."""
    errors = sum(p.value_error for p in (pursuit, base) if np.isfinite(p.value_error))
    return _worth(pursuit) < _worth(base) - errors - base.problem.options.tolerance * base.value_size


def _beside(base: Pursuit, deadline: Deadline) -> list[Trajectory]:
    """The curve moved along its falling direction: to both sides, to one where both are alike."""
    path = base.paths[-1]
    error = base.curve_error if np.isfinite(base.curve_error) else 0.0
    direction = curvature.falling(Sampler(path), error, deadline)
    if direction is None:
        return []
    where = path.program.layout
    moving = np.abs(direction[where.nodes]).max(initial=0.0) or np.abs(direction).max()
    sides = [_as_far_as_it_falls(path, way) for way in (direction / moving, -direction / moving)]
    falls = [fall for fall, _ in sides]
    if abs(falls[0] - falls[1]) <= ALIKE * max(falls):
        sides = sides[:1]
    return [_at(path, z) for fall, z in sides if fall > 0]


def _as_far_as_it_falls(path: Trajectory, way: Array) -> tuple[float, Array]:
    """The last of growing steps along a way with which the Lagrangian falls, and by how much it has fallen (scaled)."""
    program, start = path.program, as_start(path)
    multipliers = start.multipliers
    assert multipliers is not None

    def lagrangian(z: Array) -> float:
        return float(program.numbers.value(z) + multipliers @ program.numbers.constraints(z))

    first = lagrangian(start.z)
    fall, reached, noise = 0.0, start.z, FLOOR * max(abs(first), 1.0)
    for step in STEPS:
        z = np.clip(start.z + step * way, program.lower, program.upper)
        now = first - lagrangian(z)
        if now > max(fall, noise):
            fall, reached = now, z
        elif fall > 0:
            break
    return fall, reached


def _at(path: Trajectory, z: Array) -> Trajectory:
    """The trajectory at other variables (scaled)."""
    program, start = path.program, as_start(path)
    assert start.bound_multipliers is not None and start.multipliers is not None
    value = program.numbers.value(z)
    return trajectory(program, Minimum(Outcome.SOLVED, z, value, start.bound_multipliers, start.multipliers, 0, 0.0,
                                       0.0, ""))  # fmt: skip
