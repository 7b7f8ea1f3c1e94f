"""Irradiance to exposure: every point of light is spread by the kernel of its own place.

Light scatters: the scene's light is weighted by each mode's field, then spread by that mode's kernel
over the whole frame, and all are summed. Transforms are of the whole grid and kernels are never
cropped, so their long tails stay. Where the scene has a distance map, what arrives is divided by the
equally spread coverage, so that borders between unlike kernels neither lose nor invent light.
"""

import math
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from functools import lru_cache
from threading import Condition
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.fourier import irfft2, rfft2
from pinsim.render.illuminate import own_shade
from pinsim.render.kept import Kept
from pinsim.render.kernels import Kernels, PolarReader, chebyshev_values
from pinsim.render.plan import RenderPlan
from pinsim.render.project import FilmView
from pinsim.render.resample import ALIAS_FREE, response
from pinsim.threads import THREADS

Float = NDArray[np.float32]
Array = NDArray[np.float64]
Spectrum = NDArray[np.complex64]
Kernel = NDArray[np.inexact[Any]]
# A kernel on the grid of frequencies, made when rows of it are asked for: whole, it is as large as a
# spectrum, and there are some tens of them.
_Rows = Callable[[slice], Kernel]

LEAST_RESPONSE = 0.02
# A large grid is drawn with fewer modes: an rms error of 1e-3 of white at the frame's worst point,
# less than an 8-bit file rounds by. Small grids, where modes cost nothing, are drawn with all.
LARGE_GRID_PX = 600_000
LARGE_PICTURE_RMS = 1e-3
LARGE_SINGLE_OTF = 4e-2
# Of a kernel's average along the radius, as many as a short word tells apart: the nearest errs by
# less than 1e-4.
_RADIUS_STEPS = 1 << 16
_ROWS = 48  # of a spectrum at once
# Cells of the table a mode is read from, along each axis of frequency.
_TABLE_CELLS = 96


def spread(view: FilmView, *, kept: Kept | None = None, report: Reporter = ignore) -> Float:
    """Return the exposure of frame and margins, float32 (channels, rows, columns).

    kept : where transforms of this view are found and left for another look.
    """
    plan = view.plan
    kernels = plan.kernels
    count = len(kernels.fields)
    if plan.padded[0] * plan.padded[1] > LARGE_GRID_PX:
        count = kernels.modes_for(LARGE_PICTURE_RMS, LARGE_SINGLE_OTF)
    grid = _Frequencies(plan, count, view.compensate)
    fields = _Fields(plan, view.inverse_distance)
    light = _Sum(len(plan.material.channels), grid.shape)
    cover = None if view.inverse_distance is None else _Sum(len(light.spectra), grid.shape)
    planes = np.moveaxis(view.light, -1, 0)
    spectra = None if kept is None else kept.spectra

    def add(mode: int) -> None:
        try:
            _add_mode(mode, kernels, planes, grid, fields, light, cover, spectra)
        except BaseException:
            for total in (light, cover):
                if total is not None:
                    total.give_up()
            raise

    with ThreadPoolExecutor(THREADS) as pool:
        for done, _ in enumerate(pool.map(add, range(-1, count))):
            report(Progress(done, count + 1, "spreading the light"))
    exposure = _inverse(grid.shape_spectra(light.spectra), plan)
    if cover is not None:
        # Coverage is 1 up to what unlike kernels lose or invent at borders of distance.
        exposure /= np.maximum(_inverse(grid.shape_spectra(cover.spectra), plan), 0.1)
    shade = own_shade(plan)
    if shade is not None:
        exposure *= shade
    return exposure


class _Sum:
    """Spectra of the film's channels, added to from several threads, always in the same order.

    The order of a sum decides its last bit, and the same design must give the same picture.
    """

    def __init__(self, channels: int, shape: tuple[int, int]) -> None:
        self.spectra: Spectrum = np.zeros((channels, *shape), np.complex64)
        self._added = [0] * channels
        self._turn = Condition()
        self._broken = False

    def add(self, turn: int, channel: int, source: Spectrum, kernel: _Rows) -> None:
        """Add source times kernel as a channel's turn-th part, when those before it are in.

        Some rows at a time: what is made of them stays in the processor's cache.
        """
        total = self.spectra[channel]
        with self._turn:
            self._turn.wait_for(lambda: self._broken or self._added[channel] == turn)
        for start in range(0, total.shape[0], _ROWS):
            rows = slice(start, min(start + _ROWS, total.shape[0]))
            total[rows] += source[rows] * kernel(rows)
        with self._turn:
            self._added[channel] += 1
            self._turn.notify_all()

    def give_up(self) -> None:
        """Let nobody wait for a part that will never come."""
        with self._turn:
            self._broken = True
            self._turn.notify_all()


def _add_mode(
    mode: int,
    kernels: Kernels,
    planes: Float,
    grid: "_Frequencies",
    fields: "_Fields",
    light: _Sum,
    cover: _Sum | None,
    kept: dict[tuple[int, int], Spectrum] | None,
) -> None:
    """Weight the light by one mode's field (-1: the mean's, which is 1), transform, filter, add."""
    known = kept is not None and all((mode, band.band) in kept for band in kernels.bands)
    field = None if mode < 0 or known else fields.field(kernels.fields[mode])
    covered = None
    if cover is not None:
        white = np.ones(planes.shape[1:], np.float32) if field is None else field
        covered = rfft2(white)
    spectra: dict[int, Spectrum] = {}
    for number, band in enumerate(kernels.bands):
        same = [other.channel == band.channel for other in kernels.bands]
        turn = (mode + 1) * sum(same) + sum(same[:number])
        if kept is not None and known:
            spectra[band.band] = kept[mode, band.band]
        elif band.band not in spectra:
            plane = planes[band.band]
            spectra[band.band] = rfft2(plane if field is None else plane * field)
            if kept is not None:
                kept[mode, band.band] = spectra[band.band]
        kernel = grid.mean(number) if mode < 0 else grid.mode(number, mode)
        light.add(turn, band.channel, spectra[band.band], kernel)
        if all(other.band != band.band for other in kernels.bands if other is not band):
            del spectra[band.band]
        if cover is not None and covered is not None:
            cover.add(turn, band.channel, covered, kernel)


def _inverse(spectra: Spectrum, plan: RenderPlan) -> Float:
    return irfft2(spectra, plan.padded, threads=THREADS)


class _Fields:
    """Where each mode is at work: smooth fields over film and distance, on the padded grid."""

    def __init__(self, plan: RenderPlan, inverse_distance: Float | None) -> None:
        span = plan.kernels.range
        _, count_u, count_v, count_m = plan.kernels.fields.shape
        self._across = chebyshev_values(count_u, *span.u_mm, plan.right_mm()).T
        self._down = chebyshev_values(count_v, *span.v_mm, plan.up_mm())
        # Chebyshev polynomials of each point's m; the first is 1 everywhere.
        self._by_distance: list[Float] = []
        if inverse_distance is not None and count_m > 1:
            low, high = span.scale
            scale = 1.0 + np.float32(plan.camera.focal_length_mm) * inverse_distance
            unit = np.clip(
                (2.0 * scale - np.float32(low + high)) / np.float32(high - low), -1.0, 1.0
            )
            before, now = np.ones_like(unit), unit
            for _ in range(count_m - 1):
                self._by_distance.append(now)
                before, now = now, 2.0 * unit * now - before

    def field(self, coefficients: Array) -> Float:
        """Return a field, float32 (rows, columns), from its coefficients (u, v, m)."""
        single = coefficients.astype(np.float32)
        total: Float = self._down @ (single[:, :, 0].T @ self._across)
        for k, polynomial in enumerate(self._by_distance, start=1):
            part = self._down @ (single[:, :, k].T @ self._across)
            part *= polynomial
            total += part
        return total


class _Frequencies:
    """The grid's frequencies, as rfft2 orders them, and kernels read there."""

    def __init__(self, plan: RenderPlan, modes: int, compensate: bool) -> None:
        rows, columns = plan.padded
        pitch = plan.pitch_mm
        across = np.asarray(np.fft.rfftfreq(columns, pitch), np.float64)
        # Rows run down and v up, so a row frequency is minus a film frequency.
        down = np.asarray(-np.fft.fftfreq(rows, pitch), np.float64)
        self.shape = (rows, across.size)
        self._window = [
            _pixel_response(axis * pitch, plan.averaged, compensate).astype(np.float32)
            for axis in (down, across)
        ]
        end = min(float(plan.kernels.radii[-1]), 0.5 / pitch)
        cells = (
            np.linspace(-end, end, 2 * _TABLE_CELLS + 1),
            np.linspace(0.0, end, _TABLE_CELLS + 1),
        )
        self._bands = plan.kernels.bands
        self._reader = PolarReader(
            plan.kernels.radii,
            np.hypot(cells[0][:, None], cells[1][None, :]),
            np.arctan2(cells[0][:, None], cells[1][None, :]),
        )
        # Polar tables are read through coarser square ones: each band's mean, then its modes.
        polar = []
        for band in self._bands:
            average = band.mean.real.mean(axis=1)[:, None]
            polar += [band.share * (band.mean - average), *(band.share * band.modes[:modes])]
        self._tables = np.split(self._reader.at(np.stack(polar)), len(self._bands))
        # Each row of frequencies lies between two rows of cells; beyond them is a row of nothing.
        place = np.clip((down + end) * (_TABLE_CELLS / end), 0.0, 2 * _TABLE_CELLS - 1e-6)
        cell = np.where(np.abs(down) <= end, place.astype(np.intp), 2 * _TABLE_CELLS + 1)
        self._cells_down = (cell, (place - np.floor(place)).astype(np.float32)[:, None])
        self._cells_across = _hats(across, cells[1])
        self._corner = math.sqrt(0.5) / pitch
        self._steps = _radius_steps(rows, columns)

    def shape_spectra(self, spectra: Spectrum) -> Spectrum:
        """Give back what resampling dimmed, or average pixels: the same for all kernels, so once."""
        # A complex number is two floats side by side: numpy multiplies these faster.
        across = np.repeat(self._window[1], 2)

        def shape(start: int) -> None:
            rows = slice(start, start + _ROWS)
            window = self._window[0][rows, None] * across
            for plane in spectra:
                plane[rows].view(np.float32)[:] *= window

        with ThreadPoolExecutor(THREADS) as pool:
            for _ in pool.map(shape, range(0, spectra.shape[1], _ROWS)):
                pass
        return spectra

    def mean(self, number: int) -> _Rows:
        """Return a band's mean kernel at every frequency.

        Its average over directions is read along the radius, which keeps the point it has at zero
        frequency, where the long tails are; the rest is read as modes are.
        """
        band = self._bands[number]
        radius, fine = self._reader.along(band.mean.real.mean(axis=1))
        steps = np.linspace(0.0, self._corner, _RADIUS_STEPS)
        # Nothing beyond the end.
        table = (band.share * np.interp(steps, radius, fine, right=0.0)).astype(np.float32)
        rest = self.mode(number, -1)

        def rows(some: slice) -> Kernel:
            kernel = rest(some)
            kernel += np.take(table, self._steps[some], mode="clip")
            return kernel

        return rows

    def mode(self, number: int, mode: int) -> _Rows:
        """Return a band's mode at every frequency, read from its square table linearly.

        Mode -1 is the mean without its average over directions.
        """
        table = self._tables[number][mode + 1]
        wide = np.zeros((table.shape[0] + 1, self._cells_across.shape[0]), table.dtype)
        np.matmul(table, self._cells_across.T, out=wide[:-1])
        step = np.zeros_like(wide)
        np.subtract(wide[1:-1], wide[:-2], out=step[:-2])

        def rows(some: slice) -> Kernel:
            cell, share = self._cells_down[0][some], self._cells_down[1][some]
            kernel: Kernel = np.take(step, cell, axis=0, mode="clip")
            kernel *= share
            kernel += np.take(wide, cell, axis=0, mode="clip")
            return kernel

        return rows


@lru_cache(maxsize=2)
def _radius_steps(rows: int, columns: int) -> NDArray[np.uint16]:
    """Return each frequency's |nu| in steps of which _RADIUS_STEPS reach the grid's corner."""
    down = np.fft.fftfreq(rows).astype(np.float32)[:, None]
    across = np.fft.rfftfreq(columns).astype(np.float32)
    steps = np.empty((rows, across.size), np.uint16)
    for start in range(0, rows, _ROWS):
        some = slice(start, start + _ROWS)
        radius = np.hypot(down[some], across)
        radius *= np.float32((_RADIUS_STEPS - 1) / math.sqrt(0.5))
        radius += np.float32(0.5)
        steps[some] = np.minimum(radius, _RADIUS_STEPS - 1)
    return steps


def _hats(axis: Array, cells: Array) -> Float:
    """Return weights of linear interpolation, (axis, cells); nothing beyond the cells."""
    step = cells[1] - cells[0]
    near = np.maximum(1.0 - np.abs(axis[:, None] - cells) / step, 0.0)
    return np.asarray(near, np.float32)


@lru_cache(maxsize=1)
def _response_table() -> tuple[Array, Array]:
    """Return cycles per pixel up to the grid's end and what resampling leaves there."""
    fine = np.linspace(0.0, 0.5, 801)  # linear between them to 1e-5
    return fine, response(fine / ALIAS_FREE)


def _pixel_response(cycles_per_px: Array, averaged: bool, compensate: bool) -> Array:
    """Return what spreading does besides: give back what resampling dimmed, or average pixels."""
    if averaged:
        # A coarser picture shows each pixel's mean, not a sample that detail could trick.
        return np.asarray(np.sinc(cycles_per_px))
    if not compensate:
        return np.ones_like(cycles_per_px)
    left = np.interp(np.abs(cycles_per_px), *_response_table())
    # Below this the grid ends, and with it all but a trace of the transfer function.
    return np.where(left > LEAST_RESPONSE, 1.0 / np.maximum(left, LEAST_RESPONSE), 0.0)
