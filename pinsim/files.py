"""Writing results: a file appears whole or not at all, and never in place of another unless told."""

import os
import tempfile
import zlib
from collections.abc import Callable, Iterable, Sequence
from functools import lru_cache
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from pinsim.colour import srgb_to_linear
from pinsim.errors import OutputError

PICTURE_SUFFIXES = (".png", ".jpg", ".jpeg", ".tif", ".tiff")
EXPOSURE_SUFFIXES = (*PICTURE_SUFFIXES, ".npz")
BITS = ("8", "16", "float")
_INCH_MM = 25.4


def check_target(
    path: Path, *, overwrite: bool, suffixes: Sequence[str], inputs: Sequence[Path] = ()
) -> None:
    """Refuse, before any work is done, a target that could not be written at the end."""
    if path.suffix.lower() not in suffixes:
        raise OutputError(
            f"{path}: a file's ending tells its kind, and this has {path.suffix or 'none'}; "
            f"use one of {', '.join(suffixes)}."
        )
    try:
        path.stat()
    except (FileNotFoundError, NotADirectoryError):
        pass
    except OSError as problem:  # a name too long, a folder that must not be entered
        raise OutputError(f"{path} cannot be written: {problem.strerror}.") from None
    if path.is_dir():
        raise OutputError(f"{path} is a folder; give a file name in it.")
    if not path.parent.is_dir():
        raise OutputError(f"{path}: the folder {path.parent} does not exist; make it first.")
    if not os.access(path.parent, os.W_OK):
        raise OutputError(f"{path}: the folder {path.parent} cannot be written to.")
    keep_inputs(path, inputs)
    if path.exists() and not overwrite:
        raise OutputError(
            f"{path} exists already; give another name, or allow it with --overwrite."
        )


def keep_inputs(path: Path, inputs: Sequence[Path]) -> None:
    """Refuse a target that is one of the files that the picture is made from."""
    for source in inputs:
        try:
            same = os.path.samefile(path, source)
        except OSError:  # one of them is not there
            continue
        if same:
            raise OutputError(f"{path} is what the picture is made from; give another name.")


def check_bits(suffix: str, bits: str | None) -> None:
    """Refuse a depth that a kind of file cannot hold. bits : one of BITS, or None for the usual one."""
    if bits is None:
        return
    if bits not in BITS:
        raise OutputError(f"bits is {bits!r}; it must be one of: {', '.join(BITS)}.")
    if suffix in {".tif", ".tiff"}:
        return
    if suffix == ".npz":
        if bits != "float":
            raise OutputError("a .npz file holds the exposure as float; leave the bits out.")
    elif bits == "float":
        raise OutputError(f"a {suffix} file holds no float; use .tif or .npz.")
    elif bits == "16":
        raise OutputError(f"a {suffix} file is written with 8 bits; for 16 use .tif.")


def write_whole(path: Path, write: Callable[[BinaryIO], None], *, overwrite: bool) -> None:
    """Write a file beside its target and move it there at the end.

    Raises OutputError when the target exists and must not be replaced, or the disk refuses.
    """
    try:
        handle, name = tempfile.mkstemp(prefix=".pinsim-", suffix=".part", dir=path.parent)
    except OSError as problem:
        raise OutputError(f"{path} cannot be written: {problem.strerror}.") from None
    part = Path(name)
    try:
        os.close(handle)
        # Opened by its name, as TIFF writers ask an open file for its name.
        with part.open("wb") as file:
            write(file)
        umask = os.umask(0)
        os.umask(umask)
        part.chmod(0o666 & ~umask)  # mkstemp makes files private; a picture is an ordinary file
        if overwrite:
            part.replace(path)
        else:
            _place_new(part, path)
    except FileExistsError:
        raise OutputError(
            f"{path} exists already; give another name, or allow it with --overwrite."
        ) from None
    except OSError as problem:
        raise OutputError(f"{path} cannot be written: {problem.strerror or problem}.") from None
    finally:
        part.unlink(missing_ok=True)


def _place_new(part: Path, path: Path) -> None:
    """Give the finished file its name only if nobody has taken it meanwhile."""
    try:
        os.link(part, path)
    except FileExistsError:
        raise
    except OSError:  # a file system without links: FAT sticks, some network drives
        if path.exists():
            raise FileExistsError(path) from None
        part.rename(path)


@lru_cache(maxsize=2)
def srgb_profile(*, grey: bool = False) -> bytes:
    """Return the sRGB colour profile that every picture is tagged with; grey : for one channel."""
    if grey:
        import imagecodecs

        # Untagged grey is shown by other curves; this has the curve and the white of sRGB.
        curve = np.round(srgb_to_linear(np.linspace(0.0, 1.0, 1024)) * 65535.0).astype(np.uint16)
        made = imagecodecs.cms_profile(
            "gray", whitepoint=[0.3127, 0.3290, 1.0], transferfunction=curve
        )
    else:
        from PIL import ImageCms

        made = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()
    profile = bytearray(made)
    # The header carries the moment of making; fixed, so that equal pictures are equal files.
    profile[24:36] = bytes.fromhex("07ea00010001000000000000")
    return bytes(profile)


def encode_picture(
    codes: NDArray[Any], suffix: str, *, dpi: float, description: str
) -> Callable[[BinaryIO], None]:
    """Return what writes sRGB codes, (rows, columns, 1 or 3) uint8 or uint16, as a file of a kind.

    dpi : so that it prints at its true size. description : what the file says of itself.
    """
    if codes.shape[2] == 1:
        codes = codes[..., 0]
    codes = np.ascontiguousarray(codes)
    if suffix in {".tif", ".tiff"}:
        return lambda file: write_tiff(file, codes, dpi=dpi, description=description)
    if codes.dtype != np.uint8:
        raise OutputError(f"a {suffix} file is written with 8 bits; for 16 use .tif.")
    from PIL import Image, PngImagePlugin

    image = Image.fromarray(codes)
    profile = srgb_profile(grey=image.mode == "L")
    if suffix == ".png":
        text = PngImagePlugin.PngInfo()
        text.add_text("Description", description)
        return lambda file: image.save(
            file,
            "PNG",
            dpi=(dpi, dpi),
            icc_profile=profile,
            pnginfo=text,
            # After PNG's own filters a picture is mostly short runs: as small as the slowest level.
            compress_level=1,
            compress_type=zlib.Z_RLE,
        )
    return lambda file: image.save(
        file,
        "JPEG",
        quality=95,
        subsampling=0,  # 4:4:4: colour edges stay where the film has them
        dpi=(dpi, dpi),
        icc_profile=profile,
        comment=description,
    )


def quick_png(codes: NDArray[np.uint8]) -> bytes:
    """Return codes, (rows, columns, 1 or 3), as a PNG that is kept for an hour, not for good.

    One filter in place of the best for each row, and short runs only, take a third of the usual time.
    """
    import imagecodecs

    kinds = imagecodecs.PNG
    plain = np.ascontiguousarray(codes[..., 0] if codes.shape[2] == 1 else codes)
    return bytes(
        imagecodecs.png_encode(plain, level=1, strategy=kinds.STRATEGY.RLE, filter=kinds.FILTER.UP)
    )


def write_tiff(file: BinaryIO, data: NDArray[Any], *, dpi: float, description: str) -> None:
    """Write codes (tagged sRGB) or float exposure (linear, untagged) as a TIFF."""
    import imageio.v3 as iio

    coloured = data.ndim == 3
    extra: dict[str, Any] = {}
    if data.dtype != np.float32:
        extra["iccprofile"] = srgb_profile(grey=not coloured)
    # A tag of a TIFF holds ASCII only; names of places may hold anything.
    description = description.encode("ascii", "backslashreplace").decode()
    iio.imwrite(
        file,
        data,
        plugin="tifffile",
        extension=".tif",
        photometric="rgb" if coloured else "minisblack",
        compression="zlib",
        resolution=(dpi, dpi),
        resolutionunit="INCH",
        description=description,
        metadata=None,
        software="pinsim",
        **extra,
    )


def write_tiff_pages(
    file: BinaryIO, pages: Iterable[NDArray[np.uint8]], *, dpi: float, description: str
) -> None:
    """Write sRGB pages, (rows, columns, 3) uint8, one after another into one TIFF."""
    import imageio.v3 as iio

    description = description.encode("ascii", "backslashreplace").decode()
    made: Any
    with iio.imopen(file, "w", plugin="tifffile", extension=".tif") as made:
        for codes in pages:
            made.write(
                codes,
                photometric="rgb",
                compression="zlib",
                resolution=(dpi, dpi),
                resolutionunit="INCH",
                description=description,
                metadata=None,
                software="pinsim",
                iccprofile=srgb_profile(),
            )


def dpi_for(pitch_mm: float) -> float:
    """Return dots per inch for a pixel pitch."""
    return _INCH_MM / pitch_mm
