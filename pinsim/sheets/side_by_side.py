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
    """A part of the scene by the angles of its edges, rad, right and up from the hole's axis.

    Angles are those along the film's middle lines, so that a window is the same part of the scene
    on films of any depth and bend.
    """

    left: float
    right: float
    bottom: float
    top: float

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
    top, left = float(rows[0]), float(columns[0])
    return _window(picture, Part(top, left, rows[-1] + 1.0 - top, columns[-1] + 1.0 - left))


def _window(picture: Picture, part: Part) -> _Window:
    """Return the angles of the edges of a part of a picture."""
    height, width = picture.exposure.shape[:2]
    film, pitch = picture.camera.film, picture.pitch_mm
    u = (np.array([part.left, part.left + part.width]) - 0.5 * width) * pitch
    v = (0.5 * height - np.array([part.top + part.height, part.top])) * pitch
    surface = picture.camera.surface
    right = surface.points_mm(u + film.shift_right_mm, 0.0)
    up = surface.points_mm(0.0, v + film.shift_up_mm)
    across = np.arctan2(right[:, 0], right[:, 2])
    above = np.arctan2(up[:, 1], up[:, 2])
    return _Window(float(across[0]), float(across[1]), float(above[0]), float(above[1]))


def _part(picture: Picture, window: _Window) -> Part:
    """Return where a window lies in a picture's exposure."""
    height, width = picture.exposure.shape[:2]
    film, pitch = picture.camera.film, picture.pitch_mm
    surface = picture.camera.surface
    left, right = (
        (surface.coordinate_mm(angle, "u") - film.shift_right_mm) / pitch + 0.5 * width
        for angle in (window.left, window.right)
    )
    bottom, top = (
        0.5 * height - (surface.coordinate_mm(angle, "v") - film.shift_up_mm) / pitch
        for angle in (window.bottom, window.top)
    )
    return Part(top, left, bottom - top, right - left)


def _shown(picture: Picture, part: Part, shape: tuple[int, int]) -> NDArray[np.uint8]:
    exposure = resample_part(picture.exposure, part, shape)
    codes = develop(exposure, gain=picture.gain, tone=picture.camera.tone)
    return np.asarray(turn(codes, picture.look), np.uint8)


def _matching(part: Part, picture: Picture, other: Picture) -> Part:
    """Return the part of another picture that shows the same small part of the scene.

    Found by the rays to the middles of its four edges.
    """
    x, y = part.left + 0.5 * part.width, part.top + 0.5 * part.height
    edges = [
        (part.left, y),
        (part.left + part.width, y),
        (x, part.top),
        (x, part.top + part.height),
    ]
    height, width = picture.exposure.shape[:2]
    film, pitch = picture.camera.film, picture.pitch_mm
    rows, columns = other.exposure.shape[:2]
    found = []
    for column, row in edges:
        ray = picture.camera.surface.points_mm(
            (column - 0.5 * width) * pitch + film.shift_right_mm,
            (0.5 * height - row) * pitch + film.shift_up_mm,
        )
        u, v = other.camera.surface.meet_mm(float(ray[0] / ray[2]), float(ray[1] / ray[2]))
        found.append(
            (
                (u - other.camera.film.shift_right_mm) / other.pitch_mm + 0.5 * columns,
                0.5 * rows - (v - other.camera.film.shift_up_mm) / other.pitch_mm,
            )
        )
    left, right, top, bottom = found[0][0], found[1][0], found[2][1], found[3][1]
    return Part(top, left, bottom - top, right - left)


def _details(window: _Window, picture: Picture) -> dict[str, Part]:
    """Return the centre and the corner that shows most, as squares of one size on this film."""
    whole = _part(picture, window)
    side = DETAIL_SHARE * min(whole.width, whole.height)
    inset = 0.15 * side
    tops = {"upper": whole.top + inset, "lower": whole.top + whole.height - inset - side}
    lefts = {"left": whole.left + inset, "right": whole.left + whole.width - inset - side}

    def contrast(place: Part) -> float:
        seen = resample_part(picture.exposure, place, (48, 48))
        if np.isnan(seen).any():
            return -1.0
        return float(seen.std() / max(float(seen.mean()), 0.02))

    corners = {
        f"{top} {left}": Part(tops[top], lefts[left], side, side) for top in tops for left in lefts
    }
    name = max(corners, key=lambda one: contrast(corners[one]))
    middle = Part(
        whole.top + 0.5 * (whole.height - side), whole.left + 0.5 * (whole.width - side), side, side
    )
    return {"centre": middle, f"corner, {name}": corners[name]}


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
    if window.right <= window.left or window.top <= window.bottom:
        raise DesignError("the two designs see no common part of the scene; check their shifts.")
    numbers = [figures(camera, wavelength_nm=wavelength_nm, best=False) for camera in cameras]
    return _laid_out(scene, pictures, numbers, window)


def _laid_out(
    scene: Scene, pictures: list[Picture], numbers: list[Figures], window: _Window
) -> Sheet:
    whole = _part(pictures[0], window)
    scale = PICTURE_PX / max(whole.width, whole.height)
    shape = (max(1, round(whole.height * scale)), max(1, round(whole.width * scale)))
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
        own = _part(picture, window)
        paper.picture(_shown(picture, own, shape), x, top)
        for j, (name, place) in enumerate(details.items()):
            part = _matching(place, pictures[0], picture)
            across, down, wide, high = _place_on(part, own, shape, look)
            paper.mark(x + across, top + down, wide, high, name.split(",", maxsplit=1)[0])
            at = x + j * (detail_px + GAP)
            paper.picture(_shown(picture, part, (detail_px, detail_px)), at, detail_top)
            enlarged = detail_px / wide
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
    part: Part, whole: Part, shape: tuple[int, int], look: Look
) -> tuple[int, int, int, int]:
    """Return where a part stands on the shown picture: left and upper edge, width and height, px."""
    across = (part.left - whole.left) / whole.width
    down = (part.top - whole.top) / whole.height
    wide, high = part.width / whole.width, part.height / whole.height
    if look == "screen":
        across = 1.0 - across - wide
    if look != "upright":
        down = 1.0 - down - high
    height, width = shape
    return round(across * width), round(down * height), round(wide * width), round(high * height)


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
    who = "it" if slow == best and ratio >= 1.02 else f"the {side[slow]} one"
    time = (
        f"both need {format_time(times[0])} at EV {ev:g}, metered, no reciprocity correction."
        if times[slow] < 1.02 * times[1 - slow]
        else f"{who} needs {times[slow] / times[1 - slow]:.2g} x the time "
        f"({format_time(times[0])} left, {format_time(times[1])} right at EV {ev:g}, "
        "metered, no reciprocity correction)."
    )
    return f"{detail}; {time}"
