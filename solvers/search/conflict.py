"""The least violation of all conditions together, before it is said that none was found that satisfies them.

Where a place is free, the conditions may be met at a length far from the first guess, and all that lies between break
them worse: an oscillator is brought to rest within many periods, and within less than one hardly better than not at
all.  So the length is held at one of a ladder of values each, where at least linear dynamics are convex.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks.convexity import convex_curves
from solvers.formula.nodes import Name
from solvers.minimise.elastic import LeastViolation
from solvers.problem import Problem
from solvers.search.attempt import FIRST_INTERVALS, SOLVED, end_of, first_mesh, make_program
from solvers.search.effort import Minimiser
from solvers.search.record import End, Pursuit
from solvers.starts.guess import first_guess, first_value
from solvers.starts.variations import variations
from solvers.transcription.layout import layout
from solvers.transcription.program import Program
from solvers.transcription.trajectory import Trajectory, carry, trajectory

Array = NDArray[np.float64]

VIOLATED = 1e-6
"""The least sum of relative violations that counts as one."""
VIOLATING_STARTS = 6
"""How many starts are tried before no curve is said to satisfy all conditions."""
FURTHER_ITERATIONS = 50
"""Iterations of each start but the first: one that meets all conditions takes 3 to 30."""
VIOLATING_DOUBLINGS = 5
"""How often the mesh is made finer before."""
LENGTHS = (1.0, 2.0, 4.0, 8.0, 16.0, 1 / 2, 1 / 4)
"""Lengths, as factors of the first guess, at which free places are held in turn."""
STANDING = 0.8
"""A violation of which a mesh four times as fine leaves this share or more is no matter of the mesh."""


def least_violation_of(pursuit: Pursuit, minimise_: Minimiser) -> tuple[Program, LeastViolation]:
    """The curve that violates least, among those that several starts lead to, unless one start suffices: where all
    conditions are convex there is but one least violation.  Then on finer meshes, for as long as that helps."""
    compiled, stretches = pursuit.compiled, len(pursuit.problem.places) - 1
    convex = convex_curves(pursuit.problem)
    mesh = first_mesh(stretches)
    where = layout(compiled, mesh)
    best: tuple[Program, LeastViolation] | None = None
    for varied, held in [(pursuit.problem, False)] if convex else _tries(pursuit.problem):
        z = first_guess(replace(compiled, lowered=replace(compiled.lowered, problem=varied)), mesh, where).z
        program = make_program(compiled, mesh, where, z)
        room = {} if best is None else {"iterations": FURTHER_ITERATIONS}
        found = program, minimise_.relax(_at_length(program, z) if held else program, z / program.scale, **room)
        solved = found[1].minimum.outcome in SOLVED
        met = solved and found[1].total <= VIOLATED
        better = best is None or best[1].minimum.outcome not in SOLVED or found[1].total < best[1].total
        if best is None or met or (solved and better and not held):  # more breaks where a length is held
            best = found
        if met or end_of(found[1].minimum) in (End.STOPPED, End.TIME):
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
        finer = make_program(compiled, mesh, where, z, program)
        again = minimise_.relax(finer, z / finer.scale)
        if again.minimum.outcome not in SOLVED:
            break
        best = finer, again
        totals.append(again.total)
    return best


def _tries(problem: Problem) -> Iterator[tuple[Problem, bool]]:
    """The problem with other guesses, and whether its free places are to be held there."""
    yield problem, False
    ends = {place.tree.name for place in problem.places if isinstance(place.tree, Name)}
    free = [parameter for parameter in problem.parameters if parameter.name in ends]
    tried = []
    for factor in LENGTHS:
        values = {p.name: float(np.clip(factor * first_value(p), p.lower, p.upper)) for p in free}
        if values and values not in tried:
            tried.append(values)
            guessed = (replace(p, guess=values.get(p.name, p.guess)) for p in problem.parameters)
            yield replace(problem, parameters=tuple(guessed)), True
    for start in variations(problem, VIOLATING_STARTS)[1:]:
        yield replace(problem, start=start), False


def _at_length(program: Program, z: Array) -> Program:
    """A program whose free places stay where they are in z (SI)."""
    where = program.layout
    lower, upper = program.lower.copy(), program.upper.copy()
    lower[where.places] = upper[where.places] = (z / program.scale)[where.places]
    return replace(program, lower=lower, upper=upper)


def curve_of_least_violation(program: Program, least: LeastViolation) -> Trajectory:
    """The curve itself; it has no multipliers."""
    return trajectory(program, replace(least.minimum, z=least.z, multipliers=np.zeros(program.rows.count),
                                       bound_multipliers=np.zeros(len(least.z))))  # fmt: skip
