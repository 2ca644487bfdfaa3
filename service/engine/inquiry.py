"""Small questions to a worker whose asker waits: nothing is kept, and an answer that nobody wants any more is dropped.

They have a child of their own, which starts with the first question, so that they neither wait for runs nor hold up
any; what a question costs is bounded as for a run.
"""

from __future__ import annotations

import asyncio
import contextlib
import itertools
import threading
from collections.abc import Mapping
from typing import Any

from service.engine.local import LocalEngine
from service.engine.records import Ending, Job, Outcome

_MOST = 16  # questions that may wait


class Inquiries:
    """Asks the function `job` ("module:function")."""

    def __init__(self, job: str, *, memory: int) -> None:
        self._memory = memory
        self._engine = LocalEngine(1, job=job, memory=memory)
        self._lock = threading.Lock()
        self._started = False
        self._numbers = itertools.count()
        self._asked: dict[str, tuple[asyncio.AbstractEventLoop, asyncio.Future[Outcome]]] = {}

    async def ask(self, head: Mapping[str, Any], body: bytes, seconds: float) -> Outcome | None:
        """The outcome of one question, which is killed after so many seconds; None where too many wait already."""
        loop = asyncio.get_running_loop()
        future: asyncio.Future[Outcome] = loop.create_future()
        with self._lock:
            if len(self._asked) >= _MOST:
                return None
            number = next(self._numbers)
            id = f"question {number}"
            self._asked[id] = loop, future
            if not self._started:
                self._started = True
                self._engine.start(self)
        self._engine.submit(Job(id, body, head, created=float(number), wall=seconds, memory=self._memory))
        try:
            return await future
        finally:
            if not future.done() or future.cancelled():
                self._engine.cancel(id)

    def close(self) -> None:
        """End the child; who still waits gets CLOSED."""
        self._engine.close()

    def progress(self, job: Job, event: dict[str, Any]) -> None:
        """Nobody listens."""

    def ended(self, job: Job, outcome: Outcome) -> None:
        """Hand the answer to who waits for it."""
        with self._lock:
            loop, future = self._asked.pop(job.id)

        def tell() -> None:
            if not future.done():
                future.set_result(outcome)

        with contextlib.suppress(RuntimeError):  # the loop is closed: nobody waits any more
            loop.call_soon_threadsafe(tell)


def answer(outcome: Outcome | None) -> bytes | None:
    """The answer where there is one."""
    return outcome.body if outcome is not None and outcome.ending is Ending.ANSWERED else None
