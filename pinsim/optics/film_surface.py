"""The film as a surface behind the hole: where its points lie, and what the hole looks like there.

Film coordinates u, v are mm along the film, right and up as the scene is seen; the middle of the
film's axis is u = v = 0. Points are given in the box's own axes turned by 180 degrees about the
hole's axis, so that right and up stay right and up.
"""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

Axis = Literal["vertical", "horizontal"]


@dataclass(frozen=True, slots=True, eq=False)
class ChiefRays:
    """The rays through the hole's middle to film points of any shape (...).

    distance_mm : (...), hole to film point. tangent : (..., 2), right and up per mm along the axis.
    direction : (..., 3), unit. shift : (..., 2, 2), the opening's shift per film frequency and per
    mm of wavelength. falloff : (...), illuminance relative to the axis for a thin plate; 0 where
    the point does not see the hole.
    """

    distance_mm: Array
    direction: Array
    shift: Array
    falloff: Array

    @property
    def tangent(self) -> Array:
        """Right and up per mm along the axis, (..., 2)."""
        return np.asarray(self.direction[..., :2] / self.direction[..., 2:])

    def one(self, place: tuple[int, ...]) -> "ChiefRays":
        """Return the ray at a place of the common shape."""
        return ChiefRays(
            self.distance_mm[place], self.direction[place], self.shift[place], self.falloff[place]
        )

    def focus(self, object_distance_mm: ArrayLike) -> Array:
        """Return Q, (..., 2, 2), 1/mm, for objects at a distance along the axis.

        Q = (1/r + 1/ro)(I - p p^T), ro = zo / p_z.
        """
        p = self.direction[..., :2]
        along = self.direction[..., 2]
        curvature = 1.0 / self.distance_mm + along / np.asarray(object_distance_mm, np.float64)
        outer = np.eye(2) - p[..., :, None] * p[..., None, :]
        return np.asarray(curvature[..., None, None] * outer)


@dataclass(frozen=True, slots=True, kw_only=True)
class FilmSurface:
    """A flat film, or one bent round an axis of its own; bend_radius_mm inf is flat.

    focal_length_mm : hole to film along the axis. The film's middle touches the plane there; it is
    bent towards the hole. bend_radius = focal length is an arc about the hole, half of it a round tin
    with the hole in its wall.
    """

    focal_length_mm: float
    bend_radius_mm: float = math.inf
    axis: Axis = "vertical"

    @property
    def flat(self) -> bool:
        """Whether the film is plane."""
        return math.isinf(self.bend_radius_mm)

    def points_mm(self, u_mm: ArrayLike, v_mm: ArrayLike) -> Array:
        """Return film points (..., 3): right, up, and along the axis from the hole."""
        u, v = np.broadcast_arrays(np.asarray(u_mm, np.float64), np.asarray(v_mm, np.float64))
        if self.flat:
            return np.stack([u, v, np.full(u.shape, self.focal_length_mm)], axis=-1)
        bent, straight = (u, v) if self.axis == "vertical" else (v, u)
        around = bent / self.bend_radius_mm
        aside = self.bend_radius_mm * np.sin(around)
        # z - R + R cos, written so that a large radius does not cancel.
        ahead = self.focal_length_mm - 2.0 * self.bend_radius_mm * np.sin(0.5 * around) ** 2
        first, second = (aside, straight) if self.axis == "vertical" else (straight, aside)
        return np.stack([first, second, ahead], axis=-1)

    def coordinate_mm(self, angle_rad: float, along: Literal["u", "v"]) -> float:
        """Return the film coordinate that a ray meets on the film's middle line along u or v.

        angle_rad : between the ray and the hole's axis. By the law of sines in the triangle of hole,
        bend's middle and film point.
        """
        bent = not self.flat and (along == "u") == (self.axis == "vertical")
        if not bent:
            return self.focal_length_mm * math.tan(angle_rad)
        beside = (self.focal_length_mm - self.bend_radius_mm) / self.bend_radius_mm
        return self.bend_radius_mm * (angle_rad + math.asin(beside * math.sin(angle_rad)))

    def meet_mm(self, tangent_right: float, tangent_up: float) -> tuple[float, float]:
        """Return the film point (u, v) that a ray ahead meets, by its slopes right and up."""
        if self.flat:
            return self.focal_length_mm * tangent_right, self.focal_length_mm * tangent_up
        if self.axis == "vertical":
            u = self.coordinate_mm(math.atan(tangent_right), "u")
            return u, tangent_up * float(self.points_mm(u, 0.0)[2])
        v = self.coordinate_mm(math.atan(tangent_up), "v")
        return tangent_right * float(self.points_mm(0.0, v)[2]), v

    def tangents(self, u_mm: ArrayLike, v_mm: ArrayLike) -> Array:
        """Return the film's unit tangents (..., 3, 2) along u and v."""
        u, v = np.broadcast_arrays(np.asarray(u_mm, np.float64), np.asarray(v_mm, np.float64))
        basis = np.zeros((*u.shape, 3, 2))
        basis[..., 0, 0] = 1.0
        basis[..., 1, 1] = 1.0
        if not self.flat:
            bent = u if self.axis == "vertical" else v
            around = bent / self.bend_radius_mm
            column = 0 if self.axis == "vertical" else 1
            basis[..., column, column] = np.cos(around)
            basis[..., 2, column] = -np.sin(around)
        return basis

    def light(self, u_mm: ArrayLike, v_mm: ArrayLike) -> tuple[Array, Array, Array]:
        """Return what a whole picture needs of its chief rays, and no more.

        Returns falloff, as in ChiefRays, and the rays' tangents right and up, of the common shape;
        tangents are 0 where the falloff is.
        """
        points = self.points_mm(u_mm, v_mm)
        x, y, ahead = points[..., 0], points[..., 1], points[..., 2]
        square = x * x + y * y + ahead * ahead
        if self.flat:
            facing = ahead
        else:
            bent = np.asarray(u_mm if self.axis == "vertical" else v_mm, np.float64)
            around = bent / self.bend_radius_mm
            aside = x if self.axis == "vertical" else y
            facing = aside * np.sin(around) + ahead * np.cos(around)
        lit = (ahead > 1e-6 * self.focal_length_mm) & (facing > 0.0)
        falloff = np.where(
            lit, self.focal_length_mm**2 * ahead * facing / np.maximum(square, 1e-12) ** 2, 0.0
        )
        depth = np.where(lit, ahead, np.inf)
        return falloff, x / depth, y / depth

    def chief_rays(self, u_mm: ArrayLike, v_mm: ArrayLike) -> ChiefRays:
        """Return the rays to film points of any common shape.

        The phase of the hole's wave along the film is -(2 pi / (lambda r)) xi^T B delta with B the
        first two rows of (I - p p^T) E; a film frequency nu shifts the opening by
        lambda r B^-T nu. Falloff is z^2 cos(hole) cos(film) / r^2.
        """
        points = self.points_mm(u_mm, v_mm)
        basis = self.tangents(u_mm, v_mm)
        distance = np.linalg.norm(points, axis=-1)
        safe = np.maximum(distance, 1e-9)
        direction = points / safe[..., None]
        normal = np.cross(basis[..., 0], basis[..., 1])
        film_cosine = np.einsum("...i,...i->...", normal, direction)
        hole_cosine = direction[..., 2]
        across = (
            basis
            - direction[..., :, None]
            * np.einsum("...i,...ij->...j", direction, basis)[..., None, :]
        )
        b = across[..., :2, :]
        determinant = b[..., 0, 0] * b[..., 1, 1] - b[..., 0, 1] * b[..., 1, 0]
        lit = (film_cosine > 1e-6) & (hole_cosine > 1e-6) & (np.abs(determinant) > 1e-9)
        adjugate = np.empty_like(b)  # of B transposed
        adjugate[..., 0, 0] = b[..., 1, 1]
        adjugate[..., 1, 1] = b[..., 0, 0]
        adjugate[..., 0, 1] = -b[..., 1, 0]
        adjugate[..., 1, 0] = -b[..., 0, 1]
        shift = adjugate * (safe / np.where(lit, determinant, 1.0))[..., None, None]
        falloff = np.where(lit, (self.focal_length_mm / safe) ** 2 * hole_cosine * film_cosine, 0.0)
        return ChiefRays(safe, direction, shift, falloff)
