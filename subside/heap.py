"""Freed memory is kept for the next array.

A run makes and drops arrays of a few MB all the time. By default the C library of Linux gives each
back to the system, which clears it anew for the next one: measured, this costs as much as the law.
"""

from __future__ import annotations

import ctypes
import sys
from typing import Any

__all__ = ["give_back_freed_memory", "keep_freed_memory"]

# from malloc.h of the GNU C library
_TRIM_THRESHOLD, _TOP_PAD, _MMAP_THRESHOLD, _ARENA_MAX = -1, -2, -3, -8
_LARGEST = 32 << 20
"""Bytes; larger arrays are given back at once."""


def keep_freed_memory() -> None:
    """Tell the C library, where it is the GNU one; elsewhere nothing happens."""
    mallopt = _of_c_library("mallopt")
    if mallopt is not None:
        mallopt(_ARENA_MAX, 1)
        mallopt(_MMAP_THRESHOLD, _LARGEST)
        mallopt(_TRIM_THRESHOLD, 2**31 - 1)
        mallopt(_TOP_PAD, 2 * _LARGEST)


def give_back_freed_memory() -> None:
    """Give back what is free just now: opening a grid leaves more of it than a run needs."""
    trim = _of_c_library("malloc_trim")
    if trim is not None:
        trim(0)


def _of_c_library(name: str) -> Any:
    return getattr(ctypes.CDLL(None), name, None) if sys.platform == "linux" else None
