"""Two designs side by side: the same part of the scene, with captions, a centre and a corner detail."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.numbers import Figures, figures
from pinsim.progress import Reporter, ignore
from pinsim.render.develop import LOOK_TEXT, Look, develop, turn
from pinsim.render.picture import Picture
from pinsim.render.preview import preview
from pinsim.render.resample import Part, resample_part
from pinsim.scene import Scene
from pinsim.sheets.lettering import GAP, Paper, Sheet, text_height
from pinsim.units import format_time

Float = NDArray[np.float32]

PICTURE_PX = 900
DETAIL_SHARE = 0.16  # of the picture's shorter side


@dataclass(frozen=True, slots=True)
class _Window:
    """A part of the scene by the tangents of its edges, right and up from the hole's axis."""

    left: float
    right: float
    bottom: float
    top: float

    @property
    def width(self) -> float:
        return self.right - self.left

    @property
    def height(self) -> float:
        return self.top - self.bottom

    def common(self, other: "_Window") -> "_Window":
        return _Window(
            max(self.left, other.left),
            min(self.right, other.right),
            max(self.bottom, other.bottom),
            min(self.top, other.top),
        )


def _seen(picture: Picture) -> _Window:
    """Return the window that holds all covered film of a picture."""
    rows = np.flatnonzero(~np.isnan(picture.exposure[..., 0]).all(axis=1))
    columns = np.flatnonzero(~np.isnan(picture.exposure[..., 0]).all(axis=0))
    if rows.size == 0:
        raise DesignError("the photo shows nothing of what this film sees; check shift and view.")
    height, width = picture.exposure.shape[:2]
    film, z = picture.camera.film, picture.camera.focal_length_mm
    right = (np.array([columns[0], columns[-1] + 1]) - 0.5 * width) * picture.pitch_mm
    up = (0.5 * height - np.array([rows[-1] + 1, rows[0]])) * picture.pitch_mm
    return _Window(
        (right[0] + film.shift_right_mm) / z,
        (right[1] + film.shift_right_mm) / z,
        (up[0] + film.shift_up_mm) / z,
        (up[1] + film.shift_up_mm) / z,
    )


def _part(picture: Picture, window: _Window) -> Part:
    """Return where a window lies in a picture's exposure."""
    rows, columns = picture.exposure.shape[:2]
    film, z = picture.camera.film, picture.camera.focal_length_mm
    per = z / picture.pitch_mm
    left = window.left * per - film.shift_right_mm / picture.pitch_mm + 0.5 * columns
    top = 0.5 * rows - window.top * per + film.shift_up_mm / picture.pitch_mm
    return Part(top, left, window.height * per, window.width * per)


def _shown(picture: Picture, window: _Window, shape: tuple[int, int]) -> NDArray[np.uint8]:
    exposure = resample_part(picture.exposure, _part(picture, window), shape)
    codes = develop(exposure, gain=picture.gain, tone=picture.camera.tone)
    return np.asarray(turn(codes, picture.look), np.uint8)


def _details(window: _Window, picture: Picture) -> dict[str, _Window]:
    """Return the centre and the corner that shows most, as windows of one size."""
    side = DETAIL_SHARE * min(window.width, window.height)
    x = 0.5 * (window.left + window.right - side)
    y = 0.5 * (window.bottom + window.top - side)
    inset = 0.15 * side
    lows = {"lower": window.bottom + inset, "upper": window.top - inset - side}
    lefts = {"left": window.left + inset, "right": window.right - inset - side}

    def contrast(place: _Window) -> float:
        seen = resample_part(picture.exposure, _part(picture, place), (48, 48))
        if np.isnan(seen).any():
            return -1.0
        return float(seen.std() / max(float(seen.mean()), 0.02))

    corners = {
        f"{low} {left}": _Window(lefts[left], lefts[left] + side, lows[low], lows[low] + side)
        for low in lows
        for left in lefts
    }
    name = max(corners, key=lambda one: contrast(corners[one]))
    return {"centre": _Window(x, x + side, y, y + side), f"corner, {name}": corners[name]}


def compare(
    scene: Scene,
    cameras: Sequence[Camera],
    *,
    time_s: float | None = None,
    ev: float | None = None,
    wavelength_nm: float | None = None,
    look: Look = "upright",
    report: Reporter = ignore,
    on_picture: Callable[[Picture], None] | None = None,
) -> Sheet:
    """Return a sheet with the same part of a scene through two designs.

    on_picture : called with each finished picture, for its notes.
    Raises DesignError when there are not two designs, or they share no part of the scene.
    """
    if len(cameras) != 2:
        raise DesignError(f"compare takes two designs, not {len(cameras)}.")
    pictures = []
    for camera in cameras:
        picture = preview(
            scene,
            camera,
            time_s=time_s,
            ev=ev,
            wavelength_nm=wavelength_nm,
            look=look,
            report=report,
        )
        if on_picture:
            on_picture(picture)
        pictures.append(picture)
    window = _seen(pictures[0]).common(_seen(pictures[1]))
    if window.width <= 0.0 or window.height <= 0.0:
        raise DesignError("the two designs see no common part of the scene; check their shifts.")
    numbers = [figures(camera, wavelength_nm=wavelength_nm, best=False) for camera in cameras]
    return _laid_out(scene, pictures, numbers, window)


def _laid_out(
    scene: Scene, pictures: list[Picture], numbers: list[Figures], window: _Window
) -> Sheet:
    scale = PICTURE_PX / max(window.width, window.height)
    shape = (max(1, round(window.height * scale)), max(1, round(window.width * scale)))
    # Captions need room even beside a slim picture.
    column = max(shape[1], 640)
    detail_px = (column - GAP) // 2
    details = _details(window, pictures[0])
    title = f"{scene.name} through two designs"
    look = pictures[0].look
    captions = [_captions(p, f) for p, f in zip(pictures, numbers, strict=True)]
    verdict = _verdict(numbers)
    width = 2 * column + 3 * GAP
    room = width - 2 * GAP
    head = GAP + text_height(title, size=32, width=room) + text_height(LOOK_TEXT[look]) + GAP // 2
    caption_height = max(
        sum(text_height(line, size=size, width=column) for line, size in one) for one in captions
    )
    detail_top = head + caption_height + GAP // 2 + shape[0] + GAP
    foot = detail_top + detail_px + 30 + GAP
    height = foot + text_height(verdict, size=22, width=room) + GAP
    paper = Paper(width, height)
    y = paper.text(GAP, GAP, title, size=32, width=room)
    paper.text(GAP, y, LOOK_TEXT[look], faint=True)
    for i, picture in enumerate(pictures):
        x = GAP + i * (column + GAP)
        y = head
        for line, size in captions[i]:
            y = paper.text(x, y, line, size=size, width=column, faint=size < 22)
        top = head + caption_height + GAP // 2
        paper.picture(_shown(picture, window, shape), x, top)
        for j, (name, place) in enumerate(details.items()):
            across, down = _place_on(place, window, shape, look)
            size_px = round(place.width * scale)
            paper.mark(x + across, top + down, size_px, size_px, name.split(",", maxsplit=1)[0])
            at = x + j * (detail_px + GAP)
            paper.picture(_shown(picture, place, (detail_px, detail_px)), at, detail_top)
            enlarged = detail_px / size_px
            paper.text(
                at,
                detail_top + detail_px + 6,
                f"{name}, {enlarged:.1f} x enlarged",
                size=17,
                faint=True,
            )
    paper.text(GAP, foot, verdict, size=22, width=room)
    names = " and ".join(p.camera.summary for p in pictures)
    return paper.finished(f"pinsim: {scene.name} through {names}; {LOOK_TEXT[look]}")


def _place_on(
    place: _Window, window: _Window, shape: tuple[int, int], look: Look
) -> tuple[int, int]:
    """Return where a place stands on the shown picture: pixels from its left and upper edge."""
    across = (place.left - window.left) / window.width
    down = (window.top - place.top) / window.height
    if look == "screen":
        across = 1.0 - across - place.width / window.width
    if look != "upright":
        down = 1.0 - down - place.height / window.height
    return round(across * shape[1]), round(down * shape[0])


def _captions(picture: Picture, numbers: Figures) -> list[tuple[str, int]]:
    """Return lines with their letter size, for one picture."""
    camera = picture.camera
    far = numbers.far
    return [
        (camera.name, 26),
        (camera.summary, 22),
        (
            f"far detail to {far.detail_cycles_mm:.2g} cycles/mm at 20 % contrast, "
            f"half of a point's light within {far.spot_mm:.2g} mm; "
            f"corner {numbers.corner_falloff_stops:.1f} stops darker; "
            f"{camera.material_name}, {camera.tone}",
            18,
        ),
    ]


def _verdict(numbers: list[Figures]) -> str:
    """Return the line that says which draws finer and what it costs in time."""
    # Detail is compared at the object, as depths may differ.
    finer = [one.far.detail_cycles_mm * one.focal_length_mm for one in numbers]
    best = 0 if finer[0] >= finer[1] else 1
    side = ("left", "right")
    ratio = finer[best] / finer[1 - best]
    slow = 0 if numbers[0].times_s[0][1] >= numbers[1].times_s[0][1] else 1
    times = [one.times_s[0][1] for one in numbers]
    detail = (
        "Both draw equally fine far detail"
        if ratio < 1.02
        else f"The {side[best]} one draws {ratio:.2f} x finer far detail in the middle"
    )
    ev = numbers[0].times_s[0][0]
    time = (
        f"the {side[slow]} one needs {times[slow] / times[1 - slow]:.2g} x the time "
        f"({format_time(times[0])} left, {format_time(times[1])} right at EV {ev:g}, "
        "metered, no reciprocity correction)."
    )
    return f"{detail}; {time}"
