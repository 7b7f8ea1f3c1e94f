"""What a transfer function means to someone who builds the camera: detail, spot, best hole."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pinsim.optics.film_surface import ChiefRays
from pinsim.optics.film_transfer import ray_otf
from pinsim.optics.opening import Ellipse, Opening
from pinsim.optics.round_hole import gauss_legendre, overlap_otf

Array = NDArray[np.float64]

# A transfer function bends so little with the wavelength that this many, well chosen, stand for any
# light: finest detail changes by less than 1e-4.
_WAVELENGTHS = 6
# Around detail of 20 % contrast no hole ever draws beyond 0.9/sqrt(lambda z), at 10 % 1.3; see
# detail_anywhere. A large hole's shadow has fallen below 10 % long before these cycles across it.
_FINEST_UNITS = 1.6
_CYCLES_ACROSS = 4.0
LEAST_CONTRAST = 0.1


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Light:
    """The light a picture is made of: wavelengths and the share that each contributes.

    wavelengths_nm, shares : (n,) each; the shares sum to 1.
    """

    wavelengths_nm: Array
    shares: Array = field(default_factory=lambda: np.ones(1))

    def __post_init__(self) -> None:
        if self.wavelengths_nm.shape != self.shares.shape or self.wavelengths_nm.ndim != 1:
            raise ValueError("Light takes two flat arrays of one length")
        if not math.isclose(float(self.shares.sum()), 1.0, rel_tol=1e-9):
            raise ValueError(f"the shares of Light sum to {self.shares.sum():g}, not to 1")

    @property
    def mean_nm(self) -> float:
        """The mean wavelength."""
        return float(self.shares @ self.wavelengths_nm)

    def condensed(self, count: int = _WAVELENGTHS) -> "Light":
        """Return `count` wavelengths that average polynomials of degree 2 count - 1 like this light.

        Gauss quadrature of the light's own spectrum, by Lanczos' recurrence (Golub and Welsch, Math.
        Comp. 23 (1969) 221, from memory).
        """
        wavelengths, where = np.unique(self.wavelengths_nm, return_inverse=True)
        shares = np.asarray(np.bincount(where, weights=self.shares), np.float64)
        wavelengths, shares = wavelengths[shares > 0.0], shares[shares > 0.0]
        if wavelengths.size <= count:
            return Light(wavelengths_nm=wavelengths, shares=shares)
        middle, half = 0.5 * (wavelengths[0] + wavelengths[-1]), 0.5 * np.ptp(wavelengths)
        scaled = (wavelengths - middle) / half
        vectors = [np.sqrt(shares)]
        matrix = np.zeros((count, count))
        for i in range(count):
            image = scaled * vectors[i]
            matrix[i, i] = image @ vectors[i]
            for _ in range(2):  # twice is enough to keep them at right angles
                image = image - sum((image @ one) * one for one in vectors)
            if i + 1 < count:
                length = float(np.linalg.norm(image))
                matrix[i, i + 1] = matrix[i + 1, i] = length
                vectors.append(image / length)
        nodes, modes = np.linalg.eigh(matrix)
        weights = modes[0] ** 2
        return Light(wavelengths_nm=middle + half * nodes, shares=weights / weights.sum())


def light_otf(
    frequency: ArrayLike,
    *,
    diameter_mm: float,
    focal_length_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    tilt_shift: float = 1.0,
) -> Array:
    """Return the transfer function of a round hole averaged over a light.

    frequency : (n,) cycles/mm on the film.
    tilt_shift : how much farther than on the axis the opening is shifted for a frequency;
        on a flat film 1/cos^3(theta) for tangential and 1/cos(theta) for sagittal frequencies.
    Returns (n,) float64.
    """
    nu = np.abs(np.asarray(frequency, np.float64))
    shift = np.outer(light.wavelengths_nm * (1e-6 * focal_length_mm * tilt_shift), nu)
    phase = np.broadcast_to((1.0 + focal_length_mm / distance_mm) * nu, shift.shape)
    return np.asarray(light.shares @ overlap_otf(shift, phase, diameter_mm=diameter_mm))


def first_fall(curves: Array, level: float) -> Array:
    """Return where sampled curves that start at 1 first fall to `level`, as a share of their length.

    curves : (..., n) at even steps from 0 to 1. Returns (...); 1 for a curve that never falls so low.
    """
    below = curves <= level
    i = np.maximum(below.argmax(axis=-1), 1)
    after = np.take_along_axis(curves, i[..., None], -1)[..., 0]
    before = np.take_along_axis(curves, i[..., None] - 1, -1)[..., 0]
    drop = np.where(before > after, before - after, 1.0)
    place = (i - 1 + (before - level) / drop) / (curves.shape[-1] - 1)
    return np.where(below.any(axis=-1), place, 1.0)


def finest_detail(
    *,
    diameter_mm: float,
    focal_length_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    contrast: float = 0.2,
    field_deg: float = 0.0,
    samples: int = 400,
) -> float:
    """Return the finest detail still drawn at `contrast`, in cycles/mm on the film.

    It is the frequency at which the transfer function first falls to `contrast`; off the axis the
    poorer of tangential and sagittal detail on a flat film.
    """
    cosine = math.cos(math.radians(field_deg))
    shortest_mm = float(light.wavelengths_nm.min()) * 1e-6
    light = light.condensed()
    # The curve has ended at the diffraction cut-off, and long before in a large hole, where the
    # shadow's jinc has its first zero at 1.22/(m d) and never again reaches 0.14.
    shadow_mm = diameter_mm * (1.0 + focal_length_mm / distance_mm)
    limits = [diameter_mm / (shortest_mm * focal_length_mm)]
    if contrast >= 0.14:
        limits.append(6.0 / shadow_mm)
    worst = math.inf
    for tilt_shift in {1.0 / cosine, 1.0 / cosine**3}:
        frequency = np.linspace(0.0, min(limits), samples)
        curve = light_otf(
            frequency,
            diameter_mm=diameter_mm,
            focal_length_mm=focal_length_mm,
            light=light,
            distance_mm=distance_mm,
            tilt_shift=tilt_shift,
        )
        worst = min(worst, float(frequency[-1] * first_fall(curve, contrast)))
    return worst


def spot_diameter_mm(
    *,
    diameter_mm: float,
    focal_length_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    share: float = 0.5,
) -> float:
    """Return the diameter of the circle on the film that holds `share` of a point's light.

    Encircled energy E(r) = 2 pi r int OTF(nu) J1(2 pi nu r) d nu, by Gauss-Legendre.
    Source: the Hankel transform pair; checked against the tabulated radii in the tests.
    """
    from scipy.special import j1

    light = light.condensed()
    scale = 1.0 + focal_length_mm / distance_mm
    cutoffs = diameter_mm / (light.wavelengths_nm * 1e-6 * focal_length_mm)
    # One shadow plus the far-field pattern is wider than any share below 0.9 of the light.
    longest_mm = float(light.wavelengths_nm.max()) * 1e-6
    outer = scale * diameter_mm + 4.0 * longest_mm * focal_length_mm / diameter_mm
    # Far above 100 cycles across the shadow the transfer function has died to 1e-3.
    top = np.minimum(cutoffs, 100.0 / (scale * diameter_mm))
    count = 64 + int(4.0 * float(top.max()) * outer + 2.0 * scale * diameter_mm * float(top.max()))
    nodes, weights = gauss_legendre(count)
    nu = top[:, None] * nodes
    shift = light.wavelengths_nm[:, None] * (1e-6 * focal_length_mm) * nu
    otf = overlap_otf(shift, scale * nu, diameter_mm=diameter_mm)
    otf *= weights * top[:, None] * light.shares[:, None]

    def missing(radius: float) -> float:
        bessel = j1(2.0 * math.pi * radius * nu)
        return float(2.0 * math.pi * radius * np.sum(otf * bessel)) - share

    # The first radius that holds the share: rings make E(r) rise everywhere, but not its quadrature.
    radii = np.linspace(0.0, outer, 65)
    held = next((one for one in radii.tolist()[1:] if missing(one) >= 0.0), None)
    if held is None:
        return 2.0 * outer
    low, high = held - float(radii[1]), held
    for _ in range(20):  # halving needs no more, and no package that is slow to load
        middle = 0.5 * (low + high)
        low, high = (low, middle) if missing(middle) >= 0.0 else (middle, high)
    return float(low + high)


def best_diameter_mm(
    *,
    focal_length_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    contrast: float = 0.2,
    field_deg: float = 0.0,
) -> float:
    """Return the hole that draws the finest detail at `contrast`; off the axis on a flat film.

    In the overlap integral depth and distance enter only as 1/z + 1/zo, and scale out of it: in any
    light the best hole is that of a box 1 mm deep times sqrt(1 / (1/z + 1/zo)).
    """
    unit = _best_of_1_mm(
        tuple(light.wavelengths_nm.tolist()), tuple(light.shares.tolist()), contrast, field_deg
    )
    return unit / math.sqrt(1.0 / focal_length_mm + 1.0 / distance_mm)


@lru_cache(maxsize=64)
def _best_of_1_mm(
    wavelengths_nm: tuple[float, ...],
    shares: tuple[float, ...],
    contrast: float,
    field_deg: float,
) -> float:
    """Search the best hole of a box 1 mm deep for far objects.

    Below about 15 % contrast the finest detail jumps where the curve stops being monotonic; a
    grid finer than any jump is searched rather than a slope followed.
    """
    whole = Light(wavelengths_nm=np.array(wavelengths_nm), shares=np.array(shares))
    light = whole.condensed()
    shortest_mm = float(whole.wavelengths_nm.min()) * 1e-6
    cosine = math.cos(math.radians(field_deg))
    tilts = sorted({1.0 / cosine, 1.0 / cosine**3})

    def details(diameter: Array, finest: float, samples: int) -> Array:
        worst = np.full(diameter.shape, math.inf)
        for tilt in tilts:
            top = np.minimum(diameter / (shortest_mm * tilt), finest)
            if contrast >= 0.14:  # as in finest_detail
                top = np.minimum(top, 6.0 / diameter)
            frequency = top[:, None] * np.linspace(0.0, 1.0, samples)
            phase = frequency * diameter[:, None]
            shift = (frequency * (1e-6 * tilt) / diameter[:, None])[None] * (
                light.wavelengths_nm[:, None, None]
            )
            otf = overlap_otf(shift, phase[None], diameter_mm=1.0)
            curves = np.tensordot(light.shares, otf, 1)
            worst = np.minimum(worst, top * first_fall(curves, contrast))
        return worst

    # The optimum follows sqrt(lambda z) between the trade's smallest and largest constants, and
    # off the axis the wider shift acts like a longer wave.
    unit = math.sqrt(whole.mean_nm * 1e-6)
    low, high = 0.7 * unit, 3.0 * unit * cosine**-1.5
    finest = math.inf
    for count, samples in ((24, 150), (17, 150), (17, 240)):
        grid = np.linspace(low, high, count)
        found = details(grid, finest, samples)
        best = int(found.argmax())
        low, high = float(grid[max(best - 1, 0)]), float(grid[min(best + 1, count - 1)])
        finest = 1.4 * float(found[best])
    return float(0.5 * (low + high))


def detail_anywhere(
    directions: ArrayLike,
    *,
    rays: ChiefRays,
    opening: Opening,
    plate_thickness_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    contrasts: Sequence[float] = (0.2,),
    samples: int = 64,
) -> Array:
    """Return the finest detail at one film point, cycles/mm along the film.

    directions : (m, 2), unit, right and up, along which the detail repeats. rays : of one film point.
    contrasts : (k,), each at least 0.1. Returns (m, k); 0 where no light comes.

    Along one direction the opening is shifted by lambda L nu and the phase turns with M nu. No hole
    draws 10 % contrast beyond about 1.3/sqrt(lambda L M) (see _FINEST_UNITS), so curves end there.
    """
    if min(contrasts) < LEAST_CONTRAST:
        raise ValueError(f"contrasts below {LEAST_CONTRAST:g} are not looked for")
    along = np.asarray(directions, np.float64)
    bore_mm = plate_thickness_mm * rays.tangent
    if float(rays.falloff) <= 0.0 or float(opening.clear_share(bore_mm)) <= 0.0:
        return np.zeros((len(along), len(contrasts)))
    shift = along @ rays.shift.T
    reach = np.linalg.norm(shift, axis=1)
    turn = np.linalg.norm(shift @ rays.focus(distance_mm).T, axis=1)
    top = np.minimum(
        opening.width_mm / (float(light.wavelengths_nm.min()) * 1e-6 * reach),
        _FINEST_UNITS / np.sqrt(light.mean_nm * 1e-6 * reach * turn),
    )
    if isinstance(opening, Ellipse):
        narrow = min(opening.right_mm, opening.up_mm)
        left = max(narrow - float(np.hypot(*bore_mm)), 0.2 * narrow)
        top = np.minimum(top, _CYCLES_ACROSS / (turn * left))
    frequency = (top[:, None] * np.linspace(0.0, 1.0, samples))[..., None] * along[:, None, :]
    curves = light_ray_otf(
        frequency.reshape(-1, 2),
        rays=rays,
        opening=opening,
        plate_thickness_mm=plate_thickness_mm,
        light=light,
        distance_mm=distance_mm,
    )
    contrast = curves.real if opening.mirrored else np.abs(curves)
    contrast = contrast.reshape(len(along), samples)
    return np.stack([top * first_fall(contrast, level) for level in contrasts], axis=-1)


def light_ray_otf(
    frequency: Array,
    *,
    rays: ChiefRays,
    opening: Opening,
    plate_thickness_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    quick: bool = False,
) -> NDArray[np.complex128]:
    """Return the transfer functions of chief rays averaged over a light.

    frequency : (n, 2); rays of shape (...). quick : an error of 1e-6 is allowed. Returns (..., n); of
    a mirrored opening it is real, negative where light and dark change places.
    """
    only = ray_otf_in_lights(
        frequency,
        rays=rays,
        opening=opening,
        plate_thickness_mm=plate_thickness_mm,
        lights=(light,),
        distance_mm=distance_mm,
        quick=quick,
    )
    return np.asarray(only[0], np.complex128)


def ray_otf_in_lights(
    frequency: Array,
    *,
    rays: ChiefRays,
    opening: Opening,
    plate_thickness_mm: float,
    lights: Sequence[Light],
    distance_mm: float = math.inf,
    quick: bool = False,
) -> NDArray[np.inexact[Any]]:
    """Return the same for several lights at once, (lights, ..., n); real for a mirrored opening."""
    if isinstance(opening, Ellipse):
        curves = opening.otf_in_colours(
            np.concatenate([light.wavelengths_nm for light in lights]) * 1e-6,
            frequency @ np.swapaxes(rays.shift, -1, -2),
            rays.focus(distance_mm),
            plate_thickness_mm * rays.tangent,
            quick=quick,
        )
        ends = np.cumsum([light.shares.size for light in lights])[:-1]
        parts = zip(lights, np.split(curves, ends), strict=True)
        total = np.stack([np.tensordot(light.shares, part, axes=1) for light, part in parts])
        return np.where(rays.falloff[..., None] > 0.0, total, 0.0)
    kind = np.float64 if opening.mirrored else np.complex128
    each = np.zeros((len(lights), *rays.falloff.shape, len(frequency)), kind)
    for number, light in enumerate(lights):
        for place in np.ndindex(rays.falloff.shape):
            for wavelength, share in zip(light.wavelengths_nm, light.shares, strict=True):
                values = ray_otf(
                    frequency,
                    rays=rays.one(place),
                    opening=opening,
                    plate_thickness_mm=plate_thickness_mm,
                    distance_mm=distance_mm,
                    wavelength_nm=float(wavelength),
                    quick=quick,
                )
                each[number, *place] += share * (values.real if opening.mirrored else values)
    return each


_MOST_FREQUENCIES = 80  # to either side of zero in a point image


def point_image(
    *,
    rays: ChiefRays,
    opening: Opening,
    plate_thickness_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    width_mm: float,
    count: int,
) -> Array:
    """Return the image of a point at one film point, 1/mm^2, of unit energy over the film.

    width_mm : side of the square shown, its middle the chief ray. Returns (count, count), row 0 up
    and column 0 left in the upright picture. The Fourier sum repeats after twice the width, so that
    faint light from beyond adds to what is shown; where a hole so large needs more than
    2 x 80 frequencies the image is softened to what they hold.
    """
    period = 2.0 * width_mm
    finest = opening.width_mm / (
        float(light.wavelengths_nm.min()) * 1e-6 * float(np.linalg.norm(rays.shift, -2))
    )
    half = min(math.ceil(finest * period), _MOST_FREQUENCIES)
    right = np.arange(half + 1) / period
    up = np.arange(-half, half + 1) / period
    grid = np.stack(np.meshgrid(right, up), axis=-1)
    otf = light_ray_otf(
        grid.reshape(-1, 2),
        rays=rays,
        opening=opening,
        plate_thickness_mm=plate_thickness_mm,
        light=light,
        distance_mm=distance_mm,
    ).reshape(grid.shape[:2])
    if finest * period > half:
        soft = np.cos(0.5 * math.pi * np.arange(-half, half + 1) / (half + 1)) ** 2
        otf = otf * soft[:, None] * soft[half:]
    # The left half of the plane holds the complex conjugates.
    otf[:, 1:] *= 2.0
    place = ((np.arange(count) + 0.5) / count - 0.5) * width_mm
    columns = np.exp(2j * math.pi * np.outer(right, place))
    rows = np.exp(2j * math.pi * np.outer(-place, up))
    return np.asarray((rows @ otf @ columns).real / period**2)
