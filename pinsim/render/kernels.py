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
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.material import Channel
from pinsim.optics import ChiefRays, Ellipse, Light
from pinsim.optics.sharpness import ray_otf_in_lights
from pinsim.threads import THREADS

Array = NDArray[np.float64]
Values = NDArray[np.inexact[Any]]  # real where the opening is its own mirror image

# The modes kept leave at most these errors at any film point: rms of a picture with the contrast of
# ordinary scenes (0.2 of white, amplitude falling as 1/nu), and of any single frequency.
PICTURE_RMS = 3e-4
SINGLE_OTF = 1e-2
SCENE_VARIANCE = 0.04
MOST_MODES = 48
# Kernels that others are made like carry this many modes more than their own hole needs.
SPARE_MODES = 4
# Tangent of the slant beyond which kernels are so far from round that more directions are sampled.
STEEP = 0.8
# Directions of film frequency over half a turn; a multiple of four, so that mirror images and
# turned copies of a kernel fall on the same directions.
DIRECTIONS = 16
# Wavelengths in the variation over the film: an rms error of 4e-5; the mean has all of the band's own.
FEW_WAVELENGTHS = 2
# A film point that sees less of the hole than this through a thick plate has the kernel of a point
# nearer to the axis: next to nothing is drawn there, by a sliver that no quadrature resolves.
LEAST_CLEAR = 0.03

# Cells across a traced hole while kernels are sampled.
TRACED_CELLS = 72

_AROUND = 6 * DIRECTIONS  # fine directions over half a turn
_COUNTS = (0, 1, 2, 3, 4, 5, 6, 8, 10, 12, 15, 19, 24, 30, 38)


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
    at_nodes : (modes, nodes), the fields' values where kernels are sampled. like : the kernels whose
    fields these are, the first of them, if they are another's.
    """

    range: FilmRange
    radii: Array
    bands: tuple[BandKernels, ...]
    fields: Array
    errors: Array
    at_nodes: Array
    like: "Kernels | None" = None

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
    """Evaluates transfer functions at film points on the polar grid of frequencies, for all bands."""

    def __init__(self, camera: Camera, radii: Array, lights: Sequence[Light]) -> None:
        self.camera = camera
        self._frequency: dict[int, Array] = {}
        self._radii = radii
        self._lights = lights

    def _grid(self, directions: int, over: float) -> Array:
        if directions not in self._frequency:
            angle = over * np.arange(directions)
            unit = np.stack([np.cos(angle), np.sin(angle)], axis=-1)
            self._frequency[directions] = (self._radii[:, None, None] * unit).reshape(-1, 2)
        return self._frequency[directions]

    def at(
        self,
        rays: ChiefRays,
        scale: float,
        lights: Sequence[Light] | None = None,
        quarter: int | None = None,
    ) -> Values:
        """Return (bands, points, radii, directions) for rays (points,) and objects at m = scale.

        lights : in place of the bands' own. quarter : instead of half a turn, directions from +u to +v,
        both included, this many steps.
        """
        camera = self.camera
        directions = DIRECTIONS if quarter is None else quarter + 1
        frequency = self._grid(
            directions, np.pi / DIRECTIONS if quarter is None else 0.5 * np.pi / max(quarter, 1)
        )
        values: Values = ray_otf_in_lights(
            frequency,
            rays=rays,
            opening=camera.opening,
            plate_thickness_mm=camera.plate_thickness_mm,
            lights=self._lights if lights is None else lights,
            distance_mm=math.inf if scale <= 1.0 else camera.focal_length_mm / (scale - 1.0),
            quick=True,
        )
        return values.reshape(*values.shape[:-1], self._radii.size, directions)


def _clear_rays(camera: Camera, u_mm: Array, v_mm: Array) -> ChiefRays:
    """Return the rays to film points, or to the nearest ones towards the axis that are lit."""
    nearer = np.ones(u_mm.shape)
    for _ in range(60):
        rays = camera.surface.chief_rays(nearer * u_mm, nearer * v_mm)
        clear = camera.opening.clear_share(camera.plate_thickness_mm * rays.tangent)
        dark = (rays.falloff <= 0.0) | (clear < LEAST_CLEAR)
        if not dark.any():
            return rays
        nearer[dark] *= 0.95
    nearer[dark] = 0.0
    return camera.surface.chief_rays(nearer * u_mm, nearer * v_mm)


def prepare(
    camera: Camera,
    channels: tuple[Channel, ...],
    film_range: FilmRange,
    top_frequency: float,
    *,
    like: Kernels | None = None,
    rough: bool = False,
) -> Kernels:
    """Return the kernels of a design. top_frequency : the end of every band, cycles/mm.

    like : kernels of another hole over the same range, whose fields are taken if they serve as well:
    then all that is weighted by them serves this hole too. rough : only the fields matter, to others
    that are made like these; they carry SPARE_MODES more than this hole needs.
    """
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
    if rough:
        count //= 2
    radii = 0.5 * top_frequency * (1.0 - np.cos(np.pi * np.arange(count) / (count - 1)))
    bands = _band_lights(channels)
    if isinstance(camera.opening, Ellipse):
        samples, missing = _sampled(camera, nodes, radii, bands)
    else:
        # Each band is long enough in the making for a thread of its own.
        with ThreadPoolExecutor(THREADS) as pool:
            each = list(pool.map(lambda band: _sampled(camera, nodes, radii, (band,)), bands))
        samples, missing = (np.concatenate(part) for part in zip(*each, strict=True))
    frame_mm = max(u[1] - u[0], v[1] - v[0], 0.1 * z)
    grid = (radii.size, DIRECTIONS)
    middles = samples.mean(axis=1)
    samples -= middles[:, None]
    stack = _Stack(samples, radii, frame_mm)
    if like is not None:
        at_nodes, errors = stack.along(like.at_nodes)
        if (errors[-1] > [PICTURE_RMS, SINGLE_OTF]).any():
            like = None
    if like is None:
        at_nodes, errors = stack.along(stack.best_fields(), spare=SPARE_MODES if rough else 0)
    modes = stack.modes(at_nodes)
    made = tuple(
        BandKernels(
            channel=band.channel,
            band=band.band,
            share=band.share,
            mean=middle.reshape(grid) + left_out,
            modes=own.reshape(-1, *grid),
        )
        for band, middle, left_out, own in zip(bands, middles, missing, modes, strict=True)
    )
    values = at_nodes.reshape(-1, *(axis.size for axis in nodes))
    return Kernels(
        range=film_range,
        radii=radii,
        bands=made,
        fields=_coefficients(values) if like is None else like.fields[: len(at_nodes)],
        errors=errors,
        at_nodes=at_nodes,
        like=like,
    )


@dataclass(frozen=True, slots=True)
class _BandLight:
    """The light of one photo band for one film channel; few : its stand-in of few wavelengths."""

    channel: int
    band: int
    share: float
    light: Light
    few: Light


@lru_cache(maxsize=8)
def _band_lights(channels: tuple[Channel, ...]) -> tuple[_BandLight, ...]:
    """Return the bands that make any difference."""
    found = []
    for number, channel in enumerate(channels):
        for band, weights in enumerate(channel.weights.T):
            share = float(weights.sum())
            if share > 1e-6:
                light = Light(wavelengths_nm=channel.wavelengths_nm, shares=weights / share)
                found.append(
                    _BandLight(number, band, share, light, light.condensed(FEW_WAVELENGTHS))
                )
    return tuple(found)


def _sampled(
    camera: Camera,
    nodes: tuple[Array, Array, Array],
    radii: Array,
    bands: Sequence[_BandLight],
) -> tuple[Values, Values]:
    """Return samples (bands, points, frequencies) for few wavelengths, and what these leave out."""
    sampler = _Sampler(camera, radii, [band.few for band in bands])
    samples = _samples(nodes, sampler)
    # The point nearest to the axis tells what the few wavelengths leave out. On the axis all
    # directions of a round hole are alike.
    near_u, near_v = (axis[[np.argmin(np.abs(axis))]] for axis in nodes[:2])
    scale, quarter = float(nodes[2][-1]), None
    if _round_on_flat(camera):
        near_u, near_v, quarter = np.zeros(1), np.zeros(1), 0
    near = _clear_rays(camera, near_u, near_v)
    whole = sampler.at(near, scale, lights=[band.light for band in bands], quarter=quarter)
    missing = whole - sampler.at(near, scale, quarter=quarter)
    return samples.reshape(len(bands), -1, radii.size * DIRECTIONS), missing[:, 0]


def _samples(nodes: tuple[Array, Array, Array], sampler: _Sampler) -> Values:
    """Return transfer functions at all nodes, (bands, u, v, m, radii, directions).

    Mirror images are shared.
    """
    camera = sampler.camera
    if _round_on_flat(camera):
        return _turned_samples(nodes, sampler)
    u, v = (part.ravel() for part in np.meshgrid(nodes[0], nodes[1], indexing="ij"))
    mirrored = camera.opening.mirrored
    places, which = np.arange(u.size), np.arange(u.size)
    if mirrored:
        _, places, which = np.unique(
            np.abs(np.stack([u, v])), axis=1, return_index=True, return_inverse=True
        )
    seen_u, seen_v = (np.abs(x[places]) if mirrored else x[places] for x in (u, v))
    rays = _clear_rays(camera, seen_u, seen_v)
    at_places = np.stack([sampler.at(rays, float(m)) for m in nodes[2]], axis=2)
    values = at_places[:, which.ravel()]
    if mirrored:
        # Directions of this point's frequencies, as seen from the point whose kernel serves.
        other = u * v < 0.0
        values[:, other] = values[:, other][..., -np.arange(DIRECTIONS) % DIRECTIONS]
    return values.reshape(len(values), *(axis.size for axis in nodes), *values.shape[3:])


def _round_on_flat(camera: Camera) -> bool:
    return camera.hole.shape == "round" and camera.surface.flat


def _turned_samples(nodes: tuple[Array, Array, Array], sampler: _Sampler) -> Values:
    """Return the samples of a round hole before flat film, all from a few points of one radius.

    What such a hole draws depends on the distance from the axis and, turned with the point, on
    direction: a polynomial along the radius and a Fourier series of cos 2k(angle) say it all.
    """
    u, v = (part.ravel() for part in np.meshgrid(nodes[0], nodes[1], indexing="ij"))
    distance, azimuth = np.hypot(u, v), np.arctan2(v, u)
    farthest = float(distance.max())
    # An even polynomial over the whole diagonal; a thick plate's shade has a cusp on the axis.
    count = 1 if farthest == 0.0 else 1 + (4 * max(nodes[0].size, nodes[1].size)) // 5
    places = chebyshev_nodes(2 * count, -farthest, farthest)[:count]
    # Far off the axis twice the directions of the tables, as a turned table is read between them.
    steep = farthest > STEEP * sampler.camera.focal_length_mm
    quarter = DIRECTIONS if steep else DIRECTIONS // 2
    rays = _clear_rays(sampler.camera, places, np.zeros(places.size))
    sampled = np.stack([sampler.at(rays, float(m), quarter=quarter) for m in nodes[2]], axis=2)
    # Directions, the last axis, to the series' coefficients; the next quarter mirrors this one.
    whole = np.concatenate([sampled, sampled[..., -2:0:-1]], axis=-1)
    harmonics = np.fft.rfft(whole, axis=-1).real / (2 * quarter)
    harmonics[..., 1:-1] *= 2.0
    to_points = (
        _even_reader(places / farthest, distance / farthest) if farthest else np.ones((1, 1))
    )
    near = np.einsum("np,bpmrk->bnmrk", to_points, harmonics, optimize=True)
    angle = 2.0 * (np.pi * np.arange(DIRECTIONS) / DIRECTIONS - azimuth[:, None])
    turned = np.cos(np.arange(harmonics.shape[-1])[:, None] * angle[:, None, :])
    values: Values = np.matmul(near, turned[:, None])
    return values.reshape(len(values), *(axis.size for axis in nodes), *values.shape[3:])


def _even_reader(nodes: Array, at: Array) -> Array:
    """Return the matrix (at, nodes) that reads an even polynomial, known at nodes, elsewhere."""
    bases = [np.polynomial.chebyshev.chebvander(x, 2 * nodes.size - 2)[:, ::2] for x in (nodes, at)]
    return np.asarray(bases[1] @ np.linalg.inv(bases[0]))


class _Stack:
    """All bands' samples side by side, weighted like the detail of ordinary scenes.

    Real and imaginary parts stand side by side too, so fields are real and common to all.
    """

    def __init__(self, bands: Values, radii: Array, frame_mm: float) -> None:
        weight = np.repeat(_scene_power(radii, frame_mm), DIRECTIONS)
        weight = np.sqrt(weight * SCENE_VARIANCE / weight.sum())
        self._weight = np.maximum(weight, 1e-9 * weight.max())
        self._imaginary = np.iscomplexobj(bands)
        parts = np.stack([bands.real, bands.imag], axis=1) if self._imaginary else bands[:, None]
        self._bands, self._parts = len(bands), parts.shape[0] * parts.shape[1]
        self._stacked = np.ascontiguousarray(
            np.moveaxis(parts * self._weight, 2, 0).reshape(bands.shape[1], -1)
        )

    def best_fields(self) -> Array:
        """Return orthonormal fields, (modes, points), the one that takes most away first."""
        # Eigenvectors of the points' covariance: there are far fewer points than frequencies.
        _, vectors = np.linalg.eigh(self._stacked @ self._stacked.T)
        return np.ascontiguousarray(vectors[:, ::-1].T)[:MOST_MODES]

    def along(self, fields: Array, spare: int = 0) -> tuple[Array, Array]:
        """Return as many of these fields as need be and some to spare, or all, and the errors left.

        errors as in Kernels: rms of a picture and largest of a frequency, by the number of modes.
        """
        # What is left is judged, not used: single precision is far finer than the bounds.
        rest = self._stacked.astype(np.float32)
        single, scratch = fields.astype(np.float32), np.empty_like(rest)
        by_band = rest.reshape(len(rest), self._bands, -1)
        per_frequency = (1.0 / self._weight).astype(np.float32)
        errors = np.full((len(fields) + 1, 2), np.inf)
        done = 0
        # Looked at in growing steps: each look costs as much as taking many modes away.
        for count in (*(step for step in _COUNTS if step < len(errors)), len(errors) - 1):
            some = single[done:count]
            if len(some):
                rest -= np.matmul(some.T, some @ rest, out=scratch)
            done = count
            power = np.einsum("pbf,pbf->pb", by_band, by_band)
            np.abs(rest, out=scratch)
            scratch.reshape(-1, self._weight.size)[:] *= per_frequency
            errors[count] = math.sqrt(float(power.max())), float(scratch.max())
            if errors[count, 0] <= PICTURE_RMS and errors[count, 1] <= SINGLE_OTF:
                break
        # What spare modes would leave is not looked at; they are for others.
        return fields[: done + spare], errors[: done + 1]

    def modes(self, fields: Array) -> list[Values]:
        """Return each band's modes along these fields, (modes, frequencies)."""
        shape = (len(fields), self._parts, self._weight.size)
        flat = (fields @ self._stacked).reshape(shape) / self._weight
        if not self._imaginary:
            return [flat[:, k] for k in range(self._bands)]
        return [flat[:, 2 * k] + 1j * flat[:, 2 * k + 1] for k in range(self._bands)]


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
def prepared(
    camera: Camera,
    wavelength_nm: float | None,
    film_range: FilmRange,
    top_frequency: float,
    *,
    family: Camera | None = None,
) -> Kernels:
    """Return kernels as `prepare` does, once for each design and range.

    family : the camera with another hole whose fields are taken if they serve; None for its own.
    """
    material = camera.material if wavelength_nm is None else camera.material.at(wavelength_nm)
    if family is None:
        return prepare(camera, material.channels, film_range, top_frequency)
    return prepare(
        camera,
        material.channels,
        film_range,
        top_frequency,
        like=_family(family, wavelength_nm, film_range),
    )


@lru_cache(maxsize=8)
def _family(camera: Camera, wavelength_nm: float | None, film_range: FilmRange) -> Kernels:
    """Return the kernels that those of similar holes are made like."""
    material = camera.material if wavelength_nm is None else camera.material.at(wavelength_nm)
    shortest_mm = 1e-6 * min(float(c.wavelengths_nm.min()) for c in material.channels)
    opening, z = camera.opening, camera.focal_length_mm
    # The end of detail on the axis: by diffraction, or of the shadow, nine cycles across the hole.
    end = min(opening.width_mm / (shortest_mm * z), 9.0 / (opening.width_mm * film_range.scale[0]))
    return prepare(camera, material.channels, film_range, math.sqrt(2.0) * end, rough=True)


class PolarReader:
    """Reads tables of the kernels, (..., n, directions), at given |nu| and directions from -v to +v.

    The tables are made fine first, along radii through their Chebyshev polynomial and along
    directions through their Fourier series; between the fine points reading is linear.
    """

    def __init__(self, radii: Array, radius: Array, angle: Array) -> None:
        self._fine = 8 * radii.size
        self._top = float(radii[-1])
        self._along = _finer(radii.size, self._fine)
        self._shape = radius.shape
        r = np.minimum(radius * ((self._fine - 1) / self._top), self._fine - 1.000001).ravel()
        a = np.clip((angle / np.pi + 0.5) * _AROUND, 0.0, _AROUND - 1e-6).ravel()
        r0, a0 = r.astype(np.intp), a.astype(np.intp)
        self._cell = r0 * (_AROUND + 1) + a0
        dr, da = r - r0, a - a0
        within = np.where(radius.ravel() <= self._top, 1.0, 0.0)
        self._weights = [
            (within * part).astype(np.float32)[:, None]
            for part in ((1.0 - dr) * (1.0 - da), (1.0 - dr) * da, dr * (1.0 - da), dr * da)
        ]

    def along(self, radial: Array) -> tuple[Array, Array]:
        """Return fine radii and values of a table without directions, (n,)."""
        return np.linspace(0.0, self._top, self._fine), self._along @ radial

    def at(self, tables: Values) -> NDArray[np.inexact[Any]]:
        """Return tables (k, n, directions) at the places, (k, ...), in single precision.

        Zero beyond the tables' end.
        """
        if np.iscomplexobj(tables):
            real = self._read(tables.real, _around(even=True))
            return real + np.complex64(1j) * self._read(tables.imag, _around(even=False))
        return self._read(tables, _around(even=True))

    def _read(self, tables: Values, around: Array) -> NDArray[np.float32]:
        count, radii, _ = tables.shape
        # Last comes the table: a place then reads all of them from one place of memory.
        turned = np.moveaxis(tables @ around.T, 0, -1).reshape(radii, -1)
        dense = self._along.astype(np.float32) @ turned.astype(np.float32)
        flat = dense.reshape(-1, count)
        total = np.zeros((self._cell.size, count), np.float32)
        for corner, weight in zip((0, 1, _AROUND + 1, _AROUND + 2), self._weights, strict=True):
            total += weight * np.take(flat, self._cell + corner, axis=0, mode="clip")
        return np.ascontiguousarray(total.T).reshape(count, *self._shape)


@lru_cache(maxsize=2)
def _around(*, even: bool) -> Array:
    """Return the matrix (fine, directions) from the tables' directions to fine ones, -v to +v.

    Half a turn further on a real part is the same (even) and an imaginary part its negative (odd).
    """
    angle = np.pi * (np.arange(_AROUND + 1) / _AROUND - 0.5)
    apart = angle[:, None] - np.pi * np.arange(DIRECTIONS) / DIRECTIONS
    if even:  # waves 0, 2, ... 2n of a whole turn; the last is known by its cosine only
        waves = np.arange(1, DIRECTIONS // 2)
        total = 1.0 + 2.0 * np.cos(2.0 * waves * apart[..., None]).sum(axis=-1)
        total += np.cos(DIRECTIONS * angle)[:, None] * np.cos(DIRECTIONS * (apart - angle[:, None]))
    else:
        waves = 2 * np.arange(DIRECTIONS // 2) + 1
        total = 2.0 * np.cos(waves * apart[..., None]).sum(axis=-1)
    return np.asarray(total / DIRECTIONS)


@lru_cache(maxsize=8)
def _finer(count: int, fine: int) -> Array:
    """Return the matrix (fine, count) from Chebyshev-Lobatto nodes to even steps."""
    vander = np.polynomial.chebyshev.chebvander
    nodes = -np.cos(np.pi * np.arange(count) / (count - 1))
    dense = vander(np.linspace(-1.0, 1.0, fine), count - 1)
    return np.asarray(dense @ np.linalg.inv(vander(nodes, count - 1)))
