"""The hole's edge to a small part of a pixel: where light is half way from inside to outside.

Inside and outside light are each fitted by a smooth surface, robustly, so that lamps that light
one side more and specks of dust do not shift the edge.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError
from pinsim.tracing.find import Found
from pinsim.tracing.outline import area_and_centroid, without_noise

Array = NDArray[np.float64]
Light = NDArray[np.float32]
Mask = NDArray[np.bool_]

LEAST_ACROSS_PX = 20
_PASSES = 3
_MOST_SAMPLES = 20_000
# Noise allowed in the picture that the edge is read from, as a share of the step of light there.
_NOISE_LEFT = 0.04
# Scans are at best as sharp as this; without it the staircase of a hard edge would be traced.
_LEAST_SMOOTHING_PX = 0.6


@dataclass(frozen=True, slots=True, eq=False)
class Edge:
    """What was read from the scan.

    outline_px : (n, 2), column and row of the scan, pixel middles at whole numbers.
    blur_px : standard deviation of the edge's own softness. noise_px : what the scan's noise moves
    single points of the outline by. step : light inside minus light outside. specks : number of spots
    within the hole that were taken for dust. clipped : share of the brighter side that is white.
    """

    outline_px: Array
    blur_px: float
    noise_px: float
    step: float
    specks: int
    clipped: float


def trace_edge(light: Light, found: Found, where: str) -> Edge:
    """Return the outline of a hole that was found. light : (rows, columns), linear.

    Raises SceneError when it is too few pixels across, or reaches the picture's edge.
    """
    part, inside, plate = _cut_out(light, found)
    across = 2.0 * math.sqrt(np.count_nonzero(inside) / math.pi)
    _require_pixels(across, where)
    level = 0.5
    reach = min(6.0, max(2.0, 0.1 * across))
    for _ in range(_PASSES):
        share, noise = _inside_share(part, inside, plate, reach)
        smoothing = _smoothing_px(noise, across)
        share = _smooth(share, smoothing)
        noise = noise / max(2.0 * math.sqrt(math.pi) * smoothing, 1.0)
        contour = _outline(share, inside, level, where)
        area, _ = area_and_centroid(contour)
        across = 2.0 * math.sqrt(area / math.pi)
        _require_pixels(across, where)
        slope = _slope(share, contour)
        # Of a Gaussian edge, less the 1/3 that differences two pixels apart add to its variance.
        # The 1/6 of linear interpolation between pixels stays: it moves the contour as well.
        blur = math.sqrt(max(1.0 / (2.0 * math.pi * slope**2) - 1.0 / 3.0, smoothing**2))
        # Blur pulls the half-way line of a small disc inwards: on its true edge lies a little less
        # than half, by blur/(2 sqrt(2 pi) R) to first order in the edge's curvature 1/R.
        level = 0.5 - min(0.1, blur / (math.sqrt(2.0 * math.pi) * across))
        inside = _filled(share > level, inside)
        reach = min(max(reach, 2.5 * blur), 0.25 * across)
    holes = int(np.count_nonzero(_components(inside & (share < level))[1] >= 4))
    bright = part[inside] if found.polarity == "bright" else part[plate & ~inside]
    top, _, left, _ = _window(light.shape, found)
    return Edge(
        outline_px=without_noise(contour, noise / slope) + np.array([left, top]),
        blur_px=math.sqrt(max(blur**2 - smoothing**2 - 1.0 / 6.0, 0.0)),
        noise_px=noise / slope,
        step=float(np.median(part[inside]) - np.median(part[plate & ~inside])),
        specks=holes,
        clipped=float(np.mean(bright >= 0.995)) if bright.size else 0.0,
    )


def _require_pixels(across: float, where: str) -> None:
    if across < LEAST_ACROSS_PX:
        times = math.ceil(2.0 * LEAST_ACROSS_PX / max(across, 1.0))
        raise SceneError(
            f"{where}: the hole is only {across:.0f} px across; {LEAST_ACROSS_PX} are needed to "
            f"measure it, 100 show its outline well: scan it {times} times finer or more."
        )


def _window(shape: tuple[int, ...], found: Found) -> tuple[int, int, int, int]:
    """Return the part of the scan that is looked at: the hole, and about its radius all round."""
    top, bottom, left, right = found.box
    margin = max(12, math.ceil(0.5 * max(bottom - top, right - left)))
    return (
        max(0, top - margin),
        min(shape[0], bottom + margin),
        max(0, left - margin),
        min(shape[1], right + margin),
    )


def _cut_out(light: Light, found: Found) -> tuple[Array, Mask, Mask]:
    """Return the part of the scan around the hole, and which of it is hole and which is plate."""
    top, bottom, left, right = _window(light.shape, found)
    part = np.asarray(light[top:bottom, left:right], np.float64)

    def fine(mask: Mask) -> Mask:
        rows = np.minimum(np.arange(top, bottom) // found.step, mask.shape[0] - 1)
        columns = np.minimum(np.arange(left, right) // found.step, mask.shape[1] - 1)
        return np.asarray(mask[np.ix_(rows, columns)])

    inside = fine(found.inside)
    return part, _filled(inside, inside), fine(found.outside)


def _components(mask: Mask) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    from skimage.measure import label

    labels = np.asarray(label(mask, connectivity=1))
    return labels, np.bincount(labels.ravel())[1:]


def _filled(mask: Mask, near: Mask) -> Mask:
    """Return the component that shares most with `near`, its own holes filled."""
    from scipy import ndimage

    labels, sizes = _components(mask)
    if sizes.size == 0:
        return near
    shared = np.bincount(labels[near], minlength=sizes.size + 1)[1:]
    return np.asarray(ndimage.binary_fill_holes(labels == 1 + int(np.argmax(shared))))


def _inside_share(part: Array, inside: Mask, plate: Mask, reach: float) -> tuple[Array, float]:
    """Return how far each pixel's light is from the plate's (0) to the hole's (1), and its noise.

    Pixels within `reach` of the edge so far are of neither; the surfaces bridge them.
    """
    from scipy import ndimage

    depth = ndimage.distance_transform_edt(inside)
    height = ndimage.distance_transform_edt(~inside)
    hole = _Surface(part, depth > min(reach, 0.5 * float(depth.max())))
    around = (height > reach) & plate
    if np.count_nonzero(around) < 20:
        around = height > min(reach, 0.5 * float(height.max()))
    ground = _Surface(part, around)
    step = hole.values - ground.values
    middle = float(np.median(step[inside]))
    # Where the surfaces run together, far from the edge, the share has no meaning.
    step = np.sign(middle) * np.maximum(np.sign(middle) * step, 0.2 * abs(middle))
    share = np.clip((part - ground.values) / step, -1.0, 2.0)
    return share, max(hole.noise, ground.noise) / abs(middle)


class _Surface:
    """A quadratic surface of light through some pixels of a picture, whatever lies on them."""

    def __init__(self, part: Array, taken: Mask) -> None:
        rows, columns = part.shape
        y, x = np.nonzero(taken)
        stride = max(1, len(y) // _MOST_SAMPLES)
        y, x = y[::stride], x[::stride]
        scale = 0.5 * max(rows, columns)
        middle = float(np.mean(y)), float(np.mean(x))
        # A small hole has too few pixels for more; bent surfaces would follow their noise to the edge.
        degree = 2 if len(y) >= 600 else 1 if len(y) >= 40 else 0
        light = part[y, x]

        def terms(v: Array, u: Array) -> list[Array]:
            powers = [u**i * v**j for i in range(degree + 1) for j in range(degree + 1 - i)]
            return [np.broadcast_to(p, np.broadcast_shapes(u.shape, v.shape)) for p in powers]

        design = np.stack(terms((y - middle[0]) / scale, (x - middle[1]) / scale), axis=1)
        weight: Array = np.ones(len(y))
        spread = 0.0
        factors: Array = np.zeros(design.shape[1])
        for turn in range(12):
            root = np.sqrt(weight)[:, None]
            solved = np.linalg.lstsq(design * root, light * root[:, 0], rcond=None)[0]
            factors = np.asarray(solved, np.float64)
            rest: Array = np.abs(light - design @ factors)
            spread = max(1.4826 * float(np.median(rest)), 1e-6)
            # First the least absolute errors, then nothing that lies far off: dust, scratches.
            weight = spread / np.maximum(rest, spread)
            if turn >= 6:
                weight = np.where(rest < 4.0 * spread, 1.0, 0.0)
        v = (np.arange(rows)[:, None] - middle[0]) / scale
        u = (np.arange(columns)[None, :] - middle[1]) / scale
        self.values: Array = np.tensordot(factors, np.stack(terms(v, u)), axes=1)
        self.noise = spread


def _smoothing_px(noise: float, across: float) -> float:
    """Return how much smoothing leaves little of a picture's noise, without losing a small hole."""
    wanted = noise / (2.0 * math.sqrt(math.pi) * _NOISE_LEFT)
    return min(max(wanted, _LEAST_SMOOTHING_PX), max(_LEAST_SMOOTHING_PX, across / 16.0), 4.0)


def _smooth(share: Array, sigma_px: float) -> Array:
    from scipy import ndimage

    return np.asarray(ndimage.gaussian_filter(share, sigma_px, mode="nearest"))


def _outline(share: Array, inside: Mask, level: float, where: str) -> Array:
    """Return the contour around the hole, (n, 2) column and row, of positive area in these."""
    from skimage.measure import find_contours

    whole = _filled(share > level, inside)
    # Only the hole itself: other spots and specks within it are levelled out, the edge is kept.
    from scipy import ndimage

    near = ndimage.binary_dilation(whole, iterations=2)
    core = ndimage.binary_erosion(whole, iterations=2)
    alone = np.where(near, share, level - 0.5)
    alone = np.where(core, np.maximum(alone, level + 0.25), alone)
    if whole[0].any() or whole[-1].any() or whole[:, 0].any() or whole[:, -1].any():
        raise SceneError(
            f"{where}: the hole touches the picture's edge, or its edge is too soft to tell; "
            "scan it again in focus, with some plate visible all round."
        )
    contours = [c for c in find_contours(alone, level) if np.array_equal(c[0], c[-1])]
    if not contours:
        raise SceneError(
            f"{where}: no closed outline found; scan the hole again, evenly lit and in focus."
        )
    closed = [c[:-1, ::-1] for c in contours]
    areas = [area_and_centroid(c)[0] if len(c) > 2 else 0.0 for c in closed]
    largest = int(np.argmax(np.abs(areas)))
    outline: Array = closed[largest]
    return outline if areas[largest] > 0.0 else outline[::-1]


def _slope(share: Array, contour: Array) -> float:
    """Return the middle steepness of the step of light along an outline, per pixel."""
    from scipy import ndimage

    down, right = np.gradient(share)
    place = [contour[:, 1], contour[:, 0]]
    ahead = np.roll(contour, -2, axis=0) - np.roll(contour, 2, axis=0)
    length = np.maximum(np.hypot(*ahead.T), 1e-9)
    # Across the outline and with its sign, so that noise averages out instead of adding.
    rise = ndimage.map_coordinates(right, place, order=1) * ahead[:, 1]
    rise = rise - ndimage.map_coordinates(down, place, order=1) * ahead[:, 0]
    return max(abs(float(np.median(rise / length))), 1e-3)
