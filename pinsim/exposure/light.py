"""How bright a scene is: words, meter readings, lux and candela to EV at ISO 100, and back.

Meter equations and their usual constants, ISO 2720: N^2/t = L S/K with K = 12.5 for the luminance L of
the scene in cd/m^2, N^2/t = E S/C with C = 250 for the illuminance E on it in lx. A scene's EV at
ISO 100 is log2(N^2/t) of that exposure; words are the values of ANSI PH2.7's table.
"""

import math
import re
from dataclasses import dataclass

from pinsim.errors import UnitError, nearest
from pinsim.units import EV_RANGE, LONGEST_S

K_REFLECTED = 12.5
C_INCIDENT = 250.0
LX_PER_FOOT_CANDLE = 10.7639

_F_RANGE = (0.5, 2000.0)
_ISO_RANGE = (0.1, 1e7)


@dataclass(frozen=True, slots=True, kw_only=True)
class LightLevel:
    """A brightness. ev : at ISO 100. low_ev, high_ev : its range, where only a range is known.

    label : words for a table, may be empty. given : how it was told. note : what was assumed.
    """

    ev: float
    low_ev: float
    high_ev: float
    label: str = ""
    given: str = ""
    note: str = ""

    @property
    def ev_text(self) -> str:
        """The EV for a table: "15", "12.3", and of a range its ends: "7 to 8"."""
        if self.low_ev == self.high_ev:
            return f"{round(self.ev, 1):g}"
        return f"{self.low_ev:g} to {self.high_ev:g}"

    @property
    def words(self) -> str:
        """What the light is, for a table that tells the EV beside it; empty if it was told as EV."""
        return self.label or ("" if self.given.startswith("EV ") else self.given)

    @property
    def illuminance_lx(self) -> float:
        """Light falling on the scene, lx."""
        return illuminance_of_ev(self.ev)

    @property
    def luminance_cd_m2(self) -> float:
        """The scene's average luminance, cd/m^2."""
        return luminance_of_ev(self.ev)


def at_ev(ev: float, label: str = "", *, given: str = "", note: str = "") -> LightLevel:
    """Return one brightness without a range."""
    return LightLevel(ev=ev, low_ev=ev, high_ev=ev, label=label, given=given, note=note)


def luminance_of_ev(ev: float) -> float:
    """Return the luminance, cd/m^2, that a meter calls this EV at ISO 100: K 2^EV / 100."""
    return float(K_REFLECTED / 100.0 * 2.0**ev)


def illuminance_of_ev(ev: float) -> float:
    """Return the illuminance, lx, that a meter calls this EV at ISO 100: C 2^EV / 100."""
    return float(C_INCIDENT / 100.0 * 2.0**ev)


def ev_of_luminance(luminance_cd_m2: float) -> float:
    """Return EV at ISO 100 of a luminance in cd/m^2, more than 0."""
    return math.log2(100.0 * luminance_cd_m2 / K_REFLECTED)


def ev_of_illuminance(illuminance_lx: float) -> float:
    """Return EV at ISO 100 of an illuminance in lx, more than 0."""
    return math.log2(100.0 * illuminance_lx / C_INCIDENT)


def ev_of_reading(f_number: float, time_s: float, iso: float = 100.0) -> float:
    """Return EV at ISO 100 of what a meter or a camera shows: log2(N^2 / t) - log2(S / 100)."""
    return math.log2(f_number**2 / time_s) - math.log2(iso / 100.0)


def film_illuminance_lx(luminance_cd_m2: float, f_number: float) -> float:
    """Return the illuminance on the film's axis behind a bare hole, pi L / (4 N^2), in lx.

    No glass and no loss; for holes small against their depth. Photometry of a disc seen from afar.
    """
    return math.pi * luminance_cd_m2 / (4.0 * f_number**2)


# name: (lowest, highest EV at ISO 100, words). Values: table after ANSI PH2.7.
_WORDS: dict[str, tuple[float, float, str]] = {
    "snow-in-sun": (16.0, 16.0, "snow, sand in sun"),
    "sand-in-sun": (16.0, 16.0, "snow, sand in sun"),
    "sun": (15.0, 15.0, "sun, clear shadows"),
    "hazy-sun": (14.0, 14.0, "hazy sun"),
    "bright-overcast": (13.0, 13.0, "bright overcast"),
    "overcast": (12.0, 12.0, "heavy overcast"),
    "open-shade": (12.0, 12.0, "open shade"),
    "sunset": (12.0, 12.0, "sunset"),
    "night-street": (7.0, 8.0, "night street"),
    "room": (5.0, 7.0, "room at home"),
    "moonlight": (-3.0, -2.0, "full moonlight"),
}
LIGHT_NAMES = tuple(_WORDS)
_ALSO = {
    "beach": "sand-in-sun",
    "snow": "snow-in-sun",
    "sunny": "sun",
    "full-sun": "sun",
    "bright-sun": "sun",
    "sunshine": "sun",
    "hazy": "hazy-sun",
    "cloudy-bright": "bright-overcast",
    "cloudy": "overcast",
    "heavy-overcast": "overcast",
    "shade": "open-shade",
    "street-at-night": "night-street",
    "night": "night-street",
    "indoors": "room",
    "interior": "room",
    "moonlit": "moonlight",
    "full-moon": "moonlight",
}


def light_in_words(name: str) -> LightLevel:
    """Return the brightness that a name stands for; its middle where the table has a range."""
    low, high, says = _WORDS[name]
    return LightLevel(ev=0.5 * (low + high), low_ev=low, high_ev=high, label=says, given=name)


def usual_lights() -> tuple[LightLevel, ...]:
    """Return the brightnesses of a card: the table's words, and EV between day and night."""
    rest = {
        name: light_in_words(name)
        for name in ("snow-in-sun", "sun", "hazy-sun", "bright-overcast", "night-street", "room")
    }
    shade = at_ev(12.0, "overcast, shade", given="overcast")
    between = [at_ev(ev, given=f"EV {ev:g}") for ev in (11.0, 10.0, 9.0)]
    *day, street, room = rest.values()
    return (*day, shade, *between, street, room, light_in_words("moonlight"))


_NUMBER = r"(?:\d+(?:\.\d*)?|\.\d+)(?:e[-+]?\d+)?"
_AMOUNT = re.compile(rf"([-+]?{_NUMBER})\s*([a-z][a-z/^2\- ]*)")
_EV = re.compile(rf"(?:ev\s*[:=]?\s*([-+]?{_NUMBER})|([-+]?{_NUMBER})\s*ev)")
_ISO = re.compile(rf"(?:iso|asa)\s*[:=]?\s*({_NUMBER})(?:/\d+)?(?![\d.])")
_F = re.compile(rf"f\s*[:=/]?\s*({_NUMBER})")
_TIME = re.compile(
    rf"(?<![\w.])({_NUMBER})(?:\s*/\s*({_NUMBER}))?\s*(seconds?|secs?|minutes?|min|s|\"|'')?"
)
_JOINS = re.compile(r"[\s,;@+]+|\bat\b|\band\b")
_PER_UNIT = {
    "lx": ("lx", 1.0),
    "lux": ("lx", 1.0),
    "klx": ("lx", 1000.0),
    "klux": ("lx", 1000.0),
    "fc": ("lx", LX_PER_FOOT_CANDLE),
    "foot-candles": ("lx", LX_PER_FOOT_CANDLE),
    "cd/m2": ("cd/m2", 1.0),
    "cd/m^2": ("cd/m2", 1.0),
    "nit": ("cd/m2", 1.0),
    "nits": ("cd/m2", 1.0),
    "kcd/m2": ("cd/m2", 1000.0),
}
_EXAMPLES = "a word such as sun, 'f/16 1/125 ISO 100', '12000 lx', '400 cd/m2' or 'EV 12'"


def read_light(text: object, where: str) -> LightLevel:
    """Return a light told in words, as a meter's reading, in lux, in candela or as EV.

    text : "open-shade"; "f/16, 1/125, ISO 100" in loose spellings, ISO 100 where none is given;
    "12000 lx" falling on the scene; "400 cd/m2" coming from it; "EV 12". where : for error texts.
    Raises UnitError, in one line.
    """
    if not isinstance(text, str) or not text.strip():
        raise UnitError(f"{where} is {text!a}; give {_EXAMPLES}.")
    plain = text.strip().lower().replace("\N{SUPERSCRIPT TWO}", "2")
    plain = plain.replace("\N{LATIN SMALL LETTER F WITH HOOK}", "f").replace("\N{DEGREE SIGN}", "")
    word = re.sub(r"[\s_-]+", "-", plain)
    word = _ALSO.get(word, word)
    if word in _WORDS:
        return light_in_words(word)
    amount = _AMOUNT.fullmatch(plain)
    if amount and amount[2].strip() in _PER_UNIT:
        return _in_range(_from_amount(float(amount[1]), amount[2].strip(), where), text, where)
    if re.fullmatch(rf"[-+]?{_NUMBER}", plain):
        raise UnitError(
            f"{where}: {text!a} has no unit; write 'EV {plain}', '{plain} lx' or '{plain} cd/m2', "
            "whichever it is."
        )
    if not re.search(r"\d", plain):
        raise UnitError(
            f"{where}: no light is called {text!a}.{nearest(word, (*_WORDS, *_ALSO))} "
            f"Known: {', '.join(LIGHT_NAMES)}; or give {_EXAMPLES.partition(', ')[2]}."
        )
    return _in_range(_from_reading(plain, text, where), text, where)


def _from_amount(value: float, unit: str, where: str) -> LightLevel:
    kind, factor = _PER_UNIT[unit]
    value *= factor
    if not 0.0 < value < math.inf:
        raise UnitError(f"{where} is {value:g} {kind}; a light is more than 0 {kind}.")
    if kind == "lx":
        return at_ev(ev_of_illuminance(value), given=f"{value:g} lx")
    return at_ev(ev_of_luminance(value), given=f"{value:g} cd/m2")


def _from_reading(plain: str, text: str, where: str) -> LightLevel:
    """Read f-number, time and ISO, or EV and ISO, in any order."""
    rest = plain
    found: dict[str, re.Match[str] | None] = {}
    # The time last: it is the only part that may be a bare number.
    for name, pattern in (("ev", _EV), ("iso", _ISO), ("f", _F), ("time", _TIME)):
        found[name] = pattern.search(rest)
        if found[name] is not None:
            rest = pattern.sub(" ", rest, count=1)
    left = _JOINS.sub(" ", rest).strip()
    if left:
        comma = "; numbers take a point, not a comma" if re.search(r"\d,\d", plain) else ""
        raise UnitError(f"{where}: cannot read {left!a} in {text!a}{comma}. Give {_EXAMPLES}.")
    iso = _number(found["iso"], "the ISO speed", _ISO_RANGE, text, where) or 100.0
    told = f"ISO {iso:g}"
    note = "" if found["iso"] else "ISO 100 assumed"
    ev = found["ev"]
    if ev is not None:
        if found["f"] or found["time"]:
            raise UnitError(f"{where}: {text!a} has an EV and a reading; give one of them.")
        value = float(ev[1] or ev[2])
        given = f"EV {value:g}" + (f" at {told}" if found["iso"] else "")
        return at_ev(value - math.log2(iso / 100.0), given=given)
    f_number = _number(found["f"], "the f-number", _F_RANGE, text, where)
    time_s = _time(found["time"], text, where)
    if f_number is None or time_s is None:
        missing = (
            "an f-number, for example f/16" if f_number is None else "a time, for example 1/125"
        )
        raise UnitError(f"{where}: {text!a} lacks {missing}; give {_EXAMPLES}.")
    shown = f"1/{1.0 / time_s:.4g} s" if time_s < 0.3 else f"{time_s:g} s"
    return at_ev(
        ev_of_reading(f_number, time_s, iso), given=f"f/{f_number:g}, {shown}, {told}", note=note
    )


def _number(
    match: re.Match[str] | None, what: str, limits: tuple[float, float], text: str, where: str
) -> float | None:
    if match is None:
        return None
    value = float(match[1])
    low, high = limits
    if not low <= value <= high:
        raise UnitError(
            f"{where}: {what} in {text!a} is {value:g}; it must be {low:g} to {high:g}."
        )
    return value


def _time(match: re.Match[str] | None, text: str, where: str) -> float | None:
    if match is None:
        return None
    number, divisor, unit = match.groups()
    if divisor is None and unit is None:
        # 125 on a dial means 1/125 s, on a phone it may mean 125 s: do not guess.
        raise UnitError(
            f"{where}: {number} in {text!a} could be 1/{number} s or {number} s; write which."
        )
    below = float(divisor) if divisor else 1.0
    value = float(number) / below if below > 0.0 else math.inf
    if unit and unit.startswith("min"):
        value *= 60.0
    if not 0.0 < value <= LONGEST_S:
        raise UnitError(f"{where}: the time in {text!a} is not possible, for example 1/125 s.")
    return value


def _in_range(light: LightLevel, text: str, where: str) -> LightLevel:
    low, high = EV_RANGE
    if not low <= light.ev <= high:
        raise UnitError(
            f"{where}: {text!a} is {light.ev:.3g} EV at ISO 100; it must be {low:g} to {high:g}. "
            "Sun is about 15 (82000 lx), a lit room 6 (160 lx), moonlight -2.5."
        )
    return light


def lux_text(illuminance_lx: float) -> str:
    """Return an illuminance for people, two figures: "0.44 lx", "2600 lx", "82 klx"."""
    if illuminance_lx >= 9950.0:
        return f"{float(f'{illuminance_lx / 1000.0:.2g}'):g} klx"
    return f"{float(f'{illuminance_lx:.2g}'):g} lx"
