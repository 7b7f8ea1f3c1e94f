"""The part of a panorama that some film sees, brought to a grid of the film's own scale.

First down the meridians, then along each circle of latitude, whose columns crowd towards the poles and
are thinned as much as they crowd. Both are band-limited, so a photo finer than the film is averaged and
one that is coarser interpolated. The grid is read between its points by cubic splines.
"""

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pinsim.render.resample import HALF_PERIODS, fold, make_blocks, response
from pinsim.scene import Scene

Float = NDArray[np.float32]
Array = NDArray[np.float64]
Index = NDArray[np.intp]

# The resampling kernel's response is 1 up to this share of its cut-off, and has ended at END.
FLAT, END = 0.75, 1.25
# Grid points for each period of the finest wave that must come through: splines read it to 3e-3 there,
# and of what the photo's kernel lets through beyond, they fold back less.
_PER_PERIOD = 6.0
_LEAST_STEP_PX = 1.0 / 3.0  # of that grid, in photo pixels; a photo holds nothing finer
_SPLINE_REACH = 8  # grid points beyond which a spline has forgotten its border
_POLE_WAVES = 3.0  # around a pole, waves that reach a point however near it is
_STRIP = 1024  # photo columns linearised at once: the strip stays in the processor's cache
_READ_AT_ONCE = 16384


@dataclass(frozen=True, slots=True, eq=False)
class Sphere:
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


def sphere_of(scene: Scene) -> Sphere:
    """Return a panorama's place on the sphere."""
    place = scene.place
    rows, columns = scene.photo.shape
    around = abs(place.full_width_px - columns) < 0.5
    return Sphere(
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


@dataclass(frozen=True, slots=True, eq=False)
class Grid:
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


def grid_for(
    sphere: Sphere, finest: tuple[float, float], height: Array, row: Array, column: Array
) -> Grid:
    """Bring the part of the photo that a square's points look at to the square's scale.

    finest : wave that must come through, cycles per photo pixel down and, at the horizon, across.
    height, row, column : of the points, any shape.
    """
    from scipy.fft import next_fast_len

    # Down the meridians.
    step_row = max(1.0 / (_PER_PERIOD * finest[0]), _LEAST_STEP_PX)
    period_row = max(1.0, 0.5 * FLAT / finest[0])
    first_row = float(row.min()) - _SPLINE_REACH * step_row
    count = math.ceil((float(row.max()) - first_row) / step_row) + 1 + _SPLINE_REACH
    rows = np.asarray(first_row + step_row * np.arange(count, dtype=np.float64))
    # Along each circle of latitude; columns are as wide as its radius.
    radius = np.abs(np.cos((sphere.horizon_row - rows) / sphere.row_per_rad))
    waves = finest[1] * radius + _POLE_WAVES / sphere.turn_px
    periods = np.maximum(1.0, 0.5 * FLAT / waves)
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
    return Grid(
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


def _down(sphere: Sphere, rows: Array, period: float, first_column: int, length: int) -> Float:
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


def _light(sphere: Sphere, rows: Index, columns: Index) -> Float:
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


def _part(sphere: Sphere, rows: Index, columns: Index) -> Float:
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
