"""The first question of every builder - how big a hole - for a wavelength or a material."""

import math

import numpy as np

from pinsim import optics
from pinsim.errors import DesignError, out_of_range
from pinsim.material import LONGEST_NM, SHORTEST_NM
from pinsim.material import material as material_named

# Mid-green, where the eye and the handbooks' tables of hole sizes are.
DEFAULT_WAVELENGTH_NM = 550.0


def light_for(wavelength_nm: float | None, material: str | None) -> "optics.Light":
    """Return the light to judge sharpness by: one wavelength, a material's own, or mid-green."""
    if wavelength_nm is not None:
        if not SHORTEST_NM <= wavelength_nm <= LONGEST_NM:
            raise DesignError(
                out_of_range("wavelength", wavelength_nm, "nm", SHORTEST_NM, LONGEST_NM)
            )
        return optics.Light(wavelengths_nm=np.array([wavelength_nm]))
    if material is not None:
        return material_named(material).light
    return optics.Light(wavelengths_nm=np.array([DEFAULT_WAVELENGTH_NM]))


def best_diameter_mm(
    focal_length_mm: float,
    *,
    wavelength_nm: float | None = None,
    material: str | None = None,
    distance_mm: float = math.inf,
    contrast: float = 0.2,
    field_deg: float = 0.0,
) -> float:
    """Return the diameter of the hole that draws the finest detail at `contrast`, mm.

    focal_length_mm : hole to film. wavelength_nm : one colour of light; else material : a material's
    own light; else 550 nm. field_deg : angle off the axis on a flat film, the poorer of tangential
    and sagittal detail. Raises DesignError for values out of range.
    """
    if not 1.0 <= focal_length_mm <= 20_000.0:
        raise DesignError(out_of_range("focal length", focal_length_mm, "mm", 1.0, 20_000.0))
    if not 0.01 <= contrast <= 0.95:
        raise DesignError(f"contrast is {contrast:g}; it must be 0.01 to 0.95, for example 0.2.")
    if not 0.0 <= field_deg <= 80.0:
        raise DesignError(out_of_range("field angle", field_deg, "deg", 0.0, 80.0))
    if not distance_mm > 0.0:
        raise DesignError(f"distance is {distance_mm:g} mm; it must be more than 0.")
    return optics.best_diameter_mm(
        focal_length_mm=focal_length_mm,
        light=light_for(wavelength_nm, material),
        distance_mm=distance_mm,
        contrast=contrast,
        field_deg=field_deg,
    )
