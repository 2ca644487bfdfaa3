"""How several tasks are done: one after the other in this process, or by whoever can do them beside each other."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Protocol

from solvers.solution import Progress, Solution, Watch

Task = Callable[[Watch], Solution | None]
"""Solves something, and tells how far it is; None where there was no time left to begin."""
Hear = Callable[[int, Progress], bool]
"""Takes a task's number and its sign of life; True asks all tasks to stop."""


@dataclass(frozen=True, slots=True)
class Lost:
    """A task that broke, with the reason."""

    reason: str


class Together(Protocol):
    """Does tasks; nothing but the time that it takes may depend on how many are done at once."""

    @property
    def processes(self) -> int:
        """How many are done at once."""

    def __call__(self, tasks: Sequence[Task], hear: Hear, /) -> list[Solution | Lost | None]:
        """The outcomes in the order of the tasks; None for those that were not begun."""


class InTurn:
    """One after the other, in this process."""

    processes = 1

    def __call__(self, tasks: Sequence[Task], hear: Hear, /) -> list[Solution | Lost | None]:
        """Do them; what a task raises is raised."""
        stopped = False

        def heard(number: int, progress: Progress) -> bool:
            nonlocal stopped
            stopped = hear(number, progress) or stopped
            return stopped

        return [None if stopped else task(partial(heard, number)) for number, task in enumerate(tasks)]


IN_TURN = InTurn()
