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
from pinsim.optics.round_hole import gauss_legendre, node_count

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

_BLOCK = 1 << 19  # integrand values held at once: 4 MB for each of a few arrays


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
        """Return the overlap integral in several colours at once, (colours, n).

        shift (n, 2) : of the opening, per mm of wavelength. focus (2, 2) : curvature times wavelength.
        """
        wave = (shift @ focus.T) * np.array([0.5 * self.right_mm, 0.5 * self.up_mm])
        shifts = wavelengths_mm[:, None, None] * self._on_unit_disc(shift)
        values = disc_overlap(
            shifts.reshape(-1, 2),
            np.broadcast_to(wave, shifts.shape).reshape(-1, 2),
            self._on_unit_disc(plate_shift_mm),
            quick=quick,
        )
        return values.reshape(shifts.shape[:2])


def sunflower(count: int) -> Array:
    """Return points (count, 2) spread evenly over the unit disc, the innermost first."""
    number = np.arange(count) + 0.5
    radius, angle = np.sqrt(number / count), number * (math.pi * (3.0 - math.sqrt(5.0)))
    return np.stack([radius * np.cos(angle), radius * np.sin(angle)], axis=-1)


def disc_overlap(shift: Array, wave: Array, plate_shift: Array, *, quick: bool = False) -> Array:
    """Return the overlap integral of a unit disc, or of the lens that two of them leave.

    shift, wave : (n, 2), wave in cycles per unit; plate_shift : (2,), 0 for a thin plate.
    Returns (n,). The overlap is the intersection of four discs centred at +-(e+s)/2 and +-(e-s)/2.
    It is integrated in closed form along chords across the larger of the two, and by Gauss-Legendre
    along it, with x + c = sin t to take the edge's square root away.
    """
    share = float(lens_share(np.asarray(np.hypot(*plate_shift))))
    if share <= 0.0:
        return np.zeros(len(shift))
    thin = not plate_shift.any()
    first, second = 0.5 * (plate_shift + shift), 0.5 * (plate_shift - shift)
    swap = np.einsum("ij,ij->i", first, first) < np.einsum("ij,ij->i", second, second)
    along = np.where(swap[:, None], second, first)
    other = np.where(swap[:, None], first, second)
    reach = np.hypot(along[:, 0], along[:, 1])
    # The direction of a vanishing shift is free; any unit vector does.
    unit = np.divide(along, reach[:, None], out=np.zeros_like(along), where=reach[:, None] > 0)
    unit[reach == 0.0, 0] = 1.0
    across = np.stack([-unit[:, 1], unit[:, 0]], axis=1)
    parts = np.stack(
        [
            reach,
            np.einsum("ij,ij->i", other, unit),
            np.einsum("ij,ij->i", other, across),
            np.einsum("ij,ij->i", wave, unit),
            np.einsum("ij,ij->i", wave, across),
        ]
    )
    result = np.zeros(len(shift))
    meets = np.flatnonzero(reach < 1.0)
    phase = 2.0 * math.pi * np.hypot(wave[meets, 0], wave[meets, 1]) * (1.0 - reach[meets])
    order = meets[np.argsort(phase)]
    phase.sort()
    start = 0
    while start < order.size:
        stop = min(order.size, start + 4096)
        count = node_count(float(phase[stop - 1]))
        if not thin:
            count = max(40, count + 8)  # the discs' corners: no longer smooth, 1e-4 is reached here
        stop = min(stop, start + max(1, _BLOCK // count))
        block = order[start:stop]
        chords = _lens_chords if not thin else _quick_chords if quick else _chords
        result[block] = chords(parts[:, block], count)
        start = stop
    return result / (math.pi * share)


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
    reach, other_x, other_y, wave_x, wave_y = parts
    single = np.float32
    nodes, weights = (part.astype(single) for part in gauss_legendre(count))
    start = np.arcsin(reach)
    span = 0.5 * math.pi - start
    angle = start.astype(single)[:, None] + span.astype(single)[:, None] * nodes
    x = np.sin(angle) - reach.astype(single)[:, None]
    cosine = np.cos(angle)
    low, high = -cosine, cosine.copy()
    for sign in (1.0, -1.0):
        inside = 1.0 - np.square(x - (sign * other_x).astype(single)[:, None])
        half = np.sqrt(np.maximum(inside, 0.0))
        middle = (sign * other_y).astype(single)[:, None]
        np.maximum(low, middle - half, out=low)
        half[inside <= 0.0] = -np.inf  # beyond that disc: no chord
        np.minimum(high, middle + half, out=high)
    length = np.maximum(high - low, 0.0)
    # The closed integral along a chord; the least turn keeps 0/0 away and changes nothing.
    turn = np.abs((math.pi * wave_y).astype(single)[:, None] * length) + single(1e-6)
    chord = length * np.sin(turn) / turn
    middle = np.where(length > 0.0, 0.5 * (high + low), single(0.0))
    phase = (2.0 * math.pi * wave_x).astype(single)[:, None] * x
    phase += (2.0 * math.pi * wave_y).astype(single)[:, None] * middle
    chord *= np.cos(phase)
    chord *= cosine
    return np.asarray(2.0 * span * (chord @ weights))


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
