"""What documents, figures and tables need: a server loads it once it has answered for a moment, so it is ready sooner.

A request that needs it earlier loads it, and waits so long.
"""

from __future__ import annotations

import gc
from importlib import import_module
from threading import Timer

MODULES = ("service.reading", "web.pages.result", "web.tables")
SECONDS = 1.0
"""After the start; at once it would be in the way of the first answers."""


def load() -> None:
    """Begin to load in a while, and do not wait."""
    timer = Timer(SECONDS, _load)
    timer.daemon = True
    timer.start()


def _load() -> None:
    for name in MODULES:
        import_module(name)
    gc.freeze()  # what is loaded now stays: the collector shall not look through it in the middle of an answer
