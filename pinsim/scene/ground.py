"""Distances of a photo without any map: level ground up to its horizon."""

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.scene.distance import NEAREST_MM, DistanceMap
from pinsim.scene.panorama import PanoramaPlace, rotation
from pinsim.scene.photo import Photo
from pinsim.units import format_length, pixels

HEIGHT_RANGE_MM = (1.0, 1e7)  # from a beetle's eye to a view from a mountain
_STEEPEST_DEG = 85.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Ground:
    """Level ground seen from a height.

    camera_height_mm : from the ground to the hole. horizon_share : where the ground would end if
    nothing stood before it, as a share of the picture's height from its top; horizon_px : the same
    in pixels. Neither: the middle, the camera held level; a panorama has its own.
    far_mm : ground beyond is infinitely far.
    """

    camera_height_mm: float
    horizon_share: float | None = None
    horizon_px: float | None = None
    far_mm: float = math.inf

    def __post_init__(self) -> None:
        low, high = HEIGHT_RANGE_MM
        if not low <= self.camera_height_mm <= high:
            raise SceneError(out_of_range("camera_height", self.camera_height_mm, "mm", low, high))
        if self.horizon_share is not None and self.horizon_px is not None:
            raise SceneError("the horizon is given as a share and in pixels; keep one of them.")
        if not self.far_mm >= NEAREST_MM:
            raise SceneError(out_of_range("far", self.far_mm, "mm", NEAREST_MM, math.inf))

    @property
    def files(self) -> tuple[Path, ...]:
        """What it is read from: nothing."""
        return ()

    def lay(
        self, photo: Photo, *, focal_length_px: float, panorama: PanoramaPlace | None = None
    ) -> tuple[DistanceMap, tuple[str, ...]]:
        """Return the distances of the photo's pixels and what was taken for granted.

        Raises SceneError when no ground is in the picture, or it would be nearer than 1 mm.
        """
        if panorama is None:
            share = self._share_below(photo, focal_length_px)
        else:
            share = self._share_below_in(panorama, photo.shape)
        inverse = (np.maximum(share, 0.0) / self.camera_height_mm).astype(np.float32)
        inverse[inverse < 1.0 / self.far_mm] = 0.0
        # One column seen as a whole picture: a view, so that it takes no memory.
        made = DistanceMap(
            codes=np.broadcast_to(inverse, photo.shape),
            along="axis" if panorama is None else "ray",
        )
        if made.nearest_mm < NEAREST_MM:
            raise SceneError(
                f"the nearest ground would be {made.nearest_mm:g} mm away, too near to draw; is the "
                f"camera's height, {format_length(self.camera_height_mm)}, right?"
            )
        return made, () if panorama is not None else self._notes(made)

    def _share_below(self, photo: Photo, focal_length_px: float) -> NDArray[np.float64]:
        """Return, for each row, how far a ray has sunk when it is 1 ahead along the axis: h/Z.

        With y down and Z ahead, ground points have n.X = h, n = (0, cos p, sin p) straight down, and
        X = Z (x/f, y/f, 1). So h/Z = (y - y_horizon) cos(p) / f, where tan(p) = -y_horizon/f is how
        far the camera looks down: linear over the picture, as for any plane. Level: Z = f h/y.
        Derived in docs/how-far.md.
        """
        rows = photo.shape[0]
        horizon = self._horizon(photo)
        below = np.arange(rows) + 0.5 - horizon
        if below[-1] <= 0.0:
            raise SceneError(
                f"the horizon is {horizon:.0f} px below the photo's top, which is only {rows} px high: "
                "no ground is in it. Give its share of the height from the top, for example 0.45."
            )
        pitch = math.atan((0.5 * rows - horizon) / focal_length_px)
        if abs(math.degrees(pitch)) > _STEEPEST_DEG:
            raise SceneError(
                f"a horizon at {horizon:.0f} px of {rows} means a camera pointing "
                f"{abs(math.degrees(pitch)):.0f} deg {'down' if pitch > 0 else 'up'}; "
                f"at most {_STEEPEST_DEG:g} deg is possible."
            )
        return np.asarray((below * (math.cos(pitch) / focal_length_px))[:, None])

    def _share_below_in(self, place: PanoramaPlace, shape: tuple[int, int]) -> NDArray[np.float64]:
        """Return how far a ray of length 1 sinks, (rows, columns or 1): h over the ray's length."""
        if self.horizon_share is not None or self.horizon_px is not None:
            raise SceneError(
                "a panorama has its own horizon; leave it out of the ground, and write horizon_row in "
                "the table [panorama] if it is not in the picture's middle."
            )
        up = (place.horizon_row - np.arange(shape[0])) / place.row_per_rad
        right = (np.arange(shape[1]) - place.ahead_column) / place.column_per_rad
        if not place.pitch_deg and not place.roll_deg:
            share = -np.sin(up)[:, None]
        else:
            across, upright, ahead = rotation(0.0, place.pitch_deg, place.roll_deg)[1]
            level = across * np.sin(right) + ahead * np.cos(right)
            share = -(np.cos(up)[:, None] * level + upright * np.sin(up)[:, None])
        if share.max() <= 0.0:
            raise SceneError("no ground is in this panorama: it ends above its horizon.")
        return np.asarray(share)

    def _horizon(self, photo: Photo) -> float:
        share = 0.5 if self.horizon_share is None else self.horizon_share
        if self.horizon_px is not None:
            share = self.horizon_px / photo.shape[0]
        return share * photo.shape[0]

    def _notes(self, made: DistanceMap) -> tuple[str, ...]:
        if self.horizon_share is not None or self.horizon_px is not None:
            return ()
        return (
            "horizon taken as the photo's middle (--horizon, or horizon_row in the scene file); "
            f"the ground begins {format_length(made.nearest_mm)} away",
        )


def horizon_from(value: object, where: str) -> dict[str, float]:
    """Return a Ground's horizon keyword from 0.45, "0.45" or "812 px".

    Raises SceneError when it is neither a share nor a number of pixels.
    """
    if isinstance(value, str) and not _is_number(value):
        return {"horizon_px": pixels(value, where)}
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        raise SceneError(f"{where} is {value!a}; write a share of the height, 0.45, or '812 px'.")
    share = float(value)
    if not -10.0 <= share < 1.0:
        hint = f" If you meant pixels, write '{share:g} px'." if share > 1.0 else ""
        raise SceneError(
            f"{where} is {share:g}; as a share of the picture's height from its top it is below 1, "
            f"negative when it lies above the picture.{hint}"
        )
    return {"horizon_share": share}


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True
