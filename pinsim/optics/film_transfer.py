"""The transfer function anywhere on any film: the one expression that all others are cases of."""

import math
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pinsim.optics.film_surface import ChiefRays, FilmSurface
from pinsim.optics.opening import Opening


class OpticalCamera(Protocol):
    """What optics needs to know of a camera."""

    @property
    def opening(self) -> Opening:
        """The clear opening."""

    @property
    def plate_thickness_mm(self) -> float:
        """How thick the plate is that it goes through."""

    @property
    def surface(self) -> FilmSurface:
        """The film behind it."""


def film_otf(
    frequency_u: ArrayLike,
    frequency_v: ArrayLike,
    *,
    camera: OpticalCamera,
    film_point_mm: tuple[float, float],
    distance_mm: float = math.inf,
    wavelength_nm: float,
) -> NDArray[np.float64] | NDArray[np.complex128]:
    """Return the optical transfer function at a film point.

    frequency_u, frequency_v : any common shape, cycles/mm along the film, right and up as the scene
    is seen. film_point_mm : (u, v), likewise, from the hole's axis. distance_mm : hole to object,
    along the axis.
    Returns that shape, 1 at zero frequency; complex where the opening is not its own mirror image:
    the transform, with exp(-2 pi i nu x), of the point image in the upright picture. Zero where no
    light comes. Any opening, plate and film surface; scalar diffraction to second order about the
    chief ray (a generalisation of Hopkins, Proc. R. Soc. A 231 (1955) 91).
    """
    u, v = np.broadcast_arrays(
        np.asarray(frequency_u, np.float64), np.asarray(frequency_v, np.float64)
    )
    rays = camera.surface.chief_rays(*film_point_mm)
    frequency = np.stack([u.ravel(), v.ravel()], axis=-1)
    values = ray_otf(
        frequency,
        rays=rays,
        opening=camera.opening,
        plate_thickness_mm=camera.plate_thickness_mm,
        distance_mm=distance_mm,
        wavelength_nm=wavelength_nm,
    )
    return values.reshape(u.shape)


def ray_otf(
    frequency: NDArray[np.float64],
    *,
    rays: ChiefRays,
    opening: Opening,
    plate_thickness_mm: float,
    distance_mm: float,
    wavelength_nm: float,
    quick: bool = False,
) -> NDArray[np.float64] | NDArray[np.complex128]:
    """Return the transfer function of one chief ray. frequency : (n, 2). Returns (n,).

    quick : an error of 1e-6 is allowed.
    """
    if float(rays.falloff) <= 0.0:
        return np.zeros(len(frequency))
    wavelength_mm = wavelength_nm * 1e-6
    return opening.otf(
        wavelength_mm * (frequency @ rays.shift.T),
        rays.focus(distance_mm) / wavelength_mm,
        plate_thickness_mm * rays.tangent,
        quick=quick,
    )
