"""Problems in which nothing holds the slope, solved: is the least value attained, and is there one at all?

Solved first is the problem whose unknowns may jump (`affine`).  Where that is convex, its curve is the only one with
the least value: an analytic convex function has its least value at one place, or its second derivatives vanish.  So
whether a curve of the problem has that value the ends tell.  Else the problem without slopes is solved as it is, and
what it tends to the meshes show.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from solvers.checks import convexity
from solvers.deadline import Deadline
from solvers.forms.affine import Reduced, Turning
from solvers.formula.derivative import derivative
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import Name, Node
from solvers.problem import Problem
from solvers.search.given import solve_as_given
from solvers.search.pursuit import pursue
from solvers.search.record import End, Pursuit
from solvers.solution import Finding, Status, Watch
from solvers.starts.sketch import ARRAYS
from solvers.transcription.limits import constants_of, interval_of
from solvers.transcription.trajectory import Trajectory, curve

Array = NDArray[np.float64]

NEAR = 1e-6
"""How near to each other, relative to the curve's size, two values are the same."""
DEFINITE = 1e-9
"""Least eigenvalue of the second derivatives, relative to the largest, that is none of a singular matrix."""


def solve_without_slopes(form: Reduced | Turning, watch: Watch | None, deadline: Deadline) -> Pursuit:
    """The pursuit of a problem whose integrand is linear in the slopes."""
    if isinstance(form, Turning):
        feasible = pursue(form.problem, watch, deadline, meshes=1)
        return without_bound(feasible) if feasible.solved else feasible
    if form.alike:
        return solve_as_given(form.problem, watch, deadline)
    relaxed = solve_as_given(form.relaxed, watch, deadline)
    if relaxed.end in (End.UNBOUNDED, End.STOPPED, End.TIME):
        return relaxed
    if relaxed.end not in (End.CONVERGED, End.SETTLED) or not _only_one(form.relaxed, relaxed.paths[-1]):
        return solve_as_given(form.problem, watch, deadline)
    relaxed.findings = tuple(_jumps(form, relaxed.paths[-1]))
    if relaxed.findings:
        relaxed.end = End.TORN
        return relaxed
    return solve_as_given(form.problem, watch, deadline)


def without_bound(feasible: Pursuit) -> Pursuit:
    """The pursuit of a problem that has curves, here one of another functional, and no least value."""
    return Pursuit(feasible.problem, feasible.compiled, End.UNBOUNDED, steps=feasible.steps,
                   iterations=feasible.iterations)  # fmt: skip


def _only_one(problem: Problem, path: Trajectory) -> bool:
    """Whether no other curve has the value of this one, wherever it jumps."""
    if convexity.check(problem).status is not Status.PASSED:
        return False
    if len(problem.unknowns) == 1:  # a convex analytic function that is not constant has its least value once
        return True
    names = [Name(unknown.name) for unknown in problem.unknowns]
    assert problem.integrand is not None
    rows = [[derivative(derivative(problem.integrand, one), other) for other in names] for one in names]
    drawn, places = curve(path), path.points
    numbers = _numbers(path)

    def look_up(name: str, order: int) -> Array | float:
        if name in numbers:
            return numbers[name]
        return places if name == problem.independent else drawn.evaluate(name, places)

    whole = [[np.broadcast_to(evaluate(tree, look_up, ARRAYS), places.shape) for tree in row] for row in rows]
    found = np.linalg.eigvalsh(np.moveaxis(np.array(whole), -1, 0))
    return bool(np.all(np.abs(found[:, 0]) > DEFINITE * np.abs(found).max()))


def _jumps(form: Reduced, path: Trajectory) -> list[Finding]:
    """Where a curve that may jump does so at the ends, unless it does as well without."""
    drawn, numbers = curve(path), _numbers(path)
    chosen = dict(numbers)
    free, found = [], []
    for name, place, tree in form.ends:
        at = float(path.breaks[place])
        inside, value = float(drawn.evaluate(name, np.array([at]))[0]), _value(tree, numbers)
        size = float(np.abs(drawn.evaluate(name, path.points)).max()) + abs(value)
        jump = Finding(name, place=at, note="jumps")
        if isinstance(tree, Name) and tree.name not in constants_of(path.program.compiled):
            chosen[tree.name] = inside
            free += [jump] if abs(inside - value) > NEAR * size else []
        elif abs(inside - value) > NEAR * size:
            found.append(jump)
    return found or ([] if not free or _as_good(form.relaxed, numbers, chosen) else free)


def _as_good(problem: Problem, numbers: dict[str, float], chosen: dict[str, float]) -> bool:
    """Whether other values at the ends meet the conditions on them and are worth the same."""
    for condition in problem.endpoints:
        low, high = interval_of(condition, numbers)
        value = _value(condition.body, chosen)
        if not low - NEAR * (abs(low) + 1) <= value <= high + NEAR * (abs(high) + 1):
            return False
    if problem.endpoint is None:
        return True
    now, then = _value(problem.endpoint, numbers), _value(problem.endpoint, chosen)
    return abs(now - then) <= NEAR * (abs(now) + abs(then))


def _numbers(path: Trajectory) -> dict[str, float]:
    """The values of constants and parameters."""
    problem = path.program.compiled.lowered.problem
    own = {p.name: float(value) for p, value in zip(problem.parameters, path.parameters, strict=True)}
    return {**constants_of(path.program.compiled), **own}


def _value(tree: Node, numbers: dict[str, float]) -> float:
    return float(evaluate(tree, lambda name, order: numbers[name], REAL))
