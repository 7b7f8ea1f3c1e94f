"""What lies in the film plane: which light each of its channels records.

A photo's red, green and blue are lifted to a spectrum by three smooth basis spectra that sum to 1 at
every wavelength, so white stays equal-energy white. A material has one or more channels, each a
set of wavelengths and, per wavelength, the share it takes from the photo's red, green and blue.
Spectral classes after the handbooks' ranges (blue-sensitive to 500 nm, orthochromatic to 590 nm,
panchromatic to 660 nm); smooth generic curves, not any maker's.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import DesignError, unknown_name
from pinsim.optics import Light

Array = NDArray[np.float64]

WAVELENGTHS_PER_BAND = 9
DEFAULT_MATERIAL = "colour"
SHORTEST_NM = 1.0
LONGEST_NM = 2000.0

_BLUE_TO_GREEN_NM = 492.0
_GREEN_TO_RED_NM = 582.0
_CROSSOVER_NM = 8.0


def _rise(wavelengths_nm: Array, middle_nm: float, width_nm: float) -> Array:
    return np.asarray(1.0 / (1.0 + np.exp(-(wavelengths_nm - middle_nm) / width_nm)))


def basis_spectra(wavelengths_nm: Array) -> Array:
    """Return the spectra of the photo's red, green and blue light.

    wavelengths_nm : (n,). Returns (n, 3), non-negative, every row sums to 1.
    """
    past_blue = _rise(wavelengths_nm, _BLUE_TO_GREEN_NM, _CROSSOVER_NM)
    red = _rise(wavelengths_nm, _GREEN_TO_RED_NM, _CROSSOVER_NM)
    return np.stack([red, past_blue - red, 1.0 - past_blue], axis=-1)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Channel:
    """One record on the film.

    wavelengths_nm : (n,); weights : (n, 3), the share of this channel's exposure that an evenly
    white scene gives through the photo's red, green and blue at each wavelength. All sum to 1.
    """

    name: str
    wavelengths_nm: Array
    weights: Array

    @property
    def light(self) -> Light:
        """The channel's whole light under a white scene."""
        return Light(wavelengths_nm=self.wavelengths_nm, shares=self.weights.sum(axis=1))

    def at(self, wavelength_nm: float) -> "Channel":
        """Return this channel with all its light at one wavelength; its tones stay as they are."""
        return Channel(
            name=self.name,
            wavelengths_nm=np.array([wavelength_nm]),
            weights=self.weights.sum(axis=0, keepdims=True),
        )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Material:
    """A film, a paper or a sensor. speed_iso is its usual exposure index in daylight."""

    name: str
    description: str
    speed_iso: float
    channels: tuple[Channel, ...]

    @property
    def light(self) -> Light:
        """All channels' light together, each channel alike: what "sharp" is judged by."""
        return Light(
            wavelengths_nm=np.concatenate([c.wavelengths_nm for c in self.channels]),
            shares=np.concatenate([c.light.shares for c in self.channels]) / len(self.channels),
        )

    def at(self, wavelength_nm: float) -> "Material":
        """Return this material under light of one wavelength only."""
        return Material(
            name=self.name,
            description=self.description,
            speed_iso=self.speed_iso,
            channels=tuple(channel.at(wavelength_nm) for channel in self.channels),
        )


def _channel(
    name: str, first_nm: float, last_nm: float, weigh: Callable[[Array], Array]
) -> Channel:
    """Make a channel of Gauss-Legendre wavelengths; `weigh` gives (n, 3) from (n,)."""
    nodes, node_weights = np.polynomial.legendre.leggauss(WAVELENGTHS_PER_BAND)
    wavelengths = first_nm + (last_nm - first_nm) * 0.5 * (nodes + 1.0)
    weights = weigh(wavelengths) * node_weights[:, None]
    return Channel(name=name, wavelengths_nm=wavelengths, weights=weights / weights.sum())


def _eye_window(wavelengths_nm: Array) -> Array:
    """What a photo's own filters let through: soft ends, nothing beyond 400 to 700 nm."""
    return _rise(wavelengths_nm, 425.0, 10.0) * (1.0 - _rise(wavelengths_nm, 640.0, 12.0))


def _colour() -> Material:
    # Each channel takes only its own third of the photo: the photo has been through one set of
    # filters already, and a second overlap would grey colours that a print corrects anyway.
    def weigh(index: int) -> Callable[[Array], Array]:
        only = np.eye(3)[index]
        return lambda nm: basis_spectra(nm) * _eye_window(nm)[:, None] * only

    return Material(
        name="colour",
        description="colour film or sensor, colours as in the photo",
        speed_iso=100.0,
        channels=(
            _channel("red", 550.0, 690.0, weigh(0)),
            _channel("green", 455.0, 620.0, weigh(1)),
            _channel("blue", 395.0, 525.0, weigh(2)),
        ),
    )


def _silver(
    name: str, description: str, speed_iso: float, from_nm: float, to_nm: float
) -> Material:
    """Make a black and white material with soft ends of sensitivity."""

    def weigh(wavelengths_nm: Array) -> Array:
        sensitivity = _rise(wavelengths_nm, from_nm, 8.0) * (
            1.0 - _rise(wavelengths_nm, to_nm, 8.0)
        )
        return basis_spectra(wavelengths_nm) * sensitivity[:, None]

    return Material(
        name=name,
        description=description,
        speed_iso=speed_iso,
        channels=(_channel("silver", from_nm - 20.0, to_nm + 30.0, weigh),),
    )


# Add a material here: a name, what it is, its exposure index, and the ends of its sensitivity in nm.
_MAKERS: dict[str, Callable[[], Material]] = {
    "blue-sensitive-paper": lambda: _silver(
        "blue-sensitive-paper", "graded enlarging paper used in the camera", 6.0, 405.0, 495.0
    ),
    "colour": _colour,
    "orthochromatic-80": lambda: _silver(
        "orthochromatic-80", "black and white film blind to red", 80.0, 405.0, 590.0
    ),
    "panchromatic-100": lambda: _silver(
        "panchromatic-100", "black and white film", 100.0, 405.0, 655.0
    ),
    "panchromatic-400": lambda: _silver(
        "panchromatic-400", "fast black and white film", 400.0, 405.0, 655.0
    ),
}
MATERIAL_NAMES = tuple(sorted(_MAKERS))


@lru_cache(maxsize=16)
def material(name: str) -> Material:
    """Return a built-in material by name; DesignError names the nearest for a misspelt one."""
    if name not in _MAKERS:
        raise DesignError(unknown_name("material", name, MATERIAL_NAMES))
    return _MAKERS[name]()
