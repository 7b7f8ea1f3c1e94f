"""A page in millimetres: what is laid on it becomes a picture, or a PDF whose letters stay letters.

Lengths are mm from the top left, letters in points. Both kinds use Pillow's own font, which is a
TrueType file of plain ASCII letters, so both break lines at the same words.
"""

import io
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image, ImageDraw, ImageFont

from pinsim.sheets.lettering import plain

Codes = NDArray[np.uint8]
Colour = tuple[int, int, int]

LEAF_DPI = 300.0
PX_PER_MM = LEAF_DPI / 25.4
MM_PER_PT = 25.4 / 72.0
LINE = 1.28  # line to line over letter size
_FINE = 4  # lines are drawn this much larger and reduced, which smooths them
_MEASURE_PX = 200  # letters this large measure all sizes alike

PAPER: Colour = (255, 255, 255)
INK: Colour = (20, 20, 22)
FAINT: Colour = (88, 88, 94)
HAIR: Colour = (190, 190, 188)
SHADE: Colour = (240, 240, 237)


@lru_cache(maxsize=64)
def _font(size_px: float) -> Any:
    return ImageFont.load_default(size_px)


@lru_cache(maxsize=1)
def _font_file() -> bytes:
    path: Any = _font(_MEASURE_PX).path
    path.seek(0)
    return bytes(path.read())


def width_mm(line: str, size_pt: float) -> float:
    """Return how wide a line of letters is."""
    return float(_font(_MEASURE_PX).getlength(plain(line))) / _MEASURE_PX * size_pt * MM_PER_PT


def height_mm(size_pt: float, lines: int = 1) -> float:
    """Return how much height lines take."""
    return lines * LINE * size_pt * MM_PER_PT


def broken(line: str, size_pt: float, room_mm: float) -> list[str]:
    """Return a text in lines no wider than the room, broken between words, long words within."""
    lines: list[str] = []
    for word in plain(line).split(" "):
        longer = f"{lines[-1]} {word}" if lines else word
        if lines and width_mm(longer, size_pt) <= room_mm:
            lines[-1] = longer
            continue
        rest = word
        while width_mm(rest, size_pt) > room_mm and len(rest) > 1:
            fits = len(rest) - 1
            while fits > 1 and width_mm(rest[:fits], size_pt) > room_mm:
                fits -= 1
            lines.append(rest[:fits])
            rest = rest[fits:]
        lines.append(rest)
    return lines


def to_px(length_mm: float) -> int:
    """Return whole pixels of a length."""
    return round(length_mm * PX_PER_MM)


@dataclass(frozen=True, slots=True)
class _Text:
    x: float
    y: float
    line: str
    size_pt: float
    colour: Colour
    heavy: bool


@dataclass(frozen=True, slots=True, eq=False)
class _Image:
    x: float
    y: float
    codes: Codes


@dataclass(frozen=True, slots=True)
class _Box:
    x: float
    y: float
    width: float
    height: float
    fill: Colour | None
    outline: Colour | None
    thick: float


@dataclass(frozen=True, slots=True)
class _Line:
    points: tuple[tuple[float, float], ...]
    colour: Colour
    thick: float
    dashes: tuple[float, ...]


_Item = _Text | _Image | _Box | _Line


class Leaf:
    """What lies on a page, in the order in which it was laid down."""

    def __init__(self, page_width_mm: float) -> None:
        self.page_width_mm = page_width_mm
        self.page_height_mm = 0.0
        self._items: list[_Item] = []

    def text(
        self,
        x: float,
        y: float,
        line: str,
        size_pt: float,
        *,
        colour: Colour = INK,
        heavy: bool = False,
        room_mm: float | None = None,
    ) -> float:
        """Write a line whose top is y, broken to a room if one is given; return the y below it."""
        for part in broken(line, size_pt, room_mm) if room_mm else [plain(line)]:
            if part:
                self._items.append(_Text(x, y, part, size_pt, colour, heavy))
            y += height_mm(size_pt)
        return y

    def picture(self, codes: NDArray[Any], x: float, y: float) -> tuple[float, float]:
        """Lay down a picture, (rows, columns, 1 or 3) uint8, at LEAF_DPI; return its width, height."""
        rgb = np.ascontiguousarray(np.broadcast_to(codes, (*codes.shape[:2], 3)), np.uint8)
        self._items.append(_Image(x, y, rgb))
        return codes.shape[1] / PX_PER_MM, codes.shape[0] / PX_PER_MM

    def box(
        self,
        x: float,
        y: float,
        width: float,
        height: float,
        *,
        fill: Colour | None = None,
        outline: Colour | None = None,
        thick: float = 0.2,
    ) -> None:
        """Draw a rectangle."""
        self._items.append(_Box(x, y, width, height, fill, outline, thick))

    def line(
        self,
        points: Sequence[tuple[float, float]],
        *,
        colour: Colour = HAIR,
        thick: float = 0.15,
        dashes: tuple[float, ...] = (),
    ) -> None:
        """Draw a line through points. dashes : lengths drawn and left out, by turns, mm."""
        self._items.append(_Line(tuple(points), colour, thick, dashes))

    def raster(self) -> Codes:
        """Return the page as sRGB codes, (rows, columns, 3), LEAF_DPI."""
        size = to_px(self.page_width_mm), to_px(self.page_height_mm)
        image = Image.new("RGB", size, PAPER)
        draw = ImageDraw.Draw(image)
        for item in self._items:
            _draw_item(image, draw, item)
        return np.asarray(image)

    def pdf(self, title: str) -> bytes:
        """Return the page as a PDF of its true size."""
        from reportlab.lib.utils import ImageReader
        from reportlab.pdfbase import pdfmetrics
        from reportlab.pdfbase.ttfonts import TTFont
        from reportlab.pdfgen.canvas import Canvas

        # Its own name, so that another font of this name in the same program is not replaced.
        name = "pinsim-letters"
        pdfmetrics.registerFont(TTFont(name, io.BytesIO(_font_file())))
        file = io.BytesIO()
        size = self.page_width_mm / MM_PER_PT, self.page_height_mm / MM_PER_PT
        # Invariant: no date in it, so that equal pages are equal files.
        canvas = Canvas(file, pagesize=size, invariant=1)
        canvas.setTitle(plain(title))
        canvas.setAuthor("pinsim")
        canvas.setViewerPreference("PrintScaling", "None")
        on_paper: dict[type, Callable[[Any], None]] = {
            _Text: lambda item: _write_text(canvas, item, name, self.page_height_mm),
            _Image: lambda item: canvas.drawImage(
                ImageReader(Image.fromarray(item.codes)),
                item.x / MM_PER_PT,
                (self.page_height_mm - item.y - item.codes.shape[0] / PX_PER_MM) / MM_PER_PT,
                item.codes.shape[1] / PX_PER_MM / MM_PER_PT,
                item.codes.shape[0] / PX_PER_MM / MM_PER_PT,
            ),
            _Box: lambda item: _write_box(canvas, item, self.page_height_mm),
            _Line: lambda item: _write_line(canvas, item, self.page_height_mm),
        }
        for item in self._items:
            on_paper[type(item)](item)
        canvas.save()
        return file.getvalue()


def _draw_item(image: Image.Image, draw: ImageDraw.ImageDraw, item: _Item) -> None:
    if isinstance(item, _Text):
        size = item.size_pt * MM_PER_PT * PX_PER_MM
        draw.text(
            (to_px(item.x), to_px(item.y)),
            item.line,
            item.colour,
            font=_font(size),
            # The one font at hand has no bold; a thin outline stands in for it.
            stroke_width=0.022 * size if item.heavy else 0,
            stroke_fill=item.colour,
        )
    elif isinstance(item, _Image):
        image.paste(Image.fromarray(item.codes), (to_px(item.x), to_px(item.y)))
    elif isinstance(item, _Box):
        box = (
            to_px(item.x),
            to_px(item.y),
            to_px(item.x + item.width) - 1,
            to_px(item.y + item.height) - 1,
        )
        thick = max(1, to_px(item.thick))
        draw.rectangle(box, fill=item.fill, outline=item.outline, width=thick)
    else:
        _draw_line(image, item)


def _draw_line(image: Image.Image, item: _Line) -> None:
    """Draw a line smoothly: larger, on a mask of its own, then reduced."""
    pieces = _dashed(item.points, item.dashes)
    points = [point for piece in pieces for point in piece]
    if not points:
        return
    reach = item.thick + 0.5
    left = max(0, to_px(min(x for x, _ in points) - reach))
    top = max(0, to_px(min(y for _, y in points) - reach))
    right = min(image.width, to_px(max(x for x, _ in points) + reach))
    bottom = min(image.height, to_px(max(y for _, y in points) + reach))
    if right <= left or bottom <= top:
        return
    mask = Image.new("L", ((right - left) * _FINE, (bottom - top) * _FINE), 0)
    pen = ImageDraw.Draw(mask)
    for piece in pieces:
        there = [((x * PX_PER_MM - left) * _FINE, (y * PX_PER_MM - top) * _FINE) for x, y in piece]
        pen.line(
            there, fill=255, width=max(1, round(item.thick * PX_PER_MM * _FINE)), joint="curve"
        )
    mask = mask.resize((right - left, bottom - top), Image.Resampling.BOX)
    image.paste(Image.new("RGB", mask.size, item.colour), (left, top), mask)


def _dashed(
    points: Sequence[tuple[float, float]], dashes: tuple[float, ...]
) -> list[list[tuple[float, float]]]:
    """Return the pieces of a line that are drawn."""
    if not dashes:
        return [list(points)]
    pieces: list[list[tuple[float, float]]] = []
    number, left = 0, dashes[0]
    current = [points[0]]
    for (x0, y0), (x1, y1) in pairwise(points):
        length = float(np.hypot(x1 - x0, y1 - y0))
        done = 0.0
        while length - done > left:
            done += left
            at = (x0 + (x1 - x0) * done / length, y0 + (y1 - y0) * done / length)
            if number % 2 == 0:
                pieces.append([*current, at])
            number += 1
            left = dashes[number % len(dashes)]
            current = [at]
        left -= length - done
        current.append((x1, y1))
    if number % 2 == 0:
        pieces.append(current)
    return pieces


def _set_colours(canvas: Any, fill: Colour | None, stroke: Colour | None) -> None:
    if fill is not None:
        canvas.setFillColorRGB(*(one / 255.0 for one in fill))
    if stroke is not None:
        canvas.setStrokeColorRGB(*(one / 255.0 for one in stroke))


def _write_text(canvas: Any, item: _Text, font: str, page_mm: float) -> None:
    size = item.size_pt
    ascent = float(_font(_MEASURE_PX).getmetrics()[0]) / _MEASURE_PX * size
    canvas.saveState()  # how letters are drawn would stay as it is for those that follow
    _set_colours(canvas, item.colour, item.colour)
    text = canvas.beginText(item.x / MM_PER_PT, (page_mm - item.y) / MM_PER_PT - ascent)
    text.setFont(font, size)
    text.setTextRenderMode(2 if item.heavy else 0)
    canvas.setLineWidth(0.044 * size)
    text.textOut(item.line)
    canvas.drawText(text)
    canvas.restoreState()


def _write_box(canvas: Any, item: _Box, page_mm: float) -> None:
    _set_colours(canvas, item.fill, item.outline)
    # As on the raster, the line lies inside the box.
    inset = 0.5 * item.thick if item.outline else 0.0
    canvas.setLineWidth(item.thick / MM_PER_PT)
    canvas.rect(
        (item.x + inset) / MM_PER_PT,
        (page_mm - item.y - item.height + inset) / MM_PER_PT,
        (item.width - 2.0 * inset) / MM_PER_PT,
        (item.height - 2.0 * inset) / MM_PER_PT,
        stroke=int(item.outline is not None),
        fill=int(item.fill is not None),
    )


def _write_line(canvas: Any, item: _Line, page_mm: float) -> None:
    _set_colours(canvas, None, item.colour)
    canvas.setLineWidth(item.thick / MM_PER_PT)
    canvas.setDash([one / MM_PER_PT for one in item.dashes])
    path = canvas.beginPath()
    for i, (x, y) in enumerate(item.points):
        go = path.lineTo if i else path.moveTo
        go(x / MM_PER_PT, (page_mm - y) / MM_PER_PT)
    canvas.drawPath(path, stroke=1, fill=0)
    canvas.setDash([])
