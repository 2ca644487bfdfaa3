"""Arcs follow each other from end to end."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from service.assemble.formulas import ArcFormulas
from service.assemble.spots import SAME, Spot
from service.complaints import Complaint


def unchained(
    arcs: Sequence[ArcFormulas], spots: Sequence[tuple[Spot, Spot]], ends: tuple[Spot, Spot], independent: str
) -> Iterator[Complaint]:
    """Arcs that do not begin where the one before ends, and so on from the first end to the last."""
    first, last = ends
    room = SAME * max((abs(spot.value or 0.0) for pair in (*spots, ends) for spot in pair), default=0.0)
    before, told = first, f"{independent} begins at {first.place.label}"
    for arc, (start, end) in zip(arcs, spots, strict=True):
        if not start.same(before, room):
            here = arc.ends[0]
            message = f"The arc {arc.name} begins at {start.place.label}, but {told}."
            yield here.complaint(here.tree.span, "arcs-apart", message, f"Write {before.place.label} here.")
        before, told = end, f"the arc before it ends at {end.place.label}"
    if not before.same(last, room):
        here = arcs[-1].ends[1]
        message = f"The last arc ends at {before.place.label}, but {independent} ends at {last.place.label}."
        yield here.complaint(here.tree.span, "arcs-apart", message, f"Write {last.place.label} here.")
    passed: list[Spot] = [first]
    for arc, (_, end) in zip(arcs, spots, strict=True):
        if any(end.same(spot, room) for spot in passed[:-1]):
            here = arc.ends[1]
            message = f"{end.place.label} has been passed by an arc before."
            yield here.complaint(here.tree.span, "arcs-apart", message, "Let every arc end at a place of its own.")
        passed.append(end)
