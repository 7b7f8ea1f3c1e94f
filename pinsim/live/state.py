"""The state of the page: one flat JSON object of plain values, to a Camera and what is looked at.

Lengths are numbers of mm or texts with a unit, angles degrees, times seconds. Every key may be missing.
What is wrong is told by field, so that the page can say it beside the field it stands in.
"""

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any, Literal, cast

from pinsim import units
from pinsim.camera import FRAMES_MM, TONES, Camera, Film, Hole, named_film
from pinsim.camera.camera import FOCAL_LENGTH_RANGE_MM
from pinsim.camera.film import BEND_AXES, BEND_RANGE_MM, FRAME_RANGE_MM
from pinsim.camera.hole import HOLE_RANGE_MM, PLATE_RANGE_MM, SHAPES
from pinsim.errors import PinsimError, UnitError, nearest, out_of_range
from pinsim.exposure import LightLevel, read_light
from pinsim.exposure.light import at_ev
from pinsim.live.refused import RefusedError
from pinsim.material import BUILT_IN, DEFAULT_MATERIAL, LONGEST_NM, SHORTEST_NM
from pinsim.scene.scene import BOUNDARIES, PROJECTIONS

Look = Literal["upright", "screen", "emulsion"]
LOOKS = ("upright", "screen", "emulsion")
CONTRASTS = (0.5, 0.2, 0.1)
MOST_TEXT = 200
MOST_SEED = 2**31

# What belongs to the scene; null there is "as the scene itself says".
MAP_KEYS = (
    *("map_kind", "map_step", "map_unit", "map_along", "near", "far", "baseline"),
    *("map_focal_length", "holes"),
)
DEFAULTS: dict[str, Any] = {
    "scene": None,
    "view_deg": None,
    "projection": None,
    "distance_mm": None,
    "map": None,
    **dict.fromkeys(MAP_KEYS),
    "ground": None,
    "horizon": None,
    "beyond": None,
    "highlight_lift": None,
    "yaw_deg": None,
    "pitch_deg": None,
    "roll_deg": None,
    "name": "camera",
    "shape": "round",
    "hole_mm": 0.3,
    "hole_h_mm": None,
    "traced": None,
    "plate_mm": 0.0,
    "depth_mm": 60.0,
    "frame": "6x6",
    "width_mm": None,
    "height_mm": None,
    "portrait": False,
    "shift_mm": 0.0,
    "rise_mm": 0.0,
    "bend_mm": None,
    "bend_axis": "vertical",
    "material": DEFAULT_MATERIAL,
    "materials_of": None,
    "tone": "positive",
    "look": "upright",
    "light": None,
    "time": None,
    "wavelength_nm": None,
    "grain_seed": None,
    "contrast": 0.2,
}
CAMERA_KEYS = (
    *(
        "name",
        "shape",
        "hole_mm",
        "hole_h_mm",
        "traced",
        "plate_mm",
        "depth_mm",
        "frame",
        "width_mm",
    ),
    *("height_mm", "portrait", "shift_mm", "rise_mm", "bend_mm", "bend_axis", "material"),
    *("materials_of", "tone"),
)
LIMITS: dict[str, tuple[float, float, str]] = {
    "hole_mm": (*HOLE_RANGE_MM, "mm"),
    "hole_h_mm": (*HOLE_RANGE_MM, "mm"),
    "plate_mm": (*PLATE_RANGE_MM, "mm"),
    "depth_mm": (*FOCAL_LENGTH_RANGE_MM, "mm"),
    "width_mm": (*FRAME_RANGE_MM, "mm"),
    "height_mm": (*FRAME_RANGE_MM, "mm"),
    "shift_mm": (-FRAME_RANGE_MM[1], FRAME_RANGE_MM[1], "mm"),
    "rise_mm": (-FRAME_RANGE_MM[1], FRAME_RANGE_MM[1], "mm"),
    "bend_mm": (*BEND_RANGE_MM, "mm"),
    "view_deg": (0.5, 360.0, "deg"),
    "yaw_deg": (-360.0, 360.0, "deg"),
    "pitch_deg": (-90.0, 90.0, "deg"),
    "roll_deg": (-180.0, 180.0, "deg"),
    "light": (*units.EV_RANGE, "EV"),
    "time": (1e-6, units.LONGEST_S, "s"),
    "wavelength_nm": (SHORTEST_NM, LONGEST_NM, "nm"),
    "highlight_lift": (0.0, 10.0, "stops"),
}
# How fields are called in messages.
WORDS = {
    "view_deg": "angle of view",
    "distance_mm": "distance",
    "hole_mm": "hole",
    "hole_h_mm": "height of the hole",
    "plate_mm": "plate thickness",
    "depth_mm": "box depth (hole to film)",
    "width_mm": "film width",
    "height_mm": "film height",
    "shift_mm": "shift",
    "rise_mm": "rise",
    "bend_mm": "bend radius",
    "yaw_deg": "look-at yaw",
    "pitch_deg": "look-at pitch",
    "roll_deg": "look-at roll",
    "wavelength_nm": "wavelength",
    "highlight_lift": "highlight lift",
    "grain_seed": "grain's number",
}
# What a message of the camera's classes starts with -> the field that it is about.
_BLAMED = (
    ("hole diameter", "hole_mm"),
    ("side of the", "hole_mm"),
    ("plate thickness", "plate_mm"),
    ("focal length", "depth_mm"),
    ("the hole", "hole_mm"),
    ("film width", "width_mm"),
    ("film height", "height_mm"),
    ("film shift right", "shift_mm"),
    ("film shift up", "rise_mm"),
    ("bend radius", "bend_mm"),
    ("the film reaches", "bend_mm"),
    ("the bent film", "bend_mm"),
    ("the bend's axis", "bend_axis"),
    ("no film frame", "frame"),
    ("no material", "material"),
    ("tone", "tone"),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Place:
    """Which scene, and what is told of it beside what it says itself. lengths mm, angles deg.

    options : the texts of a map's meaning, of a ground and of a horizon, by key, sorted.
    """

    scene: str
    view_deg: float | None = None
    projection: Literal["rectilinear", "equirectangular"] | None = None
    distance_mm: float | None = None
    map: str | None = None
    options: tuple[tuple[str, str], ...] = ()
    beyond: Literal["mirror", "extend", "black"] | None = None
    highlight_lift: float | None = None
    look_at_deg: tuple[float, float, float] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class State:
    """Everything the page shows, valid. settled : the same as JSON, in fixed units, every key filled.

    texts : how its quantities are written, with units. time_s : None without a time.
    """

    place: Place
    camera: Camera
    look: Look
    light: LightLevel | None
    time_s: float | Literal["auto"] | None
    wavelength_nm: float | None
    grain_seed: int | None
    contrast: float
    settled: dict[str, Any]
    texts: dict[str, str]

    @property
    def ev(self) -> float | None:
        """The brightness that was told, as the command line rounds it; None is the scene's own."""
        return None if self.light is None else round(self.light.ev, 2)


class _Reader:
    """Takes values out of the page's object; what is wrong is kept by field, to be told together."""

    def __init__(self, given: Mapping[str, Any]) -> None:
        self.errors: dict[str, str] = {}
        self._given = given

    def value(self, key: str) -> Any:
        found = self._given.get(key)
        if found is None or (isinstance(found, str) and not found.strip()):
            return DEFAULTS[key]
        return found

    def wrong(self, key: str, text: str) -> None:
        self.errors.setdefault(key, text)

    def quantity(
        self, key: str, parse: Callable[[object, str], float], unit: str, *, checked: bool = True
    ) -> float | None:
        """Return a number in the key's own unit from a number or a text with a unit."""
        value, where = self.value(key), WORDS.get(key, key)
        if value is None:
            return None
        try:
            number = _number(value, where) if not isinstance(value, str) else None
            if number is None:
                number = parse(_short(value, where), where)
            low, high = LIMITS[key][:2] if checked and key in LIMITS else (-math.inf, math.inf)
            if not low <= number <= high:
                raise UnitError(out_of_range(where, number, unit, low, high))
        except PinsimError as problem:
            self.wrong(key, str(problem))
            return None
        return number

    def length(self, key: str, *, checked: bool = False) -> float | None:
        # Most limits are the camera's own, which explain more.
        return self.quantity(key, units.length_mm, "mm", checked=checked)

    def angle(self, key: str) -> float | None:
        return self.quantity(key, _angle, "deg")

    def choice(self, key: str, allowed: tuple[str, ...]) -> Any:
        value = self.value(key)
        if value is not None and value not in allowed:
            hint = nearest(str(value)[:40], allowed)
            self.wrong(
                key, f"{key} is {str(value)[:40]!a}; it must be one of: {', '.join(allowed)}.{hint}"
            )
            return DEFAULTS[key]
        return value

    def text(self, key: str) -> str | None:
        value = self.value(key)
        if value is None:
            return None
        try:
            if isinstance(value, int | float) and not isinstance(value, bool):
                value = f"{_number(value, key):.9g}"
            return _short(value, WORDS.get(key, key))
        except PinsimError as problem:
            self.wrong(key, str(problem))
            return None

    def flag(self, key: str) -> bool:
        value = self.value(key)
        if not isinstance(value, bool):
            self.wrong(key, f"{key} must be true or false.")
            return False
        return value

    def whole(self, key: str, most: int) -> int | None:
        value = self.value(key)
        if value is None:
            return None
        if isinstance(value, bool) or not isinstance(value, int) or not 0 <= value < most:
            self.wrong(key, f"the {WORDS.get(key, key)} must be a whole number, 0 to {most - 1}.")
            return None
        return value


def _number(value: object, where: str) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise UnitError(f"{where} must be a number or a text with a unit.")
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise UnitError(f"{where} is not a number that can be used.")
    return number


def _short(value: object, where: str) -> str:
    if not isinstance(value, str):
        raise UnitError(f"{where} must be a text.")
    if len(value) > MOST_TEXT:
        raise UnitError(f"{where} is {len(value)} letters long; {MOST_TEXT} are the most.")
    return value


def _angle(value: object, where: str) -> float:
    # As on the command line, where a plain number of a direction is degrees.
    text = value.strip() if isinstance(value, str) else value
    bare = isinstance(text, str) and text[-1:].isdigit()
    return units.angle_deg(f"{text} deg" if bare else text, where)


def read_state(given: object, designs: Mapping[str, Camera], scene: str) -> State:
    """Return the state that the page's object tells; RefusedError, by field, for what is wrong.

    designs : by id, those that the server was started with, for traced holes and own materials.
    scene : the id of the scene that is meant where none is named.
    """
    if not isinstance(given, dict):
        raise RefusedError("the state must be a JSON object of keys and values.", status=400)
    for key in given:
        if key not in DEFAULTS:
            hint = nearest(str(key)[:40], DEFAULTS)
            raise RefusedError(f"the state has an unknown key {str(key)[:40]!a}.{hint}")
    read = _Reader(given)
    place = _place(read, scene)
    camera = _camera(read, designs)
    light = _light(read)
    time_s = _time(read)
    look = read.choice("look", LOOKS)
    wavelength = read.quantity("wavelength_nm", units.wavelength_nm, "nm")
    seed = read.whole("grain_seed", MOST_SEED)
    contrast = read.value("contrast")
    if contrast not in CONTRASTS:
        read.wrong("contrast", "contrast must be 0.5, 0.2 or 0.1.")
    if seed is not None and time_s is None:
        read.wrong(
            "grain_seed", "grain is drawn in what the material shows after a time; give one."
        )
    if read.errors or camera is None or place is None:
        field = next(iter(read.errors))
        raise RefusedError(read.errors[field], field=field, errors=read.errors)
    settled = {
        **_place_keys(place),
        **camera_keys(camera, traced=read.value("traced"), materials_of=read.value("materials_of")),
        "look": look,
        "light": None if light is None else light.given or f"EV {light.ev:g}",
        "time": time_s,
        "wavelength_nm": wavelength,
        "grain_seed": seed,
        "contrast": contrast,
    }
    return State(
        place=place,
        camera=camera,
        look=look,
        light=light,
        time_s=time_s,
        wavelength_nm=wavelength,
        grain_seed=seed,
        contrast=contrast,
        settled={key: settled[key] for key in DEFAULTS},
        texts=texts_of(settled),
    )


def _place(read: _Reader, scene: str) -> Place | None:
    distance = read.quantity("distance_mm", units.distance_mm, "mm")
    options = {key: read.text(key) for key in (*MAP_KEYS, "ground", "horizon")}
    map_id = read.text("map")
    if distance is not None and map_id is not None:
        read.wrong("distance_mm", "a distance and a distance map exclude each other; keep one.")
    if distance is not None and distance < 1.0:
        read.wrong("distance_mm", f"distance is {distance:g} mm; it must be at least 1 mm.")
    look = [read.angle(key) for key in ("yaw_deg", "pitch_deg", "roll_deg")]
    found = Place(
        scene=read.text("scene") or scene,
        view_deg=read.angle("view_deg"),
        projection=read.choice("projection", PROJECTIONS),
        distance_mm=distance,
        map=map_id,
        options=tuple(sorted((key, text) for key, text in options.items() if text is not None)),
        beyond=read.choice("beyond", BOUNDARIES),
        highlight_lift=read.quantity("highlight_lift", _angle, "stops"),
        look_at_deg=None
        if all(angle is None for angle in look)
        else cast(tuple[float, float, float], tuple(angle or 0.0 for angle in look)),
    )
    return None if read.errors else found


def _place_keys(place: Place) -> dict[str, Any]:
    options = dict(place.options)
    yaw, pitch, roll = place.look_at_deg or (None, None, None)
    distance = place.distance_mm
    return {
        "scene": place.scene,
        "view_deg": place.view_deg,
        "projection": place.projection,
        "distance_mm": "infinity" if distance is not None and math.isinf(distance) else distance,
        "map": place.map,
        **{key: options.get(key) for key in (*MAP_KEYS, "ground", "horizon")},
        "beyond": place.beyond,
        "highlight_lift": place.highlight_lift,
        "yaw_deg": yaw,
        "pitch_deg": pitch,
        "roll_deg": roll,
    }


def _camera(read: _Reader, designs: Mapping[str, Camera]) -> Camera | None:
    """Build the camera piece by piece, so that each refusal finds its field."""
    shape = read.choice("shape", SHAPES)
    materials = BUILT_IN
    own = read.text("materials_of")
    if own is not None:
        if own in designs:
            materials = designs[own].materials
        else:
            read.wrong(
                "materials_of",
                f"no design {own[:40]!a} is known to this server; start pinsim with it.",
            )
    depth, plate = read.length("depth_mm"), read.length("plate_mm")
    shift, rise = read.length("shift_mm"), read.length("rise_mm")
    bend, axis = read.length("bend_mm"), read.choice("bend_axis", BEND_AXES)
    name, material = read.text("name"), read.text("material")
    tone = read.choice("tone", TONES)
    hole = _hole(read, shape, plate or 0.0, designs)
    film = _film(read)
    if read.errors or hole is None or film is None or depth is None:
        return None
    try:
        film = replace(
            film,
            shift_right_mm=shift or 0.0,
            shift_up_mm=rise or 0.0,
            bend_radius_mm=math.inf if bend is None else bend,
            bend_axis=axis,
        )
        return Camera(
            name=name or "camera",
            focal_length_mm=depth,
            hole=hole,
            film=film,
            material_name=material or DEFAULT_MATERIAL,
            materials=materials,
            tone=tone,
        )
    except PinsimError as problem:
        _blame(read, problem, "depth_mm")
        return None


def _blame(read: _Reader, problem: PinsimError, otherwise: str) -> None:
    text = str(problem)
    field = next((field for start, field in _BLAMED if text.startswith(start)), otherwise)
    read.wrong(field, text)


def _hole(read: _Reader, shape: str, plate_mm: float, designs: Mapping[str, Camera]) -> Hole | None:
    width, height = read.length("hole_mm"), read.length("hole_h_mm")
    try:
        if shape == "traced":
            which = read.text("traced") or "given"
            outline = designs[which].hole.outline if which in designs else None
            if outline is None:
                read.wrong(
                    "traced", "no traced hole is here; start pinsim with the design that has one."
                )
                return None
            return Hole.traced(outline, plate_thickness_mm=plate_mm)
        if width is None:
            return None
        if shape == "round":
            return Hole(diameter_mm=width, plate_thickness_mm=plate_mm)
        make = Hole.oval if shape == "oval" else Hole.slit
        return make(width, width if height is None else height, plate_thickness_mm=plate_mm)
    except PinsimError as problem:
        if height is not None and not HOLE_RANGE_MM[0] <= height <= HOLE_RANGE_MM[1]:
            read.wrong("hole_h_mm", str(problem))
        else:
            _blame(read, problem, "hole_mm")
        return None


def _film(read: _Reader) -> Film | None:
    width, height = read.length("width_mm"), read.length("height_mm")
    portrait = read.flag("portrait")
    frame = read.text("frame")
    sizes = width is not None or height is not None
    try:
        # A size comes before the default frame, and excludes one that is named.
        if frame is not None and not (sizes and read._given.get("frame") is None):
            if sizes:
                read.wrong(
                    "frame", "frame and width or height exclude each other; keep one of them."
                )
            return named_film(frame, portrait=portrait)
        if width is None or height is None:
            key = "width_mm" if width is None else "height_mm"
            read.wrong(key, f"{WORDS[key]} is missing; give both sides of the film, or a frame.")
            return None
        if portrait:
            width, height = min(width, height), max(width, height)
        return Film(width_mm=width, height_mm=height)
    except PinsimError as problem:
        _blame(read, problem, "frame")
        return None


def _light(read: _Reader) -> LightLevel | None:
    value = read.value("light")
    if value is None:
        return None
    try:
        if isinstance(value, str):
            return read_light(_short(value, "light"), "light")
        ev = units.exposure_value(_number(value, "light"), "light")
        return at_ev(ev, given=f"EV {ev:g}")
    except PinsimError as problem:
        read.wrong("light", str(problem))
        return None


def _time(read: _Reader) -> float | Literal["auto"] | None:
    value = read.value("time")
    if isinstance(value, str) and value.strip().lower() in {"none", "auto"}:
        return "auto" if value.strip().lower() == "auto" else None
    if value is not None and not isinstance(value, str):
        return read.quantity("time", units.time_s, "s")
    try:
        return None if value is None else units.time_s(_short(value, "time"), "time")
    except PinsimError as problem:
        read.wrong("time", f"{str(problem).rstrip('.')}, or 'auto' or 'none'.")
        return None


def camera_keys(
    camera: Camera, *, traced: str | None = None, materials_of: str | None = None
) -> dict[str, Any]:
    """Return a camera as the page's keys, in mm.

    traced, materials_of : the design that its outline and its materials are taken from, if any.
    """
    hole, film = camera.hole, camera.film
    width, height = hole.size_mm or (hole.diameter_mm, None)
    name = film.frame.removesuffix(" upright")
    named = name in FRAMES_MM
    return {
        "name": camera.name,
        "shape": hole.shape,
        "hole_mm": width,
        "hole_h_mm": height,
        "traced": (traced or "given") if hole.shape == "traced" else None,
        "plate_mm": hole.plate_thickness_mm,
        "depth_mm": camera.focal_length_mm,
        "frame": name if named else None,
        "width_mm": None if named else film.width_mm,
        "height_mm": None if named else film.height_mm,
        "portrait": named and (film.width_mm, film.height_mm) != FRAMES_MM[name],
        "shift_mm": film.shift_right_mm,
        "rise_mm": film.shift_up_mm,
        "bend_mm": None if math.isinf(film.bend_radius_mm) else film.bend_radius_mm,
        "bend_axis": film.bend_axis,
        "material": camera.material_name,
        "materials_of": materials_of if camera.materials != BUILT_IN else None,
        "tone": camera.tone,
    }


def texts_of(settled: Mapping[str, Any]) -> dict[str, str]:
    """Return how a state's quantities are written, with their units, by key."""
    texts = {}
    for key, value in settled.items():
        if key in LIMITS or key == "distance_mm":
            if isinstance(value, str):
                texts[key] = value
            elif value is not None:
                unit = LIMITS[key][2] if key in LIMITS else "mm"
                texts[key] = f"{value:.7g} {unit}"
    return texts


def parsed(kind: object, text: object, where: str) -> dict[str, Any]:
    """Return what a typed text means: value and text, of a light also what was understood.

    kind : "length", "distance", "angle", "time", "light", "ev" or "wavelength". Raises UnitError.
    """
    if kind == "light":
        light = read_light(_short(text, where), where)
        ev = round(light.ev, 2)
        text = light.given or f"EV {ev:g}"
        return {"value": ev, "text": text, "given": light.given, "note": light.note}
    parse = {
        "length": (units.length_mm, "mm"),
        "distance": (units.distance_mm, "mm"),
        "angle": (_angle, "deg"),
        "time": (units.time_s, "s"),
        "ev": (units.exposure_value, "EV"),
        "wavelength": (units.wavelength_nm, "nm"),
    }
    if not isinstance(kind, str) or kind not in parse:
        raise UnitError(f"kind must be one of: {', '.join((*parse, 'light'))}.")
    read, unit = parse[kind]
    value = read(_short(text, where), where)
    if math.isinf(value):
        return {"value": "infinity", "text": "infinity"}
    return {"value": value, "text": f"{value:.7g} {unit}"}
