"""The angle of view a photo was taken with, from what the camera wrote into it."""

import math
from collections.abc import Mapping
from typing import Any, NamedTuple

_FOCAL_LENGTH = 0x920A
_FOCAL_LENGTH_35MM = 0xA405
_FOCAL_PLANE_X_RESOLUTION = 0xA20E
_FOCAL_PLANE_UNIT = 0xA210
_PIXEL_X_DIMENSION = 0xA002
# Inch and cm are Exif's; mm and um are TIFF/EP's (ISO 12234-2), which some raw files use.
_MM_PER_UNIT = {2: 25.4, 3: 10.0, 4: 1.0, 5: 0.001}
DIAGONAL_35MM_MM = math.hypot(36.0, 24.0)
# Along the longer side: no lens of a camera sees less or, drawn rectilinear, more.
BELIEVED_DEG = (2.0, 170.0)


class FocalLength(NamedTuple):
    """A focal length in stored pixels, or None; note : what was told and not believed."""

    px: float | None = None
    note: str = ""


def _positive(value: Any) -> float | None:
    try:
        number = float(value)
    except (TypeError, ValueError, ZeroDivisionError):
        return None
    return number if math.isfinite(number) and number > 0.0 else None


def _is_zero(value: Any) -> bool:
    try:
        return float(value) == 0.0
    except (TypeError, ValueError, ZeroDivisionError):
        return False


def told_focal_length(tags: Mapping[int, Any], width_px: int, height_px: int) -> FocalLength:
    """Return the focal length that the tags tell, in the picture's own pixels, and what is wrong.

    tags : the Exif directory; width_px, height_px : the stored picture, before any turning.
    The 35 mm equivalent is by the diagonal (0 means unknown); else the focal length and the sensor's
    pixels per inch or cm, rescaled when the picture was. Source: Exif 2.32, CIPA DC-008. An angle of
    view that no lens has is ignored, with a note.
    """
    note = ""
    equivalent = _positive(tags.get(_FOCAL_LENGTH_35MM))
    if equivalent:
        focal_px = equivalent * math.hypot(width_px, height_px) / DIAGONAL_35MM_MM
        note = _unbelievable(f"{equivalent:g} mm in 35 mm film", focal_px, width_px, height_px)
        if not note:
            return FocalLength(focal_px)
    focal_mm = _positive(tags.get(_FOCAL_LENGTH))
    resolution = _positive(tags.get(_FOCAL_PLANE_X_RESOLUTION))
    unit_mm = _MM_PER_UNIT.get(tags.get(_FOCAL_PLANE_UNIT, 2))
    if not (focal_mm and resolution and unit_mm):
        if not note and _is_zero(tags.get(_FOCAL_LENGTH)):
            note = "the focal length in its Exif data is 0; ignored"
        return FocalLength(None, note)
    recorded = _positive(tags.get(_PIXEL_X_DIMENSION)) or float(width_px)
    focal_px = focal_mm * (resolution / unit_mm) * (width_px / recorded)
    per_mm = resolution / unit_mm
    odd = _unbelievable(
        f"{focal_mm:g} mm at {per_mm:.3g} pixels per mm", focal_px, width_px, height_px
    )
    return FocalLength(None, odd) if odd else FocalLength(focal_px, note)


def focal_length_px(tags: Mapping[int, Any], width_px: int, height_px: int) -> float | None:
    """Return the photo's focal length in its own pixels, or None when the tags do not tell.

    As told_focal_length, without its note.
    """
    return told_focal_length(tags, width_px, height_px).px


def _unbelievable(told: str, focal_px: float, width_px: int, height_px: int) -> str:
    """Return a note when a focal length means an angle of view that no lens has, or nothing."""
    view_deg = horizontal_view_deg(focal_px, max(width_px, height_px))
    if BELIEVED_DEG[0] <= view_deg <= BELIEVED_DEG[1]:
        return ""
    return (
        f"the focal length in its Exif data ({told}) would be an angle of view of {view_deg:.3g} deg; "
        "ignored"
    )


def horizontal_view_deg(focal_px: float, width_px: int) -> float:
    """Return the angle across a rectilinear picture of a focal length, both in pixels."""
    return 2.0 * math.degrees(math.atan(0.5 * width_px / focal_px))
