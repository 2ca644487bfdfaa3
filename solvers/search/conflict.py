"""The least violation of all conditions together, before it is said that no curve satisfies them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from solvers.checks.convexity import convex_curves
from solvers.minimise.elastic import LeastViolation
from solvers.problem import Variation
from solvers.search.attempt import FIRST_INTERVALS, SOLVED, end_of, first_mesh, make_program
from solvers.search.effort import Minimiser
from solvers.search.record import End, Pursuit
from solvers.starts.guess import first_guess
from solvers.starts.variations import variations
from solvers.transcription.layout import layout
from solvers.transcription.program import Program
from solvers.transcription.trajectory import Trajectory, carry, trajectory

VIOLATED = 1e-6
"""The least sum of relative violations that counts as one."""
VIOLATING_STARTS = 6
"""How many starts are tried before no curve is said to satisfy all conditions."""
VIOLATING_DOUBLINGS = 5
"""How often the mesh is made finer before."""
STANDING = 0.8
"""A violation of which a mesh four times as fine leaves this share or more is no matter of the mesh."""


def least_violation_of(pursuit: Pursuit, minimise_: Minimiser) -> tuple[Program, LeastViolation]:
    """The curve that violates least, among those that several starts lead to, unless one start suffices: where all
    conditions are convex there is but one least violation.  Then on finer meshes, for as long as that helps."""
    compiled, stretches = pursuit.compiled, len(pursuit.problem.places) - 1
    starts = [Variation()] if convex_curves(pursuit.problem) else variations(pursuit.problem, VIOLATING_STARTS)
    mesh = first_mesh(stretches)
    where = layout(compiled, mesh)
    best: tuple[Program, LeastViolation] | None = None
    for start in starts:
        varied = replace(compiled.lowered, problem=replace(pursuit.problem, start=start))
        z = first_guess(replace(compiled, lowered=varied), mesh, where).z
        program = make_program(compiled, mesh, where, z)
        found = program, minimise_.relax(program, z / program.scale)
        solved = found[1].minimum.outcome in SOLVED
        if best is None or (solved and not (best[1].minimum.outcome in SOLVED and found[1].total >= best[1].total)):
            best = found
        if best[1].total <= VIOLATED or end_of(found[1].minimum) in (End.STOPPED, End.TIME):
            break
    assert best is not None
    totals = [best[1].total]
    for doubling in range(1, VIOLATING_DOUBLINGS + 1):
        program, least = best
        standing = len(totals) > 2 and totals[-1] > STANDING * totals[-3]
        solved = least.minimum.outcome in SOLVED
        if not solved or least.total <= VIOLATED or standing or minimise_.deadline.over:
            break
        mesh = first_mesh(stretches, FIRST_INTERVALS * 2**doubling)
        where = layout(compiled, mesh)
        z = carry(curve_of_least_violation(program, least), mesh, where).z
        finer = make_program(compiled, mesh, where, z, program.scales)
        again = minimise_.relax(finer, z / finer.scale)
        if again.minimum.outcome not in SOLVED:
            break
        best = finer, again
        totals.append(again.total)
    return best


def curve_of_least_violation(program: Program, least: LeastViolation) -> Trajectory:
    """The curve itself; it has no multipliers."""
    return trajectory(program, replace(least.minimum, z=least.z, multipliers=np.zeros(program.rows.count),
                                       bound_multipliers=np.zeros(len(least.z))))  # fmt: skip
