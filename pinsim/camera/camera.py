"""The Camera: a hole, the distance from it to the film, the film and what it is made of."""

import math
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Literal

import numpy as np

from pinsim.camera.film import Film, named_film
from pinsim.camera.hole import Hole
from pinsim.errors import DesignError, out_of_range
from pinsim.material import BUILT_IN, DEFAULT_MATERIAL, Catalogue, Material
from pinsim.optics import ChiefRays, FilmSurface, Opening
from pinsim.units import format_length

Tone = Literal["positive", "negative"]
TONES = ("positive", "negative")

FOCAL_LENGTH_RANGE_MM = (2.0, 20_000.0)
# Film nearer to the hole's plate than this is taken to lie behind it.
_LEAST_AHEAD = 0.01


@dataclass(frozen=True, slots=True, kw_only=True)
class Camera:
    """A lensless camera. focal_length_mm is the distance from the hole to the film along the axis.

    materials : where material_name is looked up.
    """

    name: str = "camera"
    focal_length_mm: float
    hole: Hole
    film: Film = field(default_factory=lambda: named_film("6x6"))
    material_name: str = DEFAULT_MATERIAL
    materials: Catalogue = field(default=BUILT_IN, repr=False)
    tone: Tone = "positive"

    def __post_init__(self) -> None:
        low, high = FOCAL_LENGTH_RANGE_MM
        if not low <= self.focal_length_mm <= high:
            raise DesignError(
                out_of_range("focal length (hole to film)", self.focal_length_mm, "mm", low, high)
            )
        if self.hole.greatest_mm >= 0.5 * self.focal_length_mm:
            raise DesignError(
                f"the hole, {self.hole.greatest_mm:g} mm, is too large for a box only "
                f"{self.focal_length_mm:g} mm deep (f/{self.f_number:.2g}); "
                "use a hole below half the depth, usually about 1/200 of it."
            )
        if self.hole.greatest_mm >= min(self.film.width_mm, self.film.height_mm):
            raise DesignError(
                f"the hole, {self.hole.greatest_mm:g} mm, is as large as the film frame, "
                f"{self.film.label}; use a smaller hole or a larger frame."
            )
        if self.tone not in TONES:
            raise DesignError(f"tone is {self.tone!r}; it must be one of: positive, negative.")
        self._refuse_film_behind_hole()
        _ = self.material

    def _refuse_film_behind_hole(self) -> None:
        film = self.film
        if math.isinf(film.bend_radius_mm):
            return
        ahead = self.focal_length_mm - film.bend_radius_mm * (
            1.0 - math.cos(film.bent_reach_mm / film.bend_radius_mm)
        )
        if ahead < _LEAST_AHEAD * self.focal_length_mm:
            raise DesignError(
                f"the bent film's end comes {ahead:.3g} mm before the hole's plate: "
                f"{film.bent_reach_mm:g} mm along a bend of {film.bend_radius_mm:g} mm, "
                f"{self.focal_length_mm:g} mm from the hole, reach behind the camera's front wall; "
                "use a shorter film or a larger radius (a round tin's is half its focal length)."
            )

    @property
    def f_number(self) -> float:
        """Focal length over hole diameter, of the round hole of the same area."""
        return self.focal_length_mm / self.hole.diameter_mm

    @property
    def material(self) -> Material:
        """The material that lies in the film plane."""
        return self.materials.material(self.material_name)

    @property
    def opening(self) -> Opening:
        """The clear opening, as optics takes it."""
        return self.hole.opening

    @property
    def plate_thickness_mm(self) -> float:
        """Thickness of the plate with the hole."""
        return self.hole.plate_thickness_mm

    @property
    def surface(self) -> FilmSurface:
        """The film as a surface behind the hole."""
        return FilmSurface(
            focal_length_mm=self.focal_length_mm,
            bend_radius_mm=self.film.bend_radius_mm,
            axis=self.film.bend_axis,
        )

    def frame_point_mm(self, across: float, up: float) -> tuple[float, float]:
        """Return film coordinates of a place in the frame: -1 to 1 from left to right, down to up."""
        film = self.film
        return (
            film.shift_right_mm + 0.5 * across * film.width_mm,
            film.shift_up_mm + 0.5 * up * film.height_mm,
        )

    def rays_to(self, *places: tuple[float, float]) -> ChiefRays:
        """Return the chief rays to places in the frame, given as for frame_point_mm."""
        points = np.array([self.frame_point_mm(*place) for place in places])
        return self.surface.chief_rays(points[:, 0], points[:, 1])

    def _angle_deg(self, first: tuple[float, float], second: tuple[float, float]) -> float:
        one, other = self.rays_to(first, second).direction
        return math.degrees(math.atan2(np.linalg.norm(np.cross(one, other)), float(one @ other)))

    @property
    def horizontal_view_deg(self) -> float:
        """The angle between left and right edge, seen from above."""
        left, right = self.rays_to((-1.0, 0.0), (1.0, 0.0)).direction
        return math.degrees(math.atan2(right[0], right[2]) - math.atan2(left[0], left[2]))

    @property
    def vertical_view_deg(self) -> float:
        """The angle between lower and upper edge, seen from the side."""
        lower, upper = self.rays_to((0.0, -1.0), (0.0, 1.0)).direction
        return math.degrees(math.atan2(upper[1], upper[2]) - math.atan2(lower[1], lower[2]))

    @property
    def diagonal_view_deg(self) -> float:
        """The angle between the rays to two opposite corners."""
        return self._angle_deg((-1.0, -1.0), (1.0, 1.0))

    @property
    def far_corner(self) -> tuple[float, float]:
        """The corner farthest from the axis, as for frame_point_mm."""
        return (
            -1.0 if self.film.shift_right_mm < 0.0 else 1.0,
            -1.0 if self.film.shift_up_mm < 0.0 else 1.0,
        )

    @property
    def corner_deg(self) -> float:
        """The field angle of the corner farthest from the axis."""
        return math.degrees(math.acos(float(self.rays_to(self.far_corner).direction[0, 2])))

    @property
    def summary(self) -> str:
        """One line for captions: hole, depth, f-number, film."""
        return (
            f"{self.hole.label}, {format_length(self.focal_length_mm)} to film, "
            f"f/{self.f_number:.0f}, {self.film.label}"
        )

    def with_hole(self, diameter_mm: float) -> "Camera":
        """Return this design with a round hole of another diameter in the same plate."""
        hole = Hole(diameter_mm=diameter_mm, plate_thickness_mm=self.hole.plate_thickness_mm)
        return replace(self, hole=hole)

    def with_focal_length(self, focal_length_mm: float) -> "Camera":
        """Return this design with the film at another distance."""
        return replace(self, focal_length_mm=focal_length_mm)

    @classmethod
    def load(cls, path: str | Path) -> "Camera":
        """Read a design from a TOML file, or from sample:NAME.

        Raises DesignError or UnitError, in one line, for whatever is wrong with it.
        """
        from pinsim.camera.design_file import read_design

        return read_design(path)
