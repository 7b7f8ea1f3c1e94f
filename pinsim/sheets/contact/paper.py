"""A page in millimetres, drawn twice from one layout: as a picture, and as a PDF with real letters.

Letters are Bitstream Vera, which reportlab carries, measured once, so that lines break alike in both.
"""

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from PIL import Image, ImageDraw, ImageFont

from pinsim.sheets.contact.packed import draw_png
from pinsim.sheets.lettering import FAINT_INK, INK, PAPER, plain

Codes = NDArray[np.uint8]
MM_PER_PT = 25.4 / 72.0
LEADING = 1.32  # line to line over letter size
_ASCENT = 0.928  # Vera's own: from the top of a line to where its letters stand, over letter size
_MEASURED_PX = 200
# A number and its unit stay on one line.
_WITH_UNIT = re.compile(r"(?<=\d) (?=(?:%|c/mm|cm|deg|h|m|min|mm|nm|s)\b)")
FAILED_PAPER = (210, 206, 202)


@dataclass(frozen=True, slots=True, kw_only=True)
class Text:
    """A line of letters; x, y is its top left."""

    x_mm: float
    y_mm: float
    line: str
    size_pt: float
    bold: bool = False
    faint: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Place:
    """Where a picture lies: place in the list of frames, the frame itself or its enlarged middle."""

    x_mm: float
    y_mm: float
    width_mm: float
    height_mm: float
    frame: int
    what: Literal["frame", "detail", "failed"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Box:
    """A line around something."""

    x_mm: float
    y_mm: float
    width_mm: float
    height_mm: float
    weight_mm: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Page:
    """A page: its size and what lies on it."""

    width_mm: float
    height_mm: float
    things: tuple[Text | Place | Box, ...]


Fetch = Callable[[Place], Codes]
FetchPng = Callable[[Place], bytes]


@lru_cache(maxsize=32)
def _font(size_px: int, bold: bool) -> Any:
    return ImageFont.truetype(str(_file(bold)), size_px)


def _file(bold: bool) -> Path:
    import reportlab

    return Path(reportlab.__file__).parent / "fonts" / ("VeraBd.ttf" if bold else "Vera.ttf")


def width_mm(line: str, size_pt: float, *, bold: bool = False) -> float:
    """Return how wide a line is."""
    return float(_font(_MEASURED_PX, bold).getlength(line)) / _MEASURED_PX * size_pt * MM_PER_PT


def line_mm(size_pt: float) -> float:
    """Return from line to line."""
    return LEADING * size_pt * MM_PER_PT


def broken(line: str, size_pt: float, wide_mm: float, *, bold: bool = False) -> list[str]:
    """Return a line in ASCII, broken between words to a width; a word that is too long is cut."""
    parts: list[str] = []
    for word in map(plain, filter(None, _WITH_UNIT.sub("\N{NO-BREAK SPACE}", line).split(" "))):
        longer = f"{parts[-1]} {word}" if parts else word
        if parts and width_mm(longer, size_pt, bold=bold) <= wide_mm:
            parts[-1] = longer
            continue
        rest = word
        while len(rest) > 1 and width_mm(rest, size_pt, bold=bold) > wide_mm:
            fits = len(rest) - 1
            while fits > 1 and width_mm(rest[:fits], size_pt, bold=bold) > wide_mm:
                fits -= 1
            parts.append(rest[:fits])
            rest = rest[fits:]
        parts.append(rest)
    return parts


def as_picture(page: Page, px_per_mm: float, fetch: Fetch) -> Codes:
    """Return a page as sRGB codes; a frame's pixels are laid down as they are."""
    size = round(page.width_mm * px_per_mm), round(page.height_mm * px_per_mm)
    image = Image.new("RGB", size, PAPER)
    draw = ImageDraw.Draw(image)
    for thing in page.things:
        x, y = round(thing.x_mm * px_per_mm), round(thing.y_mm * px_per_mm)
        if isinstance(thing, Text):
            px = max(6, round(thing.size_pt * MM_PER_PT * px_per_mm))
            ink = FAINT_INK if thing.faint else INK
            draw.text((x, y), thing.line, ink, font=_font(px, thing.bold))
            continue
        wide, tall = round(thing.width_mm * px_per_mm), round(thing.height_mm * px_per_mm)
        if isinstance(thing, Box):
            weight = max(1, round(thing.weight_mm * px_per_mm))
            draw.rectangle((x, y, x + wide - 1, y + tall - 1), outline=INK, width=weight)
            continue
        if thing.what == "failed":
            draw.rectangle((x, y, x + wide - 1, y + tall - 1), fill=FAILED_PAPER)
        else:
            codes = fetch(thing)
            tall, wide = codes.shape[:2]
            rgb = np.ascontiguousarray(np.broadcast_to(codes, (tall, wide, 3)))
            image.paste(Image.fromarray(rgb), (x, y))
        draw.rectangle((x - 1, y - 1, x + wide, y + tall), outline=FAINT_INK)
    return np.asarray(image)


def write_pdf(file: Any, pages: Sequence[Page], fetch_png: FetchPng, *, title: str) -> None:
    """Write pages at their true size; a frame's pixels are kept as they are, letters stay letters.

    The ground stays white: whoever prints it has paper.
    """
    from reportlab import rl_config
    from reportlab.pdfbase import pdfmetrics
    from reportlab.pdfbase.ttfonts import TTFont
    from reportlab.pdfgen.canvas import Canvas

    for name, bold in (("Vera", False), ("VeraBd", True)):
        pdfmetrics.registerFont(TTFont(name, str(_file(bold))))
    in_letters = rl_config.useA85
    # Written as plain bytes: as letters each picture takes four times as long, and a quarter more room.
    rl_config.useA85 = 0
    try:
        # Invariant: no date in it, so that equal sheets are equal files.
        canvas = Canvas(file, invariant=1, pageCompression=1)
        canvas.setTitle(plain(title))
        for page in pages:
            _draw_page(canvas, page, fetch_png)
        canvas.save()
    finally:
        rl_config.useA85 = in_letters


def _draw_page(canvas: Any, page: Page, fetch_png: FetchPng) -> None:
    pt = 1.0 / MM_PER_PT
    canvas.setPageSize((page.width_mm * pt, page.height_mm * pt))
    for thing in page.things:
        x, top = thing.x_mm * pt, (page.height_mm - thing.y_mm) * pt
        if isinstance(thing, Text):
            _fill(canvas, FAINT_INK if thing.faint else INK)
            canvas.setFont("VeraBd" if thing.bold else "Vera", thing.size_pt)
            canvas.drawString(x, top - _ASCENT * thing.size_pt, thing.line)
            continue
        wide, tall = thing.width_mm * pt, thing.height_mm * pt
        canvas.setStrokeColorRGB(*(one / 255.0 for one in INK))
        if isinstance(thing, Box):
            half = 0.5 * thing.weight_mm * pt  # a line lies on both sides of its path
            canvas.setLineWidth(2.0 * half)
            canvas.rect(x + half, top - tall + half, wide - 2.0 * half, tall - 2.0 * half, fill=0)
            continue
        canvas.setLineWidth(0.3)
        if thing.what == "failed":
            _fill(canvas, FAILED_PAPER)
            canvas.rect(x, top - tall, wide, tall, stroke=1, fill=1)
        else:
            draw_png(canvas, fetch_png(thing), x, top - tall, wide, tall)
            canvas.rect(x, top - tall, wide, tall, stroke=1, fill=0)
    canvas.showPage()


def _fill(canvas: Any, colour: tuple[int, int, int]) -> None:
    canvas.setFillColorRGB(*(one / 255.0 for one in colour))
