"""What goes into one picture of many, all of it by value, and the checksum of that."""

import hashlib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, fields, is_dataclass
from enum import Enum
from pathlib import Path
from typing import Any, Literal

import numpy as np

from pinsim import __version__
from pinsim.camera import Camera
from pinsim.render.develop import Look
from pinsim.scene import Scene

LEAST_PX = 16  # as preview allows


@dataclass(frozen=True, slots=True, kw_only=True)
class Frame:
    """One picture to be drawn.

    number : from 1, in the order in which it was asked for. scene : place in the list of scenes.
    camera : None where it cannot be built; problem then says why. hole_mm, focal_mm, camera_name,
    scene_name : what was asked for, for captions. distance_mm : in place of the scene's own distances.
    width_px : columns of the picture. detail : whether its middle is drawn enlarged, too.
    """

    number: int
    scene: int
    scene_name: str
    camera: Camera | None
    camera_name: str
    hole_mm: float
    focal_mm: float
    distance_mm: float | None = None
    time_s: float | Literal["auto"] | None = None
    ev: float | None = None
    wavelength_nm: float | None = None
    look: Look = "upright"
    width_px: int = 460
    detail: bool = True
    name: str = ""
    problem: str = ""


def frame_width_px(longer_px: int, width_mm: float, height_mm: float) -> int:
    """Return the columns of a picture whose longer side has so many pixels."""
    return max(LEAST_PX, round(longer_px * min(1.0, width_mm / height_mm)))


def checksum(frame: Frame, scene_sum: str) -> str:
    """Return the sha256 of all that a picture depends on, as 64 hexadecimal digits.

    scene_sum : of its scene. Where it stands on the sheet, and what it is called, change nothing.
    """
    camera = frame.camera
    assert camera is not None
    went_in = {
        "pinsim": __version__,
        "scene": scene_sum,
        "focal_length_mm": camera.focal_length_mm,
        "hole": camera.hole,
        "film": camera.film,
        "material": camera.material,
        "tone": camera.tone,
        "distance_mm": frame.distance_mm,
        "time_s": frame.time_s,
        "ev": frame.ev,
        "wavelength_nm": frame.wavelength_nm,
        "look": frame.look,
        "width_px": frame.width_px,
        "detail": frame.detail,
    }
    return checksum_of(went_in)


def scene_checksum(scene: Scene) -> str:
    """Return the sha256 of a scene: its photo's and its map's values, and how they are meant.

    By values, not by files or dates: a photo that was changed and given its old date is another one.
    """
    left_out = {"name", "files"}
    return checksum_of(
        {one.name: getattr(scene, one.name) for one in fields(scene) if one.name not in left_out}
    )


def file_checksums(scene: Scene) -> dict[str, str]:
    """Return the sha256 of each file that a scene was read from, by its path."""
    sums = {}
    for file in dict.fromkeys(scene.files):
        if Path(file).is_file():
            with Path(file).open("rb") as opened:
                sums[str(file)] = hashlib.file_digest(opened, "sha256").hexdigest()
    return sums


def checksum_of(value: object) -> str:
    """Return the sha256 of plain values, arrays, and records of them."""
    total = hashlib.sha256()
    for part in _parts(value):
        # Lengths go in before contents, so that no two values are the same row of bytes.
        total.update(str(memoryview(part).nbytes).encode() + b":")
        total.update(part)
    return total.hexdigest()


def _parts(value: object) -> Iterator[Any]:
    """Yield a value as blocks of bytes that tell its kind and its contents."""
    if isinstance(value, np.ndarray):
        yield f"array {value.dtype.str} {value.shape}".encode()
        yield np.ascontiguousarray(value).reshape(-1).view(np.uint8).data
    elif is_dataclass(value) and not isinstance(value, type):
        yield type(value).__name__.encode()
        for one in fields(value):
            if not one.name.startswith("_"):  # what a record remembers is no part of it
                yield one.name.encode()
                yield from _parts(getattr(value, one.name))
    elif isinstance(value, Mapping):
        yield b"mapping"
        for key in sorted(value, key=str):
            yield str(key).encode()
            yield from _parts(value[key])
    elif isinstance(value, list | tuple):
        yield f"list {len(value)}".encode()
        for one in value:
            yield from _parts(one)
    elif value is None or isinstance(value, str | bytes | bool | int | float | Enum | Path):
        yield f"{type(value).__name__} {value!r}".encode()
    elif isinstance(value, np.generic):
        yield f"number {value!r}".encode()
    else:
        raise TypeError(f"no checksum is known for {type(value).__name__}")
