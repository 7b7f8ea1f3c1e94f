"""How long to leave the hole open.

light.py   the light: EV at ISO 100 from words, a meter's reading, lux or candela
times.py   the time: metered, corrected, in the corner, rounded as one can time it
table.py   times for many lights and several cameras at once

Nothing here is heavy to load, so that the command line can read a light before it loads anything.
"""

from pinsim.exposure.light import LightLevel, read_light
from pinsim.exposure.times import (
    Time,
    auto_time_s,
    gain_of,
    metered_time_s,
    round_time_s,
    time_for,
    time_text,
)

__all__ = [
    "LightLevel",
    "Time",
    "auto_time_s",
    "gain_of",
    "metered_time_s",
    "read_light",
    "round_time_s",
    "time_for",
    "time_text",
]
