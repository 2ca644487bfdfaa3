"""Is the problem convex, so that a stationary curve is the best of all?

That needs: fixed ends, dynamics affine in unknowns, derivatives and parameters together, functional and inequalities
convex in them jointly, equalities affine.  Only what rules of composition prove counts (`composition`); where they do
not reach, nothing is said.

Reference: Troutman (1996), Variational Calculus and Optimal Control, chapter 3 (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator

from solvers.checks.composition import INF, Bend, Leaf, Shape, Unfold, shape_of
from solvers.formula.evaluate import REAL, evaluate
from solvers.formula.nodes import At, Name, Node
from solvers.formula.substitute import at_place
from solvers.observations import terminal
from solvers.problem import MIDDLE, Condition, Place, Problem, Seek
from solvers.solution import Check, Status
from solvers.transcription.limits import interval_of, number
from solvers.transcription.lowering import simple_bound

NAME = "convexity"


def check(problem: Problem) -> Check:
    """Passed where convexity (for a maximum: concavity) is proved; never failed: not convex is no fault."""
    reason = next(obstacles(problem), None)
    word = "concave" if problem.seek is Seek.MAXIMUM else "convex"
    if reason is None:
        return Check(NAME, Status.PASSED, f"The problem is {word} in all unknowns and derivatives together: "
                     "no other curve does better.")  # fmt: skip
    return Check(NAME, Status.NOT_APPLICABLE, f"Not proved to be {word}: {reason}. Better curves elsewhere are "
                 "not excluded.")  # fmt: skip


def obstacles(problem: Problem) -> Iterator[str]:
    """Why the problem is not (proved to be) convex."""
    if problem.seek is Seek.STATIONARY:
        yield "a stationary value is asked for"
        return
    constants = {c.name: c.value for c in problem.constants}
    if not all(_given(place, constants) for place in problem.places):
        yield "a place is free"
        return
    first, last = (number(problem.places[k].tree, constants) for k in (0, -1))
    if not first < last:
        yield f"{problem.independent} runs backwards"
        return
    leaf, unfold = known(problem, constants, first, last), unfolding(problem)
    yield from _of_curves(problem, leaf, unfold)
    for tree, what in ((problem.integrand, "the integrand"), (terminal(problem), "the endpoint term")):
        if tree is None:
            continue
        found = shape_of(tree, leaf, unfold)
        if not (found.concave if problem.seek is Seek.MAXIMUM else found.convex):
            yield f"{what} is not, as far as the rules of composition reach"


def convex_curves(problem: Problem) -> bool:
    """Whether the curves that satisfy all conditions are proved to be a convex set."""
    constants = {c.name: c.value for c in problem.constants}
    try:
        first, last = (number(problem.places[k].tree, constants) for k in (0, -1))
    except KeyError:
        return False
    found = _of_curves(problem, known(problem, constants, first, last), unfolding(problem))
    return next(found, None) is None and all(_given(place, constants) for place in problem.places)


def _given(place: Place, constants: dict[str, float]) -> bool:
    return not isinstance(place.tree, Name) or place.tree.name in constants


def _of_curves(problem: Problem, leaf: Leaf, unfold: Unfold) -> Iterator[str]:
    """Why the curves that satisfy all conditions are not (proved to be) a convex set."""
    for equation in problem.dynamics:
        if not all(shape_of(side, leaf, unfold).affine for side in (equation.left, equation.right)):
            yield f"'{equation.label}' is not linear"
    for condition in (*problem.endpoints, *problem.constraints, *problem.integrals):
        found = shape_of(condition.body, leaf, unfold)
        if not ((condition.upper is None or found.convex) and (condition.lower is None or found.concave)):
            yield f"'{condition.label}' does not bound a convex set, as far as the rules of composition reach"


def known(problem: Problem, constants: dict[str, float], first: float, last: float) -> Leaf:
    """What is known of each name: whether it is given, and where its values lie."""
    ranges: dict[tuple[str, int], tuple[float, float]] = {(u.name, 0): (u.lower, u.upper) for u in problem.unknowns}
    for condition in problem.constraints:
        target = simple_bound(condition)
        if target is not None:
            low, high = ranges.get(target, (-INF, INF))
            ranges[target] = _narrowed(condition, constants, low, high)
    for pair in same_rates(problem):
        both = [ranges.get(quantity, (-INF, INF)) for quantity in pair]
        ranges |= dict.fromkeys(pair, (max(low for low, _ in both), min(high for _, high in both)))
    numbers = {p.name: Shape(Bend.AFFINE, p.lower, p.upper) for p in problem.parameters}
    numbers |= {name: Shape(Bend.GIVEN, value, value) for name, value in constants.items()}
    numbers[problem.independent] = numbers[MIDDLE] = Shape(Bend.GIVEN, first, last)
    numbers["pi"] = Shape(Bend.GIVEN, *[evaluate(Name("pi"), lambda name, order: 0.0, REAL)] * 2)

    def leaf(node: Name | At) -> Shape:
        if isinstance(node, Name) and node.name in numbers and node.order == 0:
            return numbers[node.name]
        return Shape(Bend.AFFINE, *ranges.get((node.name, node.order), (-INF, INF)))

    return leaf


def same_rates(problem: Problem) -> Iterator[tuple[tuple[str, int], tuple[str, int]]]:
    """The derivatives that a line of the dynamics calls by the name of an unknown, as in y' = u, with that name."""
    names = {unknown.name for unknown in problem.unknowns}
    for line in problem.dynamics:
        if line.determines is not None and isinstance(line.right, Name) and line.right.name in names:
            yield line.determines, (line.right.name, line.right.order)


def _narrowed(condition: Condition, constants: dict[str, float], low: float, high: float) -> tuple[float, float]:
    least, most = interval_of(condition, constants)
    return max(low, least), min(high, most)


def unfolding(problem: Problem) -> Unfold:
    abbreviations = dict(problem.where)
    functions = {unknown.name for unknown in problem.unknowns} | abbreviations.keys()

    def unfold(tree: Node) -> Node:
        while isinstance(tree, Name | At) and tree.name in abbreviations:
            whole = abbreviations[tree.name]
            tree = whole if isinstance(tree, Name) else at_place(whole, tree.place, tree.side, problem.independent,
                                                                 functions)  # fmt: skip
        return tree

    return unfold
