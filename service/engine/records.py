"""What an engine takes and gives: a job, its outcome, how many can be had at once."""

from __future__ import annotations

import pickle
from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import Enum
from typing import Any, Protocol


def packed(parts: tuple[Any, ...]) -> bytes:
    """Records on their way to a child of this very installation; they are read nowhere else and never kept."""
    return pickle.dumps(parts, pickle.HIGHEST_PROTOCOL)


@dataclass(frozen=True, slots=True)
class Job:
    """One attempt at something to compute.  `head` and `body` are handed to the child's function as they are."""

    id: str
    body: bytes
    head: Mapping[str, Any] = field(default_factory=dict)
    attempt: int = 1
    priority: int = 0  # higher first
    created: float = 0.0  # then the oldest first
    wall: float = 60.0  # seconds after which the child is killed
    memory: int = 1024 * 2**20  # bytes of resident memory at which the child is killed


class Ending(Enum):
    """How an attempt ended."""

    ANSWERED = "answered"  # the function returned: `head` and `body` are its answer
    RAISED = "raised"  # the function raised: `reason` names the exception, `detail` is the traceback
    STOPPED = "stopped"  # cancelled, and it did not stop by itself in time
    LIMIT = "limit"  # killed at a limit of time or memory
    DIED = "died"  # the child died, and we did not kill it
    UNSTARTED = "unstarted"  # no child could be had: says nothing about the job
    CLOSED = "closed"  # the engine was closed in the middle


@dataclass(frozen=True, slots=True)
class Outcome:
    """The end of an attempt.  `seconds` from its begin in the child; `reason` is for users, `detail` for the log."""

    ending: Ending
    head: Mapping[str, Any] = field(default_factory=dict)
    body: bytes = b""
    reason: str = ""
    detail: str = ""
    seconds: float = 0.0


@dataclass(frozen=True, slots=True)
class Capacity:
    """Slots in all, slots without a job, slots whose child stands ready or works."""

    slots: int
    free: int
    alive: int


class Sink(Protocol):
    """Takes what an engine tells; called from the engine's threads, one call at a time per job."""

    def progress(self, job: Job, event: dict[str, Any]) -> None:
        """The job told how far it is."""

    def ended(self, job: Job, outcome: Outcome) -> None:
        """The attempt is over; its slot already counts as free."""


class Engine(Protocol):
    """Solves jobs somewhere.  Holds nothing that must survive: the truth is in the store."""

    def prepare(self) -> None:
        """Begin to start a child and do not wait until it is ready; for who has other things to load meanwhile."""

    def start(self, sink: Sink) -> None:
        """Begin to take jobs and tell `sink` about them; prepares what is not prepared yet."""

    def capacity(self) -> Capacity:
        """How much room there is now."""

    def submit(self, job: Job) -> None:
        """Queue a job; every job gets exactly one `Sink.ended`."""

    def cancel(self, id: str) -> bool:
        """Ask a job to stop, and force it soon after.  False where the engine does not hold it."""

    def close(self) -> None:
        """Stop all at once; jobs end as CLOSED."""
