"""Radiance to irradiance: falloff over the film, and the shade of a thick plate's bore.

Weighting comes before spreading: it is the light of each scene point that is dimmed by its own
slant through the hole, and that light is then scattered over the film.
"""

from dataclasses import replace

import numpy as np

from pinsim.optics import flat_falloff, plate_transmission
from pinsim.render.project import FilmView


def illuminate(view: FilmView) -> FilmView:
    """Return the view with its light dimmed by falloff; 1 stays 1 on the hole's axis."""
    plan = view.plan
    z = plan.camera.focal_length_mm
    tangent_square = (plan.up_mm() / z)[:, None] ** 2 + (plan.right_mm() / z)[None, :] ** 2
    falloff = flat_falloff(tangent_square)
    hole = plan.camera.hole
    if hole.plate_thickness_mm > 0.0:
        falloff *= plate_transmission(
            tangent_square,
            diameter_mm=hole.diameter_mm,
            plate_thickness_mm=hole.plate_thickness_mm,
        )
    return replace(view, light=view.light * falloff.astype(np.float32)[..., None])
