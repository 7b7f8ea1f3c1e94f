"""A photo as a source of light: upright, and linear whenever it is asked for.

A Photo keeps the file's own codes and turns them to linear light rows at a time: a 24 megapixel
photo is 72 MB of codes but 288 MB of light, and most designs need no more than a part of it.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Photo:
    """An upright photo whose light can be asked for.

    codes : (rows, columns, 3) uint8, uint16 or float32. decode : linear light for each code,
    float32, or None when the codes are linear light already. view_deg : the horizontal angle of
    view that the file itself tells, if it does. notes : what was decided at the door, for people.
    """

    codes: NDArray[Any]
    decode: NDArray[np.float32] | None = None
    view_deg: float | None = None
    notes: tuple[str, ...] = ()

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.codes.shape[0], self.codes.shape[1]

    def linear(
        self, rows: slice = slice(None), columns: slice = slice(None)
    ) -> NDArray[np.float32]:
        """Return linear light, float32 (rows, columns, 3), 1.0 = the photo's white."""
        part = self.codes[rows, columns]
        if self.decode is None:
            return np.asarray(part, np.float32)
        # mode="clip" spares numpy a checked copy; no code can be out of range.
        return np.take(self.decode, part, mode="clip")


def photo_from_linear(light: NDArray[Any], *, view_deg: float | None = None) -> Photo:
    """Return a photo made of linear light given as an array.

    light : (rows, columns) or (rows, columns, 3), float; integers are refused, as their white is not
    known.
    """
    if not np.issubdtype(light.dtype, np.floating):
        raise SceneError(
            f"the light is of type {light.dtype}; give floats of linear light, 1.0 = white "
            "(integers of a photo go through Scene.load)."
        )
    if light.ndim == 2:
        light = np.repeat(light[..., None], 3, axis=2)
    if light.ndim != 3 or light.shape[2] != 3 or 0 in light.shape:
        raise SceneError(f"the light has shape {light.shape}; it must be (rows, columns, 3).")
    return Photo(codes=sound_light(np.array(light, np.float32), "the light"), view_deg=view_deg)


def sound_light(light: NDArray[np.float32], where: str) -> NDArray[np.float32]:
    """Return the light read-only; refuse what cannot be light."""
    wrong = int(np.count_nonzero(~np.isfinite(light)))
    if wrong:
        raise SceneError(f"{where} holds {wrong} values that are NaN or infinite; fill them first.")
    lowest = float(light.min())
    if lowest < 0.0:
        raise SceneError(
            f"{where} holds negative light, down to {lowest:g}; linear light starts at 0."
        )
    light.flags.writeable = False
    return light
