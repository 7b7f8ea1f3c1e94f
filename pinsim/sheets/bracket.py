"""A strip of one picture under exposure times a stop apart, each labelled with its time."""

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import DesignError
from pinsim.exposure.times import HAND_LEAST_S, round_time_s, time_text
from pinsim.render.develop import LOOK_TEXT
from pinsim.render.expose import expose
from pinsim.render.picture import Picture
from pinsim.sheets.lettering import GAP, Paper, Sheet, text_height

USUAL_COUNT = 5
CELL_PX = 400  # width of one picture of the strip, or height of an upright one
COUNTS = (3, 5, 7, 9)
_ACROSS = {3: 3, 5: 5, 7: 4, 9: 5}  # in a row, so that a strip stays legible on paper


def cell_width_px(width_mm: float, height_mm: float) -> int:
    """Return how many columns a picture of the strip has: its longer side is CELL_PX."""
    return max(16, round(CELL_PX * min(1.0, width_mm / height_mm)))


def at_time(picture: Picture, time_s: float) -> Picture:
    """Return the same picture as if the hole had been open for another time; nothing is rendered anew.

    Raises DesignError for a picture without a time, whose light is not known.
    """
    if picture.exposed is None:
        raise DesignError(
            "a picture without a time has no brightness of its own; give a time, or 'auto', and the EV."
        )
    exposed = expose(picture.camera, time_s=time_s, ev=picture.exposed.ev)
    return replace(picture, exposed=exposed, gain=exposed.gain)


def bracket_times_s(middle_s: float, count: int) -> list[float]:
    """Return times a stop apart around one, each rounded as one can time it, shortest first."""
    if count not in COUNTS:
        raise DesignError(
            f"a bracket of {count} is not possible; give one of {', '.join(map(str, COUNTS))}, "
            "so that one stands in the middle."
        )
    half = count // 2
    return [round_time_s(middle_s * 2.0**k) if k else middle_s for k in range(-half, half + 1)]


def bracket_strip(picture: Picture, *, count: int = USUAL_COUNT) -> Sheet:
    """Return a strip of a picture at its own time and at times a stop apart on either side.

    picture : made with a time (or "auto"); best as wide as `cell_width_px`, or it is shown reduced.
    count : 3, 5, 7 or 9. Raises DesignError.
    """
    if picture.exposed is None:
        raise DesignError("a bracket needs a picture that was made with a time, or with 'auto'.")
    shots = [at_time(picture, time) for time in bracket_times_s(picture.exposed.time_s, count)]
    cells = [np.asarray(_small(shot).codes(), np.uint8) for shot in shots]
    rows, columns = cells[0].shape[:2]
    across = _ACROSS[count]
    lines = _lines(picture, min(shot.exposed.time_s for shot in shots if shot.exposed))
    width = across * (columns + GAP) + GAP
    inner = width - 2 * GAP
    head = GAP + sum(text_height(line, size=size, width=inner) for line, size in lines) + GAP // 2
    below = text_height("1", size=26) + text_height("1", size=17)
    tall = rows + 10 + below + GAP
    paper = Paper(width, head + math.ceil(count / across) * tall)
    y = GAP
    for line, size in lines:
        y = paper.text(GAP, y, line, size=size, faint=size < 20, width=inner)
    for number, (shot, codes) in enumerate(zip(shots, cells, strict=True)):
        x = GAP + number % across * (columns + GAP)
        top = head + number // across * tall
        paper.picture(codes, x, top)
        y = paper.text(x, top + rows + 10, _time(shot), size=26)
        paper.text(x, y, _stops(shot), size=17, faint=True)
    return paper.finished(
        f"pinsim bracket: {picture.scene_name} through {picture.camera.name}, "
        f"{time_text(bracket_times_s(picture.exposed.time_s, count)[0])} to {_time(shots[-1])}; "
        f"{picture.camera.tone}, {LOOK_TEXT[picture.look]}"
    )


def _small(picture: Picture) -> Picture:
    """Return a picture no larger than a cell; one of that size as it is."""
    rows, columns = picture.exposure.shape[:2]
    width = cell_width_px(columns, rows)
    if columns <= width:
        return picture
    from pinsim.render.resample import resample_part, whole

    shape = max(1, round(rows * width / columns)), width
    light: NDArray[np.float32] = resample_part(picture.exposure, whole(picture.exposure), shape)
    return replace(picture, exposure=light, pitch_mm=picture.pitch_mm * columns / width)


def _time(picture: Picture) -> str:
    if picture.exposed is None:
        return ""
    return time_text(picture.exposed.time_s)


def _stops(picture: Picture) -> str:
    """Say how a shot lies to what its material needs in the middle of the film."""
    stops = round(math.log2(picture.gain), 1)
    if stops == 0.0:
        return "as needed"
    unit = "stop" if abs(stops) == 1.0 else "stops"
    return f"{abs(stops):g} {unit} {'more' if stops > 0.0 else 'less'}"


def _lines(picture: Picture, shortest_s: float) -> list[tuple[str, int]]:
    """Return the lines above the strip with their letter sizes."""
    camera, exposed = picture.camera, picture.exposed
    material = camera.material
    lines = [
        (f"{picture.scene_name} - {camera.name}", 28),
        (f"{camera.summary}; {camera.tone}, {LOOK_TEXT[picture.look]}", 19),
    ]
    if exposed is not None:
        correction = (
            f"corrected to {time_text(exposed.needed_s)} ({material.reciprocity.label})"
            if exposed.needed_s > 1.01 * exposed.metered_s
            else "which needs no correction"
        )
        doubt = material.reciprocity.outside_data(exposed.metered_s)
        lines.append(
            (
                f"{material.name} at EI {material.speed_iso:g}, EV {round(exposed.ev, 1):g}: "
                f"{time_text(exposed.metered_s)} metered, {correction}"
                f"{', beyond what is known of it' if doubt else ''}; times rounded by 1/6 stop at most",
                17,
            )
        )
    if shortest_s < HAND_LEAST_S:
        lines.append((f"times below {HAND_LEAST_S:g} s are too short by hand: use a shutter", 17))
    return lines
