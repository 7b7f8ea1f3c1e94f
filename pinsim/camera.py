"""A camera design: hole, distance to the film, film frame. Valid from birth; read from TOML."""

import math
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, Literal

from pinsim.errors import DesignError, nearest, out_of_range
from pinsim.frames import FRAMES_MM
from pinsim.material import DEFAULT_MATERIAL, Material, material
from pinsim.samples import resolve
from pinsim.tables import Table, read_toml
from pinsim.units import format_length, length_mm

Tone = Literal["positive", "negative"]
TONES = ("positive", "negative")

HOLE_RANGE_MM = (0.01, 100.0)
FOCAL_LENGTH_RANGE_MM = (2.0, 20_000.0)
FRAME_RANGE_MM = (2.0, 5_000.0)
PLATE_RANGE_MM = (0.0, 50.0)


def _require(key: str, value: float, limits: tuple[float, float]) -> None:
    if not limits[0] <= value <= limits[1]:  # also refuses nan
        raise DesignError(out_of_range(key, value, "mm", *limits))


@dataclass(frozen=True, slots=True, kw_only=True)
class Hole:
    """A round hole straight through a plate."""

    diameter_mm: float
    plate_thickness_mm: float = 0.0

    def __post_init__(self) -> None:
        _require("hole diameter", self.diameter_mm, HOLE_RANGE_MM)
        _require("plate thickness", self.plate_thickness_mm, PLATE_RANGE_MM)


@dataclass(frozen=True, slots=True, kw_only=True)
class Film:
    """The picture area in the film plane: flat, at right angles to the hole's axis.

    shift_right_mm, shift_up_mm : where the frame's middle lies beside the axis, as the scene is seen.
    """

    width_mm: float
    height_mm: float
    frame: str = ""
    shift_right_mm: float = 0.0
    shift_up_mm: float = 0.0

    def __post_init__(self) -> None:
        _require("film width", self.width_mm, FRAME_RANGE_MM)
        _require("film height", self.height_mm, FRAME_RANGE_MM)
        for key, value in (("right", self.shift_right_mm), ("up", self.shift_up_mm)):
            if not abs(value) <= FRAME_RANGE_MM[1]:
                raise DesignError(
                    out_of_range(
                        f"film shift {key}", value, "mm", -FRAME_RANGE_MM[1], FRAME_RANGE_MM[1]
                    )
                )

    @property
    def label(self) -> str:
        """The frame's name, or its size."""
        return self.frame or f"{self.width_mm:g} x {self.height_mm:g} mm"


def named_film(frame: str, *, portrait: bool = False) -> Film:
    """Return the film of a named frame, held sideways or upright."""
    if frame not in FRAMES_MM:
        raise DesignError(
            f"no film frame is called {frame!r}.{nearest(frame, FRAMES_MM)} "
            f"Known: {', '.join(FRAMES_MM)}; or give width and height with units."
        )
    width, height = FRAMES_MM[frame]
    if portrait:
        return Film(width_mm=height, height_mm=width, frame=f"{frame} upright")
    return Film(width_mm=width, height_mm=height, frame=frame)


@dataclass(frozen=True, slots=True, kw_only=True)
class Camera:
    """A lensless camera: a hole, the distance from it to the film, and the film."""

    name: str = "camera"
    focal_length_mm: float
    hole: Hole
    film: Film = field(default_factory=lambda: named_film("6x6"))
    material_name: str = DEFAULT_MATERIAL
    tone: Tone = "positive"

    def __post_init__(self) -> None:
        _require("focal length (hole to film)", self.focal_length_mm, FOCAL_LENGTH_RANGE_MM)
        if self.hole.diameter_mm >= 0.5 * self.focal_length_mm:
            raise DesignError(
                f"the hole, {self.hole.diameter_mm:g} mm, is too large for a box only "
                f"{self.focal_length_mm:g} mm deep (f/{self.f_number:.2g}); "
                "use a hole below half the depth, usually about 1/200 of it."
            )
        smaller = min(self.film.width_mm, self.film.height_mm)
        if self.hole.diameter_mm >= smaller:
            raise DesignError(
                f"the hole, {self.hole.diameter_mm:g} mm, is as large as the film frame, "
                f"{self.film.label}; use a smaller hole or a larger frame."
            )
        if self.tone not in TONES:
            raise DesignError(f"tone is {self.tone!r}; it must be one of: positive, negative.")
        material(self.material_name)

    @property
    def f_number(self) -> float:
        """Focal length over hole diameter."""
        return self.focal_length_mm / self.hole.diameter_mm

    @property
    def material(self) -> Material:
        """The material that lies in the film plane."""
        return material(self.material_name)

    @property
    def horizontal_view_deg(self) -> float:
        """The angle between the rays to the left and right edge of the frame, at its middle height."""
        return self._view_deg(self.film.width_mm, self.film.shift_right_mm)

    @property
    def vertical_view_deg(self) -> float:
        """The angle between the rays to the upper and lower edge of the frame."""
        return self._view_deg(self.film.height_mm, self.film.shift_up_mm)

    def _view_deg(self, side_mm: float, shift_mm: float) -> float:
        upper = math.atan2(shift_mm + 0.5 * side_mm, self.focal_length_mm)
        lower = math.atan2(shift_mm - 0.5 * side_mm, self.focal_length_mm)
        return math.degrees(upper - lower)

    @property
    def corner_deg(self) -> float:
        """The field angle of the corner farthest from the axis."""
        x = abs(self.film.shift_right_mm) + 0.5 * self.film.width_mm
        y = abs(self.film.shift_up_mm) + 0.5 * self.film.height_mm
        return math.degrees(math.atan2(math.hypot(x, y), self.focal_length_mm))

    @property
    def diagonal_view_deg(self) -> float:
        """The angle between the rays to two opposite corners."""
        rays = []
        for side in (-0.5, 0.5):
            rays.append(
                (
                    self.film.shift_right_mm + side * self.film.width_mm,
                    self.film.shift_up_mm + side * self.film.height_mm,
                    self.focal_length_mm,
                )
            )
        dot = sum(a * b for a, b in zip(*rays, strict=True))
        return math.degrees(math.acos(dot / (math.hypot(*rays[0]) * math.hypot(*rays[1]))))

    @property
    def summary(self) -> str:
        """One line for captions: hole, depth, f-number, film."""
        return (
            f"hole {self.hole.diameter_mm:.3g} mm, {format_length(self.focal_length_mm)} to film, "
            f"f/{self.f_number:.0f}, {self.film.label}"
        )

    def with_hole(self, diameter_mm: float) -> "Camera":
        """Return this design with another hole."""
        return replace(self, hole=replace(self.hole, diameter_mm=diameter_mm))

    def with_focal_length(self, focal_length_mm: float) -> "Camera":
        """Return this design with the film at another distance."""
        return replace(self, focal_length_mm=focal_length_mm)

    @classmethod
    def load(cls, path: str | Path) -> "Camera":
        """Read a design from a TOML file, or from sample:NAME.

        Raises DesignError or UnitError, in one line, for whatever is wrong with it.
        """
        file = resolve(path, "camera", DesignError)
        return camera_from_table(
            Table(read_toml(file, DesignError, "camera design"), str(file), DesignError)
        )


def camera_from_table(top: Table) -> Camera:
    """Return the design that a TOML table describes."""
    name = top.text("name", "camera")
    focal_length = length_mm(top.need("focal_length", '"60 mm"'), top.place("focal_length"))
    hole = _hole(top.table("hole"))
    film, material_name = _film(top.table("film"))
    tone = top.text("tone", "positive", TONES)
    top.refuse_leftovers()
    try:
        return Camera(
            name=name,
            focal_length_mm=focal_length,
            hole=hole,
            film=film,
            material_name=material_name,
            tone="negative" if tone == "negative" else "positive",
        )
    except DesignError as error:
        raise DesignError(f"{top.where}: {error}") from None


def _hole(table: Table) -> Hole:
    shape = table.text("shape", "round", ("round", "oval", "slit", "traced"))
    if shape != "round":
        raise DesignError(
            f"{table.place('shape')} is {shape!r}; this version renders round holes only. "
            "Use shape = 'round' with the diameter of a circle of the same area."
        )
    diameter = length_mm(table.need("diameter", '"0.30 mm"'), table.place("diameter"))
    thickness = length_mm(table.take("plate_thickness", "0 mm"), table.place("plate_thickness"))
    table.refuse_leftovers()
    try:
        return Hole(diameter_mm=diameter, plate_thickness_mm=thickness)
    except DesignError as error:
        raise DesignError(f"{table.where}: {error}") from None


def _film(table: Table) -> tuple[Film, str]:
    right, up = _shift(table)
    material_name = table.text("material", DEFAULT_MATERIAL)
    surface: Any = table.take("surface", "flat")
    if surface != "flat":
        raise DesignError(
            f"{table.place('surface')} is {surface!r}; this version renders flat film only. "
            "Use surface = 'flat'."
        )
    portrait = table.text("orientation", "landscape", ("landscape", "portrait")) == "portrait"
    try:
        if table.has("frame"):
            film = named_film(table.text("frame", ""), portrait=portrait)
            if table.has("width") or table.has("height"):
                raise DesignError("frame and width or height exclude each other; keep one of them.")
        else:
            table.refuse_slip("frame")
            width = length_mm(
                table.need("width", '"56 mm"  (or frame = "6x6")'), table.place("width")
            )
            height = length_mm(table.need("height", '"56 mm"'), table.place("height"))
            if portrait:
                width, height = min(width, height), max(width, height)
            film = Film(width_mm=width, height_mm=height)
        table.refuse_leftovers()
        material(material_name)
        return replace(film, shift_right_mm=right, shift_up_mm=up), material_name
    except DesignError as error:
        text = str(error)
        raise DesignError(
            text if text.startswith(table.where) else f"{table.where}: {text}"
        ) from None


def _shift(table: Table) -> tuple[float, float]:
    shift = table.take("shift", ["0 mm", "0 mm"])
    if not isinstance(shift, list) or len(shift) != 2:
        raise DesignError(
            f"{table.place('shift')} is {shift!r}; it must be two lengths, right and up, "
            'for example ["0 mm", "5 mm"].'
        )
    return length_mm(shift[0], table.place("shift")), length_mm(shift[1], table.place("shift"))
