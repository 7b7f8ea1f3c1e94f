"""Irradiance to exposure: every point of light is spread by the kernel of its own place.

Light scatters: the scene's light is weighted by each mode's field, then spread by that mode's kernel
over the whole frame, and all are summed. Transforms are of the whole grid and kernels are never
cropped, so their long tails stay. Where the scene has a distance map, what arrives is divided by the
equally spread coverage, so that borders between unlike kernels neither lose nor invent light.
"""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from threading import Lock

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.kernels import BandKernels, Values, chebyshev_values, polar_reader
from pinsim.render.plan import RenderPlan
from pinsim.render.project import FilmView
from pinsim.render.resample import ALIAS_FREE, response

Float = NDArray[np.float32]
Array = NDArray[np.float64]
Spectrum = NDArray[np.complex64]

_THREADS = 2
LEAST_RESPONSE = 0.02
# A large grid is a smooth picture looked at as a whole: it is drawn with fewer modes, an error of
# 6e-4 of white at the frame's worst point; small grids, where modes cost nothing, with all of them.
LARGE_GRID_PX = 600_000
LARGE_PICTURE_RMS = 6e-4
LARGE_SINGLE_OTF = 2e-2
# Cells of the table a mode is read from, along each axis of frequency.
_TABLE_CELLS = 96


def spread(view: FilmView, *, report: Reporter = ignore) -> Float:
    """Return the exposure of frame and margins, float32 (channels, rows, columns)."""
    plan = view.plan
    grid = _Frequencies(plan, view.compensate)
    fields = _Fields(plan, view.inverse_distance)
    planes = np.moveaxis(view.light, -1, 0)
    light = _Sum(len(plan.material.channels), grid.shape)
    cover = light if view.inverse_distance is None else _Sum(light.spectra.shape[0], grid.shape)
    jobs: list[Callable[[], None]] = []
    for band in plan.kernels.bands:
        count = len(band.modes)
        if plan.padded[0] * plan.padded[1] > LARGE_GRID_PX:
            count = band.modes_for(LARGE_PICTURE_RMS, LARGE_SINGLE_OTF)
        for mode in range(-1, count):
            jobs.append(_Job(band, mode, planes[band.band], grid, fields, light))
            if view.inverse_distance is not None:
                jobs.append(_Job(band, mode, None, grid, fields, cover))
    with ThreadPoolExecutor(_THREADS) as pool:
        for done, _ in enumerate(pool.map(lambda job: job(), jobs)):
            report(Progress(done, len(jobs), "spreading the light"))
    exposure = _inverse(light.spectra, plan)
    if view.inverse_distance is not None:
        # Coverage is 1 up to what unlike kernels lose or invent at borders of distance.
        exposure /= np.maximum(_inverse(cover.spectra, plan), 0.1)
    return exposure


class _Sum:
    """Spectra of the film's channels, added to from several threads."""

    def __init__(self, channels: int, shape: tuple[int, int]) -> None:
        self.spectra: Spectrum = np.zeros((channels, *shape), np.complex64)
        self._locks = [Lock() for _ in range(channels)]

    def add(self, channel: int, spectrum: Spectrum) -> None:
        with self._locks[channel]:
            self.spectra[channel] += spectrum


@dataclass(frozen=True, slots=True, eq=False)
class _Job:
    """One mode of one band, -1 for the mean: weight the light, transform, filter, add."""

    band: BandKernels
    mode: int
    light: Float | None  # None: coverage, a scene that is white everywhere
    grid: "_Frequencies"
    fields: "_Fields"
    total: _Sum

    def __call__(self) -> None:
        if self.mode < 0:
            source = self.light if self.light is not None else self.fields.ones()
            kernel = self.grid.mean(self.band)
        else:
            source = self.fields.field(self.band, self.mode)
            if self.light is not None:
                source *= self.light
            kernel = self.grid.mode(self.band, self.mode)
        spectrum = np.asarray(fft.rfft2(source))
        spectrum *= kernel
        self.total.add(self.band.channel, spectrum)


def _inverse(spectra: Spectrum, plan: RenderPlan) -> Float:
    return np.asarray(fft.irfft2(spectra, s=plan.padded, workers=_THREADS, overwrite_x=True))


class _Fields:
    """Where each mode is at work: smooth fields over film and distance, on the padded grid."""

    def __init__(self, plan: RenderPlan, inverse_distance: Float | None) -> None:
        self._plan = plan
        self._u, self._v = plan.right_mm(), plan.up_mm()
        self._scale: Float | None = None
        if inverse_distance is not None:
            self._scale = 1.0 + np.float32(plan.camera.focal_length_mm) * inverse_distance

    def ones(self) -> Float:
        return np.ones(self._plan.padded, np.float32)

    def field(self, band: BandKernels, mode: int) -> Float:
        """Return the field of a mode, float32 (rows, columns)."""
        coefficients = band.fields[mode].astype(np.float32)
        count_u, count_v, count_m = coefficients.shape
        span = self._plan.kernels.range
        across = chebyshev_values(count_u, *span.u_mm, self._u)
        down = chebyshev_values(count_v, *span.v_mm, self._v)
        total: Float | None = None
        for k in range(count_m):
            part = down @ (coefficients[:, :, k].T @ across.T)
            if k > 0 and self._scale is not None:
                part *= self._polynomial(k)
            total = part if total is None else np.add(total, part, out=total)
        if total is None:
            raise AssertionError("a field without coefficients")
        return total

    def _polynomial(self, k: int) -> Float:
        """Return the Chebyshev polynomial of degree k of each point's m."""
        if self._scale is None:
            raise AssertionError("no distances")
        low, high = self._plan.kernels.range.scale
        unit = np.clip(
            (2.0 * self._scale - np.float32(low + high)) / np.float32(high - low), -1.0, 1.0
        )
        before, now = np.ones_like(unit), unit
        for _ in range(k - 1):
            before, now = now, 2.0 * unit * now - before
        return now


class _Frequencies:
    """The grid's frequencies, as rfft2 orders them, and kernels read there."""

    def __init__(self, plan: RenderPlan, compensate: bool) -> None:
        rows, columns = plan.padded
        self._across = fft.rfftfreq(columns, plan.pitch_mm)
        # Rows run down and v up, so a row frequency is minus a film frequency.
        self._down = -fft.fftfreq(rows, plan.pitch_mm)
        self.shape = (rows, self._across.size)
        pitch = plan.pitch_mm
        self._windows = tuple(
            _pixel_response(axis * pitch, plan.averaged, compensate)
            for axis in (self._down, self._across)
        )
        ends = [min(plan.kernels.bands[0].radii[-1], 0.5 / pitch)] * 2
        self._cells = [
            np.linspace(-ends[0], ends[0], 2 * _TABLE_CELLS + 1),
            np.linspace(0.0, ends[1], _TABLE_CELLS + 1),
        ]
        self._hats = [
            _hats(axis, cells) * window[:, None].astype(np.float32)
            for axis, cells, window in zip(
                (self._down, self._across), self._cells, self._windows, strict=True
            )
        ]

    def mean(self, band: BandKernels) -> NDArray[np.floating] | Spectrum:
        """Return the mean kernel at every frequency, read exactly."""
        down, across = self._down[:, None], self._across[None, :]
        values = polar_reader(band)(band.mean, np.hypot(down, across), np.arctan2(down, across))
        return _single(values * np.outer(*self._windows) * band.share)

    def mode(self, band: BandKernels, mode: int) -> NDArray[np.floating] | Spectrum:
        """Return a mode at every frequency, read from a coarser square table."""
        down, across = self._cells[0][:, None], self._cells[1][None, :]
        table = polar_reader(band)(
            band.modes[mode], np.hypot(down, across), np.arctan2(down, across)
        )
        table = _single(table * band.share)
        return np.asarray(self._hats[0] @ (table @ self._hats[1].T))


def _single(values: Values) -> NDArray[np.floating] | Spectrum:
    return values.astype(np.complex64 if np.iscomplexobj(values) else np.float32)


def _hats(axis: Array, cells: Array) -> Float:
    """Return weights of linear interpolation, (axis, cells); nothing beyond the cells."""
    step = cells[1] - cells[0]
    near = np.maximum(1.0 - np.abs(axis[:, None] - cells) / step, 0.0)
    return near.astype(np.float32)


def _pixel_response(cycles_per_px: Array, averaged: bool, compensate: bool) -> Array:
    """Return what spreading does besides: give back what resampling dimmed, or average pixels."""
    if averaged:
        # A coarser picture shows each pixel's mean, not a sample that detail could trick.
        return np.asarray(np.sinc(cycles_per_px))
    if not compensate:
        return np.ones_like(cycles_per_px)
    left = response(cycles_per_px / ALIAS_FREE)
    # Below this the grid ends, and with it all but a trace of the transfer function.
    return np.where(left > LEAST_RESPONSE, 1.0 / np.maximum(left, LEAST_RESPONSE), 0.0)
