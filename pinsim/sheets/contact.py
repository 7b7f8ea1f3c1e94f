"""A contact sheet: scenes down, designs across, each with its centre enlarged and a caption."""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.develop import LOOK_TEXT, Look
from pinsim.render.picture import Picture
from pinsim.render.preview import preview
from pinsim.render.resample import Part, resample_part, whole
from pinsim.scene import Scene
from pinsim.sheets.lettering import GAP, Paper, Sheet, text_height

CELL_PX = 460
CELL_HEIGHT_PX = 460
STRIP_PX = 120
ENLARGED = 4.0
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
    cells: list[list[_Cell]] = []
    for scene in scenes:
        row: list[_Cell] = []
        for camera in cameras:
            done = len(cells) * len(cameras) + len(row)
            report(Progress(done, total, f"{scene.name}, {camera.summary}"))
            picture = preview(
                scene, camera, time_s=time_s, ev=ev, wavelength_nm=wavelength_nm, look=look
            )
            if on_picture:
                on_picture(picture)
            row.append(_cell(picture))
        cells.append(row)
    return _laid_out(cells, across, look)


@dataclass(frozen=True, slots=True, eq=False)
class _Cell:
    """One picture of the sheet, as small as it is shown: codes, a strip of its centre, caption."""

    codes: NDArray[np.uint8]
    strip: NDArray[np.uint8]
    caption: list[tuple[str, int, bool]]
    scene_name: str


def _cell(picture: Picture) -> _Cell:
    film = picture.camera.film
    scale = min(CELL_PX / film.width_mm, CELL_HEIGHT_PX / film.height_mm)
    shape = max(1, round(film.height_mm * scale)), max(1, round(film.width_mm * scale))
    rows, columns = picture.exposure.shape[:2]
    # The strip lies across the middle, ENLARGED times as large as the picture above it.
    width = min(columns, columns * CELL_PX / (ENLARGED * shape[1]))
    height = width * STRIP_PX / CELL_PX
    middle = Part(0.5 * (rows - height), 0.5 * (columns - width), height, width)

    def shown(part: Part, size: tuple[int, int]) -> NDArray[np.uint8]:
        small = replace(picture, exposure=resample_part(picture.exposure, part, size))
        return np.asarray(small.codes(), np.uint8)

    return _Cell(
        shown(whole(picture.exposure), shape),
        shown(middle, (STRIP_PX, CELL_PX)),
        _caption(picture),
        picture.scene_name,
    )


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


def _laid_out(cells: list[list[_Cell]], across: int, look: Look) -> Sheet:
    rows = [line[i : i + across] for line in cells for i in range(0, len(line), across)]
    title = "Contact sheet"
    legend = f"{LOOK_TEXT[look]}; below each its centre, {ENLARGED:g} x enlarged"
    width = across * (CELL_PX + GAP) + GAP
    heights = []
    for row in rows:
        tallest = max(cell.codes.shape[0] for cell in row)
        text = max(
            sum(text_height(line, size=size, width=CELL_PX) for line, size, _ in cell.caption)
            for cell in row
        )
        heights.append((tallest, text))
    head = GAP + text_height(title, size=32) + GAP // 2
    head += text_height(legend, width=width - 2 * GAP)
    height = head + sum(a + b + STRIP_PX + 16 + GAP for a, b in heights)
    paper = Paper(width, math.ceil(height))
    y = paper.text(GAP, GAP, title, size=32)
    paper.text(GAP, y, legend, faint=True, width=width - 2 * GAP)
    top = head
    for row, (tallest, text) in zip(rows, heights, strict=True):
        for i, cell in enumerate(row):
            x = GAP + i * (CELL_PX + GAP)
            # Pictures of one row stand on one line, like prints on a shelf.
            paper.picture(cell.codes, x, top + tallest - cell.codes.shape[0])
            paper.picture(cell.strip, x, top + tallest + 8)
            y = top + tallest + STRIP_PX + 16
            for line, size, faint in cell.caption:
                y = paper.text(x, y, line, size=size, faint=faint, width=CELL_PX)
        top += tallest + STRIP_PX + text + 16 + GAP
    scenes = ", ".join(dict.fromkeys(cell.scene_name for line in cells for cell in line))
    return paper.finished(f"pinsim contact sheet: {scenes}; {LOOK_TEXT[look]}")
