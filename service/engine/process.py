"""The handle of a child process: start it, talk to it, weigh it, kill it, say how it died."""

from __future__ import annotations

import os
import selectors
import signal
import socket
import subprocess
import sys
from collections.abc import Mapping
from typing import Any

from service.engine.frames import Frame, FrameError, Unpacker, pack
from service.threads import ONE_THREAD

_PAGE = os.sysconf("SC_PAGE_SIZE")
_TAIL = 4000  # bytes of the child's output kept for the log
_SEND_SECONDS = 5.0  # a child that does not read for so long is as good as dead


class ChildGoneError(Exception):
    """The child is dead, or does not listen any more."""


class Process:
    """A running child.  Used by one thread only, except for `alive`, `rss` and `own`."""

    def __init__(self, job: str, address_space: int) -> None:
        self._socket, theirs = socket.socketpair()
        self._socket.settimeout(_SEND_SECONDS)
        command = [sys.executable, "-P", "-X", "faulthandler", "-m", "service.engine.child"]
        command += ["--socket", str(theirs.fileno()), "--parent", str(os.getpid()), "--job", job]
        command += ["--address-space", str(address_space)]
        with theirs:
            # Whatever a library prints must not reach the frames: both outputs go to a pipe of their own.
            self._process = subprocess.Popen(
                command,
                stdin=subprocess.DEVNULL,
                stdout=subprocess.PIPE,
                stderr=subprocess.STDOUT,
                pass_fds=[theirs.fileno()],
                env=os.environ | ONE_THREAD,
                start_new_session=True,
            )
        assert self._process.stdout is not None
        self._output = self._process.stdout
        os.set_blocking(self._output.fileno(), False)
        self._tail = bytearray()
        self._unpacker = Unpacker()
        self._selector = selectors.DefaultSelector()
        self._selector.register(self._socket, selectors.EVENT_READ)
        self._selector.register(self._output, selectors.EVENT_READ)
        self.pid = self._process.pid

    def also_wake_on(self, descriptor: int) -> None:
        """Let `receive` return early when the event descriptor `descriptor` is written."""
        self._selector.register(descriptor, selectors.EVENT_READ)

    def send(self, head: Mapping[str, Any], body: bytes = b"") -> None:
        """Send a frame.  Raises ChildGoneError."""
        try:
            self._socket.sendall(pack(head, body))
        except OSError as error:
            raise ChildGoneError from error

    def receive(self, seconds: float) -> list[Frame]:
        """Wait for frames, at most so long; maybe none.  Raises ChildGoneError at the end of the stream."""
        frames: list[Frame] = []
        for key, _ in self._selector.select(seconds):
            if key.fileobj is self._socket:
                try:
                    piece = self._socket.recv(1 << 18)
                    frames += self._unpacker.feed(piece)
                except (OSError, FrameError) as error:
                    raise ChildGoneError from error
                if not piece:
                    raise ChildGoneError
            elif key.fileobj is self._output:
                self._drain()
            else:
                os.eventfd_read(key.fd)
        return frames

    def _drain(self) -> None:
        """Keep the end of what the child printed."""
        try:
            while piece := os.read(self._output.fileno(), 1 << 16):
                self._tail += piece
                del self._tail[:-_TAIL]
            self._selector.unregister(self._output)
        except (BlockingIOError, KeyError):
            pass

    @property
    def alive(self) -> bool:
        """True while the process runs."""
        return self._process.poll() is None

    @property
    def rss(self) -> int:
        """Resident memory in bytes, with that of processes it has started; 0 where it is gone."""
        started = self._started()
        if started:  # what they still share with it counts once
            return sum(_proportional(pid) for pid in (self.pid, *started))
        return self._pages()[0] * _PAGE

    def _started(self) -> list[int]:
        """The processes that it has started."""
        try:
            with open(f"/proc/{self.pid}/task/{self.pid}/children", "rb") as children:  # noqa: PTH123
                return [int(pid) for pid in children.read().split()]
        except (OSError, ValueError):
            return []

    @property
    def own(self) -> int:
        """Resident memory in bytes without the files in it, which all children have in common (libraries)."""
        resident, files = self._pages()
        return (resident - files) * _PAGE

    def _pages(self) -> tuple[int, int]:
        """Resident pages, and those of them that belong to files."""
        try:
            with open(f"/proc/{self.pid}/statm", "rb") as statm:  # noqa: PTH123  (every 50 ms: keep it cheap)
                _, resident, files, *_ = statm.read().split()
                return int(resident), int(files)
        except (OSError, ValueError):
            return 0, 0

    def bury(self) -> str:
        """Free everything after its death, say how it died."""
        try:
            how = _in_words(self._process.wait(1.0))  # it closes its socket a moment before it can be waited for
        except subprocess.TimeoutExpired:
            how = "it stopped answering"
        self._drain()
        self.kill()
        return how

    def kill(self) -> None:
        """End it now, with all that it started."""
        if self._process.poll() is None:  # once it is waited for, its number may be somebody else's
            os.killpg(self.pid, signal.SIGKILL)
            self._process.wait()
        self._selector.close()
        self._socket.close()
        self._output.close()

    @property
    def printed(self) -> str:
        """The last lines that the child wrote to its outputs."""
        return self._tail.decode(errors="replace")


def _proportional(pid: int) -> int:
    """Resident memory of a process in bytes, shared pages divided among those that share them."""
    try:
        with open(f"/proc/{pid}/smaps_rollup", "rb") as rollup:  # noqa: PTH123
            return next(int(line.split()[1]) * 1024 for line in rollup if line.startswith(b"Pss:"))
    except (OSError, ValueError, StopIteration):
        return 0


def _in_words(code: int) -> str:
    if code >= 0:
        return f"exit code {code}"
    try:
        return f"signal {-code} ({signal.Signals(-code).name})"
    except ValueError:
        return f"signal {-code}"
