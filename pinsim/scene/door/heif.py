"""HEIC of phones, and HEIF with 10 or 12 bits of cameras, through pillow-heif (extra `phone`)."""

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from pinsim.errors import SceneError
from pinsim.scene.door.finish import Decoded
from pinsim.scene.door.pictures import focal_length_of
from pinsim.scene.door.primaries import by_code_points
from pinsim.scene.door.refuse import damaged, missing_extra, refuse_large
from pinsim.scene.door.upright import ORIENTATION, SIDEWAYS
from pinsim.scene.exif_view import FocalLength


def read_heif(path: Path) -> Decoded:
    """Read the main picture of a HEIC or HEIF file.

    The decoder turns the picture by the file's own turning boxes. The orientation in its Exif data
    only repeats them and is passed over, as ISO/IEC 23008-12 asks: turned once, never twice.
    """
    try:
        import pillow_heif
    except ImportError:
        raise missing_extra(path, "a HEIC picture", "phone", "export it as JPEG") from None
    try:
        file = pillow_heif.open_heif(path, convert_hdr_to_8bit=False, hdr_to_16bit=False)
        refuse_large(path, "photo", file.size[0] * file.size[1])
        codes: NDArray[Any] = np.asarray(file)
        channels, _, depth = file.mode.partition(";")
        told = dict(file.info)
    except SceneError:
        raise
    except MemoryError:
        raise SceneError(
            f"{path} needs more memory than there is; shrink the photo first."
        ) from None
    except Exception as problem:  # the decoder's ValueError, RuntimeError, EOFError ...
        raise damaged(path, "photo", problem) from None
    mode = {"L": "L", "LA": "LA", "RGB": "RGB", "RGBA": "RGBA"}.get(channels)
    if mode is None:
        raise SceneError(f"{path} is a HEIC picture in {file.mode} colour; export it as JPEG.")
    bits = int(depth or 8)
    focal = _focal_length(told, codes.shape)
    profile = told.get("icc_profile")
    if profile:
        # Profiles speak of 8 or 16 bits; ten bits are spread over sixteen, white to white.
        return Decoded(codes=_spread(codes, bits), mode=mode, profile=profile, focal=focal)
    points = told.get("nclx_profile") or {}
    decode, to_srgb, note, clips = by_code_points(points, bits)
    if mode.endswith("A"):
        codes = _spread(codes, bits)
        decode = decode[_unspread(codes.dtype, bits)]
    return Decoded(
        codes=codes,
        mode=mode,
        decode=decode,
        to_srgb=to_srgb,
        focal=focal,
        clips=clips,
        notes=(note,),
    )


def _spread(codes: NDArray[Any], bits: int) -> NDArray[Any]:
    if bits == 8:
        return codes
    top = (1 << bits) - 1
    spread = np.arange(top + 1, dtype=np.uint32) * 65535 + top // 2
    return np.asarray((spread // top).astype(np.uint16)[codes])


def _unspread(dtype: np.dtype[Any], bits: int) -> NDArray[np.intp]:
    """Return, for each code after _spread, the code it was."""
    top, wide = (1 << bits) - 1, int(np.iinfo(dtype).max)
    return np.asarray(np.rint(np.arange(wide + 1) * (top / wide)), np.intp)


def _focal_length(told: dict[str, Any], shape: tuple[int, ...]) -> FocalLength:
    exif = Image.Exif()
    try:
        exif.load(told.get("exif") or b"")
        sideways = exif.get(ORIENTATION) in SIDEWAYS
    except Exception:  # damaged Exif data beside sound pixels
        return FocalLength()
    # The tags speak of the picture before it was turned.
    height, width = (shape[1], shape[0]) if sideways else (shape[0], shape[1])
    return focal_length_of(exif, width, height)
