"""The opening in the plate."""

import math
from dataclasses import dataclass
from typing import Literal

from pinsim.errors import DesignError, out_of_range
from pinsim.optics import Ellipse, Opening, Slit, Traced

Shape = Literal["round", "oval", "slit", "traced"]
SHAPES = ("round", "oval", "slit", "traced")

HOLE_RANGE_MM = (0.01, 100.0)
PLATE_RANGE_MM = (0.0, 50.0)


def _require(key: str, value: float, limits: tuple[float, float]) -> None:
    if not limits[0] <= value <= limits[1]:  # also refuses nan
        raise DesignError(out_of_range(key, value, "mm", *limits))


@dataclass(frozen=True, slots=True, kw_only=True)
class Hole:
    """A hole straight through a plate, round unless made by one of the class methods.

    diameter_mm : of a round hole, or of the round one of the same area, which gives the same f-number.
    size_mm : width and height of an oval or a slit, right and up. outline : a traced opening.
    """

    diameter_mm: float
    plate_thickness_mm: float = 0.0
    shape: Shape = "round"
    size_mm: tuple[float, float] | None = None
    outline: Traced | None = None

    def __post_init__(self) -> None:
        _require("hole diameter", self.diameter_mm, HOLE_RANGE_MM)
        _require("plate thickness", self.plate_thickness_mm, PLATE_RANGE_MM)
        for side in self.size_mm or ():
            _require(f"side of the {self.shape}", side, HOLE_RANGE_MM)

    @classmethod
    def oval(cls, width_mm: float, height_mm: float, *, plate_thickness_mm: float = 0.0) -> "Hole":
        """Return an ellipse with its axes right and up."""
        return cls._of_area(
            "oval", math.pi / 4.0 * width_mm * height_mm, (width_mm, height_mm), plate_thickness_mm
        )

    @classmethod
    def slit(cls, width_mm: float, height_mm: float, *, plate_thickness_mm: float = 0.0) -> "Hole":
        """Return a rectangle with its sides right and up."""
        return cls._of_area("slit", width_mm * height_mm, (width_mm, height_mm), plate_thickness_mm)

    @classmethod
    def traced(cls, outline: Traced, *, plate_thickness_mm: float = 0.0) -> "Hole":
        """Return an opening of any outline, as it stands seen from behind."""
        diameter = 2.0 * math.sqrt(outline.area_mm2 / math.pi)
        return cls(
            diameter_mm=diameter,
            plate_thickness_mm=plate_thickness_mm,
            shape="traced",
            outline=outline,
        )

    @classmethod
    def _of_area(
        cls, shape: Shape, area_mm2: float, size_mm: tuple[float, float], plate_thickness_mm: float
    ) -> "Hole":
        for side in size_mm:
            _require(f"side of the {shape}", side, HOLE_RANGE_MM)
        return cls(
            diameter_mm=2.0 * math.sqrt(area_mm2 / math.pi),
            plate_thickness_mm=plate_thickness_mm,
            shape=shape,
            size_mm=size_mm,
        )

    @property
    def opening(self) -> Opening:
        """The opening as optics takes it."""
        if self.outline is not None:
            return self.outline
        width, height = self.size_mm or (self.diameter_mm, self.diameter_mm)
        if self.shape == "slit":
            return Slit(right_mm=width, up_mm=height)
        return Ellipse(right_mm=width, up_mm=height)

    @property
    def greatest_mm(self) -> float:
        """The opening's greatest extent."""
        return self.opening.width_mm

    @property
    def label(self) -> str:
        """The hole for captions."""
        if self.size_mm is not None:
            return f"{self.shape} {self.size_mm[0]:.3g} x {self.size_mm[1]:.3g} mm"
        if self.outline is not None:
            return f"traced hole of {self.diameter_mm:.3g} mm"
        return f"hole {self.diameter_mm:.3g} mm"
