"""Band-limited resampling along one axis, as a few dense blocks of a banded matrix.

A film pixel takes light from some tens of photo pixels. Written as small dense matrices, one for
each group of neighbouring film pixels, the work is done by BLAS, with a kernel long enough that its
response is known and flat: what little it dims is given back exactly by `response`.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Float = NDArray[np.float32]

# Half the length of the kernel in its own periods, and its Kaiser parameter: the response is 1
# within 1e-3 up to 3/4 of its cut-off, 1/2 at it, below 1e-3 at 5/4.
HALF_PERIODS = 6.0
KAISER_BETA = 5.0
# With its cut-off here, relative to the film grid's Nyquist, the kernel has ended where the grid
# does, so nothing is aliased; what it dims below, `response` knows and spreading gives back.
ALIAS_FREE = 0.8
_GROUP = 32
_INSIDE = np.linspace(0.0, 1.0, 2049)
_WINDOW = np.i0(KAISER_BETA * np.sqrt(_INSIDE)) / np.i0(KAISER_BETA)


def _kernel(distance: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the windowed sinc at distances in its own periods."""
    inside = np.maximum(1.0 - (distance / HALF_PERIODS) ** 2, 0.0)
    # The Bessel function I0 is a series in the square of its argument: smooth, so a table serves.
    window = np.interp(inside, _INSIDE, _WINDOW)
    return np.where(np.abs(distance) < HALF_PERIODS, np.sinc(distance) * window, 0.0)


def response(frequency: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return what the kernel leaves of a wave. frequency : any shape, cycles per own period."""
    fine = np.linspace(-HALF_PERIODS, HALF_PERIODS, 769)
    weights = _kernel(fine)
    weights /= weights.sum()
    flat = np.cos(2.0 * np.pi * np.outer(frequency.ravel(), fine)) @ weights
    return np.asarray(flat.reshape(frequency.shape))


@dataclass(frozen=True, slots=True, eq=False)
class Block:
    """A group of film pixels `to`, the photo pixels `take` they need, and the weights between.

    weights : float32 (film pixels, photo pixels).
    """

    to: slice
    take: slice
    weights: Float


def fold(index: NDArray[np.intp], size: int, beyond: str) -> NDArray[np.intp]:
    """Return where the photo is read for whole positions that may lie beyond it.

    Where none does, these are the positions themselves.
    """
    if index.size and index.min() >= 0 and index.max() < size:
        return index
    if beyond == "mirror":
        index = np.mod(index, 2 * size)
        return np.where(index < size, index, 2 * size - 1 - index)
    return np.clip(index, 0, size - 1)


def make_blocks(
    position: NDArray[np.floating[Any]],
    size: int,
    *,
    step: float | NDArray[np.floating[Any]],
    beyond: str,
    cutoff: float = 1.0,
) -> list[Block]:
    """Return the blocks that resample an axis of `size` photo pixels.

    position : (n,) where each film pixel's middle lies, in photo pixels, 0 = middle of the first.
    step : photo pixels per film pixel, one or (n,) of them; below 1 the photo is the coarser grid.
    beyond : "mirror", "extend" or "black", for positions outside the photo.
    cutoff : of the kernel, relative to the coarser grid's Nyquist frequency.
    """
    periods = np.broadcast_to(np.maximum(1.0, np.asarray(step) / cutoff), position.shape)
    blocks = []
    for start in range(0, position.size, _GROUP):
        middle = position[start : start + _GROUP]
        period = periods[start : start + _GROUP]
        first = np.ceil(middle - HALF_PERIODS * period).astype(np.intp)
        index = first[:, None] + np.arange(int(np.ceil(2.0 * HALF_PERIODS * period.max())) + 1)
        weight = _kernel((index - middle[:, None]) / period[:, None])
        # Normalised row by row, so that a plain wall stays plain to the last bit.
        weight /= weight.sum(axis=1, keepdims=True)
        if beyond == "black":
            weight *= (index >= 0) & (index < size)
        source = fold(index, size, beyond)
        low, high = int(source.min()), int(source.max()) + 1
        dense = np.zeros((middle.size, high - low))
        rows = np.broadcast_to(np.arange(middle.size)[:, None], source.shape)
        if source is index:
            dense[rows, source - low] = weight
        else:
            np.add.at(dense, (rows, source - low), weight)
        blocks.append(
            Block(slice(start, start + middle.size), slice(low, high), dense.astype(np.float32))
        )
    return blocks


_TABLE_STEPS = (
    512  # of the kernel per period: reading the nearest errs by less than 1e-3 of a weight
)
_TABLE = _kernel(np.arange(int(HALF_PERIODS) * _TABLE_STEPS + 2) / _TABLE_STEPS).astype(np.float32)


def resample_line(
    line: Float, position: NDArray[np.floating[Any]], *, step: float, beyond: str, cutoff: float
) -> Float:
    """Resample one line of a picture whose scale is its own.

    line : (size, channels). position : (n,); step, beyond and cutoff as for make_blocks.
    Returns (n, channels). For lines that share nothing with their neighbours; the kernel is read
    from a table, as its weights are made for each line anew.
    """
    from scipy.sparse import csr_array

    size = line.shape[0]
    period = max(1.0, step / cutoff)
    reach = HALF_PERIODS * period
    taps = int(np.ceil(2.0 * reach)) + 1
    index = np.ceil(position - reach).astype(np.intp)[:, None] + np.arange(taps)
    apart = np.abs(index - position[:, None]) * (_TABLE_STEPS / period) + 0.5
    weight = _TABLE[np.minimum(apart, _TABLE.size - 1).astype(np.intp)]
    weight /= weight.sum(axis=1, keepdims=True)
    if beyond == "black":
        weight *= (index >= 0) & (index < size)
    rows = np.arange(0, weight.size + 1, taps)
    matrix = csr_array(
        (weight.ravel(), fold(index, size, beyond).ravel(), rows), (position.size, size)
    )
    return np.asarray(matrix @ line, np.float32)


@dataclass(frozen=True, slots=True)
class Part:
    """A rectangle of a picture in pixels, edges not necessarily between pixels."""

    top: float
    left: float
    height: float
    width: float


def whole(picture: Float) -> Part:
    """Return the part that is all of a picture."""
    return Part(0.0, 0.0, float(picture.shape[0]), float(picture.shape[1]))


def resample_part(picture: Float, part: Part, shape: tuple[int, int]) -> Float:
    """Return a part of a picture of linear light at another size, band-limited either way.

    picture : (rows, columns, channels), NaN where nothing was recorded; shape : rows and columns
    wanted. Returns float32; NaN where the nearest pixel has none.
    """
    hidden = np.isnan(picture[..., 0])
    seen = np.where(hidden[..., None], np.float32(0.0), picture)
    row = part.top - 0.5 + (np.arange(shape[0]) + 0.5) * part.height / shape[0]
    column = part.left - 0.5 + (np.arange(shape[1]) + 0.5) * part.width / shape[1]
    down = make_blocks(row, picture.shape[0], step=part.height / shape[0], beyond="mirror")
    across = make_blocks(column, picture.shape[1], step=part.width / shape[1], beyond="mirror")
    result: Float = _through(_through(seen, down).swapaxes(0, 1), across).swapaxes(0, 1)
    if hidden.any():
        # What is hidden counts as nothing, not as black: divide by the share that was seen.
        share = _through(
            _through((~hidden).astype(np.float32)[..., None], down).swapaxes(0, 1), across
        )
        result = np.asarray(result / np.maximum(share.swapaxes(0, 1), 0.25), np.float32)
        nearest_row = np.clip(np.rint(row), 0, picture.shape[0] - 1).astype(np.intp)
        nearest_column = np.clip(np.rint(column), 0, picture.shape[1] - 1).astype(np.intp)
        result[hidden[np.ix_(nearest_row, nearest_column)]] = np.nan
    return np.ascontiguousarray(np.maximum(result, 0.0, where=~np.isnan(result), out=result))


def _through(picture: Float, blocks: list[Block]) -> Float:
    """Resample the first axis of (n, m, channels)."""
    count = blocks[-1].to.stop
    flat = np.ascontiguousarray(picture).reshape(picture.shape[0], -1)
    result = np.empty((count, flat.shape[1]), np.float32)
    for block in blocks:
        result[block.to] = block.weights @ flat[block.take]
    return result.reshape(count, *picture.shape[1:])


def interpolate(
    planes: Float, row: NDArray[np.floating[Any]], column: NDArray[np.floating[Any]]
) -> Float:
    """Read planes (n, rows, columns) between their points: float32 (n, row.size, column.size)."""
    down = make_blocks(row, planes.shape[1], step=1.0, beyond="mirror")
    across = make_blocks(column, planes.shape[2], step=1.0, beyond="mirror")
    rows_last = np.moveaxis(planes, 0, -1)
    result = _through(_through(rows_last, down).swapaxes(0, 1), across)
    return np.ascontiguousarray(np.moveaxis(result.swapaxes(0, 1), -1, 0))
