"""How the hole draws everywhere on the film at once: a few kernels and where each is at work.

A transfer function changes smoothly over the film and with distance. It is sampled at some tens of
film points, and the samples are written as one mean and a sum of modes,

    OTF(point, nu) = mean(nu) + sum_r field_r(point) mode_r(nu),

by a singular value decomposition weighted like the detail of ordinary scenes. A picture is then the
sum of whole-frame convolutions of the scene, each weighted by a smooth field: no tiles, no seams, and
long tails stay. Kernels depend on the design and on the range of distances, not on the scene or
the grid, and are prepared once for each design.
"""

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.material import Channel
from pinsim.optics import ChiefRays, Ellipse, Light
from pinsim.optics.sharpness import light_ray_otf

Array = NDArray[np.float64]
Values = NDArray[np.inexact[Any]]  # real where the opening is its own mirror image

# The modes kept leave at most these errors at any film point: rms of a picture with the contrast of
# ordinary scenes (0.2 of white, amplitude falling as 1/nu), and of any single frequency.
PICTURE_RMS = 3e-4
SINGLE_OTF = 1e-2
SCENE_VARIANCE = 0.04
MOST_MODES = 48
# Directions of film frequency over half a turn; a multiple of four, so that mirror images and
# turned copies of a kernel fall on the same directions.
DIRECTIONS = 16
# Wavelengths in the variation over the film; the mean has all of the band's own.
FEW_WAVELENGTHS = 4
# A film point that sees less of the hole than this through a thick plate has the kernel of a point
# nearer to the axis: next to nothing is drawn there, by a sliver that no quadrature resolves.
LEAST_CLEAR = 0.03

# Cells across a traced hole while kernels are sampled.
TRACED_CELLS = 72

_COUNTS = (0, 1, 2, 3, 4, 5, 6, 8, 10, 12, 15, 19, 24, 30, 38)
_THREADS = 2


@dataclass(frozen=True, slots=True, kw_only=True)
class FilmRange:
    """The film points and distances that kernels are prepared for.

    u_mm, v_mm : lowest and highest film coordinate. scale : lowest and highest m = 1 + z/zo.
    """

    u_mm: tuple[float, float]
    v_mm: tuple[float, float]
    scale: tuple[float, float]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class BandKernels:
    """The kernels of one film channel for the light of one photo band.

    share : of the channel's exposure by a white scene. mean : (n, directions), modes : (modes, n,
    directions), at the radii of the Kernels and over half a turn of directions, from +u towards
    +v; the other half is the complex conjugate.
    """

    channel: int
    band: int
    share: float
    mean: Values
    modes: Values


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Kernels:
    """All kernels of a design over a range of film points and distances.

    radii : (n,), Chebyshev-Lobatto nodes of |nu| from 0 to the end, cycles/mm. fields : (modes, u, v,
    m), Chebyshev coefficients over the range, common to all bands. errors : (modes + 1, 2), what
    the first 0, 1, ... modes leave in any band: rms of a picture, and of any single frequency.
    """

    range: FilmRange
    radii: Array
    bands: tuple[BandKernels, ...]
    fields: Array
    errors: Array

    def modes_for(self, picture_rms: float, single_otf: float) -> int:
        """Return how many modes keep both errors within bounds; all of them if none do."""
        good = np.flatnonzero((self.errors <= [picture_rms, single_otf]).all(axis=1))
        return int(good[0]) if good.size else len(self.fields)


def chebyshev_nodes(count: int, low: float, high: float) -> Array:
    """Return `count` nodes of an interval, symmetric to the last bit about its middle."""
    angle = np.pi * (np.arange(count) + 0.5) / count
    unit = 0.5 * (np.cos(angle) - np.cos(angle)[::-1])
    return np.asarray(0.5 * (low + high) + 0.5 * (high - low) * unit)


def chebyshev_values(count: int, low: float, high: float, place: Array) -> NDArray[np.float32]:
    """Return the first `count` Chebyshev polynomials at places, (places, count); clamped outside."""
    if count == 1 or high <= low:
        first = np.zeros((*place.shape, count), np.float32)
        first[..., 0] = 1.0
        return first
    unit = np.clip((2.0 * place - low - high) / (high - low), -1.0, 1.0)
    return np.array(np.polynomial.chebyshev.chebvander(unit, count - 1), np.float32)


def _nodes_for(tangent: float) -> int:
    """Return how many Chebyshev nodes settle the change of kernels out to a field tangent."""
    return 1 if tangent < 0.01 else min(17, 2 * math.ceil(1.0 + 5.0 * tangent) + 1)


def _lighter(camera: Camera) -> Camera:
    """Return the camera with a traced outline on as few cells as kernels need: error below 1e-3."""
    outline = camera.hole.outline
    if outline is None:
        return camera
    return replace(camera, hole=replace(camera.hole, outline=outline.coarser(TRACED_CELLS)))


class _Sampler:
    """Evaluates transfer functions at film points on the polar grid of frequencies."""

    def __init__(self, camera: Camera, radii: Array, light: Light) -> None:
        angle = np.pi * np.arange(DIRECTIONS) / DIRECTIONS
        directions = np.stack([np.cos(angle), np.sin(angle)], axis=-1)
        self._frequency = (radii[:, None, None] * directions).reshape(-1, 2)
        self._shape = (radii.size, DIRECTIONS)
        self._camera = camera
        self._light = light

    def at(self, u_mm: float, v_mm: float, scale: float, light: Light | None = None) -> Values:
        """Return (radii, directions) at a film point, for objects at m = scale."""
        camera = self._camera
        rays = _clear_rays(camera, u_mm, v_mm)
        distance = math.inf if scale <= 1.0 else camera.focal_length_mm / (scale - 1.0)
        values = light_ray_otf(
            self._frequency,
            rays=rays,
            opening=camera.opening,
            plate_thickness_mm=camera.plate_thickness_mm,
            light=light or self._light,
            distance_mm=distance,
        )
        table: Values = values.real if camera.opening.mirrored else values
        return table.reshape(self._shape)


def _clear_rays(camera: Camera, u_mm: float, v_mm: float) -> ChiefRays:
    """Return the ray to a film point, or to the nearest one towards the axis that is lit."""
    for _ in range(60):
        rays = camera.surface.chief_rays(u_mm, v_mm)
        if float(rays.falloff) > 0.0:
            clear = camera.opening.clear_share(camera.plate_thickness_mm * rays.tangent)
            if float(clear) >= LEAST_CLEAR:
                return rays
        u_mm, v_mm = 0.95 * u_mm, 0.95 * v_mm
    return camera.surface.chief_rays(0.0, 0.0)


def prepare(
    camera: Camera, channels: tuple[Channel, ...], film_range: FilmRange, top_frequency: float
) -> Kernels:
    """Return the kernels of a design. top_frequency : the end of every band, cycles/mm."""
    camera = _lighter(camera)
    z = camera.focal_length_mm
    u, v = film_range.u_mm, film_range.v_mm
    corners = camera.surface.chief_rays(
        np.array([u[0], u[1], 0.0, 0.0]), np.array([0.0, 0.0, v[0], v[1]])
    )
    tangent = np.abs(corners.tangent)
    low, high = film_range.scale
    count_m = 1 if high / low < 1.001 else min(9, 2 + math.ceil(8.0 * (high / low - 1.0)))
    nodes = (
        chebyshev_nodes(_nodes_for(float(tangent[:2].max())), *u),
        chebyshev_nodes(_nodes_for(float(tangent[2:].max())), *v),
        chebyshev_nodes(count_m, low, high),
    )
    # Six samples to each turn of the shadow's own phase, and the rest for the shape of the curve.
    turns = top_frequency * camera.hole.greatest_mm * high
    count = 40 + math.ceil(6.0 * turns)
    radii = 0.5 * top_frequency * (1.0 - np.cos(np.pi * np.arange(count) / (count - 1)))
    jobs = [
        (number, band, float(weights.sum()), channel.wavelengths_nm, weights / weights.sum())
        for number, channel in enumerate(channels)
        for band, weights in enumerate(channel.weights.T)
        if weights.sum() > 1e-6
    ]
    lights = [Light(wavelengths_nm=job[3], shares=job[4]) for job in jobs]
    with ThreadPoolExecutor(_THREADS) as pool:
        sampled = list(pool.map(lambda light: _sampled(camera, nodes, radii, light), lights))
    frame_mm = max(u[1] - u[0], v[1] - v[0], 0.1 * z)
    grid = (radii.size, DIRECTIONS)
    middles = [samples.mean(axis=0) for samples, _ in sampled]
    apart = [samples - middle for (samples, _), middle in zip(sampled, middles, strict=True)]
    modes, fields, errors = _decompose(apart, radii, frame_mm)
    bands = tuple(
        BandKernels(
            channel=job[0],
            band=job[1],
            share=job[2],
            mean=middle.reshape(grid) + missing,
            modes=own.reshape(-1, *grid),
        )
        for job, middle, (_, missing), own in zip(jobs, middles, sampled, modes, strict=True)
    )
    values = fields.reshape(-1, *(axis.size for axis in nodes))
    return Kernels(
        range=film_range, radii=radii, bands=bands, fields=_coefficients(values), errors=errors
    )


def _sampled(
    camera: Camera, nodes: tuple[Array, Array, Array], radii: Array, light: Light
) -> tuple[Values, Values]:
    """Return samples (points, frequencies) for few wavelengths, and what these leave out."""
    sampler = _Sampler(camera, radii, light.condensed(FEW_WAVELENGTHS))
    samples = _samples(camera, nodes, sampler)
    # The point nearest to the axis tells what the few wavelengths leave out.
    near_u, near_v = (float(axis[np.argmin(np.abs(axis))]) for axis in nodes[:2])
    scale = float(nodes[2][-1])
    missing = sampler.at(near_u, near_v, scale, light=light) - sampler.at(near_u, near_v, scale)
    return samples.reshape(-1, radii.size * DIRECTIONS), missing


def _samples(camera: Camera, nodes: tuple[Array, Array, Array], sampler: _Sampler) -> Values:
    """Return transfer functions at all nodes, (u, v, m, radii, directions), mirror images shared."""
    mirrored = camera.opening.mirrored
    opening = camera.opening
    round_on_flat = (
        isinstance(opening, Ellipse) and opening.right_mm == opening.up_mm and camera.surface.flat
    )
    seen: dict[tuple[float, float, float], Values] = {}

    def at(u: float, v: float, m: float) -> Values:
        if (u, v, m) not in seen:
            seen[u, v, m] = sampler.at(u, v, m)
        return seen[u, v, m]

    turned = np.arange(DIRECTIONS)
    result = []
    for u in nodes[0]:
        for v in nodes[1]:
            for m in nodes[2]:
                if not mirrored:
                    result.append(at(float(u), float(v), float(m)))
                    continue
                # Directions of this point's frequencies, as seen from the point whose kernel serves.
                source = turned if u * v >= 0.0 else -turned
                first, second = abs(float(u)), abs(float(v))
                if round_on_flat and first < second:
                    first, second = second, first
                    source = DIRECTIONS // 2 - source
                result.append(at(first, second, float(m))[:, source % DIRECTIONS])
    return np.stack(result).reshape(*(axis.size for axis in nodes), *result[0].shape)


def _decompose(
    bands: list[Values], radii: Array, frame_mm: float
) -> tuple[list[Values], Array, Array]:
    """Return each band's modes, the fields (modes, points) they share, and the errors left.

    bands : (points, frequencies) each. errors as in Kernels. Bands, and real and imaginary parts,
    stand side by side, so fields are real and common.
    """
    weight = np.repeat(_scene_power(radii, frame_mm), DIRECTIONS)
    weight = np.sqrt(weight * SCENE_VARIANCE / weight.sum())
    weight = np.maximum(weight, 1e-9 * weight.max())
    imaginary = any(np.iscomplexobj(samples) for samples in bands)
    parts = [
        p for samples in bands for p in ((samples.real, samples.imag) if imaginary else (samples,))
    ]
    stacked = np.concatenate([part * weight for part in parts], axis=1)
    # Eigenvectors of the points' covariance: there are far fewer points than frequencies.
    _, vectors = np.linalg.eigh(stacked @ stacked.T)
    vectors = vectors[:, ::-1]
    rest = stacked.copy()
    per_band = len(parts) // len(bands) * weight.size
    errors = np.full((min(MOST_MODES, vectors.shape[1]) + 1, 2), np.inf)
    done = 0
    # Looked at in growing steps: each look costs as much as taking many modes away.
    for count in (*(step for step in _COUNTS if step < len(errors)), len(errors) - 1):
        some = vectors[:, done:count]
        rest -= some @ (some.T @ rest)
        done = count
        power = (rest * rest).reshape(len(rest), len(bands), per_band).sum(axis=2)
        single = np.abs(rest.reshape(len(rest), -1, weight.size) / weight).max()
        errors[count] = math.sqrt(float(power.max())), float(single)
        if errors[count, 0] <= PICTURE_RMS and errors[count, 1] <= SINGLE_OTF:
            break
    errors = errors[: done + 1]
    chosen = vectors[:, :done]
    flat = (chosen.T @ stacked).reshape(chosen.shape[1], len(parts), weight.size) / weight
    modes: list[Values] = [flat[:, k] for k in range(len(parts))]
    if imaginary:
        modes = [modes[2 * k] + 1j * modes[2 * k + 1] for k in range(len(bands))]
    return modes, chosen.T, errors


def _scene_power(radii: Array, frame_mm: float) -> Array:
    """Return the share of an ordinary scene's contrast around each |nu|: 1/nu^2 in the plane."""
    ring = np.gradient(radii)
    bounded = np.maximum(radii, 1.0 / frame_mm)
    return np.asarray(np.maximum(radii, 0.25 * ring) / bounded**2 * ring)


def _coefficients(values: Array) -> Array:
    """Turn values at Chebyshev nodes, (modes, u, v, m), to Chebyshev coefficients."""
    for axis in (1, 2, 3):
        count = values.shape[axis]
        angle = np.pi * (np.arange(count) + 0.5) / count
        cosines = np.cos(np.outer(np.arange(count), angle)) * (2.0 / count)
        cosines[0] *= 0.5
        values = np.moveaxis(np.tensordot(cosines, values, axes=(1, axis)), 0, axis)
    return values


@lru_cache(maxsize=8)
def _prepared(
    camera: Camera, wavelength_nm: float | None, film_range: FilmRange, top_frequency: float
) -> Kernels:
    material = camera.material if wavelength_nm is None else camera.material.at(wavelength_nm)
    return prepare(camera, material.channels, film_range, top_frequency)


def prepared(
    camera: Camera, wavelength_nm: float | None, film_range: FilmRange, top_frequency: float
) -> Kernels:
    """Return kernels as `prepare` does, once for each design and range."""
    return _prepared(camera, wavelength_nm, film_range, top_frequency)


class PolarReader:
    """Reads tables of the kernels, (n, directions), at any |nu| and direction.

    The tables are made fine first, along radii through their Chebyshev polynomial and along
    directions through their Fourier series; between the fine points reading is linear.
    """

    def __init__(self, radii: Array) -> None:
        count = radii.size
        self._count, self._fine = count, 8 * count
        self._top = float(radii[-1])
        vander = np.polynomial.chebyshev.chebvander
        nodes = -np.cos(np.pi * np.arange(count) / (count - 1))
        fine = vander(np.linspace(-1.0, 1.0, self._fine), count - 1)
        self._along = fine @ np.linalg.inv(vander(nodes, count - 1))

    def along(self, radial: Array) -> tuple[Array, Array]:
        """Return fine radii and values of a table without directions, (n,)."""
        return np.linspace(0.0, self._top, self._fine), self._along @ radial

    def at(self, table: Values, radius: Array, angle: Array) -> Values:
        """Return the table's values; zero beyond its end."""
        around = 12 * DIRECTIONS  # over a full turn
        whole = np.concatenate([table, np.conj(table)], axis=1)
        spectrum = np.fft.fft(whole, axis=1)
        wide = np.zeros((self._count, around), np.complex128)
        wide[:, :DIRECTIONS] = spectrum[:, :DIRECTIONS]
        wide[:, -DIRECTIONS:] = spectrum[:, DIRECTIONS:]
        turned = np.fft.ifft(wide, axis=1) * (around / (2 * DIRECTIONS))
        dense = self._along @ (turned if np.iscomplexobj(table) else turned.real)
        dense = np.concatenate([dense, dense[:, :1]], axis=1)
        r = np.minimum(radius * ((self._fine - 1) / self._top), self._fine - 1.000001)
        a = np.mod(angle / (2.0 * np.pi), 1.0) * around
        r0 = r.astype(np.intp)
        a0 = np.minimum(a.astype(np.intp), around - 1)
        dr, da = r - r0, a - a0
        near = dense[r0, a0] * (1.0 - da) + dense[r0, a0 + 1] * da
        far = dense[r0 + 1, a0] * (1.0 - da) + dense[r0 + 1, a0 + 1] * da
        return np.asarray(np.where(radius <= self._top, near * (1.0 - dr) + far * dr, 0.0))
