"""Which way a picture is read: a photo to light, a map to bare numbers."""

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError
from pinsim.scene.door.finish import finished, opaque
from pinsim.scene.door.kinds import kind_of
from pinsim.scene.door.pictures import (
    read_deep_png,
    read_picture,
    read_plain_deep_png,
    read_plain_picture,
)
from pinsim.scene.door.refuse import require_file
from pinsim.scene.door.tiff import read_deep_tiff, tiff_codes
from pinsim.scene.door.upright import upright
from pinsim.scene.photo import Photo


def read_photo(path: Path) -> Photo:
    """Read a photo upright, ready to give linear light.

    A JPEG could be decoded at half its size in less time, but its blocks would be averaged in encoded
    values, not in light: stripes of one pixel, black and white, came out 1.2 stops too dark.
    Raises SceneError, in one line, for a missing, empty, truncated, oversized or foreign file, and for
    one whose package is not installed.
    """
    require_file(path, "photo")
    kind = kind_of(path)
    if kind == "heif":
        from pinsim.scene.door.heif import read_heif

        read = read_heif(path)
    elif kind == "raw":
        from pinsim.scene.door.raw import read_raw

        read = read_raw(path)
    elif kind in {"exr", "radiance"}:
        from pinsim.scene.door.hdr import read_exr, read_radiance

        read = read_exr(path) if kind == "exr" else read_radiance(path)
    elif kind == "deep tiff":
        read = read_deep_tiff(path)
    elif kind == "deep png":
        read = read_deep_png(path)
    else:
        read = read_picture(path)
    return finished(read, path)


def read_plain(path: Path, kind: str) -> NDArray[Any]:
    """Read the bare numbers of a one-channel picture (a map): no gamma, no profile, upright.

    Returns (rows, columns), uint8, uint16 or float.
    """
    require_file(path, kind)
    way = kind_of(path)
    orientation: object = 1
    if way == "deep tiff":
        codes, _, _, orientation = tiff_codes(path, kind)
    elif way == "deep png":
        codes, orientation = read_plain_deep_png(path, kind)
    elif way == "exr":
        codes = _plain_exr(path, kind)
    elif way == "picture":
        codes, orientation = read_plain_picture(path, kind)
    else:
        raise SceneError(
            f"{path} is a picture whose values are no bare numbers; save the {kind} as PNG, TIFF or "
            "OpenEXR."
        )
    if codes.ndim == 3 and codes.shape[2] in (2, 4) and opaque(codes[..., -1]):
        codes = codes[..., :-1]
    if codes.ndim == 3 and np.array_equal(codes[..., :1].repeat(codes.shape[2], 2), codes):
        codes = codes[..., 0]
    if codes.ndim != 2:
        raise SceneError(
            f"{path}: this {kind} has {codes.shape[-1]} different channels; it must have one "
            "(grey)."
        )
    return upright(codes, orientation)


def _plain_exr(path: Path, kind: str) -> NDArray[Any]:
    from pinsim.scene.door.hdr import exr_channels

    _, channels = exr_channels(path, kind, wanted=("Z",))
    for name in ("Z", "Y", "V"):
        if name in channels:
            return np.asarray(channels[name])
    shapes = {one.shape for one in channels.values()}
    colours = [channels[name] for name in ("R", "G", "B") if name in channels]
    if len(channels) == 1 or not colours or len(shapes) > 1:
        return np.asarray(next(iter(channels.values())))
    return np.stack(colours, axis=2)
