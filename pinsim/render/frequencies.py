"""Kernels at every frequency of a grid, and the sums of what they leave of a scene's transforms.

A kernel on the grid is as large as a transform, and there are some tens of them; so it is read from
small tables when a strip of rows is asked for, stays in the processor's cache, and is used there by
all that wants it. Each strip has its own sums, added up in an order that nothing changes: the order
of a sum decides its last bit, and the same design must give the same picture.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.render.kernels import PolarReader
from pinsim.render.plan import RenderPlan
from pinsim.render.resample import ALIAS_FREE, response

Float = NDArray[np.float32]
Array = NDArray[np.float64]
Spectrum = NDArray[np.complex64]
# Tables of one mode, one for each band, as wide as the grid. Real ones hold every value twice: a
# complex number is two floats side by side, and numpy multiplies floats by floats fastest.
Tables = list[NDArray[np.inexact[Any]]]

LEAST_RESPONSE = 0.02
# Of a kernel's average along the radius, as many as a short word tells apart: the nearest errs by
# less than 1e-4.
_RADIUS_STEPS = 1 << 16
_ROWS = 48  # of a spectrum at once
# Cells of the square tables from zero to the kernels' end; a grid that ends before needs fewer.
_CELLS = 96
_LEAST_CELLS = 24


@dataclass(frozen=True, slots=True, eq=False)
class Strip:
    """Some rows of frequencies, the rows of cells they lie among, and the weights of these."""

    rows: slice
    cells: slice
    weights: Float


class Frequencies:
    """The grid's frequencies, as rfft2 orders them, and kernels read there.

    shape : rows and columns of a transform. strips : the rows where kernels are not zero.
    """

    def __init__(self, plan: RenderPlan, modes: int, compensate: bool) -> None:
        rows, columns = plan.padded
        pitch = plan.pitch_mm
        across = np.asarray(np.fft.rfftfreq(columns, pitch), np.float64)
        # Rows run down and v up, so a row frequency is minus a film frequency.
        down = np.asarray(-np.fft.fftfreq(rows, pitch), np.float64)
        self.shape = (rows, across.size)
        end = min(float(plan.kernels.radii[-1]), 0.5 / pitch)
        self._columns = int(np.count_nonzero(across <= end * (1.0 + 1e-12)))
        across = across[: self._columns]
        self._window = [
            _pixel_response(axis * pitch, plan.averaged, compensate).astype(np.float32)
            for axis in (down, across)
        ]
        self._bands = plan.kernels.bands
        count = max(_LEAST_CELLS, math.ceil(_CELLS * end / float(plan.kernels.radii[-1])))
        cells = np.linspace(0.0, end, count + 1)
        self._read_tables(plan, modes, cells)
        apart = np.abs(across - cells[:, None]) * (count / end)
        self._hats = np.maximum(1.0 - apart, 0.0).astype(np.float32)
        self._steps = _radius_steps(rows, columns)
        self.strips = _strips(down, end, count)

    def _read_tables(self, plan: RenderPlan, modes: int, across: Array) -> None:
        """Read each band's mean and modes from their polar tables to square ones.

        The mean's average over directions is kept along the radius, which keeps the point it has at
        zero frequency, where the long tails are.
        """
        down = np.concatenate([-across[:0:-1], across])[:, None]
        reader = PolarReader(plan.kernels.radii, np.hypot(down, across), np.arctan2(down, across))
        steps = np.linspace(0.0, math.sqrt(0.5) / plan.pitch_mm, _RADIUS_STEPS)
        self._radial, polar = [], []
        for band in self._bands:
            average = band.mean.real.mean(axis=1)
            radius, fine = reader.along(average)
            # Nothing beyond the end.
            radial = band.share * np.interp(steps, radius, fine, right=0.0)
            self._radial.append(radial.astype(np.float32))
            polar.append(band.share * (band.mean - average[:, None]))
            polar.extend(band.share * band.modes[:modes])
        self._square = np.split(reader.at(np.stack(polar)), len(self._bands))

    def tables(self, mode: int) -> Tables:
        """Return a mode's tables as wide as the grid; mode -1 is the mean."""
        wide = [square[mode + 1] @ self._hats for square in self._square]
        return [one if np.iscomplexobj(one) else np.repeat(one, 2, axis=1) for one in wide]

    def add(
        self,
        strip: Strip,
        totals: Spectrum,
        modes: Sequence[int],
        tables: Sequence[Tables],
        transforms: Mapping[tuple[int, int], Spectrum],
        *,
        source: int | None = None,
    ) -> None:
        """Add to a strip of each channel's total what the kernels of some modes leave.

        totals : (channels, *shape). transforms : by mode and photo band, or by mode and `source`
        for all bands.
        """
        for mode, wide in zip(modes, tables, strict=True):
            for number, band in enumerate(self._bands):
                part = transforms[mode, band.band if source is None else source]
                scene = part[strip.rows, : self._columns]
                total: NDArray[Any] = totals[band.channel, strip.rows, : self._columns]
                kernel: NDArray[Any] = strip.weights @ wide[number][strip.cells]
                if mode < 0:
                    self._add_radial(kernel, strip, number)
                if kernel.dtype == np.float32:
                    kernel *= scene.view(np.float32)
                    sums = total.view(np.float32)
                    sums += kernel
                else:
                    kernel *= scene
                    total += kernel

    def _add_radial(self, kernel: NDArray[Any], strip: Strip, number: int) -> None:
        steps = self._steps[strip.rows, : self._columns]
        radial = np.take(self._radial[number], steps, mode="clip")
        if kernel.dtype == np.float32:
            kernel[:, ::2] += radial
            kernel[:, 1::2] += radial
        else:
            kernel += radial

    def shape_strip(self, strip: Strip, totals: Spectrum) -> None:
        """Give back what resampling dimmed, or average pixels: the same for all kernels, so once."""
        window = self._window[0][strip.rows, None] * np.repeat(self._window[1], 2)
        for total in totals[:, strip.rows, : self._columns]:
            sums = total.view(np.float32)
            sums *= window


def _strips(down: Array, end: float, cells: int) -> list[Strip]:
    """Return the strips of rows up to the end; their frequencies go one way within each."""
    place = np.clip((down + end) * (cells / end), 0.0, 2 * cells - 1e-6)
    cell = place.astype(np.intp)
    share = (place - cell).astype(np.float32)
    inside = np.abs(down) <= end * (1.0 + 1e-12)
    half = (down.size + 1) // 2
    found = []
    for first, last in ((0, half), (half, down.size)):
        seen = first + np.flatnonzero(inside[first:last])
        for start in range(0, seen.size, _ROWS):
            rows = slice(int(seen[start]), int(seen[min(start + _ROWS, seen.size) - 1]) + 1)
            low = int(cell[rows].min())
            high = int(cell[rows].max()) + 2
            weights = np.zeros((rows.stop - rows.start, high - low), np.float32)
            each = np.arange(len(weights))
            weights[each, cell[rows] - low] = 1.0 - share[rows]
            weights[each, cell[rows] - low + 1] = share[rows]
            found.append(Strip(rows, slice(low, high), weights))
    return found


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
