"""What the allocator of this process does with memory that arrays give back: keep some of it at hand.

glibc takes arrays of more than 128 kB from the system one by one and gives back what lies free at the top of
its heap (mallopt(3)); each page that it then takes again is cleared by the system and costs a fault, though
the next file needs as much as the last.
"""

from __future__ import annotations

import ctypes
import sys
from functools import cache

# From <malloc.h>; other C libraries of Linux (musl) have no mallopt.
_M_TRIM_THRESHOLD, _M_MMAP_THRESHOLD = -1, -3
# Bytes; glibc refuses more than the first. Arrays of a usual batch have a megabyte or two, those of a cell of
# a million samples mostly more than this: they go back to the system, as before.
_LARGEST_KEPT = 32 * 1024 * 1024
_MOST_KEPT = 64 * 1024 * 1024


@cache
def keep_freed_memory() -> None:
    """Have this process keep up to 64 MB that it has freed; do nothing unless the allocator is glibc's."""
    mallopt = getattr(ctypes.CDLL(None), "mallopt", None) if sys.platform == "linux" else None
    if mallopt is not None:
        mallopt(_M_MMAP_THRESHOLD, _LARGEST_KEPT)
        mallopt(_M_TRIM_THRESHOLD, _MOST_KEPT)
