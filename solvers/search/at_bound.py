"""A curve that needs no search: its value is the least, or the greatest, that the integrand can have at all.

A closed curve of least length is a point, and on a point sqrt(x'^2 + y'^2) has no derivative: no minimiser can stand
there, and a gauge of constant speed has no speed to hold.  The square of the integrand leads there all the same, and
that no curve is better the range of the integrand proves.
"""

from __future__ import annotations

import math

import numpy as np

from solvers.checks.lower_bound import best_possible
from solvers.minimise.ipopt import FLOOR, Minimum, Outcome
from solvers.problem import Problem
from solvers.search import refinement
from solvers.search.attempt import make_program
from solvers.search.record import End, Pursuit
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from solvers.transcription.trajectory import related, trajectory


def at_bound(problem: Problem, found: Pursuit) -> Pursuit | None:
    """What a pursuit of a related form found, as it stands, where its value is that bound; else None."""
    bound = best_possible(problem)
    alike = [u.name for u in found.problem.unknowns] == [u.name for u in problem.unknowns]
    if not (alike and math.isfinite(bound)):
        return None
    start, compiled = found.paths[-1], compile_problem(lower(problem))
    mesh = start.program.mesh
    where = layout(compiled, mesh)
    z = related(start, compiled, mesh, where)
    program = make_program(compiled, mesh, where, z)
    value = program.numbers.value(z / program.scale)
    error = abs(value * program.value_scale - bound)
    if not error <= FLOOR * abs(program.value_scale):
        return None
    none = np.zeros(where.size), np.zeros(program.rows.count)  # no multipliers: there is no derivative either
    path = trajectory(program, Minimum(Outcome.SOLVED, z / program.scale, value, *none, 0, 0.0, 0.0, "at its bound"))
    return Pursuit(
        problem,
        compiled,
        End.SETTLED,
        steps=found.steps,
        paths=[path],
        estimates=[refinement.estimate(path)],
        value_error=error,
        curve_error=0.0,
        iterations=found.iterations,
    )
