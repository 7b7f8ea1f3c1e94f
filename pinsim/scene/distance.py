"""A distance for every pixel of a photo, in one form whatever it was made from.

Optics needs 1/distance, in which infinity is plain 0 and a flat surface is linear over the picture.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError

# Along the axis of view a wall faced squarely has one distance; along the ray it has many.
Along = Literal["axis", "ray"]
ALONGS = ("axis", "ray")

NEAREST_MM = 1.0
_BLOCK_PX = 2_000_000  # pixels looked at in one go


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DistanceMap:
    """Distances of a photo's pixels.

    codes : (rows, columns), the photo's. Whole numbers are places in inverse_of_code; floats are
    1/distance themselves, 1/mm. ray_focal_px : set when they are along the rays of a rectilinear
    photo of this focal length in pixels; inverse_mm turns them to the axis.
    along : what inverse_mm gives: "axis", or "ray" for a panorama, which has no one axis.
    nearest_mm, farthest_mm : the same way; infinity when there is none, or any part is.
    """

    codes: NDArray[Any]
    inverse_of_code: NDArray[np.float32] | None = None
    ray_focal_px: float | None = None
    along: Along = "axis"
    nearest_mm: float = field(init=False)
    farthest_mm: float = field(init=False)

    def __post_init__(self) -> None:
        if self.along not in ALONGS:
            raise SceneError(f"along is {self.along!r}; it must be one of: {', '.join(ALONGS)}.")
        low, high = math.inf, 0.0
        for inverse in self._blocks():
            low, high = min(low, float(inverse.min())), max(high, float(inverse.max()))
        object.__setattr__(self, "nearest_mm", 1.0 / high if high > 0.0 else math.inf)
        object.__setattr__(self, "farthest_mm", 1.0 / low if low > 0.0 else math.inf)

    @classmethod
    def from_distances(cls, distances_mm: NDArray[Any], *, along: Along = "axis") -> "DistanceMap":
        """Make a map from distances, mm, (rows, columns); 0 and infinity are infinitely far.

        Raises SceneError for NaN, for distances below 0 or nearer than 1 mm.
        """
        distances_mm = np.asarray(distances_mm)
        if distances_mm.ndim != 2 or 0 in distances_mm.shape:
            raise SceneError(
                f"the distances have shape {distances_mm.shape}; it must be (rows, columns)."
            )
        if not (distances_mm >= 0).all():  # also refuses nan
            raise SceneError("the distances hold NaN or numbers below 0; 0 is infinitely far.")
        made = cls(codes=_frozen(inverse_of(distances_mm)), along=along)
        if made.nearest_mm < NEAREST_MM:
            raise SceneError(
                f"the nearest distance is {made.nearest_mm:g} mm, too near to draw; are they in mm?"
            )
        return made

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.codes.shape[0], self.codes.shape[1]

    def inverse_mm(self, rows: NDArray[np.intp], columns: NDArray[np.intp]) -> NDArray[np.float32]:
        """Return 1/distance, 1/mm, at whole photo pixels; 0 is infinitely far.

        rows, columns : index arrays that numpy can spread against each other.
        """
        inverse = self.codes[rows, columns]
        if self.inverse_of_code is not None:
            # mode="clip" spares numpy a checked copy; no code can be out of range.
            inverse = np.take(self.inverse_of_code, inverse, mode="clip")
        if self.ray_focal_px is None:
            return np.asarray(inverse, np.float32)
        return np.asarray(inverse * self._ray_over_axis(rows, columns), np.float32)

    def _ray_over_axis(
        self, rows: NDArray[np.intp], columns: NDArray[np.intp]
    ) -> NDArray[np.float32]:
        """Return the length of a pixel's ray per length along the axis: 1 / cos(its angle)."""
        assert self.ray_focal_px is not None
        scale = np.float32(1.0 / self.ray_focal_px)
        up, right = (
            (np.asarray(place, np.float32) - np.float32(0.5 * (size - 1))) * scale
            for place, size in zip((rows, columns), self.shape, strict=True)
        )
        return np.sqrt(np.float32(1.0) + up * up + right * right)

    def _blocks(self) -> Iterator[NDArray[np.float32]]:
        """Yield 1/distance that together hold the map's extremes, block by block."""
        rows, columns = self.shape
        if self.ray_focal_px is None and self.inverse_of_code is not None:
            used = np.zeros(self.inverse_of_code.size, np.bool_)
            used[self.codes] = True
            yield self.inverse_of_code[used]
            return
        step = max(1, _BLOCK_PX // columns)
        for start in range(0, rows, step):
            if self.ray_focal_px is None:
                yield self.codes[start : start + step]
            else:
                place = np.arange(start, min(start + step, rows))[:, None]
                yield self.inverse_mm(place, np.arange(columns)[None, :])


def inverse_of(distances_mm: NDArray[Any], unit_mm: float = 1.0) -> NDArray[np.float32]:
    """Return 1/distance, 1/mm, float32, of distances in units of unit_mm; 0 and infinity give 0."""
    inverse = np.zeros(distances_mm.shape, np.float32)
    # Below float32's range a distance is as good as none; it would overflow to infinity.
    with np.errstate(over="ignore"):
        np.divide(
            1.0 / unit_mm, distances_mm, out=inverse, where=distances_mm > 0, casting="unsafe"
        )
    return inverse


def _frozen(array: NDArray[Any]) -> NDArray[Any]:
    array.flags.writeable = False
    return array
