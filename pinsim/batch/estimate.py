"""What a sheet will take: memory by a model, time by drawing one or two of its frames."""

import resource
import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pinsim.batch.draw import Drawn, draw
from pinsim.batch.frames import Frame
from pinsim.batch.run import in_runs
from pinsim.batch.spool import Source
from pinsim.render.plan import make_plan
from pinsim.scene import DistanceMap, Scene

# Measured on trees of processes: Python, numpy, scipy and Pillow in one of them; and what a rendering
# holds for each pixel of its grid with margins. At one distance most of it is transforms that are kept
# for the next hole of the same box.
_PROCESS_BYTES = 130 << 20
_GRID_BYTES = 280
_VARIED_GRID_BYTES = 90


@dataclass(frozen=True, slots=True)
class Expected:
    """frames left to draw; seconds of one, None if none could be drawn; measured : on how many."""

    seconds_each: float | None
    measured: int


def memory_bytes(frames: Sequence[Frame], scenes: Sequence[Scene], workers: int) -> int:
    """Return about how much memory drawing needs in all processes together, by a model.

    The largest frame counts for each worker; scenes are in memory once.
    """
    largest = 0
    for run in in_runs(frames):
        frame = run[0]
        if frame.camera is None:
            continue
        plan = make_plan(
            scenes[frame.scene],
            frame.camera,
            wavelength_nm=frame.wavelength_nm,
            averaged_px=frame.width_px,
        )
        each = _VARIED_GRID_BYTES if plan.varied else _GRID_BYTES
        largest = max(largest, each * plan.padded[0] * plan.padded[1])
        break  # frames of a sheet are alike; a plan costs as much as a small picture
    photos = sum(_scene_bytes(scene) for scene in scenes)
    return (workers + 1) * _PROCESS_BYTES + max(1, workers) * largest + 2 * photos


def _scene_bytes(scene: Scene) -> int:
    arrays = [scene.photo.codes]
    if isinstance(scene.distance, DistanceMap):
        arrays.append(scene.distance.codes)
    return sum(int(np.asarray(array).nbytes) for array in arrays)


def measure(frames: Sequence[Frame], sources: Sequence[Source]) -> Expected:
    """Draw one frame, and another if there is one, here and now; nothing of them is kept.

    The first also loads what all need, so the last one's time counts.
    """
    drawable = [frame for run in in_runs(frames) for frame in run if frame.camera is not None]
    if not drawable:
        return Expected(None, 0)
    chosen = [drawable[0], *drawable[len(drawable) // 2 :][:1]][: len(drawable)]
    seconds = None
    for frame in chosen:
        start = time.perf_counter()
        if isinstance(draw(frame, sources[frame.scene]), Drawn):
            seconds = time.perf_counter() - start
    return Expected(seconds, len(chosen))


def peak_bytes() -> int:
    """Return the most memory that this process has had."""
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak if sys.platform == "darwin" else 1024 * peak
