"""How long: metered time from the light, and what a time given differs from it."""

import math

from pinsim.camera import Camera
from pinsim.errors import DesignError, out_of_range
from pinsim.units import EV_RANGE, format_time


def metered_time_s(camera: Camera, ev: float) -> float:
    """Return the time an exposure meter would give, t = N^2 / (2^EV S/100), in seconds.

    ev : scene average at ISO 100. No correction for reciprocity failure. Source: ISO 2720.
    """
    return float(camera.f_number**2 / (2.0**ev * camera.material.speed_iso / 100.0))


def gain_of(camera: Camera, *, time_s: float | None, ev: float | None) -> float:
    """Return exposure given over metered exposure: 1 when no time is given."""
    if time_s is None:
        return 1.0
    if not time_s > 0.0:
        raise DesignError(f"an exposure of {time_s:g} s is not possible; give more than 0 s.")
    if ev is None:
        raise DesignError(
            "a time needs the light it is meant for; give the scene's EV at ISO 100, "
            "for example --ev 14 for hazy sun."
        )
    if not EV_RANGE[0] <= ev <= EV_RANGE[1]:
        raise DesignError(out_of_range("ev", ev, "EV", *EV_RANGE))
    return time_s / metered_time_s(camera, ev)


def exposure_note(camera: Camera, *, time_s: float, ev: float) -> str:
    """Return the line that says what a time given is worth, with all it assumes."""
    metered = metered_time_s(camera, ev)
    stops = math.log2(time_s / metered)
    verdict = (
        "as metered"
        if abs(stops) < 0.05
        else f"{abs(stops):.1f} stops {'over' if stops > 0.0 else 'under'}"
    )
    return (
        f"{format_time(time_s)} is {verdict}: {format_time(metered)} metered for EV {ev:g} and "
        f"{camera.material_name} at ISO {camera.material.speed_iso:g}, no reciprocity correction"
    )
