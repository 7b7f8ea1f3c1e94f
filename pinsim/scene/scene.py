"""A scene: a photo, the angle it was seen under, and how far things in it are."""

import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.samples import PREFIX, resolve
from pinsim.scene.distance import NEAREST_MM, DistanceMap, read_distance_map
from pinsim.scene.door import read_photo
from pinsim.scene.photo import Photo, photo_from_linear
from pinsim.tables import Table, read_toml
from pinsim.units import EV_RANGE, angle_deg, distance_mm, exposure_value, length_mm

Projection = Literal["rectilinear", "equirectangular"]
PROJECTIONS = ("rectilinear", "equirectangular")

# What is imagined beyond the photo's edge, for the little light that comes from there.
Boundary = Literal["mirror", "extend", "black"]
# "extend" invents least: a sun near the edge is not doubled, dark surroundings stay dark.
BOUNDARIES = ("extend", "mirror", "black")

VIEW_RANGE_DEG = {"rectilinear": (0.5, 170.0), "equirectangular": (1.0, 360.0)}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Scene:
    """A photo of a place, upright, with its angle of view and distances.

    distance : one distance in mm for all (math.inf is allowed), or a map.
    beyond : the rule for light from beyond the photo's edge. ev : scene average at ISO 100.
    files : what it was read from, so that nothing is written over them.
    """

    name: str
    photo: Photo
    horizontal_view_deg: float
    projection: Projection = "rectilinear"
    distance: float | DistanceMap = math.inf
    beyond: Boundary = "extend"
    ev: float | None = None
    notes: tuple[str, ...] = ()
    files: tuple[Path, ...] = ()

    def __post_init__(self) -> None:
        if self.projection not in PROJECTIONS:
            raise SceneError(
                f"projection is {self.projection!r}; it must be one of: {', '.join(PROJECTIONS)}."
            )
        if self.beyond not in BOUNDARIES:
            raise SceneError(
                f"beyond is {self.beyond!r}; it must be one of: {', '.join(BOUNDARIES)}."
            )
        low, high = VIEW_RANGE_DEG[self.projection]
        if not low <= self.horizontal_view_deg <= high:
            raise SceneError(
                out_of_range("horizontal view", self.horizontal_view_deg, "deg", low, high)
                + " It is the whole angle from the left edge to the right."
            )
        if not isinstance(self.distance, DistanceMap) and not self.distance >= NEAREST_MM:
            raise SceneError(out_of_range("distance", self.distance, "mm", NEAREST_MM, math.inf))
        if self.ev is not None and not EV_RANGE[0] <= self.ev <= EV_RANGE[1]:
            raise SceneError(out_of_range("light.ev", self.ev, "EV", *EV_RANGE))
        if self.projection == "equirectangular" and self.vertical_view_deg > 180.0 + 1e-6:
            raise SceneError(
                f"an equirectangular picture of {self.photo.shape[1]} x {self.photo.shape[0]} pixels "
                f"and {self.horizontal_view_deg:g} deg would be {self.vertical_view_deg:g} deg high; "
                "crop it to at most 180 deg."
            )

    @property
    def focal_length_px(self) -> float:
        """Rectilinear: photo pixels per unit of tangent. Equirectangular: photo pixels per radian."""
        columns = self.photo.shape[1]
        view = math.radians(self.horizontal_view_deg)
        if self.projection == "equirectangular":
            return columns / view
        return 0.5 * columns / math.tan(0.5 * view)

    @property
    def vertical_view_deg(self) -> float:
        """The photo's angle of view from its lower edge to its upper."""
        half = 0.5 * self.photo.shape[0] / self.focal_length_px
        if self.projection == "equirectangular":
            return math.degrees(2.0 * half)
        return math.degrees(2.0 * math.atan(half))

    @classmethod
    def from_light(
        cls,
        light: NDArray[Any],
        *,
        horizontal_view_deg: float,
        distance_mm: float = math.inf,
        name: str = "light",
    ) -> "Scene":
        """Make a scene from linear light, float (rows, columns[, 3]), 1.0 = white."""
        return cls(
            name=name,
            photo=photo_from_linear(light),
            horizontal_view_deg=horizontal_view_deg,
            distance=distance_mm,
        )

    @classmethod
    def load(
        cls,
        path: str | Path,
        *,
        horizontal_view_deg: float | None = None,
        distance_mm: float | None = None,
        distance_map: str | Path | None = None,
        map_step_mm: float | None = None,
        projection: Projection | None = None,
        beyond: Boundary | None = None,
    ) -> "Scene":
        """Read a scene from a TOML file, sample:NAME, or a photo; what is given here comes first.

        A photo's angle of view comes from horizontal_view_deg, else from its Exif, else it is an
        error. Its distance is infinity unless told. Raises SceneError or UnitError in one line.
        """
        file = resolve(path, "scene", SceneError)
        if file.suffix.lower() == ".toml":
            values = read_toml(file, SceneError, "scene file")
            if "focal_length" in values and "photo" not in values:
                raise SceneError(
                    f"{file} is a camera design, not a scene; the scene or photo comes first."
                )
            plan = _plan_from_table(Table(values, str(file), SceneError))
            name = file.parent.name if file.name == "scene.toml" else file.stem
            plan["photo"] = file.parent / plan["photo"]
            if plan.get("map"):
                plan["map"] = file.parent / plan["map"]
        else:
            plan = {"photo": file}
            name = str(path).removeprefix(PREFIX) if str(path).startswith(PREFIX) else file.stem
        if distance_mm is not None and distance_map is not None:
            raise SceneError("a distance and a distance map exclude each other; keep one of them.")
        if distance_mm is not None:
            plan.update(constant=distance_mm, map=None)
        if distance_map is not None:
            if map_step_mm is None:
                raise SceneError(
                    f"{distance_map}: what does one code value of the map mean? "
                    "Give the step, for example 1 mm (--map-step 1mm)."
                )
            plan.update(map=Path(distance_map), step=map_step_mm, constant=None)
        if distance_map is None and map_step_mm is not None:
            raise SceneError("a map step needs a distance map (--distance-map FILE).")
        plan["projection"] = projection or plan.get("projection") or "rectilinear"
        plan["beyond"] = beyond or plan.get("beyond") or "extend"
        if horizontal_view_deg is not None:
            plan["view"] = horizontal_view_deg
        return _built(plan, name, file)


def _plan_from_table(top: Table) -> dict[str, Any]:
    photo = top.need("photo", '"courtyard.jpg"')
    if not isinstance(photo, str) or not photo:
        raise SceneError(f"{top.place('photo')} is {photo!r}; it must be a file name in quotes.")
    plan: dict[str, Any] = {"photo": photo}
    if top.has("horizontal_view"):
        plan["view"] = angle_deg(top.take("horizontal_view"), top.place("horizontal_view"))
    plan["projection"] = top.text("projection", "rectilinear", PROJECTIONS)
    plan["beyond"] = top.text("beyond", "extend", BOUNDARIES)
    distance = top.table("distance")
    if distance.has("constant") and distance.has("map"):
        raise SceneError(
            f"{distance.where}: constant and map exclude each other; keep one of them."
        )
    if distance.has("constant"):
        plan["constant"] = distance_mm(distance.take("constant"), distance.place("constant"))
    if distance.has("map"):
        plan["map"] = distance.text("map", "")
        if not plan["map"]:
            raise SceneError(f"{distance.place('map')} is empty; it must be a file name in quotes.")
        plan["step"] = length_mm(distance.need("step", '"1 mm"'), distance.place("step"))
    elif distance.has("step"):
        raise SceneError(
            f'{distance.where}: a step belongs to a map; write map = "FILE" beside it, '
            "or leave it out."
        )
    distance.refuse_leftovers()
    light = top.table("light")
    if light.has("ev"):
        plan["ev"] = exposure_value(light.take("ev"), light.place("ev"))
    light.refuse_leftovers()
    top.refuse_leftovers()
    return plan


def _built(plan: dict[str, Any], name: str, file: Path) -> Scene:
    photo = read_photo(plan["photo"])
    notes = list(photo.notes)
    view = plan.get("view")
    if view is None and plan["projection"] == "equirectangular":
        view = 360.0
    if view is None:
        if photo.view_deg is None:
            raise SceneError(
                f"{plan['photo']} does not tell its angle of view (no focal length in its Exif data); "
                "give the angle from its left edge to its right: --view 65deg on the line, "
                'horizontal_view = "65 deg" in a scene file.'
            )
        view = photo.view_deg
        notes.append(f"angle of view {view:.1f} deg across, from the photo's Exif data")
    distance: float | DistanceMap
    if plan.get("map"):
        distance = read_distance_map(plan["map"], step_mm=plan["step"], photo_shape=photo.shape)
    elif plan.get("constant") is not None:
        distance = plan["constant"]
    else:
        distance = math.inf
        notes.append("distance taken as infinity (--distance to change)")
    try:
        return Scene(
            name=name,
            photo=photo,
            horizontal_view_deg=view,
            projection=plan["projection"],
            distance=distance,
            beyond=plan["beyond"],
            ev=plan.get("ev"),
            notes=tuple(notes),
            files=tuple(Path(one) for one in (file, plan["photo"], plan.get("map")) if one),
        )
    except SceneError as error:
        raise SceneError(f"{file}: {error}") from None
