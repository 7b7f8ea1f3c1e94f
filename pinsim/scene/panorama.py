"""Where a panorama lies on the sphere, and which way a camera in its middle looks.

An equirectangular picture maps the whole turn to full_width_px and the half turn from zenith to nadir
to full_height_px; a file may hold all of it or a part.
"""

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.tables import Table

Array = NDArray[np.float64]

# How far sides may be off, as stitchers round them: of a full sphere's 2 to 1, of one scale.
SHAPE_SLIP = 0.005
SHAPE_SLIP_PX = 2.0
LARGEST_PX = 1e6


@dataclass(frozen=True, slots=True, kw_only=True)
class PanoramaPlace:
    """Where a picture lies on the sphere, in its own pixels, and how its camera was held.

    full_width_px, full_height_px : of the whole sphere at the picture's scale. left_px, top_px : of
    the picture in it. The middle of the full width is straight ahead, of the full height the horizon.
    pitch_deg : how far above the horizon that middle really looks; roll_deg : how far the camera was
    turned clockwise, so that the horizon stands turned counterclockwise. heading_deg : the middle's
    compass direction, if known.
    """

    full_width_px: float
    full_height_px: float
    left_px: float = 0.0
    top_px: float = 0.0
    pitch_deg: float = 0.0
    roll_deg: float = 0.0
    heading_deg: float | None = None

    @property
    def row_per_rad(self) -> float:
        """Rows per radian of height."""
        return self.full_height_px / math.pi

    @property
    def column_per_rad(self) -> float:
        """Columns per radian of azimuth."""
        return 0.5 * self.full_width_px / math.pi

    @property
    def horizon_row(self) -> float:
        """The row of the horizon, 0 = middle of the first row."""
        return 0.5 * self.full_height_px - self.top_px - 0.5

    @property
    def ahead_column(self) -> float:
        """The column straight ahead, 0 = middle of the first column."""
        return 0.5 * self.full_width_px - self.left_px - 0.5

    def refuse(self, shape: tuple[int, int]) -> str | None:
        """Return what is wrong with this place for a picture of rows and columns, or None."""
        rows, columns = shape
        full = self.full_width_px, self.full_height_px
        if not all(1.0 <= side <= LARGEST_PX for side in full):
            return f"a full sphere of {full[0]:g} x {full[1]:g} px"
        if abs(full[0] - 2.0 * full[1]) > max(SHAPE_SLIP_PX, SHAPE_SLIP * full[0]):
            return (
                f"a full sphere of {full[0]:g} x {full[1]:g} px, which is not twice as wide as high"
            )
        for name, start, size, whole in (
            ("left", self.left_px, columns, full[0]),
            ("top", self.top_px, rows, full[1]),
        ):
            if not -SHAPE_SLIP_PX <= start <= whole - size + SHAPE_SLIP_PX:
                return (
                    f"{name} {start:g} px with {size} px of picture does not fit in a full "
                    f"{whole:g} px"
                )
        return None


def rotation(yaw_deg: float, pitch_deg: float, roll_deg: float) -> Array:
    """Return the (3, 3) matrix from a turned camera's right, up and ahead to the level one's.

    Yaw to the right about the vertical, then pitch up, then roll clockwise as seen from behind.
    """
    angles = np.radians([yaw_deg, pitch_deg, roll_deg])
    (sy, sp, sr), (cy, cp, cr) = np.sin(angles), np.cos(angles)
    yaw = np.array([[cy, 0.0, sy], [0.0, 1.0, 0.0], [-sy, 0.0, cy]])
    pitch = np.array([[1.0, 0.0, 0.0], [0.0, cp, sp], [0.0, -sp, cp]])
    roll = np.array([[cr, sr, 0.0], [-sr, cr, 0.0], [0.0, 0.0, 1.0]])
    return np.asarray(yaw @ pitch @ roll)


def is_full_sphere(shape: tuple[int, int]) -> bool:
    """Tell whether a picture is twice as wide as high, up to what stitchers round."""
    rows, columns = shape
    return abs(columns - 2.0 * rows) <= max(SHAPE_SLIP_PX, SHAPE_SLIP * columns)


def full_sphere(shape: tuple[int, int]) -> PanoramaPlace:
    """Return the place of a picture that is the whole sphere."""
    return PanoramaPlace(full_width_px=float(shape[1]), full_height_px=float(shape[0]))


def place_across(
    shape: tuple[int, int], view_deg: float, horizon_px: float | None = None
) -> PanoramaPlace:
    """Return the place of a picture by its angle from left edge to right.

    horizon_px : how far the horizon lies below the upper edge; the middle of the height if None.
    """
    rows, columns = shape
    full_width = columns * 360.0 / view_deg
    full_height = 0.5 * full_width
    if view_deg >= 359.99:
        full_width = float(columns)
        if is_full_sphere(shape):
            full_height = float(rows)
    below = 0.5 * rows if horizon_px is None else horizon_px
    return PanoramaPlace(
        full_width_px=full_width,
        full_height_px=full_height,
        left_px=0.5 * (full_width - columns),
        top_px=0.5 * full_height - below,
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class ToldPlace:
    """What people say of a panorama's place, in the picture's pixels; None is not said.

    where : where it stands, for error texts.
    """

    where: str
    full_width_px: float | None = None
    full_height_px: float | None = None
    left_px: float | None = None
    top_px: float | None = None
    horizon_px: float | None = None

    @property
    def tells_full(self) -> bool:
        """Whether anything but the horizon is told."""
        return any(
            told is not None
            for told in (self.full_width_px, self.full_height_px, self.left_px, self.top_px)
        )


def told_place(table: Table) -> ToldPlace | None:
    """Read the [panorama] table of a scene file; None when it is missing or empty."""
    keys = {
        "full_width": "full_width_px",
        "full_height": "full_height_px",
        "left": "left_px",
        "top": "top_px",
        "horizon_row": "horizon_px",
    }
    told: dict[str, float] = {}
    for key, name in keys.items():
        if not table.has(key):
            continue
        value = table.take(key)
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise SceneError(
                f"{table.place(key)} is {value!r}; it must be a plain number of the photo's pixels, "
                "for example 6000."
            )
        if not -LARGEST_PX <= value <= LARGEST_PX:
            raise SceneError(out_of_range(table.place(key), value, "px", -LARGEST_PX, LARGEST_PX))
        told[name] = float(value)
    table.refuse_leftovers()
    if not told:
        return None
    place = ToldPlace(where=table.where, **told)
    if place.horizon_px is not None and place.tells_full:
        raise SceneError(
            f"{table.where}: horizon_row and the full size exclude each other; "
            "keep full_width, left and top, or horizontal_view and horizon_row."
        )
    return place


def settled_place(
    shape: tuple[int, int],
    *,
    view_deg: float | None,
    told: ToldPlace | None,
    from_file: PanoramaPlace | None,
    why: str,
    name: str,
) -> tuple[PanoramaPlace, str]:
    """Return where a panorama lies, by what comes first, and a note where one is due.

    shape : rows and columns of the photo. A told place comes first, then the angle of view, then the
    file's own fields, which `why` tells to be unusable, then that the picture is a whole sphere.
    Raises SceneError, in one line, when none of them settles it.
    """
    pose = from_file or full_sphere(shape)
    note = ""
    if told is not None and told.tells_full:
        place = _by_full_size(shape, told)
    elif view_deg is not None or (told is not None and told.horizon_px is not None):
        if view_deg is None:
            raise SceneError(
                f"{told.where if told else name}: horizon_row needs the angle from the picture's left "
                'edge to its right too: horizontal_view = "200 deg".'
            )
        horizon = told.horizon_px if told is not None else None
        place = place_across(shape, view_deg, horizon)
        wrong = place.refuse(shape)
        if horizon is not None and wrong and told is not None:
            raise SceneError(
                f"{told.where}: horizon_row {told.horizon_px:g} with {view_deg:g} deg across "
                f"cannot be: {wrong}."
            )
        if from_file is not None and abs(from_file.full_width_px / place.full_width_px - 1) > 1e-3:
            note = "the angle of view as given; the panorama's place in its XMP data is not used"
    elif from_file is not None:
        return from_file, ""
    elif is_full_sphere(shape):
        return full_sphere(shape), ""
    else:
        raise SceneError(
            f"{name} is {shape[1]} x {shape[0]} pixels: a whole sphere is twice as wide as "
            f"high, and {why or 'nothing in the file tells which part this is'}. Say how wide it sees "
            "(--view 200deg, its middle on the horizon), or where it lies in the full panorama, in a "
            "scene file: [panorama] full_width = 12000, left = 0, top = 1500."
        )
    return (
        replace(
            place, pitch_deg=pose.pitch_deg, roll_deg=pose.roll_deg, heading_deg=pose.heading_deg
        ),
        note,
    )


def _by_full_size(shape: tuple[int, int], told: ToldPlace) -> PanoramaPlace:
    wide, high = told.full_width_px, told.full_height_px
    if wide is None and high is None:
        raise SceneError(
            f"{told.where}: left and top need the full size: full_width = 12000, of the whole turn."
        )
    wide = 2.0 * high if wide is None and high is not None else wide
    high = 0.5 * wide if high is None and wide is not None else high
    assert wide is not None
    assert high is not None
    for key, start, size, whole in (
        ("left", told.left_px, shape[1], wide),
        ("top", told.top_px, shape[0], high),
    ):
        if start is None and abs(whole - size) > SHAPE_SLIP_PX:
            raise SceneError(
                f"{told.where}: {key} is missing; the picture's {size} px are a part of {whole:g}: "
                f"say how many pixels of the full panorama lie before it, for example {key} = 0."
            )
    place = PanoramaPlace(
        full_width_px=wide,
        full_height_px=high,
        left_px=told.left_px or 0.0,
        top_px=told.top_px or 0.0,
    )
    wrong = place.refuse(shape)
    if wrong:
        raise SceneError(f"{told.where}: this cannot be: {wrong}.")
    return place


# Yaw, pitch and roll of a camera that looks around in a panorama.
LOOK_AT_RANGE_DEG = (("yaw", 360.0), ("pitch", 90.0), ("roll", 180.0))


def checked_look_at(angles_deg: tuple[float, ...]) -> tuple[float, float, float]:
    """Return yaw, pitch and roll of two or three angles; refuse what no camera does."""
    if len(angles_deg) not in (2, 3):
        raise SceneError(
            f"look-at has {len(angles_deg)} angles; it is yaw and pitch, and roll if wanted: "
            "30deg,-10deg."
        )
    yaw, pitch, roll = (*angles_deg, 0.0)[:3]
    for (name, most), value in zip(LOOK_AT_RANGE_DEG, (yaw, pitch, roll), strict=True):
        if not -most <= value <= most:
            raise SceneError(out_of_range(f"look-at {name}", value, "deg", -most, most))
    return yaw, pitch, roll
