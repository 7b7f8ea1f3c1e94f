"""A test chart of our own, and the small files that describe a scene and a camera."""

from pathlib import Path

import numpy as np
import numpy.typing as npt
from PIL import Image

Codes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]


def linear_of_srgb(codes: Codes) -> Floats:
    """Return linear light of 8-bit sRGB codes (IEC 61966-2-1: threshold 0.04045, power 2.4)."""
    value = codes.astype(float) / 255
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def srgb_of_linear(light: npt.ArrayLike) -> Codes:
    """Return 8-bit sRGB codes of linear light (IEC 61966-2-1: threshold 0.0031308)."""
    value = np.clip(np.asarray(light, float), 0, 1)
    encoded = np.where(value <= 0.0031308, 12.92 * value, 1.055 * value ** (1 / 2.4) - 0.055)
    return np.round(255 * encoded).astype(np.uint8)


def grey_chart(chart_px: int, photo_px: int, *, rng: np.random.Generator) -> Codes:
    """Return a grey chart (photo_px square) in the middle of black: codes 0 to 255.

    Four quarters: bars of four widths, a star of 18 rays, a slanted edge, grey patches over noise.
    The chart is unlike its mirror images, so a flipped picture cannot pass for a right one.
    """
    half = chart_px // 2
    v, u = np.mgrid[0:half, 0:half]
    bars = np.concatenate(
        [np.tile((np.arange(half) // width) % 2, (half // 4 + 1, 1)) for width in (1, 2, 4, 7)]
    )[:half]
    angle = np.arctan2(v - half / 2, u - half / 2)
    star = (np.hypot(u - half / 2, v - half / 2) < half * 0.47) * (np.sin(18 * angle) > 0)
    edge = np.where(u - half * 0.45 > np.tan(np.radians(5)) * (v - half / 2), 0.9, 0.18)
    patches = np.round((u // (half // 4) + 4 * (v // (half // 4))) / 20, 2)
    patches = np.clip(patches + 0.1 * rng.standard_normal(patches.shape), 0, 1)
    chart = np.block([[bars * 1.0, star * 1.0], [edge, patches]])
    photo = np.zeros((photo_px, photo_px))
    start = (photo_px - 2 * half) // 2
    photo[start : start + 2 * half, start : start + 2 * half] = chart
    return srgb_of_linear(photo)


def write_scene(
    folder: Path, codes: Codes, *, view_deg: float, distance_mm: float = np.inf
) -> Path:
    """Write a photo and its scene file; codes (rows, columns) or (rows, columns, 3)."""
    Image.fromarray(codes).convert("RGB").save(folder / "photo.png")
    lines = ['photo = "photo.png"', f'horizontal_view = "{view_deg!r} deg"']
    if np.isfinite(distance_mm):
        lines += ["[distance]", f'constant = "{distance_mm!r} mm"']
    path = folder / "scene.toml"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def write_camera(
    folder: Path,
    *,
    diameter_mm: float,
    focal_length_mm: float,
    width_mm: float,
    height_mm: float,
    shift_mm: tuple[float, float] = (0.0, 0.0),
    material: str = "colour",
) -> Path:
    """Write the file of a camera with a round hole in a plate of no thickness and flat film.

    shift_mm: the middle of the frame, right and up as the scene is seen.
    """
    path = folder / "camera.toml"
    path.write_text(
        f'name = "Box of the tests"\nfocal_length = "{focal_length_mm!r} mm"\n'
        f'[hole]\nshape = "round"\ndiameter = "{diameter_mm!r} mm"\nplate_thickness = "0 mm"\n'
        f'[film]\nwidth = "{width_mm!r} mm"\nheight = "{height_mm!r} mm"\n'
        f'surface = "flat"\nmaterial = "{material}"\n'
        f'shift = ["{shift_mm[0]!r} mm", "{shift_mm[1]!r} mm"]\n',
        encoding="utf-8",
    )
    return path


def view_deg_of(focal_length_px: float, columns: int) -> float:
    """Return the horizontal angle of view of a rectilinear photo."""
    return float(2 * np.degrees(np.arctan(columns / 2 / focal_length_px)))
