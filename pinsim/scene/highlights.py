"""Clipped highlights: how much of a photo they are, and a lift that brightens them on request.

A file with a highest code draws the sun, a lamp and a white wall alike. A bare hole spreads light
widely, so what the photo lost there is missing around every lamp. The lift gives some of it back. It
is INVENTED light: how bright the lamp was, no file tells. What it assumes:

- Only what is white or pale is lifted: two channels at the top and the third not far below. A blue sky,
  a red flower or a yellow wall that clips is a colour, hardly a lamp.
- Only what is solid is lifted: a group of clipped regions must be nearly as deep somewhere as a disc of
  its area would be. The clipping of a sunlit wall or pavement, all grains and cracks, is not, and would
  be turned into sparkle. Regions nearer to each other than 1/250 of the diagonal are one group.
- The brightness climbs from the edge of a clipped region as a parabola in stops, x (2 - x), that goes
  on where the light left off and is level in the middle. x is the depth divided by the depth of that
  region's middle, so a small lamp is lifted as much as a broad sky; but a broad region is level deeper
  than 1/200 of the picture's diagonal, about what a bare hole blurs, and specks less deep than 1/1000
  of it are lifted less, as they are noise or glints.
- A pixel takes part by its own brightness too, from 0.75 of white on, so a dark twig before a bright
  sky stays dark.
- Half of the light added has the pixel's own colour, half is neutral: lamps burn out to white.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.scene.gamut import lowest

Float = NDArray[np.float32]
LinearStrip = Callable[[slice, slice], Float]

LIFT_RANGE_STOPS = (0.0, 6.0)
LIFT_HINT = "(--highlight-lift to change)"
CLIPPED = 0.98  # of white: JPEG leaves 253 to 255 where a lamp was all white
_FROM = 0.75
# The lowest channel: pale enough from the first number on, all the way from the second.
_PALE = (0.25, 0.6)
_PALE_CELL = 0.45
# Depth of a group squared, over that of a disc of its area: what begins to count, and what is solid.
_SOLID = (0.05, 0.2)
_ONE_GROUP = 1.0 / 250.0
_LEVEL_AT = 1.0 / 200.0
_SPECK = 1.0 / 1000.0
_COLOURED = 0.5
# The lift is worked out on at most so many cells: 1.5 times as fine as the film grid of most designs.
_CELLS = 2_000_000
_SAMPLE = 1_000_000  # pixels looked at to tell a share
_BAND = 1 << 22  # values of light held at once


def require_lift(stops: float, where: str) -> float:
    """Return a lift that is possible; raise SceneError, naming where it stands, for another."""
    low, high = LIFT_RANGE_STOPS
    if not low <= stops <= high:
        raise SceneError(out_of_range(where, stops, "stops", low, high))
    return float(stops)


def sampled(codes: NDArray[Any]) -> NDArray[Any]:
    """Return every pixel of a small picture, and an evenly spread part of a large one."""
    step = math.ceil(math.sqrt(codes.shape[0] * codes.shape[1] / _SAMPLE))
    return codes[::step, ::step]


def clipped_share(codes: NDArray[Any], top: int) -> float:
    """Return how much of a picture, 0 to 1, has two channels (of grey: its one) at the highest code.

    codes : (rows, columns, channels). One channel alone that clips is a colour, hardly a lamp.
    """
    some = sampled(codes)
    at_top = np.zeros(some.shape[:2], np.uint8)
    for channel in range(some.shape[2]):
        at_top += some[..., channel] >= top
    return float((at_top >= min(2, some.shape[2])).mean())


def _second(light: Float) -> Float:
    """Return the middle one of three channels."""
    a, b, c = light[..., 0], light[..., 1], light[..., 2]
    return np.maximum(np.minimum(a, b), np.minimum(np.maximum(a, b), c))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class HighlightLift:
    """How much each part of a photo is brightened.

    stops : (rows, columns) of cells, each of `cell_px` x `cell_px` photo pixels; 0 where nothing is.
    """

    stops: Float
    cell_px: int

    def brightened(self, light: Float, rows: slice, columns: slice) -> Float:
        """Return the photo's linear light (rows, columns, 3) of this part, brightened."""
        down = _places(rows, light.shape[0], self.cell_px, self.stops.shape[0])
        across = _places(columns, light.shape[1], self.cell_px, self.stops.shape[1])
        near = self.stops[down[0].min() : down[1].max() + 1, across[0].min() : across[1].max() + 1]
        if not near.any():
            return light
        tall = _between(self.stops, down)
        stops = np.ascontiguousarray(_between(tall.T, across).T)
        white = _second(light)
        stops *= _smooth(white, _FROM, 1.0) * _smooth(lowest(light), *_PALE)
        added = np.exp2(stops) - 1.0
        return np.asarray(
            light + added[..., None] * (_COLOURED * light + (1.0 - _COLOURED) * white[..., None]),
            np.float32,
        )


def _smooth(values: NDArray[np.floating[Any]], low: float, high: float) -> Any:
    """Return 0 below low, 1 above high, and a smooth climb between."""
    x = np.clip((values - low) / (high - low), 0.0, 1.0)
    return x * x * (3.0 - 2.0 * x)


def _places(
    part: slice, size: int, cell_px: int, cells: int
) -> tuple[NDArray[np.intp], NDArray[np.intp], Float]:
    """Return, for photo pixels, the two nearest cells and the weight of the second."""
    pixel = (part.start or 0) + np.arange(size)
    place = np.clip((pixel + 0.5) / cell_px - 0.5, 0.0, cells - 1.0)
    first = np.minimum(place.astype(np.intp), max(cells - 2, 0))
    return first, np.minimum(first + 1, cells - 1), (place - first).astype(np.float32)


def _between(values: Float, places: tuple[NDArray[np.intp], NDArray[np.intp], Float]) -> Float:
    first, second, weight = places
    return np.asarray(
        values[first] * (1.0 - weight[:, None]) + values[second] * weight[:, None], np.float32
    )


def plan_lift(
    linear: LinearStrip, shape: tuple[int, int], *, stops: float, around: bool = False
) -> HighlightLift | None:
    """Work out the lift for a photo, or None when nothing in it is clipped white.

    linear : gives the photo's light for rows and columns. shape : its rows and columns. stops : the
    lift in the middle of a clipped region. around : the left edge goes on at the right edge.
    """
    from scipy.ndimage import distance_transform_edt, label, maximum

    cell_px = max(1, math.ceil(math.sqrt(shape[0] * shape[1] / _CELLS)))
    clipped = _clipped_cells(linear, shape, cell_px)
    if not clipped.any():
        return None
    diagonal = math.hypot(*clipped.shape)
    deepest = max(1.0, _LEVEL_AT * diagonal)
    turn = math.ceil(deepest) + 1 if around else 0
    region = np.pad(clipped, ((0, 0), (turn, turn)), mode="wrap") if turn else clipped
    if region.all():
        return HighlightLift(stops=np.full(clipped.shape, stops, np.float32), cell_px=cell_px)
    depth = distance_transform_edt(region) - 0.5
    names, count = label(region, np.ones((3, 3), int))
    middle = np.zeros(count + 1)
    middle[1:] = maximum(depth, names, np.arange(1, count + 1))
    middle = np.clip(middle, max(0.5, _SPECK * diagonal), deepest)
    x = np.clip(depth / middle[names], 0.0, 1.0)
    lift = (stops * _solid(region, depth, diagonal) * x * (2.0 - x)).astype(np.float32)
    return HighlightLift(
        stops=np.ascontiguousarray(lift[:, turn : lift.shape[1] - turn]), cell_px=cell_px
    )


def _solid(region: NDArray[np.bool_], depth: NDArray[Any], diagonal: float) -> Any:
    """Return for each cell how solid the group of clipped regions that it belongs to is, 0 to 1."""
    from scipy.ndimage import distance_transform_edt, label, maximum

    near = distance_transform_edt(~region) <= max(1.5, 0.5 * _ONE_GROUP * diagonal)
    names, count = label(near, np.ones((3, 3), int))
    deepest = np.zeros(count + 1)
    deepest[1:] = maximum(depth, names, np.arange(1, count + 1))
    area = np.maximum(np.bincount(names[region], minlength=count + 1), 1)
    # Half a cell is added as the middle of a disc of few cells is one of them.
    return _smooth(math.pi * (deepest + 0.5) ** 2 / area, *_SOLID)[names]


def _clipped_cells(linear: LinearStrip, shape: tuple[int, int], cell_px: int) -> NDArray[np.bool_]:
    """Return which cells are clipped white over at least half of their pixels."""
    rows, columns = -(-shape[0] // cell_px), -(-shape[1] // cell_px)
    starts = np.arange(0, shape[1], cell_px)
    sizes = np.diff(np.append(starts, shape[1]))
    cells = np.empty((rows, columns), np.bool_)
    band = max(1, _BAND // (3 * shape[1] * cell_px))
    for first in range(0, rows, band):
        last = min(first + band, rows)
        light = linear(slice(first * cell_px, min(last * cell_px, shape[0])), slice(None))
        white = (_second(light) >= CLIPPED) & (lowest(light) >= _PALE_CELL)
        across = np.add.reduceat(white, starts, axis=1, dtype=np.int32)
        tops = np.arange(0, white.shape[0], cell_px)
        count = np.add.reduceat(across, tops, axis=0)
        area = np.diff(np.append(tops, white.shape[0]))[:, None] * sizes[None, :]
        cells[first:last] = 2 * count >= area
    return cells
