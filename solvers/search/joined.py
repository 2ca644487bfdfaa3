"""An arc on a limit that a mesh has seen as two, with a gap between them, or as an arc and a touch beside it."""

from __future__ import annotations

from dataclasses import replace

from solvers.formula.nodes import At, Name, walk
from solvers.problem import Condition, Problem
from solvers.search.signals import SWITCH
from solvers.search.structure import on_limits


def joined(problem: Problem) -> Problem | None:
    """The problem without its first gap in which a limit is left only to come back to it, if there is one."""
    touched = {touch.place: (touch.name, touch.order, touch.side) for touch in problem.touches}
    labels = [place.label for place in problem.places]
    for gap in range(1, len(labels) - 2):
        before, here, after = (on_limits(problem.held, k) for k in (gap - 1, gap, gap + 1))
        start, end = labels[gap], labels[gap + 1]
        if here or not (start.startswith(SWITCH + " ") and end.startswith(SWITCH + " ")):
            continue
        if before and before == after:
            return _without(problem, gap, {start, end})
        if touched.get(end) in before and start not in touched:
            return _without(problem, gap, {start}, end)
        if touched.get(start) in after and end not in touched:
            return _without(problem, gap, {end}, start)
    return None


def _without(problem: Problem, gap: int, gone: set[str], untouched: str = "") -> Problem:
    """The problem without some of the places around a gap; what is held beside it is held there too."""

    def moved(stretch: int) -> int:
        return stretch if stretch < gap else max(stretch - len(gone), gap - 1)

    held = {replace(h, stretch=moved(h.stretch)): None for h in problem.held}  # both arcs become the same
    return replace(
        problem,
        places=tuple(place for place in problem.places if place.label not in gone),
        parameters=tuple(p for p in problem.parameters if p.name not in gone),
        held=tuple(held),
        calm=tuple(replace(c, stretch=moved(c.stretch)) for c in problem.calm if c.stretch != gap),
        touches=tuple(touch for touch in problem.touches if touch.place not in {untouched, *gone}),
        endpoints=tuple(condition for condition in problem.endpoints if not _at(condition, gone)),
    )


def _at(condition: Condition, gone: set[str]) -> bool:
    """Whether a condition, as that of a smooth entry, is one at a place that is gone."""
    places = (node.place for node in walk(condition.body) if isinstance(node, At))
    return any(isinstance(place, Name) and place.name in gone for place in places)
