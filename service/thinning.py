"""Signs of life, thinned where they arise: nobody sees a hundred iterations in a second, but each one costs its way."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from typing import Any

INTERVAL = 1 / 15
"""Seconds between two iterations that are passed on: what a page can show."""

Report = Callable[[dict[str, Any]], None]


def thinned(report: Report) -> Report:
    """Passes events on to `report`: of the iterations so many per second, and the last one before any other event."""
    passed = -math.inf
    held: dict[str, Any] | None = None

    def tell(event: dict[str, Any]) -> None:
        nonlocal passed, held
        now = time.monotonic()
        if event["kind"] == "iteration" and now - passed < INTERVAL:
            held = event
            return
        if held is not None and event["kind"] != "iteration":
            report(held)
        held, passed = None, now
        report(event)

    return tell
