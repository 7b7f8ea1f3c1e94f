"""What is said of a frame: only what differs. What all share stands once above them."""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from pinsim.batch.frames import Frame
from pinsim.batch.needs import KEYS, About
from pinsim.exposure import time_text
from pinsim.numbers import format_detail
from pinsim.render.develop import LOOK_TEXT
from pinsim.units import format_length

# In the order in which they are read: what was asked for first, what follows from it below.
ASKED = ("name", "scene", "camera", "hole", "focal-length", "film", "material", "distance", "time")
FOLLOWS = ("f-number", "detail", "view", "needed-time", "ev")
Fact = tuple[str, str]


@dataclass(frozen=True, slots=True)
class Entry:
    """A frame on the sheet: what was asked for, and its figures or why there are none.

    key : its checksum, "" where it has none.
    """

    frame: Frame
    about: About | None
    reason: str = ""
    key: str = ""

    @property
    def fact_of(self) -> dict[str, str]:
        """All that can be said of it, by key."""
        frame, about = self.frame, self.about or {}
        facts = {
            "name": frame.name,
            "scene": frame.scene_name,
            "camera": frame.camera_name,
            "hole": about.get("hole") or f"hole {frame.hole_mm:g} mm",
            "focal-length": f"{frame.focal_mm:g} mm from hole to film",
            "distance": ""
            if frame.distance_mm is None
            else "everything infinitely far"
            if math.isinf(frame.distance_mm)
            else f"everything at {format_length(frame.distance_mm)}",
            "time": _time_fact(frame, about),
            "look": LOOK_TEXT[frame.look],
        }
        if frame.wavelength_nm is not None:
            facts["wavelength"] = f"light of {frame.wavelength_nm:g} nm only"
        if frame.camera is not None:
            facts["film"] = frame.camera.film.label
            facts["material"] = f"{frame.camera.material_name}, {frame.camera.tone}"
        if about:
            facts["f-number"] = f"f/{about['f_number']:.0f}"
            facts["detail"] = (
                f"{format_detail(about['detail_cycles_mm'])} c/mm, "
                f"corner {format_detail(about['corner_cycles_mm'])}"
            )
            facts["view"] = (
                f"{about['horizontal_view_deg']:.0f} x {about['vertical_view_deg']:.0f} deg"
            )
            facts["needed-time"] = time_text(about["needed_time_s"])
            facts["ev"] = f"EV {about['ev']:g}"
        return {key: text for key, text in facts.items() if text}

    @property
    def notes(self) -> tuple[str, ...]:
        """What a builder should know of it."""
        if self.about is None:
            return (f"not drawn: {self.reason}",)
        return tuple(_short(note) for note in self.about["notes"])


def _time_fact(frame: Frame, about: About) -> str:
    if frame.time_s is None:
        return ""
    if about.get("time_s") is None:
        return f"time {frame.time_s}"
    auto = " (auto)" if frame.time_s == "auto" else ""
    return f"exposed {time_text(about['time_s'])}{auto} at EV {about['ev']:g}"


def _short(note: str) -> str:
    """Return a note without what the figures beside it say."""
    if note.startswith("the photo covers"):
        return note.removeprefix("the ").split(";")[0].split(" (")[0]
    return note


def common(entries: Sequence[Entry]) -> dict[str, str]:
    """Return the facts that all entries share, by key; of entries without figures, what was asked."""
    shared = dict(entries[0].fact_of)
    whole = [entry for entry in entries if entry.about is not None] or list(entries)
    if entries[0].about is None:
        shared.update(whole[0].fact_of)
    for entry in entries:
        facts = entry.fact_of
        for key in list(shared):
            if facts.get(key) == shared[key]:
                continue
            if entry.about is None and key not in facts:
                continue  # nothing is known of it, so it does not differ
            del shared[key]
    return shared


def common_notes(entries: Sequence[Entry]) -> tuple[str, ...]:
    """Return the notes that all entries with a picture share."""
    drawn = [entry.notes for entry in entries if entry.about is not None]
    if not drawn:
        return ()
    return tuple(note for note in drawn[0] if all(note in notes for notes in drawn))


def worded(facts: dict[str, str], order: Iterable[str]) -> str:
    """Return facts in one line."""
    return ", ".join(facts[key] for key in order if key in facts)


def caption(
    entry: Entry, above: set[str], notes_above: Iterable[str]
) -> tuple[str, str, list[str]]:
    """Return what was asked, what follows, and notes; above : keys that headings have said."""
    facts = {key: text for key, text in entry.fact_of.items() if key not in above}
    asked = worded(facts, ASKED)
    follows = worded(facts, FOLLOWS)
    told = set(notes_above)
    return asked, follows, [note for note in entry.notes if note not in told]


def choose_group(entries: Sequence[Entry], asked: str | None) -> str | None:
    """Return the key to group by: what was asked, or the first of two that differ."""
    if asked == "none":
        return None
    if asked is not None:
        return asked
    order = ("scene", "camera", "focal-length", "distance", "time", "hole")
    differ = [key for key in order if len({_value(entry, key) for entry in entries}) > 1]
    if len(differ) < 2 or any(entry.frame.name for entry in entries):
        return None
    size = len(entries) / len({_value(entry, differ[0]) for entry in entries})
    return differ[0] if size > 1.5 else None  # groups of one are no groups


def grouped(entries: Sequence[Entry], key: str | None) -> list[list[Entry]]:
    """Return entries by their value of a key, groups in the order of their first entries."""
    if key is None:
        return [list(entries)]
    groups: dict[object, list[Entry]] = {}
    for entry in entries:
        groups.setdefault(_value(entry, key), []).append(entry)
    return list(groups.values())


def _value(entry: Entry, key: str) -> object:
    return KEYS[key].of(entry.frame, entry.about or {})
