"""What people write about distances: the table of a scene file, or the options on the line."""

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from pinsim.errors import SceneError
from pinsim.scene.distance import ALONGS
from pinsim.scene.distance_file import HOLES, KINDS, MAP_UNITS, MapFile, unit_mm
from pinsim.scene.ground import Ground, horizon_from
from pinsim.scene.planes import Plane, Planes
from pinsim.tables import Table
from pinsim.units import distance_mm, length_mm, pixels

# A distance for all, mm, or how to find one for every pixel of the photo.
Distances = float | MapFile | Ground | Planes

_FORMS = ("constant", "map", "ground", "plane")
_OF_A_MAP = (
    "step",
    "unit",
    "kind",
    "along",
    "holes",
    "near",
    "far",
    "baseline",
    "focal_length_px",
)

# The key of the table that each option stands for.
OPTION_OF = {
    "map": "--distance-map",
    "step": "--map-step",
    "unit": "--map-unit",
    "kind": "--map-kind",
    "along": "--map-along",
    "holes": "--holes",
    "near": "--near",
    "far": "--far",
    "baseline": "--baseline",
    "focal_length_px": "--map-focal-length",
}
_GROUND_OPTION_OF = {"camera_height": "--ground", "horizon_row": "--horizon", "far": "--far"}


class _Typed(Table):
    """What was typed on the line, read as a table; places are the options' names."""

    def __init__(self, values: Mapping[str, Any], options: Mapping[str, str]) -> None:
        super().__init__(dict(values), "on the line", SceneError)
        self._options = options

    def place(self, key: str) -> str:
        """Return the option."""
        return self._options.get(key, key)


def distances_from_table(table: Table, folder: Path) -> Distances | None:
    """Read the [distance] table of a scene file in `folder`; None when it says nothing."""
    given = [key for key in _FORMS if table.has(key)]
    if len(given) > 1:
        raise SceneError(
            f"{table.where}: {given[0]} and {given[1]} exclude each other; keep one of them."
        )
    found: Distances | None = None
    if "constant" in given:
        found = distance_mm(table.take("constant"), table.place("constant"))
    elif "map" in given:
        found = _map_file(table, folder)
    elif "ground" in given:
        ground = table.table("ground")
        found = _at(ground.where, ground)
        ground.refuse_leftovers()
    elif "plane" in given:
        found = _planes(table, folder)
    for key in _OF_A_MAP if "map" not in given else ():
        if table.has(key):
            raise SceneError(
                f'{table.where}: {_with_article(key)} belongs to a map; write map = "FILE" beside it, '
                "or leave it out."
            )
    if table.has("rest"):
        raise SceneError(
            f"{table.where}: rest belongs to planes; write [[distance.plane]] tables beside it, "
            "or leave it out."
        )
    table.refuse_leftovers()
    return found


def distances_from_options(options: Mapping[str, Any]) -> MapFile | Ground | None:
    """Read what was typed on the line: values by option name without dashes, None when not typed."""
    typed = {key: options.get(_name(option)) for key, option in OPTION_OF.items()}
    typed = {key: value for key, value in typed.items() if value is not None}
    height = options.get("ground")
    horizon = options.get("horizon")
    if height is None and horizon is not None:
        raise SceneError(
            "a horizon needs the camera's height above the ground (--ground 1.6m) beside it."
        )
    if height is not None:
        if "map" in typed:
            raise SceneError(
                "a distance map and a ground exclude each other (--distance-map, --ground); "
                "keep one of them."
            )
        ground = {"camera_height": height, "horizon_row": horizon, "far": typed.pop("far", None)}
        present = {key: value for key, value in ground.items() if value is not None}
        found = _at("--ground", _Typed(present, _GROUND_OPTION_OF))
    if "map" not in typed:
        for key in typed:
            what = "a map step" if key == "step" else OPTION_OF[key]
            raise SceneError(f"{what} needs a distance map (--distance-map FILE).")
        return found if height is not None else None
    return _map_file(_Typed(typed, OPTION_OF), Path())


def _name(option: str) -> str:
    return option.removeprefix("--").replace("-", "_")


def _with_article(key: str) -> str:
    return f"a {key}" if key in {"step", "unit", "kind", "baseline"} else key


def _map_file(table: Table, folder: Path) -> MapFile:
    name = table.text("map", "")
    if not name:
        raise SceneError(f"{table.place('map')} is empty; it must be a file name in quotes.")
    kind = table.text("kind", "distance", KINDS)
    said: dict[str, Any] = {"path": folder / name, "kind": kind, **_one_value(table, kind)}
    for key, allowed in (("along", ALONGS), ("holes", HOLES)):
        if table.has(key):
            said[key] = table.text(key, "", allowed)
    for key, read in (("near", distance_mm), ("far", distance_mm), ("baseline", length_mm)):
        if table.has(key):
            said[f"{key}_mm"] = read(table.take(key), table.place(key))
    if table.has("focal_length_px"):
        said["focal_length_px"] = _plain_or_pixels(table, "focal_length_px")
    # A misspelt key is likelier than what MapFile then finds missing.
    for key in _OF_A_MAP:
        table.refuse_slip(key)
    try:
        return MapFile(**said)
    except SceneError as error:
        raise (
            error if isinstance(table, _Typed) else SceneError(f"{table.where}: {error}")
        ) from None


def _one_value(table: Table, kind: str) -> dict[str, float]:
    """Return what one value of a map stands for, as MapFile's keyword for it."""
    if table.has("step") and table.has("unit"):
        raise SceneError(
            f"{table.place('step')} and {table.place('unit')} exclude each other: "
            "a unit says that one value is one of it."
        )
    if table.has("unit"):
        return {"step_mm": unit_mm(table.text("unit", "", MAP_UNITS))}
    if not table.has("step"):
        return {}
    text, place = table.take("step"), table.place("step")
    if kind == "disparity":
        return {"step_px": pixels(text, place)}
    return {"step_mm": length_mm(text, place)}


def _plain_or_pixels(table: Table, key: str) -> float:
    """Return a number of pixels; the key itself names the unit, so that a plain number is clear."""
    value = table.take(key)
    if isinstance(value, int | float) and not isinstance(value, bool):
        return float(value)
    return pixels(value, table.place(key))


def _at(where: str, table: Table) -> Ground:
    height = length_mm(table.need("camera_height", '"1.6 m"'), table.place("camera_height"))
    said: dict[str, float] = {}
    if table.has("horizon_row"):
        said |= horizon_from(table.take("horizon_row"), table.place("horizon_row"))
    if table.has("far"):
        said["far_mm"] = distance_mm(table.take("far"), table.place("far"))
    try:
        return Ground(camera_height_mm=height, **said)
    except SceneError as error:
        raise SceneError(f"{where}: {error}") from None


def _planes(table: Table, folder: Path) -> Planes:
    tables = table.take("plane")
    # [distance.plane] with single brackets is a list of one.
    tables = tables if isinstance(tables, list) else [tables]
    planes = []
    for number, values in enumerate(tables, start=1):
        one = Table(values, f"{table.where} plane {number}", SceneError)
        distance = distance_mm(one.need("distance", '"0.4 m"'), one.place("distance"))
        mask = one.need("mask", '"near.png"')
        if not isinstance(mask, str) or not mask:
            raise SceneError(f"{one.place('mask')} is {mask!r}; it must be a file name in quotes.")
        one.refuse_leftovers()
        planes.append(Plane(distance_mm=distance, mask=folder / mask))
    said = {}
    if table.has("rest"):
        said["rest_mm"] = distance_mm(table.take("rest"), table.place("rest"))
    try:
        return Planes(planes=tuple(planes), **said)
    except SceneError as error:
        raise SceneError(f"{table.where}: {error}") from None
