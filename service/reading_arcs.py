"""How the arcs of a document were understood: from where to where each goes, and what happens between them."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import zip_longest
from typing import Any

from service.complaints import listing
from solvers.problem import Arc, Jump, Problem
from solvers.transcription.lowering import primed


def arcs_read(problem: Problem) -> Iterator[dict[str, Any]]:
    """One entry for every arc, in order."""
    for arc, after in zip_longest(problem.arcs, problem.arcs[1:]):
        start, end = problem.places[arc.first].label, problem.places[arc.last].label
        way = f"{arc.name}: {problem.independent} from {start} to {end}."
        told = way if after is None else f"{way} {_junction(problem, arc, after)}"
        yield {"name": arc.name, "from": start, "to": end, "sentence": told}


def _junction(problem: Problem, before: Arc, after: Arc) -> str:
    """What is continuous at the end of an arc and what is not."""
    orders = {unknown.name: unknown.order for unknown in after.unknowns}
    shared = [
        (unknown.name, order)
        for unknown in before.unknowns
        for order in range(min(unknown.order, orders.get(unknown.name, 0)))
    ]
    jumping = [quantity for quantity in shared if Jump(*quantity, before.last) in problem.jumps]
    smooth = [primed(quantity) for quantity in shared if quantity not in jumping]
    place = problem.places[before.last].label
    if not shared:
        return f"Nothing is carried over at {place}."
    said = [f"{listing(smooth)} {'is' if len(smooth) == 1 else 'are'} continuous"] if smooth else []
    if jumping:
        said.append(f"{listing(map(primed, jumping))} may jump as the endpoints say")
    return f"At {place} {', and '.join(said)}."
