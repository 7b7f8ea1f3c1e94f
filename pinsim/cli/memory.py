"""How the C library hands out memory while pictures are drawn."""

import contextlib

_M_TRIM_THRESHOLD, _M_MMAP_THRESHOLD, _M_ARENA_MAX = -1, -3, -8  # mallopt(3) of the GNU C library
_LARGE = 1 << 30


def keep_freed_memory() -> None:
    """Let arrays that are freed be used again instead of being given back and mapped anew.

    A picture takes some tens of arrays of its own size one after another; mapped anew, each is zeroed
    by the system first, which is a fifth of a short command's time. For a process that ends when the
    picture is written; elsewhere than in the GNU C library nothing happens.
    """
    import ctypes

    with contextlib.suppress(OSError, AttributeError, TypeError):
        tune = ctypes.CDLL(None).mallopt
        tune(_M_ARENA_MAX, 1)
        tune(_M_MMAP_THRESHOLD, _LARGE)
        tune(_M_TRIM_THRESHOLD, _LARGE)
