"""Radiance to irradiance: falloff over the film, and the shade of a thick plate's bore.

Weighting comes before spreading: it is the light of each scene point that is dimmed by its own
slant through the hole, and that light is then scattered over the film.
"""

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.render.project import FilmView

Array = NDArray[np.float64]

_THREADS = 2
_STRIP = 64  # film rows at once: they stay in the processor's cache


def falloff(camera: Camera, right_mm: Array, up_mm: Array) -> NDArray[np.float32]:
    """Return illuminance relative to the hole's axis on a grid of film coordinates.

    right_mm : (columns,), up_mm : (rows,). Returns float32 (rows, columns): 1 on the axis, 0 where
    the plate's bore shuts the light out or the film does not see the hole.
    """
    light, right, up = camera.surface.light(right_mm[None, :], up_mm[:, None])
    thickness = camera.plate_thickness_mm
    if thickness > 0.0:
        apart = np.stack(np.broadcast_arrays(thickness * right, thickness * up), axis=-1)
        light = light * camera.opening.clear_share(apart)
    return light.astype(np.float32)


def illuminate(view: FilmView) -> FilmView:
    """Return the view with its light dimmed by falloff; 1 stays 1 on the hole's axis.

    The view's own light is dimmed in place, as nothing needs the radiance any more: a second copy
    would be the largest thing in memory.
    """
    plan = view.plan
    right_mm, up_mm = plan.right_mm(), plan.up_mm()
    inside_rows, inside_columns = plan.inside

    def dim(start: int) -> int:
        rows = slice(start, min(start + _STRIP, up_mm.size))
        share = falloff(plan.camera, right_mm, up_mm[rows])
        for channel in range(view.light.shape[2]):
            view.light[rows, :, channel] *= share
        framed = (np.arange(rows.start, rows.stop) >= inside_rows.start) & (
            np.arange(rows.start, rows.stop) < inside_rows.stop
        )
        return int(np.count_nonzero(share[framed, inside_columns] <= 0.0))

    with ThreadPoolExecutor(_THREADS) as pool:
        unlit = sum(pool.map(dim, range(0, up_mm.size, _STRIP)))
    return replace(view, unlit_share=unlit / (plan.shape[0] * plan.shape[1]))
