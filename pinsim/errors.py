"""Everything pinsim raises on purpose.

    PinsimError        what the user gave is wrong, or cannot be done; the text says how to mend it
     +- UnitError      a length, angle, time or wavelength that cannot be read
     +- DesignError    a camera that cannot be built
     +- SceneError     a photo, a distance map or a scene file that cannot be used
     +- OutputError    a result that cannot be written where it was asked for

Texts are one line of ASCII: what, where, how to mend it.
"""

import difflib
from collections.abc import Collection, Iterable


class PinsimError(Exception):
    """Base of all errors whose text is meant for the user."""


class UnitError(PinsimError):
    """A quantity that has no unit, an unknown unit or no number."""


class DesignError(PinsimError):
    """A camera design that is incomplete, misspelt or impossible."""


class SceneError(PinsimError):
    """A photo, distance map or scene file that cannot be used."""


class OutputError(PinsimError):
    """A file that cannot or must not be written."""


def out_of_range(key: str, got: float, unit: str, low: float, high: float) -> str:
    """Return the text for a value outside its range, with the thousandfold slip if it explains it.

    got, low, high : the value and the allowed range, all in `unit`.
    """
    hint = ""
    if unit == "mm":
        for factor, meant in (
            (1e-3, "um"),
            (1e3, "m"),
            (10.0, "cm"),
            (0.1, "mm with one digit less"),
        ):
            if low <= got * factor <= high:
                hint = f" If you meant {got:g} {meant}, write {got * factor:g} mm."
                break
    elif unit == "nm" and low <= got * 1e3 <= high:
        hint = f" If you meant {got:g} um, write {got * 1e3:g} nm."
    return f"{key} is {got:g} {unit}; it must be {low:g} to {high:g} {unit}.{hint}"


def nearest(name: str, allowed: Iterable[str]) -> str:
    """Return " Did you mean 'x'?" for the closest allowed name, or nothing."""
    near = difflib.get_close_matches(name, list(allowed), n=1, cutoff=0.6)
    return f" Did you mean {near[0]!r}?" if near else ""


def unknown_name(kind: str, name: str, allowed: Collection[str]) -> str:
    """Return the text for a name that is not in a closed list, naming the list and the nearest."""
    known = ", ".join(sorted(allowed))
    return f"no {kind} is called {name!r}.{nearest(name, allowed)} Known: {known}."
