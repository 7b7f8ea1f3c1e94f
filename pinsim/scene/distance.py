"""How far everything in a photo is: one distance for all, or a map beside the photo.

Distances are measured along the axis of view, not along the ray, so a wall faced squarely has one.
"""

import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.scene.door import read_plain
from pinsim.units import format_length

NEAREST_MM = 1.0
STEP_RANGE_MM = (1e-4, 1e4)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DistanceMap:
    """Distances beside a photo. codes : (rows, columns); code x step_mm is the distance, 0 infinity."""

    codes: NDArray[Any]
    step_mm: float

    def inverse_mm(self, rows: NDArray[np.intp], columns: NDArray[np.intp]) -> NDArray[np.float32]:
        """Return 1/distance, 1/mm, at whole photo pixels; 0 is infinitely far.

        rows, columns : index arrays that numpy can spread against each other.
        """
        codes = self.codes[rows, columns].astype(np.float32)
        far = codes == 0.0
        inverse = np.divide(
            np.float32(1.0 / self.step_mm), codes, out=np.zeros_like(codes), where=~far
        )
        return np.asarray(inverse, np.float32)

    @property
    def farthest_mm(self) -> float:
        """The longest distance in the map; infinity when any part is infinitely far."""
        if (self.codes == 0).any():
            return math.inf
        return float(self.codes.max()) * self.step_mm

    @property
    def nearest_mm(self) -> float:
        """The shortest distance in the map; infinity when there is none."""
        seen = self.codes[self.codes > 0]
        return float(seen.min()) * self.step_mm if seen.size else math.inf


def read_distance_map(path: Path, *, step_mm: float, photo_shape: tuple[int, int]) -> DistanceMap:
    """Read a one-channel map of the photo's own shape.

    step_mm : the distance that one code value stands for. Raises SceneError for a map of another
    shape, NaN, negative or impossible distances.
    """
    if not STEP_RANGE_MM[0] <= step_mm <= STEP_RANGE_MM[1]:
        raise SceneError(
            f"{path}: " + out_of_range("the map's step", step_mm, "mm", *STEP_RANGE_MM)
        )
    codes = read_plain(path, "distance map")
    if codes.shape != photo_shape:
        turned = (
            " It looks turned: rotate it as the photo is seen upright."
            if (codes.shape == photo_shape[::-1])
            else " Save the map at the photo's own size."
        )
        raise SceneError(
            f"{path} is {codes.shape[1]} x {codes.shape[0]} pixels but the photo is "
            f"{photo_shape[1]} x {photo_shape[0]}.{turned}"
        )
    if np.issubdtype(codes.dtype, np.floating):
        codes = codes.astype(np.float32)
        wrong = int(np.count_nonzero(np.isnan(codes)))
        if wrong:
            raise SceneError(
                f"{path}: {wrong} distances are NaN; fill them, with 0 for infinitely far."
            )
        codes = np.where(np.isinf(codes) & (codes > 0), np.float32(0.0), codes)
    if (codes < 0).any():
        raise SceneError(
            f"{path}: distances go down to {float(codes.min()) * step_mm:g} mm; "
            "they start at 0, which means infinitely far."
        )
    result = DistanceMap(codes=codes, step_mm=step_mm)
    if result.nearest_mm < NEAREST_MM:
        raise SceneError(
            f"{path}: the nearest distance is {result.nearest_mm:g} mm, too near to draw; "
            f"is the step, {format_length(step_mm)}, right?"
        )
    codes.flags.writeable = False
    return result
