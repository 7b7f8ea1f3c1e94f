"""Who draws: this process, others beside it, or an executor that somebody brings.

A lane draws one picture at a time, so whoever kills everything loses no more than what is being drawn.
Each process beside this one is a lane of its own: what ends it is known to have been its picture.
"""

import contextlib
import os
import signal
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from multiprocessing import get_context
from typing import Any, Protocol

from pinsim.batch.begin import begin
from pinsim.batch.draw import Outcome, draw
from pinsim.batch.frames import Frame


class Lane(Protocol):
    """Draws one picture at a time."""

    def submit(self, frame: Frame, source: Any) -> "Future[Outcome]":
        """Begin a picture."""

    def again(self) -> None:
        """Make ready after what drew has gone."""

    def stop(self) -> None:
        """End without waiting for what is being drawn."""


class Here:
    """This process, with the threads it has."""

    def submit(self, frame: Frame, source: Any) -> "Future[Outcome]":
        """Draw it now."""
        future: Future[Outcome] = Future()
        future.set_result(draw(frame, source))
        return future

    def again(self) -> None:
        """Nothing has gone."""

    def stop(self) -> None:
        """Nothing runs."""


class Beside:
    """One process beside this one, with one thread."""

    def __init__(self) -> None:
        self._begin()

    def _begin(self) -> None:
        self._pool = ProcessPoolExecutor(1, mp_context=get_context("spawn"), initializer=begin)
        self._pid = self._pool.submit(os.getpid)
        self._in_work: Future[Outcome] | None = None

    def submit(self, frame: Frame, source: Any) -> "Future[Outcome]":
        """Hand it over."""
        self._in_work = self._pool.submit(draw, frame, source)
        return self._in_work

    def again(self) -> None:
        """Begin another process."""
        self._pool.shutdown(wait=False, cancel_futures=True)
        self._begin()

    def stop(self) -> None:
        """End the process; in the middle of a picture if need be."""
        busy = self._in_work is not None and not self._in_work.done()
        if busy and self._pid.done() and self._pid.exception() is None:
            with contextlib.suppress(OSError):
                os.kill(self._pid.result(), signal.SIGTERM)
        self._pool.shutdown(wait=False, cancel_futures=True)


class Borrowed:
    """A share in an executor that somebody else runs, and ends."""

    def __init__(self, executor: Executor) -> None:
        self._executor = executor

    def submit(self, frame: Frame, source: Any) -> "Future[Outcome]":
        """Hand it over."""
        return self._executor.submit(draw, frame, source)

    def again(self) -> None:
        """It is not ours to mend."""

    def stop(self) -> None:
        """It is not ours to end."""
