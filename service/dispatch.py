"""Brings waiting runs to the engine and their outcomes to the store.

    Dispatcher(store, settings, engine)   start()  close()  capacity()
    submit(run, document) -> Run  cancel(id) -> Run | None  delete(id) -> bool    block for a commit: call in a thread
    await wait(id, seconds) -> Run | None  async for event in follow(id, after)   for the event loop
    await understand(document) -> bytes | None                                    the reading, in a worker

The store is the truth.  The dispatcher holds leases on the runs that it solves and renews them; what it held in an
earlier life waits again at `start`.  An outcome that cannot be written waits in memory until the disk has room.
"""

from __future__ import annotations

import asyncio
import logging
import threading
import time
from collections import deque
from collections.abc import AsyncIterator, Callable
from dataclasses import replace
from functools import partial
from typing import Any

from service.engine.inquiry import Inquiries, answer
from service.engine.records import Capacity, Ending, Engine, Job, Outcome
from service.owner import Owner
from service.progress import Event, Progress
from service.run import Figures, Run, State, StoreError
from service.settings import Settings
from service.store import Store
from service.workers import workers

_log = logging.getLogger(__name__)

_LOOK_SECONDS = 1.0  # between looks for expired leases, unwritten outcomes and room in the engine

Write = Callable[[], Run | None]
"""Writes an outcome; the run after it, or None where it was not this attempt's to change."""


class Dispatcher:
    """The link between store and engine; with `engine`, what `workers` made is taken over and closed in the end."""

    def __init__(self, store: Store, settings: Settings, engine: Engine | None = None) -> None:
        self._store = store
        self._settings = settings
        self._progress = Progress()
        self._engine = engine or workers(settings)
        self._inquiries = Inquiries("service.understanding:understand", memory=settings.memory_mb * 2**20)
        self._feeding = threading.RLock()
        self._backlog = True  # runs may be waiting in the store
        self._held: dict[str, Run] = {}  # what the engine has
        self._just_ended: deque[Run] = deque(maxlen=64)  # spares those who wait for them a look into the store
        self._unwritten: dict[tuple[str, int], tuple[Run, Write]] = {}
        self._closing = threading.Event()
        self._owner: Owner | None = None
        self._keeper = threading.Thread(target=self._keep, name="dispatch", daemon=True)

    # For the server

    def start(self) -> None:
        """Take back what an earlier life left, and begin to solve.  Raises DirectoryInUseError, StoreError."""
        self._owner = Owner(self._settings.data)
        self._store.take_back(self._owner.name)
        self._engine.start(self)
        self._keeper.start()

    def close(self) -> None:
        """Stop all; runs in the middle wait for the next start."""
        if self._closing.is_set():
            return
        self._closing.set()
        self._inquiries.close()
        self._engine.close()
        if self._keeper.ident is not None:
            self._keeper.join()
        self._write_again()
        if self._owner is not None:
            self._owner.release()

    def capacity(self) -> Capacity:
        """Slots, free slots, living workers."""
        return self._engine.capacity()

    # For the routes

    def submit(self, run: Run, document: str, assembled: bytes = b"") -> Run:
        """Accept a run for good; the run that came earlier with the same idempotency key, where there is one.

        `assembled` is what the worker would make of the document, packed: it spares that where a slot is free.
        Raises IdempotencyError, QueueFullError, StoreError.
        """
        with self._feeding:
            if self._owner is not None and not self._backlog and self._room():
                lease = time.time() + self._settings.lease_seconds
                claimed = replace(run, state=State.SOLVING, attempt=1, owner=self._owner.name, lease=lease)
                return self._begin(claimed, document, assembled)
            accepted = self._store.accept(run, document, queue=self._settings.queue)
            if accepted.id == run.id:
                self._progress.publish(run.id, {"kind": "state", "state": State.WAITING.value})
            self._backlog = True
        self._feed()
        return accepted

    def cancel(self, id: str) -> Run | None:
        """Ask a run to stop; one that waits stops at once.  None where there is no such run.  Raises StoreError."""
        run = self._store.ask_cancel(id)
        if run is not None:
            if run.state is State.SOLVING:
                self._engine.cancel(id)
            elif run.state is State.STOPPED:
                self._end(id, State.STOPPED)
        return run

    def delete(self, id: str) -> bool:
        """Forget a run with its result; one in the middle is stopped.  False where unknown.  Raises StoreError."""
        known = self._store.delete(id)
        if known:
            self._engine.cancel(id)
            self._end(id, State.STOPPED)
        return known

    async def wait(self, id: str, seconds: float) -> Run | None:
        """The run when it has ended, or as it is after so many seconds; None where there is no such run."""
        if id not in self._held:  # else it is known and has not ended: no need to ask
            run = await asyncio.to_thread(self._store.get, id)
            if run is None or run.state.ended:
                return run
        await self._progress.ended(id, seconds)
        ended = next((run for run in tuple(self._just_ended) if run.id == id), None)
        return ended or await asyncio.to_thread(self._store.get, id)

    async def follow(self, id: str, after: str | None = None) -> AsyncIterator[Event]:
        """The events of a run after the one with the id `after`, until its end.  Nothing where there is no such run."""
        run = await asyncio.to_thread(self._store.get, id)
        if run is not None and run.state.ended:
            self._end(id, run.state)  # where nobody has told it here: solved by another server or in an earlier life
        if run is None:
            return
        async for event in self._progress.follow(id, after):
            if event is not None:
                yield event
                continue
            run = await asyncio.to_thread(self._store.get, id)
            if run is None or run.state.ended:
                self._end(id, State.STOPPED if run is None else run.state)

    async def understand(self, document: bytes) -> bytes | None:
        """The reading of a valid document with its necessary conditions, as JSON text; None where it takes too long."""
        seconds = self._settings.understand_seconds
        return answer(await self._inquiries.ask({"seconds": seconds / 2}, document, seconds))

    # For the engine

    def progress(self, job: Job, event: dict[str, Any]) -> None:
        """Pass a sign of life on."""
        self._progress.publish(job.id, event)

    def ended(self, job: Job, outcome: Outcome) -> None:
        """Write what came of an attempt, and bring the next one."""
        with self._feeding:
            run = self._held.pop(job.id, None)
        if run is None:  # it could not be kept
            self._feed()
            return
        if outcome.ending in (Ending.RAISED, Ending.DIED, Ending.UNSTARTED):
            _log.warning("run %s, attempt %d: %s\n%s", run.id, run.attempt, outcome.reason, outcome.detail)
        self._write(run, partial(self._settle, run, outcome))
        if outcome.ending is not Ending.UNSTARTED:  # then the keeper tries again, a little later
            self._feed()

    # Inside

    def _begin(self, run: Run, document: str, assembled: bytes) -> Run:
        """Accept a claimed run.  Its worker starts while the disk is still busy; nobody is told before that is done."""
        if run.key is not None:  # maybe an earlier run is meant: look first
            accepted = self._store.accept(run, document)
            if accepted.id == run.id:
                self._hand_over(run, document, assembled)
            return accepted
        self._hand_over(run, document, assembled)
        try:
            return self._store.accept(run, document)
        except BaseException:
            del self._held[run.id]
            self._engine.cancel(run.id)
            self._end(run.id, State.STOPPED)
            raise

    def _settle(self, run: Run, outcome: Outcome) -> Run | None:
        """Write an outcome; the run as it is then.  Raises StoreError."""
        store, seconds = self._store, outcome.seconds
        match outcome.ending:
            case Ending.ANSWERED:
                figures = Figures(**outcome.head["figures"], seconds=seconds)
                stopped = bool(outcome.head.get("stopped"))
                return store.finish(run, outcome.body, figures, stopped=stopped)
            case Ending.STOPPED:
                return store.stop(run, seconds=seconds)
            case Ending.RAISED:
                reason = f"error in the worker: {outcome.reason}"
                return store.fail(run, reason, seconds=seconds)
            case Ending.LIMIT:
                return store.fail(run, outcome.reason, seconds=seconds)
            case Ending.DIED:
                deaths = run.deaths + 1
                run = replace(run, deaths=deaths, reason=f"its worker died: {outcome.reason}")
                if deaths < self._settings.attempts:
                    return store.give_back(run)
                reason = f"its worker died {deaths} times, the last time by {outcome.reason}"
                return store.fail(run, reason, seconds=seconds)
            case Ending.UNSTARTED | Ending.CLOSED:
                return store.give_back(run)

    def _write(self, run: Run, write: Write) -> None:
        """Write and tell; keep for later what cannot be written now."""
        try:
            after = write()
        except StoreError as error:
            if (run.id, run.attempt) not in self._unwritten:
                _log.error("run %s: its outcome waits in memory: %s", run.id, error)
            self._unwritten[run.id, run.attempt] = run, write
            return
        except Exception:
            _log.exception("run %s: its outcome is unusable", run.id)
            self._unwritten[run.id, run.attempt] = run, partial(self._give_up, run)
            return
        self._unwritten.pop((run.id, run.attempt), None)
        if after is None:
            return
        if after.state is State.WAITING:
            self._backlog = True
            self._progress.publish(run.id, {"kind": "state", "state": after.state.value})
        else:
            self._just_ended.append(after)
            self._end(run.id, after.state)

    def _give_up(self, run: Run) -> Run | None:
        return self._store.fail(run, "internal error: the worker's answer could not be kept")

    def _end(self, id: str, state: State) -> None:
        self._progress.publish(id, {"kind": "end", "state": state.value})

    def _room(self) -> int:
        return 0 if self._closing.is_set() else self._engine.capacity().free

    def _feed(self) -> None:
        """Claim as many runs as there is room for."""
        with self._feeding:
            free = self._room()
            if not self._backlog or not free or self._owner is None:
                return
            self._backlog = False
            try:
                claimed = self._store.claim(self._owner.name, free, self._settings.lease_seconds)
            except StoreError as error:
                self._backlog = True
                _log.error("runs cannot be claimed now: %s", error)
                return
            self._backlog = len(claimed) == free
            for run in claimed:
                try:
                    document = self._store.document(run.id)
                except StoreError:
                    self._write(run, partial(self._settle, run, Outcome(Ending.UNSTARTED)))
                    continue
                if document is not None:  # else it was deleted this moment
                    self._hand_over(run, document)

    def _hand_over(self, run: Run, document: str, assembled: bytes = b"") -> None:
        """Give a claimed run to the engine."""
        if run.cancel_asked:
            self._write(run, partial(self._settle, run, Outcome(Ending.STOPPED)))
            return
        seconds = min(run.time_limit, self._settings.longest_solve)
        self._held[run.id] = run
        self._progress.publish(run.id, {"kind": "state", "state": State.SOLVING.value})
        self._engine.submit(
            Job(
                run.id,
                assembled or document.encode(),
                {"id": run.id, "time_limit": seconds, "assembled": bool(assembled)},
                attempt=run.attempt,
                priority=run.priority,
                created=run.created,
                wall=seconds + self._settings.wall_grace,
                memory=self._settings.memory_mb * 2**20,
            )
        )

    def _keep(self) -> None:
        """The life of the keeper's thread: leases, unwritten outcomes, runs that others left."""
        renewed = time.monotonic()
        while True:
            self._write_again()
            self._backlog = True
            self._feed()
            if time.monotonic() - renewed > self._settings.lease_seconds / 3:
                renewed = time.monotonic()
                self._renew()
            if self._closing.wait(_LOOK_SECONDS):
                return

    def _renew(self) -> None:
        assert self._owner is not None
        try:
            for id in self._store.renew(self._owner.name, self._settings.lease_seconds):
                self._engine.cancel(id)
        except StoreError as error:
            _log.error("leases cannot be renewed now: %s", error)

    def _write_again(self) -> None:
        for run, write in list(self._unwritten.values()):
            self._write(run, write)
