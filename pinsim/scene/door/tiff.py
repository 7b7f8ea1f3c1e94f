"""16-bit and float TIFF through tifffile; Pillow would hand 16-bit colour over as 8-bit."""

import warnings
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from pinsim.errors import SceneError
from pinsim.scene.door.finish import Decoded
from pinsim.scene.door.pictures import focal_length, xmp_of
from pinsim.scene.door.refuse import reason, refuse_large
from pinsim.scene.exif_view import FocalLength


def read_deep_tiff(path: Path) -> Decoded:
    """Read a 16-bit TIFF, or a float one, which is linear light."""
    codes, mode, profile, orientation = tiff_codes(path, "photo")
    if np.issubdtype(codes.dtype, np.floating):
        # Float files are linear light by common practice of renderers and raw converters.
        profile = None
        codes = codes.astype(np.float32)
    elif codes.dtype != np.uint16:
        raise SceneError(
            f"{path} holds numbers of type {codes.dtype}; export it with 8 or 16 bits or as float."
        )
    focal, xmp = FocalLength(), None
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            with Image.open(path) as image:
                focal, xmp = focal_length(image), xmp_of(image)
    except Exception:  # the pixels are read; only the angle of view stays unknown
        focal, xmp = FocalLength(), None
    return Decoded(
        codes=codes, mode=mode, orientation=orientation, profile=profile, focal=focal, xmp=xmp
    )


def tiff_codes(path: Path, kind: str) -> tuple[NDArray[Any], str, bytes | None, object]:
    """Return codes, mode, colour profile and orientation of a 16-bit or float TIFF's first page.

    Modes: L, LA, RGB, RGBA (not premultiplied), CMYK; others are refused.
    """
    import logging

    import tifffile

    logging.getLogger("tifffile").setLevel(logging.CRITICAL)
    try:
        with tifffile.TiffFile(path) as tiff:
            page = tiff.pages[0].aspage()
            refuse_large(path, kind, page.imagelength * page.imagewidth)
            codes = page.asarray()
            if page.axes.startswith("S"):  # planes one after the other
                codes = np.moveaxis(codes, 0, -1)
            codes, mode = _tiff_mode(codes, int(page.photometric), list(page.extrasamples), path)
            profile = page.tags.valueof("InterColorProfile")
            orientation = page.tags.valueof("Orientation")
    except SceneError:
        raise
    except Exception as problem:
        raise SceneError(
            f"{path} is damaged or of a kind of TIFF that pinsim does not read "
            f"({reason(problem)}); export the {kind} again, without layers."
        ) from None
    return codes, mode, profile, orientation


_TIFF_COLOURS = {0: "L", 1: "L", 2: "RGB", 5: "CMYK"}  # PhotometricInterpretation, TIFF 6.0


def _tiff_mode(
    codes: NDArray[Any], photometric: int, extra: list[int], path: Path
) -> tuple[NDArray[Any], str]:
    """Return a page's codes without channels that are no colour, white as the highest, and its mode."""
    mode = _TIFF_COLOURS.get(photometric)
    if mode is None or codes.ndim not in (2, 3):
        raise SceneError(
            f"{path} is a TIFF of another kind of colour ({photometric}) or shape {codes.shape}; "
            "export it as RGB, CMYK or grey, one picture without layers."
        )
    if photometric == 0:  # white is 0
        if codes.dtype != np.uint16:
            raise SceneError(f"{path} is a TIFF whose white is 0; export it as ordinary grey.")
        codes = np.iinfo(np.uint16).max - codes
    colours = len(mode)
    if codes.ndim == 2:
        return codes, mode
    # Extra channels: 1 alpha that is multiplied in already, 2 alpha beside, 0 anything.
    if mode == "CMYK" or not extra or extra[0] not in (1, 2):
        codes = codes[..., :colours]
        return (codes[..., 0] if colours == 1 else codes), mode
    codes = codes[..., : colours + 1]
    if extra[0] == 1:
        top = 1.0 if np.issubdtype(codes.dtype, np.floating) else np.iinfo(codes.dtype).max
        alpha = codes[..., -1:].astype(np.float32) / np.float32(top)
        plain = np.asarray(codes[..., :-1] / np.where(alpha > 0.0, alpha, np.float32(1.0)))
        if top != 1.0:
            plain = np.minimum(plain, top).round()
        codes = np.concatenate([plain.astype(codes.dtype), codes[..., -1:]], axis=2)
    return codes, f"{mode}A"
