"""Memory that is no longer used goes back to the machine, where the C library is glibc.

With a pool of memory for each thread, which is usual, pictures drawn by ever other threads leave holes
everywhere, and a process grows to several times what it uses.
"""

import contextlib
import ctypes

_M_ARENA_MAX, _POOLS = -8, 2  # mallopt(3)


def keep_together() -> None:
    """Have memory handed out from two pools; called before any thread is started."""
    with contextlib.suppress(OSError, AttributeError, TypeError):
        ctypes.CDLL(None).mallopt(_M_ARENA_MAX, _POOLS)


def give_back() -> None:
    """Give back what is free: malloc_trim(3)."""
    with contextlib.suppress(OSError, AttributeError, TypeError):
        ctypes.CDLL(None).malloc_trim(0)
