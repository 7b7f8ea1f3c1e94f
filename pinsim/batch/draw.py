"""One picture with its figures, as a worker makes it."""

import io
import math
from dataclasses import dataclass, field, replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim import __version__
from pinsim.batch.frames import Frame
from pinsim.batch.spool import Source
from pinsim.camera import Camera
from pinsim.errors import DesignError, PinsimError
from pinsim.exposure import metered_time_s
from pinsim.files import quick_png
from pinsim.numbers import corner_falloff_stops, detail_on_axis, places
from pinsim.render import kept
from pinsim.render.plan import make_plan
from pinsim.render.preview import preview
from pinsim.scene import DistanceMap, Scene

Codes = NDArray[np.uint8]
_box: list[Any] = []  # what the last frame was drawn through

USUAL_EV = 15.0  # sun; what times are told for where no light is known
ENLARGED = 4.0
STRIP_SHARE = 0.26  # height of the enlarged middle over its width
_LEAST_FILM_MM = 2.0  # as Film allows


@dataclass(frozen=True, slots=True)
class Drawn:
    """A picture that is done. png, detail_png : files; about : its figures, plain values for JSON."""

    png: bytes
    detail_png: bytes | None
    about: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Failed:
    """A picture that could not be drawn, with the reason in one line.

    refused : the design or scene was refused, as against something that broke.
    """

    reason: str
    refused: bool = False


Outcome = Drawn | Failed


def draw(frame: Frame, source: Source) -> Outcome:
    """Draw one picture; whatever goes wrong is an outcome, as the others go on."""
    try:
        return _drawn(frame, source)
    except PinsimError as error:
        return Failed(" ".join(str(error).split()), refused=True)
    except MemoryError:
        return Failed("there is not enough memory for it")
    except Exception as error:
        text = " ".join(str(error).split()) or "no reason given"
        return Failed(f"{type(error).__name__}: {text}")


def _drawn(frame: Frame, source: Source) -> Drawn:
    if frame.camera is None:
        raise DesignError(frame.problem)
    scene = source.read(frame.distance_mm)
    _leave_others(frame, source.key if isinstance(source, Source) else "", scene)
    picture = preview(
        scene,
        frame.camera,
        time_s=frame.time_s,
        ev=frame.ev,
        wavelength_nm=frame.wavelength_nm,
        look=frame.look,
        width_px=frame.width_px,
        averaged=True,
    )
    codes = np.asarray(picture.codes(), np.uint8)
    detail = _detail(frame, scene) if frame.detail else None
    about = {
        "pinsim": __version__,
        "rows": codes.shape[0],
        "columns": codes.shape[1],
        "detail_rows": None if detail is None else detail.shape[0],
        "covered_share": picture.covered_share,
        "notes": list(picture.notes),
        "time_s": None if picture.exposed is None else picture.exposed.time_s,
        **_figures(frame, scene),
    }
    return Drawn(quick_png(codes), None if detail is None else quick_png(detail), about)


def _leave_others(frame: Frame, key: str, scene: Scene) -> None:
    """Let go of what was kept of another box or family of holes: memory is for the workers.

    Frames come box by box and hole by hole, so nothing of it would be used again. The plan is made
    once: preview finds it remembered.
    """
    camera = frame.camera
    assert camera is not None
    plan = make_plan(scene, camera, wavelength_nm=frame.wavelength_nm, averaged_px=frame.width_px)
    box = (key, plan.family or camera, frame.distance_mm, frame.wavelength_nm)
    if _box[:] != [box]:
        kept.forget()
        _box[:] = [box]


def _detail(frame: Frame, scene: Scene) -> Codes:
    """Return the frame's middle, ENLARGED times.

    It is drawn as a small film of its own in the same box, which costs a fraction of the whole; where
    the film or the hole does not allow that, it is cut out of the whole.
    """
    camera = frame.camera
    assert camera is not None
    film, columns = camera.film, frame.width_px
    width_mm = film.width_mm / ENLARGED
    height_mm = min(film.height_mm, STRIP_SHARE * width_mm)
    least_mm = max(_LEAST_FILM_MM, 2.0 * camera.hole.greatest_mm)
    apart = min(width_mm, height_mm) >= least_mm
    drawn = camera
    if apart:
        drawn = replace(
            camera, film=replace(film, width_mm=width_mm, height_mm=height_mm, frame="")
        )
    picture = preview(
        scene,
        drawn,
        time_s=frame.time_s,
        ev=frame.ev,
        wavelength_nm=frame.wavelength_nm,
        look=frame.look,
        width_px=columns if apart else round(ENLARGED * columns),
        averaged=True,
    )
    codes = np.asarray(picture.codes(), np.uint8)
    if apart:
        return codes
    rows = max(1, min(codes.shape[0], round(columns * height_mm / width_mm)))
    top, left = (codes.shape[0] - rows) // 2, (codes.shape[1] - columns) // 2
    return np.ascontiguousarray(codes[top : top + rows, left : left + columns])


def _figures(frame: Frame, scene: Scene) -> dict[str, Any]:
    """Return what a builder compares; lengths mm, detail cycles/mm on the film at 20 % contrast."""
    camera = frame.camera
    assert camera is not None
    distance = scene.distance
    far_mm = distance.farthest_mm if isinstance(distance, DistanceMap) else distance
    ev = next((one for one in (frame.ev, scene.ev) if one is not None), USUAL_EV)
    metered = metered_time_s(camera, ev)
    return {
        **_of_design(replace(camera, name="", tone="positive"), far_mm, frame.wavelength_nm),
        "hole": camera.hole.label,
        "film": camera.film.label,
        "material": camera.material_name,
        "tone": camera.tone,
        "ev": ev,
        "needed_time_s": camera.material.reciprocity.corrected_s(metered),
    }


@lru_cache(maxsize=64)
def _of_design(camera: Camera, far_mm: float, wavelength_nm: float | None) -> dict[str, Any]:
    detail = detail_on_axis(camera, distance_mm=far_mm, wavelength_nm=wavelength_nm)
    at = {
        place.name: min(
            place.right_cycles_mm,
            place.up_cycles_mm,
            place.tangential_cycles_mm,
            place.sagittal_cycles_mm,
        )
        for place in places(camera, distance_mm=far_mm, wavelength_nm=wavelength_nm)
    }
    return {
        "f_number": camera.f_number,
        "horizontal_view_deg": camera.horizontal_view_deg,
        "vertical_view_deg": camera.vertical_view_deg,
        "diagonal_view_deg": camera.diagonal_view_deg,
        "figures_for_distance_mm": far_mm,
        "detail_cycles_mm": detail,
        "corner_cycles_mm": at["corner"],
        "frame_cycles_mm": min(detail, *at.values()),
        "corner_falloff_stops": _finite(corner_falloff_stops(camera)),
    }


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def codes_of(png: bytes) -> Codes:
    """Return the codes of a picture of one of these files, (rows, columns, 1 or 3) uint8."""
    from PIL import Image

    with Image.open(io.BytesIO(png)) as image:
        codes = np.asarray(image)
    return codes if codes.ndim == 3 else codes[..., None]
