"""A small exact scene of things near and far, and its picture through a hole of any size.

Invented for the tests: a wall, a table top that slants from near to far, discs and thin rods, all with
textures that are formulas. A camera's eye is one point of the opening; the film stays where it is while
the eye wanders over the opening, and the mean of many such pictures is what a finite hole draws in the
limit of rays (elementary geometry: a ray is straight, and the nearest surface on it is what is seen).

Millimetres. x right, y up, Z from the hole's plane into the scene; film points (u, v) are upright, as
the scene is seen: through the eye (0, 0) the point (u, v) looks along (u, v, focal length).
"""

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy import signal

Array = NDArray[np.float64]


def _texture(seed: int, base: tuple[float, float, float], finest_mm: float) -> Callable[..., Array]:
    """Return a smooth coloured texture: eight waves down to a period of `finest_mm`."""
    rng = np.random.default_rng(seed)
    period = finest_mm * 2.0 ** rng.uniform(0.0, 4.0, 8)
    angle = rng.uniform(0.0, np.pi, 8)
    phase = rng.uniform(0.0, 2.0 * np.pi, 8)
    tint = rng.uniform(0.6, 1.0, (8, 3))

    def at(x: Array, y: Array) -> Array:
        light = np.zeros((*np.broadcast_shapes(x.shape, y.shape), 3))
        for k in range(8):
            wave = np.sin(
                2.0 * np.pi * (x * np.cos(angle[k]) + y * np.sin(angle[k])) / period[k] + phase[k]
            )
            light += wave[..., None] * tint[k]
        # A sum of eight waves stays within 8; three standard deviations use the range.
        return np.asarray(np.clip(base * (1.0 + light / 7.0), 0.01, 1.0))

    return at


@dataclass(frozen=True)
class Upright:
    """A flat thing that faces the camera squarely. inside : which of its points exist."""

    distance_mm: float
    texture: Callable[..., Array]
    inside: Callable[[Array, Array], NDArray[np.bool_]]


@dataclass(frozen=True)
class Table:
    """The plane y = -below_mm between two distances."""

    below_mm: float
    from_mm: float
    to_mm: float
    texture: Callable[..., Array]


def _everywhere(x: Array, _y: Array) -> NDArray[np.bool_]:
    return np.ones(x.shape, bool)


def _disc(x0: float, y0: float, radius: float) -> Callable[[Array, Array], NDArray[np.bool_]]:
    return lambda x, y: (x - x0) ** 2 + (y - y0) ** 2 < radius**2


def _rod(x0: float, slope: float, width: float) -> Callable[[Array, Array], NDArray[np.bool_]]:
    return lambda x, y: np.abs(x - x0 - slope * y) < 0.5 * width * np.hypot(1.0, slope)


THINGS: tuple[Upright | Table, ...] = (
    Upright(2000.0, _texture(1, (0.55, 0.6, 0.7), 30.0), _everywhere),
    Table(60.0, 150.0, 2000.0, _texture(2, (0.5, 0.4, 0.3), 12.0)),
    Upright(700.0, _texture(3, (0.2, 0.5, 0.25), 12.0), _disc(70.0, 40.0, 75.0)),
    Upright(350.0, _texture(4, (0.7, 0.3, 0.2), 7.0), _disc(-45.0, -5.0, 38.0)),
    Upright(240.0, _texture(5, (0.75, 0.7, 0.4), 5.0), _disc(28.0, -18.0, 17.0)),
    Upright(180.0, _texture(6, (0.1, 0.1, 0.12), 4.0), _rod(8.0, 0.35, 2.5)),
    Upright(150.0, _texture(7, (0.85, 0.8, 0.75), 4.0), _rod(-14.0, -0.2, 1.6)),
)


def _nearest(
    u_mm: Array, v_mm: Array, eye_mm: tuple[float, float], focal_length_mm: float
) -> tuple[NDArray[np.intp], Array]:
    """Return which thing film points see through one eye, and its distance Z, both (...)."""
    ex, ey = eye_mm
    # Through the eye the film point looks along (u + ex, v + ey, f).
    across, up = np.broadcast_arrays((u_mm + ex) / focal_length_mm, (v_mm + ey) / focal_length_mm)
    nearest = np.full(across.shape, np.inf)
    number = np.zeros(across.shape, np.intp)
    for k, thing in enumerate(THINGS):
        if isinstance(thing, Upright):
            z = np.full(across.shape, thing.distance_mm)
            seen = thing.inside(ex + across * z, ey + up * z) & (z < nearest)
        else:
            z = np.where(up < 0.0, (-thing.below_mm - ey) / np.minimum(up, -1e-9), np.inf)
            seen = (z >= thing.from_mm) & (z < thing.to_mm) & (z < nearest)
        nearest[seen] = z[seen]
        number[seen] = k
    return number, nearest


def look(
    u_mm: Array, v_mm: Array, eye_mm: tuple[float, float], focal_length_mm: float
) -> tuple[Array, Array]:
    """Return light (..., 3) and distance Z (...) that film points see through one eye."""
    number, z = _nearest(u_mm, v_mm, eye_mm, focal_length_mm)
    x = eye_mm[0] + (u_mm + eye_mm[0]) / focal_length_mm * z
    y = eye_mm[1] + (v_mm + eye_mm[1]) / focal_length_mm * z
    light = np.zeros((*number.shape, 3))
    for k, thing in enumerate(THINGS):
        seen = number == k
        light[seen] = thing.texture(x[seen], (y if isinstance(thing, Upright) else z)[seen])
    return light, z


def eyes(diameter_mm: float, count: int) -> Array:
    """Return (count, 2) points spread evenly over a round opening: a sunflower's seeds (Vogel 1979)."""
    k = np.arange(count) + 0.5
    radius = 0.5 * diameter_mm * np.sqrt(k / count)
    angle = k * np.pi * (3.0 - np.sqrt(5.0))
    return np.stack([radius * np.cos(angle), radius * np.sin(angle)], axis=-1)


def sharp(
    u_mm: Array, v_mm: Array, focal_length_mm: float, pitch_mm: float, fine: int
) -> tuple[Array, Array]:
    """Return the photo (rows, columns, 3), means over pixels, and distances (rows, columns)."""
    light = np.zeros((v_mm.size, u_mm.size, 3))
    offsets = (np.arange(fine) + 0.5) / fine - 0.5
    for a in offsets:
        for b in offsets:
            light += look(
                (u_mm + a * pitch_mm)[None, :],
                (v_mm + b * pitch_mm)[:, None],
                (0.0, 0.0),
                focal_length_mm,
            )[0]
    distance = _nearest(u_mm[None, :], v_mm[:, None], (0.0, 0.0), focal_length_mm)[1]
    return light / fine**2, distance


def through_hole(
    u_mm: Array, v_mm: Array, diameter_mm: float, focal_length_mm: float, count: int
) -> tuple[Array, NDArray[np.bool_]]:
    """Return the finite hole's picture (rows, columns, 3) and where nothing hidden is revealed.

    Relative to white on the axis: each eye's light weighs cos^4 of its own slant. A point is hidden
    when the middle of the opening does not see it, though the eye does.
    """
    total = np.zeros((v_mm.size, u_mm.size, 3))
    plain = np.ones((v_mm.size, u_mm.size), bool)
    u, v = u_mm[None, :], v_mm[:, None]
    for ex, ey in eyes(diameter_mm, count):
        light, distance = look(u, v, (ex, ey), focal_length_mm)
        slant = focal_length_mm / np.sqrt((u + ex) ** 2 + (v + ey) ** 2 + focal_length_mm**2)
        total += light * slant[..., None] ** 4
        # The same point of the scene, looked at through the middle.
        m = 1.0 + focal_length_mm / distance
        seen = _nearest(u + m * ex, v + m * ey, (0.0, 0.0), focal_length_mm)[1]
        plain &= seen > distance * (1.0 - 1e-6)
    return total / count, plain


def plain_layers(
    photo: Array, distance_mm: Array, diameter_mm: float, focal_length_mm: float, pitch_mm: float
) -> Array:
    """Return the picture by the usual short cut, for comparison: layers laid over one another.

    Each of twelve layers, even in 1/Z, is blurred by its own disc and covers what is behind it.
    """
    m = 1.0 + focal_length_mm / distance_mm
    borders = np.linspace(m.min(), m.max() * (1.0 + 1e-9), 13)
    result = np.zeros(photo.shape)
    for low, high in pairwise(borders):
        layer = ((m >= low) & (m < high)).astype(float)
        if layer.any():
            kernel = _disc_kernel(0.5 * (low + high) * diameter_mm / pitch_mm)
            cover = signal.fftconvolve(layer, kernel, mode="same")[..., None]
            light = signal.fftconvolve(
                photo * layer[..., None], kernel[..., None], mode="same", axes=(0, 1)
            )
            result = result * (1.0 - cover) + light
    return result


def one_disc(
    photo: Array, distance_mm: float, diameter_mm: float, focal_length_mm: float, pitch_mm: float
) -> Array:
    """Return the picture with everything at one distance."""
    kernel = _disc_kernel((1.0 + focal_length_mm / distance_mm) * diameter_mm / pitch_mm)
    return np.asarray(signal.fftconvolve(photo, kernel[..., None], mode="same", axes=(0, 1)))


def _disc_kernel(diameter_px: float) -> Array:
    half = int(np.ceil(0.5 * diameter_px)) + 1
    fine = (np.arange(8) + 0.5) / 8.0 - 0.5
    axis = (np.arange(-half, half + 1)[:, None] + fine).ravel()
    inside = np.hypot(axis[:, None], axis[None, :]) < 0.5 * diameter_px
    side = 2 * half + 1
    kernel = inside.reshape(side, 8, side, 8).mean(axis=(1, 3))
    return np.asarray(kernel / kernel.sum())
