"""Which places are looked at closely: middle, edge, corner and the nearest thing, or those told."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import DesignError
from pinsim.render.picture import Picture
from pinsim.scene import DistanceMap, Scene
from pinsim.sheets.side_by_side.common_part import CommonPart, Place, Slopes, exposure_of

Array = NDArray[np.float64]
Point = tuple[float, float]

MOST_DETAILS = 8
# Of the common part's shorter side: below, nobody finds the place again; above, nothing is enlarged.
_SIDE_RANGE = (0.05, 0.2)
_CYCLES_ACROSS = 22.0  # of the finest detail drawn: so large on paper that each can be seen
_INSET = 0.15  # of a detail's side, from the picture's corner
_ALIKE = 0.95  # of the greatest distance from the axis: corners of one frame, but for a shift
_PROBE_PX = 32
_REACH = 0.15  # of a detail's side, over which its distance is told
_NEAR_ALIKE = 1.15  # so much farther than the nearest still counts as nearest
_GRID = 24  # places tried across the shorter side when the nearest thing is looked for


@dataclass(frozen=True, slots=True, kw_only=True)
class Detail:
    """A place of the scene that is shown enlarged.

    name : "centre", "edge", "corner", "nearest thing", "place 1"; where : more words, may be empty.
    x, y : its middle, shares of the common part from its left and top, upright; side_mm : on the common
    surface. figure_x, figure_y : the place its figures are for; of edge and corner the very
    end. distance_mm : of what is there.
    """

    name: str
    where: str
    x: float
    y: float
    side_mm: float
    figure_x: float
    figure_y: float
    distance_mm: float

    def place(self, common: CommonPart) -> Place:
        """Return the square shown."""
        wide, high = self.side_mm / common.width_mm, self.side_mm / common.height_mm
        return Place(self.x - 0.5 * wide, self.y - 0.5 * high, wide, high)

    def slopes(self, common: CommonPart) -> Slopes:
        """Return the ray that its figures are for."""
        return common.slopes(self.figure_x, self.figure_y)


def check_points(points: Sequence[Point]) -> None:
    """Refuse places that lie outside the picture, in one line."""
    for x, y in points:
        for name, value in (("X", x), ("Y", y)):
            if not 0.0 <= value <= 1.0:  # also refuses nan
                raise DesignError(
                    f"detail {x:g},{y:g}: {name} is {value:g}; it must be 0 to 1, the share of what "
                    "all designs show, from its left and its top."
                )
    if len(points) > MOST_DETAILS:
        raise DesignError(
            f"{len(points)} details are too many for one page; give {MOST_DETAILS} at most."
        )


def choose_details(
    scene: Scene,
    picture: Picture,
    common: CommonPart,
    points: Sequence[Point],
    finest_cycles_deg: float,
) -> list[Detail]:
    """Return the places to look at.

    picture : the first, which tells where there is something to see. points : those told; without any,
    middle, edge, corner and, with a distance map, the nearest thing. finest_cycles_deg : the finest
    detail that any of the designs draws, for the size of what is shown.
    """
    low, high = _SIDE_RANGE
    shorter = min(common.width_mm, common.height_mm)
    mm_per_deg = math.radians(common.surface.focal_length_mm)
    wanted = _CYCLES_ACROSS / max(finest_cycles_deg, 1e-9) * mm_per_deg
    side_mm = min(max(wanted, low * shorter), high * shorter)
    chooser = _Chooser(scene, picture, common, side_mm)
    if points:
        return [chooser.told(number, point) for number, point in enumerate(points, start=1)]
    details = [chooser.centre(), chooser.edge(), chooser.corner()]
    nearest = chooser.nearest(details)
    return [*details, nearest] if nearest else details


class _Chooser:
    """Looks for places in the common part. Sides of details are shares of its width and height."""

    def __init__(self, scene: Scene, picture: Picture, common: CommonPart, side_mm: float) -> None:
        self._scene, self._common = scene, common
        self._side_mm = side_mm
        self._wide = side_mm / common.width_mm
        self._high = side_mm / common.height_mm
        # What there is to see, at a detail's own scale, looked at again and again.
        shape = round(_PROBE_PX / self._high), round(_PROBE_PX / self._wide)
        self._probe = exposure_of(picture, common, common.whole, shape)
        # The middle of a detail in the very corner, inset a little.
        self._end_x = (0.5 + _INSET) * self._wide
        self._end_y = (0.5 + _INSET) * self._high

    def centre(self) -> Detail:
        return self._detail("centre", "", 0.5, 0.5)

    def edge(self) -> Detail:
        """Return the end of the longer side that shows most, unless the other is farther off axis."""
        if self._common.width_mm >= self._common.height_mm:
            ends = {"left": (0.0, 0.5), "right": (1.0, 0.5)}
        else:
            ends = {"upper": (0.5, 0.0), "lower": (0.5, 1.0)}
        return self._end("edge", ends)

    def corner(self) -> Detail:
        """Return the corner that shows most of those farthest from the axis."""
        ends = {
            f"{up} {side}": (x, y)
            for up, y in (("upper", 0.0), ("lower", 1.0))
            for side, x in (("left", 0.0), ("right", 1.0))
        }
        return self._end("corner", ends)

    def nearest(self, others: Sequence[Detail]) -> Detail | None:
        """Return where the nearest thing is that shows anything; None without a map or if shown."""
        if not isinstance(self._scene.distance, DistanceMap):
            return None
        sides = self._common.width_mm, self._common.height_mm
        counts = [min(96, math.ceil(_GRID * side / min(sides))) for side in sides]
        xs = np.linspace(self._end_x, 1.0 - self._end_x, counts[0])
        ys = np.linspace(self._end_y, 1.0 - self._end_y, counts[1])
        places = [(float(x), float(y)) for y in ys for x in xs]
        inverse = np.array([self._inverse_mm(x, y) for x, y in places])
        if not inverse.max() > 0.0:
            return None
        near = [
            place
            for place, one in zip(places, inverse, strict=True)
            if one * _NEAR_ALIKE >= inverse.max()
        ]
        near = near[:: max(1, len(near) // 40)]
        x, y = max(near, key=lambda place: self._contrast(*place))
        apart = [max(abs(x - one.x) / self._wide, abs(y - one.y) / self._high) for one in others]
        if min(apart, default=math.inf) < 0.5:
            return None
        return self._detail("nearest thing", "", x, y)

    def told(self, number: int, point: Point) -> Detail:
        """Return a place pointed at: shown inside the picture, its figures for the very place."""
        x = min(max(point[0], 0.5 * self._wide), 1.0 - 0.5 * self._wide)
        y = min(max(point[1], 0.5 * self._high), 1.0 - 0.5 * self._high)
        where = f"at {point[0]:.2g},{point[1]:.2g}"
        return self._detail(f"place {number}", where, x, y, point)

    def _end(self, name: str, ends: dict[str, Point]) -> Detail:
        off_axis = {where: math.hypot(*self._common.slopes(*end)) for where, end in ends.items()}
        farthest = max(off_axis.values())
        inside = {
            where: (
                min(max(x, self._end_x), 1.0 - self._end_x),
                min(max(y, self._end_y), 1.0 - self._end_y),
            )
            for where, (x, y) in ends.items()
            if off_axis[where] >= _ALIKE * farthest
        }
        where = max(inside, key=lambda one: self._contrast(*inside[one]))
        return self._detail(name, where, *inside[where], ends[where])

    def _detail(
        self, name: str, where: str, x: float, y: float, figure: Point | None = None
    ) -> Detail:
        figure_x, figure_y = figure or (x, y)
        inverse = self._inverse_mm(figure_x, figure_y)
        return Detail(
            name=name,
            where=where,
            x=x,
            y=y,
            side_mm=self._side_mm,
            figure_x=figure_x,
            figure_y=figure_y,
            distance_mm=1.0 / inverse if inverse > 0.0 else math.inf,
        )

    def _contrast(self, x: float, y: float) -> float:
        """Return how much a place shows: spread of its light over its mean; -1 where uncovered."""
        rows, columns = self._probe.shape[:2]
        high, wide = max(1, round(self._high * rows)), max(1, round(self._wide * columns))
        top = min(max(round(y * rows - 0.5 * high), 0), rows - high)
        left = min(max(round(x * columns - 0.5 * wide), 0), columns - wide)
        seen = self._probe[top : top + high, left : left + wide]
        if np.isnan(seen).any():
            return -1.0
        return float(seen.std() / max(float(seen.mean()), 0.02))

    def _inverse_mm(self, x: float, y: float) -> float:
        """Return 1/distance along the axis around a place, 1/mm: the median of what is there."""
        distance = self._scene.distance
        if not isinstance(distance, DistanceMap):
            return 1.0 / distance
        rays = [
            self._common.slopes(
                min(max(x + i * _REACH * self._wide, 0.0), 1.0),
                min(max(y + j * _REACH * self._high, 0.0), 1.0),
            )
            for i in (-1, 0, 1)
            for j in (-1, 0, 1)
        ]
        return float(np.median(inverse_distances(self._scene, distance, np.array(rays))))


def inverse_distances(scene: Scene, distance: DistanceMap, slopes: Array) -> Array:
    """Return 1/distance along the hole's axis, 1/mm, of what rays meet. slopes : (n, 2)."""
    rows, columns = scene.photo.shape
    scale: Array | float = 1.0
    if scene.projection == "equirectangular":
        ahead = np.concatenate([slopes, np.ones((len(slopes), 1))], axis=1)
        x, y, z = scene.camera_to_image @ ahead.T
        place = scene.place
        column = place.ahead_column + place.column_per_rad * np.arctan2(x, z)
        row = place.horizon_row - place.row_per_rad * np.arctan2(y, np.hypot(x, z))
        turn = 2.0 * math.pi * place.column_per_rad
        column -= turn * np.rint((column - 0.5 * (columns - 1)) / turn)
        scale = np.linalg.norm(ahead, axis=1)  # a map along rays, told along the axis
    else:
        column = 0.5 * (columns - 1) + slopes[:, 0] * scene.focal_length_px
        row = 0.5 * (rows - 1) - slopes[:, 1] * scene.focal_length_px
    inverse = distance.inverse_mm(
        np.clip(np.rint(row), 0, rows - 1).astype(np.intp),
        np.clip(np.rint(column), 0, columns - 1).astype(np.intp),
    )
    along_ray = distance.along == "ray"
    return np.asarray(inverse * (scale if along_ray else 1.0), np.float64)
