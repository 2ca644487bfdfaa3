"""Bipartite matching: which demands can be met when each supply serves one of them, and which together ask too much.

Reference: Hall (1935), On representatives of subsets; Dulmage and Mendelsohn (1958), Coverings of bipartite graphs
(from memory).
"""

from __future__ import annotations

from collections.abc import Collection, Hashable, Sequence
from typing import Generic, TypeVar

Supply = TypeVar("Supply", bound=Hashable)


class Matching(Generic[Supply]):
    """A largest matching of demands (by index) to supplies; `wants[i]` are the supplies that can serve demand i.

    Demands are served in order, so that among equals the later ones go without.
    """

    def __init__(self, wants: Sequence[Collection[Supply]]) -> None:
        self.wants = wants
        self.serves: dict[Supply, int] = {}
        self.unmet = [index for index in range(len(wants)) if not self._serve(index)]

    def _serve(self, demand: int) -> bool:
        """Find an augmenting path by breadth-first search and turn it round."""
        came_from: dict[Supply, int] = {}
        waiting = [demand]
        for current in waiting:  # grows while it is read
            for supply in self.wants[current]:
                if supply in came_from:
                    continue
                came_from[supply] = current
                if supply in self.serves:
                    waiting.append(self.serves[supply])
                    continue
                self._turn(supply, came_from, demand)
                return True
        return False

    def _turn(self, supply: Supply, came_from: dict[Supply, int], start: int) -> None:
        held = {demand: taken for taken, demand in self.serves.items()}
        while True:
            demand = came_from[supply]
            self.serves[supply] = demand
            if demand == start:
                return
            supply = held[demand]

    def too_much(self, demand: int) -> list[int]:
        """The demands, `demand` among them, that together want fewer supplies than they are (Hall's condition)."""
        found = [demand]
        for current in found:
            for supply in self.wants[current]:
                other = self.serves[supply]
                if other not in found:
                    found.append(other)
        return sorted(found)

    def spare(self, supplies: Collection[Supply]) -> set[Supply]:
        """The supplies that some largest matching leaves idle: the underdetermined part of the graph."""
        found = [supply for supply in supplies if supply not in self.serves]
        reached = set(found)
        wanted_by: dict[Supply, list[int]] = {}
        for index, wanted in enumerate(self.wants):
            for supply in wanted:
                wanted_by.setdefault(supply, []).append(index)
        served = {demand: supply for supply, demand in self.serves.items()}
        for supply in found:
            for demand in wanted_by.get(supply, ()):
                other = served.get(demand)
                if other is not None and other not in reached:
                    reached.add(other)
                    found.append(other)
        return reached
