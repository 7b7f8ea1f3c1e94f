"""Camera to TOML: a design written so that reading it gives the same camera, and people can edit it."""

import json
import math
from dataclasses import dataclass

from pinsim.camera.camera import Camera
from pinsim.camera.film import Film
from pinsim.camera.frames import FRAMES_MM
from pinsim.tracing.scale import Scale


@dataclass(frozen=True, slots=True, kw_only=True)
class TracedFrom:
    """Where a traced opening comes from. image : the scan's path as the design will give it.

    diameter_mm : the area-equivalent diameter, if it was told.
    """

    image: str
    scale: Scale
    seen_from: str
    polarity: str
    diameter_mm: float | None = None


def design_text(camera: Camera, *, traced: TracedFrom | None = None, materials: str = "") -> str:
    """Return the TOML of a design.

    traced : needed for a traced hole, which the scan holds. materials : the path of the camera's own
    materials as the design will give it, if it has some.
    """
    lines = [
        f"name = {_quoted(camera.name)}",
        f"focal_length = {_length(camera.focal_length_mm)}",
        *([f"tone = {_quoted(camera.tone)}"] if camera.tone != "positive" else []),
        "",
        "[hole]",
        *_hole_lines(camera, traced),
        "",
        "[film]",
        *_film_lines(camera.film),
        f"material = {_quoted(camera.material_name)}",
        *([f"materials = {_quoted(materials)}"] if materials else []),
    ]
    return "\n".join(lines) + "\n"


def _quoted(text: str) -> str:
    # A basic string of TOML is written as one of JSON, but for the one control character DEL.
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _length(value_mm: float) -> str:
    if 0.0 < abs(value_mm) < 0.01:
        return f'"{value_mm * 1000.0:.9g} um"'
    return f'"{value_mm:.9g} mm"'


def _hole_lines(camera: Camera, traced: TracedFrom | None) -> list[str]:
    hole = camera.hole
    lines = [f"shape = {_quoted(hole.shape)}"]
    if hole.shape == "traced":
        if traced is None:
            raise ValueError("the design of a traced hole needs to know its scan")
        lines += [f"image = {_quoted(traced.image)}", *_scale_lines(traced.scale)]
        lines += [
            f"seen_from = {_quoted(traced.seen_from)}",
            f"polarity = {_quoted(traced.polarity)}",
        ]
        if traced.diameter_mm is not None:
            lines.append(f"diameter = {_length(traced.diameter_mm)}")
    elif hole.size_mm is not None:
        lines.append(f"diameter = [{_length(hole.size_mm[0])}, {_length(hole.size_mm[1])}]")
    else:
        lines.append(f"diameter = {_length(hole.diameter_mm)}")
    return [*lines, f"plate_thickness = {_length(hole.plate_thickness_mm)}"]


def _scale_lines(scale: Scale) -> list[str]:
    if scale.pixel_size_mm is not None:
        return [f"pixel_size = {_length(scale.pixel_size_mm)}"]
    if scale.dpi is not None:
        return [f"dpi = {scale.dpi:.9g}"]
    if scale.reference is not None:
        (x0, y0), (x1, y1) = scale.reference.start_px, scale.reference.stop_px
        length = _length(scale.reference.length_mm)
        ends = f"from = [{x0:.9g}, {y0:.9g}], to = [{x1:.9g}, {y1:.9g}]"
        return [f"reference = {{ {ends}, length = {length} }}"]
    return []


def _film_lines(film: Film) -> list[str]:
    # An upright frame bears its name and a word more.
    name = film.frame.removesuffix(" upright")
    if name in FRAMES_MM:
        lines = [f"frame = {_quoted(name)}"]
        if (film.width_mm, film.height_mm) != FRAMES_MM[name]:
            lines.append('orientation = "portrait"')
    else:
        lines = [f"width = {_length(film.width_mm)}", f"height = {_length(film.height_mm)}"]
    if not math.isinf(film.bend_radius_mm):
        lines.append(
            f"surface = {{ bend_radius = {_length(film.bend_radius_mm)}, "
            f"axis = {_quoted(film.bend_axis)} }}"
        )
    if film.shift_right_mm or film.shift_up_mm:
        lines.append(f"shift = [{_length(film.shift_right_mm)}, {_length(film.shift_up_mm)}]")
    return lines
