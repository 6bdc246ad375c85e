"""Freed memory that is used again."""

from __future__ import annotations

import ctypes

_TRIM_THRESHOLD, _MMAP_THRESHOLD = -1, -3  # numbers of mallopt's parameters in the GNU C library
_KEPT = 32 * 1024 * 1024
"""Size [bytes] of the largest array whose memory is kept."""


def keep_freed_memory() -> None:
    """Tell the C library to keep what is freed, up to 32 MB a piece, for the next array.

    Otherwise each array of a few megabytes, and kriging makes thousands, is fetched from the
    system and cleared page by page, which takes as long as the arithmetic. Does nothing on systems
    with another C library.
    """
    try:
        mallopt = ctypes.CDLL(None).mallopt
    except (AttributeError, OSError, TypeError):
        return
    mallopt(_MMAP_THRESHOLD, _KEPT)
    mallopt(_TRIM_THRESHOLD, 2 * _KEPT)
