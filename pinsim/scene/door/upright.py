"""Stored rows and columns to a picture that stands upright."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

ORIENTATION = 0x0112
SIDEWAYS = {5, 6, 7, 8}

# What to do to stored rows and columns so that they stand upright (Exif 2.32, tag Orientation).
_UPRIGHT = {
    1: lambda a: a,
    2: lambda a: a[:, ::-1],
    3: lambda a: a[::-1, ::-1],
    4: lambda a: a[::-1],
    5: lambda a: a.swapaxes(0, 1),
    6: lambda a: a[::-1].swapaxes(0, 1),
    7: lambda a: a[::-1, ::-1].swapaxes(0, 1),
    8: lambda a: a[:, ::-1].swapaxes(0, 1),
}


def upright(codes: NDArray[Any], orientation: object) -> NDArray[Any]:
    """Return a view of the codes, (rows, columns[, channels]), that stands upright."""
    known = _UPRIGHT.get(orientation) if isinstance(orientation, int) else None
    return codes if known is None else np.asarray(known(codes))


def orientation_note(orientation: object) -> str:
    """Return a word about an orientation that means nothing, or nothing for one that does."""
    if orientation is None or (isinstance(orientation, int) and orientation in _UPRIGHT):
        return ""
    told = orientation if isinstance(orientation, int) else "no single number"
    return f"its orientation tag is {told}, which means nothing (1 to 8 do); taken as upright"
