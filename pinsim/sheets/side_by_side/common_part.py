"""The part of the scene that all films hold, drawn of each so that every place agrees.

Films that are flat, or bent alike, draw it alike but for their size. Where one is bent and another is
not, or otherwise, all are drawn as one of them (a flat one, if there is any) would hold it; sharpness
and light stay what each film has.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import reduce

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import DesignError
from pinsim.optics import FilmSurface
from pinsim.render.develop import turn
from pinsim.render.picture import Picture
from pinsim.render.resample import Part, make_blocks, resample_line, resample_part

Codes = NDArray[np.uint8]
Float = NDArray[np.float32]
Array = NDArray[np.float64]
Slopes = tuple[float, float]  # of a ray: right and up per length along the hole's axis


@dataclass(frozen=True, slots=True)
class Window:
    """A part of the scene by the angles of its edges, rad, right and up from the hole's axis.

    Angles are those along the film's middle lines, so that a window is the same part of the scene
    on films of any depth and bend.
    """

    left: float
    right: float
    bottom: float
    top: float

    def common(self, other: "Window") -> "Window":
        """Return what lies in both."""
        return Window(
            max(self.left, other.left),
            min(self.right, other.right),
            max(self.bottom, other.bottom),
            min(self.top, other.top),
        )

    @property
    def size_deg(self) -> tuple[float, float]:
        """Angles across and high."""
        return math.degrees(self.right - self.left), math.degrees(self.top - self.bottom)


def common_window(pictures: Sequence[Picture]) -> Window:
    """Return what all pictures show; DesignError when that is nothing."""
    window = reduce(Window.common, [_seen(picture) for picture in pictures])
    if window.right <= window.left or window.top <= window.bottom:
        number = "two" if len(pictures) == 2 else str(len(pictures))
        raise DesignError(
            f"the {number} designs see no common part of the scene; check their shifts."
        )
    return window


def _seen(picture: Picture) -> Window:
    """Return the window that holds all covered film of a picture."""
    rows = np.flatnonzero(~np.isnan(picture.exposure[..., 0]).all(axis=1))
    columns = np.flatnonzero(~np.isnan(picture.exposure[..., 0]).all(axis=0))
    if rows.size == 0:
        raise DesignError("the photo shows nothing of what this film sees; check shift and view.")
    top, left = float(rows[0]), float(columns[0])
    return _window(picture, Part(top, left, rows[-1] + 1.0 - top, columns[-1] + 1.0 - left))


def _window(picture: Picture, part: Part) -> Window:
    """Return the angles of the edges of a part of a picture."""
    (left, bottom), (right, top) = (
        film_mm(picture, part.left, part.top + part.height),
        film_mm(picture, part.left + part.width, part.top),
    )
    surface = picture.camera.surface
    beside = surface.points_mm(np.array([left, right]), 0.0)
    above = surface.points_mm(0.0, np.array([bottom, top]))
    across = np.arctan2(beside[:, 0], beside[:, 2])
    high = np.arctan2(above[:, 1], above[:, 2])
    return Window(float(across[0]), float(across[1]), float(high[0]), float(high[1]))


@dataclass(frozen=True, slots=True, kw_only=True)
class CommonPart:
    """The part of the scene that all films hold, as one film surface lays it out.

    left_mm to top_mm : its edges on that surface. Places in it are shares (x, y) from its left and its
    top, upright.
    """

    window: Window
    surface: FilmSurface
    left_mm: float
    right_mm: float
    bottom_mm: float
    top_mm: float

    @property
    def width_mm(self) -> float:
        """From left to right on the surface."""
        return self.right_mm - self.left_mm

    @property
    def height_mm(self) -> float:
        """From bottom to top on the surface."""
        return self.top_mm - self.bottom_mm

    def point_mm(self, x: float, y: float) -> tuple[float, float]:
        """Return the surface's point of a place."""
        return self.left_mm + x * self.width_mm, self.top_mm - y * self.height_mm

    def slopes(self, x: float, y: float) -> Slopes:
        """Return the ray that a place is drawn by."""
        ray = self.surface.points_mm(*self.point_mm(x, y))
        return float(ray[0] / ray[2]), float(ray[1] / ray[2])

    @property
    def whole(self) -> "Place":
        """All of it."""
        return Place(0.0, 0.0, 1.0, 1.0)


@dataclass(frozen=True, slots=True)
class Place:
    """A rectangle of the common part: shares from its left and top, width and height, upright."""

    left: float
    top: float
    width: float
    height: float


def common_part(pictures: Sequence[Picture]) -> CommonPart:
    """Return what all pictures show; DesignError when that is nothing."""
    window = common_window(pictures)
    surface = _surface(pictures)
    return CommonPart(
        window=window,
        surface=surface,
        left_mm=surface.coordinate_mm(window.left, "u"),
        right_mm=surface.coordinate_mm(window.right, "u"),
        bottom_mm=surface.coordinate_mm(window.bottom, "v"),
        top_mm=surface.coordinate_mm(window.top, "v"),
    )


def _surface(pictures: Sequence[Picture]) -> FilmSurface:
    """Return the surface that all are drawn on: the first, if all are alike; else a flat one."""
    surfaces = [picture.camera.surface for picture in pictures]
    first = surfaces[0]
    if all(_alike(first, one) for one in surfaces):
        return first
    flat = next((one for one in surfaces if one.flat), None)
    if flat is not None:
        return flat
    if all(one.axis == first.axis for one in surfaces):
        return first
    return FilmSurface(focal_length_mm=first.focal_length_mm)


def _alike(one: FilmSurface, other: FilmSurface) -> bool:
    """Tell whether two surfaces draw a scene alike but for their size."""
    if one.flat or other.flat:
        return one.flat and other.flat
    shapes = [surface.bend_radius_mm / surface.focal_length_mm for surface in (one, other)]
    return one.axis == other.axis and math.isclose(*shapes, rel_tol=1e-6)


def picture_px(picture: Picture, u_mm: float, v_mm: float) -> tuple[float, float]:
    """Return column and row of a film point in a picture, edges counted, not middles."""
    rows, columns = picture.exposure.shape[:2]
    film = picture.camera.film
    return (
        (u_mm - film.shift_right_mm) / picture.pitch_mm + 0.5 * columns,
        0.5 * rows - (v_mm - film.shift_up_mm) / picture.pitch_mm,
    )


def film_mm(picture: Picture, column: float, row: float) -> tuple[float, float]:
    """Return the film point of a place in a picture; the inverse of picture_px."""
    rows, columns = picture.exposure.shape[:2]
    film = picture.camera.film
    return (
        (column - 0.5 * columns) * picture.pitch_mm + film.shift_right_mm,
        (0.5 * rows - row) * picture.pitch_mm + film.shift_up_mm,
    )


def part_of(picture: Picture, window: Window) -> Part:
    """Return where a window lies in a picture's exposure."""
    surface = picture.camera.surface
    left, top = picture_px(
        picture, surface.coordinate_mm(window.left, "u"), surface.coordinate_mm(window.top, "v")
    )
    right, bottom = picture_px(
        picture, surface.coordinate_mm(window.right, "u"), surface.coordinate_mm(window.bottom, "v")
    )
    return Part(top, left, bottom - top, right - left)


def exposure_of(
    picture: Picture, common: CommonPart, place: Place, shape: tuple[int, int]
) -> Float:
    """Return the exposure of a place in a picture, upright, as the common surface lays it out.

    shape : rows and columns. Returns float32 (rows, columns, channels); NaN where nothing is recorded.
    """
    surface = picture.camera.surface
    if _alike(surface, common.surface):
        scale = surface.focal_length_mm / common.surface.focal_length_mm
        corners = [
            common.point_mm(x, y)
            for x, y in (
                (place.left, place.top),
                (place.left + place.width, place.top + place.height),
            )
        ]
        (left, top), (right, bottom) = (
            picture_px(picture, scale * u, scale * v) for u, v in corners
        )
        return resample_part(picture.exposure, Part(top, left, bottom - top, right - left), shape)
    bent = surface if common.surface.flat else common.surface
    if bent.axis == "vertical":
        return _bent(picture.exposure, picture, common, place, shape, upright=True)
    turned_over = _bent(
        np.swapaxes(picture.exposure, 0, 1), picture, common, place, shape[::-1], upright=False
    )
    return np.ascontiguousarray(np.swapaxes(turned_over, 0, 1))


def _bent(
    exposure: Float,
    picture: Picture,
    common: CommonPart,
    place: Place,
    shape: tuple[int, int],
    *,
    upright: bool,
) -> Float:
    """Draw a place of one surface as another would hold it, when either is bent about one axis.

    Along the bend the place depends on that coordinate only; across it each line has its own scale.
    exposure, shape : lines down, along the bend to the right; turned over for a level axis.
    """
    along_count, across_count = shape[1], shape[0]
    shares = (np.arange(along_count) + 0.5) / along_count
    other = (np.arange(across_count) + 0.5) / across_count
    if upright:
        target = common.left_mm + (place.left + shares * place.width) * common.width_mm
        lines = common.top_mm - (place.top + other * place.height) * common.height_mm
    else:
        target = common.top_mm - (place.top + shares * place.height) * common.height_mm
        lines = common.left_mm + (place.left + other * place.width) * common.width_mm
    key, aside = ("u", 0) if upright else ("v", 1)

    def points(surface: FilmSurface, along: Array) -> Array:
        return surface.points_mm(along, 0.0) if upright else surface.points_mm(0.0, along)

    there = points(common.surface, target)
    own = picture.camera.surface
    angles = np.arctan2(there[:, aside], there[:, 2])
    source = np.array(
        [own.coordinate_mm(float(angle), "u" if key == "u" else "v") for angle in angles]
    )
    # A ray's slope across the bend is the coordinate there over the depth of its own point.
    scales = points(own, source)[:, 2] / there[:, 2]
    hidden = np.isnan(exposure[..., 0])
    seen = np.where(hidden[..., None], np.float32(0.0), exposure)
    place_along = np.array([_pixel(picture, one, along=True, upright=upright) for one in source])
    steps = np.maximum(np.abs(np.gradient(place_along)), 1e-6) if along_count > 1 else np.ones(1)
    drawn = np.empty((exposure.shape[0], along_count, exposure.shape[2]), np.float32)
    for block in make_blocks(place_along - 0.5, exposure.shape[1], step=steps, beyond="mirror"):
        drawn[:, block.to] = np.einsum("ij,rjc->ric", block.weights, seen[:, block.take])
    result = np.empty((across_count, along_count, exposure.shape[2]), np.float32)
    nearest_along = np.clip(np.floor(place_along), 0, exposure.shape[1] - 1).astype(np.intp)
    for k in range(along_count):
        across = np.array(
            [
                _pixel(picture, float(end * scales[k]), along=False, upright=upright)
                for end in (lines[0], lines[-1])
            ]
        )
        row = np.linspace(across[0], across[1], across_count)
        step = abs(across[1] - across[0]) / max(across_count - 1, 1)
        result[:, k] = resample_line(drawn[:, k], row - 0.5, step=step, beyond="mirror", cutoff=1.0)
        nearest = np.floor(row).astype(np.intp)
        outside = (nearest < 0) | (nearest >= exposure.shape[0])
        nearest = np.clip(nearest, 0, exposure.shape[0] - 1)
        result[outside | hidden[nearest, nearest_along[k]], k] = np.nan
    return np.maximum(result, 0.0, where=~np.isnan(result), out=result)


def _pixel(picture: Picture, film: float, *, along: bool, upright: bool) -> float:
    """Return the column (or row, where they are meant) of a film coordinate."""
    column, row = picture_px(picture, film, film)
    return column if along == upright else row


def shown(picture: Picture, common: CommonPart, place: Place, shape: tuple[int, int]) -> Codes:
    """Return a place in a picture as sRGB codes, (rows, columns, channels), turned as `look` says."""
    exposure = exposure_of(picture, common, place, shape)
    return np.ascontiguousarray(turn(picture.develop(exposure), picture.look), np.uint8)


def turned(picture: Picture, x: float, y: float) -> tuple[float, float]:
    """Return an upright place, shares from left and top, as the picture is looked at."""
    look = picture.look
    return 1.0 - x if look == "screen" else x, y if look == "upright" else 1.0 - y


def hidden_share(picture: Picture, window: Window) -> float:
    """Return how much of a frame's area a window leaves out, 0 to 1."""
    part = part_of(picture, window)
    rows, columns = picture.exposure.shape[:2]
    return float(max(0.0, 1.0 - part.width * part.height / (rows * columns)))
