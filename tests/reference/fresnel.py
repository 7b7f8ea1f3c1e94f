"""What a round hole draws, computed on its own: quadrature, closed forms and direct summation.

Nothing here imports pinsim and nothing here uses a Fourier transform of the picture, so a mistake
in the program cannot hide by standing on both sides of a comparison. Lengths are mm, wavelengths
nm, frequencies cycles/mm on the film. The symbols are those of Born & Wolf, Principles of Optics,
section 8.8 (from memory): a = hole radius, N = a^2 (1/z + 1/zo) / lambda the Fresnel number,
v = 2 pi a r / (lambda z) the radius on the film, m = 1 + z/zo the size of the hole's shadow.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.interpolate import CubicSpline
from scipy.special import j0, j1, jv

Floats = npt.NDArray[np.float64]
NM = 1e-6  # mm in one nanometre


@dataclass(frozen=True, slots=True, kw_only=True)
class Setup:
    """A round hole, its film and its object, in one colour."""

    diameter_mm: float
    focal_length_mm: float
    wavelength_nm: float
    distance_mm: float = np.inf

    @property
    def radius_mm(self) -> float:
        return self.diameter_mm / 2

    @property
    def shadow_scale(self) -> float:
        """Size of the hole's geometric shadow over the size of the hole."""
        return 1.0 + self.focal_length_mm / self.distance_mm

    @property
    def shadow_radius_mm(self) -> float:
        return self.radius_mm * self.shadow_scale

    @property
    def cutoff_per_mm(self) -> float:
        """Frequency above which nothing at all is drawn, cycles/mm."""
        return self.diameter_mm / (self.wavelength_nm * NM * self.focal_length_mm)

    @property
    def fresnel_number(self) -> float:
        return (
            self.radius_mm**2 * self.shadow_scale / (self.wavelength_nm * NM * self.focal_length_mm)
        )

    @property
    def v_per_mm(self) -> float:
        return np.pi * self.cutoff_per_mm

    def film_keywords(self) -> dict[str, float]:
        """Return the setup in the words of the functions under test."""
        return {
            "diameter_mm": self.diameter_mm,
            "focal_length_mm": self.focal_length_mm,
            "distance_mm": self.distance_mm,
            "wavelength_nm": self.wavelength_nm,
        }


def setup_of_fresnel_number(
    number: float, *, wavelength_nm: float = 550.0, focal_length_mm: float = 60.0
) -> Setup:
    """Return the hole that has this Fresnel number for a far object."""
    diameter_mm = 2 * np.sqrt(number * wavelength_nm * NM * focal_length_mm)
    return Setup(
        diameter_mm=float(diameter_mm),
        focal_length_mm=focal_length_mm,
        wavelength_nm=wavelength_nm,
    )


def gauss_legendre(count: int, start: float = 0.0, stop: float = 1.0) -> tuple[Floats, Floats]:
    """Return nodes and weights of the Gauss-Legendre rule on [start, stop]."""
    x, w = np.polynomial.legendre.leggauss(count)
    return start + (stop - start) * (x + 1) / 2, w * (stop - start) / 2


def lommel_intensity(v: npt.ArrayLike, fresnel_number: float) -> Floats:
    """Return irradiance over that of the unobstructed wave on the axis.

    |2 pi N int_0^1 exp(i pi N p^2) J0(v p) p dp|^2 by Gauss-Legendre quadrature (Lommel 1885; Born
    & Wolf section 8.8.1; from memory, and held here against a table of 40-digit values).
    """
    flat = np.atleast_1d(np.asarray(v, float)).ravel()
    # The integrand turns v/pi times through J0 and N/2 times through the phase; 2 nodes a turn
    # suffice, more are taken because they cost little.
    p, w = gauss_legendre(int(flat.max() / 2 + np.pi * fresnel_number + 48))
    weight = w * p * np.exp(1j * np.pi * fresnel_number * p**2)
    field = np.concatenate(
        [j0(np.outer(part, p)) @ weight for part in np.array_split(flat, flat.size // 20000 + 1)]
    )
    return (np.abs(2 * np.pi * fresnel_number * field) ** 2).reshape(np.shape(v) or (1,))


def psf(radius_mm: npt.ArrayLike, setup: Setup) -> Floats:
    """Return the point image, 1/mm^2; its integral over the whole film plane is 1.

    The hole takes pi a^2 of the unobstructed wave, and at the film that wave is m^2 thinner.
    """
    v = setup.v_per_mm * np.asarray(radius_mm, float)
    shadow_area_mm2 = np.pi * setup.shadow_radius_mm**2
    return lommel_intensity(v, setup.fresnel_number) / shadow_area_mm2


def hopkins_otf(frequency: npt.ArrayLike, setup: Setup, *, nodes: int = 400) -> Floats:
    """Return the transfer function from Hopkins' integral over the angle.

    (4/pi) int_0^beta (cos t - s/2) sinc[A (cos t - s/2)] cos t dt with s = 2 nu/nu_c, A = 2 pi N s,
    cos beta = s/2 (Hopkins, Proc. R. Soc. A 231 (1955) 91; from memory).
    """
    s = np.abs(2 * np.asarray(frequency, float) / setup.cutoff_per_mm)
    beta = np.arccos(np.clip(s / 2, 0, 1))
    x, w = gauss_legendre(nodes)
    t = beta[..., None] * x
    arm = np.cos(t) - s[..., None] / 2
    strength = 2 * np.pi * setup.fresnel_number * s[..., None]
    integrand = arm * np.sinc(strength * arm / np.pi) * np.cos(t)
    return 4 / np.pi * beta * (integrand @ w)


def energy_within(radius_mm: float, setup: Setup, point_image: Floats, nodes: Floats) -> float:
    """Return the share of light within a radius from point-image values at the nodes' radii."""
    weights = gauss_legendre(len(nodes))[1] * radius_mm
    return float(np.sum(2 * np.pi * nodes * point_image * weights))


def energy_nodes(radius_mm: float, setup: Setup) -> Floats:
    """Return the radii at which `energy_within` wants the point image."""
    turns = setup.v_per_mm * radius_mm / np.pi + setup.fresnel_number
    return gauss_legendre(int(4 * turns + 60))[0] * radius_mm


def shadow_energy(fresnel_number: float) -> float:
    """Return the share of light within the geometric shadow.

    1 - J0(u) cos u - J1(u) sin u, u = 2 pi N (Wolf, Proc. R. Soc. A 204 (1951) 533; from memory).
    """
    u = 2 * np.pi * fresnel_number
    return float(1 - j0(u) * np.cos(u) - j1(u) * np.sin(u))


def psf_on_fine_radii(
    setups: Sequence[Setup], shares: npt.ArrayLike, *, reach_mm: float, step_mm: float
) -> Floats:
    """Return the point image averaged over colours at radii 0, step, 2 step ... to beyond reach.

    The quadrature is done at 25 radii a ring and the rest is a cubic spline through them.
    """
    fine = np.arange(int(np.ceil(reach_mm / step_mm)) + 3) * step_mm
    total = np.zeros_like(fine)
    for setup, share in zip(setups, np.asarray(shares, float), strict=True):
        if share == 0.0:
            continue
        coarse = np.linspace(0, fine[-1], int(setup.v_per_mm * fine[-1] / np.pi * 25) + 50)
        total += share * CubicSpline(coarse, psf(coarse, setup))(fine)
    return total


@dataclass(frozen=True, slots=True, kw_only=True)
class Photo:
    """A rectilinear photo: linear light at pixel centres, axis through the middle of the array."""

    light: Floats  # (rows, columns)
    focal_length_px: float

    def lit(self) -> tuple[Floats, Floats, Floats]:
        """Return (tangent right, tangent down, light) of the pixels that are not black."""
        rows, columns = np.nonzero(self.light)
        height, width = self.light.shape
        tangent_x = (columns - (width - 1) / 2) / self.focal_length_px
        tangent_y = (rows - (height - 1) / 2) / self.focal_length_px
        return tangent_x, tangent_y, np.asarray(self.light[rows, columns], float)


def film_positions(shape: tuple[int, int], pitch_mm: float) -> tuple[Floats, Floats]:
    """Return (y of rows, x of columns) of an upright picture, down and right, mm, 0 = middle."""
    rows, columns = shape
    return (
        (np.arange(rows) - (rows - 1) / 2) * pitch_mm,
        (np.arange(columns) - (columns - 1) / 2) * pitch_mm,
    )


def film_by_radial_sum(
    photo: Photo,
    point_image: Floats,
    *,
    step_mm: float,
    focal_length_mm: float,
    y_mm: Floats,
    x_mm: Floats,
) -> Floats:
    """Return the film's exposure: every lit photo pixel adds its own point image.

    Light scatters: each source is weighted by its cos^4 first, then spread. The same axial point
    image serves the whole film, which a few degrees of field allow (see `film_by_oblique_sum`).
    The sum over pixels is the integral over a band-limited scene as long as no frequency of the
    point image reaches the photo's own sampling frequency less half. 1.0 = evenly lit white.
    """
    tangent_x, tangent_y, light = photo.lit()
    cos4 = (1 + tangent_x**2 + tangent_y**2) ** -2
    pixel_area_mm2 = (focal_length_mm / photo.focal_length_px) ** 2
    weight = (light * cos4 * pixel_area_mm2).astype(np.float32)
    # float32 halves the time; its error, 1e-3 of a step of the table and 1e-6 of the sum, is nothing.
    dx2 = (((x_mm[:, None] - focal_length_mm * tangent_x) / step_mm) ** 2).astype(np.float32)
    dy2 = (((y_mm[:, None] - focal_length_mm * tangent_y) / step_mm) ** 2).astype(np.float32)
    slope = np.append(np.diff(point_image), 0.0).astype(np.float32)
    table = point_image.astype(np.float32)
    film = np.empty((len(y_mm), len(x_mm)))
    for row in range(len(y_mm)):
        position = np.sqrt(dx2 + dy2[row])
        index = position.astype(np.int32)
        position -= index
        position *= slope[index]
        position += table[index]
        film[row] = position @ weight
    return film


def film_by_oblique_sum(
    photo: Photo,
    setup: Setup,
    *,
    y_mm: Floats,
    x_mm: Floats,
    harmonics: int = 4,
) -> Floats:
    """Return the exposure at single film points at any field angle, flat film, plane object.

    y_mm, x_mm: (n,) film points, down and right as the scene is seen. Returns (n,).
    Kirchhoff's integral over the hole with the path lengths to second order (no expansion in the
    distance between film point and chief point): linear term the difference of the unit
    directions of film point and source, quadratic term (1/r + 1/ro)(I - p p^T). That term is round
    plus a part in cos 2 phi, which Jacobi-Anger turns into Bessel functions of even order:
    F = 2 pi sum_n eps_n (-i)^n cos(2 n psi) int e^{i alpha rho^2} J_n(beta rho^2) J_2n(2 pi rho l).
    Derived here; on the axis it is Lommel's integral.
    """
    tangent_x, tangent_y, light = photo.lit()
    secant = np.sqrt(1 + tangent_x**2 + tangent_y**2)
    source_x, source_y = tangent_x / secant, tangent_y / secant
    weight = light * secant**-4 / photo.focal_length_px**2
    wavelength_mm = setup.wavelength_nm * NM
    a, z = setup.radius_mm, setup.focal_length_mm

    r = np.sqrt(x_mm**2 + y_mm**2 + z**2)
    widest = 1.01 * max(
        np.hypot(x_mm[i] / r[i] - source_x, y_mm[i] / r[i] - source_y).max() for i in range(len(r))
    )
    reach = widest / wavelength_mm  # largest difference of directions, cycles/mm in the hole
    ell = np.linspace(0, reach, int(2 * a * reach * 30) + 50)
    p, w = gauss_legendre(int(np.pi * a * reach + np.pi * setup.fresnel_number + 60))
    rho = a * p
    bessels = [jv(2 * n, 2 * np.pi * np.outer(ell, rho)) for n in range(harmonics)]

    out = np.empty(len(r))
    for i, (x, y) in enumerate(zip(x_mm, y_mm, strict=True)):
        cosine = z / r[i]
        sagittal = np.pi / wavelength_mm * cosine * (1 / z + 1 / setup.distance_mm)
        tangential = sagittal * cosine**2
        alpha, beta = (tangential + sagittal) / 2, (tangential - sagittal) / 2
        carrier = 2 * np.pi * w * a * rho * np.exp(1j * alpha * rho**2)
        dx, dy = x / r[i] - source_x, y / r[i] - source_y
        distance = np.hypot(dx, dy) / wavelength_mm
        psi = np.arctan2(dy, dx) - np.arctan2(y, x)
        parts = [
            (1 if n == 0 else 2) * (-1j) ** n * (bessels[n] @ (carrier * jv(n, beta * rho**2)))
            for n in range(harmonics)
        ]
        radial = CubicSpline(ell, np.stack(parts, axis=-1))(distance)
        angular = np.cos(2 * psi[:, None] * np.arange(harmonics))
        field = np.sum(radial * angular, axis=-1)
        share = np.abs(field) ** 2 / (wavelength_mm**2 * np.pi * a**2)
        out[i] = cosine**4 * np.sum(weight * share)
    return out
