"""What a second look at the same scene need not make again.

Someone who turns the hole looks at one scene through one box again and again. The scene on the
film's grid, and its transforms weighted by the kernels' fields, depend on the box and on the family of
similar holes, not on the hole; the last of them are kept, while the scene is in use and within bounds
of memory. A picture does not depend on what is kept: what is not, is made in the same way.
"""

import weakref
from dataclasses import dataclass, field
from threading import Lock
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.render.kernels import Kernels
from pinsim.render.plan import RenderPlan
from pinsim.render.project import FilmView
from pinsim.scene import Scene

MOST_BYTES = 320 << 20
_PLACES = 2

Spectrum = NDArray[np.complex64]


@dataclass(slots=True, eq=False)
class Kept:
    """A scene on a film's grid, and its weighted transforms by mode and photo band."""

    scene: "weakref.ref[Scene]"
    key: tuple[Any, ...]
    basis: Kernels
    view: FilmView | None = None
    spectra: dict[tuple[int, int], Spectrum] = field(default_factory=dict)


_last: list[Kept] = []
_lock = Lock()


def kept_for(scene: Scene, plan: RenderPlan) -> Kept | None:
    """Return what is kept for this scene and plan, empty at first; None for what is not worth it."""
    basis = plan.kernels.like
    if basis is None or plan.varied or _bytes(plan) > MOST_BYTES:
        return None
    key = (plan.family, plan.pitch_mm, plan.shape, plan.padded, plan.margin)
    with _lock:
        _last[:] = [one for one in _last if one.scene() is not None]
        for one in _last:
            if one.scene() is scene and one.basis is basis and one.key == key:
                return one
        found = Kept(scene=weakref.ref(scene), key=key, basis=basis)
        _last.insert(0, found)
        del _last[_PLACES:]
        return found


def forget() -> None:
    """Let go of all that is kept."""
    with _lock:
        _last.clear()


def _bytes(plan: RenderPlan) -> int:
    bands = len({band.band for band in plan.kernels.bands})
    plane = 4 * plan.padded[0] * plan.padded[1]
    return plane * (3 + bands * (1 + len(plan.kernels.fields)))
