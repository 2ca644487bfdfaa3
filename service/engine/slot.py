"""A slot: one long-lived child process that does one job at a time, within limits of time and memory.

`run(job, report)` blocks until the attempt is over and says exactly how: answered, raised, stopped, killed at a limit,
or died.  The death of a child that had not begun the job is not the job's: a new child takes it.
"""

from __future__ import annotations

import contextlib
import os
import threading
import time
from collections.abc import Callable
from typing import Any

from service.engine.process import ChildGoneError, Process
from service.engine.records import Ending, Job, Outcome

_TICK = 0.05  # seconds between looks at clock and memory
_READY_SECONDS = 30.0
_STARTS = 3  # children that may fail before a job begins
_NEAR = 0.9  # a death above this part of the memory limit is a death of memory
_IDLE_MEMORY = 100 * 2**20  # a waiting child that keeps more for itself is replaced

Report = Callable[[dict[str, Any]], None]


class Slot:
    """Runs the function `job` ("module:function", see `service.engine.child`) in a child.

    All methods but `cancel`, `shut` and `alive` belong to one thread, the one that starts the children: the kernel
    ends a child with the thread that started it.  `cancel_grace`: seconds between asking and killing.
    """

    def __init__(self, job: str, *, memory: int, cancel_grace: float = 0.5) -> None:
        self._job = job
        # Well above the watched limit: an allocation refused by the system makes solvers report nonsense.
        self._address_space = 2 * memory + 3 * 2**30
        self._cancel_grace = cancel_grace
        self._wake = os.eventfd(0, os.EFD_CLOEXEC | os.EFD_NONBLOCK)
        self._cancelled = threading.Event()
        self._shut = threading.Event()
        self._process: Process | None = None

    @property
    def alive(self) -> bool:
        """True where a child stands ready or works."""
        process = self._process
        return process is not None and process.alive

    def arm(self) -> None:
        """Forget cancels of earlier jobs: from now on `cancel` means the next one."""
        self._cancelled.clear()

    def cancel(self) -> None:
        """Ask the current job to stop; it is killed after the grace.  From any thread."""
        self._cancelled.set()
        os.eventfd_write(self._wake, 1)

    def shut(self) -> None:
        """Make `run` return CLOSED at once.  From any thread."""
        self._shut.set()
        os.eventfd_write(self._wake, 1)

    def tend(self) -> None:
        """Have a fresh child ready, where there is none or it is dead or fat.  For idle moments."""
        if self._process is not None and (not self._process.alive or self._process.own > _IDLE_MEMORY):
            self._end()
        if self._process is None and not self._shut.is_set():
            with contextlib.suppress(ChildGoneError, OSError):  # the next job will say why
                self._start()

    def close(self) -> None:
        """End the child and free the slot; the slot cannot be used again."""
        self._end()
        os.close(self._wake)

    def run(self, job: Job, report: Report) -> Outcome:
        """Do one job to its end."""
        why = ""
        for _ in range(_STARTS):
            try:
                process = self._process or self._start()
                process.send({"kind": "job", "head": dict(job.head)}, job.body)
            except (ChildGoneError, OSError) as gone:
                why = self._bury() if self._process is not None else str(gone)
                continue
            try:
                outcome = self._attend(process, job, report)
            except BaseException:
                self._end()  # its child is in the middle of a job that nobody attends to
                raise
            if outcome.ending is not Ending.UNSTARTED:
                return outcome
            why = outcome.reason
        return Outcome(Ending.UNSTARTED, reason=f"no worker could be started: {why}", detail=why)

    def _attend(self, process: Process, job: Job, report: Report) -> Outcome:
        """Watch the child until the job is over."""
        begun: float | None = None
        sent = time.monotonic()
        kill_at = float("inf")
        peak = 0
        while True:
            try:
                frames = process.receive(_TICK)
            except ChildGoneError:
                return self._autopsy(job, begun, peak)
            now = time.monotonic()
            for head, body in frames:
                match head["kind"]:
                    case "begun":
                        begun = now
                    case "progress":
                        report(head["event"])
                    case "answer":
                        return Outcome(Ending.ANSWERED, head["head"], body, seconds=head["seconds"])
                    case "error":
                        return _raised(head)
            if self._shut.is_set():
                return self._kill(Ending.CLOSED, "the server was closed", sent)
            if self._cancelled.is_set() and kill_at == float("inf"):
                kill_at = now + self._cancel_grace
                try:
                    process.send({"kind": "cancel"})
                except ChildGoneError:
                    continue  # the next look finds out why
            if now >= kill_at:
                return self._kill(Ending.STOPPED, "stopped on request", sent)
            if now - sent > job.wall:
                return self._kill(Ending.LIMIT, f"wall limit: killed after {job.wall:g} s", sent)
            rss = process.rss
            peak = max(peak, rss)
            if rss > job.memory:
                return self._kill(Ending.LIMIT, _memory_reason(job), sent)

    def _start(self) -> Process:
        """Start a child and wait until it is ready.  Raises ChildGoneError with the reason."""
        process = Process(self._job, self._address_space)
        process.also_wake_on(self._wake)
        deadline = time.monotonic() + _READY_SECONDS
        try:
            while not any(head["kind"] == "ready" for head, _ in process.receive(_TICK)):
                if time.monotonic() > deadline or self._shut.is_set():
                    process.kill()
                    raise ChildGoneError(f"not ready within {_READY_SECONDS:g} s")
        except ChildGoneError as gone:
            if gone.args:
                raise
            how = process.bury()
            raise ChildGoneError(f"{how} before it was ready: {process.printed[-1000:]}") from None
        self._process = process
        return process

    def _autopsy(self, job: Job, begun: float | None, peak: int) -> Outcome:
        """What the end of the stream means."""
        printed = self._process.printed if self._process else ""
        how = self._bury()
        if begun is None:
            return Outcome(Ending.UNSTARTED, reason=how)
        seconds = time.monotonic() - begun
        if peak > _NEAR * job.memory or "bad_alloc" in printed:
            return Outcome(Ending.LIMIT, reason=_memory_reason(job), detail=f"{how}\n{printed}", seconds=seconds)
        return Outcome(Ending.DIED, reason=how, detail=printed, seconds=seconds)

    def _kill(self, ending: Ending, reason: str, since: float) -> Outcome:
        self._end()
        return Outcome(ending, reason=reason, seconds=time.monotonic() - since)

    def _bury(self) -> str:
        process, self._process = self._process, None
        return process.bury() if process else "there was none"

    def _end(self) -> None:
        process, self._process = self._process, None
        if process is not None:
            process.kill()


def _memory_reason(job: Job) -> str:
    return f"memory limit: it needed more than {job.memory / 2**20:.0f} MB"


def _raised(head: dict[str, Any]) -> Outcome:
    seconds = head["seconds"]
    if head["error"] == "MemoryError":
        reason = "memory limit: an allocation was refused"
        return Outcome(Ending.LIMIT, reason=reason, detail=head["trace"], seconds=seconds)
    reason = f"{head['error']}: {head['message']}" if head["message"] else head["error"]
    return Outcome(Ending.RAISED, reason=reason, detail=head["trace"], seconds=seconds)
