"""Linear light in files made for it: OpenEXR (extra `hdr`) and Radiance pictures."""

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError
from pinsim.scene.door.finish import Decoded
from pinsim.scene.door.primaries import D65, SRGB, to_srgb_matrix
from pinsim.scene.door.refuse import damaged, missing_extra, quiet, refuse_large

Float = NDArray[np.float32]

_RGB = ("R", "G", "B")


def read_exr(path: Path) -> Decoded:
    """Read the display window of an OpenEXR file, with its own primaries if it names them."""
    header, channels = exr_channels(path, "photo")
    notes: list[str] = []
    if all(name in channels for name in _RGB):
        names: tuple[str, ...] = _RGB
    elif "Y" in channels and not {"RY", "BY"} & set(channels):
        names = ("Y",)
    else:
        raise SceneError(
            f"{path} has no channels R, G, B or Y but {', '.join(sorted(channels)[:6])}; "
            "export the photo as plain RGB."
        )
    if len({channels[name].shape for name in names}) > 1:
        raise SceneError(f"{path} holds colour at a coarser grid; export it as plain RGB.")
    if any(not np.issubdtype(channels[name].dtype, np.floating) for name in names):
        raise SceneError(f"{path} holds whole numbers, not light; export it as half or float.")
    light = _framed(np.stack([channels[name] for name in names], axis=2), header)
    # Transparent parts of a rendering let no light through to the camera: what is there, is.
    if "A" in channels and not bool((channels["A"] >= 1.0).all()):
        notes.append("transparent parts hold no light of their own and stay as dark as they are")
    aspect = float(header.get("pixelAspectRatio", 1.0))
    if abs(aspect - 1.0) > 1e-3:
        raise SceneError(f"{path} has pixels {aspect:g} times as wide as high; export square ones.")
    to_srgb = None
    told = header.get("chromaticities")
    if told is not None and len(names) == 3:
        to_srgb, note = _by_chromaticities(told)
        notes.append(note)
    return Decoded(
        codes=light if light.shape[2] == 3 else light[..., 0],
        mode="RGB" if light.shape[2] == 3 else "L",
        to_srgb=to_srgb,
        clips=False,
        notes=tuple(notes),
    )


def read_radiance(path: Path) -> Decoded:
    """Read a Radiance picture (RGBE); its numbers are taken as they stand."""
    import imagecodecs

    data = path.read_bytes()
    head = data[:4096]
    if b"32-bit_rle_xyze" in head:
        raise SceneError(f"{path} is a Radiance picture in XYZ; convert it to RGB (RGBE) first.")
    size = _radiance_size(head)
    if size is not None:
        refuse_large(path, "photo", size[0] * size[1])
    try:
        light = imagecodecs.rgbe_decode(data)
    except Exception as problem:  # the decoder's own error
        raise damaged(path, "photo", problem) from None
    return Decoded(codes=np.asarray(light, np.float32), mode="RGB", clips=False)


def exr_channels(
    path: Path, kind: str, wanted: Sequence[str] = _RGB
) -> tuple[Mapping[str, Any], dict[str, NDArray[Any]]]:
    """Return the header and the channels (rows, columns) of an OpenEXR file's picture.

    Of several parts the first that has all the wanted channels counts, else the first.
    """
    try:
        import OpenEXR
    except ImportError:
        raise missing_extra(path, "an OpenEXR picture", "hdr", "export it as float TIFF") from None
    try:
        with quiet():
            with OpenEXR.File(str(path), separate_channels=True, header_only=True) as file:
                parts = range(len(file.parts))
                part = next((i for i in parts if _has(file, i, wanted)), 0)
                header = dict(file.header(part))
            rows, columns = _window(header["displayWindow"])
            refuse_large(path, kind, rows * columns)
            more_rows, more_columns = _window(header["dataWindow"])
            refuse_large(path, kind, more_rows * more_columns)
            with OpenEXR.File(str(path), separate_channels=True) as file:
                if part >= len(file.parts):
                    raise ValueError("pixels are missing")
                found = {name: one.pixels for name, one in file.channels(part).items()}
    except SceneError:
        raise
    except MemoryError:
        raise SceneError(
            f"{path} needs more memory than there is; shrink the {kind} first."
        ) from None
    except Exception as problem:  # RuntimeError and ValueError of the bindings
        raise damaged(path, kind, problem) from None
    if any(
        pixels is None or pixels.ndim != 2 or pixels.dtype == object for pixels in found.values()
    ):
        raise SceneError(f"{path} holds several depths for each pixel; export the {kind} flat.")
    return header, found


def _has(file: Any, part: int, wanted: Sequence[str]) -> bool:
    names = {one.name for one in file.header(part)["channels"]}
    return names.issuperset(wanted)


def _window(box: Any) -> tuple[int, int]:
    (left, top), (right, bottom) = box
    return int(bottom) - int(top) + 1, int(right) - int(left) + 1


def _framed(light: NDArray[Any], header: Mapping[str, Any]) -> NDArray[Any]:
    """Return what stands in the display window; where there are no pixels there is no light."""
    rows, columns = _window(header["displayWindow"])
    (left, top), (data_left, data_top) = header["displayWindow"][0], header["dataWindow"][0]
    down, across = int(data_top) - int(top), int(data_left) - int(left)
    if (down, across) == (0, 0) and light.shape[:2] == (rows, columns):
        return light
    framed = np.zeros((rows, columns, light.shape[2]), light.dtype)
    first, last = max(down, 0), min(down + light.shape[0], rows)
    start, stop = max(across, 0), min(across + light.shape[1], columns)
    if last > first and stop > start:
        framed[first:last, start:stop] = light[
            first - down : last - down, start - across : stop - across
        ]
    return framed


def _by_chromaticities(told: Any) -> tuple[Float | None, str]:
    points = [float(one) for one in told]
    primaries = [(points[i], points[i + 1]) for i in (0, 2, 4)]
    white = (points[6], points[7])
    if np.allclose(points, [*(v for one in SRGB for v in one), *D65], atol=1e-3):
        return None, ""
    try:
        matrix = to_srgb_matrix(primaries, white)
    except (np.linalg.LinAlgError, ZeroDivisionError):
        matrix = np.full((3, 3), np.nan, np.float32)
    if not np.isfinite(matrix).all():
        return None, "the chromaticities it names are no colours; read as sRGB's"
    return matrix, ""


def _radiance_size(head: bytes) -> tuple[int, int] | None:
    for line in head.splitlines():
        words = line.split()
        if len(words) == 4 and words[0] == b"-Y" and words[2] == b"+X":
            try:
                return int(words[1]), int(words[3])
            except ValueError:
                return None
    return None
