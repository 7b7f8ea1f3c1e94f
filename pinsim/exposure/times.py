"""The time: as metered, corrected for the material, in the corner, and rounded as one can time it."""

import bisect
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pinsim.errors import DesignError, out_of_range
from pinsim.exposure.light import LightLevel
from pinsim.units import EV_RANGE

if TYPE_CHECKING:  # only its face is needed: no need to load what is behind it
    from pinsim.camera import Camera

HAND_LEAST_S = 0.5  # common practice, no source: shorter, the hand's own time counts for too much
DIM_LX = 1.0
LONG_S = 36_000.0

REASONS = DIM, LONG, NO_DATA = "under 1 lx", "over 10 h", "beyond what is known of its correction"


def metered_time_s(camera: "Camera", ev: float) -> float:
    """Return the time an exposure meter would give, t = N^2 / (2^EV S/100), in seconds.

    ev : scene average at ISO 100. No correction for reciprocity failure. Source: ISO 2720.
    """
    return float(camera.f_number**2 / (2.0**ev * camera.material.speed_iso / 100.0))


def gain_of(camera: "Camera", *, time_s: float | None, ev: float | None) -> float:
    """Return a time over the time needed, 2 for one stop more; 1 when no time is given.

    How much speed a material loses depends on how dim the light is, so at one light twice the time is a
    stop more, however long it is already.
    """
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
    return time_s / camera.material.reciprocity.corrected_s(metered_time_s(camera, ev))


def light_share(camera: "Camera", across: float, up: float) -> float:
    """Return the light at a place in the frame over that on the axis, of an even scene.

    across, up : as for Camera.frame_point_mm. By distance, slant and the plate's bore: cos^4 on flat
    film behind a thin plate (Gardner, J. Res. NBS 39 (1947) 213, from memory); 0 where unlit.
    """
    rays = camera.rays_to((across, up))
    clear = camera.opening.clear_share(camera.plate_thickness_mm * rays.tangent)
    return float(rays.falloff[0] * clear[0])


@dataclass(frozen=True, slots=True, kw_only=True)
class Time:
    """One exposure time. set_s : rounded as one can time it; text : the same in words.

    metered_s : what a meter would say; corrected_s : what the material needs, and stops more or less if
    asked for; infinity where no light comes. outside : why it is only a guess, in words, or nothing.
    """

    metered_s: float
    corrected_s: float
    set_s: float
    text: str
    outside: tuple[str, ...] = ()

    @property
    def by_hand(self) -> bool:
        """Whether a hand at a cap or a shutter's lever can time it."""
        return self.set_s >= HAND_LEAST_S

    @property
    def filter_stops_by_hand(self) -> int:
        """How many whole stops of filter make it long enough for a hand; 0 if it is."""
        return 0 if self.by_hand else math.ceil(math.log2(HAND_LEAST_S / self.corrected_s))


def time_for(
    camera: "Camera",
    light: LightLevel,
    *,
    filter_factor: float = 1.0,
    stops: float = 0.0,
    share: float = 1.0,
) -> Time:
    """Return the time that a camera needs in a light.

    filter_factor : how many times longer for the filter. share : light at the film's place over that on
    the axis. Both make the light on the film dimmer, so they come before the material's correction.
    stops : more (or less) exposure than needed, at that light, so after it: see `gain_of`.
    """
    if share <= 0.0:
        return Time(metered_s=math.inf, corrected_s=math.inf, set_s=math.inf, text="unlit")
    metered = metered_time_s(camera, light.ev) * filter_factor / share
    reciprocity = camera.material.reciprocity
    corrected = reciprocity.corrected_s(metered) * 2.0**stops
    outside = (
        (light.illuminance_lx < DIM_LX, DIM),
        (corrected > LONG_S, LONG),
        (reciprocity.outside_data(metered), NO_DATA),
    )
    return Time(
        metered_s=metered,
        corrected_s=corrected,
        set_s=round_time_s(corrected),
        text=time_text(corrected),
        outside=tuple(why for is_so, why in outside if is_so),
    )


def auto_time_s(camera: "Camera", ev: float) -> float:
    """Return the time that the camera needs on its axis, corrected, and rounded as one can time it."""
    reciprocity = camera.material.reciprocity
    return round_time_s(reciprocity.corrected_s(metered_time_s(camera, ev)))


# Marked shutter speeds: the names of exact thirds of a stop below 1 s (1/15 is 1/16 s; from memory).
_SHUTTER = (
    *(None, None, None, "1/2", "0.4", "0.3", "1/4", "1/5", "1/6", "1/8", "1/10", "1/13", "1/15"),
    *("1/20", "1/25", "1/30", "1/40", "1/50", "1/60", "1/80", "1/100", "1/125", "1/160", "1/200"),
    *("1/250", "1/320", "1/400", "1/500", "1/640", "1/800", "1/1000", "1/1250", "1/1600"),
    *("1/2000", "1/2500", "1/3200", "1/4000"),
)
_MINUTE_S, _HOUR_S, _DAY_S, _YEAR_S = 60.0, 3600.0, 86_400.0, 31_536_000.0
# Steps for a watch, never more than a quarter apart, so that rounding costs 1/6 stop at most.
_STEPS_S = (
    *(0.5, 0.6, 0.7, 0.8, 0.9, 1.0, 1.2, 1.5, 1.8, 2.0, 2.5, 3.0, 3.5, 4.0, 5.0, 6.0, 7.0, 8.0),
    *(9.0, 10.0, 12.0, 15.0, 18.0, 20.0, 25.0, 30.0, 35.0, 40.0, 45.0, 50.0),
    *(_MINUTE_S * n for n in (1.0, 1.25, 1.5, 1.75, 2.0, 2.5, 3.0, 3.5, 4.0, 5.0, 6.0, 7.0, 8.0)),
    *(_MINUTE_S * n for n in (9.0, 10.0, 12.0, 15.0, 18.0, 20.0, 25.0, 30.0, 35.0, 40.0, 45.0)),
    *(_MINUTE_S * n for n in (50.0, 60.0, 70.0, 80.0, 90.0, 105.0)),
    *(_HOUR_S * n for n in (2.0, 2.5, 3.0, 3.5, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0, 12.0, 15.0)),
    *(_HOUR_S * n for n in (18.0, 21.0, 24.0, 30.0, 36.0, 42.0)),
    *(_DAY_S * n for n in (2.0, 2.5, 3.0, 3.5, 4.0, 5.0, 6.0, 7.0, 8.0, 10.0, 12.0, 14.0, 17.0)),
    *(_DAY_S * n for n in (20.0, 25.0, 30.0, 35.0, 40.0, 50.0, 60.0, 75.0, 90.0, 110.0, 130.0)),
    *(_DAY_S * n for n in (150.0, 180.0, 220.0, 260.0, 310.0, 365.0)),
)


def round_time_s(time_s: float) -> float:
    """Return the nearest time that one can set or count, at most 1/6 stop away; s.

    Below 0.5 s the thirds of a stop that shutters are marked in; then what a watch tells: 0.1 s and
    halves, whole seconds, minutes, hours, days; beyond a year, thirds of a stop again.
    """
    if not math.isfinite(time_s) or time_s <= 0.0:
        return time_s
    if not _STEPS_S[0] <= time_s <= _STEPS_S[-1]:
        end = _STEPS_S[0] if time_s < _STEPS_S[0] else _STEPS_S[-1]
        return float(end * 2.0 ** (round(3.0 * math.log2(time_s / end)) / 3.0))
    above = min(max(bisect.bisect_left(_STEPS_S, time_s), 1), len(_STEPS_S) - 1)
    low, high = _STEPS_S[above - 1], _STEPS_S[above]
    return low if time_s * time_s < low * high else high


def time_text(time_s: float) -> str:
    """Return a time in words, rounded by `round_time_s`: "1/15 s", "2 min 30 s", "1 h 20 min"."""
    if math.isinf(time_s):
        return "never"
    rounded = round_time_s(time_s)
    if rounded < _STEPS_S[0]:
        third = round(-3.0 * math.log2(rounded))
        return f"{_SHUTTER[third]} s" if third < len(_SHUTTER) else f"1/{1.0 / rounded:.0f} s"
    if rounded < _MINUTE_S:
        return f"{rounded:g} s"
    if rounded >= _YEAR_S:
        years = rounded / _YEAR_S
        return (
            "1 year" if years == 1.0 else f"{years:.2g} years" if years < 99.5 else "over 99 years"
        )
    for unit_s, unit, part_s, part in (
        (_DAY_S * 2.0, "d", _HOUR_S, "h"),
        (_HOUR_S, "h", _MINUTE_S, "min"),
        (_MINUTE_S, "min", 1.0, "s"),
    ):
        if rounded >= unit_s:
            whole_s = _DAY_S if unit == "d" else unit_s
            whole, rest = divmod(rounded, whole_s)
            return f"{whole:g} {unit}" + (f" {rest / part_s:g} {part}" if rest else "")
    raise AssertionError(time_s)
