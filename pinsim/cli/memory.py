"""How memory is handed out and looked after while one picture is drawn, in a process of its own."""

import atexit
import contextlib
import gc

_M_TRIM_THRESHOLD, _M_MMAP_THRESHOLD, _M_ARENA_MAX = -1, -3, -8  # mallopt(3) of the GNU C library
_LARGE = 1 << 30


def tune_for_one_picture() -> None:
    """Keep what is freed for the next array, and look for no rings of objects.

    A picture takes some tens of arrays of its own size one after another; mapped anew, each is zeroed
    by the system first, which is a fifth of a short command's time. Python's search for rings of
    objects that hold one another finds next to nothing here, and at the end it looks through all that
    was imported. For a process that ends when the picture is written; elsewhere than in the GNU C
    library memory is handed out as usual.
    """
    import ctypes

    gc.disable()
    atexit.register(gc.freeze)

    with contextlib.suppress(OSError, AttributeError, TypeError):
        tune = ctypes.CDLL(None).mallopt
        tune(_M_ARENA_MAX, 1)
        tune(_M_MMAP_THRESHOLD, _LARGE)
        tune(_M_TRIM_THRESHOLD, _LARGE)
