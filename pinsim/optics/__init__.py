"""The optics of a bare hole: arrays and numbers in, arrays out; no file, no image, no camera.

round_hole.py    transfer function and point image of a round hole on the axis, one quadrature
opening.py       openings of any shape, and the overlap of each with itself
traced.py        an opening of any outline, on a grid
film_surface.py  flat and bent film: where its points lie, what the hole looks like from there
film_transfer.py the transfer function anywhere on any film
falloff.py       how much of the light a thick plate lets through
sharpness.py     what these mean to an eye: finest detail, spot size, the best hole

All lengths are mm, wavelengths nm, frequencies cycles/mm on the film.
"""

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pinsim.optics.falloff import plate_transmission
    from pinsim.optics.film_surface import ChiefRays, FilmSurface
    from pinsim.optics.film_transfer import OpticalCamera, film_otf, ray_otf
    from pinsim.optics.opening import Ellipse, Opening, Slit
    from pinsim.optics.round_hole import overlap_otf, round_otf, round_psf
    from pinsim.optics.sharpness import (
        Light,
        best_diameter_mm,
        finest_detail,
        light_otf,
        spot_diameter_mm,
    )
    from pinsim.optics.traced import Traced

__all__ = [
    "ChiefRays",
    "Ellipse",
    "FilmSurface",
    "Light",
    "Opening",
    "OpticalCamera",
    "Slit",
    "Traced",
    "best_diameter_mm",
    "film_otf",
    "finest_detail",
    "light_otf",
    "overlap_otf",
    "plate_transmission",
    "ray_otf",
    "round_otf",
    "round_psf",
    "spot_diameter_mm",
]

_ROOM_OF = {
    "ChiefRays": "film_surface",
    "Ellipse": "opening",
    "FilmSurface": "film_surface",
    "Light": "sharpness",
    "Opening": "opening",
    "OpticalCamera": "film_transfer",
    "Slit": "opening",
    "Traced": "traced",
    "best_diameter_mm": "sharpness",
    "film_otf": "film_transfer",
    "finest_detail": "sharpness",
    "light_otf": "sharpness",
    "overlap_otf": "round_hole",
    "plate_transmission": "falloff",
    "ray_otf": "film_transfer",
    "round_otf": "round_hole",
    "round_psf": "round_hole",
    "spot_diameter_mm": "sharpness",
}


def __getattr__(name: str) -> Any:
    # Lazy, so that `import pinsim.optics` costs nothing until a number is asked for.
    if name not in _ROOM_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    import importlib

    value = getattr(importlib.import_module(f"{__name__}.{_ROOM_OF[name]}"), name)
    globals()[name] = value  # also keeps a room of the same name from hiding it
    return value
