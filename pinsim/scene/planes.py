"""Distances of a photo as a stage has them: a few flat pieces, each with a mask, before a back."""

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.scene.distance import NEAREST_MM, Along, DistanceMap
from pinsim.scene.door import read_plain
from pinsim.scene.fit import at_size, check_aspect
from pinsim.scene.panorama import PanoramaPlace
from pinsim.scene.photo import Photo

MOST_PLANES = 255


@dataclass(frozen=True, slots=True, kw_only=True)
class Plane:
    """One distance, mm, and the picture whose white parts have it."""

    distance_mm: float
    mask: Path

    def __post_init__(self) -> None:
        if not self.distance_mm >= NEAREST_MM:
            raise SceneError(
                f"{self.mask}: "
                + out_of_range("the plane's distance", self.distance_mm, "mm", NEAREST_MM, math.inf)
            )


@dataclass(frozen=True, slots=True, kw_only=True)
class Planes:
    """Planes from front to back: where masks overlap the first one counts. rest_mm : the others."""

    planes: tuple[Plane, ...]
    rest_mm: float = math.inf

    def __post_init__(self) -> None:
        if not 1 <= len(self.planes) <= MOST_PLANES:
            raise SceneError(f"{len(self.planes)} planes are given; it must be 1 to {MOST_PLANES}.")
        if not self.rest_mm >= NEAREST_MM:
            raise SceneError(out_of_range("rest", self.rest_mm, "mm", NEAREST_MM, math.inf))

    @property
    def files(self) -> tuple[Path, ...]:
        """The masks."""
        return tuple(plane.mask for plane in self.planes)

    def lay(
        self, photo: Photo, *, focal_length_px: float, panorama: PanoramaPlace | None = None
    ) -> tuple[DistanceMap, tuple[str, ...]]:
        """Return the distances of the photo's pixels and no notes.

        Raises SceneError for a mask that cannot be read, has another shape or no white.
        """
        codes = np.zeros(photo.shape, np.uint8)
        for number, plane in enumerate(self.planes, start=1):
            white = _read_mask(plane.mask, photo)
            if not white.any():
                raise SceneError(
                    f"{plane.mask} has no white; paint white what is {plane.distance_mm:g} mm away."
                )
            codes[white & (codes == 0)] = number
        distances_mm = np.array([self.rest_mm, *(plane.distance_mm for plane in self.planes)])
        codes.flags.writeable = False
        along: Along = "axis" if panorama is None else "ray"
        inverse = (1.0 / distances_mm).astype(np.float32)
        return DistanceMap(codes=codes, inverse_of_code=inverse, along=along), ()


def _read_mask(path: Path, photo: Photo) -> NDArray[np.bool_]:
    grey = read_plain(path, "mask")
    check_aspect(path, grey.shape, photo.shape, "mask")
    middle = np.iinfo(grey.dtype).max // 2 if np.issubdtype(grey.dtype, np.integer) else 0.5
    return at_size(grey > middle, photo.shape)
