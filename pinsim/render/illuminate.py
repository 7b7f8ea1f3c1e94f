"""Radiance to irradiance: falloff over the film, and the shade of a thick plate's bore.

Weighting comes before spreading: it is the light of each scene point that is dimmed by its own
slant through the hole, and that light is then scattered over the film.
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pinsim.render.plan import RenderPlan
from pinsim.render.project import FilmView

Array = NDArray[np.float64]

_STRIP = 64


def falloff(plan: RenderPlan, right_mm: Array, up_mm: Array) -> NDArray[np.float32]:
    """Return illuminance relative to the hole's axis on a grid of film coordinates.

    right_mm : (columns,), up_mm : (rows,). Returns float32 (rows, columns): 1 on the axis, 0 where
    the plate's bore shuts the light out or the film does not see the hole.
    """
    camera = plan.camera
    thickness = camera.plate_thickness_mm
    result = np.empty((up_mm.size, right_mm.size), np.float32)
    for start in range(0, up_mm.size, _STRIP):  # strips stay in the processor's cache
        rows = slice(start, start + _STRIP)
        light, right, up = camera.surface.light(right_mm[None, :], up_mm[rows, None])
        if thickness > 0.0:
            light *= camera.opening.clear_share(
                np.stack([thickness * right, thickness * up], axis=-1)
            )
        result[rows] = light
    return result


def illuminate(view: FilmView) -> FilmView:
    """Return the view with its light dimmed by falloff; 1 stays 1 on the hole's axis."""
    plan = view.plan
    share = falloff(plan, plan.right_mm(), plan.up_mm())
    # In place of the radiance, which nothing needs any more: a third copy would be the largest one.
    light = np.multiply(view.light, share[..., None], out=view.light)
    return replace(view, light=light, unlit_share=float((share[plan.inside] <= 0.0).mean()))
