"""Broken extremals: where the integrand is not convex in the slope, the best curve may have a corner.

A smooth stationary curve fails Weierstrass's condition there.  The lower convex hull of the integrand over the slopes,
at the place where the condition fails most, has a straight piece over the curve's own slope; its two ends are slopes
between which a corner may lie (Erdmann's conditions say that they have a common tangent).  A curve of these two slopes
is the start, and the place of its corner an unknown like that of a switch.  The result is taken only if it is better
and passes the condition itself: curves that gain by ever more corners have no best one.

References: Gelfand, Fomin (1963), Calculus of Variations, section 15; Ekeland, Temam (1976), Convex Analysis and
Variational Problems, chapter X (relaxation); both from memory.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.checks import weierstrass
from solvers.checks.composition import Bend, Shape, shape_of
from solvers.checks.convexity import known, same_rates, unfolding
from solvers.checks.lower_bound import best_possible
from solvers.checks.sampling import Sampler
from solvers.deadline import Deadline
from solvers.formula.nodes import At, Name, Node
from solvers.problem import Parameter, Place, Problem, Seek
from solvers.search.pursuit import go_on, pursue
from solvers.search.record import End, Pursuit
from solvers.search.signals import SWITCH
from solvers.solution import Status, Watch
from solvers.transcription.evaluation import mapped
from solvers.transcription.limits import number
from solvers.transcription.lowering import Quantity
from solvers.transcription.trajectory import Trajectory

Array = NDArray[np.float64]

WIDEST = 30.0
"""How far from the curve's own slope, in sizes of it, others are looked at."""
TRIED = 3
"""Meshes after which a corner has to have proved itself."""
HOPELESS = 0.1
"""What other slopes may still gain on the first of them, relative to the functional."""
SLOPES = 4001
ROUNDING = 1e-14
SAME = 1e-3
"""Slopes nearer to each other than that, relative to the range, make no corner."""


def with_corner(base: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """A better pursuit of the same problem whose curve has a corner; None where none is needed or found."""
    problem = base.problem
    if not base.solved or (slope := _only_slope(problem)) is None:
        return None
    path = base.paths[-1]
    if convex_in(problem, slope, float(path.places[0]), float(path.places[-1])):
        return None
    with np.errstate(all="ignore"):
        sampler = Sampler(path)
        if weierstrass.check(sampler).status is not Status.FAILED:
            return None
        slopes = straight_piece(sampler, 0)
    found = []
    for first, second in (slopes, slopes[::-1]) if slopes else ():
        changed = _bent(problem, path, first, second)
        if changed is None:
            continue
        pursuit = pursue(changed, watch, deadline, meshes=1)
        if not pursuit.solved or not _left_to_gain(pursuit) <= HOPELESS:
            continue
        go_on(pursuit, watch, deadline, TRIED - 1)
        if _better(pursuit, base, sampler.sign):
            found.append(pursuit if pursuit.end is End.CONVERGED else go_on(pursuit, watch, deadline))
    best = min(found, key=lambda pursuit: sampler.sign * pursuit.paths[-1].value, default=None)
    if best is not None:
        best.steps[:0] = base.steps
        best.iterations += base.iterations
    return best


def corner_at_once(problem: Problem, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """A curve with a corner that no curve betters, as the range of the integrand shows; None where none is found.

    Looked for where the integrand is proved to bend the wrong way in a slope with limits to both sides: then the slope
    leaps from limit to limit, and finer meshes alone show no more than one does.
    """
    slope = _only_slope(problem)
    if slope is None or not _wrongly_bent(problem, slope) or not np.isfinite(bound := best_possible(problem)):
        return None
    found = with_corner(pursue(problem, watch, deadline, meshes=1), watch, deadline)
    if found is None or found.end is not End.CONVERGED:
        return None
    reached = abs(found.paths[-1].value - bound) <= problem.options.tolerance * found.value_size
    return found if reached else None


def _wrongly_bent(problem: Problem, slope: Quantity) -> bool:
    """Whether the integrand is proved to be concave (for a maximum: convex) in a slope with limits to both sides."""
    constants = {c.name: c.value for c in problem.constants}
    free = any(isinstance(place.tree, Name) and place.tree.name not in constants for place in problem.places)
    if problem.integrand is None or problem.integrals or free:
        return False
    first, last = (number(place.tree, constants) for place in problem.places)
    limits = known(problem, constants, first, last)(Name(*slope))
    shape = _shape_in(problem, problem.integrand, slope, first, last)
    bent = shape.convex if problem.seek is Seek.MAXIMUM else shape.concave
    return bent and not shape.affine and bool(np.isfinite(limits.low) and np.isfinite(limits.high))


def _only_slope(problem: Problem) -> Quantity | None:
    """The slope of the only curve, or the control that stands for it (y' = u); None where there is more to steer."""
    if len(problem.places) != 2 or problem.seek is Seek.STATIONARY:
        return None
    first, *others = problem.unknowns
    if first.order != 1:
        return None
    if not problem.dynamics and not others:
        return first.name, 1
    if len(problem.dynamics) == len(others) == 1 and list(same_rates(problem)) == [
        ((first.name, 1), (others[0].name, 0))
    ]:
        return others[0].name, 0
    return None


def convex_in(problem: Problem, quantity: Quantity, first: float, last: float) -> bool:
    """Whether the integrand, with all multiples of integrals that conditions hold, is proved to be convex (for a
    maximum: concave) in a slope or another control, whatever the rest is: then no other value of it gains anything.

    That holds for a range that runs forwards, and for controls that come in linearly in all other formulas.
    """
    if problem.integrand is None or not first < last:
        return False
    shape = _shape_in(problem, problem.integrand, quantity, first, last)
    bends = shape.concave if problem.seek is Seek.MAXIMUM else shape.convex
    return bends and all(_shape_in(problem, c.body, quantity, first, last).affine for c in problem.integrals)


def _shape_in(problem: Problem, tree: Node, quantity: Quantity, first: float, last: float) -> Shape:
    """The shape of a formula as a function of one slope or control, also by its other name, whatever the rest is."""
    whole = known(problem, {c.name: c.value for c in problem.constants}, first, last)
    names = {quantity, *(slope for slope, control in same_rates(problem) if control == quantity)}

    def leaf(node: Name | At) -> Shape:
        own = isinstance(node, Name) and (node.name, node.order) in names
        return whole(node) if own else replace(whole(node), bend=Bend.GIVEN)

    return shape_of(tree, leaf, unfolding(problem))


def _left_to_gain(pursuit: Pursuit) -> float:
    """What other slopes would gain, relative to the functional."""
    with np.errstate(all="ignore"):
        return weierstrass.check(Sampler(pursuit.paths[-1])).figure or 0.0


def _better(pursuit: Pursuit, base: Pursuit, sign: float) -> bool:
    """Whether the value is better and no other slope would gain anything."""
    if not pursuit.solved or not sign * (pursuit.paths[-1].value - base.paths[-1].value) < 0:
        return False
    with np.errstate(all="ignore"):
        return weierstrass.check(Sampler(pursuit.paths[-1])).status is Status.PASSED


def straight_piece(sampler: Sampler, control: int) -> tuple[float, float] | None:
    """The ends of the straight piece of the integrand's convex hull over the curve's own value of a control (a slope),
    where most is gained."""
    gains, _, _ = weierstrass.best_trials(sampler)
    worst = int(np.argmax(gains * np.abs(sampler.halves.measure)))
    n = sampler.point.states + control
    own = float(sampler.halves.v[worst, n])
    reach = WIDEST * max(abs(own), float(sampler.control_sizes[control]))
    lower, upper = float(sampler.bounds[2][control]), float(sampler.bounds[3][control])
    slopes = np.linspace(max(own - reach, lower), min(own + reach, upper), SLOPES)
    v, d = (np.repeat(part[worst][None], SLOPES, axis=0) for part in (sampler.halves.v, sampler.halves.d))
    v[:, n] = slopes
    values = sampler.sign * mapped(sampler.point.value, v, d)[:, -1]
    defined = np.isfinite(values)
    left, right = _edge_over(slopes[defined], values[defined], own)
    if not np.isfinite(left + right) or right - left < SAME * 2 * reach + 2 * (slopes[1] - slopes[0]):
        return None
    if left == slopes[0] > lower or right == slopes[-1] < upper:  # the hull has no end there: the longer the better
        return None
    return float(left), float(right)


def _edge_over(x: Array, y: Array, at: float) -> tuple[float, float]:
    """The ends of the edge of the lower convex hull of points over a place; infinite where it has none.

    The line through two points, one on either side, is lowered to the point deepest below it until there is none.
    """
    if not len(x) or not x.min() <= at < x.max():
        return -np.inf, np.inf
    i, j = int(np.argmin(x)), int(np.argmax(x))
    while True:
        below = y - y[i] - (y[j] - y[i]) / (x[j] - x[i]) * (x - x[i])
        deepest = int(np.argmin(below))
        if not below[deepest] < min(below[j], 0.0) - ROUNDING * np.abs(y).max():
            return float(x[i]), float(x[j])
        i, j = (deepest, j) if x[deepest] <= at else (i, deepest)


def _bent(problem: Problem, path: Trajectory, first: float, second: float) -> Problem | None:
    """The problem with one free corner, and as guess the curve of two slopes from end to end of the one found."""
    (start, end), (low, high) = path.places, path.nodes[[0, -1], 0]
    corner = start + (high - low - second * (end - start)) / (first - second)
    if not min(start, end) < corner < max(start, end):
        return None
    name = f"{SWITCH} 1"
    lines: list[tuple[tuple[float, float], ...]] = [
        ((start, low), (corner, low + first * (corner - start)), (end, high))
    ]
    if len(problem.unknowns) > 1:  # the control that stands for the slope
        beside = corner + SAME * (end - corner)
        lines.append(((start, first), (corner, first), (beside, second), (end, second)))
    room = sorted((float(start + 0.01 * (end - start)), float(end - 0.01 * (end - start))))
    return replace(
        problem,
        places=(problem.places[0], Place(Name(name), name), problem.places[1]),
        parameters=(*problem.parameters, Parameter(name, room[0], room[1], float(corner))),
        unknowns=tuple(
            replace(unknown, guess=tuple((float(at), float(value)) for at, value in line))
            for unknown, line in zip(problem.unknowns, lines, strict=True)
        ),
    )
