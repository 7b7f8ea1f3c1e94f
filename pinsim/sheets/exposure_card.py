"""The card of exposure times that is pinned in a box's lid: one page of its true size.

One layout, two kinds of paper: a PDF in vectors and its built-in Helvetica, and a picture. Lengths are
mm from the top left, letters are in points.
"""

import io
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO, Literal, Protocol

import numpy as np
from PIL import Image, ImageDraw, ImageFont

from pinsim import files
from pinsim.errors import DesignError
from pinsim.exposure.light import LightLevel
from pinsim.exposure.table import CAUTION, OUTSIDE_MARK, Cell, Column, TimeTable, marked
from pinsim.exposure.times import Time
from pinsim.sheets.lettering import plain

CARD_SUFFIXES = (".pdf", *files.PICTURE_SUFFIXES)
CARD_DPI = 300.0
A6_MM = (148.0, 105.0)

_MM_PER_PT = 25.4 / 72.0
_LINE = 1.22  # line to line over letter size
# Letters of the times: below the last nobody reads them at arm's length.
_LARGEST_PT, _LARGE_PT, _SMALLEST_PT = 12.0, 8.5, 6.5
_NAME_PT, _LONG_NAME = 7.5, 16  # a column's name: its letters, and how many stay on one line
_ASCENT = 0.72  # height of capitals and figures over letter size

Grey = float
_INK, _FAINT, _STRIPE, _HAIR = 0.0, 0.42, 0.93, 0.72
Anchor = Literal["left", "right", "centre"]
# What a column shows beside others of its camera: a heading, the time, its size over the main one's.
_Part = tuple[str, Callable[[Cell], Time], float]


class _Paper(Protocol):
    """What a layout needs of paper: how wide letters are, and places to put them."""

    def width_mm(self, text: str, size_pt: float, *, bold: bool = False) -> float: ...

    def text(
        self,
        x_mm: float,
        y_mm: float,
        text: str,
        size_pt: float,
        *,
        bold: bool = False,
        slanted: bool = False,
        grey: Grey = _INK,
        anchor: Anchor = "left",
    ) -> None:
        """Write a line whose letters stand on y."""

    def box(
        self, x_mm: float, y_mm: float, width_mm: float, height_mm: float, grey: Grey
    ) -> None: ...

    def line(self, x_mm: float, y_mm: float, to_x_mm: float, to_y_mm: float) -> None: ...


def _latin(text: str) -> str:
    """Return a text in the letters of a PDF's built-in fonts; others lose accents or become "?"."""
    return "".join(letter if ord(letter) < 256 else plain(letter) for letter in text)


class _Pdf:
    """A page of a PDF, in vectors."""

    def __init__(self, size_mm: tuple[float, float], title: str) -> None:
        from reportlab.pdfgen.canvas import Canvas

        self._file = io.BytesIO()
        self._height_mm = size_mm[1]
        # Invariant: no date in it, so that equal cards are equal files.
        self._canvas = Canvas(
            self._file, pagesize=tuple(side / _MM_PER_PT for side in size_mm), invariant=1
        )
        self._canvas.setTitle(title)
        self._canvas.setAuthor("pinsim")
        self._canvas.setViewerPreference("PrintScaling", "None")
        self._canvas.setLineWidth(0.35)

    @staticmethod
    def _font(bold: bool, slanted: bool = False) -> str:
        style = "Bold" * bold + "Oblique" * slanted
        return f"Helvetica-{style}" if style else "Helvetica"

    def _at(self, x_mm: float, y_mm: float) -> tuple[float, float]:
        return x_mm / _MM_PER_PT, (self._height_mm - y_mm) / _MM_PER_PT

    def width_mm(self, text: str, size_pt: float, *, bold: bool = False) -> float:
        return float(self._canvas.stringWidth(_latin(text), self._font(bold), size_pt)) * _MM_PER_PT

    def text(
        self,
        x_mm: float,
        y_mm: float,
        text: str,
        size_pt: float,
        *,
        bold: bool = False,
        slanted: bool = False,
        grey: Grey = _INK,
        anchor: Anchor = "left",
    ) -> None:
        self._canvas.setFillGray(grey)
        self._canvas.setFont(self._font(bold, slanted), size_pt)
        draw = {
            "left": self._canvas.drawString,
            "right": self._canvas.drawRightString,
            "centre": self._canvas.drawCentredString,
        }[anchor]
        draw(*self._at(x_mm, y_mm), _latin(text))

    def box(self, x_mm: float, y_mm: float, width_mm: float, height_mm: float, grey: Grey) -> None:
        self._canvas.setFillGray(grey)
        x, y = self._at(x_mm, y_mm + height_mm)
        self._canvas.rect(x, y, width_mm / _MM_PER_PT, height_mm / _MM_PER_PT, stroke=0, fill=1)

    def line(self, x_mm: float, y_mm: float, to_x_mm: float, to_y_mm: float) -> None:
        self._canvas.setStrokeGray(_HAIR)
        self._canvas.line(*self._at(x_mm, y_mm), *self._at(to_x_mm, to_y_mm))

    def finished(self) -> bytes:
        """Return the whole file."""
        self._canvas.save()
        return self._file.getvalue()


class _Raster:
    """The same as a picture, CARD_DPI dots per inch. Slanted letters are upright here."""

    def __init__(self, size_mm: tuple[float, float]) -> None:
        self._px = CARD_DPI / 25.4
        size = (round(size_mm[0] * self._px), round(size_mm[1] * self._px))
        self._image = Image.new("L", size, 255)
        self._draw = ImageDraw.Draw(self._image)
        self._fonts: dict[float, Any] = {}

    def _font(self, size_pt: float) -> Any:
        if size_pt not in self._fonts:
            self._fonts[size_pt] = ImageFont.load_default(size_pt * _MM_PER_PT * self._px)
        return self._fonts[size_pt]

    def width_mm(self, text: str, size_pt: float, *, bold: bool = False) -> float:
        # The one font at hand has no bold; a thin outline makes letters that much wider.
        return float(self._font(size_pt).getlength(plain(text)) + 2.0 * bold) / self._px

    def text(
        self,
        x_mm: float,
        y_mm: float,
        text: str,
        size_pt: float,
        *,
        bold: bool = False,
        slanted: bool = False,
        grey: Grey = _INK,
        anchor: Anchor = "left",
    ) -> None:
        place = {"left": "ls", "right": "rs", "centre": "ms"}[anchor]
        code = round(255.0 * grey)
        self._draw.text(
            (x_mm * self._px, y_mm * self._px),
            plain(text),
            code,
            font=self._font(size_pt),
            anchor=place,
            stroke_width=0.5 * bold,
            stroke_fill=code,
        )

    def box(self, x_mm: float, y_mm: float, width_mm: float, height_mm: float, grey: Grey) -> None:
        corners = (x_mm, y_mm, x_mm + width_mm, y_mm + height_mm)
        self._draw.rectangle([round(c * self._px) for c in corners], fill=round(255.0 * grey))

    def line(self, x_mm: float, y_mm: float, to_x_mm: float, to_y_mm: float) -> None:
        ends = (x_mm, y_mm, to_x_mm, to_y_mm)
        self._draw.line([round(c * self._px) for c in ends], fill=round(255.0 * _HAIR), width=2)

    def finished(self) -> np.ndarray[Any, np.dtype[np.uint8]]:
        """Return sRGB codes, (rows, columns, 1)."""
        return np.asarray(self._image)[..., None]


@dataclass(frozen=True, slots=True, eq=False)
class Card:
    """A card of exposure times, laid out anew for the kind of file that it is saved as."""

    table: TimeTable
    size_mm: tuple[float, float]

    @property
    def description(self) -> str:
        """One line that says what it is."""
        return f"pinsim: exposure times of {plain(self.table.name)} ({plain(self.table.summary)})"

    def save(self, path: str | Path, *, overwrite: bool = False) -> None:
        """Write the card as .pdf, .png, .jpg or .tif; OutputError when it cannot or must not be."""
        target = Path(path)
        files.check_target(target, overwrite=overwrite, suffixes=CARD_SUFFIXES)
        files.write_whole(target, self._writer(target.suffix.lower()), overwrite=overwrite)

    def _writer(self, suffix: str) -> Callable[[BinaryIO], None]:
        if suffix == ".pdf":
            data = self.pdf()
            return lambda file: _write(file, data)
        paper = _Raster(self.size_mm)
        _fitted(paper, self.table, self.size_mm).draw()
        return files.encode_picture(
            paper.finished(), suffix, dpi=CARD_DPI, description=self.description
        )

    def pdf(self) -> bytes:
        """Return the card as a PDF of one page."""
        paper = _Pdf(self.size_mm, self.description)
        _fitted(paper, self.table, self.size_mm).draw()
        return paper.finished()


def _write(file: BinaryIO, data: bytes) -> None:
    file.write(data)


def exposure_card(table: TimeTable, *, size_mm: tuple[float, float] = A6_MM) -> Card:
    """Return a card of a table of times. size_mm : width and height, of the page and of the card.

    Raises DesignError when so much does not fit a card of that size in letters that can be read.
    """
    card = Card(table, size_mm)
    for paper in (_Pdf(size_mm, ""), _Raster(size_mm)):
        _fitted(paper, table, size_mm)  # refuses here, not when it is saved
    return card


def _fitted(paper: _Paper, table: TimeTable, size_mm: tuple[float, float]) -> "_Layout":
    """Return the richest layout whose times are large, else the one whose times are largest."""
    layouts = [
        _Layout(paper, table, size_mm, corners=corners, terse=terse)
        for terse, corners in ((False, True), (True, True), (False, False), (True, False))
    ]
    for layout in layouts:
        if layout.size_pt >= _LARGE_PT:
            return layout
    best = max(layouts, key=lambda layout: layout.size_pt)
    if best.size_pt >= _SMALLEST_PT:
        return best
    lights, columns = len(table.lights), len(table.columns)
    raise DesignError(
        f"{lights} lights and {columns} {'column' if columns == 1 else 'columns'} do not fit a card of "
        f"{size_mm[0]:g} x {size_mm[1]:g} mm in letters of {_SMALLEST_PT:g} points; give fewer, "
        "or a larger --card-size such as A5."
    )


def _broken_title(text: str, longest: int) -> list[str]:
    """Return a column's name in one line, or broken in two at a hyphen or space near its middle."""
    places = [i + 1 for i, letter in enumerate(text) if letter in "- "]
    if len(text) <= longest or not places:
        return [text]
    at = min(places, key=lambda place: abs(place - 0.5 * len(text)))
    return [text[:at].rstrip(), text[at:]]


def _wrapped(paper: _Paper, text: str, size_pt: float, width_mm: float) -> list[str]:
    lines: list[str] = []
    for word in text.split(" "):
        longer = f"{lines[-1]} {word}" if lines else word
        if lines and paper.width_mm(longer, size_pt) <= width_mm:
            lines[-1] = longer
        else:
            lines.append(word)
    return lines


class _Layout:
    """Where everything stands: what is fixed, title and legend, and the rows between them.

    corners : whether times for the corner are shown. terse : for small cards, a short legend in small
    letters. size_pt : letters of the times, as large as there is room; 0 if there is none.
    """

    def __init__(
        self,
        paper: _Paper,
        table: TimeTable,
        size_mm: tuple[float, float],
        *,
        corners: bool,
        terse: bool,
    ) -> None:
        self._paper, self._table, self._corners = paper, table, corners
        self._width_mm, self._height_mm = size_mm
        self._margin_mm = 3.5 if terse else 5.0
        self._legend_pt = 5.0 if terse else 6.0
        self._title_pt = 11.0 if terse else 15.0
        self._inner_mm = self._width_mm - 2.0 * self._margin_mm
        self._single = len(table.columns) == 1
        longest = _LONG_NAME if len(table.columns) < 4 else _LONG_NAME // 2
        self._titles = [_broken_title(c.title, longest) for c in table.columns]
        self._head_mm = 9.0 if terse else 14.0
        self._names_mm = 4.0 if self._single else 6.6 + 2.9 * max(map(len, self._titles))
        legend = " ".join(table.legend(short=terse))
        self._legend = _wrapped(paper, legend, self._legend_pt, self._inner_mm)
        self._foot_mm = (len(self._legend) * self._legend_pt + 9.0) * _LINE * _MM_PER_PT
        fixed_mm = 2.0 * self._margin_mm + self._head_mm + self._names_mm + self._foot_mm
        self._row_mm = min((self._height_mm - fixed_mm) / len(table.lights), 9.0)
        self.size_pt = self._fitting_size()

    # sizes ------------------------------------------------------------------------------------

    def _fitting_size(self) -> float:
        size = min(_LARGEST_PT, self._row_mm / _MM_PER_PT / 1.28)
        while size >= _SMALLEST_PT:
            if self._light_mm(size) + self._columns_mm(size) <= self._inner_mm:
                return size
            size -= 0.25
        return 0.0

    def _light_mm(self, size: float) -> float:
        return max(self._ev_mm(size) + self._words_mm(light, size) for light in self._table.lights)

    def _ev_mm(self, size: float) -> float:
        texts = [light.ev_text for light in self._table.lights]
        return 1.5 + max(self._paper.width_mm(text, size, bold=True) for text in texts)

    def _words_mm(self, light: LightLevel, size: float) -> float:
        return self._paper.width_mm(self._words(light), 0.8 * size) + 4.0

    @staticmethod
    def _words(light: LightLevel) -> str:
        return light.words

    def _parts(self) -> list[_Part]:
        """Return what each column shows."""
        corner: _Part = ("corner", lambda c: c.corner, 0.75)
        centre: _Part = ("centre", lambda c: c.centre, 1.0)
        last = [corner] if self._corners else []
        if not self._single:
            return [centre, *last]
        less: _Part = ("1 stop less", lambda c: c.less, 0.75)
        more: _Part = ("1 stop more", lambda c: c.more, 0.75)
        return [less, centre, more, *last]

    def _part_mm(self, index: int, part: _Part, size: float) -> float:
        heading, pick, scale = part
        # Room for a mark beside every time: the figures stand below each other, marks hang out.
        times = [pick(row[index]).text + OUTSIDE_MARK for row in self._table.cells]
        widest = max(self._paper.width_mm(t, size * scale, bold=scale == 1.0) for t in times)
        return max(widest, self._paper.width_mm(heading, self._legend_pt)) + 2.2

    def _column_mm(self, index: int, size: float) -> float:
        column = self._table.columns[index]
        inside = sum(self._part_mm(index, part, size) for part in self._parts())
        return max(inside, self._title_mm(index, column) + 2.0) + 2.0

    def _columns_mm(self, size: float) -> float:
        return sum(self._column_mm(i, size) for i in range(len(self._table.columns)))

    def _title_mm(self, index: int, column: Column) -> float:
        if self._single:
            return 0.0
        return max(
            *(self._paper.width_mm(line, _NAME_PT, bold=True) for line in self._titles[index]),
            self._paper.width_mm(column.subtitle, self._legend_pt),
        )

    # drawing ----------------------------------------------------------------------------------

    def draw(self) -> None:
        """Draw the card."""
        self._cut_lines()
        self._head()
        top = self._margin_mm + self._head_mm
        self._rows(top + self._names_mm)
        self._foot()

    def _cut_lines(self) -> None:
        w, h, edge = self._width_mm, self._height_mm, 0.15
        for line in (
            (edge, edge, w - edge, edge),
            (w - edge, edge, w - edge, h - edge),
            (w - edge, h - edge, edge, h - edge),
            (edge, h - edge, edge, edge),
        ):
            self._paper.line(*line)

    def _head(self) -> None:
        table, right, big = self._table, self._width_mm - self._margin_mm, self._title_pt
        camera = table.columns[0].camera
        aside = f"f/{camera.f_number:.0f}"
        if len({column.camera.f_number for column in table.columns}) > 1:
            aside = ""
        y = self._margin_mm + 0.31 * big
        self._paper.text(right, y, aside, big, bold=True, anchor="right")
        room = self._inner_mm - self._paper.width_mm(aside, big, bold=True) - 4.0
        self._line(self._margin_mm, y, table.name, big, room, bold=True)
        below = table.summary
        if len({column.camera.material_name for column in table.columns}) == 1:
            below += f", {camera.material_name} at EI {camera.material.speed_iso:g}"
        if table.filter_factor != 1.0:
            below += f", with a filter x{table.filter_factor:.3g}"
        y += 0.3 * big
        self._line(self._margin_mm, y, below, 0.53 * big, self._inner_mm, grey=_FAINT)

    def _line(
        self, x: float, y: float, text: str, size: float, room_mm: float, **style: Any
    ) -> None:
        """Write a line, in smaller letters if it would be too long, cut if it still is."""
        wide = self._paper.width_mm(text, size, bold=style.get("bold", False))
        size = max(min(size, size * room_mm / max(wide, 1e-6)), 5.5)
        while text and self._paper.width_mm(text, size, bold=style.get("bold", False)) > room_mm:
            text = text[:-1]
        self._paper.text(x, y, text, size, **style)

    def _edges(self) -> list[float]:
        """Return where columns begin, and the right edge; what room is left over is shared out."""
        count, size = len(self._table.columns), self.size_pt
        left = self._inner_mm - self._light_mm(size) - self._columns_mm(size)
        edges = [self._margin_mm + self._light_mm(size) + left / (count + 1)]
        for i in range(count):
            edges.append(edges[-1] + self._column_mm(i, size) + left / (count + 1))
        return edges

    def _stops(self, index: int, edges: Sequence[float]) -> list[float]:
        """Return the right ends of a column's times."""
        parts = self._parts()
        wide = [self._part_mm(index, part, self.size_pt) for part in parts]
        spare = (edges[index + 1] - edges[index] - 1.0 - sum(wide)) / len(parts)
        ends, x = [], edges[index]
        for one in wide:
            x += one + spare
            ends.append(x)
        return ends

    def _rows(self, top: float) -> None:
        edges, size = self._edges(), self.size_pt
        right = self._width_mm - self._margin_mm
        ev_mm = self._ev_mm(size)
        names_y = top - self._names_mm
        self._small(self._margin_mm + ev_mm, top - 1.4, "EV")
        for index, column in enumerate(self._table.columns):
            ends = self._stops(index, edges)
            if not self._single:
                below = top - 4.2
                self._small(ends[-1], below, column.subtitle)
                for line in reversed(self._titles[index]):
                    below -= 2.9
                    self._paper.text(ends[-1], below, line, _NAME_PT, bold=True, anchor="right")
            for (heading, _, _), end in zip(self._parts(), ends, strict=True):
                self._small(end, top - 1.4, heading)
        for number, (light, cells) in enumerate(
            zip(self._table.lights, self._table.cells, strict=True)
        ):
            y = top + number * self._row_mm
            if number % 2 == 0:
                self._paper.box(
                    self._margin_mm - 1.0, y, self._inner_mm + 2.0, self._row_mm, _STRIPE
                )
            base = y + 0.5 * self._row_mm + 0.5 * _ASCENT * size * _MM_PER_PT
            self._paper.text(
                self._margin_mm + ev_mm, base, light.ev_text, size, bold=True, anchor="right"
            )
            self._paper.text(self._margin_mm + ev_mm + 1.8, base, self._words(light), 0.8 * size)
            for index, cell in enumerate(cells):
                for (_, pick, scale), end in zip(
                    self._parts(), self._stops(index, edges), strict=True
                ):
                    self._time(end, base, pick(cell), size * scale, main=scale == 1.0)
        for edge in edges[1:-1]:
            self._paper.line(edge, names_y, edge, top + len(self._table.lights) * self._row_mm)
        self._paper.line(self._margin_mm - 1.0, top, right + 1.0, top)

    def _small(self, x: float, y: float, text: str) -> None:
        self._paper.text(x, y, text, self._legend_pt, grey=_FAINT, anchor="right")

    def _time(self, x: float, y: float, time: Time, size: float, *, main: bool) -> None:
        """Write a time; marks hang out to the right, so that figures stand below each other."""
        text, mark = time.text, marked(time)[len(time.text) :]
        grey = _FAINT if time.outside or not main else _INK
        slanted = bool(time.outside)
        mark_mm = self._paper.width_mm(OUTSIDE_MARK, size, bold=main)
        self._paper.text(
            x - mark_mm, y, text, size, bold=main, slanted=slanted, grey=grey, anchor="right"
        )
        if mark:
            self._paper.text(x - mark_mm, y, mark, size, bold=main, grey=grey)

    def _foot(self) -> None:
        y = self._height_mm - self._margin_mm - self._foot_mm + 1.9 * self._legend_pt * _MM_PER_PT
        for line in self._legend:
            self._paper.text(self._margin_mm, y, line, self._legend_pt, grey=_FAINT)
            y += self._legend_pt * _LINE * _MM_PER_PT
        size = f"{self._width_mm:g} x {self._height_mm:g} mm at 100 %"
        y = self._height_mm - self._margin_mm + 1.0
        self._paper.text(
            self._width_mm - self._margin_mm, y, size, 5.0, grey=_FAINT, anchor="right"
        )
        room = self._inner_mm - self._paper.width_mm(size, 5.0) - 3.0
        self._line(self._margin_mm, y, CAUTION, 7.0, room, bold=True)
