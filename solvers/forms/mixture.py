"""Mixtures of slopes: where an integrand is not convex in the slope, its infimum may be approached and not attained.

A curve that runs with slope q for the share s of every short stretch, and with slope r for the rest, stays as near as
one likes to one of the mean slope, and costs s f(q) + (1 - s) f(r).  With q, r and s as controls of their own that is
the relaxed problem.  Its least value is the infimum of the problem itself where the slope comes in linearly in all
other formulas.  Where its curve is a proper mixture, no neighbour of which has the same value, no curve attains it: one
that did would have the slope that is mixed there, and cost more.

References: Young (1969), Lectures on the Calculus of Variations and Optimal Control Theory, chapter VI (generalised
curves); Ekeland, Temam (1976), Convex Analysis and Variational Problems, chapter X (relaxation); both from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from solvers.answers.flat import LARGEST, flat_directions
from solvers.checks import weierstrass
from solvers.checks.sampling import Sampler
from solvers.deadline import Deadline
from solvers.forms.affine import linear_in, written_out
from solvers.forms.broken import convex_in, straight_piece
from solvers.formula.nodes import At, Call, Name, Negative, Node, Number, Product, Sum, walk
from solvers.formula.substitute import substitute
from solvers.problem import Equation, Problem, Seek, Unknown
from solvers.search.given import solve_as_given
from solvers.search.record import End, Pursuit
from solvers.solution import Finding, Status, Watch
from solvers.transcription.limits import quantity_bounds
from solvers.transcription.lowering import Quantity, primed, simple_bound
from solvers.transcription.trajectory import Trajectory

SHARE = "share of"
COPIES = ("first", "second")
"""What the names of the added controls hold beside a blank, so that no user can write one."""
CLEARLY = 1e-5
"""How much better than the curve at hand a mixture has to be, relative to the functional."""
MIXED = 1e-2
"""Least share of either slope, and least distance of them relative to their size, that make a proper mixture."""
SHORT = 1e-2
"""Least share of the range that has to be mixed."""


def with_mixture(base: Pursuit, watch: Watch | None, deadline: Deadline) -> Pursuit | None:
    """The pursuit of the relaxed problem, where that shows that no curve attains the infimum; else None."""
    problem = base.problem
    if not base.solved or problem.seek is Seek.STATIONARY or problem.observations or problem.arcs:
        return None
    if not all(linear_in(rate, _moving(problem)) for rate in _rates(problem)):  # else a mixture acts otherwise
        return None
    path = base.paths[-1]
    first, last = float(path.places[0]), float(path.places[-1])
    if all(convex_in(problem, control, first, last) for control in path.program.compiled.lowered.controls):
        return None
    with np.errstate(all="ignore"):
        sampler = Sampler(path)
        if weierstrass.check(sampler).status is not Status.FAILED:
            return None
        bent = weierstrass.bent_controls(sampler)
        slopes = straight_piece(sampler, bent[0]) if len(bent) == 1 else None
    if slopes is None:
        return None
    quantity = path.program.compiled.lowered.controls[bent[0]]
    changed = _relaxed(problem, path, quantity, slopes)
    if changed is None:
        return None
    found = solve_as_given(changed, watch, deadline)
    if found.end not in (End.CONVERGED, End.SETTLED):
        return None
    mixed = found.paths[-1]
    gain = sampler.sign * (path.value - mixed.value)
    size = max(abs(path.value), abs(path.program.value_scale))
    if not gain > CLEARLY * size + found.value_error or not _nothing_alike(mixed, problem, found.value_error):
        return None
    if (place := _properly_mixed(mixed, quantity)) is None:
        return None
    found.end = End.WIGGLES
    values = (f"{float(np.median(_control(mixed, name))):.4g}" for name in _names(quantity))
    found.findings = (Finding(primed(quantity), place=place, note=f"ever faster between {' and '.join(values)}"),)
    found.steps[:0] = base.steps
    found.iterations += base.iterations
    return found


def _rates(problem: Problem) -> list[Node]:
    """Both sides of all lines of the dynamics."""
    return [written_out(side, problem) for line in problem.dynamics for side in (line.left, line.right)]


def _names(quantity: Quantity) -> tuple[str, str]:
    first, second = (f"{primed(quantity)} {copy}" for copy in COPIES)
    return first, second


def _relaxed(problem: Problem, path: Trajectory, quantity: Quantity, slopes: tuple[float, float]) -> Problem | None:
    """The problem with a mixture of two values in place of one control."""
    own = Name(*quantity)

    def holds(tree: Node) -> bool:
        return any(isinstance(node, Name) and (node.name, node.order) == quantity for node in walk(tree))

    conditions = [*(c for c in problem.constraints if simple_bound(c) != quantity), *problem.integrals]
    others = [_without_rates(condition.body, problem) for condition in conditions]
    linear = all(linear_in(rate, [own]) for rate in _rates(problem))
    if problem.integrand is None or not linear or any(holds(tree) for tree in others):
        return None
    if any(isinstance(node, At | Call) and getattr(node, "function", "integral") == "integral"
           for node in walk(problem.endpoint or Number(0.0, "0")) if isinstance(node, Call)):  # fmt: skip
        return None
    lower, upper = (bounds[path.program.compiled.lowered.controls.index(quantity)]
                    for bounds in quantity_bounds(path.program.compiled)[2:])  # fmt: skip
    copies = [Unknown(name, 0, float(lower), float(upper), _number(value))
              for name, value in zip(_names(quantity), slopes, strict=True)]  # fmt: skip
    mean = float(np.clip((np.mean(_control(path, primed(quantity))) - slopes[1]) / (slopes[0] - slopes[1]), 0, 1))
    share = Unknown(f"{SHARE} {primed(quantity)}", 0, 0.0, 1.0, _number(mean))

    def mixed(part: Callable[[Node], Node]) -> Node:
        first, second = (part(Name(copy.name)) for copy in copies)
        rest = Sum((Number(1.0, "1"), Name(share.name)), (False, True))
        shares = (Product((Name(share.name), first), (False, False)), Product((rest, second), (False, False)))
        return Sum(shares, (False, False))

    integrand = _without_rates(problem.integrand, problem)
    if any(_implicit(tree, problem, quantity) for tree in (integrand, *others)):
        return None

    def with_value(copy: Node) -> Node:
        return substitute(
            integrand, lambda node: copy if isinstance(node, Name) and (node.name, node.order) == quantity else None
        )

    line = Equation(own, mixed(lambda copy: copy), quantity if quantity[1] else None, f"mean of {primed(quantity)}", "")
    unknowns = (*problem.unknowns, *copies, share)
    return replace(problem, unknowns=unknowns, integrand=mixed(with_value), dynamics=(*problem.dynamics, line))


def _without_rates(tree: Node, problem: Problem) -> Node:
    """A formula with the right sides of the dynamics in place of the derivatives that these determine: what is mixed
    enters through them as well."""
    rates = {line.determines: written_out(line.right, problem) for line in problem.dynamics if line.determines}
    tree = written_out(tree, problem)
    for _ in rates:  # a right side may hold what another line determines
        tree = substitute(tree, lambda node: rates.get((node.name, node.order)) if isinstance(node, Name) else None)
    return tree


def _implicit(tree: Node, problem: Problem, quantity: Quantity) -> bool:
    """Whether a formula holds a slope that may follow from the control in a line that is not explicit."""
    slopes = {(unknown.name, unknown.order) for unknown in problem.unknowns if unknown.order} - {quantity}
    open_ = any(line.determines is None for line in problem.dynamics)
    return open_ and any(isinstance(node, Name) and (node.name, node.order) in slopes for node in walk(tree))


def _moving(problem: Problem) -> list[Name]:
    return [Name(unknown.name, order) for unknown in problem.unknowns for order in range(unknown.order + 1)]


def _number(value: float) -> Node:
    return Number(value, repr(value)) if value >= 0 else Negative(Number(-value, repr(-value)))


def _control(path: Trajectory, name: str) -> np.ndarray:
    names = [primed(quantity) for quantity in path.program.compiled.lowered.controls]
    return path.controls[:, names.index(name)]


def _nothing_alike(path: Trajectory, problem: Problem, value_error: float) -> bool:
    """Whether no neighbour of the curve has the same value."""
    names = {unknown.name for unknown in problem.unknowns} | {parameter.name for parameter in problem.parameters}
    return path.program.layout.size <= LARGEST and not flat_directions(path, names, value_error)


def _properly_mixed(path: Trajectory, quantity: Quantity) -> float | None:
    """A place where both values have their share; None where that is so along no stretch worth mentioning."""
    first, second = (_control(path, name) for name in _names(quantity))
    share = _control(path, f"{SHARE} {primed(quantity)}")
    size = np.abs(first).max() + np.abs(second).max()
    proper = (np.minimum(share, 1 - share) > MIXED) & (np.abs(first - second) > MIXED * size)
    where = path.program.layout
    weights = np.abs(where.measures * where.lengths(path.places))
    if not weights[proper].sum() > SHORT * weights.sum():
        return None
    return float(path.points[proper][np.count_nonzero(proper) // 2])
