"""A scene: a photo, the angle it was seen under, and how far things in it are."""

import math
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.samples import PREFIX, resolve
from pinsim.scene.distance import NEAREST_MM, DistanceMap
from pinsim.scene.distance_file import MapFile
from pinsim.scene.distance_table import Distances, distances_from_table
from pinsim.scene.door import read_photo
from pinsim.scene.ground import Ground
from pinsim.scene.highlights import require_lift
from pinsim.scene.panorama import (
    PanoramaPlace,
    checked_look_at,
    place_across,
    rotation,
    settled_place,
    told_place,
)
from pinsim.scene.photo import Photo, lifted, photo_from_linear
from pinsim.scene.planes import Planes
from pinsim.tables import Table, read_toml
from pinsim.units import EV_RANGE, angle_deg, exposure_value

Projection = Literal["rectilinear", "equirectangular"]
PROJECTIONS = ("rectilinear", "equirectangular")

# What is imagined beyond the photo's edge, for the little light that comes from there.
Boundary = Literal["mirror", "extend", "black"]
# "extend" invents least: a sun near the edge is not doubled, dark surroundings stay dark.
BOUNDARIES = ("extend", "mirror", "black")

_HIGHEST_DEG = 181.0  # a half turn, and what stitchers round
VIEW_RANGE_DEG = {"rectilinear": (0.5, 170.0), "equirectangular": (1.0, 360.0)}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False, weakref_slot=True)
class Scene:
    """A photo of a place, upright, with its angle of view and distances.

    distance : one distance in mm for all (math.inf is allowed), or a map.
    beyond : the rule for light from beyond the photo's edge. ev : scene average at ISO 100.
    panorama : where an equirectangular picture lies on the sphere; None is by its angle of view, its
    middle on the horizon. look_at_deg : yaw, pitch and roll of a camera that stands in a panorama.
    files : what it was read from, so that nothing is written over them.
    """

    name: str
    photo: Photo
    horizontal_view_deg: float
    projection: Projection = "rectilinear"
    distance: float | DistanceMap = math.inf
    beyond: Boundary = "extend"
    ev: float | None = None
    panorama: PanoramaPlace | None = None
    look_at_deg: tuple[float, float, float] = (0.0, 0.0, 0.0)
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
        if isinstance(self.distance, DistanceMap):
            if self.distance.shape != self.photo.shape:
                raise SceneError(
                    f"the distances are of {self.distance.shape[1]} x {self.distance.shape[0]} pixels "
                    f"but the photo is {self.photo.shape[1]} x {self.photo.shape[0]}."
                )
        elif not self.distance >= NEAREST_MM:
            raise SceneError(out_of_range("distance", self.distance, "mm", NEAREST_MM, math.inf))
        if self.ev is not None and not EV_RANGE[0] <= self.ev <= EV_RANGE[1]:
            raise SceneError(out_of_range("light.ev", self.ev, "EV", *EV_RANGE))
        checked_look_at(self.look_at_deg)
        if self.projection == "rectilinear":
            if any(self.look_at_deg):
                raise SceneError(_NO_LOOKING_AROUND)
        elif self.vertical_view_deg > _HIGHEST_DEG:
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
    def place(self) -> PanoramaPlace:
        """Where an equirectangular picture lies on the sphere, in the photo's pixels."""
        return self.panorama or place_across(self.photo.shape, self.horizontal_view_deg)

    @property
    def camera_to_image(self) -> NDArray[np.float64]:
        """The (3, 3) matrix from the camera's right, up and ahead to the panorama's own."""
        level = rotation(0.0, self.place.pitch_deg, self.place.roll_deg)
        return np.asarray(level.T @ rotation(*self.look_at_deg))

    @property
    def vertical_view_deg(self) -> float:
        """The photo's angle of view from its lower edge to its upper."""
        if self.panorama is not None:
            return math.degrees(self.photo.shape[0] / self.panorama.row_per_rad)
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
        distance_mm: float | NDArray[Any] = math.inf,
        name: str = "light",
    ) -> "Scene":
        """Make a scene from linear light, float (rows, columns[, 3]), 1.0 = white.

        distance_mm : one for all, or (rows, columns) along the axis of view; 0 is infinitely far.
        """
        distance = (
            DistanceMap.from_distances(distance_mm)
            if isinstance(distance_mm, np.ndarray)
            else distance_mm
        )
        return cls(
            name=name,
            photo=photo_from_linear(light),
            horizontal_view_deg=horizontal_view_deg,
            distance=distance,
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
        distances: Distances | None = None,
        projection: Projection | None = None,
        beyond: Boundary | None = None,
        highlight_lift_stops: float | None = None,
        look_at_deg: tuple[float, ...] | None = None,
    ) -> "Scene":
        """Read a scene from a TOML file, sample:NAME, or a photo; what is given here comes first.

        A photo's angle of view comes from horizontal_view_deg, else from its Exif, else it is an
        error. Its distance is infinity unless told. distances : a MapFile, Ground or Planes, for what
        distance_mm and a map with a step do not say. highlight_lift_stops : brightens clipped white by
        up to so many stops, which is invented light. look_at_deg : in a panorama, how far the camera is
        turned to the right of its middle and upwards, and, if wanted, rolled clockwise.
        Raises SceneError or UnitError in one line.
        """
        file = resolve(path, "scene", SceneError)
        if file.suffix.lower() == ".toml":
            values = read_toml(file, SceneError, "scene file")
            if "focal_length" in values and "photo" not in values:
                raise SceneError(
                    f"{file} is a camera design, not a scene; the scene or photo comes first."
                )
            plan = _plan_from_table(Table(values, str(file), SceneError), file.parent)
            name = file.parent.name if file.name == "scene.toml" else file.stem
            plan["photo"] = file.parent / plan["photo"]
        else:
            plan = {"photo": file}
            name = str(path).removeprefix(PREFIX) if str(path).startswith(PREFIX) else file.stem
        typed = _typed_distances(distance_mm, distance_map, map_step_mm, distances)
        if typed is not None:
            plan.update(distance=typed, typed=True)
        plan["projection"] = projection or plan.get("projection")
        plan["beyond"] = beyond or plan.get("beyond") or "extend"
        if horizontal_view_deg is not None:
            plan["view"] = horizontal_view_deg
            told = plan.get("panorama")
            if told is not None and told.tells_full:
                plan["panorama"] = None
                plan["projection"] = plan["projection"] or "equirectangular"
        if look_at_deg is not None:
            plan["look_at"] = checked_look_at(look_at_deg)
        if highlight_lift_stops is not None:
            plan["lift"] = require_lift(highlight_lift_stops, "highlight lift")
        return _built(plan, name, file)


def _typed_distances(
    distance_mm: float | None,
    distance_map: str | Path | None,
    map_step_mm: float | None,
    distances: Distances | None,
) -> Distances | None:
    """Return the one form of distance that a caller of Scene.load gave, if any."""
    if distance_mm is not None:
        distance_mm = float(distance_mm)
    if distance_mm is not None and (distance_map is not None or isinstance(distances, MapFile)):
        raise SceneError("a distance and a distance map exclude each other; keep one of them.")
    if distances is not None and (distance_mm is not None or distance_map is not None):
        raise SceneError(
            "distances are given in two ways that exclude each other; keep one of them."
        )
    if distance_map is not None:
        return MapFile(path=Path(distance_map), step_mm=map_step_mm)
    if map_step_mm is not None:
        raise SceneError("a map step needs a distance map (--distance-map FILE).")
    return distances if distance_mm is None else distance_mm


def _plan_from_table(top: Table, folder: Path) -> dict[str, Any]:
    photo = top.need("photo", '"courtyard.jpg"')
    if not isinstance(photo, str) or not photo:
        raise SceneError(f"{top.place('photo')} is {photo!r}; it must be a file name in quotes.")
    plan: dict[str, Any] = {"photo": photo}
    if top.has("horizontal_view"):
        plan["view"] = angle_deg(top.take("horizontal_view"), top.place("horizontal_view"))
    if top.has("projection"):
        plan["projection"] = top.text("projection", "", PROJECTIONS)
    if top.has("look_at"):
        plan["look_at"] = _look_at(top)
    plan["panorama"] = told_place(top.table("panorama"))
    if plan["panorama"] is not None and plan["panorama"].tells_full and "view" in plan:
        raise SceneError(
            f"{top.place('horizontal_view')} and the full size in [panorama] exclude each other; "
            "keep one of them."
        )
    plan["beyond"] = top.text("beyond", "extend", BOUNDARIES)
    plan["distance"] = distances_from_table(top.table("distance"), folder)
    light = top.table("light")
    if light.has("ev"):
        plan["ev"] = exposure_value(light.take("ev"), light.place("ev"))
    if light.has("highlight_lift"):
        plan["lift"] = _plain_stops(light.take("highlight_lift"), light.place("highlight_lift"))
    light.refuse_leftovers()
    top.refuse_leftovers()
    return plan


def _plain_stops(value: object, where: str) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise SceneError(f"{where} is {value!r}; it must be a plain number of stops, such as 2.")
    return require_lift(value, where)


_NO_LOOKING_AROUND = (
    "look-at turns the camera round in a panorama; this photo is rectilinear and shows one direction "
    "only, which is where the camera looks: leave look-at out (--shift and --rise move the film), or "
    "give a panorama (--projection equirectangular)."
)


def _look_at(top: Table) -> tuple[float, float, float]:
    values = top.take("look_at")
    if not isinstance(values, list):
        raise SceneError(
            f"{top.place('look_at')} is {values!r}; it must be a list: yaw, pitch and, if wanted, "
            'roll, for example ["30 deg", "-10 deg"].'
        )
    angles = tuple(angle_deg(value, top.place("look_at")) for value in values)
    try:
        return checked_look_at(angles)
    except SceneError as error:
        raise SceneError(f"{top.where}: {error}") from None


def _settle_panorama(plan: dict[str, Any], photo: Photo) -> tuple[PanoramaPlace | None, list[str]]:
    """Settle the plan's projection and view; return where a panorama lies, and notes."""
    told, view = plan.get("panorama"), plan.get("view")
    by_file = photo.panorama is not None or bool(photo.panorama_note)
    found = plan["projection"] is None and (by_file or told is not None)
    plan["projection"] = plan["projection"] or ("equirectangular" if found else "rectilinear")
    if plan["projection"] == "rectilinear":
        if plan.get("look_at") is not None:
            raise SceneError(f"{plan['photo']}: {_NO_LOOKING_AROUND}")
        if told is not None:
            raise SceneError(
                f'{told.where} belongs to projection = "equirectangular", not to a rectilinear photo.'
            )
        return None, []
    low, high = VIEW_RANGE_DEG["equirectangular"]
    if view is not None and not low <= view <= high:
        return None, []  # which the Scene refuses
    place, note = settled_place(
        photo.shape,
        view_deg=view,
        told=told,
        from_file=photo.panorama,
        why=photo.panorama_note,
        name=str(plan["photo"]),
    )
    plan["view"] = min(high, high * photo.shape[1] / place.full_width_px)
    notes = [note] if note else []
    if found and by_file:
        part = 100.0 * min(1.0, plan["view"] / 360.0 * photo.shape[0] / place.full_height_px)
        share = "a whole sphere" if part > 99.0 else f"{part:.0f} % of a sphere"
        notes.append(f"taken as a panorama, {share}, by its XMP data (--projection to change)")
    return place, notes


def _built(plan: dict[str, Any], name: str, file: Path) -> Scene:
    photo = read_photo(plan["photo"])
    panorama, panorama_notes = _settle_panorama(plan, photo)
    if plan.get("lift"):
        turned = plan["projection"] == "equirectangular" and plan.get("view", 360.0) >= 359.99
        photo = lifted(photo, plan["lift"], around=turned)
    notes = [*photo.notes, *panorama_notes]
    view = plan.get("view")
    if view is None:
        if photo.view_deg is None:
            why = photo.view_note or "no focal length in its Exif data"
            raise SceneError(
                f"{plan['photo']} does not tell its angle of view ({why}); "
                "give the angle from its left edge to its right: --view 65deg on the line, "
                'horizontal_view = "65 deg" in a scene file.'
            )
        view = photo.view_deg
        notes.append(f"angle of view {view:.1f} deg across, from the photo's Exif data")
    distances: Distances | None = plan.get("distance")
    if distances is None:
        distances = math.inf
        notes.append("distance taken as infinity (--distance to change)")
    from_files = [] if isinstance(distances, float) else distances.files
    try:
        scene = Scene(
            name=name,
            photo=photo,
            horizontal_view_deg=view,
            projection=plan["projection"],
            panorama=panorama,
            look_at_deg=plan.get("look_at") or (0.0, 0.0, 0.0),
            distance=distances if isinstance(distances, float) else math.inf,
            beyond=plan["beyond"],
            ev=plan.get("ev"),
            notes=tuple(notes),
            files=(Path(file), Path(plan["photo"]), *from_files),
        )
        return scene if isinstance(distances, float) else _with_distances(scene, distances)
    except SceneError as error:
        # A map typed beside a scene names itself; one that a scene file names is found there.
        named = any(str(error).startswith(str(one)) for one in from_files)
        raise error if named and plan.get("typed") else SceneError(f"{file}: {error}") from None


def _with_distances(scene: Scene, distances: MapFile | Ground | Planes) -> Scene:
    made, notes = distances.lay(
        scene.photo,
        focal_length_px=scene.focal_length_px,
        panorama=scene.place if scene.projection == "equirectangular" else None,
    )
    return replace(scene, distance=made, notes=(*scene.notes, *notes))
