"""What the page asks for, done: the state is read, its scene taken off the shelf, and drawn."""

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from pinsim.camera import Camera
from pinsim.errors import PinsimError
from pinsim.live import sizes
from pinsim.live.designs import Designs, Given, stem
from pinsim.live.lists import choices
from pinsim.live.refused import RefusedError, plain_line
from pinsim.live.shelf import MOST_BYTES, Entry, Shelf
from pinsim.live.state import (
    DEFAULTS,
    WORDS,
    Place,
    State,
    parsed,
    read_state,
)
from pinsim.live.work import Check
from pinsim.samples import PREFIX
from pinsim.scene import Scene
from pinsim.scene.distance_file import read_numbers

if TYPE_CHECKING:
    from pinsim.live.pictures import Drawn

# Any angle at which a photo can be looked through to see how large it is.
_SOME_VIEW_DEG = 60.0


class Studio:
    """Everything behind the routes; made once, in whichever thread first needs it."""

    def __init__(self, folder: Path, given: Given) -> None:
        self._given = given
        self.most_upload_bytes = MOST_BYTES
        self._out = folder / "made"
        self._out.mkdir(mode=0o700, exist_ok=True)
        self.designs = Designs(given, self._out)
        self.shelf = Shelf(folder, given=given.scene, given_map=given.map)
        self._first_scene = given.scene if given.scene.startswith(PREFIX) else "given"
        self._sized: dict[tuple[Any, ...], Drawn] = {}

    # State ------------------------------------------------------------------------------------

    def state(self, given: object) -> State:
        """Return the state that the page's object tells."""
        return read_state(given, {"given": self.designs.given}, self._first_scene)

    def first_state(self) -> State:
        """Return the state to begin with."""
        keys = self.designs.keys(self.designs.given)
        return self.state({**keys, "scene": self._first_scene, **(self._given.state or {})})

    def start(self) -> dict[str, Any]:
        """Return the state to begin with and all that can be chosen."""
        first = self.first_state()
        return {
            "state": first.settled,
            "texts": first.texts,
            "defaults": {**DEFAULTS, "scene": self._first_scene},
            "scenes": [self.shelf.unread(entry) for entry in self.shelf.scenes],
            "designs": self.designs.listed(),
            "widths_px": sizes.widths_for(first.camera),
            **choices(self.designs.given.materials),
        }

    def parsed(self, kind: object, text: object, field: object) -> dict[str, Any]:
        """Return what a typed text means; UnitError when it cannot be read."""
        where = WORDS.get(field, field) if isinstance(field, str) else str(kind)
        return parsed(kind, text, where[:40])

    def check(self, given: object) -> dict[str, Any]:
        """Return the state settled, with its scene; RefusedError by field."""
        state = self.state(given)
        scene = self.shelf.scene(state.place)
        sizes.light_for(state, scene)
        return {
            "settled": state.settled,
            "texts": state.texts,
            "scene": self.shelf.about(scene, state.place.scene),
            "widths_px": sizes.widths_for(state.camera),
            "summary": plain_line(state.camera.summary),
        }

    # Pictures ---------------------------------------------------------------------------------

    def picture_asked(self, given: Mapping[str, Any]) -> tuple[State, int, str]:
        """Return what is to be drawn; RefusedError when it cannot be."""
        state = self.state(given.get("state"))
        width = given.get("width_px")
        kind = given.get("format", "jpeg")
        if not isinstance(kind, str) or kind not in sizes.FORMATS:
            raise RefusedError(
                f"format must be one of: {', '.join(sizes.FORMATS)}.", field="format"
            )
        if width is None:
            width = sizes.widths_for(state.camera)["coarse"]
        return state, _width(width, state.camera), kind

    def draw(self, state: State, width_px: int, kind: str, check: Check) -> "Drawn":
        """Draw a picture, unless it is one of the last."""
        from pinsim.live import pictures  # loads the renderer

        key = (repr(sorted(state.settled.items(), key=str)), width_px, kind)
        found = self._sized.pop(key, None)
        if found is None:
            scene = self.shelf.scene(state.place)
            check()
            found = pictures.draw(state, scene, width_px, kind, check)
        self._sized[key] = found
        while len(self._sized) > 8:
            del self._sized[next(iter(self._sized))]
        return found

    # Figures ----------------------------------------------------------------------------------

    def _scene_or_none(self, state: State) -> Scene | None:
        """Return the scene; None when it cannot be read, as figures do not need it."""
        try:
            return self.shelf.scene(state.place)
        except RefusedError:
            return None

    def numbers(self, given: Mapping[str, Any]) -> dict[str, Any]:
        """Return the figures of `pinsim numbers`, and the time for this light."""
        from pinsim.live import figures

        state = self.state(given.get("state"))
        scene = None if state.light is not None else self._scene_or_none(state)
        return {
            "figures": figures.numbers(state, quick=given.get("part") == "quick"),
            "exposure": figures.exposure(state, scene),
            "settled": state.settled,
            "texts": state.texts,
        }

    def curves(self, given: Mapping[str, Any]) -> dict[str, Any]:
        """Return contrast curves and point images."""
        from pinsim.live import figures

        state = self.state(given.get("state"))
        return figures.curves(state, self._scene_or_none(state))

    def difference(self, given: Mapping[str, Any]) -> dict[str, Any]:
        """Return what the state does otherwise than another."""
        from pinsim.live import figures

        state, other = self.state(given.get("state")), self.state(given.get("other"))
        return figures.difference(
            state, other, self._scene_or_none(state), self._scene_or_none(other)
        )

    def point(self, given: Mapping[str, Any]) -> dict[str, Any]:
        """Return direction and distance at a place of the picture, or of the film."""
        from pinsim.live import figures

        state = self.state(given.get("state"))
        scene = self.shelf.scene(state.place)
        film = state.camera.film
        if given.get("x") is not None or given.get("y") is not None:
            x, y = (_share(given.get(key), key) for key in ("x", "y"))
            right, up = 2.0 * x - 1.0, 1.0 - 2.0 * y
            # The picture is shown turned; the place is told as the scene is seen.
            right = -right if state.look == "screen" else right
            up = up if state.look == "upright" else -up
        else:
            right = 2.0 * _plain_number(given.get("right_mm"), "right_mm") / film.width_mm
            up = 2.0 * _plain_number(given.get("up_mm"), "up_mm") / film.height_mm
            if not (-1.0 <= right <= 1.0 and -1.0 <= up <= 1.0):
                raise RefusedError("this place lies outside the frame.")
        return figures.point(state, scene, right, up)

    def design(self, given: object) -> dict[str, Any]:
        """Return the design as the text of a file, with a name for it."""
        return self.designs.written(self.state(given).camera)

    # Uploads ----------------------------------------------------------------------------------

    def taken_in(self, entry: Entry, path: Path) -> dict[str, Any]:
        """Return what the page is told of an upload that lies at a path, and put it on the shelf."""
        if entry.kind == "map":
            try:
                numbers = read_numbers(path)
            except PinsimError as problem:
                raise RefusedError(str(problem).replace(str(path), entry.name)) from None
            self.shelf.put(entry)
            whole = numbers.dtype.kind in "ui"
            return {
                "id": entry.id,
                "name": entry.name,
                "width_px": numbers.shape[1],
                "height_px": numbers.shape[0],
                "kind_of_numbers": "codes" if whole else "floats",
                "lowest": float(numbers.min()),
                "highest": float(numbers.max()),
                "needs": None,
                "notes": [],
            }
        self.shelf.put(entry)
        place = Place(scene=entry.id)
        try:
            try:
                return self.shelf.about(self.shelf.scene(place), entry.id)
            except RefusedError as problem:
                if problem.needs != "view":
                    raise
                why = str(problem)
                scene = self.shelf.scene(replace(place, view_deg=_SOME_VIEW_DEG))
            about = self.shelf.about(scene, entry.id)
            return {
                **about,
                "view_deg": None,
                "vertical_view_deg": None,
                "needs": "view",
                "notes": [why, *about["notes"]],
            }
        except BaseException:
            self.shelf.remove(entry.id)
            raise

    # Files to keep ----------------------------------------------------------------------------

    def save_asked(
        self, given: Mapping[str, Any]
    ) -> tuple[str, State, list[Camera], int | None, str]:
        """Return what file is to be made; RefusedError when it cannot be."""
        state = self.state(given.get("state"))
        kind, suffix = given.get("kind", "picture"), given.get("format", ".png")
        if not isinstance(kind, str) or kind not in sizes.SAVE_FORMATS:
            raise RefusedError(f"kind must be one of: {', '.join(sizes.SAVE_FORMATS)}.")
        if suffix not in sizes.SAVE_FORMATS[kind]:
            raise RefusedError(
                f"format must be one of: {', '.join(sizes.SAVE_FORMATS[kind])}.", field="format"
            )
        width = given.get("width_px")
        if width is not None:
            width = _width(width, state.camera)
        cameras = [state.camera]
        if kind == "comparison":
            cameras.insert(0, self.state(given.get("other")).camera)
        elif kind == "contact":
            cameras = self._contact_cameras(state, given)
        return kind, state, cameras, width, suffix

    def _contact_cameras(self, state: State, given: Mapping[str, Any]) -> list[Camera]:
        states, holes = given.get("states"), given.get("holes_mm")
        most = sizes.MOST_DESIGNS
        for name, value in (("states", states), ("holes_mm", holes)):
            if value is not None and not (isinstance(value, list) and 1 <= len(value) <= most):
                raise RefusedError(f"{name} must be a list of 1 to {most}.", field=name)
        if states is not None:
            return [self.state(one).camera for one in states]
        if holes is not None:
            return [
                self.state({**state.settled, "shape": "round", "hole_mm": one}).camera
                for one in holes
            ]
        return [state.camera]

    def save(
        self,
        kind: str,
        state: State,
        cameras: list[Camera],
        width_px: int | None,
        suffix: str,
        check: Check,
    ) -> tuple[bytes, str, list[str]]:
        """Return a file's bytes, a name for it, and notes."""
        from pinsim.live import pictures

        scene = self.shelf.scene(state.place)
        check()
        if kind == "picture":
            body, notes = pictures.saved_picture(state, scene, width_px, suffix, self._out, check)
        else:
            body, notes = pictures.saved_sheet(
                kind, state, scene, cameras, suffix, self._out, check
            )
        words = {
            "picture": f"{scene.name}-{state.camera.name}",
            "comparison": f"{scene.name}-compared",
            "contact": f"{scene.name}-contact-sheet",
            "numbers": f"{state.camera.name}-numbers",
        }
        return body, f"{stem(words[kind])}{suffix}", notes


def _plain_number(value: object, name: str) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not abs(value) < 1e9:
        raise RefusedError(f"{name} must be a number.", field=name)
    return float(value)


def _share(value: object, name: str) -> float:
    number = _plain_number(value, name)
    if not 0.0 <= number <= 1.0:
        raise RefusedError(f"{name} must be 0 to 1, from the picture's left and top.", field=name)
    return number


def _width(value: object, camera: Camera) -> int:
    low, high = sizes.WIDTH_RANGE_PX
    if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
        raise RefusedError(f"width_px must be a whole number, {low} to {high}.", field="width_px")
    film = camera.film
    if value * value * film.height_mm / film.width_mm > sizes.MOST_PIXELS:
        raise RefusedError(
            f"{value} px across this film are more than {sizes.MOST_PIXELS // 1_000_000} megapixels; "
            "ask for fewer.",
            field="width_px",
        )
    return value
