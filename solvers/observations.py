"""Observations as part of the functional: the squares of the misfits at the places where something was measured."""

from __future__ import annotations

from collections.abc import Iterator

from solvers.formula.nodes import At, Name, Node, Number, Power, Product, Sum, children, with_children
from solvers.problem import Observation, Observed, Problem

TWO = Number(2.0, "2")


def terminal(problem: Problem, *, at_ends_only: bool = False) -> Node | None:
    """The endpoint term with the squares of all misfits, or of those at the ends; None where there is neither."""
    ends = {id(problem.places[0].tree), id(problem.places[-1].tree)}
    terms = [] if problem.endpoint is None else [problem.endpoint]
    for observation in problem.observations:
        for point in observation.points:
            if not at_ends_only or id(point.place) in ends:
                terms.append(Power(misfit(problem, observation, point), TWO))
    if len(terms) < 2:
        return terms[0] if terms else None
    return Sum(tuple(terms), (False,) * len(terms))


def misfit(problem: Problem, observation: Observation, point: Observed) -> Node:
    """What a formula gives at a place less what was measured there, over sigma."""
    observed = Number(point.value, f"{point.value / observation.unit.factor:.12g}")
    difference = Sum((placed(problem, observation.body, point.place), observed), (False, True))
    if not observation.weighted:
        return difference
    sigma = Number(point.sigma, f"{point.sigma / observation.unit.factor:.12g}")
    return Product((difference, sigma), (False, True))


def placed(problem: Problem, tree: Node, place: Node) -> Node:
    """A formula of what runs along the curve as one of values at a place."""
    if isinstance(tree, Name):
        if tree.name == problem.independent:
            return place
        running = tree.name in {u.name for u in problem.unknowns} | {name for name, _ in problem.where}
        return At(tree.name, tree.order, place) if running else tree
    return with_children(tree, tuple(placed(problem, part, place) for part in children(tree)))


def known_values(problem: Problem) -> Iterator[tuple[str, int, Node, float]]:
    """Unknown, order, place and mean of what was measured of an unknown itself: what a guess can go by."""
    for observation in problem.observations:
        body = observation.body
        if not isinstance(body, Name):
            continue
        found: dict[int, list[Observed]] = {}
        for point in observation.points:
            found.setdefault(id(point.place), []).append(point)
        for points in found.values():
            yield body.name, body.order, points[0].place, sum(p.value for p in points) / len(points)
