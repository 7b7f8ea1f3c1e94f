"""How large a pixel of a scan is: told outright, as dots per inch, or by a length in the picture."""

import math
import re
from dataclasses import dataclass

from pinsim.errors import DesignError, SceneError, out_of_range
from pinsim.units import length_mm

PIXEL_RANGE_MM = (1e-5, 1.0)
DPI_RANGE = (25.0, 250_000.0)
_LEAST_REFERENCE_PX = 20.0
_INCH_MM = 25.4

_POINT = r"\s*([\d.]+)\s*,\s*([\d.]+)\s*"
_REFERENCE = re.compile(rf"{_POINT},{_POINT}=(?P<length>.+)")


@dataclass(frozen=True, slots=True, kw_only=True)
class Reference:
    """Two points of a picture, column and row in pixels from its top left, and their distance."""

    start_px: tuple[float, float]
    stop_px: tuple[float, float]
    length_mm: float

    @property
    def length_px(self) -> float:
        """Their distance in the picture."""
        return math.dist(self.start_px, self.stop_px)


@dataclass(frozen=True, slots=True, kw_only=True)
class Scale:
    """The scale of a scan: one of pixel size, dots per inch and reference; or none of them.

    A scan without a scale can still be traced when the hole's diameter is told.
    """

    pixel_size_mm: float | None = None
    dpi: float | None = None
    reference: Reference | None = None

    def __post_init__(self) -> None:
        given = [v for v in (self.pixel_size_mm, self.dpi, self.reference) if v is not None]
        if len(given) > 1:
            raise DesignError(
                "pixel size, dpi and reference exclude each other; keep the one you trust most."
            )
        if self.dpi is not None and not DPI_RANGE[0] <= self.dpi <= DPI_RANGE[1]:
            raise DesignError(
                f"dpi is {self.dpi:g}; it must be {DPI_RANGE[0]:g} to {DPI_RANGE[1]:g} dots per inch, "
                "as the scanner was set."
            )
        if self.pixel_size_mm is not None:
            _require_pixel(self.pixel_size_mm)
        if self.reference is not None and self.reference.length_px < _LEAST_REFERENCE_PX:
            raise DesignError(
                f"the reference is {self.reference.length_px:.3g} px long, too short to measure by; "
                f"take two points at least {_LEAST_REFERENCE_PX:g} px apart, better across the picture."
            )

    @property
    def given(self) -> bool:
        """Whether there is one."""
        return (self.pixel_size_mm, self.dpi, self.reference) != (None, None, None)

    def pixel_mm(self, shape: tuple[int, int], where: str) -> float:
        """Return the size of a pixel of a picture of this shape, rows and columns.

        Raises SceneError when nothing was told, DesignError for a reference outside the picture.
        """
        if self.pixel_size_mm is not None:
            return self.pixel_size_mm
        if self.dpi is not None:
            return _INCH_MM / self.dpi
        if self.reference is None:
            raise SceneError(
                f"{where}: how large is a pixel of this scan? Give its pixel size (2.5um), "
                "the scanner's dpi (4800), or a length in it (reference 12,40,980,44=10mm)."
            )
        for column, row in (self.reference.start_px, self.reference.stop_px):
            if not (0.0 <= column <= shape[1] and 0.0 <= row <= shape[0]):
                raise DesignError(
                    f"{where}: the reference point {column:g},{row:g} lies outside the picture, which "
                    f"is {shape[1]} x {shape[0]} px; give columns and rows from its top left."
                )
        pixel = self.reference.length_mm / self.reference.length_px
        _require_pixel(pixel)
        return pixel


def _require_pixel(pixel_mm: float) -> None:
    if not PIXEL_RANGE_MM[0] <= pixel_mm <= PIXEL_RANGE_MM[1]:
        raise DesignError(out_of_range("the scan's pixel size", pixel_mm, "mm", *PIXEL_RANGE_MM))


def read_reference(text: str, where: str) -> Reference:
    """Read "12,40,980,44=10mm": column and row of two points, and how far apart they are."""
    match = _REFERENCE.fullmatch(text)
    try:
        if match is None:
            raise ValueError
        x0, y0, x1, y1 = (float(match[k]) for k in range(1, 5))
    except ValueError:
        raise DesignError(
            f"{where}: cannot read {text!a}; write column and row of two points and their distance, "
            "for example 12,40,980,44=10mm."
        ) from None
    return Reference(
        start_px=(x0, y0), stop_px=(x1, y1), length_mm=length_mm(match["length"], where)
    )
