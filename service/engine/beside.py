"""Tasks of one job beside each other: each in a process that is forked from the job's own.

They belong to the job: they are in its process group and die with it, so that its kill holds for all of them, and its
slot weighs them together (`service.engine.process`).  What one of them does to itself, a crash of native code or memory
that runs out, costs the task it is at and nothing else.  They are forked before the job has told its first sign of
life, while its other threads rest.
"""

from __future__ import annotations

import contextlib
import mmap
import multiprocessing.connection as connections
import os
import signal
from collections import deque
from collections.abc import Sequence
from typing import Any

from service.engine.lifeline import die_with
from solvers.solution import Progress, Solution
from solvers.starts.together import Hear, Lost, Task


class Beside:
    """At most `processes` tasks at once; even a single one has a process of its own."""

    def __init__(self, processes: int) -> None:
        self.processes = max(1, processes)

    def __call__(self, tasks: Sequence[Task], hear: Hear, /) -> list[Solution | Lost | None]:
        """The outcomes in the order of the tasks; None for those that were not begun."""
        waiting = deque(range(len(tasks)))
        outcomes: list[Solution | Lost | None] = [None] * len(tasks)
        with mmap.mmap(-1, 1) as stop:
            helpers = [_Helper(tasks, stop) for _ in range(min(self.processes, len(tasks)))]
            try:
                for helper in helpers:
                    helper.take(waiting)
                while busy := [helper for helper in helpers if helper.number is not None]:
                    ready = connections.wait([helper.line for helper in busy])
                    for helper in (helper for helper in busy if helper.line in ready):
                        sort, what = helper.receive()
                        if sort == "sign":
                            if hear(helper.number, what):
                                stop[0] = 1
                                waiting.clear()
                            continue
                        outcomes[helper.number] = what
                        if sort == "dead" and waiting:
                            helpers.remove(helper)
                            helper.end()
                            helper = _Helper(tasks, stop)
                            helpers.append(helper)
                        helper.take(waiting)
            finally:
                for helper in helpers:
                    helper.end()
        return outcomes


class _Helper:
    """A forked process that does the tasks whose numbers it is given."""

    def __init__(self, tasks: Sequence[Task], stop: mmap.mmap) -> None:
        self.number: Any = None  # of the task it is at
        self.line, theirs = connections.Pipe()
        parent = os.getpid()
        self.pid = os.fork()
        if self.pid == 0:
            try:
                self.line.close()
                die_with(parent)
                signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C in a terminal is for the parent
                _serve(theirs, tasks, stop)
            finally:
                os._exit(0)
        theirs.close()

    def take(self, waiting: deque[int]) -> None:
        """Begin the next task, if there is one."""
        self.number = waiting.popleft() if waiting else None
        if self.number is not None:
            with contextlib.suppress(OSError):  # it is dead: `receive` says so
                self.line.send(self.number)

    def receive(self) -> tuple[str, Any]:
        """A sign of life, the outcome of the task, or how the process died in it."""
        try:
            message: tuple[str, Any] = self.line.recv()
            return message
        except (EOFError, OSError):
            _, status = os.waitpid(self.pid, 0)  # nobody else holds its end of the line
            self.pid = 0
            return "dead", Lost(f"its process died: {_in_words(os.waitstatus_to_exitcode(status))}")

    def end(self) -> None:
        """End the process where it still runs."""
        self.line.close()
        if self.pid:
            os.kill(self.pid, signal.SIGKILL)
            os.waitpid(self.pid, 0)
            self.pid = 0


def _serve(line: connections.Connection, tasks: Sequence[Task], stop: mmap.mmap) -> None:
    """Do what is asked for, until the other side is gone."""

    def watch(progress: Progress) -> bool:
        line.send(("sign", progress))
        return stop[0] == 1

    while True:
        number = line.recv()
        try:
            outcome: Solution | Lost | None = tasks[number](watch)
        except Exception as error:
            outcome = Lost(f"{type(error).__name__}: {error}")
        line.send(("done", outcome))


def _in_words(code: int) -> str:
    return f"exit code {code}" if code >= 0 else f"signal {-code} ({signal.Signals(-code).name})"
