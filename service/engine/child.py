"""The program of a slot's child: `python -m service.engine.child --socket FD --parent PID --job module:function`.

It imports the function's module (that is the preloading), says `ready`, then answers one job after the other:

    parent -> child   {"kind": "job", "head": {...}} + body;  {"kind": "cancel"}
    child -> parent   {"kind": "ready"}, {"kind": "begun"}, {"kind": "progress", "event": {...}},
                      {"kind": "answer", "head": {...}, "seconds"} + body,
                      {"kind": "error", "error", "message", "trace", "seconds"}

The function is `f(head, body, report, stop) -> (head, body)`: `report(event)` tells progress, `stop()` is True once the
job is cancelled.  A second thread reads the socket, so that a cancel arrives while the first one is in a solver, and
so that the child ends with its parent even then.
"""

from __future__ import annotations

import argparse
import gc
import importlib
import os
import queue
import resource
import signal
import socket
import sys
import threading
import time
import traceback
from collections.abc import Callable, Mapping
from typing import Any

from service.engine.frames import Unpacker, pack
from service.engine.lifeline import die_with
from service.memory import give_back, keep_freed

Report = Callable[[dict[str, Any]], None]
Stop = Callable[[], bool]
Function = Callable[[Mapping[str, Any], bytes, Report, Stop], tuple[Mapping[str, Any], bytes]]

_SWITCH_SECONDS = (
    0.0005  # a solver that comes back to Python waits so long for another thread, ten times less than usual
)
_IDLE_SECONDS = 0.2  # without a job for so long: give memory back


class _Line:
    """The child's end of the socket."""

    def __init__(self, fd: int) -> None:
        self._socket = socket.socket(fileno=fd)
        self._sending = threading.Lock()
        self._stop = threading.Event()
        self.jobs: queue.SimpleQueue[tuple[dict[str, Any], bytes]] = queue.SimpleQueue()
        self.stop: Stop = self._stop.is_set

    def send(self, head: Mapping[str, Any], body: bytes = b"") -> None:
        frame = pack(head, body)
        with self._sending:
            self._socket.sendall(frame)

    def listen(self) -> None:
        """Sort what arrives, until the parent is gone; then end at once, whatever the other thread does."""
        unpacker = Unpacker()
        try:
            while piece := self._socket.recv(1 << 18):
                for frame in unpacker.feed(piece):
                    if frame[0]["kind"] == "cancel":
                        self._stop.set()
                    else:
                        # Cleared here and not when the job begins: a cancel sent after it must not be lost.
                        self._stop.clear()
                        self.jobs.put(frame)
        finally:
            os._exit(0)


def _protect_the_machine(address_space: int) -> None:
    """A backstop behind the parent's watch; where memory runs out all the same, let the kernel choose this process."""
    if address_space:
        resource.setrlimit(resource.RLIMIT_AS, (address_space, address_space))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    try:
        with open("/proc/self/oom_score_adj", "w") as score:  # noqa: PTH123
            score.write("900")
    except OSError:
        pass


def _load(name: str) -> Function:
    module, _, function = name.partition(":")
    loaded: Function = getattr(importlib.import_module(module), function)
    return loaded


def _serve(line: _Line, function: Function) -> None:
    tidy = True
    while True:
        try:
            request, body = line.jobs.get(timeout=None if tidy else _IDLE_SECONDS)
        except queue.Empty:
            give_back()
            tidy = True
            continue
        tidy = False
        line.send({"kind": "begun"})
        began = time.perf_counter()
        try:
            head, answer = function(
                request["head"], body, lambda event: line.send({"kind": "progress", "event": event}), line.stop
            )
            line.send({"kind": "answer", "head": head, "seconds": time.perf_counter() - began}, answer)
        except BaseException as error:  # whatever it is, it is the job's outcome and not the end of the child
            trace = "".join(traceback.format_exception(error))
            name, message = type(error).__name__, str(error)[:2000]
            seconds = time.perf_counter() - began
            line.send({"kind": "error", "error": name, "message": message, "trace": trace[-8000:], "seconds": seconds})
        del body


def main() -> None:
    """Serve the parent until it closes the socket."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--socket", type=int, required=True)
    parser.add_argument("--parent", type=int, required=True)
    parser.add_argument("--job", required=True)
    parser.add_argument("--address-space", type=int, default=0)
    given = parser.parse_args()
    gc.disable()  # what is loaded now stays: there is nothing to collect
    die_with(given.parent)
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C in a terminal is for the parent
    line = _Line(given.socket)
    threading.Thread(target=line.listen, name="listen", daemon=True).start()
    function = _load(given.job)
    sys.setswitchinterval(_SWITCH_SECONDS)
    _protect_the_machine(given.address_space)
    keep_freed()
    gc.freeze()
    gc.enable()
    line.send({"kind": "ready"})
    _serve(line, function)


if __name__ == "__main__":
    main()
