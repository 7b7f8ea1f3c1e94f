"""A traced hole drawn over its scan, for the eye to check: outline, calipers, scale bar, captions."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from PIL import Image, ImageDraw, ImageFont

from pinsim.colour import encode_8bit
from pinsim.scene import Photo
from pinsim.sheets.lettering import GAP, Paper, Sheet, text_height
from pinsim.tracing import HoleScan

Codes = NDArray[np.uint8]
Colour = tuple[int, int, int]

PICTURE_PX = 960
PANEL_PX = 430
# Drawn larger and shrunk, so that lines are smooth.
_FINER = 3
# How much of the scan is shown: the hole and some plate.
_SHOWN_DIAMETERS = 1.45

OUTLINE: Colour = (255, 122, 0)
LONGEST: Colour = (0, 150, 235)
SHORTEST: Colour = (214, 40, 140)
_LIGHT: Colour = (255, 255, 255)
_DARK: Colour = (28, 28, 30)

_BAR_STEPS = (1.0, 2.0, 5.0)
_STRIP_PX = 190


@dataclass(frozen=True, slots=True)
class _View:
    """The square of the scan that is shown: its top left corner and side in pixels of the scan."""

    left: float
    top: float
    side: float

    def place(self, scan_px: NDArray[np.float64]) -> list[tuple[float, float]]:
        """Return places on the finer drawing. scan_px : (n, 2), pixel middles at whole numbers."""
        scale = PICTURE_PX * _FINER / self.side
        moved = (scan_px + 0.5 - np.array([self.left, self.top])) * scale
        return [(float(x), float(y)) for x, y in moved]


def hole_overlay(photo: Photo, hole: HoleScan, *, title: str, lines: tuple[str, ...]) -> Sheet:
    """Return the sheet. photo : the scan; title : its name; lines : what else is to be said."""
    side = _SHOWN_DIAMETERS * hole.longest_mm / hole.pixel_mm
    middle = hole.scan_px(0.5 * (hole.outline_mm.min(axis=0) + hole.outline_mm.max(axis=0))[None])[
        0
    ]
    view = _View(float(middle[0]) + 0.5 - 0.5 * side, float(middle[1]) + 0.5 - 0.5 * side, side)
    drawing = Image.fromarray(_enlarged(photo, view)).resize(
        (PICTURE_PX * _FINER, PICTURE_PX * _FINER), Image.Resampling.BILINEAR
    )
    _draw_hole(ImageDraw.Draw(drawing), hole, view)
    _draw_bar(ImageDraw.Draw(drawing), view, hole.pixel_mm)
    shown = np.asarray(drawing.resize((PICTURE_PX, PICTURE_PX), Image.Resampling.BOX))
    strip = _departure_strip(hole)
    captions = _captions(hole, lines)
    width = GAP + PICTURE_PX + GAP + PANEL_PX + GAP
    panel = sum(text_height(text, size=size, width=PANEL_PX) + 10 for text, size, _ in captions)
    height = GAP + 44 + max(PICTURE_PX, panel) + GAP + 30 + _STRIP_PX + GAP
    paper = Paper(width, height)
    paper.text(GAP, GAP - 6, title, size=24)
    top = GAP + 38
    paper.picture(shown, GAP, top)
    y = top
    for text, size, colour in captions:
        left = GAP + PICTURE_PX + GAP
        if colour is not None:
            swatch = np.broadcast_to(np.array(colour, np.uint8), (14, 14, 3))
            paper.picture(swatch, left, y + 5)
            left += 24
        y = paper.text(left, y, text, size=size, faint=size < 18, width=PANEL_PX) + 10
    y = top + PICTURE_PX + GAP - 6
    paper.text(
        GAP,
        y,
        "The outline unrolled: how far it lies outside (up) or inside (down) of the best ellipse, "
        "from right through up, left and down as seen from behind",
        size=16,
        faint=True,
    )
    paper.picture(strip, GAP, y + 28)
    return paper.finished(
        f"{title}: traced hole of {1000.0 * hole.area_equivalent_diameter_mm:.1f} um"
    )


def _enlarged(photo: Photo, view: _View) -> Codes:
    """Return the shown part of the scan, brightened so that its lightest parts are nearly white."""
    rows, columns = photo.shape
    top, left = max(0, math.floor(view.top)), max(0, math.floor(view.left))
    bottom = min(rows, math.ceil(view.top + view.side))
    right = min(columns, math.ceil(view.left + view.side))
    light = photo.linear(rows=slice(top, bottom), columns=slice(left, right))
    white = float(np.quantile(light, 0.99))
    codes = encode_8bit(np.asarray(light * np.float32(0.85 / max(white, 1e-4)), np.float32))
    # Beyond the scan's edge a middle grey: there is nothing to see.
    side = math.ceil(view.side) + 2
    canvas = Image.new("RGB", (side, side), (128, 128, 128))
    base_x, base_y = math.floor(view.left), math.floor(view.top)
    canvas.paste(Image.fromarray(codes), (left - base_x, top - base_y))
    box = (view.left - base_x, view.top - base_y)
    # Few pixels are shown as squares, as they are, so that nobody takes blur for detail.
    how = Image.Resampling.NEAREST if view.side < PICTURE_PX / 6 else Image.Resampling.BICUBIC
    if view.side > PICTURE_PX:
        how = Image.Resampling.LANCZOS
    shown = canvas.resize(
        (PICTURE_PX, PICTURE_PX), how, box=(*box, box[0] + view.side, box[1] + view.side)
    )
    return np.asarray(shown, np.uint8)


def _draw_hole(draw: ImageDraw.ImageDraw, hole: HoleScan, view: _View) -> None:
    outline = view.place(hole.scan_px(hole.outline_mm))
    closed = [*outline, outline[0]]
    draw.line(closed, fill=_DARK, width=5 * _FINER, joint="curve")
    draw.line(closed, fill=OUTLINE, width=2 * _FINER, joint="curve")
    for caliper, colour in ((hole.longest, LONGEST), (hole.shortest, SHORTEST)):
        ends = np.array([caliper.first, caliper.second])
        along = (ends[1] - ends[0]) / max(caliper.length, 1e-12)
        jaw = 0.06 * hole.longest_mm * np.array([-along[1], along[0]])
        for line in (ends, ends[0] + [-jaw, jaw], ends[1] + [-jaw, jaw]):
            places = view.place(hole.scan_px(np.asarray(line)))
            draw.line(places, fill=_LIGHT, width=4 * _FINER)
            draw.line(places, fill=colour, width=2 * _FINER)
    x, y = view.place(np.array([hole.centroid_px]))[0]
    arm = 9 * _FINER
    for line in (((x - arm, y), (x + arm, y)), ((x, y - arm), (x, y + arm))):
        draw.line(line, fill=_LIGHT, width=4 * _FINER)
        draw.line(line, fill=_DARK, width=2 * _FINER)


def _draw_bar(draw: ImageDraw.ImageDraw, view: _View, pixel_mm: float) -> None:
    """Draw a scale bar of a round length, about a fifth of the picture."""
    wanted_mm = 0.2 * view.side * pixel_mm
    power = 10.0 ** math.floor(math.log10(wanted_mm))
    length_mm = max(step * power for step in _BAR_STEPS if step * power <= wanted_mm)
    text = f"{length_mm:g} mm" if length_mm >= 1.0 else f"{1000.0 * length_mm:g} um"
    side = PICTURE_PX * _FINER
    length = length_mm / pixel_mm / view.side * side
    x, y, thick = 26 * _FINER, side - 30 * _FINER, 7 * _FINER
    edge = 2 * _FINER
    draw.rectangle((x - edge, y - edge, x + length + edge, y + thick + edge), fill=_DARK)
    draw.rectangle((x, y, x + length, y + thick), fill=_LIGHT)
    draw.text(
        (x, y - 30 * _FINER),
        text,
        fill=_LIGHT,
        font=ImageFont.load_default(20 * _FINER),
        stroke_width=3 * _FINER,
        stroke_fill=_DARK,
    )


def _departure_strip(hole: HoleScan) -> Codes:
    """Return the outline's departure from its best ellipse, by the direction from its middle."""
    from pinsim.tracing.outline import ellipse_departure

    width = (PICTURE_PX + GAP + PANEL_PX) * _FINER
    height = _STRIP_PX * _FINER
    strip = Image.new("RGB", (width, height), (250, 250, 248))
    draw = ImageDraw.Draw(strip)
    departure, _ = ellipse_departure(hole.outline_mm)
    direction = np.mod(np.arctan2(hole.outline_mm[:, 1], hole.outline_mm[:, 0]), 2.0 * math.pi)
    first = int(np.argmin(direction))
    direction, departure = np.roll(direction, -first), np.roll(departure, -first)
    # Half the strip is at least a hundredth of the diameter, so that noise looks small.
    top_mm = max(1.1 * float(np.abs(departure).max()), 0.01 * hole.area_equivalent_diameter_mm)
    middle = 0.5 * height
    for quarter in range(5):
        x = quarter * (width - 1) / 4
        draw.line(((x, 0), (x, height)), fill=(205, 205, 203), width=_FINER)
    draw.line(((0, middle), (width, middle)), fill=(120, 120, 122), width=_FINER)
    for sign in (-1.0, 1.0):
        y = middle - sign * hole.roughness_mm / top_mm * middle
        draw.line(((0, y), (width, y)), fill=(186, 186, 184), width=_FINER)
    points = [
        (float(d) / (2.0 * math.pi) * width, float(middle - e / top_mm * middle))
        for d, e in zip(direction, departure, strict=True)
    ]
    draw.line(points, fill=OUTLINE, width=2 * _FINER, joint="curve")
    font = ImageFont.load_default(15 * _FINER)
    for place, text in (
        ((8 * _FINER, 5 * _FINER), f"+{1000.0 * top_mm:.2g} um"),
        ((8 * _FINER, height - 24 * _FINER), f"-{1000.0 * top_mm:.2g} um"),
    ):
        draw.text(place, text, fill=(92, 92, 96), font=font)
    for quarter, text in enumerate(("", "up", "left", "down")):
        at = (quarter * (width - 1) / 4 + 6 * _FINER, height - 24 * _FINER)
        draw.text(at, text, fill=(92, 92, 96), font=font)
    return np.asarray(strip.reduce(_FINER), np.uint8)


def _captions(hole: HoleScan, lines: tuple[str, ...]) -> list[tuple[str, int, Colour | None]]:
    """Return the panel's lines, each with its size and the colour of what it names."""

    def micrometres(value_mm: float) -> str:
        return f"{1000.0 * value_mm:.1f} um"

    shown = (
        "as seen from behind"
        if hole.seen_from == "behind"
        else "as seen from the front; the design holds it mirrored"
    )
    return [
        (
            f"diameter {micrometres(hole.area_equivalent_diameter_mm)}, of the round hole of the "
            "same area",
            21,
            None,
        ),
        ("outline, half way from plate to hole in linear light", 18, OUTLINE),
        (f"longest {micrometres(hole.longest_mm)}", 18, LONGEST),
        (f"shortest {micrometres(hole.shortest_mm)}", 18, SHORTEST),
        (f"roughness {1000.0 * hole.roughness_mm:.2f} um rms from the best ellipse", 18, None),
        (f"circularity {hole.circularity:.3f} (a circle has 1)", 18, None),
        (
            f"The scan: {hole.polarity} hole, {shown}; {1000.0 * hole.pixel_mm:.3g} um to a pixel; "
            f"its noise moves the outline by {1000.0 * hole.noise_mm:.2g} um.",
            16,
            None,
        ),
        *((f"Note: {note}.", 16, None) for note in hole.notes),
        *((line, 16, None) for line in lines),
    ]
