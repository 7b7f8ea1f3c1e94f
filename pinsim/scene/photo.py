"""A photo as a source of light: upright, and linear whenever it is asked for.

A Photo keeps the file's own codes and turns them to linear light rows at a time: a 24 megapixel
photo is 72 MB of codes but 288 MB of light, and most designs need no more than a part of it.
"""

from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError
from pinsim.scene.gamut import bring_in
from pinsim.scene.highlights import LIFT_HINT, HighlightLift, plan_lift, require_lift
from pinsim.scene.panorama import PanoramaPlace


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Photo:
    """An upright photo whose light can be asked for.

    codes : (rows, columns, 3) uint8, uint16, float16 or float32. decode : linear light for each code,
    float32, (codes,) or one row for each channel, or None when the codes are linear light already.
    to_srgb : (3, 3) from the decoded channels to linear sRGB, or None when they are that.
    view_deg : the horizontal angle of view that the file itself tells, if it does; view_note : why
    what it tells cannot be used. notes : what was decided at the door, for people.
    clips : whether the file had a highest code, so that what was brighter than it is lost.
    lift : what brightens clipped parts, if that was asked for.
    panorama : where the file says it lies on the sphere, if it says it is a panorama; panorama_note :
    why what it says cannot be used.
    """

    codes: NDArray[Any]
    decode: NDArray[np.float32] | None = None
    to_srgb: NDArray[np.float32] | None = None
    view_deg: float | None = None
    view_note: str = ""
    notes: tuple[str, ...] = ()
    clips: bool = False
    lift: HighlightLift | None = None
    panorama: PanoramaPlace | None = None
    panorama_note: str = ""

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.codes.shape[0], self.codes.shape[1]

    def linear(
        self, rows: slice = slice(None), columns: slice = slice(None)
    ) -> NDArray[np.float32]:
        """Return linear light of sRGB primaries, float32 (rows, columns, 3), 1.0 = white."""
        light = self.decoded(rows, columns)
        if self.to_srgb is not None:
            light = bring_in(light @ self.to_srgb.T)
        if self.lift is not None:
            light = self.lift.brightened(light, rows, columns)
        return light

    def decoded(
        self, rows: slice = slice(None), columns: slice = slice(None)
    ) -> NDArray[np.float32]:
        """Return linear light in the file's own primaries, float32 (rows, columns, 3)."""
        part = self.codes[rows, columns]
        if self.decode is None:
            return np.asarray(part, np.float32)
        # mode="clip" spares numpy a checked copy; no code can be out of range.
        if self.decode.ndim == 1 and part.dtype == np.uint8:
            return _two_at_once(part, self.decode)
        if self.decode.ndim == 1:
            return np.take(self.decode, part, mode="clip")
        light = np.empty(part.shape, np.float32)
        for channel, table in enumerate(self.decode):
            light[..., channel] = np.take(table, part[..., channel], mode="clip")
        return light


def _two_at_once(codes: NDArray[np.uint8], decode: NDArray[np.float32]) -> NDArray[np.float32]:
    """Return np.take(decode, codes), two neighbours at a time: numpy's time goes by the index."""
    whole = np.ascontiguousarray(codes)
    light = np.empty(whole.shape, np.float32)
    flat, result = whole.reshape(-1), light.reshape(-1)
    even = flat.size - flat.size % 2
    pairs = _light_of_pairs(decode.tobytes())
    np.take(pairs, flat[:even].view(np.uint16), out=result[:even].view(pairs.dtype), mode="clip")
    result[even:] = decode[flat[even:]]
    return light


@lru_cache(maxsize=4)
def _light_of_pairs(decode: bytes) -> NDArray[np.complex64]:
    """Return the light of each two codes that a 16-bit word of this machine holds, side by side."""
    codes = np.arange(1 << 16, dtype=np.uint16).view(np.uint8).reshape(-1, 2)
    return np.frombuffer(decode, np.float32)[codes].view(np.complex64)[:, 0]


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


def lifted(photo: Photo, stops: float, *, around: bool = False) -> Photo:
    """Return the photo with its clipped white brightened by up to `stops`; this light is invented.

    around : the photo's left edge goes on at its right. See highlights.py for what is assumed.
    """
    if require_lift(stops, "highlight lift") == 0.0:
        return photo
    lift = None
    if photo.clips:
        lift = plan_lift(photo.linear, photo.shape, stops=stops, around=around)
    if lift is None:
        why = "no white in it is clipped" if photo.clips else "it holds its light unclipped"
        return replace(photo, notes=(*photo.notes, f"highlight lift changes nothing: {why}"))
    notes = [note for note in photo.notes if LIFT_HINT not in note]
    share = 100.0 * float((lift.stops > 0.0).mean())
    notes.append(
        f"clipped white, {max(share, 0.1):.1f} % of the photo, is brightened by up to {stops:g} stops "
        "(highlight lift); this light is invented"
    )
    return replace(photo, lift=lift, notes=tuple(notes))


def sound_light(light: NDArray[Any], where: str) -> NDArray[Any]:
    """Return the light, of any float type, read-only; refuse what cannot be light."""
    wrong = int(np.count_nonzero(~np.isfinite(light)))
    if wrong:
        raise SceneError(f"{where} holds {wrong} values that are NaN or infinite; fill them first.")
    least = float(light.min())
    if least < 0.0:
        raise SceneError(
            f"{where} holds negative light, down to {least:g}; linear light starts at 0."
        )
    light.flags.writeable = False
    return light
