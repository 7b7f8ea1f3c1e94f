"""What frames are compared by: keys to sort and group, and the need that one of them meets best.

Every figure is one of pinsim.numbers: detail in cycles/mm on the film at 20 % contrast, in its poorest
direction; views in degrees; the time that the material needs in the middle of the film.
"""

import math
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from pinsim.batch.frames import Frame
from pinsim.errors import DesignError, UnitError, nearest
from pinsim.units import angle_deg, time_s

About = dict[str, Any]
Value = Any


@dataclass(frozen=True, slots=True)
class Key:
    """Something to sort or group by. text : its name in messages; of : its value, None if not known."""

    text: str
    of: Callable[[Frame, About], Value]


def _figure(name: str) -> Callable[[Frame, About], Value]:
    return lambda frame, about: about.get(name)


def _time(frame: Frame, about: About) -> Value:
    if isinstance(frame.time_s, float | int):
        return float(frame.time_s)
    return about.get("time_s")


KEYS = {
    "scene": Key("scene", lambda frame, about: frame.scene),
    "camera": Key("camera", lambda frame, about: frame.camera_name),
    "hole": Key("hole", lambda frame, about: frame.hole_mm),
    "focal-length": Key("depth of the box", lambda frame, about: frame.focal_mm),
    "distance": Key("distance", lambda frame, about: frame.distance_mm),
    "time": Key("exposure time", _time),
    "f-number": Key("f-number", _figure("f_number")),
    "detail": Key("detail in the middle", _figure("detail_cycles_mm")),
    "detail-over-frame": Key("detail over the frame", _figure("frame_cycles_mm")),
    "detail-in-corner": Key("detail in the corner", _figure("corner_cycles_mm")),
    "needed-time": Key("time needed", _figure("needed_time_s")),
    "view": Key("angle of view", _figure("horizontal_view_deg")),
    "order": Key("the order given", lambda frame, about: frame.number),
}
GROUP_KEYS = ("scene", "camera", "hole", "focal-length", "distance", "time")


def check_sort(words: Sequence[str]) -> tuple[str, ...]:
    """Return keys to sort by; a minus before one is for the greatest first. DesignError otherwise."""
    for word in words:
        if word.removeprefix("-") not in KEYS:
            raise DesignError(
                f"nothing is sorted by {word!r}.{nearest(word.removeprefix('-'), KEYS)} "
                f"Known: {', '.join(KEYS)}; with a minus before it the greatest comes first."
            )
    return tuple(words)


def check_group(word: str | None) -> str | None:
    """Return what to group by, or None for what suits; DesignError for what is not known."""
    if word is not None and word != "none" and word not in GROUP_KEYS:
        raise DesignError(
            f"frames are not grouped by {word!r}.{nearest(word, GROUP_KEYS)} "
            f"Known: {', '.join(GROUP_KEYS)}, none."
        )
    return word


def sort_key(words: Sequence[str], frame: Frame, about: About) -> tuple[Any, ...]:
    """Return what sorts a frame; what is not known comes last."""
    found: list[Any] = []
    for word in words:
        value = KEYS[word.removeprefix("-")].of(frame, about)
        if value is None:
            found.append((1, 0.0, ""))
        elif isinstance(value, str):
            found.append((0, 0.0, value))
        else:
            found.append((0, -float(value) if word.startswith("-") else float(value), ""))
    return (*found, frame.number)


@dataclass(frozen=True, slots=True)
class Need:
    """What is wanted of a frame. text : as it was stated; miss : how far a frame is from it.

    means : the same in full words.
    """

    text: str
    means: str
    miss: Callable[[About], float]


_PLACES = {
    "": ("detail_cycles_mm", "in the middle"),
    "in the middle": ("detail_cycles_mm", "in the middle"),
    "over the frame": ("frame_cycles_mm", "over the frame"),
    "in the corner": ("corner_cycles_mm", "in the corner"),
}
_DETAIL = re.compile(r"(?P<number>\d+(?:\.\d+)?|\.\d+)\s*(?:c|cycles|lp)\s*/\s*mm\s*(?P<place>.*)")
KNOWN_NEEDS = (
    "finest",
    "finest over the frame",
    "finest in the corner",
    "shortest time",
    "widest",
    "2.5 c/mm in the corner",
    "60 deg",
    "4 s",
)


def read_need(text: str) -> Need:
    """Return a need from its words; DesignError names what is known.

    "finest", "finest in the middle|over the frame|in the corner": the most cycles/mm there.
    "lightest" or "shortest time": the least time needed. "widest": the widest view. "2.5 c/mm", with a
    place as above, "60 deg" of view from left to right, or "4 s" needed: the nearest in proportion.
    """
    words = " ".join(text.lower().split())
    if words in {"lightest", "shortest", "shortest time"}:
        return Need(text, "shortest exposure", lambda about: _log(about["needed_time_s"]))
    if words in {"widest", "widest view"}:
        return Need(text, "widest view", lambda about: -float(about["diagonal_view_deg"]))
    first, _, rest = words.partition(" ")
    if first == "finest" and rest in _PLACES:
        key, place = _PLACES[rest]
        return Need(text, f"finest detail {place}", lambda about: -float(about[key]))
    match = _DETAIL.fullmatch(words)
    if match is not None and match["place"].strip() in _PLACES and float(match["number"]) > 0.0:
        key, place = _PLACES[match["place"].strip()]
        return _near(
            text, key, float(match["number"]), f"nearest to {match['number']} c/mm {place}"
        )
    for read, key, what in (
        (angle_deg, "horizontal_view_deg", "of view from left to right"),
        (time_s, "needed_time_s", "of exposure"),
    ):
        try:
            value = read(words, "need")
        except UnitError:
            continue
        if value > 0.0:
            return _near(text, key, value, f"nearest to {words} {what}")
    raise DesignError(
        f"the need {text!a} is not understood; write it like one of: {', '.join(KNOWN_NEEDS)}."
    )


def _near(text: str, key: str, wanted: float, means: str) -> Need:
    return Need(text, means, lambda about: abs(_log(about[key]) - _log(wanted)))


def _log(value: float) -> float:
    return math.log(value) if value > 0.0 else math.inf


def nearest_to(need: Need, abouts: Sequence[About | None]) -> list[int]:
    """Return the places of the frames that meet a need best; several only when they are equal.

    abouts : None for frames that are not there. A difference below one part in a thousand is none.
    """
    misses = [math.inf if about is None else need.miss(about) for about in abouts]
    if not misses or math.isinf(min(misses)):
        return []
    best = min(misses)
    close = 1e-3 * max(1e-3, abs(best))
    return [place for place, miss in enumerate(misses) if miss <= best + close]
