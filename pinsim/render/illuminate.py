"""Radiance to irradiance: falloff over the film, and the shade of a thick plate's bore.

Weighting comes before spreading: it is the light of each scene point that is dimmed by its own
slant through the hole, and that light is then scattered over the film.
"""

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.render.plan import RenderPlan
from pinsim.render.project import FilmView
from pinsim.threads import THREADS

Array = NDArray[np.float64]

_SHADE_STEPS = 1 << 13  # the same of a ratio so near to 1
_TABLE = 1 << 16  # steps along a radius: reading the nearest errs by less than 1e-4
_STRIP = 64  # film rows at once: they stay in the processor's cache


def falloff(camera: Camera, right_mm: Array, up_mm: Array) -> NDArray[np.float32]:
    """Return illuminance relative to the hole's axis on a grid of film coordinates.

    right_mm : (columns,), up_mm : (rows,). Returns float32 (rows, columns): 1 on the axis, 0 where
    the plate's bore shuts the light out or the film does not see the hole.
    """
    if camera.surface.flat and camera.hole.shape == "round":
        radius = np.hypot(right_mm[None, :].astype(np.float32), up_mm[:, None].astype(np.float32))
        return _around_axis(camera, radius)
    return _anywhere(camera, right_mm[None, :], up_mm[:, None])


def _around_axis(camera: Camera, radius_mm: NDArray[np.float32]) -> NDArray[np.float32]:
    """Return the falloff of a round hole before flat film, which depends on the radius only."""
    end_mm = _end_mm(radius_mm)
    return _read_along(_table(camera, end_mm).ravel(), end_mm, radius_mm)


@lru_cache(maxsize=4)
def _table(camera: Camera, end_mm: float) -> NDArray[np.float32]:
    return _anywhere(camera, _radii_mm(end_mm), np.zeros(1))


def _end_mm(radius_mm: NDArray[np.float32]) -> float:
    """Return where a table that holds these radii ends."""
    return float(2.0 ** math.ceil(math.log2(1.0 + float(radius_mm.max()))))


def _radii_mm(end_mm: float, steps: int = _TABLE) -> Array:
    """Return the middles of a table's even steps."""
    return np.asarray((np.arange(steps) + 0.5) * (end_mm / (steps - 1)), np.float64)


def _read_along(
    table: NDArray[np.float32], end_mm: float, radius_mm: NDArray[np.float32]
) -> NDArray[np.float32]:
    """Read a table at radii, which are used up."""
    radius_mm *= np.float32((table.size - 1) / end_mm)
    return np.take(table, radius_mm.astype(np.int32), mode="clip")


def _anywhere(camera: Camera, right_mm: Array, up_mm: Array) -> NDArray[np.float32]:
    light, right, up = camera.surface.light(right_mm, up_mm)
    thickness = camera.plate_thickness_mm
    if thickness > 0.0:
        apart = np.stack(np.broadcast_arrays(thickness * right, thickness * up), axis=-1)
        light = light * camera.opening.clear_share(apart)
    return light.astype(np.float32)


def own_shade(plan: RenderPlan) -> NDArray[np.float32] | None:
    """Return what the plate leaves through the hole itself over what it leaves through its family's.

    float32 (rows, columns) on the padded grid; None where that is 1 everywhere. So smooth and so near
    to 1 that it is the same before spreading and after.
    """
    family = plan.family
    if family is None or plan.camera.plate_thickness_mm == 0.0:
        return None

    def ratio(right_mm: Array, up_mm: Array) -> NDArray[np.float32]:
        own, common = (_anywhere(camera, right_mm, up_mm) for camera in (plan.camera, family))
        return np.divide(own, common, out=own, where=common > 0.0)

    right_mm, up_mm = plan.right_mm(), plan.up_mm()
    if not plan.camera.surface.flat:
        return ratio(right_mm[None, :], up_mm[:, None])
    # A family's holes are round.
    radius_mm = np.hypot(right_mm[None, :].astype(np.float32), up_mm[:, None].astype(np.float32))
    end_mm = _end_mm(radius_mm)
    shade = ratio(_radii_mm(end_mm, _SHADE_STEPS), np.zeros(1))
    return _read_along(shade.ravel(), end_mm, radius_mm)


def illuminate(view: FilmView) -> FilmView:
    """Return the view with its light dimmed by falloff; 1 stays 1 on the hole's axis.

    The plate's shade is that of the hole's family; `own_shade` tells what is left to do.

    The view's own light is dimmed in place, as nothing needs the radiance any more: a second copy
    would be the largest thing in memory.
    """
    plan = view.plan
    right_mm, up_mm = plan.right_mm(), plan.up_mm()
    inside_rows, inside_columns = plan.inside

    camera = plan.camera if plan.family is None else plan.family

    def dim(start: int) -> int:
        rows = slice(start, min(start + _STRIP, up_mm.size))
        share = falloff(camera, right_mm, up_mm[rows])
        for channel in range(view.light.shape[2]):
            view.light[rows, :, channel] *= share
        framed = (np.arange(rows.start, rows.stop) >= inside_rows.start) & (
            np.arange(rows.start, rows.stop) < inside_rows.stop
        )
        return int(np.count_nonzero(share[framed, inside_columns] <= 0.0))

    with ThreadPoolExecutor(THREADS) as pool:
        unlit = sum(pool.map(dim, range(0, up_mm.size, _STRIP)))
    return replace(view, unlit_share=unlit / (plan.shape[0] * plan.shape[1]))
