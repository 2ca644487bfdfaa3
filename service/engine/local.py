"""The embedded engine: some slots in the server's process, one thread each, fed by priority, then age."""

from __future__ import annotations

import heapq
import itertools
import logging
import threading
import time
from dataclasses import replace
from functools import partial

from service.engine.records import Capacity, Ending, Job, Outcome, Sink
from service.engine.slot import Slot

_log = logging.getLogger(__name__)

_CLOSED = Outcome(Ending.CLOSED, reason="the server was closed")
_YIELD_SECONDS = 1e-4  # who submits has more to do, but the slot's thread shall have the interpreter first
_IDLE_SECONDS = 1.0  # how often a slot without a job looks after its child


class LocalEngine:
    """`slots` children of `job` ("module:function")."""

    def __init__(self, slots: int, *, job: str, memory: int, cancel_grace: float = 0.5) -> None:
        self._sink: Sink
        self._slots = [Slot(job, memory=memory, cancel_grace=cancel_grace) for _ in range(slots)]
        self._changed = threading.Condition()
        self._starting = threading.Lock()
        self._queue: list[tuple[int, float, int, Job]] = []
        self._order = itertools.count()
        self._running: dict[str, Slot] = {}
        self._closing = False
        self._threads = [
            threading.Thread(target=self._work, args=(slot,), name=f"slot-{number}", daemon=True)
            for number, slot in enumerate(self._slots)
        ]

    def prepare(self) -> None:
        """Start the first child.  The others would only slow down what is loaded beside it; they come with `start`."""
        self._start_threads(1)

    def start(self, sink: Sink) -> None:
        """Take jobs from now on; what happens to them goes to `sink`."""
        self._sink = sink
        self._start_threads(len(self._threads))

    def capacity(self) -> Capacity:
        """How much room there is now."""
        with self._changed:
            free = len(self._slots) - len(self._running) - len(self._queue)
        return Capacity(len(self._slots), max(0, free), sum(slot.alive for slot in self._slots))

    def submit(self, job: Job) -> None:
        """Queue a job; after `close` it ends as CLOSED at once."""
        accepted = False
        with self._changed:
            if not self._closing:
                heapq.heappush(self._queue, (-job.priority, job.created, next(self._order), job))
                self._changed.notify()
                accepted = True
        if accepted:
            time.sleep(_YIELD_SECONDS)
        else:
            self._sink.ended(job, _CLOSED)

    def cancel(self, id: str) -> bool:
        """Stop a job, queued or running; False where there is none of that name."""
        with self._changed:
            slot = self._running.get(id)
            if slot is not None:
                slot.cancel()
                return True
            entry = next((entry for entry in self._queue if entry[3].id == id), None)
            if entry is None:
                return False
            self._queue.remove(entry)
            heapq.heapify(self._queue)
        self._sink.ended(entry[3], Outcome(Ending.STOPPED, reason="stopped on request"))
        return True

    def close(self) -> None:
        """End all children; what was running or queued ends as CLOSED."""
        with self._changed:
            if self._closing:
                return
            self._closing = True
            left = [entry[3] for entry in self._queue]
            self._queue.clear()
            for slot in self._slots:
                slot.shut()
            self._changed.notify_all()
        for job in left:
            self._sink.ended(job, _CLOSED)
        for slot, thread in zip(self._slots, self._threads, strict=True):
            if thread.ident is None:  # never started: nobody else closes its slot
                slot.close()
            else:
                thread.join()

    def _start_threads(self, count: int) -> None:
        """Each starts its child."""
        for thread in self._threads[:count]:
            if thread.ident is None:
                thread.start()

    def _work(self, slot: Slot) -> None:
        """The life of one thread."""
        with self._starting:  # one child after the other: so the first one is ready soonest
            slot.tend()
        while (job := self._next(slot)) is not None:
            try:
                outcome = slot.run(job, partial(self._sink.progress, job))
            except Exception as error:  # an error of ours must cost neither the thread nor the job's end
                _log.exception("job %s", job.id)
                outcome = Outcome(Ending.RAISED, reason=f"internal error: {error!r}")
            with self._changed:
                del self._running[job.id]
            try:
                self._sink.ended(job, outcome)
            except Exception:
                _log.exception("job %s", job.id)
            if not slot.alive:
                slot.tend()
        slot.close()

    def _next(self, slot: Slot) -> Job | None:
        """The next job for this slot; None when the engine closes."""
        while True:
            with self._changed:
                if not self._queue and not self._closing:
                    self._changed.wait(_IDLE_SECONDS)
                if self._closing:
                    return None
                if self._queue:
                    job = heapq.heappop(self._queue)[3]
                    slot.arm()
                    self._running[job.id] = slot
                    free = max(0, len(self._slots) - len(self._running) - len(self._queue))
                    return replace(job, head={**job.head, "processes": 1 + free})  # what idle slots would use
            slot.tend()
