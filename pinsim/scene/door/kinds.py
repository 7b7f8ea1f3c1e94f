"""What kind of file a picture is, told by its first bytes; names of files do not tell."""

import warnings
from pathlib import Path
from typing import Literal

from PIL import Image

Kind = Literal["deep png", "deep tiff", "exr", "heif", "picture", "radiance", "raw"]

_TIFF = {b"II*\0", b"MM\0*", b"II+\0", b"MM\0+"}
_BITS_PER_SAMPLE = 258
_PHOTOMETRIC = 262
_DNG_VERSION = 50706
_SENSOR = {32803, 34892}  # colour filter array, linear raw: DNG 1.4, PhotometricInterpretation
# Raw files that are TIFF inside and can be told from it by their name only.
_RAW_TIFF_SUFFIXES = {
    ".3fr", ".arw", ".cr2", ".dcr", ".dng", ".erf", ".fff", ".iiq", ".k25", ".kdc", ".mef", ".mos",
    ".nef", ".nrw", ".pef", ".sr2", ".srf", ".srw",
}  # fmt: skip
# First bytes of raw files that are no ordinary TIFF.
_RAW_HEADS = (
    b"FUJIFILMCCD-RAW", b"IIRO", b"IIRS", b"MMOR", b"IIU\0", b"FOVb", b"\0MRM",
    b"II\x1a\0\0\0HEAPCCDR",
)  # fmt: skip
_HEADS: dict[Kind, tuple[bytes, ...]] = {
    "exr": (b"\x76\x2f\x31\x01",),
    "radiance": (b"#?RADIANCE", b"#?RGBE"),
    "raw": _RAW_HEADS,
}
_HEIF_BRANDS = {b"heic", b"heix", b"heim", b"heis", b"hevc", b"hevx", b"mif1", b"msf1"}


def kind_of(path: Path) -> Kind:
    """Return which way a file is read. "picture" is whatever is left to Pillow."""
    with path.open("rb") as file:
        head = file.read(64)
    if head[4:8] == b"ftyp":
        return _kind_of_boxes(head)
    if head[:4] in _TIFF:
        return _kind_of_tiff(path)
    for kind, starts in _HEADS.items():
        if head.startswith(starts):
            return kind
    # Pillow hands 16-bit RGB over as 8-bit without a word, so the depth is read from the header.
    if head[:8] == b"\x89PNG\r\n\x1a\n" and head[24:25] == b"\x10":
        return "deep png"
    return "picture"


def _kind_of_boxes(head: bytes) -> Kind:
    size = min(max(int.from_bytes(head[:4], "big"), 16), len(head))
    brands = {head[8:12], *(head[at : at + 4] for at in range(16, size - 3, 4))}
    if b"crx " in brands:
        return "raw"
    # AVIF wears the same box, and Pillow reads it by itself.
    return "heif" if brands & _HEIF_BRANDS and not brands & {b"avif", b"avis"} else "picture"


def _kind_of_tiff(path: Path) -> Kind:
    if path.suffix.lower() in _RAW_TIFF_SUFFIXES:
        return "raw"
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            with path.open("rb") as file:
                tags = Image.Exif()
                tags.load_from_fp(file)
                if _DNG_VERSION in tags or tags.get(_PHOTOMETRIC) in _SENSOR:
                    return "raw"
                bits = tags.get(_BITS_PER_SAMPLE, 8)
                # Pillow gives one number for one channel and several for several.
                return (
                    "deep tiff"
                    if max(bits if isinstance(bits, tuple) else (bits,)) > 8
                    else ("picture")
                )
    except Exception:  # a TIFF that Pillow cannot even describe: deep, tiled or planar
        return "deep tiff"
