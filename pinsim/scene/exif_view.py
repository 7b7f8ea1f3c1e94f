"""The angle of view a photo was taken with, from what the camera wrote into it."""

import math
from collections.abc import Mapping
from typing import Any

_FOCAL_LENGTH = 0x920A
_FOCAL_LENGTH_35MM = 0xA405
_FOCAL_PLANE_X_RESOLUTION = 0xA20E
_FOCAL_PLANE_UNIT = 0xA210
_PIXEL_X_DIMENSION = 0xA002
_MM_PER_UNIT = {2: 25.4, 3: 10.0}
DIAGONAL_35MM_MM = math.hypot(36.0, 24.0)


def _positive(value: Any) -> float | None:
    try:
        number = float(value)
    except (TypeError, ValueError, ZeroDivisionError):
        return None
    return number if math.isfinite(number) and number > 0.0 else None


def focal_length_px(tags: Mapping[int, Any], width_px: int, height_px: int) -> float | None:
    """Return the photo's focal length in its own pixels, or None when the tags do not tell.

    tags : the Exif directory; width_px, height_px : the stored picture, before any turning.
    The 35 mm equivalent is by the diagonal (0 means unknown); else the focal length and the sensor's
    pixels per inch or cm, rescaled when the picture was. Source: Exif 2.32, CIPA DC-008.
    """
    equivalent = _positive(tags.get(_FOCAL_LENGTH_35MM))
    if equivalent:
        return equivalent * math.hypot(width_px, height_px) / DIAGONAL_35MM_MM
    focal_mm = _positive(tags.get(_FOCAL_LENGTH))
    resolution = _positive(tags.get(_FOCAL_PLANE_X_RESOLUTION))
    unit_mm = _MM_PER_UNIT.get(tags.get(_FOCAL_PLANE_UNIT, 2))
    if not (focal_mm and resolution and unit_mm):
        return None
    recorded = _positive(tags.get(_PIXEL_X_DIMENSION)) or float(width_px)
    return focal_mm * (resolution / unit_mm) * (width_px / recorded)


def horizontal_view_deg(focal_px: float, width_px: int) -> float:
    """Return the angle across a rectilinear picture of a focal length, both in pixels."""
    return 2.0 * math.degrees(math.atan(0.5 * width_px / focal_px))
