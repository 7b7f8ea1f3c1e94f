"""Near things hide far things: what a finite hole sees past the edges of what is near.

Each point's own kernel draws everything right but at one place: where a near thing ends before a far
one. There a part of the opening looks behind the edge, and another part sees less of what is behind
than its middle does. That difference is added here. It is found in the limit of rays: the opening is
covered with eyes; for each eye the scene's points are moved to where this eye sees them, nearest last;
what is covered is taken from the exposure, what is revealed is added. Only points close to an edge can
change places, so only these are moved. What no photo shows - the strip behind the edge - is filled from
the far surface beside it, and its share of the light is reported. The difference is softened by the
diffraction of the opening, as all light through it is.
"""

import math
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.optics.falloff import lens_share
from pinsim.render.project import FilmView
from pinsim.threads import THREADS

Float = NDArray[np.float32]
Array = NDArray[np.float64]
Index = NDArray[np.int32]
Places = NDArray[np.intp]
Mask = NDArray[np.bool_]

# Neighbouring points that an eye at the opening's rim sees this much farther apart, or nearer, than the
# middle does belong to different things; less is one surface that slants.
JUMP_PX = 0.7
# A strip behind an edge is moved on a grid on which it is at most this wide: eyes grow with its square.
WIDEST_STRIP_PX = 12
# The photo and the film grid blend near and far light this far from an edge.
MIXED_PX = 2
EYES_PER_STRIP = 1.5
FEWEST_EYES, MOST_EYES = 48, 160
_PARTS = 2  # whatever the threads: the order of a sum decides its last bit


@dataclass(frozen=True, slots=True, eq=False)
class _Strip:
    """Points near edges, and behind them, the farthest first.

    row, column : place on the grid; scale : m of each; light : (n, bands); behind : True for points
    that no photo shows. turn : (n, 2, 2), film pixels right and up per mm of the opening, before m.
    """

    row: Float
    column: Float
    scale: Float
    light: Float
    behind: Mask
    turn: Float


@dataclass(frozen=True, slots=True)
class Hidden:
    """What hiding changed. invented_share : of the frame's light, filled in behind edges."""

    exposure: Float
    invented_share: float


def hide(view: FilmView, exposure: Float) -> Hidden:
    """Return the exposure with near things hiding far ones.

    view : after `illuminate`, with distances. exposure : (channels, rows, columns), each point drawn by
    its own kernel. Returns a new array of that shape, or the same if nothing hides anything.
    """
    plan = view.plan
    if view.inverse_distance is None:
        return Hidden(exposure, 0.0)
    half_mm = 0.5 * plan.camera.opening.width_mm
    depth_mm = _depth_mm(view)
    scale = np.float32(1.0) + depth_mm * view.inverse_distance
    widest = float(scale.max() - scale.min()) * half_mm / plan.pitch_mm
    if widest < JUMP_PX:
        return Hidden(exposure, 0.0)
    coarser = max(1, math.ceil(widest / WIDEST_STRIP_PX))
    pitch_mm = coarser * plan.pitch_mm
    light = np.moveaxis(view.light, -1, 0)
    own = exposure
    if coarser > 1:
        light, scale, own = _means(light, coarser), _middles(scale, coarser), _means(own, coarser)
    jump = JUMP_PX * pitch_mm / half_mm
    strip = _strip(view, light, scale, jump=jump, pitch_mm=pitch_mm, coarser=coarser)
    if strip is None:
        return Hidden(exposure, 0.0)
    strip_px = (strip.scale.max() - strip.scale.min()) * half_mm / pitch_mm
    count = int(np.clip(EYES_PER_STRIP * strip_px**2, FEWEST_EYES, MOST_EYES))
    eyes = plan.camera.opening.eyes_mm(count)
    halves = [eyes[k::_PARTS] for k in range(_PARTS)]
    with ThreadPoolExecutor(THREADS) as pool:
        found = list(pool.map(lambda some: _look(strip, some, scale.shape, jump), halves))
    light_change, cover_change, revealed = (
        np.add.reduce(parts) / np.float32(len(eyes)) for parts in zip(*found, strict=True)
    )
    change = cover_change * own
    for band in plan.kernels.bands:
        change[band.channel] += np.float32(band.share) * light_change[band.band]
    if coarser > 1:
        change = _enlarged(change, coarser, plan.padded)
    inside = tuple(slice(s.start // coarser, s.stop // coarser) for s in plan.inside)
    change = _softened(change, view, float(strip.scale.max()), len(eyes))
    return Hidden(exposure + change, float(revealed[inside].mean()))


def _depth_mm(view: FilmView) -> Float:
    """Return how far before the hole each film point lies, mm; broadcasts over the padded grid."""
    plan = view.plan
    if plan.camera.surface.flat:
        return np.full((1, 1), plan.camera.focal_length_mm, np.float32)
    points = plan.camera.surface.points_mm(plan.right_mm()[None, :], plan.up_mm()[:, None])
    return np.maximum(points[..., 2], 0.0).astype(np.float32)


def _strip(
    view: FilmView, light: Float, scale: Float, *, jump: float, pitch_mm: float, coarser: int
) -> _Strip | None:
    """Gather the points that may hide or be revealed; None where there is no edge."""
    from scipy import ndimage

    plan = view.plan
    rows, columns = scale.shape
    edge = np.zeros(scale.shape, bool)
    down = np.abs(np.diff(scale, axis=0)) > jump
    across = np.abs(np.diff(scale, axis=1)) > jump
    edge[:-1] |= down
    edge[1:] |= down
    edge[:, :-1] |= across
    edge[:, 1:] |= across
    half_mm = 0.5 * plan.camera.opening.width_mm
    # Nothing is carried over the grid's border; the margins are wider than any point moves.
    farthest = math.ceil(float(scale.max()) * half_mm / pitch_mm) + 2
    if min(rows, columns) <= 2 * farthest:
        return None
    edge[:farthest] = edge[-farthest:] = False
    edge[:, :farthest] = edge[:, -farthest:] = False
    if not edge.any():
        return None
    near_edge = scale[edge]
    reach = math.ceil(float(near_edge.max() - near_edge.min()) * half_mm / pitch_mm) + 1
    close = ndimage.maximum_filter(edge.view(np.uint8), size=2 * (2 * reach) + 1).astype(bool)
    close[:farthest] = close[-farthest:] = False
    close[:, :farthest] = close[:, -farthest:] = False
    front = np.flatnonzero(close)
    behind, scale_behind, light_behind = _behind(light, scale, edge, front, jump, reach)
    place = np.concatenate([front, behind])
    all_scale = np.concatenate([scale.ravel()[front], scale_behind])
    all_light = np.concatenate([light.reshape(len(light), -1)[:, front].T, light_behind])
    order = np.argsort(all_scale, kind="stable")
    place = place[order]
    row, column = np.divmod(place, columns)
    middle = 0.5 * (coarser - 1)
    turn = _turns(
        view,
        plan.right_mm()[np.minimum(column * coarser + round(middle), plan.padded[1] - 1)],
        plan.up_mm()[np.minimum(row * coarser + round(middle), plan.padded[0] - 1)],
    )
    return _Strip(
        row=row.astype(np.float32),
        column=column.astype(np.float32),
        scale=all_scale[order],
        light=np.ascontiguousarray(all_light[order]),
        behind=order >= front.size,
        turn=(turn / pitch_mm).astype(np.float32),
    )


def _turns(view: FilmView, right_mm: Array, up_mm: Array) -> Array:
    """Return how film points move per mm of the opening, (n, 2, 2), for objects infinitely far.

    The matrix (Q r B^-T) transposed of the transfer function's phase; the identity on a flat film.
    """
    surface = view.plan.camera.surface
    if surface.flat:
        return np.eye(2)[None]
    rays = surface.chief_rays(right_mm, up_mm)
    return np.swapaxes(rays.focus(math.inf) @ rays.shift, -1, -2)


def _behind(
    light: Float, scale: Float, edge: Mask, front: Places, jump: float, reach: int
) -> tuple[Places, Float, Float]:
    """Let the far side of every edge grow under the near one, a pixel a step, `reach` steps.

    Returns places, scales and light of what is filled: each the mean of its farther neighbours.
    """
    hidden_scale = scale.ravel().copy()
    hidden_light = _clean(light, scale, edge, jump)
    filled = np.zeros(hidden_scale.size, bool)

    def farther(beside: Places, own: Places) -> Mask:
        return np.asarray(hidden_scale[beside] < hidden_scale[own] - jump)

    for _ in range(reach):
        places, chosen = _beside(front, scale.shape[1], farther)
        if not places.size:
            break
        hidden_scale[places], hidden_light[places] = (
            _mean_of(values, chosen) for values in (hidden_scale, hidden_light)
        )
        filled[places] = True
    places = np.flatnonzero(filled)
    return places, hidden_scale[places], hidden_light[places]


def _clean(light: Float, scale: Float, edge: Mask, jump: float) -> Float:
    """Return the light (points, bands) without the mixture of near and far that edges have.

    A photo's pixels blend at an edge, and so do the film grid's. Close to it light is taken from
    deeper in the same surface; what is too thin to have a depth keeps its own.
    """
    from scipy import ndimage

    result = np.ascontiguousarray(light.reshape(len(light), -1).T)
    flat = scale.ravel()
    mixed = ndimage.maximum_filter(edge.view(np.uint8), size=2 * MIXED_PX + 1).ravel().astype(bool)

    def clean_alike(beside: Places, own: Places) -> Mask:
        return np.asarray(~mixed[beside] & (np.abs(flat[beside] - flat[own]) <= jump))

    for _ in range(MIXED_PX + 1):
        places, chosen = _beside(np.flatnonzero(mixed), scale.shape[1], clean_alike)
        if not places.size:
            break
        result[places] = _mean_of(result, chosen)
        mixed[places] = False
    return result


def _beside(
    places: Places, columns: int, serves: Callable[[Places, Places], Mask]
) -> tuple[Places, list[tuple[Places, Mask]]]:
    """Return the places of which some neighbour serves, and each of the four, with who serves."""
    around = [(places + step, serves(places + step, places)) for step in (-1, 1, -columns, columns)]
    some = np.logical_or.reduce([good for _, good in around])
    return places[some], [(at[some], good[some]) for at, good in around]


def _mean_of(values: Float, chosen: list[tuple[Places, Mask]]) -> Float:
    """Return the mean over those neighbours that serve; values : (points, ...)."""
    count = sum(good.astype(np.float32) for _, good in chosen)
    shape = (-1,) + (1,) * (values.ndim - 1)
    total = sum(values[at] * good.reshape(shape).astype(np.float32) for at, good in chosen)
    return np.asarray(total / np.reshape(count, shape), np.float32)


def _look(
    strip: _Strip, eyes_mm: Array, shape: tuple[int, int], jump: float
) -> tuple[Float, Float, Float]:
    """Return what some eyes see differently, summed: light (bands, ...), coverage, revealed share.

    To be added to the exposure's light and coverage: what is covered leaves both, what is revealed
    and no photo shows enters both; coverage counts the other way round, as what is one too many.
    """
    columns = shape[1]
    size = shape[0] * columns
    top = np.full(size, -1, np.int32)
    numbers = np.arange(strip.row.size, dtype=np.int32)
    front, behind = np.flatnonzero(~strip.behind), np.flatnonzero(strip.behind)
    covered: list[Places] = []
    covered_at: list[Places] = []
    shown: list[Places] = []
    shown_at: list[Places] = []
    for right_mm, up_mm in eyes_mm.astype(np.float32):
        # A point is seen through the eye at xi where the middle sees the place m xi farther.
        across = strip.scale * (strip.turn[:, 0, 0] * right_mm + strip.turn[:, 0, 1] * up_mm)
        up = strip.scale * (strip.turn[:, 1, 0] * right_mm + strip.turn[:, 1, 1] * up_mm)
        row = np.rint(strip.row + up).astype(np.intp)
        target = row * columns + np.rint(strip.column - across).astype(np.intp)
        to_front = target[front]
        top[to_front] = numbers[front]  # the nearest comes last and stays
        winner = top[to_front]
        lost = strip.scale[winner] > strip.scale[front] + jump
        covered.append(front[lost])
        covered_at.append(to_front[lost])
        to_behind = target[behind]
        free = top[to_behind] < 0
        candidates, places = behind[free], to_behind[free]
        # A gap that one surface opens in itself is no view behind it.
        torn = _within_one(top, strip.scale, places, columns, jump)
        candidates, places = candidates[~torn], places[~torn]
        top[places] = candidates
        seen = top[places] == candidates
        shown.append(candidates[seen])
        shown_at.append(places[seen])
        top[to_front] = -1
        top[places] = -1
    gone, gone_at = np.concatenate(covered), np.concatenate(covered_at)
    come, come_at = np.concatenate(shown), np.concatenate(shown_at)
    revealed = np.bincount(come_at, minlength=size).astype(np.float32)
    cover = np.bincount(gone_at, minlength=size).astype(np.float32) - revealed
    light = np.empty((strip.light.shape[1], size), np.float32)
    for band in range(len(light)):
        light[band] = np.bincount(come_at, strip.light[come, band], size)
        light[band] -= np.bincount(gone_at, strip.light[gone, band], size)
    return light.reshape(-1, *shape), cover.reshape(shape), revealed.reshape(shape)


def _within_one(top: Index, scale: Float, places: Places, columns: int, jump: float) -> Mask:
    """Tell which free places lie between two points of one surface, left and right or up and down."""
    torn = np.zeros(places.size, bool)
    for step in (1, columns):
        one, other = top[places - step], top[places + step]
        both = (one >= 0) & (other >= 0)
        torn |= both & (np.abs(scale[one] - scale[other]) <= jump)
    return torn


def _softened(change: Float, view: FilmView, scale: float, eyes: int) -> Float:
    """Return the change as diffraction at the opening leaves it, each eye as wide as its share.

    An eye stands for 1/eyes of the opening; what it sees is smeared by that part's own small shadow,
    whose variance a Gaussian shares: (m d)^2 / (16 eyes) along each axis, that of a disc.
    """
    from scipy import fft

    plan = view.plan
    z, d = plan.camera.focal_length_mm, plan.camera.hole.diameter_mm
    rows, columns = plan.padded
    across = fft.rfftfreq(columns, plan.pitch_mm)
    down = fft.fftfreq(rows, plan.pitch_mm)
    radius = np.linspace(0.0, math.hypot(across[-1], down.max()), 256)
    variance = (scale * d) ** 2 / (16.0 * eyes)
    smear = np.exp(-2.0 * math.pi**2 * variance * radius**2)
    at = np.hypot(down[:, None], across[None, :])
    result = np.empty_like(change)

    def soften(number: int) -> None:
        light = plan.material.channels[number].light
        light = light.condensed(3) if light.shares.size > 3 else light
        curve = smear * sum(
            share * lens_share(2.0 * radius * wavelength * 1e-6 * z / d)
            for wavelength, share in zip(light.wavelengths_nm, light.shares, strict=True)
        )
        spectrum = fft.rfft2(change[number])
        spectrum *= np.interp(at, radius, curve).astype(np.float32)
        result[number] = fft.irfft2(spectrum, s=(rows, columns))

    with ThreadPoolExecutor(THREADS) as pool:
        list(pool.map(soften, range(len(change))))
    return result


def _means(planes: Float, coarser: int) -> Float:
    """Return means over squares; odd rests are dropped."""
    rows, columns = planes.shape[1] // coarser, planes.shape[2] // coarser
    cut = planes[:, : rows * coarser, : columns * coarser]
    return np.ascontiguousarray(
        cut.reshape(len(planes), rows, coarser, columns, coarser).mean(axis=(2, 4))
    )


def _middles(plane: Float, coarser: int) -> Float:
    """Return the middle one of each square, so that edges stay edges."""
    rows, columns = plane.shape[0] // coarser, plane.shape[1] // coarser
    first = coarser // 2
    return np.ascontiguousarray(plane[first::coarser, first::coarser][:rows, :columns])


def _enlarged(planes: Float, coarser: int, shape: tuple[int, int]) -> Float:
    """Return planes on the finer grid again, read linearly."""
    result = planes
    for axis, size in ((1, shape[0]), (2, shape[1])):
        place = (np.arange(size) - 0.5 * (coarser - 1)) / coarser
        index = np.clip(place.astype(np.intp), 0, result.shape[axis] - 2)
        share = np.clip(place - index, 0.0, 1.0).astype(np.float32)
        share = share.reshape([-1 if k == axis else 1 for k in range(3)])
        low, high = np.take(result, index, axis=axis), np.take(result, index + 1, axis=axis)
        result = low + (high - low) * share
    return result
