"""Clear openings, and the overlap of each with itself: what every transfer function is made of.

    OTF = 1/|A| int over (A - s/2) and (A + s/2) of exp(2 pi i x^T C s) dx

A is the opening as it stands seen from behind, inside the box; s the shift that belongs to a film
frequency; C = Q/lambda the curvature of the missing focus, cycles/mm^2. A thick plate leaves the
overlap of two openings, `plate_shift` apart, in place of A. Each class answers for one shape:

- Ellipse (round and oval): one quadrature, 1e-12 for a thin plate, 1e-4 for a thick one.
- Slit: closed form.
- Traced (traced.py): numerical overlap on a grid, with its error.
"""

import math
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from pinsim.optics.falloff import lens_share
from pinsim.optics.round_hole import gauss_legendre, node_count, quick_node_count

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

_BLOCK = 1 << 15  # integrand values held at once: a few arrays of them stay in the cache


class Opening(Protocol):
    """A clear opening, centred on the hole's axis."""

    @property
    def width_mm(self) -> float:
        """Its greatest extent."""

    @property
    def mirrored(self) -> bool:
        """Whether left and right, and up and down, are mirror images: then the OTF is real."""

    def eyes_mm(self, count: int) -> Array:
        """Return about `count` points (n, 2), right and up, spread evenly over the opening."""

    def clear_share(self, plate_shift_mm: Array) -> Array:
        """Return |A and A shifted| / |A| for shifts (..., 2): what a thick plate lets through."""

    def otf(
        self, shift_mm: Array, curvature: Array, plate_shift_mm: Array, *, quick: bool = False
    ) -> Array | Complex:
        """Return the overlap integral. shift (n, 2); curvature (2, 2); plate_shift (2,).

        quick : 1e-6 is exact enough, if that is faster.
        """


@dataclass(frozen=True, slots=True, kw_only=True)
class Ellipse:
    """A round or oval hole with its axes right and up."""

    right_mm: float
    up_mm: float

    @property
    def width_mm(self) -> float:
        """The longer axis."""
        return max(self.right_mm, self.up_mm)

    @property
    def mirrored(self) -> bool:
        """An ellipse on the axes is its own mirror image."""
        return True

    def eyes_mm(self, count: int) -> Array:
        """Return points (count, 2) in a sunflower's order (Vogel, Math. Biosci. 44 (1979) 179)."""
        return np.asarray(sunflower(count) * np.array([0.5 * self.right_mm, 0.5 * self.up_mm]))

    def _on_unit_disc(self, vectors: Array) -> Array:
        return np.asarray(vectors / np.array([0.5 * self.right_mm, 0.5 * self.up_mm]))

    def clear_share(self, plate_shift_mm: Array) -> Array:
        """Two equal ellipses apart: the overlap of two circles, after Gardner 1947 (from memory)."""
        x, y = (np.asarray(plate_shift_mm)[..., k] for k in (0, 1))
        return lens_share(np.hypot(x * (2.0 / self.right_mm), y * (2.0 / self.up_mm)))

    def otf(
        self, shift_mm: Array, curvature: Array, plate_shift_mm: Array, *, quick: bool = False
    ) -> Array:
        """An affine map makes it a unit disc; areas and phases keep their ratio."""
        values = self.otf_in_colours(np.ones(1), shift_mm, curvature, plate_shift_mm, quick=quick)
        return np.asarray(values[0])

    def otf_in_colours(
        self,
        wavelengths_mm: Array,
        shift: Array,
        focus: Array,
        plate_shift_mm: Array,
        *,
        quick: bool = False,
    ) -> Array:
        """Return the overlap integral in several colours at once, (colours, ..., n).

        shift (..., n, 2) : of the opening, per mm of wavelength. focus (..., 2, 2) : curvature times
        wavelength. plate_shift_mm (..., 2).
        """
        wave = (shift @ np.swapaxes(focus, -1, -2)) * np.array(
            [0.5 * self.right_mm, 0.5 * self.up_mm]
        )
        shifts = np.multiply.outer(wavelengths_mm, self._on_unit_disc(shift))
        plate = self._on_unit_disc(plate_shift_mm)[..., None, :]
        values = disc_overlap(
            shifts.reshape(-1, 2),
            np.broadcast_to(wave, shifts.shape).reshape(-1, 2),
            np.broadcast_to(plate, shifts.shape).reshape(-1, 2),
            quick=quick,
        )
        return values.reshape(shifts.shape[:-1])


def sunflower(count: int) -> Array:
    """Return points (count, 2) spread evenly over the unit disc, the innermost first."""
    number = np.arange(count) + 0.5
    radius, angle = np.sqrt(number / count), number * (math.pi * (3.0 - math.sqrt(5.0)))
    return np.stack([radius * np.cos(angle), radius * np.sin(angle)], axis=-1)


def disc_overlap(shift: Array, wave: Array, plate_shift: Array, *, quick: bool = False) -> Array:
    """Return the overlap integral of a unit disc, or of the lens that two of them leave.

    shift, wave : (n, 2), wave in cycles per unit; plate_shift : (n, 2), 0 for a thin plate.
    Returns (n,). The overlap is the intersection of four discs centred at +-(e+s)/2 and +-(e-s)/2.
    It is integrated in closed form along chords across the larger of the two, and by Gauss-Legendre
    along it, with x + c = sin t to take the edge's square root away.
    """
    plate_x, plate_y, shift_x, shift_y = (*plate_shift.T, *shift.T)
    share = lens_share(np.hypot(plate_x, plate_y))
    thick = (plate_x != 0.0) | (plate_y != 0.0)
    side = np.where(plate_x * shift_x + plate_y * shift_y < 0.0, -0.5, 0.5)
    along_x, along_y = 0.5 * plate_x + side * shift_x, 0.5 * plate_y + side * shift_y
    other_x, other_y = 0.5 * plate_x - side * shift_x, 0.5 * plate_y - side * shift_y
    reach = np.hypot(along_x, along_y)
    # The direction of a vanishing shift is free; any unit vector does.
    away = reach > 0.0
    divisor = np.where(away, reach, 1.0)
    x, y = np.where(away, along_x / divisor, 1.0), along_y / divisor
    wave_x, wave_y = wave.T
    parts = np.stack(
        [
            reach,
            other_x * x + other_y * y,
            other_y * x - other_x * y,
            wave_x * x + wave_y * y,
            wave_y * x - wave_x * y,
        ]
    )
    result = np.zeros(len(shift))
    meets = (reach < 1.0) & (share > 0.0)
    phase = 2.0 * math.pi * np.hypot(wave_x, wave_y) * (1.0 - reach)
    # Those that need as many nodes go together: a long list costs what its slow part costs.
    nodes = quick_node_count(phase) if quick else node_count(phase)
    # The discs' corners: no longer smooth, 1e-4 is reached so.
    nodes = np.where(thick, np.maximum(32 if quick else 40, nodes + 8), nodes)
    eights = (nodes / 8.0).astype(np.uint16)  # numpy sorts short words fastest
    for lens in (False, True):
        chosen = np.flatnonzero(meets & (thick == lens))
        order = chosen[np.argsort(eights[chosen], kind="stable")]
        chords = _lens_chords if lens else _quick_chords if quick else _chords
        start = 0
        while start < order.size:
            stop = min(order.size, start + 4096)
            count = 8 * int(eights[order[stop - 1]])
            stop = min(stop, start + max(1, _BLOCK // count))
            block = order[start:stop]
            result[block] = chords(parts[:, block], count)
            start = stop
    return np.divide(result, math.pi * share, out=result, where=meets)


def _chords(parts: Array, count: int) -> Array:
    """Return the integrals over the overlap of two discs, `other` being the same two."""
    reach, _, _, wave_x, wave_y = parts
    nodes, weights = gauss_legendre(count)
    start = np.arcsin(reach)
    span = 0.5 * math.pi - start
    angle = start[:, None] + span[:, None] * nodes
    x = np.sin(angle) - reach[:, None]
    cosine = np.cos(angle)
    length = 2.0 * cosine
    chord = length * np.sinc(wave_y[:, None] * length)
    chord *= np.cos((2.0 * math.pi * wave_x)[:, None] * x)
    # Twice: the other half is the point reflection of this one, with the complex conjugate.
    return np.asarray(2.0 * span * ((chord * cosine) @ weights))


def _quick_chords(parts: Array, count: int) -> Array:
    """Return the same in single precision, to 1e-6 and three times as fast."""
    reach, _, _, wave_x, wave_y = parts
    single = np.float32
    nodes, weights = (part.astype(single) for part in gauss_legendre(count))
    start = np.arcsin(reach)
    span = 0.5 * math.pi - start
    angle = span.astype(single)[:, None] * nodes
    angle += start.astype(single)[:, None]
    cosine = np.cos(angle)
    x = np.sin(angle, out=angle)
    x -= reach.astype(single)[:, None]
    x *= (2.0 * math.pi * wave_x).astype(single)[:, None]
    chord = np.cos(x, out=x)
    # sin(turn) / turn times the chord's length 2 cosine; the least turn keeps 0/0 away.
    turn = cosine * (2.0 * math.pi * np.abs(wave_y)).astype(single)[:, None]
    turn += single(1e-6)
    chord *= np.sin(turn)
    chord /= turn
    chord *= cosine
    chord *= cosine
    return np.asarray(4.0 * span * (chord @ weights))


def _lens_chords(parts: Array, count: int) -> Array:
    """Return the integrals over the overlap of four discs.

    In single precision, three times as fast: its 1e-6 is far below the 1e-4 of the quadrature here.
    """
    nodes, weights = (part.astype(np.float32) for part in gauss_legendre(count))
    span = 0.5 * math.pi - np.arcsin(parts[0])
    start = (0.5 * math.pi - span).astype(np.float32)[:, None]
    reach, other_x, other_y, wave_x, wave_y = parts.astype(np.float32)[:, :, None]
    angle = span.astype(np.float32)[:, None] * nodes
    angle += start
    x = np.sin(angle)
    x -= reach
    cosine = np.cos(angle, out=angle)
    low, high = -cosine, cosine.copy()
    for sign in (1, -1):
        half = x - sign * other_x
        np.square(half, out=half)
        np.subtract(1, half, out=half)
        np.maximum(half, 0, out=half)  # beyond that disc: no chord
        np.sqrt(half, out=half)
        np.maximum(low, sign * other_y - half, out=low)
        half += sign * other_y
        np.minimum(high, half, out=high)
    length = high - low
    np.maximum(length, 0, out=length)
    # The closed integral along a chord; the least turn keeps 0/0 away and changes nothing.
    turn = length * np.abs(np.float32(math.pi) * wave_y)
    turn += np.float32(1e-6)
    length *= np.sin(turn)
    length /= turn
    high += low  # twice the chord's middle
    high *= np.float32(math.pi) * wave_y
    x *= np.float32(2.0 * math.pi) * wave_x
    x += high
    length *= np.cos(x, out=x)
    length *= cosine
    return np.asarray(2.0 * span * (length @ weights))


@dataclass(frozen=True, slots=True, kw_only=True)
class Slit:
    """A rectangular opening with its sides right and up."""

    right_mm: float
    up_mm: float

    @property
    def width_mm(self) -> float:
        """The longer side."""
        return max(self.right_mm, self.up_mm)

    @property
    def mirrored(self) -> bool:
        """A rectangle on the axes is its own mirror image."""
        return True

    def eyes_mm(self, count: int) -> Array:
        """Return points (n, 2) on a grid of nearly square cells."""
        across = max(1, round(math.sqrt(count * self.right_mm / self.up_mm)))
        down = max(1, round(count / across))
        right = ((np.arange(across) + 0.5) / across - 0.5) * self.right_mm
        up = ((np.arange(down) + 0.5) / down - 0.5) * self.up_mm
        return np.stack(np.meshgrid(right, up), axis=-1).reshape(-1, 2)

    def _sides(self, apart: Array) -> Array:
        sides = np.array([self.right_mm, self.up_mm]) - np.abs(apart)
        return np.asarray(np.maximum(sides, 0.0))

    def clear_share(self, plate_shift_mm: Array) -> Array:
        """Return the product of what is left of each side."""
        return np.asarray(
            np.prod(self._sides(np.asarray(plate_shift_mm)), axis=-1) / (self.right_mm * self.up_mm)
        )

    def otf(
        self, shift_mm: Array, curvature: Array, plate_shift_mm: Array, *, quick: bool = False
    ) -> Array:
        """A rectangle's overlap is a rectangle, whose Fourier transform is two sinc."""
        left = self._sides(np.asarray(plate_shift_mm))
        if not left.all():
            return np.zeros(len(shift_mm))
        wave = shift_mm @ curvature.T
        sides = np.maximum(left - np.abs(shift_mm), 0.0)
        return np.asarray(np.prod(sides * np.sinc(wave * sides), axis=-1) / np.prod(left))
