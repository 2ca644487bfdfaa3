"""Progress of runs, in memory only: numbered events per run, kept long enough to resume, thinned for human eyes.

`publish` may be called from any thread; `follow` and `ended` belong to an event loop.  Iterations are coalesced to a
rate that a page can show; the last one before any other event is always kept.
"""

from __future__ import annotations

import asyncio
import contextlib
import secrets
import threading
import time
from collections import OrderedDict, deque
from collections.abc import AsyncIterator, Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any

_INTERVAL = 1 / 15  # seconds between two iterations that are shown
_KEPT_EVENTS = 512  # of a run in the middle
_KEPT_AFTER_END = 32  # once nobody follows it any more
_KEPT_RUNS = 300  # beyond those that somebody follows, the longest untouched are forgotten
_QUIET_SECONDS = 2.0


@dataclass(frozen=True, slots=True)
class Event:
    """One event; `id` is for `Last-Event-ID`, `data` as in the developers' guide."""

    id: str
    data: dict[str, Any]


@dataclass(slots=True)
class _Channel:
    """What is known of one run."""

    # Numbers alone would mislead a reader who comes back after the server has begun to count anew.
    name: str = field(default_factory=lambda: secrets.token_hex(4))
    events: deque[tuple[int, dict[str, Any]]] = field(default_factory=lambda: deque(maxlen=_KEPT_EVENTS))
    number: int = 0
    shown: float = 0.0  # when the last event was kept
    pending: dict[str, Any] | None = None
    over: bool = False
    bells: set[Callable[[], None]] = field(default_factory=set)  # of those who follow
    last_bells: set[Callable[[], None]] = field(default_factory=set)  # of those who only want to know of the end

    @property
    def listened(self) -> bool:
        return bool(self.bells or self.last_bells)

    def keep(self, data: dict[str, Any]) -> None:
        self.number += 1
        self.events.append((self.number, data))
        self.shown = time.monotonic()
        self.over = data["kind"] == "end"

    def flush(self) -> None:
        if self.pending is not None:
            data, self.pending = self.pending, None
            self.keep(data)

    def trim(self) -> None:
        """Give back what hardly anybody will ask for."""
        if self.over and not self.listened:
            while len(self.events) > _KEPT_AFTER_END:
                self.events.popleft()

    def since(self, number: int) -> list[tuple[int, dict[str, Any]]]:
        return [event for event in self.events if event[0] > number]


class Progress:
    """The progress of all runs of this server."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._channels: OrderedDict[str, _Channel] = OrderedDict()

    def publish(self, run: str, data: dict[str, Any]) -> None:
        """Tell an event to all who follow the run; the kind "end" is the last one."""
        with self._lock:
            channel = self._channel(run)
            if channel.over:
                return
            if data["kind"] in ("iteration", "point"):
                soon = time.monotonic() - channel.shown < _INTERVAL
                ring = not soon or channel.pending is None
                channel.pending = data
                if not soon:
                    channel.flush()
            else:
                ring = True
                channel.flush()
                channel.keep(data)
                channel.trim()
            bells = (*(channel.bells if ring else ()), *(channel.last_bells if channel.over else ()))
        for bell in bells:
            bell()

    async def follow(self, run: str, after: str | None = None) -> AsyncIterator[Event | None]:
        """The events after the one with the id `after`, to the end; None whenever nothing came for a while."""
        with self._listening(run, lambda channel: channel.bells) as (channel, bell):
            name, _, place = (after or "").rpartition(".")
            number = int(place) if name == channel.name and place.isdecimal() else 0
            while True:
                bell.clear()
                with self._lock:
                    fresh, pending, over = channel.since(number), channel.pending is not None, channel.over
                for number, data in fresh:
                    yield Event(f"{channel.name}.{number}", data)
                if over:
                    return
                try:
                    await asyncio.wait_for(bell.wait(), _INTERVAL if pending else _QUIET_SECONDS)
                except TimeoutError:
                    if pending:
                        with self._lock:
                            channel.flush()
                    else:
                        yield None

    async def ended(self, run: str, seconds: float) -> bool:
        """Wait for the end of a run; False where it has not come in time."""
        with self._listening(run, lambda channel: channel.last_bells) as (channel, bell):
            with contextlib.suppress(TimeoutError):
                async with asyncio.timeout(seconds):
                    if not channel.over:
                        await bell.wait()
            return channel.over

    def _channel(self, run: str) -> _Channel:
        """The channel of a run, made where there is none; the caller holds the lock."""
        channel = self._channels.get(run)
        if channel is None:
            channel = self._channels[run] = _Channel()
            if len(self._channels) > _KEPT_RUNS:
                idle = (name for name, other in self._channels.items() if not other.listened and other is not channel)
                if (oldest := next(idle, None)) is not None:
                    del self._channels[oldest]
        else:
            self._channels.move_to_end(run)
        return channel

    @contextmanager
    def _listening(
        self, run: str, bells: Callable[[_Channel], set[Callable[[], None]]]
    ) -> Iterator[tuple[_Channel, asyncio.Event]]:
        loop, event = asyncio.get_running_loop(), asyncio.Event()

        def bell() -> None:
            with contextlib.suppress(RuntimeError):  # the loop is closed: nobody listens any more
                loop.call_soon_threadsafe(event.set)

        with self._lock:
            channel = self._channel(run)
            bells(channel).add(bell)
        try:
            yield channel, event
        finally:
            with self._lock:
                bells(channel).discard(bell)
                channel.trim()
