"""Exposure to tones for the eye: brightness, positive or negative, turned as it is looked at."""

from typing import Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Tone
from pinsim.colour import encode_8bit, encode_16bit

Float = NDArray[np.float32]

Look = Literal["upright", "screen", "emulsion"]
LOOKS = ("upright", "screen", "emulsion")
LOOK_TEXT = {
    "upright": "upright, as the scene",
    "screen": "seen from behind the film like a focusing screen: turned by 180 degrees",
    "emulsion": "the exposed face of the film: upside down, not reversed sideways",
}

# Hatching for what the photo does not cover: two mid greys that no toned picture shows in stripes.
_HATCH_LIGHT = (168, 112)
_HATCH_PERIOD = 96  # stripes along the longer side, whatever the picture's size


def turn(picture: NDArray[np.generic], look: Look) -> NDArray[np.generic]:
    """Return an upright (rows, columns, ...) array as `look` sees it; a view, not a copy."""
    if look == "screen":
        return picture[::-1, ::-1]
    if look == "emulsion":
        return picture[::-1]
    return picture


def develop(
    exposure: Float, *, gain: float = 1.0, tone: Tone = "positive", bits: int = 8
) -> NDArray[np.generic]:
    """Return sRGB codes of an upright exposure; uncovered places are hatched.

    exposure : (rows, columns, channels), 1.0 = white, NaN where not covered. gain : how many times
    the exposure for a white scene was given. tone "negative" is a plain inversion of the tones.
    Returns uint8 or uint16 of the same shape.
    """
    seen = np.nan_to_num(exposure * np.float32(gain), nan=0.0)
    codes = encode_8bit(seen) if bits == 8 else encode_16bit(seen)
    if tone == "negative":
        codes = np.iinfo(codes.dtype).max - codes
    uncovered = np.isnan(exposure[..., 0])
    if uncovered.any():
        codes[uncovered] = _hatching(uncovered.shape, bits)[uncovered][:, None]
    return codes


def _hatching(shape: tuple[int, int], bits: int) -> NDArray[np.generic]:
    """Return diagonal stripes, (rows, columns)."""
    period = max(4, max(shape) // _HATCH_PERIOD)
    diagonal = np.add.outer(np.arange(shape[0]), np.arange(shape[1])) // (period // 2)
    bright, dark = (np.array(value * (257 if bits == 16 else 1)) for value in _HATCH_LIGHT)
    return np.where(diagonal % 2 == 0, bright, dark).astype(np.uint8 if bits == 8 else np.uint16)
