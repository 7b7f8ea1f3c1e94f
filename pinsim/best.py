"""The first question of every builder - how big a hole - for a light, a place or the whole frame."""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim import optics
from pinsim.camera import Camera
from pinsim.errors import DesignError, out_of_range
from pinsim.material import LONGEST_NM, SHORTEST_NM, Material
from pinsim.material import material as material_named
from pinsim.optics.sharpness import detail_anywhere

Array = NDArray[np.float64]
Vector = tuple[float, float]

# What "still drawn" may mean: clear, plain to see, just to be made out.
CONTRASTS = (0.5, 0.2, 0.1)
_FRAME_WAVELENGTHS = 3  # leave an error below 1e-5 in the finest detail
_STEP = 0.085  # of the diameter's logarithm, between sizes that are tried
_ROUND = 0.06  # a peak that falls more than this from one size to the next is no parabola

# Mid-green, where the eye and the handbooks' tables of hole sizes are.
DEFAULT_WAVELENGTH_NM = 550.0


def light_for(wavelength_nm: float | None, material: str | Material | None) -> "optics.Light":
    """Return the light to judge sharpness by: one wavelength, a material's own, or mid-green."""
    if wavelength_nm is not None:
        if not SHORTEST_NM <= wavelength_nm <= LONGEST_NM:
            raise DesignError(
                out_of_range("wavelength", wavelength_nm, "nm", SHORTEST_NM, LONGEST_NM)
            )
        return optics.Light(wavelengths_nm=np.array([wavelength_nm]))
    if material is not None:
        return (material_named(material) if isinstance(material, str) else material).light
    return optics.Light(wavelengths_nm=np.array([DEFAULT_WAVELENGTH_NM]))


def best_diameter_mm(
    focal_length_mm: float,
    *,
    wavelength_nm: float | None = None,
    material: str | None = None,
    distance_mm: float = math.inf,
    contrast: float = 0.2,
    field_deg: float = 0.0,
) -> float:
    """Return the diameter of the hole that draws the finest detail at `contrast`, mm.

    focal_length_mm : hole to film. wavelength_nm : one colour of light; else material : a material's
    own light; else 550 nm. field_deg : angle off the axis on a flat film, the poorer of tangential
    and sagittal detail. Raises DesignError for values out of range.
    """
    if not 1.0 <= focal_length_mm <= 20_000.0:
        raise DesignError(out_of_range("focal length", focal_length_mm, "mm", 1.0, 20_000.0))
    if not 0.01 <= contrast <= 0.95:
        raise DesignError(f"contrast is {contrast:g}; it must be 0.01 to 0.95, for example 0.2.")
    if not 0.0 <= field_deg <= 80.0:
        raise DesignError(out_of_range("field angle", field_deg, "deg", 0.0, 80.0))
    if not distance_mm > 0.0:
        raise DesignError(f"distance is {distance_mm:g} mm; it must be more than 0.")
    return optics.best_diameter_mm(
        focal_length_mm=focal_length_mm,
        light=light_for(wavelength_nm, material),
        distance_mm=distance_mm,
        contrast=contrast,
        field_deg=field_deg,
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class FrameBest:
    """The best round holes of a camera for detail at one contrast.

    middle_mm : on the hole's axis. corner_mm : for the poorer direction in the corner farthest from
    the axis; None where no hole in this plate lights it. frame_mm : the compromise over the frame;
    frame_cycles_mm : the detail it draws, as FrameDetail has it.
    """

    contrast: float
    middle_mm: float
    corner_mm: float | None
    frame_mm: float
    frame_cycles_mm: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Tolerance:
    """How far a hole may be off before a share of the finest detail is lost.

    low_mm, high_mm : the smallest and the largest hole; None where no hole in reach is that poor.
    """

    lost_share: float
    best_mm: float
    low_mm: float | None
    high_mm: float | None

    @property
    def smaller_share(self) -> float | None:
        """How much smaller it may be, as a share of the best."""
        return None if self.low_mm is None else 1.0 - self.low_mm / self.best_mm

    @property
    def larger_share(self) -> float | None:
        """How much larger."""
        return None if self.high_mm is None else self.high_mm / self.best_mm - 1.0


class FrameDetail:
    """How fine round holes in a camera's plate draw over its frame, for one light and distance.

    Detail over the frame is the geometric mean, over the frame's area and over both directions
    (outwards from the axis and around it), of the finest detail: the hole that maximises it is the
    compromise. A per cent lost anywhere then counts alike; the poorest corner alone does not decide,
    as it would if the smallest were maximised, and the middle does not outvote the rest, as it would
    in a plain mean. Where a hole sends no light its detail counts as a thousandth of the best; places
    that none in this plate lights are left out.
    """

    def __init__(self, camera: Camera, *, light: "optics.Light", distance_mm: float) -> None:
        self._camera = camera
        self._light = light.condensed(_FRAME_WAVELENGTHS)
        self._whole_light = light
        self._distance_mm = distance_mm
        points, self._weights = _frame_points(camera)
        self._lay_out(points)
        lit = self._table[:, :-1].max(axis=(0, 2, 3)) > 0.0
        if not lit.any():  # a plate like a pipe: only the middle gets light
            self._weights = np.ones(1)
            self._lay_out([(0.0, 0.0)])
        else:
            self._weights = np.where(lit, self._weights, 0.0) / self._weights[lit].sum()
        self._floor = np.maximum(1e-3 * self._table.max(axis=(0, 1, 2)), 1e-9)

    def _lay_out(self, points: list[Vector]) -> None:
        """Tabulate detail at film points, and at the corner, which comes last and has no weight."""
        places = [*points, self._camera.frame_point_mm(*self._camera.far_corner)]
        self._rays = [self._camera.surface.chief_rays(*point) for point in places]
        self._directions = [_outwards_and_around(*point) for point in places]
        self._sizes, self._table = self._tabulate()

    def _details(self, diameter_mm: float, places: slice = slice(None)) -> Array:
        """Return (places, 2, contrasts): outwards and around; the corner last."""
        opening = optics.Ellipse(right_mm=diameter_mm, up_mm=diameter_mm)
        return np.stack(
            [
                detail_anywhere(
                    directions,
                    rays=rays,
                    opening=opening,
                    plate_thickness_mm=self._camera.plate_thickness_mm,
                    light=self._light,
                    distance_mm=self._distance_mm,
                    contrasts=CONTRASTS,
                    samples=48,
                )
                for rays, directions in zip(
                    self._rays[places], self._directions[places], strict=True
                )
            ]
        )

    def _tabulate(self) -> tuple[Array, Array]:
        """Return diameters, evenly spaced in their logarithm, and details (n, places, 2, contrasts)."""
        unit = []
        for rays, directions in zip(self._rays, self._directions, strict=True):
            if float(rays.falloff) > 0.0:
                shift = directions @ rays.shift.T
                turn = shift @ rays.focus(self._distance_mm).T
                reach = np.linalg.norm(shift, axis=1) / np.linalg.norm(turn, axis=1)
                unit += np.sqrt(self._light.mean_nm * 1e-6 * reach).tolist()
        low, high = 0.8 * min(unit), 2.6 * max(unit)
        # Through a thick plate only a wider hole shows the corner anything.
        bore = self._camera.plate_thickness_mm * max(
            float(np.hypot(*rays.tangent)) for rays in self._rays if float(rays.falloff) > 0.0
        )
        high = min(
            high + min(bore, 2.0 * high), max(0.45 * self._camera.focal_length_mm, 2.0 * low)
        )
        count = max(8, math.ceil(math.log(high / low) / _STEP) + 1)
        sizes = np.geomspace(low, high, count)
        return sizes, np.stack([self._details(float(size)) for size in sizes])

    def _over_frame(self, details: Array) -> Array:
        """Return the geometric mean over the frame: (..., places, 2, contrasts) -> (..., contrasts)."""
        inside = details[..., :-1, :, :]
        logs = np.log(np.maximum(inside, self._floor)).mean(axis=-2)
        return np.asarray(np.exp(np.tensordot(self._weights, logs, axes=(0, logs.ndim - 2))))

    def detail(self, diameter_mm: float, contrast: float = 0.2) -> float:
        """Return the detail over the frame of one hole, cycles/mm."""
        over = self._over_frame(self._details(diameter_mm))
        return float(over[CONTRASTS.index(contrast)])

    def _corner(self, diameter_mm: float, k: int) -> float:
        """Return the poorer detail in the corner."""
        return float(self._details(diameter_mm, slice(-1, None))[0, :, k].min())

    def best(self, contrast: float = 0.2) -> FrameBest:
        """Return the best holes. contrast : one of CONTRASTS."""
        k = CONTRASTS.index(contrast)
        corner = self._table[:, -1, :, k].min(axis=-1)
        over = self._over_frame(self._table)[:, k]
        frame_mm, frame_cycles_mm = _peak(
            self._sizes, over, lambda size: self.detail(size, contrast)
        )
        return FrameBest(
            contrast=contrast,
            middle_mm=optics.best_diameter_mm(
                focal_length_mm=self._camera.focal_length_mm,
                light=self._whole_light,
                distance_mm=self._distance_mm,
                contrast=contrast,
            ),
            corner_mm=_peak(self._sizes, corner, lambda size: self._corner(size, k))[0]
            if corner.max() > 0.0
            else None,
            frame_mm=frame_mm,
            frame_cycles_mm=frame_cycles_mm,
        )

    def tolerance(self, contrast: float = 0.2, *, lost_share: float = 0.1) -> Tolerance:
        """Return the holes on either side of the best that lose a share of its detail."""
        k = CONTRASTS.index(contrast)
        best = self.best(contrast)
        level = (1.0 - lost_share) * best.frame_cycles_mm
        over = self._over_frame(self._table)[:, k]

        def edge(step: int) -> float | None:
            inner = best.frame_mm, best.frame_cycles_mm
            beyond = self._sizes < best.frame_mm if step < 0 else self._sizes > best.frame_mm
            for i in np.flatnonzero(beyond)[::step]:
                outer = float(self._sizes[i]), float(over[i])
                if outer[1] <= level:
                    return self._crossing(inner, outer, level, contrast)
                inner = outer
            return None

        return Tolerance(
            lost_share=lost_share, best_mm=best.frame_mm, low_mm=edge(-1), high_mm=edge(1)
        )

    def _crossing(self, inner: Vector, outer: Vector, level: float, contrast: float) -> float:
        """Return where detail falls to a level between two holes, each (diameter, detail)."""
        for _ in range(3):
            share = (inner[1] - level) / (inner[1] - outer[1])
            size = inner[0] * math.exp(share * math.log(outer[0] / inner[0]))
            found = size, self.detail(size, contrast)
            if found[1] > level:
                inner = found
            else:
                outer = found
        return size


def _frame_points(camera: Camera) -> tuple[list[Vector], Array]:
    """Return film points and weights that average over the frame: Gauss-Legendre, 4 by 4.

    A round hole draws alike at all four mirror images of a point, so those are merged.
    """
    nodes, weights = np.polynomial.legendre.leggauss(4)
    merged: dict[Vector, float] = {}
    for across, share in zip(nodes, weights, strict=True):
        for up, other in zip(nodes, weights, strict=True):
            u, v = camera.frame_point_mm(float(across), float(up))
            key = round(abs(u), 9), round(abs(v), 9)
            merged[key] = merged.get(key, 0.0) + 0.25 * float(share * other)
    return list(merged), np.array(list(merged.values()))


def _outwards_and_around(u_mm: float, v_mm: float) -> Array:
    """Return unit directions (2, 2) along the film: away from the axis, and across that."""
    far = math.hypot(u_mm, v_mm)
    x, y = (u_mm / far, v_mm / far) if far > 1e-9 else (1.0, 0.0)
    return np.array([[x, y], [-y, x]])


def _peak(sizes: Array, detail: Array, at: Callable[[float], float]) -> tuple[float, float]:
    """Return the best size and its detail, between sizes evenly spaced in their logarithm.

    at : tells the detail of any size, for peaks that are not round: cliffs below 15 % contrast, and
    corners where one direction gets better while the other gets poorer.
    """
    i = int(detail.argmax())
    if i in {0, len(sizes) - 1}:
        return float(sizes[i]), float(detail[i])
    before, here, after = np.log(np.maximum(detail[i - 1 : i + 2], 1e-12))
    if here - min(before, after) > _ROUND:
        finer = np.geomspace(sizes[i - 1], sizes[i + 1], 13)[1:-1].tolist()
        found = [at(size) for size in finer]
        most = max(found)
        return float(finer[found.index(most)]), most
    bend = before - 2.0 * here + after
    offset = 0.5 * (before - after) / bend if bend < 0.0 else 0.0
    top = here - 0.25 * (before - after) * offset
    return float(sizes[i] * (sizes[i + 1] / sizes[i]) ** offset), float(np.exp(top))
