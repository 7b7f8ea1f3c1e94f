"""What Pillow reads; 16-bit PNG through imagecodecs; JPEG straight into one array.

Pillow hands 16-bit colour over as 8-bit without a word, and holds every pixel as four bytes beside
the array it gives: a panorama of 200 megapixels would need 1.4 GB to become 600 MB of codes.
"""

import mmap
import re
import threading
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image, UnidentifiedImageError

from pinsim.errors import SceneError
from pinsim.scene.door.finish import Decoded
from pinsim.scene.door.refuse import MAX_PIXELS, damaged, foreign, too_large
from pinsim.scene.door.upright import ORIENTATION, SIDEWAYS
from pinsim.scene.exif_view import FocalLength, told_focal_length

EXIF_DIRECTORY = 0x8769

_PNG_MODES = {1: "L", 2: "LA", 3: "RGB", 4: "RGBA"}
# A marker of JPEG that ends the compressed pixels: neither a stuffed byte nor a restart (T.81, B.1.1).
_JPEG_MARKER = re.compile(rb"\xff[^\x00\xff\xd0-\xd7]")
_JPEG_SCAN, _JPEG_END = 0xDA, 0xD9
_opening = threading.Lock()


def read_picture(path: Path) -> Decoded:
    """Read an 8-bit picture."""
    with opened(path, "photo") as image:
        focal = focal_length(image)
        jpeg, drawn = image.format in {"JPEG", "MPO"}, False
        profile = image.info.get("icc_profile")
        codes: NDArray[Any]
        if jpeg and image.mode in {"L", "RGB"}:
            mode, orientation = image.mode, orientation_left(image)
            codes = _jpeg_codes(path)
        else:
            image.load()
            orientation = orientation_left(image)
            drawn = image.mode in {"1", "P", "PA"}
            codes, mode = _eight_bit(image, bool(profile), path)
        xmp = xmp_of(image)
    return Decoded(
        codes=codes,
        mode=mode,
        orientation=orientation,
        profile=profile,
        focal=focal,
        clips=not drawn,  # the white of a drawing is paper, not a burnt-out lamp
        xmp=xmp,
    )


def read_deep_png(path: Path) -> Decoded:
    """Read a 16-bit PNG."""
    import imagecodecs

    with opened(path, "photo") as image:
        focal, profile = focal_length(image), image.info.get("icc_profile")
        image.load()
        orientation, xmp = orientation_left(image), xmp_of(image)
        codes = imagecodecs.png_decode(path.read_bytes())
    mode = _PNG_MODES[1 if codes.ndim == 2 else codes.shape[2]]
    return Decoded(
        codes=codes, mode=mode, orientation=orientation, profile=profile, focal=focal, xmp=xmp
    )


def read_plain_picture(path: Path, kind: str) -> tuple[NDArray[Any], object]:
    """Return the bare codes of an 8-bit picture, and its orientation."""
    with opened(path, kind) as image:
        image.load()
        # A palette's codes are places in a list of colours; its greys are what is meant.
        codes = np.asarray(image.convert("RGB") if image.mode == "P" else image)
        return codes, orientation_left(image)


def read_plain_deep_png(path: Path, kind: str) -> tuple[NDArray[Any], object]:
    """Return the bare codes of a 16-bit PNG, and its orientation."""
    import imagecodecs

    with opened(path, kind) as image:
        orientation = orientation_left(image)  # Pillow decodes all of a PNG to find it
        if image.mode == "I;16":  # and what is grey, it keeps whole
            return np.asarray(image), orientation
        return imagecodecs.png_decode(path.read_bytes()), orientation


def exif_of(image: Image.Image) -> Image.Exif:
    """Return a picture's Exif data; damaged data counts as none, as the pixels may be sound."""
    try:
        return image.getexif()
    except Exception:  # struct.error, SyntaxError, ValueError ...
        return Image.Exif()


def focal_length(image: Image.Image) -> FocalLength:
    """Return the focal length that an opened, not yet loaded picture tells, in its own pixels."""
    exif = exif_of(image)
    width, height = image.size
    # Pillow gives a TIFF's size as if turned already, before it has turned it.
    if image.format == "TIFF" and exif.get(ORIENTATION) in SIDEWAYS:
        width, height = height, width
    return focal_length_of(exif, width, height)


def focal_length_of(exif: Image.Exif, width_px: int, height_px: int) -> FocalLength:
    """Return the focal length of Exif data; a directory that points nowhere tells nothing."""
    try:
        return told_focal_length(exif.get_ifd(EXIF_DIRECTORY), width_px, height_px)
    except Exception:
        return FocalLength()


def xmp_of(image: Image.Image) -> bytes | str | None:
    """Return a picture's XMP packet; of a PNG it may stand after the pixels, so load those first."""
    for key in ("xmp", "XML:com.adobe.xmp"):  # the second is an older Pillow's name for a PNG's
        packet = image.info.get(key)
        if isinstance(packet, bytes | str):
            return packet
    return None


def orientation_left(image: Image.Image) -> object:
    """Return how a loaded picture still has to be turned."""
    # Pillow turns TIFFs by itself while loading and then drops the tag, so it is asked for afterwards.
    return exif_of(image).get(ORIENTATION, 1)


@contextmanager
def opened(path: Path, kind: str) -> Iterator[Image.Image]:
    """Open a picture with Pillow; everything its decoders throw becomes one line of ours."""
    try:
        with warnings.catch_warnings():
            # Pillow warns at half its limit and complains of odd Exif; neither is the user's to mend.
            warnings.simplefilter("ignore")
            # An open file, not a path: a path would let Pillow map raw TIFFs into memory, and it
            # maps those that have to be turned with rows and columns exchanged.
            with path.open("rb") as file, _open_large(file) as image:
                yield image
    except SceneError:
        raise
    except UnidentifiedImageError:
        raise foreign(path, kind) from None
    except Image.DecompressionBombError as problem:
        told = re.search(r"\d+", str(problem))
        raise too_large(path, kind, int(told[0]) if told else MAX_PIXELS + 1) from None
    except MemoryError:
        raise SceneError(
            f"{path} needs more memory than there is; shrink the {kind} first."
        ) from None
    except (
        Exception
    ) as problem:  # decoders raise OSError, SyntaxError, ValueError, struct.error ...
        raise damaged(path, kind, problem) from None


def _open_large(file: Any) -> Image.Image:
    """Open with our limit of pixels in place of Pillow's, which is a global and asked only here."""
    with _opening:
        theirs = Image.MAX_IMAGE_PIXELS
        Image.MAX_IMAGE_PIXELS = MAX_PIXELS // 2  # it raises at twice this
        try:
            return Image.open(file)
        finally:
            Image.MAX_IMAGE_PIXELS = theirs


def _jpeg_codes(path: Path) -> NDArray[np.uint8]:
    """Return the codes of a JPEG, (rows, columns[, 3]), decoded as Pillow does but once only."""
    import imagecodecs

    with path.open("rb") as file, mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ) as data:
        if not _jpeg_ends(data):
            raise ValueError("the picture's end is missing")
        return np.asarray(imagecodecs.jpeg8_decode(data))


def _jpeg_ends(data: mmap.mmap) -> bool:
    """Tell whether a JPEG's first picture is whole; its decoder fills what is missing with grey."""
    at = 2
    while True:
        found = _JPEG_MARKER.search(data, at)
        if found is None or found.end() > len(data):
            return False
        marker = data[found.end() - 1]
        if marker == _JPEG_END:
            return True
        if found.end() + 2 > len(data):
            return False
        # A segment says its own length, so that a thumbnail inside is passed over.
        at = found.end() + int.from_bytes(data[found.end() : found.end() + 2], "big")


def _eight_bit(image: Image.Image, profiled: bool, path: Path) -> tuple[NDArray[Any], str]:
    """Return 8-bit codes and their mode, one of L, LA, RGB, RGBA, CMYK; 16-bit grey as it is."""
    if image.mode.startswith("I"):
        return np.asarray(image).astype(np.uint16), "L"
    if image.mode == "F":
        return np.asarray(image, np.float32), "L"
    if image.mode == "1":
        image = image.convert("L")
    elif image.mode in {"P", "PA"} or (image.mode != "RGBA" and "transparency" in image.info):
        image = image.convert("RGBA" if image.has_transparency_data else "RGB")
    elif image.mode == "CMYK" and not profiled:
        # Without its profile CMYK has no defined colour; Pillow's plain rule is what viewers show.
        image = image.convert("RGB")
    elif image.mode not in {"L", "LA", "RGB", "RGBA", "CMYK"}:
        if image.mode not in {"RGBX", "YCbCr", "HSV", "La", "RGBa"}:
            raise SceneError(
                f"{path} is a picture in {image.mode} colour, which pinsim does not read; "
                "export it as RGB."
            )
        image = image.convert({"La": "LA", "RGBa": "RGBA"}.get(image.mode, "RGB"))
    mode = image.mode
    return np.asarray(image), mode
