"""Irradiance to exposure: every point of light is spread by the hole's transfer function.

One whole-grid transform each way; kernels are never cropped, so their long tails stay. Points at
different distances are spread each by its own kernel and divided by the equally spread coverage.
"""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.plan import RenderPlan, band_tables
from pinsim.render.project import FilmView
from pinsim.render.resample import ALIAS_FREE, response

Float = NDArray[np.float32]
Spectrum = NDArray[np.complex64]

_THREADS = 2
LEAST_RESPONSE = 0.02


def spread(view: FilmView, *, report: Reporter = ignore) -> Float:
    """Return the exposure of frame and margins, float32 (channels, rows, columns)."""
    plan = view.plan
    filters = _Filters(plan, view.compensate)
    planes = np.moveaxis(view.light, -1, 0)
    if view.inverse_distance is None:
        report(Progress(0, 1, "spreading the light"))
        exposure = _inverse(filters.apply(_forward(planes), plan.distances_mm[0]), plan)
    else:
        exposure = _spread_layers(view, planes, view.inverse_distance, filters, report)
    # A hard edge may ring a little below black; film cannot be exposed by less than nothing.
    np.maximum(exposure, 0.0, out=exposure)
    return exposure


def _spread_layers(
    view: FilmView,
    planes: Float,
    inverse_distance: Float,
    filters: "_Filters",
    report: Reporter,
) -> Float:
    plan = view.plan
    light: Spectrum | None = None
    cover: Spectrum | None = None
    total = len(plan.distances_mm)
    for i, share in enumerate(_shares(plan, inverse_distance)):
        distance = plan.distances_mm[i]
        report(Progress(i, total, f"light from {distance / 1000.0:.3g} m"))
        if share is None:
            continue
        layer = filters.apply(_forward(planes * share), distance)
        layer_cover = filters.apply_coverage(_forward(share), distance)
        light = layer if light is None else np.add(light, layer, out=light)
        cover = layer_cover if cover is None else np.add(cover, layer_cover, out=cover)
    if light is None or cover is None:
        raise AssertionError("a distance map without any layer")
    # Coverage sums to 1 up to what layers of unlike kernels lose or invent at their borders.
    return np.asarray(_inverse(light, plan) / np.maximum(_inverse(cover, plan), 0.1), np.float32)


def _shares(plan: RenderPlan, inverse_distance: Float) -> Iterator[Float | None]:
    """Yield, for each layer, how much of each point belongs to it; None for an empty layer.

    Between two layers a point is shared in proportion to its m = 1 + z/zo; shares sum to 1.
    """
    scale = 1.0 + plan.camera.focal_length_mm * inverse_distance
    knots = [1.0 + plan.camera.focal_length_mm / d for d in plan.distances_mm]
    for i, knot in enumerate(knots):
        share = np.ones_like(scale)
        if i > 0:
            share = np.minimum(share, (scale - knots[i - 1]) / np.float32(knot - knots[i - 1]))
        if i + 1 < len(knots):
            share = np.minimum(share, (knots[i + 1] - scale) / np.float32(knots[i + 1] - knot))
        share = np.clip(share, 0.0, 1.0).astype(np.float32)
        yield share if share.any() else None


def _forward(planes: Float) -> Spectrum:
    """Transform planes over their last two axes."""
    return np.asarray(fft.rfft2(planes, workers=_THREADS))


def _inverse(spectrum: Spectrum, plan: RenderPlan) -> Float:
    """Return the planes that a spectrum stands for."""
    return np.asarray(fft.irfft2(spectrum, s=plan.padded, workers=_THREADS, overwrite_x=True))


class _Filters:
    """Transfer functions on the grid's frequencies, made for each distance as it is asked for."""

    def __init__(self, plan: RenderPlan, compensate: bool) -> None:
        self._plan = plan
        rows, columns = plan.padded
        # Cycles/mm. The lower half of the row frequencies mirrors the upper: the kernel is even.
        down = np.arange(rows // 2 + 1) / (rows * plan.pitch_mm)
        across = np.arange(columns // 2 + 1) / (columns * plan.pitch_mm)
        self._radius = np.hypot(down[:, None], across[None, :])
        self._top = float(self._radius[-1, -1])
        self._mirror = rows - 1 - np.arange(rows // 2 + 1, rows) + 1
        self._window = np.outer(
            self._pixel_response(down * plan.pitch_mm, compensate),
            self._pixel_response(across * plan.pitch_mm, compensate),
        )

    def _pixel_response(
        self, cycles_per_px: NDArray[np.float64], compensate: bool
    ) -> NDArray[np.float64]:
        if self._plan.averaged:
            # A coarser picture shows each pixel's mean, not a sample that detail could trick.
            return np.asarray(np.sinc(cycles_per_px))
        if compensate:
            left = response(cycles_per_px / ALIAS_FREE)
            # Below this the grid ends, and with it all but a trace of the transfer function.
            return np.where(left > LEAST_RESPONSE, 1.0 / np.maximum(left, LEAST_RESPONSE), 0.0)
        return np.ones_like(cycles_per_px)

    def _tables(self, distance_mm: float) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        camera = self._plan.camera
        shortest_mm = 1e-6 * min(
            float(c.wavelengths_nm.min()) for c in self._plan.material.channels
        )
        cutoff = camera.hole.diameter_mm / (shortest_mm * camera.focal_length_mm)
        top = min(self._top, cutoff)
        return band_tables(camera, self._plan.material, distance_mm, top)

    def _on_grid(self, frequency: NDArray[np.float64], table: NDArray[np.float64]) -> Float:
        grid = np.interp(self._radius, frequency, table) * self._window
        return grid.astype(np.float32)

    def _times(self, grid: Float, spectrum: Spectrum) -> Spectrum:
        half = grid.shape[0]
        result = np.empty_like(spectrum)
        np.multiply(spectrum[:half], grid, out=result[:half])
        np.multiply(spectrum[half:], grid[self._mirror], out=result[half:])
        return result

    def apply(self, light: Spectrum, distance_mm: float) -> Spectrum:
        """Return the channels' spectra (channels, ...) from the photo bands' (3, ...)."""
        frequency, tables = self._tables(distance_mm)
        channels = []
        for bands in tables:
            total: Spectrum | None = None
            for spectrum, table in zip(light, bands, strict=True):
                if table[0] <= 1e-9:  # this channel is blind to this band
                    continue
                part = self._times(self._on_grid(frequency, table), spectrum)
                total = part if total is None else np.add(total, part, out=total)
            if total is None:
                raise AssertionError("a channel that records nothing")
            channels.append(total)
        return np.stack(channels)

    def apply_coverage(self, share: Spectrum, distance_mm: float) -> Spectrum:
        """Return the spectra (channels, ...) of coverage spread like a white scene."""
        frequency, tables = self._tables(distance_mm)
        return np.stack(
            [self._times(self._on_grid(frequency, bands.sum(axis=0)), share) for bands in tables]
        )
