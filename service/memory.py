"""Freed memory is kept for the next iteration, and given back when a process is idle.

The linear solver allocates and frees tens of megabytes in every iteration.  By default the C library returns such
blocks to the system, which then fills each page with zeros anew: a tenth of the time on meshes of 100,000 unknowns.
"""

from __future__ import annotations

import ctypes
import gc

_TRIM_THRESHOLD, _MMAP_THRESHOLD = -1, -3  # of mallopt, GNU libc only
_KEPT = 2**28
"""Free bytes at the end of the heap that are kept, and the block from which on memory is asked for apart."""


def keep_freed() -> None:
    """Keep memory that is freed."""
    mallopt = getattr(ctypes.CDLL(None), "mallopt", None)
    if mallopt is not None:
        for parameter in (_TRIM_THRESHOLD, _MMAP_THRESHOLD):
            mallopt(parameter, _KEPT)


def give_back() -> None:
    """Give all memory back that is free."""
    gc.collect()
    trim = getattr(ctypes.CDLL(None), "malloc_trim", None)
    if trim is not None:
        trim(0)
