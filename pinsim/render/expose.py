"""Relative exposure to lux seconds that the material makes use of.

The light meter's mid-tone is photo value 0.18, and the scene's EV is its brightness: there the film's
axis gets E = pi L / (4 N^2) with L = K 2^EV / 100. Everywhere else the light is as much more or less
as the relative exposure says.

A long exposure is worth less than its lux seconds. The corrected time of a material is read at each
point's own light: a place that is n times dimmer than the mid-tone needs n times the metered time, and
what reciprocity leaves of *that* time is what this place makes of its lux seconds. So dim corners
and shadows lose more than the mid-tone, and contrast rises with long exposures, as makers warn of (they
advise to develop less). At the mid-tone itself the corrected time gives just what is needed. The
loss depends on how dim the light is, not on when the exposure is ended: twice the time is one stop.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.exposure import metered_time_s
from pinsim.exposure.light import K_REFLECTED, film_illuminance_lx, luminance_of_ev
from pinsim.exposure.times import light_share, time_text
from pinsim.material import Material
from pinsim.units import format_time

Array = NDArray[np.float64]

MID_TONE = 0.18  # photo value of the meter's mid-tone
# Lux seconds that the metered time gives the mid-tone behind a bare hole, times the exposure index.
METERED_LXS = math.pi / 4.0 * K_REFLECTED
# Darker than any shadow: keeps logarithms finite where no light comes at all.
_LEAST_RELATIVE = 1e-9
_AS_NEEDED_STOPS = 0.05


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Exposed:
    """A material that was exposed for a time in a light.

    metered_s : the time a meter gives; needed_s : the same corrected for the material.
    mid_lxs : lux seconds of the mid-tone on the film's axis, before reciprocity takes its share.
    """

    material: Material
    time_s: float
    ev: float
    metered_s: float
    needed_s: float
    mid_lxs: float

    @property
    def gain(self) -> float:
        """Time given over time needed: 2 is one stop more."""
        return self.time_s / self.needed_s

    def lux_seconds(self, relative: Array) -> Array:
        """Return what the film gets, lx s, for relative exposures (1.0 = white on the axis)."""
        return np.asarray(relative, np.float64) * (self.mid_lxs / MID_TONE)

    def efficiency(self, relative: Array) -> Array:
        """Return the share of its lux seconds that each place makes use of, 0 to 1."""
        dimness = MID_TONE / np.maximum(np.asarray(relative, np.float64), _LEAST_RELATIVE)
        return np.asarray(self.material.reciprocity.efficiency(self.metered_s * dimness))

    def used_lux_seconds(self, relative: Array) -> Array:
        """Return the lux seconds that count, whatever the time was; more than 0."""
        bounded = np.maximum(np.asarray(relative, np.float64), _LEAST_RELATIVE)
        return self.lux_seconds(bounded) * self.efficiency(bounded)

    def log_exposure(self, relative: Array) -> Array:
        """Return log10 of used exposure over that of the material's speed point."""
        speed_point_lxs = self.material.speed_lxs / self.material.speed_iso
        return np.asarray(np.log10(self.used_lux_seconds(relative) / speed_point_lxs))


def expose(camera: Camera, *, time_s: float, ev: float) -> Exposed:
    """Return a camera's material exposed for a time in a scene of a brightness, EV at ISO 100."""
    metered_s = metered_time_s(camera, ev)
    illuminance = film_illuminance_lx(luminance_of_ev(ev), camera.f_number)
    return Exposed(
        material=camera.material,
        time_s=time_s,
        ev=ev,
        metered_s=metered_s,
        needed_s=camera.material.reciprocity.corrected_s(metered_s),
        mid_lxs=illuminance * time_s,
    )


def exposure_notes(camera: Camera, exposed: Exposed) -> list[str]:
    """Return the lines that say what a time given is worth, with all it assumes."""
    material = exposed.material
    stops = math.log2(exposed.gain)
    verdict = (
        "as needed"
        if abs(stops) < _AS_NEEDED_STOPS
        else f"{abs(stops):.1f} stops {'over' if stops > 0.0 else 'under'}"
    )
    needed = f"{time_text(exposed.metered_s)} metered for EV {exposed.ev:g}, {camera.material_name}"
    needed += f" at index {material.speed_iso:g}"
    if material.speed_unsure_stops:
        needed += f" (+-{material.speed_unsure_stops:g} stops)"
    if exposed.needed_s > 1.01 * exposed.metered_s:
        law = material.reciprocity.label
        needed += f", {time_text(exposed.needed_s)} corrected ({law})"
    else:
        needed += ", no reciprocity correction"
    if material.reciprocity.outside_data(exposed.metered_s):
        needed += "; beyond the data there are"
    notes = [f"{format_time(exposed.time_s)} is {verdict}: {needed}"]
    if camera.tone == "negative" and material.process != "negative":
        notes.append(f"{camera.material_name} makes no negative; its tones are inverted")
    corner = _corner_note(camera, exposed)
    return [*notes, corner] if corner else notes


def _corner_note(camera: Camera, exposed: Exposed) -> str:
    share = light_share(camera, *camera.far_corner)
    if share <= 0.0:
        return ""
    middle, corner = exposed.efficiency(np.array([MID_TONE, MID_TONE * share]))
    lost = math.log2(middle / corner)
    if lost < _AS_NEEDED_STOPS:
        return ""
    return (
        f"in the far corner, {-math.log2(share):.1f} stops darker, a mid-tone keeps "
        f"{100 * corner:.0f} % of the material's speed (in the middle {100 * middle:.0f} %): "
        f"{lost:.1f} stops more are lost there"
    )
