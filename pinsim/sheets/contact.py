"""A contact sheet: scenes down, designs across, each with its caption."""

import math
from collections.abc import Callable, Sequence

from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.develop import LOOK_TEXT, Look
from pinsim.render.picture import Picture
from pinsim.render.preview import preview
from pinsim.scene import Scene
from pinsim.sheets.lettering import GAP, Paper, Sheet, text_height

CELL_PX = 460
CELL_HEIGHT_PX = 460
MOST_ACROSS = 6
WRAP_ACROSS = 3
MOST_CELLS = 120


def contact_sheet(
    scenes: Sequence[Scene],
    cameras: Sequence[Camera],
    *,
    time_s: float | None = None,
    ev: float | None = None,
    wavelength_nm: float | None = None,
    look: Look = "upright",
    report: Reporter = ignore,
    on_picture: Callable[[Picture], None] | None = None,
) -> Sheet:
    """Return a sheet of every scene through every design.

    Scenes go down, designs across; more than four designs of one scene are laid in rows of three.
    Raises DesignError when there is nothing to lay out, or too much to be read.
    """
    if not scenes or not cameras:
        raise DesignError("a contact sheet needs at least one scene and one design.")
    if len(scenes) * len(cameras) > MOST_CELLS:
        raise DesignError(
            f"{len(scenes)} scenes x {len(cameras)} designs are {len(scenes) * len(cameras)} pictures; "
            f"a sheet holds {MOST_CELLS}. Make several sheets."
        )
    if len(scenes) > 1 and len(cameras) > MOST_ACROSS:
        raise DesignError(
            f"{len(cameras)} designs across are too many to be read; a sheet of several scenes holds "
            f"{MOST_ACROSS}. Make several sheets."
        )
    across = len(cameras)
    if len(scenes) == 1 and across > WRAP_ACROSS + 1:
        across = WRAP_ACROSS if across <= 4 * WRAP_ACROSS else MOST_ACROSS
    total = len(scenes) * len(cameras)
    pictures: list[list[Picture]] = []
    for scene in scenes:
        row: list[Picture] = []
        for camera in cameras:
            done = len(pictures) * len(cameras) + len(row)
            report(Progress(done, total, f"{scene.name}, {camera.summary}"))
            film = camera.film
            width = CELL_PX * min(1.0, film.width_mm / film.height_mm * CELL_HEIGHT_PX / CELL_PX)
            picture = preview(
                scene,
                camera,
                time_s=time_s,
                ev=ev,
                wavelength_nm=wavelength_nm,
                look=look,
                width_px=max(16, round(width)),
                averaged=True,
            )
            row.append(picture)
            if on_picture:
                on_picture(picture)
        pictures.append(row)
    return _laid_out(pictures, across, look)


def _caption(picture: Picture) -> list[tuple[str, int, bool]]:
    """Return lines of text with letter size and faintness."""
    camera = picture.camera
    lines = [
        (f"{picture.scene_name} - {camera.name}", 20, False),
        (camera.summary, 17, False),
        (f"{camera.material_name}, {camera.tone}", 15, True),
    ]
    if picture.covered_share < 1.0:
        lines.append((f"photo covers {100.0 * picture.covered_share:.0f} % of the frame", 15, True))
    return lines


def _laid_out(pictures: list[list[Picture]], across: int, look: Look) -> Sheet:
    rows = [line[i : i + across] for line in pictures for i in range(0, len(line), across)]
    title = "Contact sheet"
    width = across * (CELL_PX + GAP) + GAP
    heights = []
    for row in rows:
        tallest = max(picture.exposure.shape[0] for picture in row)
        text = max(
            sum(text_height(line, size=size, width=CELL_PX) for line, size, _ in _caption(picture))
            for picture in row
        )
        heights.append((tallest, text))
    head = GAP + text_height(title, size=32) + text_height(LOOK_TEXT[look]) + GAP // 2
    height = head + sum(a + b + 8 + GAP for a, b in heights)
    paper = Paper(width, math.ceil(height))
    y = paper.text(GAP, GAP, title, size=32)
    paper.text(GAP, y, LOOK_TEXT[look], faint=True, width=width - 2 * GAP)
    top = head
    for row, (tallest, text) in zip(rows, heights, strict=True):
        for i, picture in enumerate(row):
            x = GAP + i * (CELL_PX + GAP)
            codes = picture.codes()
            # Pictures of one row stand on one line, like prints on a shelf.
            paper.picture(codes, x, top + tallest - codes.shape[0])
            y = top + tallest + 8
            for line, size, faint in _caption(picture):
                y = paper.text(x, y, line, size=size, faint=faint, width=CELL_PX)
        top += tallest + text + 8 + GAP
    scenes = ", ".join(dict.fromkeys(p.scene_name for line in pictures for p in line))
    return paper.finished(f"pinsim contact sheet: {scenes}; {LOOK_TEXT[look]}")
