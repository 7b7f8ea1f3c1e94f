"""The photo door: orientation, colour profile, bit depth and gamma are settled here and nowhere else.

Pillow reads what has 8 bits; 16-bit PNG goes through imagecodecs and deep or float TIFF through
tifffile, because Pillow hands 16-bit colour over as 8-bit without a word.
"""

import os
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image, UnidentifiedImageError

from pinsim.colour import srgb_table
from pinsim.errors import SceneError
from pinsim.scene.exif_view import focal_length_px, horizontal_view_deg
from pinsim.scene.photo import Photo, sound_light

_ORIENTATION = 0x0112
_EXIF_DIRECTORY = 0x8769
_BITS_PER_SAMPLE = 258
MAX_PIXELS = 2 * 89_478_485  # Pillow's own limit for a file that is probably an attack

# What to do to stored rows and columns so that they stand upright (Exif 2.32, tag Orientation).
_UPRIGHT = {
    2: lambda a: a[:, ::-1],
    3: lambda a: a[::-1, ::-1],
    4: lambda a: a[::-1],
    5: lambda a: a.swapaxes(0, 1),
    6: lambda a: a[::-1].swapaxes(0, 1),
    7: lambda a: a[::-1, ::-1].swapaxes(0, 1),
    8: lambda a: a[:, ::-1].swapaxes(0, 1),
}


def read_photo(path: Path) -> Photo:
    """Read a photo upright, ready to give linear light.

    Raises SceneError, in one line, for a missing, empty, truncated, oversized or foreign file.
    """
    _require_file(path, "photo")
    if _is_float_or_deep_tiff(path):
        return _from_tiff(path)
    with _opened(path, "photo") as image:
        focal_px = _focal_length_px(image)
        image.load()
        orientation = _orientation_left(image)
        profile = image.info.get("icc_profile")
        if _is_16bit_png(path):
            import imagecodecs

            codes = imagecodecs.png_decode(path.read_bytes())
            channels = {1: "L", 2: "LA", 3: "RGB", 4: "RGBA"}
            mode = channels[1 if codes.ndim == 2 else codes.shape[2]]
        else:
            codes, mode = _eight_bit(image, bool(profile), path)
    return _photo(codes, mode, orientation, profile, focal_px, path)


def read_plain(path: Path, kind: str) -> NDArray[Any]:
    """Read the bare numbers of a one-channel picture (a map): no gamma, no profile, upright.

    Returns (rows, columns), uint8, uint16 or float32.
    """
    _require_file(path, kind)
    orientation: object = 1
    if _is_float_or_deep_tiff(path):
        codes, _, _, orientation = _read_tiff(path, kind)
    elif _is_16bit_png(path):
        import imagecodecs

        with _opened(path, kind) as image:
            orientation = _orientation_left(image)
            codes = imagecodecs.png_decode(path.read_bytes())
    else:
        with _opened(path, kind) as image:
            image.load()
            orientation = _orientation_left(image)
            # A palette's codes are places in a list of colours; its greys are what is meant.
            codes = np.asarray(image.convert("RGB") if image.mode == "P" else image)
    if codes.ndim == 3 and codes.shape[2] in (2, 4) and _opaque(codes[..., -1]):
        codes = codes[..., :-1]
    if codes.ndim == 3 and np.array_equal(codes[..., :1].repeat(codes.shape[2], 2), codes):
        codes = codes[..., 0]
    if codes.ndim != 2:
        raise SceneError(
            f"{path}: this {kind} has {codes.shape[-1]} different channels; it must have one "
            "(grey), whose values are distances."
        )
    return _upright(codes, orientation)


def _require_file(path: Path, kind: str) -> None:
    try:
        size = path.stat().st_size
    except OSError as problem:
        if isinstance(problem, FileNotFoundError | NotADirectoryError):
            raise SceneError(f"{path}: no such file; give the path of a {kind}.") from None
        raise SceneError(f"{path} cannot be read: {problem.strerror}.") from None
    if path.is_dir():
        raise SceneError(f"{path} is a folder; give one {kind} in it.")
    if size == 0:
        raise SceneError(f"{path} is empty (0 bytes); copy the {kind} again.")
    if not os.access(path, os.R_OK):
        raise SceneError(f"{path} cannot be read; check its permissions.")


def _exif(image: Image.Image) -> Image.Exif:
    """Return a picture's Exif data; damaged data counts as none, as the pixels may be sound."""
    try:
        return image.getexif()
    except Exception:  # struct.error, SyntaxError, ValueError ...
        return Image.Exif()


def _focal_length_px(image: Image.Image) -> float | None:
    """Return the focal length that an opened, not yet loaded picture tells, in its own pixels."""
    exif = _exif(image)
    width, height = image.size
    # Pillow gives a TIFF's size as if turned already, before it has turned it.
    if image.format == "TIFF" and exif.get(_ORIENTATION) in {5, 6, 7, 8}:
        width, height = height, width
    try:
        return focal_length_px(exif.get_ifd(_EXIF_DIRECTORY), width, height)
    except Exception:  # a directory that points nowhere
        return None


def _orientation_left(image: Image.Image) -> object:
    """Return how a loaded picture still has to be turned."""
    # Pillow turns TIFFs by itself while loading and then drops the tag, so it is asked for afterwards.
    return _exif(image).get(_ORIENTATION, 1)


@contextmanager
def _opened(path: Path, kind: str) -> Iterator[Image.Image]:
    """Open a picture with Pillow; everything its decoders throw becomes one line of ours."""
    try:
        with warnings.catch_warnings():
            # Pillow warns at half its limit and complains of odd Exif; neither is the user's to mend.
            warnings.simplefilter("ignore")
            # An open file, not a path: a path would let Pillow map raw TIFFs into memory, and it
            # maps those that have to be turned with rows and columns exchanged.
            with path.open("rb") as file, Image.open(file) as image:
                yield image
    except SceneError:
        raise
    except UnidentifiedImageError:
        raise SceneError(_foreign(path, kind)) from None
    except Image.DecompressionBombError as problem:
        size = next(
            (word for word in str(problem).strip("(").split() if word.strip("(").isdigit()), ""
        )
        count = size.strip("(")
        raise SceneError(
            f"{path}: {int(count) / 1e6:.0f} megapixels is more than the {MAX_PIXELS / 1e6:.0f} that "
            f"pinsim opens; shrink the {kind} first (6000 px wide is ample)."
            if count
            else f"{path} has more than {MAX_PIXELS / 1e6:.0f} megapixels; shrink the {kind} first."
        ) from None
    except MemoryError:
        raise SceneError(
            f"{path} needs more memory than there is; shrink the {kind} first."
        ) from None
    except (
        Exception
    ) as problem:  # decoders raise OSError, SyntaxError, ValueError, struct.error ...
        reason = " ".join(str(problem).split()) or type(problem).__name__
        raise SceneError(
            f"{path} is damaged or cut short ({ascii(reason)[1:-1]}); copy or export the {kind} again."
        ) from None


def _foreign(path: Path, kind: str) -> str:
    with path.open("rb") as file:
        head = file.read(16)
    if head[4:8] == b"ftyp" and head[8:12] in {b"heic", b"heix", b"mif1", b"heim", b"hevc"}:
        return f"{path} is a HEIC picture, which pinsim does not read; export it as JPEG first."
    return (
        f"{path} is not a picture that pinsim reads; export the {kind} as JPEG, PNG or TIFF "
        "(camera raw files need developing first)."
    )


def _is_16bit_png(path: Path) -> bool:
    with path.open("rb") as file:
        head = file.read(26)
    # Pillow hands 16-bit RGB over as 8-bit without a word, so the depth is read from the header.
    return head[:8] == b"\x89PNG\r\n\x1a\n" and len(head) > 24 and head[24] == 16


def _is_float_or_deep_tiff(path: Path) -> bool:
    with path.open("rb") as file:
        head = file.read(4)
    if head not in {b"II*\0", b"MM\0*", b"II+\0", b"MM\0+"}:
        return False
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            with Image.open(path) as image:
                bits = image.tag_v2.get(_BITS_PER_SAMPLE, (8,))  # type: ignore[attr-defined]
                return bool(max(bits) > 8)
    except Exception:  # a TIFF that Pillow cannot even describe: deep, tiled or planar
        return True


def _read_tiff(path: Path, kind: str) -> tuple[NDArray[Any], str, bytes | None, object]:
    """Return codes, mode, colour profile and orientation of a 16-bit or float TIFF's first page.

    Modes: L, LA, RGB, RGBA (not premultiplied), CMYK; others are refused.
    """
    import logging

    import tifffile

    logging.getLogger("tifffile").setLevel(logging.CRITICAL)
    try:
        with tifffile.TiffFile(path) as tiff:
            page = tiff.pages[0].aspage()
            if page.imagelength * page.imagewidth > MAX_PIXELS:
                raise SceneError(
                    f"{path}: {page.imagelength * page.imagewidth / 1e6:.0f} megapixels is more than "
                    f"the {MAX_PIXELS / 1e6:.0f} that pinsim opens; shrink the {kind} first."
                )
            codes = page.asarray()
            if page.axes.startswith("S"):  # planes one after the other
                codes = np.moveaxis(codes, 0, -1)
            codes, mode = _tiff_mode(codes, int(page.photometric), list(page.extrasamples), path)
            profile = page.tags.valueof("InterColorProfile")
            orientation = page.tags.valueof("Orientation")
    except SceneError:
        raise
    except Exception as problem:
        reason = " ".join(str(problem).split()) or type(problem).__name__
        raise SceneError(
            f"{path} is damaged or of a kind of TIFF that pinsim does not read "
            f"({ascii(reason)[1:-1]}); export the {kind} again, without layers."
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


def _from_tiff(path: Path) -> Photo:
    codes, mode, profile, orientation = _read_tiff(path, "photo")
    if np.issubdtype(codes.dtype, np.floating):
        # Float files are linear light by common practice of renderers and raw converters.
        profile = None
        codes = codes.astype(np.float32)
    elif codes.dtype != np.uint16:
        raise SceneError(
            f"{path} holds numbers of type {codes.dtype}; export it with 8 or 16 bits or as float."
        )
    focal_px = None
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            with Image.open(path) as image:
                focal_px = _focal_length_px(image)
    except Exception:  # the pixels are read; only the angle of view stays unknown
        focal_px = None
    return _photo(codes, mode, orientation, profile, focal_px, path)


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


def _photo(
    codes: NDArray[Any],
    mode: str,
    orientation: object,
    profile: bytes | None,
    focal_px: float | None,
    path: Path,
) -> Photo:
    notes: list[str] = []
    codes = _upright(codes, orientation)
    alpha = None
    if mode in {"LA", "RGBA"}:
        alpha = codes[..., -1]
        codes = codes[..., :-1]
    elif codes.ndim == 2:
        codes = codes[..., None]
    decode: NDArray[np.float32] | None
    if np.issubdtype(codes.dtype, np.floating):
        decode = None
    else:
        decode = srgb_table(8 if codes.dtype == np.uint8 else 16)
        if profile and profile[16:20] == b"RGB " and mode in {"L", "LA"}:
            codes, mode = np.repeat(codes, 3, axis=2), "RGB"
        if profile and not _is_srgb(profile, mode):
            linear_codes = _through_profile(codes, profile, mode)
            if linear_codes is None:
                notes.append("its colour profile cannot be used; read as sRGB")
            else:
                codes = linear_codes
                decode = np.linspace(0.0, 1.0, 65536, dtype=np.float32)
    if codes.shape[2] == 4:  # CMYK whose profile failed: the plain rule
        top = np.float32(np.iinfo(codes.dtype).max)
        ink = codes.astype(np.float32) / top
        paper = (1.0 - ink[..., :3]) * (1.0 - ink[..., 3:])
        codes = np.round(top * paper).astype(codes.dtype)
    if codes.shape[2] == 1:
        codes = np.repeat(codes, 3, axis=2)
    if alpha is not None and not _opaque(alpha):
        light = codes.astype(np.float32) if decode is None else np.take(decode, codes)
        opaque = 1.0 if decode is None else float(np.iinfo(alpha.dtype).max)
        clear = (alpha.astype(np.float32) / np.float32(opaque))[..., None]
        codes, decode = light * clear + (1.0 - clear), None
        notes.append("transparent parts are taken as white paper")
    if decode is None:
        codes = sound_light(codes.astype(np.float32, copy=False), str(path))
    codes = np.ascontiguousarray(codes)
    codes.flags.writeable = False
    view = horizontal_view_deg(focal_px, codes.shape[1]) if focal_px else None
    return Photo(codes=codes, decode=decode, view_deg=view, notes=tuple(notes))


def _opaque(alpha: NDArray[Any]) -> bool:
    top = 1.0 if np.issubdtype(alpha.dtype, np.floating) else np.iinfo(alpha.dtype).max
    return bool((alpha >= top).all())


def _upright(codes: NDArray[Any], orientation: object) -> NDArray[Any]:
    # 0, 9 and lists occur in the wild and mean nothing.
    turn = _UPRIGHT.get(orientation) if isinstance(orientation, int) else None
    return codes if turn is None else np.asarray(turn(codes))


# Codes to try a profile on: greys, and every mixture of five steps of red, green and blue.
_TRIAL_STEPS = (0, 64, 128, 192, 255)


def _is_srgb(profile: bytes, mode: str) -> bool:
    """Tell whether a profile does what sRGB does; names do not tell, as linear ones bear it too."""
    if mode not in {"RGB", "RGBA"}:
        return False
    mixed = np.stack(np.meshgrid(*[np.array(_TRIAL_STEPS, np.uint8)] * 3), axis=-1).reshape(-1, 3)
    trial = np.concatenate([mixed, np.arange(256, dtype=np.uint8)[:, None].repeat(3, axis=1)])
    light = _through_profile(trial[None], profile, "RGB")
    if light is None:
        return False
    # Published sRGB profiles differ in the rounding of their primaries and in their darkest codes.
    return bool(np.abs(light[0] / 65535.0 - srgb_table(8)[trial]).max() < 4e-3)


def _through_profile(codes: NDArray[Any], profile: bytes, mode: str) -> NDArray[np.uint16] | None:
    """Return linear sRGB light in 16-bit codes, or None when the profile does not fit the picture."""
    import imagecodecs

    linear = imagecodecs.cms_profile(
        "rgb",
        whitepoint=[0.3127, 0.3290, 1.0],
        primaries=[0.64, 0.33, 1.0, 0.30, 0.60, 1.0, 0.15, 0.06, 1.0],
        gamma=1.0,
    )
    space = {"L": "gray", "LA": "gray", "RGB": "rgb", "RGBA": "rgb", "CMYK": "cmyk"}[mode]
    try:
        light = imagecodecs.cms_transform(
            np.ascontiguousarray(codes if space != "gray" else codes[..., 0]),
            profile,
            linear,
            colorspace=space,
            outcolorspace="rgb",
            outdtype="uint16",
            intent=imagecodecs.CMS.INTENT.RELATIVE_COLORIMETRIC,
        )
    except Exception:  # a profile for another colour model, or a broken one
        return None
    return np.asarray(light, np.uint16)
