"""How much of the light a thick plate lets through; falloff itself is in film_surface.py."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


def plate_transmission(
    tangent_square: ArrayLike, *, diameter_mm: float, plate_thickness_mm: float
) -> Array:
    """Return the clear share of a round straight bore seen at an angle.

    tangent_square : any shape, tan^2 of the angle to the axis.
    Returns float64 of that shape: the overlap of two circles t tan(theta) apart over one circle,
    1 on the axis, 0 from tan(theta) = d/t on.
    Geometry of two circles; the same function as the diffraction-limited MTF.
    """
    if plate_thickness_mm == 0.0:
        return np.ones(np.shape(tangent_square))
    tangent = np.sqrt(np.asarray(tangent_square, np.float64))
    return lens_share(tangent * (2.0 * plate_thickness_mm / diameter_mm))


def lens_share(distance: Array) -> Array:
    """Return the overlap of two unit circles, their centres `distance` apart, over one circle."""
    q = np.minimum(0.5 * distance, 1.0)
    return np.asarray((2.0 / np.pi) * (np.arccos(q) - q * np.sqrt(1.0 - q * q)))
