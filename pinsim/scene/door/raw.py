"""Camera raw files through rawpy, which is LibRaw (extra `raw`).

True linear light: the camera's own white balance, no curve, no automatic brightness. 1.0 is where the
first channel of the sensor is full, which is white in any rendering without automatic brightness; the
other channels go on for a stop or so above it, and that is kept (LibRaw blends what is left of a
burnt-out colour to a neutral one, so that it is no magenta).
"""

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from pinsim.errors import SceneError
from pinsim.scene.door.finish import Decoded
from pinsim.scene.door.pictures import EXIF_DIRECTORY
from pinsim.scene.door.primaries import D65, REC2020, to_srgb_matrix
from pinsim.scene.door.refuse import missing_extra, quiet, reason, refuse_large
from pinsim.scene.exif_view import FocalLength, told_focal_length

_PIXEL_X_DIMENSION = 0xA002


def read_raw(path: Path) -> Decoded:
    """Read a raw file upright, in linear light of Rec. 2020's primaries."""
    try:
        import rawpy
    except ImportError:
        raise missing_extra(
            path, "a camera raw file", "raw", "develop it to a 16-bit TIFF"
        ) from None
    notes: list[str] = []
    try:
        with quiet(), rawpy.imread(str(path)) as raw:
            sizes = raw.sizes
            refuse_large(path, "photo", sizes.raw_width * sizes.raw_height)
            balance = _white_balance(raw, notes)
            codes: NDArray[Any] = raw.postprocess(
                user_wb=balance,
                # Rec. 2020 holds what cameras see; what it does not hold sRGB would not show either.
                output_color=rawpy.ColorSpace.Rec2020,
                output_bps=16,
                gamma=(1.0, 1.0),
                no_auto_bright=True,
                # Else LibRaw takes the brightest pixel for white, and brightness is no longer true.
                adjust_maximum_thr=0.0,
                highlight_mode=rawpy.HighlightMode.Blend,
            )
            flat = sizes.flip in {0, 1, 2, 3}
    except SceneError:
        raise
    except (rawpy.LibRawFileUnsupportedError, rawpy.NotSupportedError):
        raise SceneError(
            f"{path} is a raw file of a kind that is not read, or damaged; "
            "develop it to a 16-bit TIFF, or convert it to DNG."
        ) from None
    except MemoryError:
        raise SceneError(f"{path} needs more memory than there is; develop it smaller.") from None
    except Exception as problem:  # LibRawError and whatever a damaged file provokes
        raise SceneError(
            f"{path} is damaged or cut short ({reason(problem)}); copy the raw file again."
        ) from None
    height, width = codes.shape[:2] if flat else codes.shape[1::-1]
    # With its highlights kept, LibRaw gives the channel with the strongest balance all 16 bits.
    top = max(balance[:3]) / min(balance[:3])
    decode = np.linspace(0.0, top, 65536, dtype=np.float32)
    return Decoded(
        codes=codes,
        mode="L" if codes.ndim == 2 or codes.shape[2] == 1 else "RGB",
        decode=decode,
        to_srgb=to_srgb_matrix(REC2020, D65),
        focal=_focal_length(path, width, height),
        notes=tuple(notes),
    )


def _white_balance(raw: Any, notes: list[str]) -> list[float]:
    """Return the multipliers of red, green, blue and second green, the smallest being 1."""
    for told in (raw.camera_whitebalance, raw.daylight_whitebalance):
        red, green, blue, other = (float(one) for one in told)
        if min(red, green, blue) > 0.0 and np.isfinite(red + green + blue):
            least = min(red, green, blue)
            # LibRaw gives 0 for a second green that is like the first.
            return [one / least for one in (red, green, blue, other if other > 0.0 else green)]
        notes.append("the raw file tells no white balance of its own; daylight taken")
    return [1.0, 1.0, 1.0, 1.0]


def _focal_length(path: Path, width_px: int, height_px: int) -> FocalLength:
    """Return the focal length told by the Exif data of a raw file that is TIFF inside."""
    try:
        exif = Image.Exif()
        with path.open("rb") as file:
            exif.load_from_fp(file)
            tags = dict(exif.get_ifd(EXIF_DIRECTORY))
    except Exception:  # another container: --view is asked for
        return FocalLength()
    # It tells the size of the camera's own JPEG, a few pixels less; the raw picture was not rescaled.
    tags.pop(_PIXEL_X_DIMENSION, None)
    return told_focal_length(tags, width_px, height_px)
