"""The figures as a picture: contrast against detail, and the image of a point across the frame."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image, ImageDraw, ImageFont

from pinsim.best import light_for
from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.numbers import (
    CONTRAST,
    format_detail,
    outwards,
    usual_places,
)
from pinsim.optics import ChiefRays, Light
from pinsim.optics.sharpness import detail_anywhere, light_ray_otf, point_image
from pinsim.sheets.lettering import FAINT_INK, GAP, INK, Paper, Sheet, text_height
from pinsim.units import format_length

Array = NDArray[np.float64]
Codes = NDArray[np.uint8]
Colour = tuple[int, int, int]

PLOT_PX = (900, 740)
# Point images across and down: pixels of each, and of the gap between.
_TILE_PX = {(3, 3): (238, 14), (5, 3): (162, 12), (3, 5): (132, 14)}
_FINE = 3  # lines are drawn this much larger and reduced, which smooths them
_WIDE = 1.45  # a frame longer than this gets five point images along, not three
# As in pinsim.numbers, with more for rings and for the ends of curves.
_WAVELENGTHS = {"round": 6, "oval": 6, "slit": 12, "traced": 3}
_FIELD = (244, 244, 242)
_GRID = (214, 214, 211)
# Black, blue and orange of different darkness: told apart by eyes that take red for green, and,
# by their labels and marks, in a black and white print.
_COLOURS: tuple[Colour, ...] = ((24, 24, 26), (0, 94, 168), (206, 84, 0))


@dataclass(frozen=True, slots=True, eq=False)
class _Curve:
    """One contrast curve; finest : where it first falls to 20 %."""

    label: str
    colour: Colour
    dashed: bool
    contrast: Array
    finest: float


class _View:
    """A camera in one light, objects at one distance: what both halves of the sheet ask of optics."""

    def __init__(self, camera: Camera, light: Light, distance_mm: float) -> None:
        self.camera = camera
        self.mean_nm = light.mean_nm
        self._common: dict[str, Any] = {
            "opening": camera.opening,
            "plate_thickness_mm": camera.plate_thickness_mm,
            "light": light.condensed(_WAVELENGTHS[camera.hole.shape]),
            "distance_mm": distance_mm,
        }
        self.distance_mm = distance_mm
        self._light_shares: dict[tuple[float, float], float] = {}

    def rays(self, place: tuple[float, float]) -> ChiefRays:
        return self.camera.surface.chief_rays(*self.camera.frame_point_mm(*place))

    def light_share(self, place: tuple[float, float]) -> float:
        """Return the light that comes there over that on the axis."""
        if place not in self._light_shares:  # of an outline each costs a transform
            rays = self.rays(place)
            share = float(rays.falloff)
            if share > 0.0:
                bore = self.camera.plate_thickness_mm * rays.tangent
                share *= float(self.camera.opening.clear_share(bore))
            self._light_shares[place] = share
        return self._light_shares[place]

    def finest(self, rays: ChiefRays, directions: Array, contrasts: Sequence[float]) -> Array:
        """Return finest details (directions, contrasts)."""
        return detail_anywhere(
            directions, rays=rays, contrasts=contrasts, samples=160, **self._common
        )

    def contrast(self, rays: ChiefRays, directions: Array, frequency: Array) -> Array:
        """Return contrast curves (directions, frequencies)."""
        along = frequency[:, None] * directions[:, None, :]
        flat = light_ray_otf(along.reshape(-1, 2), rays=rays, **self._common)
        curves = flat.reshape(len(directions), len(frequency))
        return np.asarray(curves.real if self.camera.opening.mirrored else np.abs(curves))

    def point(self, rays: ChiefRays, width_mm: float, count: int) -> Array:
        return point_image(rays=rays, width_mm=width_mm, count=count, **self._common)


def numbers_plot(
    camera: Camera, *, distance_mm: float = math.inf, wavelength_nm: float | None = None
) -> Sheet:
    """Return a sheet: contrast against detail at centre, edge and corner, and point images.

    distance_mm : hole to object. wavelength_nm : one colour; else the material's own light.
    Raises DesignError when no light reaches any of these places.
    """
    view = _View(camera, light_for(wavelength_nm, camera.material), distance_mm)
    plot, plot_note = _plot(view)
    tiles, captions, tiles_note = _tiles(view)
    across, down = len(tiles[0]), len(tiles)
    tile_px, gap = _TILE_PX[across, down]
    tiles_px = max(across * (tile_px + gap) - gap, 700)
    left, right = GAP, GAP + PLOT_PX[0] + 2 * GAP
    title = f"How sharp, and where: {camera.name}"
    colour = (
        f"light of {wavelength_nm:g} nm"
        if wavelength_nm is not None
        else f"{camera.material_name}, light of {view.mean_nm:.0f} nm on average"
    )
    line = f"{camera.summary}; {colour}; objects at {format_length(distance_mm)}"
    width = right + tiles_px + GAP
    head = GAP + text_height(title, size=32) + text_height(line, width=width - 2 * GAP) + GAP // 2
    top = head + text_height("x", size=24) + 6
    caption_px = text_height("x", size=15) + 14
    grid_px = down * (tile_px + caption_px)
    bottom = top + max(
        PLOT_PX[1] + 12 + text_height(plot_note, size=17, width=PLOT_PX[0]),
        grid_px + text_height(tiles_note, size=17, width=tiles_px),
    )
    paper = Paper(width, bottom + GAP)
    y = paper.text(left, GAP, title, size=32)
    paper.text(left, y, line, faint=True, width=width - 2 * GAP)
    paper.text(left, head, "Contrast that is left, against fineness of detail", size=24)
    paper.picture(plot, left, top)
    paper.text(left, top + PLOT_PX[1] + 12, plot_note, size=17, width=PLOT_PX[0])
    paper.text(right, head, "A point of light, as the film records it", size=24)
    for row in range(down):
        for column in range(across):
            x, y = right + column * (tile_px + gap), top + row * (tile_px + caption_px)
            paper.picture(tiles[row][column], x, y)
            paper.text(x, y + tile_px + 4, captions[row][column], size=15, faint=True)
    paper.text(right, top + grid_px, tiles_note, size=17, width=tiles_px)
    return paper.finished(f"pinsim numbers: {camera.name}, {line}")


# Contrast curves -----------------------------------------------------------------------------


def _curves(view: _View) -> tuple[list[_Curve], list[str], float]:
    """Return curves, names of unlit places, and the finest frequency they are drawn for."""
    names = usual_places(view.camera)
    film = view.camera.film
    edge = next(
        name
        for name in names
        if name.endswith("edge")
        and (name in {"left edge", "right edge"}) == (film.width_mm >= film.height_mm)
    )
    round_hole = view.camera.hole.shape == "round"
    words = ("outwards", "around") if round_hole else ("to the right", "upwards")
    lit, unlit = [], []
    for name, colour in zip(("centre", edge, "corner"), _COLOURS, strict=True):
        if view.light_share(names[name]) <= 0.0:
            unlit.append(name)
            continue
        point = view.camera.frame_point_mm(*names[name])
        x, y = outwards(point) if round_hole else (1.0, 0.0)
        ways = np.array([[x, y], [-y, x]])
        labels = [f"{name}, {word}" for word in words]
        if round_hole and math.hypot(*point) < 1e-9:  # alike both ways
            ways, labels = ways[:1], [name]
        rays = view.rays(names[name])
        lit.append((labels, colour, rays, ways, view.finest(rays, ways, (CONTRAST, 0.1))))
    if not lit:
        raise DesignError(
            "no light reaches the film's centre, edge or corner, so there is nothing to plot; "
            "use a thinner plate, a larger hole or less shift."
        )
    top = 1.45 * max(float(finest[:, 1].max()) for *_, finest in lit)
    frequency = np.linspace(0.0, top, 240)
    curves = []
    for labels, colour, rays, ways, finest in lit:
        drawn = view.contrast(rays, ways, frequency)
        curves += [
            _Curve(label, colour, i == 1, drawn[i], float(finest[i, 0]))
            for i, label in enumerate(labels)
        ]
    return curves, unlit, top


class _Field:
    """The plot's field: frequencies to the right, contrast up; lines first, letters on top."""

    def __init__(self, top: float, lowest: float) -> None:
        self._left, self._right = 74, PLOT_PX[0] - 22
        self._up, self._down = 46, PLOT_PX[1] - 66
        self._top, self._lowest = top, lowest
        size = (PLOT_PX[0] * _FINE, PLOT_PX[1] * _FINE)
        self._image = Image.new("RGB", size, _FIELD)
        self._draw = ImageDraw.Draw(self._image)
        self._letters: list[tuple[float, float, str, int, Colour, str]] = []

    def x(self, frequency: float) -> float:
        return self._left + (self._right - self._left) * frequency / self._top

    def y(self, contrast: float) -> float:
        share = (contrast - self._lowest) / (1.0 - self._lowest)
        return self._down - (self._down - self._up) * share

    def line(
        self,
        points: Sequence[tuple[float, float]],
        colour: Colour,
        width: float,
        *,
        dash: tuple[float, float] | None = None,
    ) -> None:
        """Draw through points in pixels; dash : lengths of stroke and gap."""
        for part in [points] if dash is None else _dashes(points, *dash):
            fine = [(_FINE * x, _FINE * y) for x, y in part]
            self._draw.line(fine, colour, width=round(_FINE * width), joint="curve")

    def dot(self, x: float, y: float, radius: float, colour: Colour, *, hollow: bool) -> None:
        box = [
            _FINE * (x - radius),
            _FINE * (y - radius),
            _FINE * (x + radius),
            _FINE * (y + radius),
        ]
        fill = _FIELD if hollow else colour
        self._draw.ellipse(box, fill, outline=colour, width=round(_FINE * 2.0))

    def letters(
        self, x: float, y: float, text: str, *, size: int = 16, colour: Colour = INK, at: str = "lm"
    ) -> None:
        """Write at a point; at : Pillow's anchor."""
        self._letters.append((x, y, text, size, colour, at))

    def axes(self) -> None:
        for i in range(math.ceil(self._lowest * 10 - 1e-9), 11):
            y = self.y(i / 10)
            if i % 2 == 0:
                self.line([(self._left, y), (self._right, y)], _GRID, 1.0)
                self.letters(self._left - 10, y, f"{10 * i} %", colour=FAINT_INK, at="rm")
        step = _round_step(self._top / 7.0)
        for i in range(int(self._top / step) + 1):
            x = self.x(i * step)
            self.line([(x, self._up), (x, self._down)], _GRID, 1.0)
            self.letters(x, self._down + 10, f"{i * step:g}", colour=FAINT_INK, at="mt")
        self.line([(self._left, self._up), (self._left, self._down)], FAINT_INK, 1.2)
        self.line([(self._left, self.y(0.0)), (self._right, self.y(0.0))], FAINT_INK, 1.2)
        self.letters(self._left - 56, 22, "contrast", size=17)
        self.letters(
            self._right,
            PLOT_PX[1] - 20,
            "detail on the film, cycles/mm (a cycle is one dark and one light line)",
            size=17,
            at="rm",
        )

    def codes(self) -> Codes:
        image = self._image.reduce(_FINE)
        draw = ImageDraw.Draw(image)
        for x, y, text, size, colour, at in self._letters:
            font = ImageFont.load_default(size)
            draw.text(
                (x, y), text, colour, font=font, anchor=at, stroke_width=3, stroke_fill=_FIELD
            )
        return np.asarray(image)


def _round_step(least: float) -> float:
    """Return the next of 1, 2, 5, 10, ... above."""
    power = 10.0 ** math.floor(math.log10(least))
    return next(power * one for one in (1.0, 2.0, 5.0, 10.0) if power * one >= least - 1e-12)


def _dashes(
    points: Sequence[tuple[float, float]], stroke: float, gap: float
) -> list[list[tuple[float, float]]]:
    """Cut a line of many short pieces into strokes."""
    parts: list[list[tuple[float, float]]] = []
    far = 0.0
    for before, after in pairwise(points):
        pieces = max(1, math.ceil(math.dist(before, after)))
        for k in range(pieces):
            a, b = (
                (
                    before[0] + (after[0] - before[0]) * share / pieces,
                    before[1] + (after[1] - before[1]) * share / pieces,
                )
                for share in (k, k + 1)
            )
            if far % (stroke + gap) < stroke:
                if parts and parts[-1][-1] == a:
                    parts[-1].append(b)
                else:
                    parts.append([a, b])
            far += math.dist(a, b)
    return parts


def _plot(view: _View) -> tuple[Codes, str]:
    """Return the drawn curves and the note below them."""
    curves, unlit, top = _curves(view)
    lowest = min(0.0, *(float(curve.contrast.min()) for curve in curves))
    lowest = -0.2 if lowest < -0.1 else -0.1 if lowest < -0.015 else 0.0
    field = _Field(top, lowest)
    field.axes()
    y20 = field.y(CONTRAST)
    field.line([(field.x(0.0), y20), (field.x(top), y20)], FAINT_INK, 1.6, dash=(3.0, 4.0))
    field.letters(
        field.x(top) - 4, y20 - 13, "20 %: detail is plain to see to the left of here",
        size=15, colour=FAINT_INK, at="rm",
    )  # fmt: skip
    frequency = np.linspace(0.0, top, len(curves[0].contrast))
    for curve in reversed(curves):
        points = [
            (field.x(float(nu)), field.y(float(c)))
            for nu, c in zip(frequency, curve.contrast, strict=True)
        ]
        width = 3.4 if curve.colour == _COLOURS[0] else 2.6
        field.line(points, curve.colour, width, dash=(9.0, 6.0) if curve.dashed else None)
    for curve in reversed(curves):
        field.dot(field.x(curve.finest), y20, 5.0, curve.colour, hollow=curve.dashed)
    # Labels stand to the right of all curves, each on a level line that starts on its own curve;
    # the curve farthest left gets the highest, where the others are nearest.
    levels = np.linspace(0.90, 0.90 - 0.075 * (len(curves) - 1), len(curves))
    column = max(field.x(_falls_to(curve, float(levels[-1]), frequency)) for curve in curves) + 44.0
    for level, curve in zip(levels, sorted(curves, key=lambda one: one.finest), strict=True):
        x, y = field.x(_falls_to(curve, float(level), frequency)), field.y(float(level))
        field.line([(x, y), (column - 8.0, y)], curve.colour, 1.2)
        field.dot(x, y, 3.2, curve.colour, hollow=False)
        field.letters(
            column,
            y,
            f"{curve.label}: {format_detail(curve.finest)} cycles/mm at 20 %",
            colour=curve.colour,
        )
    return field.codes(), _plot_note(view, unlit, lowest)


def _falls_to(curve: _Curve, level: float, frequency: Array) -> float:
    i = int((curve.contrast <= level).argmax())
    return float(np.interp(-level, -curve.contrast[i - 1 : i + 1], frequency[i - 1 : i + 1]))


def _plot_note(view: _View, unlit: list[str], lowest: float) -> str:
    if view.camera.hole.shape == "round":
        note = (
            "Solid: fine lines that follow each other outwards from the middle (tangential). "
            "Dashed: lines that follow each other around it (sagittal)."
        )
    else:
        note = (
            "Solid: upright lines that follow each other to the right. "
            "Dashed: level lines that follow each other upwards."
        )
    if lowest < 0.0:
        note += " Below 0 light and dark change places."
    for name in unlit:
        note += f" No light reaches the {name}."
    return note


# Point images --------------------------------------------------------------------------------


def _tiles(view: _View) -> tuple[list[list[Codes]], list[list[str]], str]:
    """Return point images by rows from the top, a caption for each, and the note below them."""
    film = view.camera.film
    ratio = film.width_mm / film.height_mm
    across = 5 if ratio > _WIDE else 3
    down = 5 if ratio < 1.0 / _WIDE else 3
    tile_px, _ = _TILE_PX[across, down]
    places = [
        [(float(a), float(b)) for a in np.linspace(-1.0, 1.0, across)]
        for b in np.linspace(1.0, -1.0, down)
    ]
    width_mm = _shown_width_mm(view, [place for row in places for place in row])
    images: list[list[Array]] = []
    captions: list[list[str]] = []
    drawn: dict[tuple[float, float], Array] = {}
    for row in places:
        images.append([])
        captions.append([])
        for place in row:
            rays = view.rays(place)
            share = view.light_share(place)
            images[-1].append(share * _point(view, place, width_mm, tile_px, drawn))
            angle = math.degrees(math.acos(min(1.0, float(rays.direction[2]))))
            captions[-1].append(
                f"{angle:.0f} deg, " + ("unlit" if share <= 0.0 else _stops(-math.log2(share)))
            )
    full = float(images[down // 2][across // 2].max()) or 1.0
    bar_mm = _bar_mm(width_mm)
    tiles = [[_tile(image / full, width_mm, bar_mm) for image in row] for row in images]
    tiles[-1][0] = _tile(images[-1][0] / full, width_mm, bar_mm, named=True)
    note = (
        f"Each picture shows {width_mm:.2g} x {width_mm:.2g} mm of film at its place in the frame, "
        f"upright as the scene is seen; the bar is {bar_mm:g} mm. Brightness against the middle one, "
        "as its square root, so that faint rings show. Below each: angle off the hole's axis, and "
        "how much darker the film is there."
    )
    return tiles, captions, note


def _stops(stops: float) -> str:
    return "0 stops" if abs(stops) < 0.05 else f"-{stops:.1f} stops"


def _shown_width_mm(view: _View, places: list[tuple[float, float]]) -> float:
    """Return a width that holds the shadow of the hole and the diffraction of all places."""
    camera = view.camera
    z = camera.focal_length_mm
    shadow = camera.hole.greatest_mm * (1.0 + z / view.distance_mm)
    spreads = []
    for place in places:
        if view.light_share(place) > 0.0:
            reach = float(np.linalg.norm(view.rays(place).shift, 2))
            spreads.append(view.mean_nm * 1e-6 * reach / camera.hole.diameter_mm)
    least = view.mean_nm * 1e-6 * z / camera.hole.diameter_mm
    spread = min(max(spreads, default=least), 4.0 * least)
    return 1.1 * shadow + 2.4 * spread


def _point(
    view: _View,
    place: tuple[float, float],
    width_mm: float,
    count: int,
    drawn: dict[tuple[float, float], Array],
) -> Array:
    """Return the point image at a place; a round hole's is the mirror image of that opposite."""
    if view.light_share(place) <= 0.0:
        return np.zeros((count, count))
    if view.camera.hole.shape != "round":
        return view.point(view.rays(place), width_mm, count)
    u, v = view.camera.frame_point_mm(*place)
    key = (round(abs(u), 9), round(abs(v), 9))
    if key not in drawn:
        mirror = view.camera.surface.chief_rays(*key)
        drawn[key] = view.point(mirror, width_mm, count)
    image = drawn[key] if u >= 0.0 else drawn[key][:, ::-1]
    return image if v >= 0.0 else image[::-1]


def _bar_mm(width_mm: float) -> float:
    """Return a round length of about a quarter of the width."""
    step = _round_step(0.13 * width_mm)
    return step if step <= 0.4 * width_mm else 0.5 * step


def _tile(image: Array, width_mm: float, bar_mm: float, *, named: bool = False) -> Codes:
    """Return a point image as codes with its scale bar; 1 is white."""
    count = image.shape[0]
    grey = np.round(255.0 * np.sqrt(np.clip(image, 0.0, 1.0))).astype(np.uint8)
    picture = Image.fromarray(np.repeat(grey[..., None], 3, axis=2))
    draw = ImageDraw.Draw(picture)
    length = count * bar_mm / width_mm
    x, y = 10, count - 12
    draw.rectangle((x, y, x + round(length), y + 2), fill=(235, 235, 235))
    if named:
        font = ImageFont.load_default(14)
        draw.text((x, y - 4), f"{bar_mm:g} mm", (235, 235, 235), font=font, anchor="lb")
    return np.asarray(picture)
