"""What is free that nothing determines, as far as the formulas alone tell: before anything is solved.

Two kinds are found, both by who occurs in which relation:

* an unknown that its own line of dynamics gives and that occurs nowhere else is only carried along: where it has fewer
  conditions than its order, nothing determines where it starts;
* unknowns and parameters that no chain of relations connects with the functional are free but for what holds among
  themselves: where that is fewer equations than unknowns, or fewer conditions than numbers, nothing determines them.

What occurs together is taken to depend on each other, so that nothing is said to be undetermined that might not be.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

from solvers.formula.nodes import At, Call, Name, Node, walk
from solvers.observations import terminal
from solvers.problem import Condition, Problem


@dataclass(frozen=True, slots=True)
class Undetermined:
    """Something that is free and that nothing determines: an unknown or a parameter, and where it is freest (SI)."""

    name: str
    pointer: str
    sentence: str
    place: float | None = None


@dataclass(frozen=True, slots=True)
class _Relation:
    """What occurs together: `along` says that it holds everywhere, `equal` that it is an equality; `determines` is the
    unknown that a line of dynamics gives."""

    names: frozenset[str]
    along: bool
    equal: bool
    determines: str | None = None


def undetermined(problem: Problem) -> tuple[Undetermined, ...]:
    """Unknowns and parameters that nothing determines.  Of problems of arcs nothing is said."""
    if problem.arcs:
        return ()
    relations, functional = _relations(problem)
    left = {unknown.name for unknown in problem.unknowns} | {parameter.name for parameter in problem.parameters}
    found: list[Undetermined] = []
    while True:
        carried = next(_carried(problem, relations, functional, left), None)
        if carried is None:
            break
        name, missing = carried
        if missing:
            found.append(_start(name, missing))
        left.remove(name)
        relations = [relation for relation in relations if name not in relation.names]
    for part in _parts(relations, left):
        if not part & functional:
            found += _loose(problem, [r for r in relations if r.names & part], part)
    return tuple(found)


def _relations(problem: Problem) -> tuple[list[_Relation], frozenset[str]]:
    """All relations, and the names that the functional depends on."""
    known = {unknown.name for unknown in problem.unknowns} | {parameter.name for parameter in problem.parameters}
    reach: dict[str, frozenset[str]] = {}
    moving = frozenset(place.tree.name for place in problem.places if isinstance(place.tree, Name)) & known

    def names(trees: Iterable[Node]) -> frozenset[str]:
        found: set[str] = set()
        for tree in trees:
            for node in walk(tree):
                if isinstance(node, Name | At):
                    found |= reach.get(node.name, {node.name} & known)
        return frozenset(found)

    for name, tree in problem.where:
        reach[name] = names([tree])
    relations = [
        _Relation(names([line.left, line.right]) | moving, True, True, line.determines and line.determines[0])
        for line in problem.dynamics
    ]
    for condition in problem.constraints:
        relations.append(_Relation(names([condition.body]) | moving, True, condition.equality))
    for condition in (*problem.endpoints, *problem.integrals):
        extended = any(isinstance(node, Call) and node.function == "integral" for node in walk(condition.body))
        own = names([condition.body]) | (moving if extended else frozenset())
        relations.append(_Relation(own | _moving_places(condition, moving), False, condition.equality))
    trees = [tree for tree in (problem.integrand, terminal(problem)) if tree is not None]
    whole = moving if problem.integrand is not None else frozenset()
    functional = names(trees) | whole | frozenset(n for t in trees for n in _places_in(t) if n in moving)
    return relations, functional


def _places_in(tree: Node) -> Iterator[str]:
    """The names that are places of values in a tree."""
    return (node.place.name for node in walk(tree) if isinstance(node, At) and isinstance(node.place, Name))


def _moving_places(condition: Condition, moving: frozenset[str]) -> frozenset[str]:
    return frozenset(_places_in(condition.body)) & moving


def _carried(
    problem: Problem, relations: list[_Relation], functional: frozenset[str], left: set[str]
) -> Iterator[tuple[str, int]]:
    """Unknowns that are only carried along, each with the number of its initial values that nothing determines."""
    for unknown in problem.unknowns:
        name = unknown.name
        bounded = unknown.lower > float("-inf") or unknown.upper < float("inf")
        if name not in left or name in functional or bounded:
            continue
        own = [relation for relation in relations if name in relation.names]
        lines = [relation for relation in own if relation.along]
        conditions = [relation for relation in own if not relation.along]
        alone = all(relation.equal and _only(relation, name, problem) for relation in conditions)
        if len(lines) == 1 and lines[0].determines == name and alone and len(conditions) <= unknown.order:
            yield name, unknown.order - len(conditions)


def _only(relation: _Relation, name: str, problem: Problem) -> bool:
    """Whether a condition is about one unknown only, apart from where its places are."""
    places = {place.tree.name for place in problem.places if isinstance(place.tree, Name)}
    return relation.names - places == {name}


def _parts(relations: list[_Relation], left: set[str]) -> list[set[str]]:
    """The names in parts that no relation connects."""
    parts = [{name} for name in sorted(left)]
    for relation in relations:
        touched = [part for part in parts if part & relation.names]
        if len(touched) > 1:
            parts = [part for part in parts if part not in touched] + [set().union(*touched)]
    return parts


def _loose(problem: Problem, relations: list[_Relation], part: set[str]) -> Iterator[Undetermined]:
    """What nothing determines in a part that the functional does not depend on."""
    unknowns = {unknown.name: unknown for unknown in problem.unknowns if unknown.name in part}
    lines = [relation for relation in relations if relation.along and relation.equal]
    if len(unknowns) > len(lines):
        given = {relation.determines for relation in lines}
        for name in [name for name in unknowns if name not in given] or list(unknowns):
            yield Undetermined(name, f"/unknowns/{name}", f"Nothing determines {name}: {_WHY}")
        return
    if not all(relation.determines for relation in lines):
        return
    numbers = sum(unknown.order for unknown in unknowns.values()) + len(part - unknowns.keys())
    conditions = sum(relation.equal and not relation.along for relation in relations)
    if numbers > conditions:
        yield from _numbers(unknowns, part, numbers - conditions)


def _numbers(unknowns: Mapping[str, object], part: set[str], missing: int) -> Iterator[Undetermined]:
    """Too few conditions for the numbers in a part."""
    parameters = sorted(part - unknowns.keys())
    for name in parameters or sorted(unknowns):
        member = "parameters" if parameters else "unknowns"
        more = "one more condition" if missing == 1 else f"{missing} more conditions"
        yield Undetermined(name, f"/{member}/{name}", f"Nothing determines {name}: {_WHY} There is room for {more}.")


_WHY = "the functional does not depend on it, nor on anything that it has to do with. Any choice that keeps the " \
       "conditions does as well as the one shown."  # fmt: skip


def _start(name: str, missing: int) -> Undetermined:
    more = "one more condition" if missing == 1 else f"{missing} more conditions"
    return Undetermined(
        name,
        f"/unknowns/{name}",
        f"Nothing determines where {name} starts: it is only carried along, and neither the functional nor any other "
        f"condition depends on it. There is room for {more} on it.",
    )
