"""A panorama to film: every point of the film looks up its own direction on the sphere.

The film is laid out in squares. For each, the part of the panorama it sees is brought to a grid of the
square's own scale (sphere_grid.py). The film is then read at several points for each of its pixels, by
cubic splines on that grid, and brought to its own grid by the kernel that all photos go through.

No more of the photo is turned to linear light than a square needs, a strip of columns at a time.
"""

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pinsim.render.plan import RenderPlan
from pinsim.render.project import FilmView
from pinsim.render.resample import ALIAS_FREE, HALF_PERIODS, Block, fold, make_blocks
from pinsim.render.sphere_grid import END, FLAT, Sphere, grid_for, sphere_of
from pinsim.scene import DistanceMap, Scene
from pinsim.threads import THREADS

Float = NDArray[np.float32]
Array = NDArray[np.float64]
Index = NDArray[np.intp]

_SQUARE = 256  # film pixels along a square's side at first
_LEAST_SQUARE = 32
# Film pixels around a square that its kernel reaches.
_HALO = math.ceil(HALF_PERIODS / ALIAS_FREE)
# The film grid's last frequency, cycles per pixel: what must come through unchanged.
_PASS = 0.5
# Of points read for each film pixel, along each side.
_LEAST_READ, _MOST_READ = 2, 5
# A square whose scale varies more than this is quartered.
_EVEN = 1.5
_SAMPLES = 17  # of a square's scale, along each side
_POLE_FINER = 3.0
_ROWS_AT_ONCE = 128  # film rows whose directions are held at once
# Light may come from here at most: where film lies nearer the hole's plane it looks sideways.
_LEAST_AHEAD = 1e-6


def project_panorama(scene: Scene, plan: RenderPlan) -> FilmView:
    """Lay an equirectangular picture on any film, each point looking up its own direction."""
    rows, columns = scene.photo.shape
    mapped = plan.varied and isinstance(scene.distance, DistanceMap)
    inverse = np.empty(plan.padded, np.float32) if mapped else None
    covered = np.empty(plan.padded, np.bool_)
    around = sphere_of(scene).around
    for start in range(0, plan.padded[0], _ROWS_AT_ONCE):
        part = slice(start, min(start + _ROWS_AT_ONCE, plan.padded[0]))
        row, column, cosine = film_places(scene, plan, part)
        covered[part] = (np.abs(row - 0.5 * (rows - 1)) <= 0.5 * rows) & (
            around | (np.abs(column - 0.5 * (columns - 1)) <= 0.5 * columns)
        )
        if inverse is not None:
            inverse[part] = _inverse_distance(scene, row, column, cosine, around)
    return FilmView(
        plan=plan,
        light=panorama_light(scene, plan),
        inverse_distance=inverse,
        covered=np.ascontiguousarray(covered[plan.inside]),
        compensate=True,
    )


def _inverse_distance(
    scene: Scene, row: Array, column: Array, cosine: Array, around: bool
) -> Float:
    """Return 1/distance along the hole's axis at the nearest photo pixel, 1/mm.

    A panorama's distances are along the rays: 1/zo = 1/(ro cos). What lies beside the hole's plane or
    behind it is infinitely far, as its light meets no film.
    """
    assert isinstance(scene.distance, DistanceMap)
    rows, columns = scene.photo.shape
    # Distance always goes on beyond the photo's edge: "black" is about light only.
    beyond = "extend" if scene.beyond == "extend" else "mirror"
    across = np.rint(column).astype(np.intp)
    across = np.mod(across, columns) if around else fold(across, columns, beyond)
    inverse = scene.distance.inverse_mm(fold(np.rint(row).astype(np.intp), rows, beyond), across)
    if scene.distance.along == "axis":
        return inverse
    ahead = cosine > _LEAST_AHEAD
    return np.where(ahead, inverse / np.where(ahead, cosine, 1.0), 0.0).astype(np.float32)


def film_places(
    scene: Scene, plan: RenderPlan, rows: slice = slice(None)
) -> tuple[Array, Array, Array]:
    """Return the panorama's rows and columns that rows of the film grid look at.

    Also the cosine between each chief ray and the hole's axis; all are (rows, columns). Film behind
    the hole's plane has a cosine of 0 or less.
    """
    sphere = sphere_of(scene)
    points = plan.camera.surface.points_mm(plan.right_mm()[None, :], plan.up_mm()[rows, None])
    height, azimuth = sphere.angles(points)
    cosine = points[..., 2] / np.maximum(np.linalg.norm(points, axis=-1), 1e-12)
    return sphere.row(height), sphere.column(azimuth), cosine


def panorama_light(scene: Scene, plan: RenderPlan) -> Float:
    """Return the panorama's light on the film grid with its margins, float32 (rows, columns, 3).

    It is dimmed by resample.response along both sides, as photos finer than the film are. Film that
    does not see the hole gets 0.
    """
    sphere = sphere_of(scene)
    light = np.zeros((*plan.padded, 3), np.float32)

    def lay(square: tuple[slice, slice]) -> None:
        _lay(sphere, plan, square, light)

    squares = [
        (slice(top, min(top + _SQUARE, plan.padded[0])), slice(left, left + width))
        for top in range(0, plan.padded[0], _SQUARE)
        for left in range(0, plan.padded[1], _SQUARE)
        for width in (min(_SQUARE, plan.padded[1] - left),)
    ]
    with ThreadPoolExecutor(THREADS) as pool:
        for _ in pool.map(lay, squares):
            pass
    return light


def _lay(sphere: Sphere, plan: RenderPlan, square: tuple[slice, slice], light: Float) -> None:
    """Lay one square of the film, in quarters if the scale varies much over it."""
    scales = _scales(sphere, plan, square)
    if scales is None:
        return  # no light falls there
    height, width = (part.stop - part.start for part in square)
    if scales.uneven > _EVEN and max(height, width) > _LEAST_SQUARE:
        halves = [_halves(part) for part in square]
        for down in halves[0]:
            for across in halves[1]:
                _lay(sphere, plan, (down, across), light)
        return
    dense = _read(sphere, plan, square, scales)
    blocks = [
        _film_blocks(size, count)
        for size, count in zip((height, width), scales.points, strict=True)
    ]
    tall = np.empty((height, *dense.shape[1:]), np.float32)
    for block in blocks[0]:
        part = dense[block.take]
        tall[block.to] = (block.weights @ part.reshape(part.shape[0], -1)).reshape(
            -1, *dense.shape[1:]
        )
    wide = np.ascontiguousarray(tall.swapaxes(0, 1))
    for block in blocks[1]:
        part = wide[block.take]
        done = (block.weights @ part.reshape(part.shape[0], -1)).reshape(-1, height, 3)
        to = slice(square[1].start + block.to.start, square[1].start + block.to.stop)
        light[square[0], to] = done.swapaxes(0, 1)


def _halves(part: slice) -> list[slice]:
    middle = (part.start + part.stop) // 2
    if part.stop - part.start <= _LEAST_SQUARE:
        return [part]
    return [slice(part.start, middle), slice(middle, part.stop)]


@lru_cache(maxsize=64)
def _film_blocks(size: int, count: int) -> list[Block]:
    """Return what brings `count` points for each pixel, halo and all, to `size` film pixels."""
    first = (_HALO + 0.5) * count - 0.5
    return make_blocks(
        first + count * np.arange(size),
        (size + 2 * _HALO) * count,
        step=float(count),
        beyond="extend",  # never reached
        cutoff=ALIAS_FREE,
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Scales:
    """How finely a square of film sees the sphere.

    row, column : the finest wave that must come through, cycles per photo pixel, the column's at
    the horizon's scale. points : read for each film pixel, down and across. uneven : how much the
    scale varies. ahead : the azimuth of the square's middle.
    """

    row: float
    column: float
    points: tuple[int, int]
    uneven: float
    ahead: float


def _scales(sphere: Sphere, plan: RenderPlan, square: tuple[slice, slice]) -> _Scales | None:
    """Return the scales of a square with its halo, or None when no light falls on it."""
    surface = plan.camera.surface
    up, right = (
        _spaced(axis, part, plan.pitch_mm * sign)
        for axis, part, sign in (
            (plan.up_mm(), square[0], -1.0),
            (plan.right_mm(), square[1], 1.0),
        )
    )
    falloff, _, _ = surface.light(right[None, :], up[:, None])
    lit = falloff > 0.0
    if not lit.any():
        return None
    points = surface.points_mm(right[None, :], up[:, None])[lit]
    tangents = surface.tangents(right[None, :], up[:, None])[lit] * plan.pitch_mm
    direction = points @ sphere.to_image.T
    middle = direction.mean(axis=0)
    distance = np.linalg.norm(points, axis=-1)
    unit = direction / distance[:, None]
    moved = np.einsum("ij,njk->nki", sphere.to_image, tangents)  # (n, u or v, xyz) per film pixel
    moved /= distance[:, None, None]
    level = np.maximum(np.hypot(unit[:, 0], unit[:, 2]), 1e-9)
    east = np.stack([unit[:, 2], np.zeros(level.size), -unit[:, 0]], axis=-1) / level[:, None]
    north = np.cross(unit, east)
    # Photo pixels per film pixel, (n, u or v), columns as wide as at the horizon. What moves along
    # the ray moves neither, as both directions are across it; their signs do not matter here.
    down = sphere.row_per_rad * np.einsum("nki,ni->nk", moved, north)
    across = sphere.column_per_rad * np.einsum("nki,ni->nk", moved, east)
    area = np.maximum(np.abs(down[:, 0] * across[:, 1] - down[:, 1] * across[:, 0]), 1e-12)
    # A film wave f is the photo wave (J transposed)^-1 f; the longest of all f of one length.
    waves_row = _PASS * np.hypot(across[:, 0], across[:, 1]) / area
    waves_column = _PASS * np.hypot(down[:, 0], down[:, 1]) / area
    row, column = float(waves_row.max()), float(waves_column.max())
    # Around a pole, meridians are averaged one by one, which is not what a disc's mean is; there the
    # film is read finer, so that its own kernel does the averaging.
    apart = max(part.stop - part.start + 2 * _HALO for part in square) / (_SAMPLES - 1)
    turn = float(np.linalg.norm(moved, axis=-1).max())  # radians per film pixel
    polar = bool(level.min() < 1.5 * apart * turn)
    if polar:
        row, column = _POLE_FINER * row, _POLE_FINER * column
    # What the photo's kernel still lets through comes back to the film as J transposed of it, and
    # must not be folded onto what the film's kernel lets through.
    finest = 0.5 * END, 0.5 * END / float(level.min())  # columns crowd
    leaves = [
        min(wave * END / FLAT, most) for wave, most in zip((row, column), finest, strict=True)
    ]
    highest = np.abs(down) * leaves[0] + np.abs(across) * leaves[1]
    need = np.ceil(_PASS + highest.max(axis=0) - 0.05)
    uneven = max(
        float(waves_row.max() / waves_row.min()), float(waves_column.max() / waves_column.min())
    )
    counts = np.clip(need, _LEAST_READ, _MOST_READ).astype(int)
    return _Scales(
        row=row,
        column=column,
        points=(int(counts[1]), int(counts[0])),
        uneven=math.inf if polar else uneven if counts.max() > _LEAST_READ else 1.0,
        ahead=math.atan2(float(middle[0]), float(middle[2])),
    )


def _spaced(axis: Array, part: slice, step_mm: float) -> Array:
    """Return some coordinates over a part of an axis and its halo."""
    return np.linspace(
        axis[part.start] - _HALO * step_mm, axis[part.stop - 1] + _HALO * step_mm, _SAMPLES
    )


def _read(sphere: Sphere, plan: RenderPlan, square: tuple[slice, slice], scales: _Scales) -> Float:
    """Return the light at all points of a square and its halo, (rows, columns, 3)."""
    surface = plan.camera.surface
    up, right = (
        _points(axis, part, count, plan.pitch_mm * sign)
        for axis, part, count, sign in (
            (plan.up_mm(), square[0], scales.points[0], -1.0),
            (plan.right_mm(), square[1], scales.points[1], 1.0),
        )
    )
    height, azimuth = sphere.angles(surface.points_mm(right[None, :], up[:, None]))
    if surface.flat:
        lit = np.ones(height.shape, np.bool_)
    else:
        lit = surface.light(right[None, :], up[:, None])[0] > 0.0
    row, column = sphere.row(height), sphere.column(azimuth)
    if sphere.around:
        # Behind, columns go on from the square's own middle, not from the photo's.
        ahead = sphere.ahead_column + sphere.column_per_rad * scales.ahead
        column -= sphere.turn_px * np.rint((column - ahead) / sphere.turn_px)
    grid = grid_for(sphere, (scales.row, scales.column), height[lit], row[lit], column[lit])
    return grid.read(row, column)


def _points(axis: Array, part: slice, count: int, step_mm: float) -> Array:
    """Return the coordinates of `count` points for each film pixel of a part and its halo."""
    pixels = part.stop - part.start + 2 * _HALO
    places = (np.arange(pixels * count) + 0.5) / count - 0.5 - _HALO
    return np.asarray(axis[part.start] + places * step_mm)
