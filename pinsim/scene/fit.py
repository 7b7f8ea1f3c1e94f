"""A distance map of another size brought to the photo's, its jumps to the photo's own edges.

Between two depths there is nothing: where a map jumps, each photo pixel takes one side's distance,
the side whose colours it has. The idea of asking the photo is that of joint bilateral upsampling
(Kopf et al., ACM Trans. Graph. 26(3) 96, 2007, from memory); unlike it nothing is averaged over a jump.
"""

import math
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError
from pinsim.scene.photo import Photo
from pinsim.threads import THREADS

Float = NDArray[np.float32]
Mask = NDArray[np.bool_]

ASPECT_TOLERANCE = 0.01

# What is a jump: a difference more than twice what the slope beside it explains, plus this share of
# the nearer side's 1/distance and of the nearest's of all. Less is not seen through a bare hole.
_RELATIVE_STEP, _LEAST_STEP = 0.04, 0.005
_SLOPE_FACTOR = 2.0
# A jump may have been smeared by whoever scaled the map: as far as this many pixels, end to end.
_LONGEST_SMEAR = 6
_BETWEEN = 0.1  # a value this share away from both ends is smear, no distance

_TREATED = 2  # pixels of the photo so many map pixels away from a jump are given a side
_AROUND = 3  # map pixels around, where the sides' distances are taken from
_COLOURS_FROM = 25  # how many of these, the nearest, tell the sides' colours
_COLOUR_NOISE = 0.03  # of square roots of light, 1.0 = white
_COLOUR_CAP, _PLACE_SLOPE = 3.0, 3.0  # equal: colour can move a jump by one map pixel, no farther
_TILE_PX = 192
_SMOOTH_PX = 3
_LIST_LENGTH = 20_000  # map pixels at jumps worked on in one go

_FILL_PX = 2_000_000


def check_aspect(
    path: Path, shape: tuple[int, ...], photo_shape: tuple[int, int], kind: str
) -> None:
    """Raise SceneError for a picture that is not of the photo's shape within 1 %."""
    rows, columns = shape[0], shape[1]
    if _alike((rows, columns), photo_shape):
        return
    turned = _alike((columns, rows), photo_shape)
    hint = (
        "It looks turned: rotate it as the photo is seen upright."
        if turned
        else f"Save the {kind} at the photo's own size, or smaller in the same shape, uncropped."
    )
    raise SceneError(
        f"{path} is {columns} x {rows} pixels but the photo is "
        f"{photo_shape[1]} x {photo_shape[0]}. {hint}"
    )


def _alike(shape: tuple[int, int], photo_shape: tuple[int, int]) -> bool:
    rows = shape[1] * photo_shape[0] / photo_shape[1]
    columns = shape[0] * photo_shape[1] / photo_shape[0]
    # Half a pixel is rounding, which is more than 1 % of a very small map.
    return abs(shape[0] - rows) <= max(ASPECT_TOLERANCE * rows, 0.5) or abs(
        shape[1] - columns
    ) <= max(ASPECT_TOLERANCE * columns, 0.5)


def nearest_places(size: int, new_size: int) -> NDArray[np.intp]:
    """Return, for each of new_size pixels, the one of `size` whose area its middle lies in."""
    return ((np.arange(new_size) + 0.5) * (size / new_size)).astype(np.intp)


def at_size(array: NDArray[Any], shape: tuple[int, int]) -> NDArray[Any]:
    """Return an array (rows, columns) at another size by picking pixels: nothing is averaged."""
    if array.shape == shape:
        return array
    rows = nearest_places(array.shape[0], shape[0])
    columns = nearest_places(array.shape[1], shape[1])
    return array[rows[:, None], columns]


def colours_at(photo: Photo, shape: tuple[int, int]) -> Float:
    """Return square roots of the photo's light on a coarser grid, (rows, columns, 3).

    Nine samples a pixel are enough for telling sides apart; square roots are near to what eyes see.
    """
    samples = 3 if min(photo.shape[0] / shape[0], photo.shape[1] / shape[1]) >= 2.0 else 1
    rows = nearest_places(photo.shape[0], samples * shape[0])
    columns = nearest_places(photo.shape[1], samples * shape[1])
    coarse = np.zeros((*shape, 3), np.float32)
    for number, row in enumerate(rows):
        line = np.sqrt(photo.linear(slice(row, row + 1))[0, columns])
        coarse[number // samples] += line.reshape(shape[1], samples, 3).sum(axis=1)
    coarse /= samples * samples
    return coarse


# Fitting ----------------------------------------------------------------------------------------


# What is known of the two sides of a jump, at each of the map's pixels near one: float32, one after
# the other. The nearer side is likelier where COLOUR . c + OFFSET is above 0, in units of the colours'
# own scatter. PLACE : distance to the jump in map pixels, positive on the near side. NEAR, FAR : the
# sides' 1/distance. SPLIT : 1 where all this is known, else all are 0.
_COLOUR, _OFFSET, _PLACE, _NEAR, _FAR, _SPLIT = slice(0, 3), 3, 4, 5, 6, 7
_KNOWN = 8


def fitted(inverse: Float, photo: Photo) -> Float:
    """Return 1/distance at the photo's size, from a smaller map of the same shape.

    inverse : (rows, columns), 1/mm. On surfaces it is linear between the map's pixels, which is exact
    for planes; at a jump each pixel has a distance of one side. Takes the result's memory
    and little more.
    """
    result = _interpolated(inverse, photo.shape)
    sides = _sides(inverse, photo)
    if sides is None:
        return result
    down = nearest_places(inverse.shape[0], photo.shape[0])
    across = nearest_places(inverse.shape[1], photo.shape[1])
    scale = max(photo.shape[0] / inverse.shape[0], photo.shape[1] / inverse.shape[1])
    tile = max(1, round(_TILE_PX / scale))

    def settle(corner: tuple[int, int]) -> None:
        rows = _span(down, corner[0], tile)
        columns = _span(across, corner[1], tile)
        _settle(result, photo, sides, (rows, columns), (down, across), scale)

    with ThreadPoolExecutor(THREADS) as pool:
        for _ in pool.map(settle, _tiles_with(sides[..., _SPLIT] > 0.0, tile)):
            pass
    return result


def _tiles_with(split: Mask, tile: int) -> Iterator[tuple[int, int]]:
    for top in range(0, split.shape[0], tile):
        for left in range(0, split.shape[1], tile):
            if split[top : top + tile, left : left + tile].any():
                yield top, left


def _span(places: NDArray[np.intp], start: int, length: int) -> slice:
    first, last = np.searchsorted(places, [start, start + length])
    return slice(int(first), int(last))


def _interpolated(inverse: Float, shape: tuple[int, int]) -> Float:
    """Return the map linear between its pixels' middles, level beyond the outermost."""
    low, high, share = _neighbours(inverse.shape[1], shape[1])
    wide = inverse[:, low] + (inverse[:, high] - inverse[:, low]) * share
    low, high, share = _neighbours(inverse.shape[0], shape[0])
    result = np.empty(shape, np.float32)
    for row in range(shape[0]):
        upper, lower = wide[low[row]], wide[high[row]]
        np.subtract(lower, upper, out=result[row])
        result[row] *= share[row]
        result[row] += upper
    return result


def _neighbours(
    size: int, new_size: int
) -> tuple[NDArray[np.intp], NDArray[np.intp], NDArray[np.float32]]:
    place = np.clip((np.arange(new_size) + 0.5) * (size / new_size) - 0.5, 0.0, size - 1.0)
    low = place.astype(np.intp)
    return low, np.minimum(low + 1, size - 1), (place - low).astype(np.float32)


def _jumps(inverse: Float) -> tuple[Mask, Mask]:
    """Return which map pixels are at a jump, and which of them are smear between its ends."""
    at, smear = np.zeros(inverse.shape, np.bool_), np.zeros(inverse.shape, np.bool_)
    least = _LEAST_STEP * float(inverse.max())
    for axis in (0, 1):
        q = np.moveaxis(inverse, axis, 0)
        marks = np.moveaxis(at, axis, 0), np.moveaxis(smear, axis, 0)
        slope = np.pad(np.diff(q, axis=0), ((1, 1), (0, 0)))  # before each pixel; 0 at the ends
        size = q.shape[0]
        for length in range(1, min(_LONGEST_SMEAR, size - 1) + 1):
            first, last = q[: size - length], q[length:]
            step = last - first
            before, after = slope[: size - length], slope[length + 1 :]
            rise = np.sign(step)
            along = np.maximum(rise * before, rise * after)
            allowed = _SLOPE_FACTOR * length * np.maximum(along, 0.0)
            # A longer ramp has to rise higher, or it is a surface seen from the side.
            allowed += _RELATIVE_STEP * length * np.maximum(first, last) + least
            jump = np.abs(step) > allowed
            inside = np.zeros_like(jump)
            for k in range(1, length):
                middle = q[k : size - length + k]
                off = np.minimum((middle - first) * rise, (last - middle) * rise)
                between = jump & (off > _BETWEEN * np.abs(step))
                marks[1][k : size - length + k] |= between
                inside |= between
            # A longer span without smear only says what a shorter one in it says.
            whole = jump if length == 1 else inside
            for k in range(length + 1):
                marks[0][k : size - length + k] |= whole
    return at, smear


def _sides(inverse: Float, photo: Photo) -> Float | None:
    """Return what is known of the sides of all jumps, (rows, columns, _KNOWN); None without any."""
    from scipy.ndimage import maximum_filter

    at, smear = _jumps(inverse)
    if not at.any():
        return None
    rows, columns = np.nonzero(maximum_filter(at, 2 * _TREATED + 1))
    known = np.zeros((*inverse.shape, _KNOWN), np.float32)
    colours = np.pad(colours_at(photo, inverse.shape), [(_AROUND, _AROUND)] * 2 + [(0, 0)])
    least = _LEAST_STEP * float(inverse.max())
    clean = np.pad(np.where(smear, np.float32(np.nan), inverse), _AROUND, constant_values=np.nan)

    def part(start: int) -> None:
        r, c = rows[start : start + _LIST_LENGTH], columns[start : start + _LIST_LENGTH]
        known[r, c] = _two_sides(clean, colours, (r, c), least)

    with ThreadPoolExecutor(THREADS) as pool:
        for _ in pool.map(part, range(0, rows.size, _LIST_LENGTH)):
            pass
    return known


def _offsets() -> list[tuple[int, int]]:
    reach = range(-_AROUND, _AROUND + 1)
    return sorted(((y, x) for y in reach for x in reach), key=lambda offset: math.hypot(*offset))


def _two_sides(
    padded: Float, colours: Float, places: tuple[NDArray[np.intp], NDArray[np.intp]], least: float
) -> Float:
    """Part what lies around each place into a near and a far side; return what is known of them.

    padded : 1/distance with a margin of _AROUND, NaN where there is none. colours : likewise.
    """
    offsets = _offsets()
    away = np.array([math.hypot(*offset) for offset in offsets], np.float32)
    width = padded.shape[1]
    middle = (places[0] + _AROUND) * width + places[1] + _AROUND
    shifts = np.array([down * width + across for down, across in offsets])
    values = padded.ravel()[middle + shifts[:, None]]  # (offsets, places), nearest first
    border, split = _borders(values, least)
    known = np.zeros((middle.size, _KNOWN), np.float32)
    if not split.any():
        return known
    values, border, middle = values[:, split], border[split], middle[split]
    near, far = values >= border, values < border

    # The nearest pixel of each side gives its distance, so that it cannot lie in between.
    here = np.arange(middle.size)
    first_near, first_far = near.argmax(axis=0), far.argmax(axis=0)
    to_near, to_far = away[first_near], away[first_far]
    # A jump lies half a pixel before the first pixel of the other side; in smear, half way.
    place = np.where(to_near == 0.0, to_far - 0.5, 0.5 * (to_far - to_near))
    place = np.where(to_far == 0.0, 0.5 - to_near, place)

    colour, offset = _colour_rule(near, far, colours.reshape(-1, 3), middle, shifts)
    found = np.empty((middle.size, _KNOWN), np.float32)
    found[:, _COLOUR], found[:, _OFFSET], found[:, _PLACE] = colour, offset, place
    found[:, _NEAR], found[:, _FAR] = values[first_near, here], values[first_far, here]
    found[:, _SPLIT] = 1.0
    known[split] = found
    return known


def _borders(values: Float, least: float) -> tuple[Float, Mask]:
    """Return the value between the sides for each place, and whether there are two sides at all."""
    low = np.fmin.reduce(values, axis=0)
    high = np.fmax.reduce(values, axis=0)
    border = low + np.float32(0.5) * (high - low)
    upper = np.where(values >= border, values, np.float32(np.inf)).min(axis=0)
    lower = np.where(values < border, values, np.float32(-np.inf)).max(axis=0)
    split = upper - lower > _RELATIVE_STEP * upper + least
    # Where a surface slants past the middle the gap is elsewhere; it takes sorting to find.
    slow = np.flatnonzero(~split & (high - low > _RELATIVE_STEP * high + least))
    if slow.size:
        ordered = np.sort(values[:, slow], axis=0)  # nan last
        gaps = np.nan_to_num(np.diff(ordered, axis=0), nan=-1.0)
        widest = gaps.argmax(axis=0)
        here = np.arange(slow.size)
        gap, lower = gaps[widest, here], ordered[widest, here]
        border[slow] = lower + np.float32(0.5) * gap
        split[slow] = gap > _RELATIVE_STEP * (lower + gap) + least
    return border, split


def _colour_rule(
    near: Mask, far: Mask, colours: Float, middle: NDArray[np.intp], shifts: NDArray[np.intp]
) -> tuple[Float, Float]:
    """Return (places, 3) and (places,): the near side is likelier where their sum with a colour is > 0.

    Two clouds of colours of one scatter s^2 have the log ratio (|c - far|^2 - |c - near|^2) / (2 s^2).
    """
    sums = np.zeros((2, middle.size, 3), np.float32)
    counts = np.zeros((2, middle.size), np.float32)
    squares = np.zeros(middle.size, np.float32)
    for k in range(_COLOURS_FROM):
        colour = colours[middle + shifts[k]]
        for side, member in enumerate((near[k], far[k])):
            sums[side] += colour * member[:, None]
            counts[side] += member
        squares += (colour * colour).sum(axis=1) * (near[k] | far[k])
    means = sums / np.maximum(counts, np.float32(1.0))[..., None]
    squared = (means * means).sum(axis=2)
    scatter = squares - (counts * squared).sum(axis=0)
    scatter = np.maximum(scatter, 0.0) / np.maximum(3.0 * counts.sum(axis=0), np.float32(1.0))
    weight = (counts > 0.0).all(axis=0) / (scatter + np.float32(_COLOUR_NOISE**2))
    return weight[:, None] * (means[0] - means[1]), 0.5 * weight * (squared[1] - squared[0])


def _settle(
    result: Float,
    photo: Photo,
    sides: Float,
    tile: tuple[slice, slice],
    places: tuple[NDArray[np.intp], NDArray[np.intp]],
    scale: float,
) -> None:
    """Give the pixels near jumps, in one tile of the photo, a side's own distance."""
    from scipy.ndimage import uniform_filter

    # A margin, so that what is smoothed has no seam.
    margin = math.ceil(0.5 * scale) + _SMOOTH_PX
    wide = tuple(
        slice(max(0, one.start - margin), min(size, one.stop + margin))
        for one, size in zip(tile, photo.shape, strict=True)
    )
    inner = tuple(
        slice(one.start - w.start, one.stop - w.start) for one, w in zip(tile, wide, strict=True)
    )
    known = sides[places[0][wide[0]]][:, places[1][wide[1]]]
    light = np.sqrt(photo.linear(*wide))
    score = np.einsum("rcs,rcs->rc", known[..., _COLOUR], light) + known[..., _OFFSET]
    np.clip(score, -_COLOUR_CAP, _COLOUR_CAP, out=score)
    score = uniform_filter(score, _SMOOTH_PX)
    # Averaged over one map pixel, the place is linear between the map's pixels.
    score += _PLACE_SLOPE * uniform_filter(known[..., _PLACE], max(1, round(scale)))
    known = known[inner]
    chosen = np.where(score[inner] > 0.0, known[..., _NEAR], known[..., _FAR])
    np.copyto(result[tile], chosen, where=known[..., _SPLIT] > 0.0)


# Holes ------------------------------------------------------------------------------------------


def filled(codes: NDArray[Any], holes: Mask, photo: Photo) -> NDArray[Any]:
    """Return codes with holes given the value of known pixels around, none of them averaged.

    codes, holes : (rows, columns). Values spread into the holes where the photo is plain first and
    over its edges last (flooding of its gradient; Beucher and Lantuejoul 1979, from memory).
    Holes of large maps are filled on a grid of two million pixels.
    """
    from scipy.ndimage import maximum_filter, sobel
    from skimage.segmentation import watershed

    factor = math.ceil(math.sqrt(codes.size / _FILL_PX))
    middle = slice(factor // 2, None, factor)
    if holes[middle, middle].all():
        factor, middle = 1, slice(None)
    values, unknown = codes[middle, middle], holes[middle, middle]
    grey = colours_at(photo, values.shape).mean(axis=2)
    edges = np.hypot(sobel(grey, 0), sobel(grey, 1))
    rim = maximum_filter(unknown, 3) & ~unknown
    seeds = np.zeros(values.shape, np.int32)
    seeds[rim] = np.arange(1, np.count_nonzero(rim) + 1)
    owner = watershed(edges, seeds, mask=unknown | rim)
    small = values.copy()
    small[unknown] = values[rim][owner[unknown] - 1]
    result = codes.copy()
    places = (
        np.minimum(place // factor, size - 1)
        for place, size in zip(np.nonzero(holes), small.shape, strict=True)
    )
    result[holes] = small[tuple(places)]
    return result
