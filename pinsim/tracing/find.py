"""Which part of a scan is the hole: a coarse answer, good to a pixel or two.

The hole is the largest spot, bright on dark or dark on bright, that lies wholly inside the picture
and stands out from its surroundings. Several thresholds are tried, because one that halves the
picture's histogram misses a hole that is a thousandth of it.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError

Polarity = Literal["bright", "dark"]
Light = NDArray[np.float32]
Mask = NDArray[np.bool_]

# Found on a picture of about this size; the hole is then measured on the scan's own pixels.
_COARSE_PX = 1200
# Against the noise of single pixels; pure noise, smoothed and cut in two, gives spots of 0.3.
_LEAST_CONTRAST = 2.5
# Against the whole range of light; lamps from one side alone give spots of hundredths.
_LEAST_STEP = 0.06
# What runs out of the picture is called a cut hole only if it is as clear as one.
_CUT_STEPS = 4.0
# Smaller than any hole that could be measured, larger than dust.
_LEAST_IN_PLATE_PX = 12
# Spots this many times smaller than the largest are dust.
_LIKE_SIZE = 0.6
_SMALLEST_SPOT_PX = 3


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """Where the hole is. box : rows and columns of the scan, (top, bottom, left, right), half open.

    inside : the hole, outside : what certainly belongs to the plate, both on the coarse picture,
    `step` pixels of the scan for each of its pixels.
    """

    polarity: Polarity
    box: tuple[int, int, int, int]
    inside: Mask
    outside: Mask
    step: int


@dataclass(frozen=True, slots=True, eq=False)
class _Spot:
    polarity: Polarity
    box: tuple[int, int, int, int]
    area: int
    centre: tuple[float, float]
    contrast: float
    mask: Mask
    alike: Mask

    @property
    def size(self) -> float:
        return math.sqrt(4.0 * self.area / math.pi)


def find_hole(light: Light, polarity: Polarity | None, where: str) -> Found:
    """Return the hole in a scan. light : (rows, columns), linear. polarity : None tries both.

    Raises SceneError when there is none, several of like size, or one that the picture cuts off.
    """
    step = max(1, round(max(light.shape) / _COARSE_PX))
    coarse = block_means(light, step)
    noise, smooth = _noise_and_smooth(coarse)
    tried: tuple[Polarity, ...] = (polarity,) if polarity else ("bright", "dark")
    least = max(_LEAST_CONTRAST * noise, _LEAST_STEP * float(np.ptp(smooth)))
    by_threshold: list[list[_Spot]] = []
    cut: list[_Spot] = []
    for threshold in _thresholds(smooth):
        by_threshold.append([])
        for one in tried:
            inner, at_edge = _spots(smooth, threshold, one, least)
            by_threshold[-1] += inner
            cut += [spot for spot in at_edge if spot.contrast > _CUT_STEPS * least]
    best = _best(by_threshold, coarse.shape, step)
    _refuse_cut(best, cut, step, where)
    if not best:
        raise SceneError(
            f"{where}: no hole found: nothing stands out from its surroundings all round; "
            f"the scan must show the whole hole, {_wanted(polarity)}, lit evenly and in focus."
        )
    rivals = [s for s in best if s.size >= _LIKE_SIZE * best[0].size]
    if len(rivals) > 1:
        places = "; ".join(
            f"{s.size * step:.0f} px across at {s.centre[1] * step:.0f},{s.centre[0] * step:.0f}"
            for s in rivals[:4]
        )
        raise SceneError(
            f"{where}: {len(rivals)} spots of like size could be the hole ({places}); "
            "crop the scan so that it shows one."
        )
    spot = best[0]
    top, left, bottom, right = (edge * step for edge in spot.box)
    return Found(spot.polarity, (top, bottom, left, right), spot.mask, ~spot.alike, step)


def _wanted(polarity: Polarity | None) -> str:
    return {"bright": "bright on dark", "dark": "dark on bright"}.get(
        polarity or "", "bright on dark or dark on bright"
    )


def _weight(spot: _Spot) -> float:
    return spot.contrast * spot.size


def block_means(light: Light, step: int) -> Light:
    """Return the means of step x step pixels; what is left over at the right and below is dropped."""
    rows, columns = (n // step for n in light.shape)
    blocks = light[: rows * step, : columns * step].reshape(rows, step, columns, step)
    return np.asarray(blocks.mean(axis=(1, 3), dtype=np.float32))


def _noise_and_smooth(coarse: Light) -> tuple[float, Light]:
    """Return the standard deviation of single pixels, and the picture without most of it."""
    from scipy import ndimage

    smooth = np.asarray(ndimage.gaussian_filter(coarse, 1.0), np.float32)
    # The median of a median filter keeps single hot pixels and specks from setting a threshold.
    clean = ndimage.median_filter(smooth, 3)
    rest = np.abs(coarse - smooth)
    return 1.4826 * float(np.median(rest)), np.asarray(clean, np.float32)


def _thresholds(smooth: Light) -> Iterator[float]:
    """Yield levels of light that may part the hole from its plate, by darkening rank."""
    from skimage.filters import threshold_otsu

    low, middle, high = (float(v) for v in np.quantile(smooth, (0.0, 0.5, 1.0)))
    if not high > low:
        return
    yield float(threshold_otsu(smooth))
    # Half of what the eye sees, where light falls off by a large factor over the picture.
    yield float(threshold_otsu(np.sqrt(smooth))) ** 2
    # A hole too small to matter in a histogram is the brightest or the darkest thing there.
    yield 0.5 * (middle + high)
    yield 0.5 * (middle + low)


def _spots(
    smooth: Light, threshold: float, polarity: Polarity, least: float
) -> tuple[list[_Spot], list[_Spot]]:
    """Return the largest spots that stand out by `least`: within the picture, and cut by its edge."""
    from skimage.measure import label, regionprops

    alike: Mask = smooth > threshold if polarity == "bright" else smooth < threshold
    labels = label(alike, connectivity=1)
    rows, columns = smooth.shape
    inner: list[_Spot] = []
    cut: list[_Spot] = []
    regions = sorted(regionprops(labels), key=lambda r: -r.area)
    for region in regions[:12]:
        top, left, bottom, right = region.bbox
        if min(bottom - top, right - left) < _SMALLEST_SPOT_PX:
            continue
        touches = (top == 0) + (left == 0) + (bottom == rows) + (right == columns)
        # A scan's border runs along a whole side, the plate along several; a hole does neither.
        if touches > 2 or (touches and (bottom - top > 0.9 * rows or right - left > 0.9 * columns)):
            continue
        mask: Mask = labels == region.label
        contrast = _contrast(smooth, mask, region.bbox, polarity)
        if contrast < max(least, 1e-4):
            continue
        spot = _Spot(
            polarity,
            (top, left, bottom, right),
            int(region.area_filled),
            (float(region.centroid[0]), float(region.centroid[1])),
            contrast,
            mask,
            alike,
        )
        (cut if touches else inner).append(spot)
    return inner, cut


def _contrast(
    smooth: Light, mask: Mask, box: tuple[int, int, int, int], polarity: Polarity
) -> float:
    """Return how much brighter (or darker) a spot is than a ring around it."""
    from scipy import ndimage

    top, left, bottom, right = box
    part = (slice(max(0, top - 6), bottom + 6), slice(max(0, left - 6), right + 6))
    inside, light = mask[part], smooth[part]
    near = ndimage.binary_dilation(inside, iterations=2)
    ring = ndimage.binary_dilation(near, iterations=3) & ~near
    rim = inside & ~ndimage.binary_erosion(inside, iterations=6)
    if not ring.any() or not rim.any():
        return 0.0
    difference = float(np.median(light[rim]) - np.median(light[ring]))
    return difference if polarity == "bright" else -difference


def _best(by_threshold: list[list[_Spot]], shape: tuple[int, ...], step: int) -> list[_Spot]:
    """Return the spots of the threshold that shows the clearest large one, the largest first."""
    every = [spot for spots in by_threshold for spot in spots]
    best: list[_Spot] = []
    for some in by_threshold:
        spots = [s for s in some if not _is_plate(s, every, shape, step)]
        spots.sort(key=lambda s: -s.area)
        if spots and (not best or _weight(spots[0]) > _weight(best[0])):
            best = spots
    return best


def _is_plate(spot: _Spot, every: list[_Spot], shape: tuple[int, ...], step: int) -> bool:
    """Tell whether a spot is the plate, lying wholly in the picture within a scan's border.

    Such a plate is a rectangle, perhaps turned a little, over most of the picture, and something that
    may be a hole lies in it.
    """
    from skimage.measure import find_contours

    from pinsim.tracing.outline import area_and_centroid, calipers

    top, left, bottom, right = spot.box
    if bottom - top < 0.6 * shape[0] or right - left < 0.6 * shape[1]:
        return False
    if not any(
        other.size * step >= _LEAST_IN_PLATE_PX
        and other.size < 0.8 * spot.size
        and top < other.centre[0] < bottom
        and left < other.centre[1] < right
        for other in every
    ):
        return False
    contour = max(find_contours(np.pad(spot.mask, 1).astype(float), 0.5), key=len)
    shortest = calipers(contour)[1]
    area = abs(area_and_centroid(contour)[0])
    along = np.subtract(shortest.second, shortest.first) / shortest.length
    across = contour @ np.array([-along[1], along[0]])
    # A disc fills 0.79 of the box around it.
    return area > 0.93 * shortest.length * float(np.ptp(across))


def _refuse_cut(best: list[_Spot], cut: list[_Spot], step: int, where: str) -> None:
    """Raise when what looks most like a hole runs out of the picture."""
    if not cut:
        return
    largest = max(cut, key=lambda s: s.area)
    # Something else at the edge, a shadow or a corner of the plate, does no harm.
    if best and best[0].size > largest.size / 3.0:
        return
    top, left = largest.box[:2]
    side = "top" if top == 0 else "left" if left == 0 else "lower or right"
    raise SceneError(
        f"{where}: the hole touches the picture's {side} edge (a spot {largest.size * step:.0f} px "
        f"across, around {largest.centre[1] * step:.0f},{largest.centre[0] * step:.0f}); "
        "scan it again with some plate visible all round."
    )
