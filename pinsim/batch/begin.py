"""How a worker process starts: before numpy is loaded, so that it runs one thread and no more."""

import os
import signal
import threading


def begin() -> None:
    """Set up a worker: one thread, deaf to Ctrl-C, and gone when its parent is."""
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    os.environ["PINSIM_THREADS"] = "1"
    # Ctrl-C reaches every process of a terminal; the parent alone decides what is finished.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_follow_parent, daemon=True).start()


def _follow_parent() -> None:
    """End with the parent, even if it was killed: a queue that nobody fills is waited at for ever."""
    import multiprocessing

    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)
