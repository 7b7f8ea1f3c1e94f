"""Quantities as people write them ("0.30 mm", "4 ft", "65deg") to plain numbers, and back.

Inside pinsim there is one unit for each kind: mm, nm, degrees, seconds. Others exist only here.
"""

import math
import re
from collections.abc import Mapping

from pinsim.errors import UnitError

MM_PER = {
    "um": 1e-3,
    "mm": 1.0,
    "cm": 10.0,
    "m": 1000.0,
    "km": 1e6,
    "in": 25.4,
    "ft": 304.8,
}
NM_PER = {"nm": 1.0, "um": 1000.0}
DEG_PER = {"deg": 1.0, "rad": 180.0 / math.pi}
S_PER = {"ms": 1e-3, "s": 1.0, "min": 60.0, "h": 3600.0}

LONGEST_S = 3.6e8  # eleven years; the longest exposures through a hole have taken about one
EV_RANGE = (-10.0, 25.0)  # at ISO 100, from starlight to brighter than any lit scene

# Both Unicode micro signs, the typographic primes and the degree sign are what keyboards,
# phones and word processors really produce.
_SPELLINGS = {
    "\N{MICRO SIGN}m": "um",
    "\N{GREEK SMALL LETTER MU}m": "um",
    "micron": "um",
    "microns": "um",
    '"': "in",
    "inch": "in",
    "inches": "in",
    "'": "ft",
    "feet": "ft",
    "foot": "ft",
    "\N{DEGREE SIGN}": "deg",
    "degree": "deg",
    "degrees": "deg",
    "metre": "m",
    "metres": "m",
    "meter": "m",
    "meters": "m",
    "sec": "s",
    "seconds": "s",
    "minutes": "min",
    "hours": "h",
    "pixel": "px",
    "pixels": "px",
}
_QUANTITY = re.compile(
    r"\s*(?P<number>[-+]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][-+]?\d+)?)"
    r"(?:\s*/\s*(?P<divisor>\d+(?:\.\d*)?))?\s*(?P<unit>\D*?)\s*"
)


def _parse(text: object, where: str, units: Mapping[str, float], example: str) -> float:
    allowed = ", ".join(units)
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        raise UnitError(
            f"{where} is {text!a}; write it as one text with a number and a unit, "
            f"for example {example!r}."
        )
    if not isinstance(text, str):
        raise UnitError(
            f"{where} is {text!r}, a number without a unit; "
            f"write it as text with one of {allowed}, for example {example!r}."
        )
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise UnitError(
            f"{where}: cannot read {text!a}; "
            f"write a number with a point and a unit, for example {example!r}."
        )
    unit = _SPELLINGS.get(match["unit"], match["unit"])
    if not unit:
        raise UnitError(
            f"{where}: {text!a} has no unit; add one of {allowed}, for example {example!r}."
        )
    if unit not in units:
        raise UnitError(
            f"{where}: the unit of {text!a} is not one of {allowed}; for example {example!r}."
        )
    divisor = float(match["divisor"] or 1.0)
    if divisor == 0.0:
        raise UnitError(f"{where}: {text!a} divides by zero; for example {example!r}.")
    value = float(match["number"]) / divisor * units[unit]
    if not math.isfinite(value):
        raise UnitError(f"{where}: {text!a} is too large a number; for example {example!r}.")
    return value


def length_mm(text: object, where: str) -> float:
    """Return a length such as "0.30 mm", "1/64 in" or "4m" in millimetres.

    where : what the length is, for the error text ("camera.toml: hole.diameter", "--hole").
    Raises UnitError when there is no number, no unit or an unknown unit.
    """
    return _parse(text, where, MM_PER, "0.30 mm")


def distance_mm(text: object, where: str) -> float:
    """Return a distance in millimetres; "infinity" and "inf" are allowed and give math.inf."""
    if isinstance(text, str) and text.strip().lower() in {"inf", "infinity", "infinite"}:
        return math.inf
    value = _parse(text, where, MM_PER, "4 m")
    if value <= 0.0:
        raise UnitError(
            f"{where} is {value:g} mm; a distance is more than 0, from the hole outwards. "
            "For the far horizon write 'infinity'."
        )
    return value


def pixels(text: object, where: str) -> float:
    """Return a length in a picture such as "812 px" or "1/256 px" in pixels."""
    return _parse(text, where, {"px": 1.0}, "812 px")


def wavelength_nm(text: object, where: str) -> float:
    """Return a wavelength such as "550 nm" or "0.55 um" in nanometres."""
    return _parse(text, where, NM_PER, "550 nm")


def angle_deg(text: object, where: str) -> float:
    """Return an angle such as "65 deg" or "1.1rad" in degrees."""
    return _parse(text, where, DEG_PER, "65 deg")


def time_s(text: object, where: str) -> float:
    """Return a time such as "8 s", "1/4 s" or "3 min" in seconds."""
    value = _parse(text, where, S_PER, "8 s")
    if value > LONGEST_S:
        raise UnitError(
            f"{where} is {value:g} s, more than {LONGEST_S / 3600.0:.0f} h; "
            "an exposure of that length is not drawn, give a shorter one."
        )
    if value <= 0.0:
        raise UnitError(
            f"{where} is {value:g} s; an exposure takes more than 0 s, for example 8 s."
        )
    return value


def exposure_value(text: object, where: str) -> float:
    """Return a brightness in EV at ISO 100, which has no unit: "13", "-2.5" or a number."""
    low, high = EV_RANGE
    try:
        if isinstance(text, bool) or not isinstance(text, str | int | float):
            raise ValueError
        value = float(text)
    except ValueError:
        raise UnitError(
            f"{where} is {text!a}; it must be a number of EV at ISO 100, for example 13."
        ) from None
    if not low <= value <= high:  # also refuses nan
        raise UnitError(
            f"{where} is {value:g} EV; it must be {low:g} to {high:g} EV at ISO 100. "
            "Sun is about 15, an overcast day 12, a lit room 6."
        )
    return value


def format_length(value_mm: float) -> str:
    """Return a length for people: "0.3 mm", "12 cm", "4 m", "infinity"."""
    if math.isinf(value_mm):
        return "infinity"
    if value_mm >= 1000.0:
        return f"{value_mm / 1000.0:.3g} m"
    if value_mm >= 100.0:
        return f"{value_mm / 10.0:.3g} cm"
    return f"{value_mm:.3g} mm"


def format_time(value_s: float) -> str:
    """Return a time for people: "1/30 s", "8 s", "2 min 30 s", "1 h 5 min"."""
    if value_s < 0.5:
        return f"1/{1.0 / value_s:.0f} s"
    if value_s < 10.0:
        return f"{value_s:.2g} s"
    whole = round(value_s)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        minutes, seconds = divmod(whole, 60)
        return f"{minutes} min {seconds} s" if seconds else f"{minutes} min"
    hours, minutes = divmod(round(whole / 60), 60)
    return f"{hours} h {minutes} min" if minutes else f"{hours} h"
