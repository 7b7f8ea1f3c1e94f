"""Which light a material records: the photo's spectra, and what each layer takes of them.

A photo's red, green and blue are lifted to a spectrum by three smooth basis spectra that sum to 1 at
every wavelength, so white stays equal-energy white. A layer takes, at each of its wavelengths, a
share of the photo's red, green and blue.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.optics import Light

Array = NDArray[np.float64]

WAVELENGTHS_PER_BAND = 9
SHORTEST_NM = 1.0
LONGEST_NM = 2000.0

_BLUE_TO_GREEN_NM = 492.0
_GREEN_TO_RED_NM = 582.0
_CROSSOVER_NM = 8.0
BANDS = ("red", "green", "blue")


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

    @property
    def band_shares(self) -> dict[str, float]:
        """How much of the channel's exposure to white comes from the photo's red, green and blue."""
        return dict(zip(BANDS, self.weights.sum(axis=0).tolist(), strict=True))

    def at(self, wavelength_nm: float) -> "Channel":
        """Return this channel with all its light at one wavelength; its tones stay as they are."""
        return Channel(
            name=self.name,
            wavelengths_nm=np.array([wavelength_nm]),
            weights=self.weights.sum(axis=0, keepdims=True),
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


def photo_channels() -> tuple[Channel, ...]:
    """Return red, green and blue layers that record the photo's colours as they are."""

    # Each channel takes only its own third of the photo: the photo has been through one set of
    # filters already, and a second overlap would grey colours that a print corrects anyway.
    def weigh(index: int) -> Callable[[Array], Array]:
        only = np.eye(3)[index]
        return lambda nm: basis_spectra(nm) * _eye_window(nm)[:, None] * only

    return (
        _channel("red", 550.0, 690.0, weigh(0)),
        _channel("green", 455.0, 620.0, weigh(1)),
        _channel("blue", 395.0, 525.0, weigh(2)),
    )


def band_channel(name: str, from_nm: float, to_nm: float, soft_nm: float) -> Channel:
    """Return a layer evenly sensitive between two wavelengths.

    At the ends it has half of its sensitivity; soft_nm is how softly it ends (logistic).
    """

    def weigh(wavelengths_nm: Array) -> Array:
        sensitivity = _rise(wavelengths_nm, from_nm, soft_nm) * (
            1.0 - _rise(wavelengths_nm, to_nm, soft_nm)
        )
        return basis_spectra(wavelengths_nm) * sensitivity[:, None]

    return _channel(name, from_nm - 2.5 * soft_nm, to_nm + 3.75 * soft_nm, weigh)


def table_channel(name: str, wavelengths_nm: Array, sensitivity: Array) -> Channel:
    """Return a layer of a measured sensitivity, straight between its points, none beyond them."""

    def weigh(nodes_nm: Array) -> Array:
        return (
            basis_spectra(nodes_nm)
            * np.interp(nodes_nm, wavelengths_nm, sensitivity, left=0.0, right=0.0)[:, None]
        )

    return _channel(name, float(wavelengths_nm[0]), float(wavelengths_nm[-1]), weigh)
