"""Scenes that can be chosen: samples, the one of the command line, and uploads in a private folder.

Names of files are ours, never the user's; what was read last is kept decoded, as a hand that changes
the camera looks at one scene again and again.
"""

import contextlib
import math
import os
import re
import threading
from collections import OrderedDict
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from pinsim.errors import PinsimError, SceneError
from pinsim.live.refused import RefusedError, plain_line, shown_name
from pinsim.live.state import MAP_KEYS, Place
from pinsim.samples import PREFIX, names
from pinsim.scene import DistanceMap, Scene
from pinsim.scene.distance_table import distances_from_options

MOST_BYTES = 300 << 20  # of one upload
MOST_KEPT_BYTES = 1500 << 20  # of all uploads together
MOST_FILES = 40
_MOST_DECODED = 700 << 20  # of decoded photos kept; the present one always is
_SUFFIX = re.compile(r"\.[a-z0-9]{1,5}")


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """A scene that can be chosen. path : what it is read from. name : for people."""

    id: str
    name: str
    kind: str
    path: str


@dataclass(slots=True)
class _Decoded:
    """The last scenes, as read and as derived from those."""

    read: "OrderedDict[Any, Scene]" = field(default_factory=OrderedDict)
    derived: "OrderedDict[Place, Scene]" = field(default_factory=OrderedDict)


class Shelf:
    """What can be looked at. folder : private. given : the scene of the command line, a path.

    given_map : its distance map, if the line names one.
    """

    def __init__(
        self,
        folder: Path,
        *,
        given: str | None = None,
        given_map: Path | None = None,
    ) -> None:
        self.folder = folder
        self._lock = threading.Lock()
        self._reading = threading.Lock()
        self._decoded = _Decoded()
        # Why a scene needs an angle of view, of those read with one that was told.
        self._viewless: dict[Any, str] = {}
        self._count = 0
        self._entries: dict[str, Entry] = {}
        if given is not None and not given.startswith(PREFIX):
            path = Path(given)
            name = path.parent.name if path.name == "scene.toml" else path.stem
            self._entries["given"] = Entry(
                id="given", name=shown_name(name), kind="given", path=given
            )
        for name in names("scene"):
            scene_id = f"{PREFIX}{name}"
            self._entries[scene_id] = Entry(id=scene_id, name=name, kind="sample", path=scene_id)
        self._maps: dict[str, Entry] = {}
        if given_map is not None:
            self._maps["map-given"] = Entry(
                id="map-given", name=shown_name(given_map.name), kind="map", path=str(given_map)
            )

    @property
    def scenes(self) -> tuple[Entry, ...]:
        """All scenes, that of the command line first, uploads last."""
        with self._lock:
            return tuple(self._entries.values())

    # Uploads ---------------------------------------------------------------------------------

    def new_file(self, kind: str, name: str) -> tuple[Entry, Path]:
        """Return an entry for an upload, not yet on the shelf, and the path to write it to.

        kind : "photo" or "map". Raises RefusedError when the shelf is full.
        """
        suffix = Path(name).suffix.lower()
        if suffix == ".toml":
            raise RefusedError(
                "a scene file names other files, which a page may not have read; drop the photo, and "
                "its distance map beside it, or start pinsim live with the scene file."
            )
        with self._lock:
            uploads = [one for one in self.folder.iterdir() if one.is_file()]
            if len(uploads) >= MOST_FILES or self.bytes_kept > MOST_KEPT_BYTES:
                raise RefusedError(
                    "too many photos and maps are kept already; remove some, or start anew.",
                    status=413,
                )
            self._count += 1
            file_id = f"{kind}-{self._count}"
        # Some kinds of raw files can be told by their ending only.
        path = self.folder / f"{file_id}{suffix if _SUFFIX.fullmatch(suffix) else ''}"
        shown = shown_name(name) or file_id
        return Entry(id=file_id, name=shown, kind=kind, path=str(path)), path

    @property
    def bytes_kept(self) -> int:
        """Size of all uploads."""
        return sum(one.stat().st_size for one in self.folder.iterdir() if one.is_file())

    def put(self, entry: Entry) -> None:
        """Put an upload on the shelf."""
        with self._lock:
            (self._maps if entry.kind == "map" else self._entries)[entry.id] = entry

    def remove(self, file_id: str) -> None:
        """Take an upload off the shelf and forget it; RefusedError for what is none."""
        with self._lock:
            rows = [rows for rows in (self._entries, self._maps) if file_id in rows]
            if not rows or rows[0][file_id].kind not in {"photo", "map"} or file_id == "map-given":
                raise RefusedError(f"no upload is called {file_id[:40]!a}.", status=404)
            entry = rows[0].pop(file_id)
        Path(entry.path).unlink(missing_ok=True)
        with self._reading:
            kept = self._decoded
            for row in (kept.read, kept.derived):
                for key in [key for key in row if file_id in repr(key)]:
                    del row[key]

    # Reading ---------------------------------------------------------------------------------

    def scene(self, place: Place) -> Scene:
        """Return the scene of a place, as told; RefusedError, with its need, if it cannot be read."""
        with self._reading:
            return self._scene(place)

    def _scene(self, place: Place) -> Scene:
        derived = self._decoded.derived
        if place in derived:
            derived.move_to_end(place)
            return derived[place]
        with self._lock:
            entry = self._entries.get(place.scene)
        if entry is None:
            raise RefusedError(
                f"no scene {place.scene[:60]!a} is here any more; choose one, or drop the photo again.",
                field="scene",
                needs="scene",
            )
        with self._told(entry, place):
            base, rest = self._base(entry, place)
            found = replace(base, **rest) if rest else base
        derived[place] = found
        while len(derived) > 6:
            derived.popitem(last=False)
        return found

    def _base(self, entry: Entry, place: Place) -> tuple[Scene, dict[str, Any]]:
        """Return a scene as read, and what is still to be changed of it."""
        options = dict(place.options)
        with self._lock:
            chosen = self._maps.get(place.map) if place.map is not None else None
        if place.map is not None and chosen is None:
            raise RefusedError(
                f"no distance map {place.map[:40]!a} is here any more; drop it again.", field="map"
            )
        said: dict[str, Any] = {key: options.get(key) for key in (*MAP_KEYS, "ground", "horizon")}
        said["distance_map"] = None if chosen is None else chosen.path
        distances = distances_from_options(said)
        if distances is not None and place.distance_mm is not None:
            raise RefusedError(
                "a distance and a distance map or ground exclude each other; keep one.",
                field="distance_mm",
            )
        view = place.view_deg
        told = None if distances is None else (place.map, place.options)
        key = (place.scene, place.projection, place.highlight_lift, told)
        base = None
        if view is not None and distances is None and place.projection != "equirectangular":
            base = self._read((*key, None), entry, place, distances, None)
            if not self._view_is_free(base, place):
                base = None
        elif view is None and (*key, None) in self._viewless:
            raise SceneError(self._viewless[*key, None])
        free = base is not None
        if base is None:
            base = self._read((*key, view), entry, place, distances, view)
        rest: dict[str, Any] = {}
        if free:
            # Of a flat photo at one distance the angle of view is a number beside the picture.
            rest["horizontal_view_deg"] = view
        if place.distance_mm is not None:
            rest["distance"] = place.distance_mm
        if place.look_at_deg is not None:
            rest["look_at_deg"] = place.look_at_deg
        if place.beyond is not None:
            rest["beyond"] = place.beyond
        if rest:
            rest["notes"] = tuple(
                note
                for note in base.notes
                if not any(key in rest and note.startswith(start) for key, start in _OUTDATED)
            )
        return base, rest

    @staticmethod
    def _view_is_free(base: Scene, place: Place) -> bool:
        """Whether another angle of view changes nothing else of a scene."""
        if base.projection != "rectilinear":
            return False
        return place.distance_mm is not None or not isinstance(base.distance, DistanceMap)

    def _read(
        self, key: Any, entry: Entry, place: Place, distances: Any, view: float | None
    ) -> Scene:
        """Return a scene as its files and a place's own options tell it, decoded before or now."""
        read = self._decoded.read
        if key in read:
            read.move_to_end(key)
            return read[key]

        def load(view_deg: float | None) -> Scene:
            return Scene.load(
                entry.path,
                horizontal_view_deg=view_deg,
                distances=distances,
                projection=place.projection,
                highlight_lift_stops=place.highlight_lift,
            )

        try:
            scene = load(view)
        except SceneError as problem:
            if view is not None or place.view_deg is None or not lacks_view(problem):
                raise
            scene = load(place.view_deg)
            self._viewless[key] = str(problem)
        if entry.kind == "photo":
            scene = replace(scene, name=Path(entry.name).stem)
        read[key] = scene
        self._let_go()
        return scene

    def _let_go(self) -> None:
        read = self._decoded.read
        while len(read) > 1 and (
            len(read) > 3 or sum(_bytes(one) for one in read.values()) > _MOST_DECODED
        ):
            gone = read.popitem(last=False)[1]
            derived = self._decoded.derived
            for place in [key for key, one in derived.items() if one.photo is gone.photo]:
                del derived[place]

    @contextlib.contextmanager
    def _told(self, entry: Entry, place: Place) -> Iterator[None]:
        """Turn what is wrong into a refusal that names files as the user does."""
        try:
            yield
        except PinsimError as problem:
            text = self.without_paths(str(problem))
            if place.view_deg is None and lacks_view(problem):
                text = f"{text.partition(': --view')[0].partition(' (--view')[0]}."
                raise RefusedError(text, field="view_deg", needs="view") from None
            wrong = _field_of(text, place)
            needs = (
                "map" if place.map is not None and wrong not in {"view_deg", "yaw_deg"} else None
            )
            raise RefusedError(text, field=wrong, needs=needs) from None
        except MemoryError:
            raise RefusedError(
                f"{entry.name} needs more memory than there is.", field="scene"
            ) from None

    def without_paths(self, text: str) -> str:
        """Return a text in which private files have the names that the user gave them."""
        with self._lock:
            entries = [*self._entries.values(), *self._maps.values()]
        for entry in sorted(entries, key=lambda one: -len(one.path)):
            if entry.kind in {"photo", "map"}:
                text = text.replace(entry.path, entry.name)
        return text.replace(f"{self.folder}{os.sep}", "")

    def about(self, scene: Scene, scene_id: str) -> dict[str, Any]:
        """Return what the page shows of a scene that was read."""
        with self._lock:
            entry = self._entries[scene_id]
        distance: Any = "map"
        if not isinstance(scene.distance, DistanceMap):
            distance = "infinity" if math.isinf(scene.distance) else scene.distance
        yaw, pitch, roll = scene.look_at_deg
        return {
            **self.unread(entry),
            "view_deg": scene.horizontal_view_deg,
            "vertical_view_deg": scene.vertical_view_deg,
            "projection": scene.projection,
            "width_px": scene.photo.shape[1],
            "height_px": scene.photo.shape[0],
            "ev": scene.ev,
            "distance": distance,
            "nearest_mm": None if distance != "map" else _finite(scene.distance, "nearest_mm"),
            "farthest_mm": None if distance != "map" else _finite(scene.distance, "farthest_mm"),
            "yaw_deg": yaw,
            "pitch_deg": pitch,
            "roll_deg": roll,
            "notes": [plain_line(note) for note in scene.notes],
        }

    @staticmethod
    def unread(entry: Entry) -> dict[str, Any]:
        """Return what the page shows of a scene that was not read yet."""
        return {
            "id": entry.id,
            "name": entry.name,
            "kind": entry.kind,
            "needs": None,
            "notes": [],
            **dict.fromkeys(
                ("view_deg", "vertical_view_deg", "projection", "width_px", "height_px", "ev"),
            ),
            "distance": None,
        }


def _finite(distance: Any, name: str) -> float | str:
    value = float(getattr(distance, name))
    return "infinity" if math.isinf(value) else value


def _bytes(scene: Scene) -> int:
    own = scene.photo.codes.nbytes
    return own + (scene.distance.codes.nbytes if isinstance(scene.distance, DistanceMap) else 0)


def lacks_view(problem: Exception) -> bool:
    """Tell whether a scene was refused because nothing tells its angle of view."""
    text = str(problem)
    return "does not tell its angle of view" in text or "Say how wide it sees" in text


# Of a scene that was changed: the key -> the start of a note that is no longer true.
_OUTDATED = (
    ("distance", "distance taken as infinity"),
    ("horizontal_view_deg", "angle of view "),
)
# What stands in a scene's refusal -> the field that is to blame.
_BLAMED = (
    ("horizontal view", "view_deg"),
    ("deg high; crop it", "view_deg"),
    ("look-at", "yaw_deg"),
    ("a map step", "map_step"),
    ("--map-step", "map_step"),
    ("the step or unit", "map_step"),
    ("--map-kind", "map_kind"),
    ("--map-unit", "map_unit"),
    ("--map-along", "map_along"),
    ("--map-focal-length", "map_focal_length"),
    ("--baseline", "baseline"),
    ("--holes", "holes"),
    ("--near", "near"),
    ("--far", "far"),
    ("--horizon", "horizon"),
    ("--ground", "ground"),
    ("highlight lift", "highlight_lift"),
)


def _field_of(text: str, place: Place) -> str:
    for part, key in _BLAMED:
        if part in text:
            return key
    return "map" if place.map is not None else "scene"
