"""Each design's figures at the very places that are looked at, in measures that can be compared.

Finest detail is compared in the scene, in cycles per degree: what the eye sees of it does not change
with the size of the film, and all pictures of a comparison are drawn at one angular scale, so a cycle
per degree is the same on all of them. Cycles/mm on the film alone would call a short box coarse.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.best import CONTRASTS, light_for
from pinsim.camera import Camera
from pinsim.exposure import Time, time_for
from pinsim.exposure.light import LightLevel
from pinsim.exposure.times import light_share
from pinsim.numbers import CONTRAST, outwards
from pinsim.optics import ChiefRays, Light
from pinsim.optics.sharpness import detail_anywhere
from pinsim.render.picture import Picture
from pinsim.sheets.side_by_side.common_part import CommonPart, Slopes, hidden_share
from pinsim.sheets.side_by_side.details import Detail

Array = NDArray[np.float64]

_LETTERS = "ABCDEFGH"
_SAMPLES = 200
# As in pinsim.numbers: what stands for a light, by the hole's shape.
_WAVELENGTHS = {"round": 4, "oval": 4, "slit": 12, "traced": 2}
_PER_DEG = math.pi / 180.0


@dataclass(frozen=True, slots=True, kw_only=True)
class PlaceFigures:
    """One design at one place of the scene.

    cycles_deg : the finest detail in the scene, cycles per degree, for each of pinsim.best.CONTRASTS,
    in the direction where it is poorest; 0 where no light comes. film_cycles_mm : the same on the film
    at 20 % contrast. distance_mm : of what is there. field_deg : from the hole's axis.
    falloff_stops : darker than on the axis; infinity where no light comes.
    """

    name: str
    where: str
    field_deg: float
    distance_mm: float
    cycles_deg: tuple[float, ...]
    film_cycles_mm: float
    falloff_stops: float

    @property
    def plain_cycles_deg(self) -> float:
        """The finest detail that is plain to see: at 20 % contrast."""
        return self.cycles_deg[CONTRASTS.index(CONTRAST)]


@dataclass(frozen=True, slots=True, kw_only=True)
class DesignFigures:
    """One design of a comparison.

    letter : "A", "B", as on the page. places : in the order of the page. time : what the material needs
    at `ev`, corrected for reciprocity; metered_s : what a meter says. falloff_stops : of the frame's
    own farthest corner. hidden_share : of the frame, left out of the page; covered_share : of the
    frame, that the photo shows.
    """

    letter: str
    name: str
    summary: str
    hole: str
    hole_mm: float
    focal_length_mm: float
    f_number: float
    material: str
    ev: float
    time: Time
    horizontal_view_deg: float
    vertical_view_deg: float
    falloff_stops: float
    hidden_share: float
    covered_share: float
    places: tuple[PlaceFigures, ...]

    def at(self, name: str) -> PlaceFigures | None:
        """Return the figures of a place by its name, if it is on the page."""
        return next((place for place in self.places if place.name == name), None)


def design_figures(
    pictures: Sequence[Picture],
    common: CommonPart,
    details: Sequence[Detail],
    *,
    light: LightLevel,
    wavelength_nm: float | None,
) -> tuple[DesignFigures, ...]:
    """Return the figures of all pictures at the same places of the scene."""
    rays = [detail.slopes(common) for detail in details]
    found = []
    for number, picture in enumerate(pictures):
        camera = picture.camera
        colours = light_for(wavelength_nm, camera.material)
        corner = light_share(camera, *camera.far_corner)
        found.append(
            DesignFigures(
                letter=_LETTERS[number],
                name=camera.name,
                summary=camera.summary,
                hole=camera.hole.label.removeprefix("hole "),
                hole_mm=camera.hole.diameter_mm,
                focal_length_mm=camera.focal_length_mm,
                f_number=camera.f_number,
                material=camera.material_name,
                ev=light.ev,
                time=time_for(camera, light),
                horizontal_view_deg=camera.horizontal_view_deg,
                vertical_view_deg=camera.vertical_view_deg,
                falloff_stops=_stops(corner),
                hidden_share=hidden_share(picture, common.window),
                covered_share=picture.covered_share,
                places=tuple(
                    _place(camera, colours, detail, ray)
                    for detail, ray in zip(details, rays, strict=True)
                ),
            )
        )
    return tuple(found)


def _place(camera: Camera, light: Light, detail: Detail, slopes: Slopes) -> PlaceFigures:
    point = camera.surface.meet_mm(*slopes)
    rays = camera.surface.chief_rays(*point)
    directions = directions_at(point)
    film = detail_anywhere(
        directions,
        rays=rays,
        opening=camera.opening,
        plate_thickness_mm=camera.plate_thickness_mm,
        light=light.condensed(_WAVELENGTHS[camera.hole.shape]),
        distance_mm=detail.distance_mm,
        contrasts=CONTRASTS,
        samples=_SAMPLES,
    )
    seen = film / degrees_per_mm(camera, point, directions)[:, None]
    share = float(rays.falloff) * float(
        camera.opening.clear_share(camera.plate_thickness_mm * rays.tangent)
    )
    k = CONTRASTS.index(CONTRAST)
    return PlaceFigures(
        name=detail.name,
        where=detail.where,
        field_deg=field_deg(rays),
        distance_mm=detail.distance_mm,
        cycles_deg=tuple(float(one) for one in seen.min(axis=0)),
        film_cycles_mm=float(film[int(seen[:, k].argmin()), k]),
        falloff_stops=_stops(share),
    )


def field_deg(rays: ChiefRays) -> float:
    """Return the angle between one chief ray and the hole's axis."""
    return math.degrees(math.acos(min(float(rays.direction[2]), 1.0)))


def directions_at(point_mm: tuple[float, float]) -> Array:
    """Return unit directions along the film, (4, 2): outwards, around, to the right and upwards."""
    x, y = outwards(point_mm)
    return np.array([[x, y], [-y, x], [1.0, 0.0], [0.0, 1.0]])


def degrees_per_mm(camera: Camera, point_mm: tuple[float, float], directions: Array) -> Array:
    """Return by how many degrees the ray turns for a mm along the film in each direction, (n,).

    The part of the step that lies across the ray, over the ray's length.
    """
    rays = camera.surface.chief_rays(*point_mm)
    steps = directions @ camera.surface.tangents(*point_mm).T
    along = steps @ rays.direction
    across = np.linalg.norm(steps - along[:, None] * rays.direction, axis=1)
    return np.asarray(across / float(rays.distance_mm) / _PER_DEG)


def _stops(share: float) -> float:
    return abs(math.log2(share)) if share > 0.0 else math.inf
