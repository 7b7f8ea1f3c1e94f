"""Film flat or bent about one axis, by elementary geometry derived here, computed without pinsim.

Points are (R sin(u/R), v, z - R + R cos(u/R)) on a cylinder that bends towards the hole, and (u, v, z)
on a plane.
"""

import math
from dataclasses import dataclass

import numpy as np

from pinsim.camera import Camera, Film, Hole


@dataclass(frozen=True)
class BentFilm:
    """A frame of film at a focal length; all lengths in mm, bend_radius inf is flat."""

    focal_length: float
    width: float
    height: float
    bend_radius: float = math.inf
    bend_axis: str = "vertical"
    shift_right: float = 0.0
    rise: float = 0.0

    def camera(self, hole_mm=1.2):
        """Return pinsim's camera with this film."""
        return Camera(
            focal_length_mm=self.focal_length,
            hole=Hole(diameter_mm=hole_mm),
            film=Film(
                width_mm=self.width,
                height_mm=self.height,
                bend_radius_mm=self.bend_radius,
                bend_axis=self.bend_axis,
                shift_right_mm=self.shift_right,
                shift_up_mm=self.rise,
            ),
        )

    def points_mm(self, right, up):
        """Return the film points of coordinates that spread against each other, (..., 3)."""
        right, up = np.broadcast_arrays(right, up)
        z, radius = self.focal_length, self.bend_radius
        if math.isinf(radius):
            return np.stack([right, up, np.full(right.shape, z)], axis=-1)
        bent, other = (right, up) if self.bend_axis == "vertical" else (up, right)
        aside = radius * np.sin(bent / radius)
        ahead = z - radius + radius * np.cos(bent / radius)
        first, second = (aside, other) if self.bend_axis == "vertical" else (other, aside)
        return np.stack([first, second, ahead], axis=-1)
