"""A panorama to film: every point of the film looks up its own direction on the sphere.

The film is laid out in squares. For each, the part of the panorama it sees is brought to a grid of the
square's own scale: first down the meridians, then along each circle of latitude, whose columns crowd
towards the poles and are thinned as much as they crowd. Both are band-limited, so a photo finer than
the film is averaged and one that is coarser interpolated, whatever the scale at that place. The film
is then read at several points for each of its pixels, by cubic splines on that grid, and brought to its
own grid by the kernel that all photos go through.

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
from pinsim.render.resample import (
    ALIAS_FREE,
    HALF_PERIODS,
    Block,
    fold,
    make_blocks,
    response,
)
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
# The resampling kernel's response is 1 up to this share of its cut-off, and has ended at _END.
_FLAT, _END = 0.75, 1.25
# Grid points for each period of the finest wave that must come through: splines read it to 3e-3 there,
# and of what the photo's kernel lets through beyond, they fold back less.
_PER_PERIOD = 6.0
_LEAST_STEP_PX = 1.0 / 3.0  # of that grid, in photo pixels; a photo holds nothing finer
# Of points read for each film pixel, along each side.
_LEAST_READ, _MOST_READ = 2, 5
# A square whose scale varies more than this is quartered.
_EVEN = 1.5
_SAMPLES = 17  # of a square's scale, along each side
_POLE_FINER = 3.0
_SPLINE_REACH = 8  # grid points beyond which a spline has forgotten its border
_POLE_WAVES = 3.0  # around a pole, waves that reach a point however near it is
_STRIP = 1024  # photo columns linearised at once: the strip stays in the processor's cache
_READ_AT_ONCE = 16384
_ROWS_AT_ONCE = 128  # film rows whose directions are held at once
# Light may come from here at most: where film lies nearer the hole's plane it looks sideways.
_LEAST_AHEAD = 1e-6


@dataclass(frozen=True, slots=True, eq=False)
class _Sphere:
    """The photo as it lies on the sphere, in its own pixels.

    to_image : (3, 3), from the camera's right, up and ahead to the image's. around : its columns
    close the circle. over : whether its first and last row lie at the poles, and it closes there too.
    """

    scene: Scene
    shape: tuple[int, int]
    row_per_rad: float
    column_per_rad: float
    horizon_row: float
    ahead_column: float
    to_image: Array
    around: bool
    over: tuple[bool, bool]

    @property
    def turn_px(self) -> float:
        """Columns in the whole turn."""
        return 2.0 * math.pi * self.column_per_rad

    def angles(self, direction: Array) -> tuple[Array, Array]:
        """Return height and azimuth of directions (..., 3) of any length, in the image's own axes."""
        x, y, z = (self.to_image @ direction.reshape(-1, 3).T).reshape(3, *direction.shape[:-1])
        return np.arctan2(y, np.hypot(x, z)), np.arctan2(x, z)

    def row(self, height: Array) -> Array:
        """Return the photo's row of heights."""
        return self.horizon_row - self.row_per_rad * height

    def column(self, azimuth: Array) -> Array:
        """Return the photo's column of azimuths; a part's break lies opposite to its middle."""
        column = self.ahead_column + self.column_per_rad * azimuth
        middle, turn = 0.5 * (self.shape[1] - 1), self.turn_px
        return np.asarray(column - turn * np.rint((column - middle) / turn))


def _sphere(scene: Scene) -> _Sphere:
    place = scene.place
    rows, columns = scene.photo.shape
    around = abs(place.full_width_px - columns) < 0.5
    return _Sphere(
        scene=scene,
        shape=(rows, columns),
        row_per_rad=place.row_per_rad,
        # A picture all round closes to the pixel, whatever was rounded.
        column_per_rad=0.5 * columns / math.pi if around else place.column_per_rad,
        horizon_row=place.horizon_row,
        ahead_column=place.ahead_column,
        to_image=scene.camera_to_image,
        around=around,
        over=(
            around and abs(place.top_px) < 0.5,
            around and abs(place.full_height_px - place.top_px - rows) < 0.5,
        ),
    )


def project_panorama(scene: Scene, plan: RenderPlan) -> FilmView:
    """Lay an equirectangular picture on any film, each point looking up its own direction."""
    rows, columns = scene.photo.shape
    mapped = plan.varied and isinstance(scene.distance, DistanceMap)
    inverse = np.empty(plan.padded, np.float32) if mapped else None
    covered = np.empty(plan.padded, np.bool_)
    around = _sphere(scene).around
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
    sphere = _sphere(scene)
    points = plan.camera.surface.points_mm(plan.right_mm()[None, :], plan.up_mm()[rows, None])
    height, azimuth = sphere.angles(points)
    cosine = points[..., 2] / np.maximum(np.linalg.norm(points, axis=-1), 1e-12)
    return sphere.row(height), sphere.column(azimuth), cosine


def panorama_light(scene: Scene, plan: RenderPlan) -> Float:
    """Return the panorama's light on the film grid with its margins, float32 (rows, columns, 3).

    It is dimmed by resample.response along both sides, as photos finer than the film are. Film that
    does not see the hole gets 0.
    """
    sphere = _sphere(scene)
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


def _lay(sphere: _Sphere, plan: RenderPlan, square: tuple[slice, slice], light: Float) -> None:
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


def _scales(sphere: _Sphere, plan: RenderPlan, square: tuple[slice, slice]) -> _Scales | None:
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
    finest = 0.5 * _END, 0.5 * _END / float(level.min())  # columns crowd
    leaves = [
        min(wave * _END / _FLAT, most) for wave, most in zip((row, column), finest, strict=True)
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


def _read(sphere: _Sphere, plan: RenderPlan, square: tuple[slice, slice], scales: _Scales) -> Float:
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
    grid = _grid(sphere, scales, height[lit], row[lit], column[lit])
    return grid.read(row, column)


def _points(axis: Array, part: slice, count: int, step_mm: float) -> Array:
    """Return the coordinates of `count` points for each film pixel of a part and its halo."""
    pixels = part.stop - part.start + 2 * _HALO
    places = (np.arange(pixels * count) + 0.5) / count - 0.5 - _HALO
    return np.asarray(axis[part.start] + places * step_mm)


@dataclass(frozen=True, slots=True, eq=False)
class _Grid:
    """Spline coefficients (rows, columns, 3) of a part of the photo at a scale of its own.

    first, step : photo row and column of the first point, and photo pixels between points.
    turn_px : after so many photo columns the grid begins anew; 0 if it does not.
    """

    coefficients: Float
    first: tuple[float, float]
    step: tuple[float, float]
    turn_px: float

    def read(self, row: Array, column: Array) -> Float:
        """Return the light at photo rows and columns of any one shape, (..., 3)."""
        from scipy.sparse import csr_array

        rows, columns = self.coefficients.shape[:2]
        flat = self.coefficients.reshape(-1, 3)
        offsets = (np.arange(4)[:, None] * columns + np.arange(4)).ravel().astype(np.int32)
        down, across = row.ravel(), column.ravel()
        result = np.empty((down.size, 3), np.float32)
        for start in range(0, down.size, _READ_AT_ONCE):
            part = slice(start, min(start + _READ_AT_ONCE, down.size))
            y = (down[part] - self.first[0]) / self.step[0]
            x = across[part] - self.first[1]
            if self.turn_px:
                x = np.mod(x, self.turn_px)
            x = x / self.step[1] + (_SPLINE_REACH if self.turn_px else 0)
            # Only film that no light falls on looks beyond the grid.
            y, x = np.clip(y, 1.0, rows - 2.001), np.clip(x, 1.0, columns - 2.001)
            top, left = np.floor(y), np.floor(x)
            corner = ((top - 1.0) * columns + (left - 1.0)).astype(np.int32)
            weights = _spline(y - top)[:, :, None] * _spline(x - left)[:, None, :]
            matrix = csr_array(
                (
                    weights.ravel(),
                    (corner[:, None] + offsets).ravel(),
                    np.arange(0, weights.size + 1, 16, dtype=np.int32),
                ),
                (y.size, flat.shape[0]),
            )
            result[part] = matrix @ flat
        return result.reshape(*row.shape, 3)


def _spline(place: Array) -> Float:
    """Return the four cubic B-spline weights (n, 4) at places 0 to 1 after the second point."""
    after = place.astype(np.float32)
    before = np.float32(1.0) - after
    weights = np.empty((after.size, 4), np.float32)
    weights[:, 0] = before**3 / np.float32(6.0)
    weights[:, 1] = (4.0 - 3.0 * after * after * (2.0 - after)) / np.float32(6.0)
    weights[:, 2] = (4.0 - 3.0 * before * before * (2.0 - before)) / np.float32(6.0)
    weights[:, 3] = after**3 / np.float32(6.0)
    return weights


def _grid(sphere: _Sphere, scales: _Scales, height: Array, row: Array, column: Array) -> _Grid:
    """Bring the part of the photo that a square's points look at to the square's scale."""
    from scipy.fft import next_fast_len

    # Down the meridians.
    step_row = max(1.0 / (_PER_PERIOD * scales.row), _LEAST_STEP_PX)
    period_row = max(1.0, 0.5 * _FLAT / scales.row)
    first_row = float(row.min()) - _SPLINE_REACH * step_row
    count = math.ceil((float(row.max()) - first_row) / step_row) + 1 + _SPLINE_REACH
    rows = np.asarray(first_row + step_row * np.arange(count, dtype=np.float64))
    # Along each circle of latitude; columns are as wide as its radius.
    radius = np.abs(np.cos((sphere.horizon_row - rows) / sphere.row_per_rad))
    waves = scales.column * radius + _POLE_WAVES / sphere.turn_px
    periods = np.maximum(1.0, 0.5 * _FLAT / waves)
    step = max(1.0 / (_PER_PERIOD * float(waves.max())), _LEAST_STEP_PX)
    left, right = float(column.min()), float(column.max())
    margin = min(
        HALF_PERIODS * float(periods.max()) + (_SPLINE_REACH + 1) * step, 0.5 * sphere.turn_px
    )
    first_column = math.floor(left - margin)
    length = next_fast_len(math.ceil(right + margin) - first_column + 1, real=True)
    turn_px = 0.0
    if sphere.around and length >= sphere.shape[1]:
        first_column, length, turn_px = 0, sphere.shape[1], float(sphere.shape[1])
    lines = _down(sphere, rows, period_row, first_column, length)
    thinned = next_fast_len(max(8, math.ceil(length / step)), real=True)
    lines = _along(lines, periods, thinned)
    if turn_px:
        wrap = np.arange(-_SPLINE_REACH, thinned + _SPLINE_REACH) % thinned
        lines = lines[:, wrap]
    _to_knots(lines)
    return _Grid(
        coefficients=lines,
        first=(first_row, float(first_column)),
        step=(step_row, length / thinned),
        turn_px=turn_px,
    )


def _to_knots(lines: Float) -> None:
    """Turn values into cubic B-spline coefficients along the first axis, in place.

    The recursive filter of Unser, Aldroubi and Eden (1991), pole sqrt(3) - 2, a row at a time; lines
    go on as they end.
    """
    pole = np.float32(math.sqrt(3.0) - 2.0)
    lines *= np.float32(6.0)
    lines[0] /= 1.0 - pole
    for k in range(1, lines.shape[0]):
        lines[k] += pole * lines[k - 1]
    lines[-1] *= -pole / (1.0 - pole)
    for k in range(lines.shape[0] - 2, -1, -1):
        np.subtract(lines[k + 1], lines[k], out=lines[k])
        lines[k] *= pole


def _down(sphere: _Sphere, rows: Array, period: float, first_column: int, length: int) -> Float:
    """Return light at photo rows, averaged over periods of rows, (rows.size, length, 3)."""
    reach = math.ceil(HALF_PERIODS * period) + 2
    first = math.floor(float(rows[0])) - reach
    last = math.ceil(float(rows[-1])) + reach
    blocks = make_blocks(rows - first, last - first + 1, step=period, beyond="extend")
    lines = np.empty((rows.size, length, 3), np.float32)
    for start in range(0, length, _STRIP):
        wanted = np.arange(first_column + start, first_column + min(start + _STRIP, length))
        for block in blocks:
            light = _light(
                sphere, np.arange(first + block.take.start, first + block.take.stop), wanted
            )
            strip = block.weights @ light.reshape(light.shape[0], -1)
            lines[block.to, start : start + wanted.size] = strip.reshape(-1, wanted.size, 3)
    return lines


def _light(sphere: _Sphere, rows: Index, columns: Index) -> Float:
    """Return the photo's light at rising rows and columns that may lie beyond it.

    Over a pole the sphere goes on half a turn farther round, behind it goes on at the other edge;
    beyond the edges of a part it is imagined.
    """
    high, wide = sphere.shape
    result = np.empty((rows.size, columns.size, 3), np.float32)
    # Rows in runs that are read in one go: none crosses a pole.
    beyond = np.zeros(rows.size, np.intp)
    if sphere.over[0]:
        beyond[rows < 0] = -1
    if sphere.over[1]:
        beyond[rows >= high] = 1
    if all(sphere.over):
        # A small sphere may be gone round more than once.
        beyond = rows // high
    for turn in np.unique(beyond):
        those = np.flatnonzero(beyond == turn)
        flipped = bool(turn % 2)
        part = rows[those] - high * turn
        if flipped:
            part = high - 1 - part
        at = columns + wide // 2 if flipped else columns
        result[those[0] : those[-1] + 1] = _part(sphere, part, at)
    return result


def _part(sphere: _Sphere, rows: Index, columns: Index) -> Float:
    """Return the light of rows and columns that lie on one side of the poles."""
    photo, beyond = sphere.scene.photo, sphere.scene.beyond
    high, wide = sphere.shape
    down = fold(rows, high, beyond)
    take_rows = slice(int(down.min()), int(down.max()) + 1)
    if sphere.around:
        across = np.mod(columns, wide)
        cuts = np.flatnonzero(np.diff(across) != 1) + 1
        runs = np.split(across, cuts)
        light = [photo.linear(take_rows, slice(int(r[0]), int(r[-1]) + 1)) for r in runs]
        block = light[0] if len(light) == 1 else np.concatenate(light, axis=1)
    else:
        across = fold(columns, wide, beyond)
        low = int(across.min())
        block = photo.linear(take_rows, slice(low, int(across.max()) + 1))
        if block.shape[1] != columns.size or across[0] != low:
            block = block[:, across - low]
        if beyond == "black":
            block = block * ((columns >= 0) & (columns < wide))[None, :, None]
    if block.shape[0] != rows.size or down[0] != take_rows.start or down[-1] < down[0]:
        block = block[down - take_rows.start]
    if beyond == "black":
        block = block * ((rows >= 0) & (rows < high))[:, None, None]
    return np.asarray(block, np.float32)


@lru_cache(maxsize=1)
def _response_table() -> tuple[Array, Float]:
    """Return frequencies in cycles per own period and the kernel's response there."""
    frequency = np.linspace(0.0, 0.8, 1601)
    left = response(frequency)
    # Beyond its end it is a trace, which is cut off: a photo's plain parts come again at 1.
    return frequency, left.astype(np.float32)


def _along(lines: Float, periods: Array, count: int) -> Float:
    """Average each line over periods of its own and give it `count` points, as spline coefficients.

    lines : (rows, columns, 3), taken as going on at their other end; periods : (rows,) in columns.
    Returns (rows, count, 3), the first point where the first column is.
    """
    from scipy import fft

    length = lines.shape[1]
    wave = np.arange(count // 2 + 1)
    frequency, left = _response_table()
    # Of a photo coarser than the grid the waves come again beyond its last; the kernel stops them.
    source = wave % length
    again = source > length // 2
    source = np.where(again, length - source, source)
    plain = count <= length
    cycles = wave / count
    # What a cubic spline's knots make of each wave is undone here (Schoenberg's B-splines).
    knots = (count / length) / (2.0 / 3.0 + np.cos(2.0 * np.pi * cycles) / 3.0)
    result = np.empty((lines.shape[0], count, 3), np.float32)
    rows_at_once = max(1, 300_000 // (3 * (length + count)))
    for start in range(0, lines.shape[0], rows_at_once):
        part = slice(start, start + rows_at_once)
        spectrum = fft.rfft(lines[part], axis=1)
        taken = spectrum[:, : wave.size] if plain else spectrum[:, source]
        if not plain and again.any():
            taken = np.where(again[None, :, None], taken.conj(), taken)
        gain = np.interp(periods[part, None] * (wave / length)[None, :], frequency, left, right=0.0)
        gain *= knots
        taken = taken * gain.astype(np.float32)[..., None]
        result[part] = fft.irfft(taken, n=count, axis=1)
    return result
