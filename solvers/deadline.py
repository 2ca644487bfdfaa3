"""When to stop: on the clock on the wall, which is the user's limit, and on the processor's, which no load changes.

What a result may be called must not depend on what else the machine does: shares of the effort are counted in
processor time, and only the user's own limit on the wall.
"""

from __future__ import annotations

import time
from dataclasses import dataclass, replace


@dataclass(frozen=True, slots=True)
class Deadline:
    """Seconds on the clocks of `time.perf_counter` and `time.process_time`."""

    wall: float = float("inf")
    work: float = float("inf")

    @property
    def left(self) -> float:
        """Seconds left on the wall."""
        return self.wall - time.perf_counter()

    @property
    def work_left(self) -> float:
        """Seconds of processor time left."""
        return self.work - time.process_time()

    @property
    def over(self) -> bool:
        """Whether either has come."""
        return self.left <= 0 or self.work_left <= 0

    def within(self, seconds: float) -> Deadline:
        """The same, with at most so many more seconds of processor time."""
        return replace(self, work=min(self.work, time.process_time() + seconds))


FOREVER = Deadline()


def in_seconds(seconds: float) -> Deadline:
    """So many seconds on the wall from now."""
    return Deadline(time.perf_counter() + seconds)
