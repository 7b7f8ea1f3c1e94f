"""What was typed on the line to Cameras, and to names of files."""

import itertools
import re
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from pinsim.camera import Camera, Film, Hole, named_film
from pinsim.errors import DesignError
from pinsim.exposure import LightLevel
from pinsim.material import Catalogue
from pinsim.samples import PREFIX, names
from pinsim.units import format_length, length_mm

_SIZE = re.compile(r"(?P<width>[\d.]+\s*[a-z]+)\s*x\s*(?P<height>[\d.]+\s*[a-z]+)")
DEFAULT_FILM = "6x6"


def make_camera(
    path: str | None, *, hole_mm: float | None, focal_mm: float | None, options: Mapping[str, Any]
) -> Camera:
    """Return a design from a file, from the line, or from a file changed by the line."""
    camera = Camera.load(path) if path else _typed(hole_mm, focal_mm)
    if focal_mm is not None:
        camera = camera.with_focal_length(focal_mm)
    if hole_mm is not None:
        camera = camera.with_hole(hole_mm)
    return change_camera(camera, options)


def change_camera(camera: Camera, options: Mapping[str, Any]) -> Camera:
    """Return a design with what the line says of its plate, film, material and tone."""
    if options.get("plate_mm") is not None:
        hole = replace(camera.hole, plate_thickness_mm=options["plate_mm"])
        camera = replace(camera, hole=hole)
    if options.get("film") is not None or options.get("portrait"):
        camera = replace(
            camera, film=_film(options.get("film"), options.get("portrait"), camera.film)
        )
    film = camera.film
    if options.get("shift_mm") is not None:
        film = replace(film, shift_right_mm=options["shift_mm"])
    if options.get("rise_mm") is not None:
        film = replace(film, shift_up_mm=options["rise_mm"])
    camera = replace(camera, film=film)
    if options.get("materials_file") is not None:
        # Together: the name may be known to this file only.
        camera = replace(
            camera,
            materials=Catalogue.load(options["materials_file"]),
            material_name=options.get("material") or camera.material_name,
        )
    elif options.get("material") is not None:
        camera = replace(camera, material_name=options["material"])
    if options.get("tone"):
        camera = replace(camera, tone=options["tone"])
    return camera


def make_cameras(
    paths: Sequence[str],
    *,
    holes_mm: Sequence[float],
    focals_mm: Sequence[float],
    options: Mapping[str, Any],
) -> list[Camera]:
    """Return every design of the given files, holes and depths."""
    no_path: Sequence[str | None] = (None,)
    no_length: Sequence[float | None] = (None,)
    return [
        make_camera(path, hole_mm=hole, focal_mm=focal, options=options)
        for path, focal, hole in itertools.product(
            paths or no_path, focals_mm or no_length, holes_mm or no_length
        )
    ]


def _typed(hole_mm: float | None, focal_mm: float | None) -> Camera:
    if hole_mm is None and focal_mm is None:
        raise DesignError(
            "which camera? Give a design file (or sample:square-box), "
            "or type one: --hole 0.30mm --focal-length 60mm"
        )
    if focal_mm is None:
        raise DesignError(
            "how far is the film from the hole? Give it, for example --focal-length 60mm."
        )
    if hole_mm is None:
        from pinsim.best import best_diameter_mm

        best = best_diameter_mm(focal_mm)
        raise DesignError(
            f"how large is the hole? Give it, for example --hole {best:.2f}mm, "
            f"which draws far detail finest at {format_length(focal_mm)}."
        )
    return Camera(
        name="typed design",
        focal_length_mm=focal_mm,
        hole=Hole(diameter_mm=hole_mm),
        film=named_film(DEFAULT_FILM),
    )


def _film(text: str | None, portrait: bool | None, present: Film) -> Film:
    if text is None:
        if present.width_mm <= present.height_mm:
            return present
        return replace(
            present,
            width_mm=present.height_mm,
            height_mm=present.width_mm,
            frame=f"{present.frame} upright" if present.frame else "",
        )
    size = _SIZE.fullmatch(text.strip())
    if size is None:
        film = named_film(text, portrait=bool(portrait))
    else:
        sides = length_mm(size["width"], "--film"), length_mm(size["height"], "--film")
        if portrait:
            sides = min(sides), max(sides)
        film = Film(width_mm=sides[0], height_mm=sides[1])
    # Another frame lies where the design's own film lies, bent as it is.
    return replace(present, width_mm=film.width_mm, height_mm=film.height_mm, frame=film.frame)


def assumed(paths: Sequence[str | None], options: Mapping[str, Any]) -> list[str]:
    """Return what was taken for granted of a typed design and a light, to be said with the result."""
    notes = []
    if not any(paths) and not options.get("film"):
        notes.append(f"film taken as {DEFAULT_FILM} (--film to change)")
    if options.get("light") is not None:
        notes.append(read_as(options["light"]))
    return notes


def read_as(light: LightLevel) -> str:
    """Return the line that says how a light was read."""
    between = f" (EV {light.ev_text}, its middle)" if light.low_ev != light.high_ev else ""
    note = f"; {light.note}" if light.note else ""
    return f"light: {light.given} is EV {round(light.ev, 1):g} at ISO 100{between}{note}"


def default_output(stem: str, suffix: str = ".png") -> Path:
    """Return a file name in the working folder made of plain words."""
    plain = re.sub(r"[^a-z0-9.]+", "-", stem.lower()).strip("-.")[-120:]
    return Path(f"{plain or 'pinsim'}{suffix}")


def camera_stem(path: str | None, camera: Camera) -> str:
    """Return the words that name a design in a file name."""
    if path is None:
        return f"{camera.hole.diameter_mm:g}mm-at-{camera.focal_length_mm:g}mm"
    return Path(path.removeprefix(PREFIX)).stem


def input_files(*paths: str | None) -> list[Path]:
    """Return the real files among what was given, so that none of them is written over."""
    samples = {**names("scene"), **names("camera")}
    files = []
    for path in paths:
        if path and path.startswith(PREFIX):
            files.append(samples.get(path.removeprefix(PREFIX)))
        elif path:
            files.append(Path(path))
    return [file for file in files if file is not None]
