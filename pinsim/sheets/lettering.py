"""The sheet of paper that pictures are laid on: captions, frames, and how it is saved.

Letters are Pillow's own scalable font, which is on every machine; it holds ASCII only.
"""

import unicodedata
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray
from PIL import Image, ImageDraw, ImageFont

from pinsim import files

Codes = NDArray[np.uint8]

# A light neutral paper, so that neither a bright sky nor a dark corner is flattered.
PAPER = (226, 226, 224)
INK = (28, 28, 30)
FAINT_INK = (92, 92, 96)
MARK = (255, 255, 255)
SHEET_DPI = 200.0
SHEET_SUFFIXES = (*files.PICTURE_SUFFIXES, ".pdf")
GAP = 28


@lru_cache(maxsize=8)
def _font(size: int) -> Any:
    return ImageFont.load_default(size)


@dataclass(frozen=True, slots=True, eq=False)
class Sheet:
    """A finished sheet: sRGB codes, uint8 (rows, columns, 3), and a line that says what it shows."""

    codes: Codes
    description: str

    def save(self, path: str | Path, *, overwrite: bool = False) -> None:
        """Write the sheet as .png, .jpg, .tif or .pdf; OutputError when it cannot or must not be."""
        target = Path(path)
        files.check_target(target, overwrite=overwrite, suffixes=SHEET_SUFFIXES)
        suffix = target.suffix.lower()
        write = (
            self._write_pdf
            if suffix == ".pdf"
            else files.encode_picture(
                self.codes, suffix, dpi=SHEET_DPI, description=self.description
            )
        )
        files.write_whole(target, write, overwrite=overwrite)

    def _write_pdf(self, file: BinaryIO) -> None:
        """Write one page of the sheet's size, its pixels as they are."""
        from reportlab.lib.utils import ImageReader
        from reportlab.pdfgen.canvas import Canvas

        rows, columns = self.codes.shape[:2]
        size = (columns * 72.0 / SHEET_DPI, rows * 72.0 / SHEET_DPI)
        # Invariant: no date in it, so that equal sheets are equal files.
        canvas = Canvas(file, pagesize=size, invariant=1)
        canvas.setTitle(plain(self.description))
        canvas.drawImage(ImageReader(Image.fromarray(self.codes)), 0, 0, *size)
        canvas.save()


class Paper:
    """An empty sheet to lay pictures and lines of text on. Positions are pixels, x right, y down."""

    def __init__(self, width: int, height: int) -> None:
        self._image = Image.new("RGB", (width, height), PAPER)
        self._draw = ImageDraw.Draw(self._image)

    def picture(self, codes: NDArray[Any], x: int, y: int) -> None:
        """Lay down a picture, (rows, columns, 1 or 3) uint8, with a hairline around it."""
        rgb = np.ascontiguousarray(np.broadcast_to(codes, (*codes.shape[:2], 3)))
        self._image.paste(Image.fromarray(rgb), (x, y))
        self.frame(x, y, codes.shape[1], codes.shape[0], FAINT_INK)

    def frame(
        self, x: int, y: int, width: int, height: int, colour: tuple[int, int, int] = MARK
    ) -> None:
        """Draw a hairline around a place, just outside it."""
        self._draw.rectangle((x - 1, y - 1, x + width, y + height), outline=colour)

    def mark(self, x: int, y: int, width: int, height: int, name: str) -> None:
        """Mark a place in a picture: a white line with a dark one outside, and a short name."""
        self.frame(x - 1, y - 1, width + 2, height + 2, INK)
        self.frame(x, y, width, height)
        size = max(13, min(18, width // 6))
        above = y - size - 6
        place = (x, above if above > 0 else y + height + 4)
        self._draw.text(place, name, MARK, font=_font(size), stroke_width=2, stroke_fill=INK)

    def text(
        self, x: int, y: int, line: str, *, size: int = 19, faint: bool = False, width: int = 10_000
    ) -> int:
        """Write a line, broken between words to a width; return the y below it."""
        font = _font(size)
        colour = FAINT_INK if faint else INK
        for part in _broken(line, font, width):
            self._draw.text((x, y), part, colour, font=font)
            y += round(1.35 * size)
        return y

    def finished(self, description: str) -> Sheet:
        """Return the sheet."""
        return Sheet(np.asarray(self._image), description)


def plain(line: str) -> str:
    """Return a line in ASCII: accents are dropped, other foreign letters become question marks."""
    bare = unicodedata.normalize("NFKD", line)
    bare = "".join(letter for letter in bare if not unicodedata.combining(letter))
    return bare.encode("ascii", "replace").decode()


def _broken(line: str, font: Any, width: int) -> list[str]:
    parts: list[str] = []
    for word in plain(line).split(" "):
        longer = f"{parts[-1]} {word}" if parts else word
        if parts and font.getlength(longer) <= width:
            parts[-1] = longer
            continue
        rest = word
        while font.getlength(rest) > width and len(rest) > 1:  # a file name may be one long word
            fits = next(
                n
                for n in range(len(rest) - 1, 0, -1)
                if font.getlength(rest[:n]) <= width or n == 1
            )
            parts.append(rest[:fits])
            rest = rest[fits:]
        parts.append(rest)
    return parts


def text_height(line: str, *, size: int = 19, width: int = 10_000) -> int:
    """Return how much height a line takes when written with Paper.text."""
    return len(_broken(line, _font(size), width)) * round(1.35 * size)
