"""The figures behind the picture: one camera's sharpness, light and angles, without a scene."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

from pinsim import optics
from pinsim.best import light_for
from pinsim.camera import Camera
from pinsim.exposure import metered_time_s

CONTRAST = 0.2
USUAL_DISTANCES_MM = (math.inf, 2000.0, 500.0)
USUAL_EV = (15.0, 12.0, 9.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class AtDistance:
    """Sharpness in the middle of the film for objects at one distance.

    spot_mm : diameter of the circle on the film that holds half of a point's light.
    detail_cycles_mm : finest detail at 20 % contrast, on the film; object_mm : one such cycle there.
    best_hole_mm : the hole that would draw the finest detail at this distance.
    """

    distance_mm: float
    spot_mm: float
    detail_cycles_mm: float
    object_mm: float
    best_hole_mm: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Figures:
    """What pinsim says of a design; lengths mm, angles deg, times s."""

    name: str
    hole_mm: float
    focal_length_mm: float
    f_number: float
    frame: str
    frame_width_mm: float
    frame_height_mm: float
    material: str
    horizontal_view_deg: float
    vertical_view_deg: float
    diagonal_view_deg: float
    mean_wavelength_nm: float
    cutoff_cycles_mm: float
    corner_deg: float
    corner_falloff_stops: float
    distances: tuple[AtDistance, ...]
    times_s: tuple[tuple[float, float], ...]

    @property
    def far(self) -> AtDistance:
        """The first distance asked for; infinity unless told otherwise."""
        return self.distances[0]


def figures(
    camera: Camera,
    *,
    distances_mm: Sequence[float] = USUAL_DISTANCES_MM,
    wavelength_nm: float | None = None,
    best: bool = True,
) -> Figures:
    """Return a camera's figures for its material's light, or for one wavelength.

    best : look for the best hole too (the slow part; NaN without it).
    """
    light = light_for(wavelength_nm, camera.material_name)
    mean_nm = float(light.shares @ light.wavelengths_nm)
    diameter, depth = camera.hole.diameter_mm, camera.focal_length_mm
    rows = []
    for distance in distances_mm:
        detail = optics.finest_detail(
            diameter_mm=diameter,
            focal_length_mm=depth,
            light=light,
            distance_mm=distance,
            contrast=CONTRAST,
        )
        rows.append(
            AtDistance(
                distance_mm=distance,
                spot_mm=optics.spot_diameter_mm(
                    diameter_mm=diameter, focal_length_mm=depth, light=light, distance_mm=distance
                ),
                detail_cycles_mm=detail,
                object_mm=distance / depth / detail,
                best_hole_mm=optics.best_diameter_mm(
                    focal_length_mm=depth, light=light, distance_mm=distance, contrast=CONTRAST
                )
                if best
                else math.nan,
            )
        )
    rays = camera.rays_to(camera.far_corner)
    clear = camera.opening.clear_share(camera.plate_thickness_mm * rays.tangent)
    corner = float(rays.falloff[0] * clear[0])
    return Figures(
        name=camera.name,
        hole_mm=diameter,
        focal_length_mm=depth,
        f_number=camera.f_number,
        frame=camera.film.label,
        frame_width_mm=camera.film.width_mm,
        frame_height_mm=camera.film.height_mm,
        material=camera.material_name,
        horizontal_view_deg=camera.horizontal_view_deg,
        vertical_view_deg=camera.vertical_view_deg,
        diagonal_view_deg=camera.diagonal_view_deg,
        mean_wavelength_nm=mean_nm,
        cutoff_cycles_mm=diameter / (mean_nm * 1e-6 * depth),
        corner_deg=camera.corner_deg,
        corner_falloff_stops=-math.log2(corner) if corner > 0.0 else math.inf,
        distances=tuple(rows),
        times_s=tuple((ev, metered_time_s(camera, ev)) for ev in USUAL_EV),
    )
