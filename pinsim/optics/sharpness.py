"""What a transfer function means to someone who builds the camera: detail, spot, best hole."""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pinsim.optics.round_hole import gauss_legendre, overlap_otf

Array = NDArray[np.float64]


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


def _first_fall(frequency: Array, contrast: Array, level: float) -> float:
    """Return where a sampled curve that starts at 1 first falls to `level`; 0 if it never does."""
    below = np.flatnonzero(contrast <= level)
    if below.size == 0:
        return 0.0
    i = int(below[0])
    step = (contrast[i - 1] - level) / (contrast[i - 1] - contrast[i])
    return float(frequency[i - 1] + step * (frequency[i] - frequency[i - 1]))


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
        worst = min(worst, _first_fall(frequency, curve, contrast))
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
    from scipy.optimize import brentq
    from scipy.special import j1

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
    radii = np.linspace(0.0, outer, 65)[1:]
    for low, high in zip(np.concatenate([[1e-9 * outer], radii[:-1]]), radii, strict=True):
        if missing(float(high)) >= 0.0:
            return 2.0 * float(brentq(missing, float(low), float(high), xtol=1e-7 * outer))
    return 2.0 * outer


def best_diameter_mm(
    *,
    focal_length_mm: float,
    light: Light,
    distance_mm: float = math.inf,
    contrast: float = 0.2,
    field_deg: float = 0.0,
) -> float:
    """Return the hole that draws the finest detail at `contrast`.

    Below about 15 % contrast the finest detail jumps where the curve stops being monotonic; a
    grid finer than any jump is searched rather than a slope followed.
    """
    mean_mm = float(light.shares @ light.wavelengths_nm) * 1e-6
    # The optimum follows sqrt(lambda z_e) between the trade's smallest and largest constants.
    unit_mm = math.sqrt(mean_mm / (1.0 / focal_length_mm + 1.0 / distance_mm))
    low, high = 0.7, 3.0

    def detail(k: float, samples: int) -> float:
        return finest_detail(
            diameter_mm=k * unit_mm,
            focal_length_mm=focal_length_mm,
            light=light,
            distance_mm=distance_mm,
            contrast=contrast,
            field_deg=field_deg,
            samples=samples,
        )

    for count, samples in ((24, 150), (17, 300), (17, 600)):
        grid = np.linspace(low, high, count)
        best = int(np.argmax([detail(float(k), samples) for k in grid]))
        low, high = float(grid[max(best - 1, 0)]), float(grid[min(best + 1, count - 1)])
    return 0.5 * (low + high) * unit_mm
