"""An arc on a limit that a mesh has seen as two, with a gap between them, as one."""

from __future__ import annotations

from dataclasses import replace

from solvers.problem import Problem
from solvers.search.structure import SWITCH, on_limits


def joined(problem: Problem) -> Problem | None:
    """The problem without its first two switches between which a limit is left only to come back to it, if any."""
    for stretch in range(1, len(problem.places) - 2):
        before, here, after = (on_limits(problem.held, k) for k in (stretch - 1, stretch, stretch + 1))
        ends = [place.label for place in problem.places[stretch : stretch + 2]]
        if before and before == after and not here and all(label.startswith(SWITCH + " ") for label in ends):
            return replace(
                problem,
                places=(*problem.places[:stretch], *problem.places[stretch + 2 :]),
                parameters=tuple(p for p in problem.parameters if p.name not in ends),
                held=tuple(replace(h, stretch=_moved(h.stretch, stretch)) for h in problem.held
                           if h.stretch != stretch + 1),
                implied=tuple(replace(h, stretch=_moved(h.stretch, stretch)) for h in problem.implied
                              if h.stretch not in (stretch, stretch + 1)),
                calm=tuple(replace(c, stretch=_moved(c.stretch, stretch)) for c in problem.calm
                           if c.stretch != stretch),
            )  # fmt: skip
    return None


def _moved(stretch: int, gap: int) -> int:
    """The number of a stretch once the gap and the one behind it are gone."""
    return stretch if stretch < gap else stretch - 2
