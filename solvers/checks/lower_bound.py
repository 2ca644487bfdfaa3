"""Is the value as good as any curve's can be?  Interval arithmetic bounds the integrand over all admissible curves.

Where no value of the integrand lies below b, no curve is worth less than b times the length of the range (plus the
least that the endpoint term can be).  A curve that is worth just that is a global minimum, whatever second derivatives
say; for a maximum everything is turned round.

Reference: Moore (1966), Interval Analysis, chapter 3 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Collection, Sequence
from dataclasses import replace

from solvers.checks import conditions
from solvers.checks.composition import Leaf, Shape, Unfold, shape_of
from solvers.checks.convexity import known, unfolding
from solvers.checks.sampling import Sampler
from solvers.formula.nodes import Name, Node
from solvers.problem import Place, Problem, Seek
from solvers.solution import Check, Status
from solvers.transcription.limits import number

NAME = "lower bound"


def check(sampler: Sampler) -> Check:
    """Passed where the value, integrated anew, is that bound to the tolerance; never failed."""
    problem = sampler.problem
    if problem.seek is Seek.STATIONARY:
        return Check(NAME, Status.NOT_APPLICABLE, "A stationary value is asked for.")
    bound = best_possible(problem)
    if not math.isfinite(bound):
        return Check(NAME, Status.NOT_APPLICABLE, "The values of the integrand, taken over all curves, give no bound.")
    allowed = sampler.tolerance * max(sampler.program_value, abs(bound))
    short = sampler.sign * (sampler.path.value - bound)
    if abs(short) <= allowed:
        short = sampler.sign * (conditions.value_anew(sampler) - bound)
    figure, threshold = short / allowed * sampler.tolerance, sampler.tolerance
    word = "above" if sampler.asked.seek is Seek.MAXIMUM else "below"
    told = sampler.told(bound)
    if abs(short) <= allowed:
        return Check(NAME, Status.PASSED, f"No curve has a value {word} {told}, as no value of the integrand is "
                     "any better, and this curve reaches it.", abs(figure), threshold)  # fmt: skip
    return Check(NAME, Status.NOT_APPLICABLE, f"No curve has a value {word} {told}; this one does not reach it.",
                 figure, threshold)  # fmt: skip


def gap(checks: Sequence[Check]) -> float | None:
    """How far the value is from the bound, relative to its size, where that shows that no curve is better."""
    found = (check.figure for check in checks if check.name == NAME and check.status is Status.PASSED)
    return next(found, None)


def settled(checks: Sequence[Check], feasible: Collection[str]) -> tuple[Check, ...]:
    """The checks of a curve that reaches the bound: those that failed, but for the `feasible` ones, do not apply.

    All the others look for what could be better, and measure it by the size of the functional: near a bound of zero by
    next to nothing.  What they found is told, for the curve may be known less well than the value.
    """
    return tuple(
        replace(check, status=Status.NOT_APPLICABLE,
                sentence=f"No curve is better, as the lower bound shows; by itself this says: {check.sentence}")
        if check.status is Status.FAILED and check.name not in feasible
        else check
        for check in checks
    )  # fmt: skip


def best_possible(problem: Problem) -> float:
    """A value that no curve betters; infinite where none is known."""
    maximum = problem.seek is Seek.MAXIMUM
    constants = {c.name: c.value for c in problem.constants}
    (first, start), (end, last) = (
        _range(place, problem, constants) for place in (problem.places[0], problem.places[-1])
    )
    least, most = end - start, last - first
    if not least >= 0:
        return math.nan
    leaf, unfold = known(problem, constants, first, last), unfolding(problem)
    total = 0.0
    if problem.integrand is not None:
        b = _best(problem.integrand, leaf, unfold, maximum)
        good = b < 0 if maximum else b > 0  # the farther the worse
        length = least if good else most
        total += b * length if b else 0.0
    if problem.endpoint is not None:
        total += _best(problem.endpoint, leaf, unfold, maximum)
    return total


def _best(tree: Node, leaf: Leaf, unfold: Unfold, maximum: bool) -> float:
    found: Shape = shape_of(tree, leaf, unfold)
    return found.high if maximum else found.low


def _range(place: Place, problem: Problem, constants: dict[str, float]) -> tuple[float, float]:
    """Where an end may lie."""
    for parameter in problem.parameters:
        if isinstance(place.tree, Name) and place.tree.name == parameter.name:
            return parameter.lower, parameter.upper
    value = number(place.tree, constants)
    return value, value
