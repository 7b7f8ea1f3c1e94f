"""The optics of a bare hole: arrays and numbers in, arrays out; no file, no image, no camera format.

    round_hole.py  transfer function and point image of a round hole, one wavelength, one quadrature
    sharpness.py   what these mean to an eye: finest detail, spot size, the best hole
    falloff.py     how much light reaches a film point: film tilt, distance, plate thickness

All lengths are mm, wavelengths nm, frequencies cycles/mm on the film.
"""

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pinsim.optics.falloff import flat_falloff, plate_transmission
    from pinsim.optics.round_hole import overlap_otf, round_otf, round_psf
    from pinsim.optics.sharpness import (
        Light,
        best_diameter_mm,
        finest_detail,
        light_otf,
        spot_diameter_mm,
    )

__all__ = [
    "Light",
    "best_diameter_mm",
    "finest_detail",
    "flat_falloff",
    "light_otf",
    "overlap_otf",
    "plate_transmission",
    "round_otf",
    "round_psf",
    "spot_diameter_mm",
]

_ROOM_OF = {
    "Light": "sharpness",
    "best_diameter_mm": "sharpness",
    "finest_detail": "sharpness",
    "flat_falloff": "falloff",
    "light_otf": "sharpness",
    "overlap_otf": "round_hole",
    "plate_transmission": "falloff",
    "round_otf": "round_hole",
    "round_psf": "round_hole",
    "spot_diameter_mm": "sharpness",
}


def __getattr__(name: str) -> Any:
    # Lazy, so that `import pinsim.optics` costs nothing until a number is asked for.
    if name not in _ROOM_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    import importlib

    return getattr(importlib.import_module(f"{__name__}.{_ROOM_OF[name]}"), name)
