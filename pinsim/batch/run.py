"""Which picture next, by whom, and what happens when one fails."""

from collections import deque
from collections.abc import Callable, Iterable, Mapping, Sequence
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, Future, wait
from dataclasses import dataclass
from typing import Any

from pinsim import __version__
from pinsim.batch.draw import Drawn, Failed, Outcome
from pinsim.batch.frames import Frame
from pinsim.batch.lanes import Lane

_TRIES = 2
_GRACE_S = 10.0  # how long pictures that are nearly done are waited for after Ctrl-C
_KILLED = "what drew it was ended from outside, twice; perhaps there was not enough memory"

OnOutcome = Callable[[Frame, Outcome], None]


def in_runs(frames: Iterable[Frame]) -> list[list[Frame]]:
    """Return the frames in runs that share a projection, of one scene, box and distance."""
    runs: dict[Any, list[Frame]] = {}
    for frame in frames:
        camera = frame.camera
        box = None if camera is None else (camera.film, camera.focal_length_mm)
        runs.setdefault((frame.scene, box, frame.distance_mm, frame.wavelength_nm), []).append(
            frame
        )
    for run in runs.values():
        run.sort(key=lambda frame: (frame.hole_mm, frame.number))
    return list(runs.values())


@dataclass(slots=True, eq=False)
class _Work:
    """What one lane has before it."""

    lane: Lane
    left: deque[Frame]
    tries: int = 0


def run(
    frames: Iterable[Frame],
    sources: Mapping[int, Any] | Sequence[Any],
    lanes: Sequence[Lane],
    on_outcome: OnOutcome,
) -> None:
    """Draw frames; each outcome is handed over as soon as it is there.

    sources : what each scene is read from, by its place. A lane takes a run of frames that share a
    projection, and half of another's when none is left. On KeyboardInterrupt pictures in work are
    waited for a little, the lanes are stopped, and it is raised again.
    """
    runs = deque(deque(one) for one in in_runs(frames))
    works = [_Work(lane, deque()) for lane in lanes]
    active: dict[Future[Outcome], tuple[_Work, Frame]] = {}

    def begin(work: _Work, frame: Frame) -> None:
        try:
            active[work.lane.submit(frame, sources[frame.scene])] = (work, frame)
        except BrokenExecutor:
            broken: Future[Outcome] = Future()
            broken.set_result(Failed(_KILLED))
            active[broken] = (work, frame)

    def next_for(work: _Work) -> None:
        if not work.left:
            work.left = runs.popleft() if runs else _half_of(works)
        if work.left:
            work.tries = 0
            begin(work, work.left.popleft())

    def settle(future: Future[Outcome]) -> None:
        work, frame = active.pop(future)
        outcome = _outcome(future)
        if outcome is None:
            work.lane.again()
            work.tries += 1
            if work.tries < _TRIES:
                begin(work, frame)
                return
            outcome = Failed(_KILLED)
        on_outcome(frame, outcome)
        next_for(work)

    try:
        for work in works:
            next_for(work)
        while active:
            done, _ = wait(active, return_when=FIRST_COMPLETED)
            for future in done:
                settle(future)
    except KeyboardInterrupt:
        done, _ = wait(active, timeout=_GRACE_S)
        for future in done:
            outcome = _outcome(future)
            if isinstance(outcome, Drawn):
                on_outcome(active[future][1], outcome)
        raise
    finally:
        for work in works:
            work.lane.stop()


def _half_of(works: Sequence[_Work]) -> deque[Frame]:
    """Take half of what the busiest lane has before it."""
    busiest = max(works, key=lambda work: len(work.left))
    taken = [busiest.left.pop() for _ in range((len(busiest.left) + 1) // 2)]
    return deque(reversed(taken))


def _outcome(future: "Future[Outcome]") -> Outcome | None:
    """Return what came out; None when whatever drew it has gone."""
    try:
        outcome = future.result()
    except BrokenExecutor:
        return None
    except BaseException as error:  # a cluster has its own ways to lose a picture
        if isinstance(error, KeyboardInterrupt):
            raise
        text = " ".join(str(error).split()) or "no reason given"
        return Failed(f"{type(error).__name__}: {text}")
    if isinstance(outcome, Drawn) and outcome.about.get("pinsim") != __version__:
        return Failed(
            f"it was drawn by pinsim {outcome.about.get('pinsim')}, and this is {__version__}; "
            "install the same version on every machine"
        )
    return outcome
