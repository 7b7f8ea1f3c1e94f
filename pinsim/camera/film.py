"""The film: its frame, where it lies, and how it is bent."""

import math
from dataclasses import dataclass
from typing import Literal

from pinsim.camera.frames import FRAMES_MM
from pinsim.errors import DesignError, nearest, out_of_range

BendAxis = Literal["vertical", "horizontal"]
BEND_AXES = ("vertical", "horizontal")

FRAME_RANGE_MM = (2.0, 5_000.0)
BEND_RANGE_MM = (2.0, 100_000.0)


def _require(key: str, value: float, limits: tuple[float, float]) -> None:
    if not limits[0] <= value <= limits[1]:
        raise DesignError(out_of_range(key, value, "mm", *limits))


@dataclass(frozen=True, slots=True, kw_only=True)
class Film:
    """The picture area: flat at right angles to the hole's axis, or bent towards the hole.

    width_mm, height_mm : along the film, so of a bent one the arc's length.
    shift_right_mm, shift_up_mm : where the frame's middle lies beside the axis, as the scene is seen,
    along the film. bend_radius_mm : math.inf is flat; bent about a vertical axis the film curls at
    its left and right ends. frame : the frame's name, if it has one.
    """

    width_mm: float
    height_mm: float
    frame: str = ""
    shift_right_mm: float = 0.0
    shift_up_mm: float = 0.0
    bend_radius_mm: float = math.inf
    bend_axis: BendAxis = "vertical"

    def __post_init__(self) -> None:
        _require("film width", self.width_mm, FRAME_RANGE_MM)
        _require("film height", self.height_mm, FRAME_RANGE_MM)
        far = FRAME_RANGE_MM[1]
        _require("film shift right", self.shift_right_mm, (-far, far))
        _require("film shift up", self.shift_up_mm, (-far, far))
        if self.bend_axis not in BEND_AXES:
            raise DesignError(
                f"the bend's axis is {self.bend_axis!r}; it is vertical or horizontal."
            )
        if math.isinf(self.bend_radius_mm):
            return
        _require("bend radius", self.bend_radius_mm, BEND_RANGE_MM)
        half_turn = math.pi * self.bend_radius_mm
        if self.bent_reach_mm >= half_turn:
            raise DesignError(
                f"the film reaches {self.bent_reach_mm:.4g} mm along the bend, more than the half turn "
                f"of {half_turn:.4g} mm that a bend radius of {self.bend_radius_mm:g} mm has; "
                "use a larger radius or a shorter film."
            )

    @property
    def bent_reach_mm(self) -> float:
        """How far the film reaches from the axis along its bend."""
        if self.bend_axis == "vertical":
            return abs(self.shift_right_mm) + 0.5 * self.width_mm
        return abs(self.shift_up_mm) + 0.5 * self.height_mm

    @property
    def label(self) -> str:
        """The frame's name, or its size, and its bend."""
        name = self.frame or f"{self.width_mm:g} x {self.height_mm:g} mm"
        if math.isinf(self.bend_radius_mm):
            return name
        return f"{name} bent to {self.bend_radius_mm:g} mm"


def named_film(frame: str, *, portrait: bool = False) -> Film:
    """Return the flat film of a named frame, held sideways or upright."""
    if frame not in FRAMES_MM:
        raise DesignError(
            f"no film frame is called {frame!r}.{nearest(frame, FRAMES_MM)} "
            f"Known: {', '.join(FRAMES_MM)}; or give width and height with units."
        )
    width, height = FRAMES_MM[frame]
    if portrait:
        return Film(width_mm=height, height_mm=width, frame=f"{frame} upright")
    return Film(width_mm=width, height_mm=height, frame=frame)
