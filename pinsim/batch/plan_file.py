"""A sheet written down: TOML to the options of the command line, and frames one by one."""

from pathlib import Path
from typing import Any

from pinsim.errors import DesignError
from pinsim.samples import PREFIX
from pinsim.tables import Table, read_toml
from pinsim.units import angle_deg, distance_mm, exposure_value, length_mm, time_s, wavelength_nm

_KIND = "plan of a contact sheet"
# Keys by which a plan is told from a scene file.
_TELLING = {"scenes", "frame", "holes", "focal_lengths", "cameras"}


def is_plan(path: str) -> bool:
    """Tell whether a file is a plan, as against a scene file or a photo; False if it cannot be read."""
    if path.startswith(PREFIX) or Path(path).suffix.lower() != ".toml" or not Path(path).is_file():
        return False
    values = read_toml(Path(path), DesignError, "scene file or a " + _KIND)
    return bool(values.keys() & _TELLING) and "photo" not in values


def _time_or_auto(text: object, where: str) -> float | str:
    if isinstance(text, str) and text.strip().lower() == "auto":
        return "auto"
    return time_s(text, where)


_LISTS = {
    "holes": ("holes_mm", length_mm),
    "focal_lengths": ("focals_mm", length_mm),
    "distances": ("distances_mm", distance_mm),
    "times": ("times_s", _time_or_auto),
}
_SINGLE = {
    "view": ("view_deg", angle_deg),
    "plate": ("plate_mm", length_mm),
    "shift": ("shift_mm", length_mm),
    "rise": ("rise_mm", length_mm),
    "wavelength": ("wavelength_nm", wavelength_nm),
    "ev": ("ev", exposure_value),
}
_WORDS = {
    "film": None,
    "material": None,
    "tone": ("positive", "negative"),
    "look": ("upright", "screen", "emulsion"),
    "need": None,
    "group": None,
    "page": None,
    "title": None,
}
_OF_FRAME = {
    "hole": ("hole_mm", length_mm),
    "focal_length": ("focal_mm", length_mm),
    "distance": ("distance_mm", distance_mm),
    "time": ("time_s", _time_or_auto),
}


def read_plan(path: str | Path) -> dict[str, Any]:
    """Return what a plan says, by the names of the command line's parameters.

    "frames" holds its [[frame]] tables: scene, camera, hole_mm, focal_mm, distance_mm, time_s, name, of
    which each has what it names. Files are looked for beside the plan. Raises DesignError or UnitError.
    """
    file = Path(path)
    top = Table(read_toml(file, DesignError, _KIND), str(file), DesignError)
    said = {**_what(top, file.parent), **_how(top)}
    if top.has("light"):
        said["light"] = _light(top)
    said["frames"] = _frames(top, file.parent)
    top.refuse_leftovers()
    return said


def _what(top: Table, folder: Path) -> dict[str, Any]:
    """Take out what is drawn: scenes, cameras and all quantities."""
    said: dict[str, Any] = {}
    for key, name in (("scenes", "scenes"), ("cameras", "cameras")):
        if top.has(key):
            words = _texts(top, key)
            said[name] = tuple(_beside(word, folder) for word in words)
    for key, (name, read) in _LISTS.items():
        if top.has(key):
            values = top.take(key)
            if not isinstance(values, list) or not values:
                raise DesignError(
                    f'{top.place(key)} is {values!r}; it must be a list, such as ["0.3 mm", "0.4 mm"].'
                )
            said[name] = tuple(read(value, top.place(key)) for value in values)
    for key, (name, read) in _SINGLE.items():
        if top.has(key):
            said[name] = read(top.take(key), top.place(key))
    return said


def _how(top: Table) -> dict[str, Any]:
    """Take out words, and how the sheet is laid out."""
    said: dict[str, Any] = {}
    for key, allowed in _WORDS.items():
        if top.has(key):
            said[key] = top.text(key, "", allowed)
    if top.has("sort"):
        said["sort"] = tuple(_texts(top, "sort"))
    for key, name in (("columns", "columns"), ("width", "width_px")):
        if top.has(key):
            said[name] = _whole(top, key)
    for key in ("portrait", "detail"):
        if top.has(key):
            said[key] = _yes_or_no(top, key)
    return said


def _light(top: Table) -> Any:
    from pinsim.exposure import read_light

    return read_light(top.take("light"), top.place("light"))


def _frames(top: Table, folder: Path) -> list[dict[str, Any]]:
    if not top.has("frame"):
        return []
    tables = top.take("frame")
    if not isinstance(tables, list):
        raise DesignError(
            f"{top.place('frame')} is one table; write [[frame]] in double brackets for each frame."
        )
    found = []
    for number, values in enumerate(tables, 1):
        table = Table(values, f"{top.where} [[frame]] {number}", DesignError)
        one: dict[str, Any] = {"where": table.where}
        for key in ("scene", "camera"):
            if table.has(key):
                one[key] = _beside(table.text(key, ""), folder)
        for key, (name, read) in _OF_FRAME.items():
            if table.has(key):
                one[name] = read(table.take(key), table.place(key))
        if table.has("name"):
            one["name"] = table.text("name", "")
        table.refuse_leftovers()
        found.append(one)
    return found


def _texts(top: Table, key: str) -> list[str]:
    values = top.take(key)
    values = [values] if isinstance(values, str) else values
    if not isinstance(values, list) or not values or not all(isinstance(v, str) for v in values):
        raise DesignError(
            f'{top.place(key)} is {values!r}; it must be a list of texts, such as ["a"].'
        )
    return values


def _whole(top: Table, key: str) -> int:
    value = top.take(key)
    if isinstance(value, bool) or not isinstance(value, int):
        raise DesignError(f"{top.place(key)} is {value!r}; it must be a whole number, such as 4.")
    return value


def _yes_or_no(top: Table, key: str) -> bool:
    value = top.take(key)
    if not isinstance(value, bool):
        raise DesignError(f"{top.place(key)} is {value!r}; it must be true or false.")
    return value


def _beside(word: str, folder: Path) -> str:
    return word if word.startswith(PREFIX) else str(folder / word)
