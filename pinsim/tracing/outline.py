"""Geometry of a closed outline: area, caliper diameters, best ellipse, perimeter, clear cells.

An outline is (n, 2), any unit, right and up, anticlockwise, its last point joined to its first.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# The perimeter is taken of the outline without waves shorter than this share of it: finer than what
# anyone would call the hole's shape, coarser than the noise of a scan.
_SHAPE_WAVES = 40
# And noise that is shorter than this is smoothed from the outline itself.
_NOISE_PX = 4.0
_LITTLE_NOISE_PX = 0.05
# Corners of the convex hull that are compared with each other; a circle's diameters keep 1e-5.
_HULL_POINTS = 1000


def area_and_centroid(outline: Array) -> tuple[float, Array]:
    """Return the signed area (anticlockwise is positive) and the centroid, by Green's theorem."""
    x, y = (outline - outline[0]).T
    following = np.roll(x, -1), np.roll(y, -1)
    cross = x * following[1] - following[0] * y
    area = 0.5 * float(cross.sum())
    centroid = np.array([((x + following[0]) @ cross), ((y + following[1]) @ cross)])
    return area, outline[0] + centroid / (6.0 * area)


def resampled(outline: Array, count: int) -> Array:
    """Return `count` points at even steps along an outline."""
    closed = np.vstack([outline, outline[:1]])
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(closed, axis=0).T))])
    places = np.linspace(0.0, along[-1], count, endpoint=False)
    return np.stack([np.interp(places, along, closed[:, k]) for k in (0, 1)], axis=1)


def perimeter(outline: Array) -> float:
    """Return the length of an outline."""
    return float(np.hypot(*(np.roll(outline, -1, axis=0) - outline).T).sum())


def smoothed(outline: Array, shortest: float) -> Array:
    """Return an outline without waves shorter than `shortest`, at even steps.

    A Fourier low-pass along the outline and not a moving mean, which would shrink a small hole: the
    lowest harmonics, which hold its size and shape, stay as they are.
    """
    length = perimeter(outline)
    count = max(128, math.ceil(8.0 * length / shortest))
    even = resampled(outline, max(count, len(outline)))
    turns = np.fft.fftfreq(len(even), 1.0 / len(even))
    weight = 1.0 / (1.0 + (np.abs(turns) * shortest / length) ** 8)
    wave = np.fft.ifft(np.fft.fft(even[:, 0] + 1j * even[:, 1]) * weight)
    return np.stack([wave.real, wave.imag], axis=1)


def without_noise(outline_px: Array, noise_px: float) -> Array:
    """Return an outline in pixels without waves too short for its picture to tell.

    noise_px : what noise moves single points by; more of it is averaged over longer stretches.
    """
    shortest = _NOISE_PX * max(1.0, (noise_px / _LITTLE_NOISE_PX) ** 2)
    # A small or noisy hole keeps at least 24 harmonics, so that its corners stay.
    return smoothed(outline_px, min(shortest, perimeter(outline_px) / 24.0))


def shape_perimeter(outline: Array) -> float:
    """Return the perimeter without waves shorter than 1/40 of it, which may be noise."""
    return perimeter(smoothed(outline, perimeter(outline) / _SHAPE_WAVES))


def circularity(outline: Array) -> float:
    """Return 4 pi A / P^2, with P from shape_perimeter: 1 for a circle, 0.785 for a square."""
    return 4.0 * math.pi * abs(area_and_centroid(outline)[0]) / shape_perimeter(outline) ** 2


@dataclass(frozen=True, slots=True)
class Caliper:
    """A caliper (Feret) diameter: its length, and the two points that the jaws touch."""

    length: float
    first: tuple[float, float]
    second: tuple[float, float]


def calipers(outline: Array) -> tuple[Caliper, Caliper]:
    """Return the longest and the shortest caliper diameter.

    The longest joins two corners of the convex hull; the shortest stands on one of its sides
    (rotating calipers, Shamos 1978, from memory).
    """
    from scipy.spatial import ConvexHull

    hull = outline[ConvexHull(outline).vertices]
    hull = hull[:: math.ceil(len(hull) / _HULL_POINTS)]
    apart = np.hypot(*(hull[:, None] - hull[None]).transpose(2, 0, 1))
    i, j = np.unravel_index(int(np.argmax(apart)), apart.shape)
    longest = _caliper(hull[i], hull[j])
    sides = np.roll(hull, -1, axis=0) - hull
    inward = np.stack([-sides[:, 1], sides[:, 0]], axis=1) / np.hypot(*sides.T)[:, None]
    widths = np.einsum("ijk,ik->ij", hull[None] - hull[:, None], inward)
    side = int(np.argmin(widths.max(axis=1)))
    far = hull[int(np.argmax(widths[side]))]
    return longest, _caliper(far - inward[side] * widths[side].max(), far)


def _caliper(first: Array, second: Array) -> Caliper:
    return Caliper(
        float(np.hypot(*(second - first))),
        (float(first[0]), float(first[1])),
        (float(second[0]), float(second[1])),
    )


def ellipse_departure(outline: Array) -> tuple[Array, Array]:
    """Return how far each point lies outside the best ellipse, and each point's share of the outline.

    The best ellipse has the outline's own area and second moments of area. The distance is taken
    across the ellipse, to first order. Points are taken as they are; give even steps.
    """
    area, centroid = area_and_centroid(outline)
    p = outline - centroid
    q = np.roll(p, -1, axis=0)
    cross = p[:, 0] * q[:, 1] - q[:, 0] * p[:, 1]

    def moment(a: int, b: int) -> float:
        terms = 2.0 * p[:, a] * p[:, b] + p[:, a] * q[:, b] + q[:, a] * p[:, b]
        return float((terms + 2.0 * q[:, a] * q[:, b]) @ cross) / (24.0 * area)

    spread = np.array([[moment(0, 0), moment(0, 1)], [moment(0, 1), moment(1, 1)]])
    values, axes = np.linalg.eigh(spread)
    # An ellipse with half axes a, b has second moments a^2/4, b^2/4; then of exactly this area.
    half = 2.0 * np.sqrt(values)
    half *= math.sqrt(abs(area) / (math.pi * half[0] * half[1]))
    inside = p @ axes / half
    radius = np.hypot(*inside.T)
    slope = np.hypot(*(inside / half).T) / radius
    steps = np.hypot(*(q - p).T)
    share = 0.5 * (steps + np.roll(steps, 1))
    return (radius - 1.0) / slope, share / share.sum()


def roughness(outline: Array) -> float:
    """Return the rms departure from the best ellipse along the outline."""
    departure, share = ellipse_departure(outline)
    return math.sqrt(float(share @ departure**2))


def clear_cells(outline: Array, cell: float, count: int) -> Array:
    """Return the exact open share of each cell of a square grid centred on (0, 0), row 0 up.

    outline : anticlockwise. Returns (count, count) 0..1. Every side of the outline is cut at the
    grid's lines; what lies to the right of each piece is added up along the rows (Green's theorem).
    """
    points = np.stack([outline[:, 0], -outline[:, 1]], axis=1) / cell + 0.5 * count
    pieces = _cut_at_lines(points)
    start, stop = pieces[:, :2], pieces[:, 2:]
    middle = 0.5 * (start + stop)
    column, row = np.floor(middle).astype(np.intp).T
    # Down the left side and up the right one in (column, row), as rows run down.
    height = stop[:, 1] - start[:, 1]
    right_of = column + 1.0 - middle[:, 0]
    covered = np.zeros((count, count + 1))
    np.add.at(covered, (row, column), height * right_of)
    np.add.at(covered, (row, column + 1), height * (1.0 - right_of))
    return np.asarray(np.clip(np.cumsum(covered, axis=1)[:, :count], 0.0, 1.0))


def _cut_at_lines(points: Array) -> Array:
    """Return the sides of a polygon cut at all whole x and y: (m, 4), x y of start and stop."""
    following = np.roll(points, -1, axis=0)
    side = np.arange(len(points))
    sides, shares = [side], [np.zeros(len(points))]
    for k in (0, 1):
        low = np.minimum(points[:, k], following[:, k])
        high = np.maximum(points[:, k], following[:, k])
        first = np.floor(low) + 1.0
        crossings = np.maximum(np.ceil(high) - first, 0.0).astype(np.intp)
        of = np.repeat(side, crossings)
        nth = np.arange(of.size) - np.repeat(np.cumsum(crossings) - crossings, crossings)
        line = first[of] + nth
        sides.append(of)
        shares.append((line - points[of, k]) / (following[of, k] - points[of, k]))
    of, share = np.concatenate(sides), np.concatenate(shares)
    order = np.lexsort((share, of))
    of, share = of[order], share[order]
    cuts = points[of] + share[:, None] * (following[of] - points[of])
    return np.hstack([cuts, np.roll(cuts, -1, axis=0)])
