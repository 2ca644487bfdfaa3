"""Where arcs meet: that they follow each other from end to end, and which side of a junction a value is meant on."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

from service.assemble.formulas import ArcFormulas, Formula, Formulas
from service.assemble.orders import Reach
from service.assemble.places import Places
from service.complaints import Complaint, listing
from solvers.formula.nodes import At, Name
from solvers.formula.printer import text
from solvers.problem import Jump

Quantities = frozenset[tuple[str, int]]


@dataclass(frozen=True, slots=True)
class Stretch:
    """What is known of an arc: the indices of its first and last place, the orders of the unknowns that occur on it,
    what its abbreviations depend on, and all unknowns of the problem.
    """

    formulas: ArcFormulas
    first: int
    last: int
    orders: dict[str, int]
    reach: Reach
    unknowns: frozenset[str]

    def behind(self, node: At | Name) -> Quantities:
        """The quantities that a value depends on here."""
        found = self.reach.get(node.name) or frozenset({(node.name, node.order)})
        return frozenset((name, order) for name, order in found if name in self.unknowns)

    def raise_orders(self, found: Iterable[tuple[str, int]]) -> None:
        """Let derivatives count that only occur in values at places."""
        for name, order in found:
            if name in self.orders:
                self.orders[name] = max(self.orders[name], order)


class Junctions:
    """The arcs in order and what jumps between them; chooses the side of every value at a place."""

    def __init__(self, stretches: Sequence[Stretch], places: Places, formulas: Formulas) -> None:
        self.stretches = stretches
        self.places = places
        self.own = {name for arc in formulas.arcs for name in arc.where}
        self.jumps: frozenset[Jump] = frozenset()

    def around(self, place: int) -> tuple[Stretch | None, Stretch | None]:
        """The arcs that end and begin at a place; the same one twice where the place lies inside an arc."""
        before = next((s for s in self.stretches if s.first < place <= s.last), None)
        after = next((s for s in self.stretches if s.first <= place < s.last), None)
        return before, after

    def jump(self, node: At, place: int) -> Iterator[Jump]:
        """What a value after a junction lets jump there."""
        before, after = self.around(place)
        if node.side == "+" and before is not None and after is not None and before is not after:
            for name, order in after.behind(node):
                if order < min(before.orders.get(name, 0), after.orders.get(name, 0)):
                    yield Jump(name, order, place)

    def side(self, node: At, place: int) -> str | None:
        """The side on which a value is meant, "-" or "+"; None where that is open."""
        before, after = self.around(place)
        if node.side or before is None or after is None or before is after:
            return node.side or ("+" if before is None else "-")
        sides = [side for side, stretch in (("-", before), ("+", after)) if self.known(stretch, node)]
        if len(sides) == 2 and not self.continuous(node, place, before, after):
            return None
        return sides[0] if sides else "-"

    def known(self, stretch: Stretch, node: At) -> bool:
        """Whether all that a value depends on occurs on an arc."""
        return all(name in stretch.orders for name, _ in stretch.behind(node))

    def continuous(self, node: At, place: int, before: Stretch, after: Stretch) -> bool:
        """Whether a value is the same on both sides of a junction."""
        if node.name in self.own:
            return False
        return all(
            order < min(before.orders[name], after.orders[name]) and Jump(name, order, place) not in self.jumps
            for name, order in before.behind(node) | after.behind(node)
        )

    def named(self, arc: str, place: int) -> str | None:
        """The side of a place on which a named arc lies; None where it does not reach there."""
        stretch = next(stretch for stretch in self.stretches if stretch.formulas.name == arc)
        if not stretch.first <= place <= stretch.last:
            return None
        return "-" if place > stretch.first else "+"

    def complaints(self, formulas: Sequence[Formula], index: dict[int, int]) -> Iterator[Complaint]:
        """One-sided values at places that are no junctions, values without a side where both differ, and values of
        what does not occur there.  `index` has the place of every node, by its identity.
        """
        for formula in formulas:
            for node in formula.nodes:
                if isinstance(node, At):
                    yield from self.of_value(formula, node, index[id(node)])

    def of_value(self, formula: Formula, node: At, place: int) -> Iterator[Complaint]:
        """What is wrong with one value."""
        before, after = self.around(place)
        shown = node.name + "'" * node.order
        label = text(node.place)
        if node.side and (before is None or after is None or before is after):
            message = f"At {label} no arcs meet: there is only one value."
            yield formula.complaint(node.span, "no-junction", message, f"Write {shown}({label}).")
            return
        side = self.side(node, place)
        if side is None:
            message = f"“{shown}” may differ on the two sides of {label}."
            hint = f"Write {shown}({label}-) for the value before, {shown}({label}+) for the one after."
            yield formula.complaint(node.span, "which-side", message, hint)
            return
        stretch = before if side == "-" else after
        assert stretch is not None  # each place has an arc on one side at least
        if not self.known(stretch, node):
            missing = listing(sorted({name for name, _ in stretch.behind(node) if name not in stretch.orders}))
            message = f"“{missing}” is in no law of the arc {stretch.formulas.name}: it has no value there."
            hint = f"Say how it moves there, as in {missing}' = 0."
            yield formula.complaint(node.span, "not-on-arc", message, hint)
