"""Which arc every observed point is of: as named, else as its place says, where that decides."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

from service.assemble.formulas import Formulas
from service.assemble.junctions import Junctions
from service.assemble.places import Places
from service.complaints import Complaint, listing
from solvers.formula.nodes import At, Name, walk
from solvers.problem import Observation, Observed


@dataclass(frozen=True, slots=True)
class MeasuredOnArcs:
    """The observations of a problem of arcs."""

    observations: tuple[Observation, ...]
    formulas: Formulas
    junctions: Junctions
    places: Places

    def sided(self) -> tuple[Observation, ...]:
        """The observations with the side of every point."""
        return tuple(
            replace(observation, points=tuple(replace(p, side=self.side(number, p) or "-") for p in observation.points))
            for number, observation in enumerate(self.observations)
        )

    def complaints(self) -> Iterator[Complaint]:
        """Points off their arc, at junctions whose sides differ, or of what their arc does not have."""
        for number, observation in enumerate(self.observations):
            for index, point in enumerate(observation.points):
                yield from self.of_point(number, point, f"{observation.pointer.removesuffix('/of')}/points/{index}")

    def side(self, number: int, point: Observed) -> str | None:
        """On which side of its place a point is meant; None where that is open, or its arc lies elsewhere."""
        place, arc = self.place(point), self.formulas.observed_on[number]
        if arc:
            return self.junctions.named(arc, place)
        sides = {self.junctions.side(node, place) for node in self.values(number, point)} - {None}
        open_ = any(self.junctions.side(node, place) is None for node in self.values(number, point))
        return None if open_ or len(sides) > 1 else next(iter(sides), "-" if place else "+")

    def of_point(self, number: int, point: Observed, pointer: str) -> Iterator[Complaint]:
        """What is wrong with one point."""
        place, arc, of = self.place(point), self.formulas.observed_on[number], self.observations[number].label
        label, side = self.places.spots[place].place.label, self.side(number, point)
        if side is None and arc:
            message = f"{label} is not on the arc {arc}."
            yield Complaint(pointer, None, "outside-arc", message, "Name the arc on which it lies, or leave that out.")
            return
        if side is None:
            message = f"“{of}” may differ on the two sides of {label}."
            hint = 'Say which arc was measured, in a list of its own: "arc": "…".'
            yield Complaint(pointer, None, "which-side", message, hint)
            return
        before, after = self.junctions.around(place)
        stretch = before if side == "-" else after
        assert stretch is not None  # the side is one on which there is an arc
        behind = {name for node in self.values(number, point) for name, _ in stretch.behind(node)}
        if missing := sorted(behind - stretch.orders.keys()):
            message = f"“{listing(missing)}” is in no law of the arc {stretch.formulas.name}: it has no value there."
            hint = f"Say how it moves there, as in {missing[0]}' = 0, or leave the point out."
            yield Complaint(pointer, None, "not-on-arc", message, hint)

    def place(self, point: Observed) -> int:
        """Which of the places a point is at."""
        return next(index for index, spot in enumerate(self.places.spots) if spot.place.tree is point.place)

    def values(self, number: int, point: Observed) -> Iterator[At]:
        """The values that a point is made of."""
        moving = self.junctions.own | self.junctions.stretches[0].unknowns | self.formulas.where.keys()
        for node in walk(self.observations[number].body):
            if isinstance(node, Name) and node.name in moving:
                yield At(node.name, node.order, point.place)
