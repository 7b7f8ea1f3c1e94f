"""From a number of workers, an executor or a cluster to lanes, and to scenes as these read them."""

import os
import tempfile
from collections.abc import Iterator, Sequence
from concurrent.futures import Executor, ProcessPoolExecutor
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from pinsim.batch.lanes import Beside, Borrowed, Here, Lane
from pinsim.batch.spool import Source, spool
from pinsim.errors import DesignError
from pinsim.scene import Scene

MOST_WORKERS = 256
# Below this many frames for each, starting a process takes longer than it saves.
FEWEST_FRAMES = 3


def cores() -> int:
    """Return how many cores this process may use."""
    try:
        return len(os.sched_getaffinity(0))
    except AttributeError:  # not every system tells
        return os.cpu_count() or 1


def worker_count(asked: int | None, frames: int) -> int:
    """Return how many processes draw so many frames, 0 for this one; DesignError if impossible."""
    if asked is not None:
        if not 1 <= asked <= MOST_WORKERS:
            raise DesignError(f"{asked} workers are not possible; give 1 to {MOST_WORKERS}.")
        return min(asked, max(1, frames))
    count = min(cores(), frames // FEWEST_FRAMES)
    return count if count > 1 else 0


@contextmanager
def lanes_for(
    scenes: Sequence[Scene],
    sums: Sequence[str],
    *,
    workers: int = 0,
    executor: Executor | None = None,
    dask: str | None = None,
) -> Iterator[tuple[list[Lane], list[Any]]]:
    """Give lanes, and each scene as they read it.

    workers : processes beside this one; 0 is this one. executor : somebody's own, in place of them.
    dask : a scheduler's address, in place of both.
    """
    there = [Source(key, scene) for key, scene in zip(sums, scenes, strict=True)]
    if dask is not None:
        from pinsim.batch.cluster import dask_lanes

        with dask_lanes(dask, there) as found:
            yield found
        return
    count = workers or (cores() if executor is not None else 0)
    if count == 0:
        yield [Here()], list(there)
        return
    if executor is not None and not isinstance(executor, ProcessPoolExecutor):
        yield [Borrowed(executor) for _ in range(count)], list(there)
        return
    with tempfile.TemporaryDirectory(prefix="pinsim-", ignore_cleanup_errors=True) as folder:
        spooled = {
            key: spool(scene, key, Path(folder)) for key, scene in zip(sums, scenes, strict=True)
        }
        lanes: list[Lane] = [
            Beside() if executor is None else Borrowed(executor) for _ in range(count)
        ]
        yield lanes, [spooled[key] for key in sums]
