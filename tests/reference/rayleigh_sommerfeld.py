"""What any opening draws on any film, by brute force: every point of the hole sends its wave.

The Rayleigh-Sommerfeld integral of the first kind with exact path lengths, over the opening, for
each film point by itself. Nothing is expanded, no transform is taken and nothing here imports
pinsim, so a mistake in the program cannot hide by standing on both sides of a comparison.

    U(P) = 1/(2 pi) int_A U_in(x) exp(i k R)/R (1/R - i k) Z/R dx,   R = |P - x|

Source: Rayleigh 1897 and Sommerfeld; Born & Wolf, Principles of Optics, section 8.11.2; Goodman,
Introduction to Fourier Optics, section 3.5 (from memory).

Lengths mm, wavelengths nm. Whoever looks into the box from behind its film, towards the hole,
has X to the right, Y up and the hole's axis Z coming towards him; X and Y are then right and up as
the scene is seen too. The opening is described as it stands in X, Y. A scene point up on the right
is drawn on the film down on the left: film coordinates (u, v) are those of the picture turned
upright, so the film's middle strip holds u = -X, v = -Y.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
NM = 1e-6  # mm in one nanometre


@dataclass(frozen=True, slots=True)
class Opening:
    """Quadrature points of an opening, X right and Y up seen from behind, and their areas."""

    x_mm: Floats
    y_mm: Floats
    area_mm2: Floats

    def __add__(self, other: "Opening") -> "Opening":
        """Return the two side by side."""
        return Opening(
            np.concatenate([self.x_mm, other.x_mm]),
            np.concatenate([self.y_mm, other.y_mm]),
            np.concatenate([self.area_mm2, other.area_mm2]),
        )


def _gauss(count: int) -> tuple[Floats, Floats]:
    """Return the Gauss-Legendre rule on [-1, 1]."""
    return np.polynomial.legendre.leggauss(count)


def lens(
    right_mm: float,
    up_mm: float,
    apart_mm: tuple[float, float] = (0.0, 0.0),
    *,
    count: int = 28,
) -> Opening:
    """Return what two equal ovals have in common whose middles lie apart_mm from each other.

    Stretched to unit circles a distance e apart along an axis, the lens reaches across that axis to
    sin t = sqrt(1 - e^2/4) and along it to +-(cos t - e/2): smooth in t, so few points are exact.
    """
    half = np.array([right_mm / 2, up_mm / 2])
    gap = np.array(apart_mm) / half
    e = float(np.hypot(*gap))
    axis = gap / e if e > 0 else np.array([1.0, 0.0])
    node, weight = _gauss(count)
    reach = np.arccos(e / 2)
    t = reach * node
    arm = np.cos(t) - e / 2
    across = np.broadcast_to(np.sin(t)[:, None], (count, count))
    along = arm[:, None] * node
    area = (weight * reach * np.cos(t) * arm)[:, None] * weight
    x = along * axis[0] - across * axis[1]
    y = along * axis[1] + across * axis[0]
    return Opening((x * half[0]).ravel(), (y * half[1]).ravel(), (area * half.prod()).ravel())


def rectangle(left: float, right: float, low: float, high: float, *, count: int = 24) -> Opening:
    """Return a rectangle with its sides at these X and Y."""
    node, weight = _gauss(count)
    x = np.broadcast_to((left + right) / 2 + (right - left) / 2 * node, (count, count))
    y = np.broadcast_to(((low + high) / 2 + (high - low) / 2 * node)[:, None], (count, count))
    area = np.outer(weight, weight) * (right - left) * (high - low) / 4
    return Opening(x.ravel(), y.ravel(), area.ravel())


def triangle(
    first: tuple[float, float],
    second: tuple[float, float],
    third: tuple[float, float],
    *,
    count: int = 28,
) -> Opening:
    """Return a triangle: a square rule folded into one corner (Duffy's map, from memory)."""
    node, weight = _gauss(count)
    s, t = np.meshgrid((1 + node) / 2, (1 + node) / 2)
    a, b, c = (np.array(corner, float) for corner in (first, second, third))
    u, v = b - a, c - b
    x = a[0] + s * (u[0] + t * v[0])
    y = a[1] + s * (u[1] + t * v[1])
    area = np.outer(weight, weight) / 4 * s * abs(u[0] * v[1] - u[1] * v[0])
    return Opening(x.ravel(), y.ravel(), area.ravel())


@dataclass(frozen=True, slots=True, kw_only=True)
class Film:
    """A film a distance behind the hole, flat or bent round an axis towards the hole.

    bend_radius_mm equal to the distance is an arc about the hole, half of it a round tin whose wall
    holds the hole. bend_axis: vertical (curled at left and right) or horizontal.
    """

    focal_length_mm: float
    bend_radius_mm: float = np.inf
    bend_axis: str = "vertical"

    def _turn(self, u: Floats, v: Floats) -> tuple[Floats, Floats]:
        """Return the angle turned about the bend's axis, and the coordinate along that axis."""
        bent, straight = (u, v) if self.bend_axis == "vertical" else (v, u)
        return bent / self.bend_radius_mm, straight

    def _axes(self, bent: Floats, straight: Floats, z: Floats) -> Floats:
        """Return (..., 3) in X, Y, Z from upright components: the picture is turned round."""
        x, y = (bent, straight) if self.bend_axis == "vertical" else (straight, bent)
        return np.stack(np.broadcast_arrays(-x, -y, z), axis=-1)

    def points(self, u: Floats, v: Floats) -> Floats:
        """Return where film coordinates lie in the box, (..., 3)."""
        if np.isinf(self.bend_radius_mm):
            return np.stack(np.broadcast_arrays(-u, -v, self.focal_length_mm), axis=-1)
        angle, straight = self._turn(u, v)
        middle = self.focal_length_mm - self.bend_radius_mm  # where the bend's axis lies
        return self._axes(
            self.bend_radius_mm * np.sin(angle),
            straight,
            middle + self.bend_radius_mm * np.cos(angle),
        )

    def normals(self, u: Floats, v: Floats) -> Floats:
        """Return the film's unit normals, away from the hole, (..., 3)."""
        angle, straight = self._turn(u, v)
        zero = np.zeros_like(np.asarray(straight, float))
        return self._axes(np.sin(angle), zero, np.cos(angle))

    def place(self, angle_deg: float, towards: str) -> tuple[float, float]:
        """Return (u, v) of a point at an angle from the axis: towards u, v, or both alike.

        On the diagonal azimuth and elevation are equal, cos^2 = cos(angle). Found from the crossing
        of the ray with the flat film or with the circle of the bend, seen along the bend's axis.
        """
        theta = np.radians(angle_deg)
        both = np.arccos(np.sqrt(np.cos(theta)))
        azimuth, elevation = {"u": (theta, 0.0), "v": (0.0, theta), "uv": (both, both)}[towards]
        if self.bend_axis == "horizontal":
            azimuth, elevation = {"u": (0.0, theta), "v": (theta, 0.0), "uv": (both, both)}[towards]
        z, bend = self.focal_length_mm, self.bend_radius_mm
        if np.isinf(bend):
            bent, across = z * np.tan(azimuth), z / np.cos(azimuth)
        else:
            # Law of sines in the triangle hole, bend's middle, film point.
            at_film = np.arcsin((z - bend) / bend * np.sin(azimuth))
            turn = azimuth + at_film  # 2 azimuth in a round tin: the angle at its centre
            bent, across = (
                bend * turn,
                np.hypot(bend * np.sin(turn), z - bend + bend * np.cos(turn)),
            )
        straight = across * np.tan(elevation)
        point = (bent, straight) if self.bend_axis == "vertical" else (straight, bent)
        return float(point[0]), float(point[1])

    def tangential(self, u: float, v: float) -> Floats:
        """Return the unit vector along the film, in (u, v), that leads away from the axis.

        The film's direction that the chief ray leans to; on the axis right.
        """
        step = 1e-4
        point = self.points(np.float64(u), np.float64(v))
        ray = point / np.linalg.norm(point)
        to_u = self.points(np.float64(u + step), np.float64(v)) - point
        to_v = self.points(np.float64(u), np.float64(v + step)) - point
        lean = np.array([ray @ to_u, ray @ to_v]) / step
        # On an arc about the hole the ray leans nowhere along the arc; then the axis' side decides.
        if np.hypot(*lean) < 1e-3:
            lean = np.array([u, v], float)
        length = np.hypot(*lean)
        return lean / length if length > 0 else np.array([1.0, 0.0])


def point_image(
    opening: Opening,
    film: Film,
    *,
    film_point_mm: tuple[float, float],
    du_mm: Floats,
    dv_mm: Floats,
    wavelength_nm: float,
    distance_mm: float = np.inf,
) -> Floats:
    """Return the irradiance around a film point of the one object point whose chief ray meets it.

    du_mm (n,), dv_mm (m,): along the film from the film point, as the picture is seen upright.
    distance_mm: hole to object along the axis; inf is a plane wave.
    Returns (m, n), 1/mm^2: over the whole film it sums to 1, because irradiance |U|^2 cos(film) is
    divided by the power that enters the opening.
    """
    k = 2 * np.pi / (wavelength_nm * NM)
    u0, v0 = film_point_mm
    chief = film.points(np.float64(u0), np.float64(v0))
    chief = chief / np.linalg.norm(chief)

    hole = np.stack([opening.x_mm, opening.y_mm, np.zeros_like(opening.x_mm)], axis=-1)
    if np.isinf(distance_mm):
        incoming = np.exp(1j * k * (hole @ chief))
        entering = np.full(len(hole), chief[2])
    else:
        source = -chief * (distance_mm / chief[2])
        path = np.linalg.norm(hole - source, axis=-1)
        incoming = np.exp(1j * k * (path - path.mean())) / path
        entering = -source[2] / path  # cosine of incidence
    power = np.sum(opening.area_mm2 * np.abs(incoming) ** 2 * entering)

    v, u = np.meshgrid(v0 + dv_mm, u0 + du_mm, indexing="ij")
    points = film.points(u, v).reshape(-1, 3)
    normals = film.normals(u, v).reshape(-1, 3)
    weighted = incoming * opening.area_mm2
    field = np.empty(len(points), complex)
    block = max(1, 400_000 // len(hole))
    for start in range(0, len(points), block):
        part = points[start : start + block]
        r = np.sqrt(
            (part[:, 0, None] - hole[:, 0]) ** 2
            + (part[:, 1, None] - hole[:, 1]) ** 2
            + part[:, 2, None] ** 2
        )
        wave = np.exp(1j * k * r) * (1 / r - 1j * k) / r**2
        field[start : start + block] = part[:, 2] * (wave @ weighted) / (2 * np.pi)
    arriving = np.einsum("ij,ij->i", points, normals) / np.linalg.norm(points, axis=-1)
    return (np.abs(field) ** 2 * arriving / power).reshape(u.shape)


def moments(image: Floats, du_mm: Floats, dv_mm: Floats, direction: Floats) -> Floats:
    """Return the second moments (along direction, across it, mixed) about the window's own centroid.

    image (m, n) on an evenly spaced window; direction (2,) unit, in (u, v). mm^2.
    """
    share = image / image.sum()
    u = du_mm[None, :] - np.sum(share * du_mm[None, :])
    v = dv_mm[:, None] - np.sum(share * dv_mm[:, None])
    along = u * direction[0] + v * direction[1]
    across = -u * direction[1] + v * direction[0]
    return np.array(
        [np.sum(share * along**2), np.sum(share * across**2), np.sum(share * along * across)]
    )


def image_of_otf(
    otf: npt.NDArray[np.complex128], *, period_mm: float, du_mm: Floats, dv_mm: Floats
) -> Floats:
    """Return the point image that a transfer function draws: its Fourier sum, point by point.

    otf (m, n), both odd, rows along v: values at frequencies 1/period_mm apart, zero in the middle.
    The sum repeats every period_mm; what neighbours' tails add is the error. Returns 1/mm^2.
    """
    wave_v, wave_u = (
        np.exp(2j * np.pi / period_mm * np.outer(place, np.arange(count) - count // 2))
        for place, count in zip((dv_mm, du_mm), otf.shape, strict=True)
    )
    return np.real(wave_v @ otf @ wave_u.T) / period_mm**2
