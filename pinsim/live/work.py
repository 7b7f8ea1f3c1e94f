"""One thread that does one thing after another, and never what nobody waits for any more.

A hand on a slider asks for more pictures than can be drawn. Each request belongs to a lane, a place in
one page; of a lane only the newest request waits, and one that is being drawn is stopped at its next
step when a newer one comes. Slow work therefore never queues up.
"""

import threading
from collections.abc import Callable
from concurrent.futures import Future
from typing import Any, Generic, TypeVar

from pinsim.live.refused import RefusedError, SupersededError

MOST_WAITING = 100
REST_S = 1.0

Result = TypeVar("Result")
Lane = tuple[str, str]
# Called by the work between its steps; raises SupersededError when nobody waits for it any more.
Check = Callable[[], None]


class Job(Generic[Result]):
    """A piece of work, waiting or being done; `future` holds what comes of it."""

    def __init__(self, lane: Lane, work: Callable[[Check], Result]) -> None:
        self.lane = lane
        self.future: Future[Result] = Future()
        self.future.set_running_or_notify_cancel()  # stopped by `stop` only, never through the future
        self._work = work
        self._unwanted = threading.Event()

    def stop(self) -> None:
        """Say that nobody waits for it any more."""
        self._unwanted.set()

    def check(self) -> None:
        """Raise SupersededError when nobody waits for it any more."""
        if self._unwanted.is_set():
            raise SupersededError

    def do(self) -> None:
        """Do it, and put what comes of it into the future, whatever that is."""
        try:
            self.check()
            result = self._work(self.check)
        except BaseException as problem:
            # A traceback holds every array of the work that was broken off.
            self.future.set_exception(problem.with_traceback(None))
        else:
            self.future.set_result(result)
            del result


class Desk:
    """A thread at work on jobs; of each lane at most one waits.

    at_rest : called when there has been nothing to do for a moment.
    """

    def __init__(self, name: str, *, at_rest: Callable[[], None] = lambda: None) -> None:
        self._at_rest = at_rest
        self._waiting: dict[Lane, Job[Any]] = {}
        self._present: Job[Any] | None = None
        self._ended = False
        self._changed = threading.Condition()
        self._thread = threading.Thread(target=self._run, name=name, daemon=True)
        self._thread.start()

    def take(self, lane: Lane, work: Callable[[Check], Result]) -> Job[Result]:
        """Take on work in place of what waits or is being done in the same lane.

        Raises RefusedError when far too much waits already.
        """
        job: Job[Result] = Job(lane, work)
        with self._changed:
            older = self._waiting.pop(lane, None)
            if len(self._waiting) >= MOST_WAITING or self._ended:
                raise RefusedError(
                    "too many pictures are asked for at once; wait a moment.", status=503
                )
            if older is not None:
                older.stop()
                older.future.set_exception(SupersededError())
            if self._present is not None and self._present.lane == lane:
                self._present.stop()
            self._waiting[lane] = job
            self._changed.notify()
        return job

    def drop(self, job: Job[Any]) -> None:
        """Stop a job for which nobody waits any more."""
        job.stop()
        with self._changed:
            if self._waiting.get(job.lane) is job:
                del self._waiting[job.lane]
                job.future.set_exception(SupersededError())

    def end(self, wait_s: float) -> None:
        """Stop everything; wait a moment for what is being done."""
        with self._changed:
            self._ended = True
            for job in self._waiting.values():
                job.future.set_exception(SupersededError())
            self._waiting.clear()
            if self._present is not None:
                self._present.stop()
            self._changed.notify()
        self._thread.join(wait_s)

    def _run(self) -> None:
        rested = True
        while True:
            with self._changed:
                self._present = None
                patience_s = None if rested else REST_S
                self._changed.wait_for(lambda: self._waiting or self._ended, patience_s)
                if self._ended:
                    return
                rested = not self._waiting
                if rested:
                    self._at_rest()
                    continue
                job = self._waiting.pop(next(iter(self._waiting)))
                self._present = job
            job.do()
            del job
