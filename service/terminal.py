"""A solve at a terminal: how far it is, and Ctrl-C that keeps the best curve so far."""

from __future__ import annotations

import math
import signal
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

import click

from web.display import number

_WHOLE = 100


@contextmanager
def progress_bar(tolerance: float) -> Iterator[Callable[[dict[str, Any]], None]]:
    """Takes progress events; the bar shows the digits reached of those asked for.  Nothing where it is no terminal."""
    reached = 0
    with click.progressbar(
        length=_WHOLE,
        label="Solving",
        show_eta=False,
        file=sys.stderr,
        hidden=not sys.stderr.isatty(),
        item_show_func=_sentence,
    ) as bar:

        def report(event: dict[str, Any]) -> None:
            nonlocal reached
            share = _share(event.get("error"), tolerance)
            if event["kind"] == "point":
                share = min(_WHOLE - 1, _WHOLE * event["point"] // event["of"])
            bar.update(max(0, share - reached), event)
            reached = max(reached, share)

        yield report
        bar.update(_WHOLE - reached)


@contextmanager
def interruptible() -> Iterator[Callable[[], bool]]:
    """Says whether Ctrl-C was pressed; a second one ends at once."""
    pressed = False

    def note(number: int, frame: object) -> None:
        nonlocal pressed
        pressed = True
        signal.signal(signal.SIGINT, signal.default_int_handler)

    before = signal.signal(signal.SIGINT, note)
    try:
        yield lambda: pressed
    finally:
        signal.signal(signal.SIGINT, before)


def _share(error: float | None, tolerance: float) -> int:
    """Hundredths of the digits that are asked for; the last one is for the end."""
    if error is None or not 0 < error < 1:
        return 0
    return min(_WHOLE - 1, int(_WHOLE * math.log(error) / math.log(tolerance)))


def _sentence(event: dict[str, Any] | None) -> str:
    if event is None:
        return ""
    if event["kind"] == "point":
        return f"point {event['point']} of {event['of']}, value {number(event['value'])}"
    step = f", iteration {event['iteration']}" if "iteration" in event else ""
    return f"mesh {event['mesh']}{step}, value {number(event['value'])}"
