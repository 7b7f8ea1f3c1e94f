"""How much of the light reaches a film point: distance, tilt of hole and film, thickness of plate."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


def flat_falloff(tangent_square: ArrayLike) -> Array:
    """Return the illuminance of a flat film relative to the axis: cos^4 of the field angle.

    tangent_square : any shape, tan^2 of the angle between the ray and the hole's axis.
    Returns float64 of that shape, 1 on the axis; for an infinitely thin plate.
    Derived from E = L A cos(hole) cos(film) / r^2; Gardner, J. Res. NBS 39 (1947) 213 (from memory).
    """
    # cos^2 = 1/(1 + tan^2): no angle and no trigonometric function is needed.
    cosine_square = 1.0 / (1.0 + np.asarray(tangent_square, np.float64))
    return np.asarray(cosine_square * cosine_square)


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
    q = np.sqrt(np.asarray(tangent_square, np.float64)) * (plate_thickness_mm / diameter_mm)
    q = np.minimum(q, 1.0)
    return np.asarray((2.0 / np.pi) * (np.arccos(q) - q * np.sqrt(1.0 - q * q)))
