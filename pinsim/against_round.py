"""What a hole's shape does to the picture: against a round hole of the same area."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pinsim.best import light_for
from pinsim.camera import Camera, Hole
from pinsim.optics import Light, film_otf

Array = NDArray[np.float64]

CONTRAST = 0.2
_STEPS = 400
_COLOURS = 9
# In the contrast curve of every hole of a useful size 20 % comes before this many cycles across it.
_CYCLES_ACROSS = 6.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Detail:
    """The finest detail drawn at 20 % contrast in the middle of the film, cycles/mm.

    right : of detail repeated to the right (upright lines); up : of detail repeated upwards. round :
    of the round hole of the same area, the same both ways.
    """

    right_cycles_mm: float
    up_cycles_mm: float
    round_cycles_mm: float

    @property
    def right_loss(self) -> float:
        """The share of the round hole's detail that is lost to the right; negative is a gain."""
        return 1.0 - self.right_cycles_mm / self.round_cycles_mm

    @property
    def up_loss(self) -> float:
        """The share that is lost upwards."""
        return 1.0 - self.up_cycles_mm / self.round_cycles_mm


@dataclass(frozen=True, slots=True, kw_only=True)
class AgainstRound:
    """A hole against the round one of the same area in the same camera, a far scene.

    f_number : alike for both, as equal areas pass equal light in the middle. corner_light,
    round_corner_light : shares of light that the plate's thickness leaves at the frame's corner.
    """

    detail: Detail
    diameter_mm: float
    f_number: float
    corner_light: float
    round_corner_light: float


def against_round(camera: Camera, *, wavelength_nm: float | None = None) -> AgainstRound:
    """Return what a camera's hole does against a round one, for its material's light or one colour."""
    light = light_for(wavelength_nm, camera.material_name)
    wavelengths, shares = _few_colours(light)
    hole = Hole(
        diameter_mm=camera.hole.diameter_mm, plate_thickness_mm=camera.hole.plate_thickness_mm
    )
    round_camera = replace(camera, hole=hole)

    cutoff = camera.hole.greatest_mm / (float(wavelengths.min()) * 1e-6 * camera.focal_length_mm)
    frequency = np.linspace(0.0, min(cutoff, _CYCLES_ACROSS / camera.hole.diameter_mm), _STEPS)
    none = np.zeros_like(frequency)

    def finest(of: Camera) -> tuple[float, float]:
        # Both directions in one call, as a traced opening's overlap is made anew for each wavelength.
        total = np.zeros((2, _STEPS), np.complex128)
        for wavelength, share in zip(wavelengths, shares, strict=True):
            total += share * film_otf(
                np.stack([frequency, none]),
                np.stack([none, frequency]),
                camera=of,
                film_point_mm=(0.0, 0.0),
                wavelength_nm=float(wavelength),
            )
        right, up = np.abs(total)
        return _first_fall(frequency, right), _first_fall(frequency, up)

    right, up = finest(camera)
    of_round, _ = finest(round_camera)
    rays = camera.rays_to(camera.far_corner)
    apart = camera.plate_thickness_mm * np.asarray(rays.tangent)
    return AgainstRound(
        detail=Detail(right_cycles_mm=right, up_cycles_mm=up, round_cycles_mm=of_round),
        diameter_mm=camera.hole.diameter_mm,
        f_number=camera.f_number,
        corner_light=float(np.squeeze(camera.opening.clear_share(apart))),
        round_corner_light=float(np.squeeze(round_camera.opening.clear_share(apart))),
    )


def _few_colours(light: Light) -> tuple[Array, Array]:
    """Return a light by at most nine wavelengths and their shares.

    Materials list a wavelength once for each channel, and finely; a contrast averaged over a third of
    them differs by less than 1e-3.
    """
    wavelengths, where = np.unique(light.wavelengths_nm, return_inverse=True)
    shares = np.bincount(where, weights=light.shares)
    groups = np.array_split(np.arange(wavelengths.size), min(wavelengths.size, _COLOURS))
    few = np.array([float(shares[g].sum()) for g in groups])
    means = [
        float(wavelengths[g] @ shares[g]) / max(share, 1e-12)
        for g, share in zip(groups, few, strict=True)
    ]
    lit = few > 1e-6
    return np.array(means)[lit], few[lit]


def _first_fall(frequency: Array, curve: Array) -> float:
    """Return where a contrast curve first falls to 20 %; its end if it does not before it."""
    below = np.flatnonzero(curve <= CONTRAST)
    if below.size == 0:
        return float(frequency[-1])
    i = int(below[0])
    step = (curve[i - 1] - CONTRAST) / (curve[i - 1] - curve[i])
    return float(frequency[i - 1] + step * (frequency[i] - frequency[i - 1]))
