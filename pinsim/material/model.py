"""What is known of one material: what it sees, how fast it is, and how light becomes density."""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from pinsim.material.reciprocity import Reciprocity
from pinsim.material.spectrum import BANDS, Channel
from pinsim.material.tone_curve import ToneCurve
from pinsim.optics import Light

Process = Literal["negative", "reversal", "sensor"]
PROCESSES = ("negative", "reversal", "sensor")
Support = Literal["film", "paper"]
SUPPORTS = ("film", "paper")

_SEEN = 0.12  # of the exposure to white: below this a colour counts as not seen


@dataclass(frozen=True, slots=True, kw_only=True)
class Grain:
    """How grainy: sigma_density is the spread of density seen through a round hole of 48 um.

    It is that at density 1 above base and fog; correlation_um is how far grains hang together.
    """

    sigma_density: float
    correlation_um: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Sensor:
    """An electronic record: linear until it is full.

    saturation_lxs : exposure in lux seconds, times the exposure index, that fills it. The rest is
    noise: electrons when full and when read out, on pixels of a pitch; None where nothing is known.
    """

    saturation_lxs: float
    pixel_pitch_um: float | None = None
    full_well_electrons: float | None = None
    read_noise_electrons: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Material:
    """A film, a paper or a sensor.

    speed_iso : its usual exposure index in daylight; speed_unsure_stops : how far that may be off.
    process : "negative"; "reversal", a positive in the camera itself; "sensor", linear.
    support : looked through (film) or looked at (paper).
    speed_lxs : exposure of the curve's speed point in lux seconds times the exposure index.
    mask_density : what the unexposed film takes of red, green and blue besides the curve's base.
    sources : where the figures come from.
    """

    name: str
    description: str
    speed_iso: float
    speed_unsure_stops: float
    process: Process
    support: Support
    channels: tuple[Channel, ...]
    reciprocity: Reciprocity
    curve: ToneCurve | None
    speed_lxs: float
    mask_density: tuple[float, float, float]
    grain: Grain | None
    sensor: Sensor | None
    sources: tuple[str, ...]

    @property
    def light(self) -> Light:
        """All channels' light together, each channel alike: what "sharp" is judged by."""
        return Light(
            wavelengths_nm=np.concatenate([c.wavelengths_nm for c in self.channels]),
            shares=np.concatenate([c.light.shares for c in self.channels]) / len(self.channels),
        )

    @property
    def colours_seen(self) -> dict[str, float]:
        """The photo's colours that expose it, with their share of a white scene's light."""
        total = sum(c.weights.sum(axis=0) for c in self.channels) / len(self.channels)
        shares = dict(zip(BANDS, np.asarray(total).tolist(), strict=True))
        return {name: share for name, share in shares.items() if share >= _SEEN}

    def at(self, wavelength_nm: float) -> "Material":
        """Return this material under light of one wavelength only."""
        return replace(self, channels=tuple(channel.at(wavelength_nm) for channel in self.channels))
