"""TOML to Camera: every key is known, every length has a unit, every error says where it is."""

import math
from dataclasses import replace
from pathlib import Path
from typing import Any

from pinsim.camera.camera import TONES, Camera
from pinsim.camera.design_text import TracedFrom
from pinsim.camera.film import BEND_AXES, Film, named_film
from pinsim.camera.hole import SHAPES, Hole
from pinsim.errors import DesignError, SceneError
from pinsim.material import BUILT_IN, DEFAULT_MATERIAL, Catalogue
from pinsim.samples import resolve
from pinsim.tables import Table, read_toml
from pinsim.tracing.scale import Reference, Scale
from pinsim.units import length_mm


def read_design(path: str | Path) -> Camera:
    """Read a design from a TOML file, or from sample:NAME."""
    file = resolve(path, "camera", DesignError)
    values = read_toml(file, DesignError, "camera design")
    if "photo" in values and "focal_length" not in values:
        raise DesignError(
            f"{file} is a scene file, not a camera design; the scene comes first, then the camera."
        )
    return camera_from(Table(values, str(file), DesignError), file.parent)


def camera_from(top: Table, folder: Path) -> Camera:
    """Return the camera that a design's table tells; what it names lies in a folder."""
    name = top.text("name", "camera")
    focal_length = length_mm(top.need("focal_length", '"60 mm"'), top.place("focal_length"))
    hole = _hole(top.table("hole"), folder)
    film, material_name, materials = _film(top.table("film"), folder)
    tone = top.text("tone", "positive", TONES)
    top.refuse_leftovers()
    try:
        return Camera(
            name=name,
            focal_length_mm=focal_length,
            hole=hole,
            film=film,
            material_name=material_name,
            materials=materials,
            tone="negative" if tone == "negative" else "positive",
        )
    except DesignError as error:
        raise DesignError(f"{top.where}: {error}") from None


def _located(error: DesignError, table: Table) -> DesignError:
    text = str(error)
    return DesignError(text if text.startswith(table.where) else f"{table.where}: {text}")


def _hole(table: Table, folder: Path) -> Hole:
    shape = table.text("shape", "round", SHAPES)
    thickness = length_mm(table.take("plate_thickness", "0 mm"), table.place("plate_thickness"))
    try:
        if shape == "traced":
            hole = _traced(table, folder, thickness)
        elif shape == "round":
            value = table.need("diameter", '"0.30 mm"')
            hole = Hole(
                diameter_mm=length_mm(value, table.place("diameter")), plate_thickness_mm=thickness
            )
        else:
            width, height = _two_lengths(
                table, "diameter", table.need("diameter", '["0.3 mm", "0.2 mm"]')
            )
            make = Hole.oval if shape == "oval" else Hole.slit
            hole = make(width, height, plate_thickness_mm=thickness)
        table.refuse_leftovers()
    except DesignError as error:
        raise _located(error, table) from None
    return hole


def _traced(table: Table, folder: Path, thickness: float) -> Hole:
    from pinsim.tracing.measure import POLARITIES, SEEN_FROM, trace_hole

    image = table.need("image", '"hole.png"')
    if not isinstance(image, str):
        raise DesignError(f"{table.place('image')} is {image!r}; it must be a file name as text.")
    scale = _scale(table)
    seen_from = table.text("seen_from", "behind", SEEN_FROM)
    polarity = table.text("polarity", "auto", POLARITIES)
    diameter = None
    if table.has("diameter"):
        diameter = length_mm(table.take("diameter"), table.place("diameter"))
    table.refuse_leftovers()  # before the scan is read: a misspelt scale looks like a missing one
    try:
        hole = trace_hole(
            folder / image,
            scale=scale,
            diameter_mm=diameter,
            polarity=polarity,
            seen_from=seen_from,
        )
    except SceneError as error:
        raise DesignError(f"{table.place('image')}: {error}") from None
    return Hole.traced(hole.opening, plate_thickness_mm=thickness)


def read_traced_from(path: str | Path) -> TracedFrom:
    """Return what a design's file says of the scan of its traced hole, so that it can be said again.

    The scan's path is made whole, as the design may be written elsewhere.
    """
    file = resolve(path, "camera", DesignError)
    top = Table(read_toml(file, DesignError, "camera design"), str(file), DesignError)
    table = top.table("hole")
    diameter = None
    if table.has("diameter"):
        diameter = length_mm(table.take("diameter"), table.place("diameter"))
    return TracedFrom(
        image=str((file.parent / table.text("image", "")).absolute()),
        scale=_scale(table),
        seen_from=table.text("seen_from", "behind"),
        polarity=table.text("polarity", "auto"),
        diameter_mm=diameter,
    )


def _scale(table: Table) -> Scale:
    pixel_size = dpi = reference = None
    if table.has("pixel_size"):
        pixel_size = length_mm(table.take("pixel_size"), table.place("pixel_size"))
    if table.has("dpi"):
        dpi = _number(table.take("dpi"), table.place("dpi"), "4800")
    if table.has("reference"):
        inner = Table(table.take("reference"), table.place("reference"), DesignError)
        reference = Reference(
            start_px=_point(inner, "from", "[12, 40]"),
            stop_px=_point(inner, "to", "[980, 44]"),
            length_mm=length_mm(inner.need("length", '"10 mm"'), inner.place("length")),
        )
        inner.refuse_leftovers()
    return Scale(pixel_size_mm=pixel_size, dpi=dpi, reference=reference)


def _number(value: Any, place: str, example: str) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise DesignError(f"{place} is {value!r}; it must be a number, for example {example}.")
    return float(value)


def _point(table: Table, key: str, example: str) -> tuple[float, float]:
    value = table.need(key, example)
    place = table.place(key)
    if not isinstance(value, list) or len(value) != 2:
        raise DesignError(
            f"{place} is {value!r}; it must be column and row, for example {example}."
        )
    return _number(value[0], place, "12"), _number(value[1], place, "40")


def _film(table: Table, folder: Path) -> tuple[Film, str, Catalogue]:
    right, up = _two_lengths(table, "shift", table.take("shift", ["0 mm", "0 mm"]))
    material_name = table.text("material", DEFAULT_MATERIAL)
    own_materials = table.text("materials", "")
    radius, axis = _surface(table)
    portrait = table.text("orientation", "landscape", ("landscape", "portrait")) == "portrait"
    try:
        if table.has("frame"):
            film = named_film(table.text("frame", ""), portrait=portrait)
            if table.has("width") or table.has("height"):
                raise DesignError("frame and width or height exclude each other; keep one of them.")
        else:
            table.refuse_slip("frame")
            width = length_mm(
                table.need("width", '"56 mm"  (or frame = "6x6")'), table.place("width")
            )
            height = length_mm(table.need("height", '"56 mm"'), table.place("height"))
            if portrait:
                width, height = min(width, height), max(width, height)
            film = Film(width_mm=width, height_mm=height)
        table.refuse_leftovers()
        materials = Catalogue.load(folder / own_materials) if own_materials else BUILT_IN
        materials.material(material_name)
        film = replace(
            film,
            shift_right_mm=right,
            shift_up_mm=up,
            bend_radius_mm=radius,
            bend_axis="horizontal" if axis == "horizontal" else "vertical",
        )
    except DesignError as error:
        raise _located(error, table) from None
    return film, material_name, materials


def _surface(table: Table) -> tuple[float, str]:
    """Return bend radius and axis; flat is an infinite radius."""
    surface: Any = table.take("surface", "flat")
    if surface == "flat":
        return math.inf, "vertical"
    if not isinstance(surface, dict):
        raise DesignError(
            f'{table.place("surface")} is {surface!r}; it must be "flat" or '
            '{ bend_radius = "60 mm" }, with axis = "horizontal" if it curls up and down.'
        )
    bent = Table(surface, table.place("surface"), DesignError)
    radius = length_mm(bent.need("bend_radius", '"60 mm"'), bent.place("bend_radius"))
    axis = bent.text("axis", "vertical", BEND_AXES)
    bent.refuse_leftovers()
    return radius, axis


def _two_lengths(table: Table, key: str, value: Any) -> tuple[float, float]:
    if not isinstance(value, list) or len(value) != 2:
        raise DesignError(
            f"{table.place(key)} is {value!r}; it must be two lengths, right and up, "
            'for example ["0.3 mm", "0.2 mm"].'
        )
    return length_mm(value[0], table.place(key)), length_mm(value[1], table.place(key))
