"""Irradiance to exposure: every point of light is spread by the kernel of its own place.

Light scatters: the scene's light is weighted by each mode's field, then spread by that mode's kernel
over the whole frame, and all are summed. Transforms are of the whole grid and kernels are never
cropped, so their long tails stay. Where the scene has a distance map, what arrives is divided by the
equally spread coverage, so that borders between unlike kernels neither lose nor invent light.
"""

from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from threading import Lock

import numpy as np
from numpy.typing import NDArray

from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.fourier import irfft2, rfft2
from pinsim.render.frequencies import Frequencies, Strip, Tables
from pinsim.render.illuminate import own_shade
from pinsim.render.kept import Kept
from pinsim.render.kernels import chebyshev_values
from pinsim.render.plan import RenderPlan
from pinsim.render.project import FilmView
from pinsim.threads import THREADS

Float = NDArray[np.float32]
Array = NDArray[np.float64]
Spectrum = NDArray[np.complex64]

# A large grid is drawn with fewer modes: an rms error of 1e-3 of white at the frame's worst point,
# less than an 8-bit file rounds by. Small grids, where modes cost nothing, are drawn with all.
LARGE_GRID_PX = 150_000
LARGE_PICTURE_RMS = 1e-3
LARGE_SINGLE_OTF = 4e-2
_STRIP = 32  # rows of a field at once
COVERAGE = -1  # in place of a photo band: what is spread is 1 everywhere


def spread(view: FilmView, *, kept: Kept | None = None, report: Reporter = ignore) -> Float:
    """Return the exposure of frame and margins, float32 (channels, rows, columns).

    kept : where transforms of this view are found and left for another look.
    """
    plan = view.plan
    count = len(plan.kernels.fields)
    if plan.padded[0] * plan.padded[1] > LARGE_GRID_PX:
        count = plan.kernels.modes_for(LARGE_PICTURE_RMS, LARGE_SINGLE_OTF)
    grid = Frequencies(plan, count, view.compensate)
    transforms = _Transforms(view, {} if kept is None else kept.spectra)
    channels = len(plan.material.channels)
    light = np.zeros((channels, *grid.shape), np.complex64)
    cover = None if view.inverse_distance is None else np.zeros_like(light)
    done = 0
    with ThreadPoolExecutor(THREADS) as pool:
        # What is not kept is made and used up a few modes at a time.
        for modes in _in_groups(range(-1, count), THREADS if kept is None else count + 1):
            for _ in pool.map(transforms.make, modes):
                report(Progress(done, count + 1, "spreading the light"))
                done += 1
            tables = list(pool.map(grid.tables, modes))

            def add(strip: Strip, modes: list[int] = modes, tables: list[Tables] = tables) -> None:
                grid.add(strip, light, modes, tables, transforms.made)
                if cover is not None:
                    grid.add(strip, cover, modes, tables, transforms.made, source=COVERAGE)
                if modes[-1] + 1 == count:
                    for totals in (light,) if cover is None else (light, cover):
                        grid.shape_strip(strip, totals)

            for _ in pool.map(add, grid.strips):
                pass
            if kept is None:
                transforms.made.clear()
    exposure = irfft2(light, plan.padded, threads=THREADS)
    if cover is not None:
        # Coverage is 1 up to what unlike kernels lose or invent at borders of distance.
        exposure /= np.maximum(irfft2(cover, plan.padded, threads=THREADS), 0.1)
    shade = own_shade(plan)
    if shade is not None:
        exposure *= shade
    return exposure


def _in_groups(modes: range, size: int) -> Iterator[list[int]]:
    for start in range(0, len(modes), size):
        yield list(modes[start : start + size])


class _Transforms:
    """Transforms of the scene's light, weighted by each mode's field, by mode and photo band.

    Mode -1 is the mean, whose field is 1. With distances, COVERAGE is weighted and transformed, too.
    """

    def __init__(self, view: FilmView, made: dict[tuple[int, int], Spectrum]) -> None:
        self.made = made
        self._view = view
        self._planes = np.moveaxis(view.light, -1, 0)
        self._wanted = sorted({band.band for band in view.plan.kernels.bands})
        if view.inverse_distance is not None:
            self._wanted.append(COVERAGE)
        self._lock = Lock()
        self._fields: _Fields | None = None

    def _field(self, mode: int) -> Float:
        with self._lock:
            if self._fields is None:
                self._fields = _Fields(self._view.plan, self._view.inverse_distance)
        return self._fields.field(self._view.plan.kernels.fields[mode])

    def make(self, mode: int) -> None:
        """Make what is missing of a mode."""
        missing = [band for band in self._wanted if (mode, band) not in self.made]
        if not missing:
            return
        field = None if mode < 0 else self._field(mode)
        for band in missing:
            if band != COVERAGE:
                plane = self._planes[band]
                self.made[mode, band] = rfft2(plane if field is None else plane * field)
            elif field is not None:
                self.made[mode, band] = rfft2(field)
            else:
                self.made[mode, band] = _transform_of_one(self._planes.shape[1:])


def _transform_of_one(shape: tuple[int, ...]) -> Spectrum:
    spectrum = np.zeros((shape[0], shape[1] // 2 + 1), np.complex64)
    spectrum[0, 0] = shape[0] * shape[1]
    return spectrum


class _Fields:
    """Where each mode is at work: smooth fields over film and distance, on the padded grid."""

    def __init__(self, plan: RenderPlan, inverse_distance: Float | None) -> None:
        span = plan.kernels.range
        _, count_u, count_v, count_m = plan.kernels.fields.shape
        self._across = chebyshev_values(count_u, *span.u_mm, plan.right_mm()).T
        self._down = chebyshev_values(count_v, *span.v_mm, plan.up_mm())
        # Chebyshev polynomials of each point's m; the first is 1 everywhere.
        self._by_distance: list[Float] = []
        if inverse_distance is None or count_m == 1:
            return
        self._by_distance = [
            np.empty(inverse_distance.shape, np.float32) for _ in range(count_m - 1)
        ]
        low, high = span.scale
        slope = np.float32(2.0 * plan.camera.focal_length_mm / (high - low))
        offset = np.float32((2.0 - low - high) / (high - low))

        def fill(start: int) -> None:
            rows = slice(start, start + _STRIP)
            unit = inverse_distance[rows] * slope
            unit += offset
            np.clip(unit, -1.0, 1.0, out=unit)
            before: Float | np.float32 = np.float32(1.0)
            now = unit
            for polynomial in self._by_distance:
                polynomial[rows] = now
                before, now = now, np.float32(2.0) * unit * now - before

        with ThreadPoolExecutor(THREADS) as pool:
            for _ in pool.map(fill, range(0, inverse_distance.shape[0], _STRIP)):
                pass

    def field(self, coefficients: Array) -> Float:
        """Return a field, float32 (rows, columns), from its coefficients (u, v, m)."""
        single = coefficients.astype(np.float32)
        rows, columns = self._down.shape[0], self._across.shape[1]
        total = np.empty((rows, columns), np.float32)
        if not self._by_distance:
            return np.matmul(self._down, single[:, :, 0].T @ self._across, out=total)
        across = [single[:, :, k].T @ self._across for k in range(single.shape[2])]
        part = np.empty((_STRIP, columns), np.float32)
        for start in range(0, rows, _STRIP):  # what is added up stays in the processor's cache
            some = slice(start, min(start + _STRIP, rows))
            strip, scratch = total[some], part[: min(_STRIP, rows - start)]
            np.matmul(self._down[some], across[0], out=strip)
            for k, polynomial in enumerate(self._by_distance, start=1):
                np.matmul(self._down[some], across[k], out=scratch)
                scratch *= polynomial[some]
                strip += scratch
        return total
