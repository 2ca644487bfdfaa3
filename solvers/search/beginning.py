"""The first mesh that is solved, or why there is none: from guesses and settings in turn, or from a related curve."""

from __future__ import annotations

from itertools import islice
from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.minimise.ipopt import LEAST_SQUARES_MULTIPLIERS, Minimum, Outcome, Start
from solvers.minimise.undefined import undefined_places
from solvers.problem import Seek
from solvers.search.attempt import FIRST_INTERVALS, SOLVED, end_of, first_mesh, kinks_of, loose, make_program, runs_away
from solvers.search.conflict import VIOLATED, curve_of_least_violation, least_violation_of
from solvers.search.contradiction import contradictory
from solvers.search.effort import Minimiser
from solvers.search.record import End, Pursuit
from solvers.search.unbounded import in_growing_boxes
from solvers.starts.guess import first_guess, guesses
from solvers.transcription.functions import linear_controls
from solvers.transcription.layout import layout
from solvers.transcription.mesh import Mesh
from solvers.transcription.program import Program
from solvers.transcription.trajectory import Trajectory, related, related_with_multipliers

Array = NDArray[np.float64]

LOST = (Outcome.FAILED, Outcome.ITERATIONS, Outcome.INFEASIBLE)
"""Ends of the minimiser that a wrong size may bring about."""
OUTGROWN = 30.0
"""How much larger than its first size a quantity may end before its size counts as wrong."""
DOUBTFUL_ITERATIONS = 200
"""Iterations of further tries once one start has led to a conflict."""
FEW_ITERATIONS = 100
"""Iterations within which a solve from a related trajectory must be through: it starts near its end."""
FALLING: tuple[dict[str, Any], int] = (
    {"ipopt.mu_strategy": "monotone", "ipopt.mu_init": 1e-3, "ipopt.tol": 1e-10},  # the last steps to 1e-12 may stall
    FEW_ITERATIONS,
)
ADAPTING: tuple[dict[str, Any], int] = {}, 60
"""What is tried from a related trajectory, and how long.  An adaptive barrier needs a third fewer iterations, but now
and then it does not come to an end, and where controls are loose it does not keep to the middle of what they may do."""
NIMBLE_ITERATIONS = 250
"""Iterations after which an adaptive barrier rather goes round in circles than nears an end."""
STEADY: dict[str, Any] = {"ipopt.mu_strategy": "monotone", "ipopt.mu_init": 0.1} | LEAST_SQUARES_MULTIPLIERS
ATTEMPTS: tuple[tuple[int, int, dict[str, Any]], ...] = (
    (3, 1, {"ipopt.max_iter": NIMBLE_ITERATIONS}),
    (2, 1, STEADY),
    (2, 2, {"ipopt.mu_strategy": "monotone", "ipopt.mu_init": 1e-3, "ipopt.nlp_scaling_method": "gradient-based"}),
    (1, 1, {}),
)
"""What is tried in turn on the first mesh: how many guesses, how many times the least intervals, which settings."""


def begin(pursuit: Pursuit, minimise_: Minimiser) -> tuple[Program, Minimum] | None:
    """The first mesh that is solved, from the first guess and settings that lead somewhere."""
    compiled = pursuit.compiled
    stretches, kinks = len(pursuit.problem.places) - 1, kinks_of(pursuit.problem)
    outcomes: list[Outcome] = []
    astray = conflict = False
    downhill = pursuit.problem.seek is not Seek.STATIONARY  # else nothing is learnt from where the value runs away to
    for attempt, (most, times, options) in enumerate(ATTEMPTS):
        mesh = first_mesh(stretches, times * FIRST_INTERVALS, kinks)
        where = layout(compiled, mesh)
        for guess in islice(guesses(compiled, mesh, where), most):
            program = make_program(compiled, mesh, where, guess.z)
            pursuit.first = pursuit.first or program
            doubtful = {"ipopt.max_iter": DOUBTFUL_ITERATIONS} if Outcome.INFEASIBLE in outcomes else {}
            start = Start(guess.z / program.scale)
            minimum = _straight(program, start, minimise_) if attempt == 0 else None
            minimum = minimum or minimise_.patiently(program, start, options | doubtful)
            if minimum.outcome in LOST and _outgrown(minimum) and (downhill or not runs_away(minimum)):
                z = minimum.z * program.scale
                program = make_program(compiled, mesh, where, z)
                minimum = minimise_(program, Start(z / program.scale), options | doubtful)
            if minimum.outcome in SOLVED:
                return program, minimum
            outcomes.append(minimum.outcome)
            pursuit.end = end_of(minimum)
            if pursuit.end in (End.STOPPED, End.TIME):
                return None
            astray = astray or runs_away(minimum)
        if attempt == 0 and astray and not downhill:
            return None
        if attempt == 0 and astray:  # to find out is quicker than to fail with other settings
            mesh = first_mesh(stretches)
            where = layout(compiled, mesh)
            begun = in_growing_boxes(pursuit, mesh, where, first_guess(compiled, mesh, where).z, minimise_)
            if begun is not None or pursuit.end is not End.FAILED:
                return begun
        if attempt == 0 and Outcome.INFEASIBLE in outcomes:  # so it is here
            begun = _after_least_violation(pursuit, minimise_)
            conflict = pursuit.end is End.NOWHERE
            if begun is not None or pursuit.end in (End.STOPPED, End.TIME, End.INFEASIBLE):
                return begun
    if set(outcomes) == {Outcome.UNDEFINED}:
        mesh = first_mesh(stretches)
        where = layout(compiled, mesh)
        z = first_guess(compiled, mesh, where).z
        pursuit.end, pursuit.findings = End.UNDEFINED, undefined_places(compiled, where, z)
        return None
    if conflict:
        pursuit.end = End.NOWHERE
        return None
    return _after_least_violation(pursuit, minimise_)


def _straight(program: Program, start: Start, minimise_: Minimiser) -> Minimum | None:
    """The minimum next to a guess, where whole steps go straight there: many guesses are that near.

    Not where a control switches, for then its limits bind.
    """
    from solvers.checks.inertia import minimum_of_program  # here, so that SciPy is loaded only where it is needed

    if linear_controls(program.compiled) or minimise_.pursuit.problem.seek is Seek.STATIONARY:
        return None
    found = minimise_.nearby(program, start)
    return found if found is not None and minimum_of_program(program, found) else None


def begin_at(pursuit: Pursuit, minimise_: Minimiser, start: Trajectory) -> tuple[Program, Minimum] | None:
    """The first mesh, from a trajectory of a related form of the problem that may be far from any end."""
    mesh = first_mesh(len(pursuit.problem.places) - 1, kinks=kinks_of(pursuit.problem))
    where = layout(pursuit.compiled, mesh)
    z = related(start, pursuit.compiled, mesh, where)
    pursuit.first = make_program(pursuit.compiled, mesh, where, z, size=abs(start.program.value_scale))
    return _unless_itruns_away(pursuit, pursuit.first, z, minimise_, {})


def begin_from(
    pursuit: Pursuit, minimise_: Minimiser, start: Trajectory, mesh: Mesh, iterations: int | None = None
) -> tuple[Program, Minimum] | None:
    """The first mesh, from a trajectory of a related form of the problem near its end; where it is said within how many
    iterations, in a single attempt."""
    where = layout(pursuit.compiled, mesh)
    carried = related_with_multipliers(start, pursuit.compiled, mesh, where)
    z = carried.z
    program = make_program(pursuit.compiled, mesh, where, z)
    z = z / program.scale
    if program.overdetermined:
        return None
    if any(pursuit.compiled.rank_of(held) is not None for held in pursuit.problem.held):
        warm = carried.onto(program)  # along a constraint multipliers are half of what is known
        room = {"ipopt.max_iter": iterations or FEW_ITERATIONS}
        near = minimise_.nearby(program, warm) or minimise_(program, warm, room)
        if near.outcome in SOLVED or iterations:
            return (program, near) if near.outcome in SOLVED else None
    settings = (FALLING, ADAPTING) if loose(pursuit.compiled) else (ADAPTING, FALLING)
    for options, most in settings[:1] if iterations else settings:
        minimum = minimise_(program, Start(z), options | {"ipopt.max_iter": iterations or most})
        if minimum.outcome in SOLVED:
            return program, minimum
        pursuit.end = end_of(minimum)
        if pursuit.end in (End.STOPPED, End.TIME):
            break
    return None


def _after_least_violation(pursuit: Pursuit, minimise_: Minimiser) -> tuple[Program, Minimum] | None:
    """Find out whether any curve satisfies the conditions; start again from one that does."""
    program, least = least_violation_of(pursuit, minimise_)
    if least.minimum.outcome not in SOLVED:
        pursuit.end = end_of(least.minimum)
        return None
    if least.total > VIOLATED:
        pursuit.end = End.INFEASIBLE if contradictory(pursuit, minimise_) else End.NOWHERE
        pursuit.findings = pursuit.broken = least.findings
        pursuit.nearest = curve_of_least_violation(program, least)
        return None
    return _unless_itruns_away(pursuit, program, least.z * program.scale, minimise_, STEADY)


def _unless_itruns_away(
    pursuit: Pursuit, program: Program, z: Array, minimise_: Minimiser, options: dict[str, Any]
) -> tuple[Program, Minimum] | None:
    """Minimise from z (SI); where the value runs away, find out whether it does so without end."""
    minimum = minimise_(program, Start(z / program.scale), options)
    if minimum.outcome in SOLVED:
        return program, minimum
    pursuit.end = end_of(minimum)
    if pursuit.end in (End.STOPPED, End.TIME) or not runs_away(minimum):
        return None
    return in_growing_boxes(pursuit, program.mesh, program.layout, z, minimise_)


def _outgrown(minimum: Minimum) -> bool:
    """Whether quantities are so much larger than the first guess let expect that rounding stopped the minimiser."""
    reached = max(abs(minimum.value), float(np.abs(minimum.z).max(initial=0.0)))
    return bool(OUTGROWN < reached < np.inf)
