"""From a scan of a drilled hole to its outline, its measures and the opening that optics takes."""

import math
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import DesignError, out_of_range
from pinsim.optics import Traced
from pinsim.scene.door import read_photo
from pinsim.scene.photo import Photo
from pinsim.tracing.edge import Edge, trace_edge
from pinsim.tracing.find import Found, Polarity, block_means, find_hole
from pinsim.tracing.outline import (
    Caliper,
    area_and_centroid,
    calipers,
    circularity,
    clear_cells,
    resampled,
    roughness,
)
from pinsim.tracing.scale import Scale

Array = NDArray[np.float64]
Light = NDArray[np.float32]
SeenFrom = Literal["behind", "front"]

SEEN_FROM = ("behind", "front")
POLARITIES = ("auto", "bright", "dark")
CELLS_ACROSS = 256
DIAMETER_RANGE_MM = (0.01, 100.0)

# A hole more than this many pixels across is measured on means of pixels: finer is only slower.
_ENOUGH_ACROSS_PX = 1000
_MOST_POINTS = 4096
_LUMINANCE = np.array([0.2126, 0.7152, 0.0722], np.float32)  # IEC 61966-2-1, row Y
_ROWS_AT_ONCE = 512
_CLIPPED_SHARE = 0.5
_SOFT_SHARE = 0.1


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class HoleScan:
    """A hole as it was found in a scan. Lengths are mm, angles degrees from right towards up.

    outline_mm : (n, 2) right and up as seen from behind, anticlockwise, its area's centroid at 0.
    longest, shortest : caliper (Feret) diameters and where the jaws touch.
    roughness_mm : rms departure of the outline from the ellipse of the same area and second moments;
    an oval hole is not rough, a burred one is. circularity : 4 pi A / P^2, the perimeter P taken
    without waves shorter than 1/40 of it, so that a scan's noise does not lengthen it.
    centroid_px : column and row in the scan. pixel_mm : a pixel's size. opening : what is clear, for
    optics. polarity : whether the hole is brighter or darker than its plate. blur_mm : how soft the
    scan's edge is, a standard deviation; noise_mm : what the scan's noise moves points of the outline
    by; roughness below it is the scan's. notes : what was decided, for people.
    """

    outline_mm: Array
    area_equivalent_diameter_mm: float
    longest: Caliper
    shortest: Caliper
    roughness_mm: float
    circularity: float
    centroid_px: tuple[float, float]
    pixel_mm: float
    polarity: Polarity
    seen_from: SeenFrom
    blur_mm: float
    noise_mm: float
    opening: Traced
    notes: tuple[str, ...] = ()

    @property
    def longest_mm(self) -> float:
        """The longest caliper diameter."""
        return self.longest.length

    @property
    def shortest_mm(self) -> float:
        """The shortest caliper diameter."""
        return self.shortest.length

    def scan_px(self, places_mm: Array) -> Array:
        """Return columns and rows of the scan for places (n, 2) right and up of the centroid."""
        right = -1.0 if self.seen_from == "front" else 1.0
        turned = places_mm * np.array([right, -1.0]) / self.pixel_mm
        return np.asarray(turned + np.array(self.centroid_px))

    def scaled_to(self, diameter_mm: float) -> "HoleScan":
        """Return this hole with another area-equivalent diameter, as if the scale had been so."""
        low, high = DIAMETER_RANGE_MM
        if not low <= diameter_mm <= high:
            raise DesignError(out_of_range("hole diameter", diameter_mm, "mm", low, high))
        by = diameter_mm / self.area_equivalent_diameter_mm

        def caliper(old: Caliper) -> Caliper:
            ends = ((by * x, by * y) for x, y in (old.first, old.second))
            return Caliper(by * old.length, *ends)

        return replace(
            self,
            outline_mm=by * self.outline_mm,
            area_equivalent_diameter_mm=diameter_mm,
            longest=caliper(self.longest),
            shortest=caliper(self.shortest),
            roughness_mm=by * self.roughness_mm,
            pixel_mm=by * self.pixel_mm,
            blur_mm=by * self.blur_mm,
            noise_mm=by * self.noise_mm,
            opening=Traced(clear=self.opening.clear, cell_mm=by * self.opening.cell_mm),
        )


def trace_hole(
    path: Path,
    *,
    scale: Scale,
    diameter_mm: float | None = None,
    polarity: str = "auto",
    seen_from: str = "behind",
) -> HoleScan:
    """Read a scan and measure the hole in it.

    diameter_mm : the area-equivalent diameter, if it is known better than the scale tells; then the
    scale may be missing. Raises SceneError or DesignError, in one line, for what cannot be used.
    """
    photo = read_photo(path)
    # Told by the diameter alone, any pixel size does to begin with.
    unscaled = diameter_mm is not None and not scale.given
    pixel_mm = 1e-3 if unscaled else scale.pixel_mm(photo.shape, str(path))
    hole = measure_hole(
        _luminance(photo),
        pixel_mm=pixel_mm,
        polarity=polarity,
        seen_from=seen_from,
        where=str(path),
    )
    return hole if diameter_mm is None else hole.scaled_to(diameter_mm)


def measure_hole(
    light: NDArray[np.floating],
    *,
    pixel_mm: float,
    polarity: str = "auto",
    seen_from: str = "behind",
    where: str = "the scan",
) -> HoleScan:
    """Find the opening in a scan and measure it.

    light : (rows, columns) or (rows, columns, 3), linear. pixel_mm : a pixel's size. polarity : "auto",
    "bright" (lit through from the other side) or "dark". seen_from : "behind", as from inside the
    box, or "front", which shows the hole mirrored left to right. where : the scan, for error texts.
    Raises SceneError for a scan without a hole, with several of like size, with one that is cut off or
    fewer than 20 pixels across.
    """
    _require_choice("polarity", polarity, POLARITIES)
    _require_choice("seen_from", seen_from, SEEN_FROM)
    grey = np.asarray(light @ _LUMINANCE if light.ndim == 3 else light, np.float32)
    wanted: Polarity | None = (
        "bright" if polarity == "bright" else "dark" if polarity == "dark" else None
    )
    found = find_hole(grey, wanted, where)
    top, bottom, left, right = found.box
    step = math.ceil(max(bottom - top, right - left) / _ENOUGH_ACROSS_PX)
    if step > 1:
        grey = block_means(grey, step)
        found = find_hole(grey, found.polarity, where)
    edge = trace_edge(grey, found, where)
    return _measured(edge, found, step, pixel_mm, "front" if seen_from == "front" else "behind")


def _require_choice(name: str, value: str, allowed: tuple[str, ...]) -> None:
    if value not in allowed:
        raise DesignError(f"{name} is {value!r}; it must be one of: {', '.join(allowed)}.")


def _luminance(photo: Photo) -> Light:
    rows, columns = photo.shape
    grey = np.empty((rows, columns), np.float32)
    for top in range(0, rows, _ROWS_AT_ONCE):
        part = slice(top, top + _ROWS_AT_ONCE)
        np.matmul(photo.linear(rows=part), _LUMINANCE, out=grey[part])
    return grey


def _measured(
    edge: Edge, found: Found, step: int, pixel_mm: float, seen_from: SeenFrom
) -> HoleScan:
    # A mean of step x step pixels lies in their middle.
    outline_px = edge.outline_px * step + 0.5 * (step - 1)
    if len(outline_px) > _MOST_POINTS:
        outline_px = resampled(outline_px, _MOST_POINTS)
    _, centroid = area_and_centroid(outline_px)
    right = -1.0 if seen_from == "front" else 1.0
    outline = (outline_px - centroid) * np.array([right, -1.0]) * pixel_mm
    if area_and_centroid(outline)[0] < 0.0:
        outline = outline[::-1]
    outline = np.ascontiguousarray(outline)
    outline.flags.writeable = False
    diameter = 2.0 * math.sqrt(area_and_centroid(outline)[0] / math.pi)
    longest, shortest = calipers(outline)
    return HoleScan(
        outline_mm=outline,
        area_equivalent_diameter_mm=diameter,
        longest=longest,
        shortest=shortest,
        roughness_mm=roughness(outline),
        circularity=circularity(outline),
        centroid_px=(float(centroid[0]), float(centroid[1])),
        pixel_mm=pixel_mm,
        polarity=found.polarity,
        seen_from=seen_from,
        blur_mm=edge.blur_px * step * pixel_mm,
        noise_mm=edge.noise_px * step * pixel_mm,
        opening=opening_of(outline, diameter / CELLS_ACROSS),
        notes=_notes(edge, diameter / (pixel_mm * step)),
    )


def opening_of(outline_mm: Array, cell_mm: float) -> Traced:
    """Return the opening within an outline, on cells of the given size, each by its exact area."""
    half = math.ceil(float(np.abs(outline_mm).max()) / cell_mm) + 1
    clear = clear_cells(outline_mm, cell_mm, 2 * half)
    clear.flags.writeable = False
    return Traced(clear=clear, cell_mm=cell_mm)


def _notes(edge: Edge, across_px: float) -> tuple[str, ...]:
    notes = []
    if edge.specks:
        notes.append(
            f"{edge.specks} specks within the hole are taken for dust on the scan and left out"
        )
    if edge.clipped > _CLIPPED_SHARE:
        notes.append(
            "the bright side of the scan is overexposed, which shifts its edge; scan it darker"
        )
    if edge.blur_px > _SOFT_SHARE * across_px:
        notes.append(
            f"the scan is soft: its edge is {2.56 * edge.blur_px:.0f} px wide on a hole of "
            f"{across_px:.0f} px; fine burrs do not show"
        )
    return tuple(notes)
