"""A run and what can go wrong with keeping it: the records that store, dispatcher and routes share.

StoreError                 the database cannot be used now
+-- StoreFullError         no room on the disk: nothing was accepted or changed
+-- DirectoryInUseError    another server works in the data directory (see `service.owner`)
IdempotencyError           the key was used with another body
QueueFullError             too many runs are waiting
CursorError                a list cursor that this store did not make
"""

from __future__ import annotations

import secrets
import time
from dataclasses import dataclass
from enum import StrEnum

_ALPHABET = "23456789abcdefghjkmnpqrstuvwxyz"  # no look-alikes: addresses are read out and typed
_LENGTH = 26  # 31^26 > 2^128

LONGEST_SOUGHT = 200
"""Characters of a text that is looked for in titles."""


class State(StrEnum):
    """How far a run is."""

    WAITING = "waiting"
    SOLVING = "solving"
    FINISHED = "finished"  # the solver came to an end of its own, with whatever verdict
    FAILED = "failed"  # no answer: a limit, a crash, an error of ours; `reason` says which
    STOPPED = "stopped"  # cancelled; there may be a result with the best curve so far

    @property
    def ended(self) -> bool:
        """True where nothing more will happen."""
        return self not in (State.WAITING, State.SOLVING)


@dataclass(frozen=True, slots=True)
class Run:
    """One problem document being solved.  Times are seconds since 1970; numbers of the result in the user's units."""

    id: str
    title: str
    document_hash: str  # of the canonical document: equal where the same problem is meant
    created: float
    updated: float
    state: State = State.WAITING
    priority: int = 0  # higher first
    time_limit: float = 60.0  # seconds that the document grants its solver
    key: str | None = None  # idempotency key
    key_hash: str | None = None  # of the body that came with it
    attempt: int = 0  # which one this is; 0: none yet
    deaths: int = 0  # workers that died of it
    owner: str | None = None  # who solves it, until `lease`
    lease: float | None = None
    cancel_asked: bool = False
    verdict: str | None = None
    value: float | None = None
    value_error: float | None = None
    value_unit: str | None = None
    seconds: float | None = None  # of work in the worker
    reason: str | None = None  # why it failed, or how the last worker died


@dataclass(frozen=True, slots=True)
class Page:
    """A part of a list; `after` continues it, None at its end."""

    runs: tuple[Run, ...]
    after: str | None


@dataclass(frozen=True, slots=True)
class Figures:
    """What a result says in one line."""

    verdict: str | None = None
    value: float | None = None
    value_error: float | None = None
    value_unit: str | None = None
    seconds: float | None = None


class StoreError(Exception):
    """The database cannot be used now."""


class StoreFullError(StoreError):
    """There is no room on the disk: nothing was accepted or changed."""


class IdempotencyError(Exception):
    """The idempotency key was used before, with another body."""


class QueueFullError(Exception):
    """Too many runs are waiting."""


class CursorError(ValueError):
    """A cursor that this store did not make."""


def new_run(
    title: str,
    document_hash: str,
    *,
    time_limit: float = 60.0,
    priority: int = 0,
    key: str | None = None,
    key_hash: str | None = None,
) -> Run:
    """A run that waits, with an address nobody can guess."""
    id = "".join(secrets.choice(_ALPHABET) for _ in range(_LENGTH))
    now = time.time()
    return Run(id, title, document_hash, now, now, priority=priority, time_limit=time_limit, key=key, key_hash=key_hash)
