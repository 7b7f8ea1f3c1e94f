"""What is drawn of a state: a picture for the page at once, and files to keep."""

import io
import os
import tempfile
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from PIL import Image

from pinsim.camera import Camera
from pinsim.errors import PinsimError
from pinsim.exposure import auto_time_s
from pinsim.live.refused import RefusedError, plain_line
from pinsim.live.sizes import COARSE_PIXELS, FORMATS, light_for, widths_for
from pinsim.live.state import State
from pinsim.live.work import Check
from pinsim.progress import Progress
from pinsim.render.picture import Picture
from pinsim.render.preview import preview
from pinsim.scene import Scene

_COARSE_QUALITY, _FINE_QUALITY = 90, 93


@dataclass(frozen=True, slots=True)
class Drawn:
    """An encoded picture and what the page is told of it."""

    body: bytes
    media_type: str
    about: dict[str, Any]


def render(state: State, scene: Scene, width_px: int | None, check: Check) -> Picture:
    """Return the state's picture. check : raises SupersededError, between steps, to stop."""

    def report(progress: Progress) -> None:
        check()

    light_for(state, scene)
    return preview(
        scene,
        state.camera,
        time_s=state.time_s,
        ev=state.ev,
        wavelength_nm=state.wavelength_nm,
        look=state.look,
        width_px=width_px,
        averaged=True,
        grain_seed=state.grain_seed,
        report=report,
    )


def draw(state: State, scene: Scene, width_px: int, kind: str, check: Check) -> Drawn:
    """Return an encoded picture for the page. kind : one of FORMATS."""
    start = time.perf_counter()
    picture = render(state, scene, width_px, check)
    rendered = time.perf_counter()
    check()
    codes = picture.codes()
    if codes.shape[2] == 1:
        codes = codes[..., 0]
    body = _encoded(Image.fromarray(codes), kind)
    encoded = time.perf_counter()
    film, ev = state.camera.film, light_for(state, scene)
    about = {
        "width_px": codes.shape[1],
        "height_px": codes.shape[0],
        "width_mm": film.width_mm,
        "height_mm": film.height_mm,
        "pitch_mm": picture.pitch_mm,
        "look": picture.look,
        "tone": state.camera.tone,
        "notes": [plain_line(note) for note in picture.notes],
        "covered_share": picture.covered_share,
        "description": plain_line(picture.description),
        "time_s": None if picture.exposed is None else picture.exposed.time_s,
        "ev": ev,
        "auto_time_s": None if ev is None else auto_time_s(state.camera, ev),
        "widths_px": widths_for(state.camera),
        "render_ms": round(1000.0 * (rendered - start), 1),
        "encode_ms": round(1000.0 * (encoded - rendered), 1),
    }
    return Drawn(body, FORMATS[kind], about)


def _encoded(image: Image.Image, kind: str) -> bytes:
    file = io.BytesIO()
    if kind == "png":
        image.save(file, "PNG", compress_level=1)
    elif kind == "webp":
        image.save(file, "WEBP", quality=_COARSE_QUALITY, method=0)
    else:
        small = image.width * image.height < 2 * COARSE_PIXELS
        quality = _COARSE_QUALITY if small else _FINE_QUALITY
        image.save(file, "JPEG", quality=quality, subsampling=2 if small else 0)
    return file.getvalue()


# Files -----------------------------------------------------------------------------------------


def saved_picture(
    state: State, scene: Scene, width_px: int | None, suffix: str, folder: Path, check: Check
) -> tuple[bytes, list[str]]:
    """Return a picture as the command line would save it, and its notes."""
    picture = render(state, scene, width_px, check)
    return _file_of(picture.save, suffix, folder), list(picture.notes)


def saved_sheet(
    kind: str,
    state: State,
    scene: Scene,
    cameras: Sequence[Camera],
    suffix: str,
    folder: Path,
    check: Check,
) -> tuple[bytes, list[str]]:
    """Return a comparison of two cameras, a contact sheet of some, or the figures, and notes."""
    from pinsim.sheets import compare, contact_sheet
    from pinsim.sheets.numbers_plot import numbers_plot

    if kind == "numbers":
        check()
        sheet = numbers_plot(state.camera, wavelength_nm=state.wavelength_nm)
        return _file_of(sheet.save, suffix, folder), []
    light_for(state, scene)
    notes: list[str] = []

    def report(progress: Progress) -> None:
        check()

    def heed(picture: Picture) -> None:
        check()
        notes.extend(picture.notes)

    common: dict[str, Any] = {
        "time_s": state.time_s,
        "ev": state.ev,
        "wavelength_nm": state.wavelength_nm,
        "look": state.look,
        "report": report,
    }
    save: Callable[[Path], object]
    if kind == "comparison":
        save = compare(scene, cameras, on_picture=heed, **common).save
    else:
        save = contact_sheet([scene], cameras, **common).save
    return _file_of(save, suffix, folder), list(dict.fromkeys(notes))


def _file_of(save: Callable[[Path], object], suffix: str, folder: Path) -> bytes:
    """Return what a saving function writes, through a file in the private folder."""
    with tempfile.TemporaryDirectory(dir=folder) as inner:
        path = Path(inner) / f"made{suffix}"
        try:
            save(path)
        except PinsimError as problem:
            text = str(problem).replace(f"{inner}{os.sep}", "")
            raise RefusedError(text) from None
        return path.read_bytes()


def grey_png(image: np.ndarray[Any, np.dtype[np.float64]], gamma: float) -> bytes:
    """Return a (rows, columns) image, 0 to 1, as a small PNG whose tones are its power `gamma`."""
    codes = np.round(255.0 * np.clip(image, 0.0, 1.0) ** gamma).astype(np.uint8)
    file = io.BytesIO()
    Image.fromarray(codes).save(file, "PNG", compress_level=4)
    return file.getvalue()
