"""The page that is printed: pictures, the details that decide, figures, curves, and the verdict on top.

As wide as A4 on its side. Two designs stand beside each other; of more each has a row of its own.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.render.develop import LOOK_TEXT
from pinsim.render.picture import Picture
from pinsim.sheets.side_by_side.common_part import CommonPart, Place, shown, turned
from pinsim.sheets.side_by_side.curves import Curves
from pinsim.sheets.side_by_side.details import Detail
from pinsim.sheets.side_by_side.figures import DesignFigures
from pinsim.sheets.side_by_side.leaf import (
    FAINT,
    HAIR,
    INK,
    PAPER,
    PX_PER_MM,
    SHADE,
    Colour,
    Leaf,
    broken,
    height_mm,
    to_px,
    width_mm,
)
from pinsim.sheets.side_by_side.table import Cell, legend, table, time_notes
from pinsim.units import format_length

Codes = NDArray[np.uint8]

A4_MM = (297.0, 210.0)
MARGIN_MM = 9.0
_GAP_MM = 4.0
_SIDE_MM = 82.0  # the column of figures beside two pictures
_TALLEST_MM = 97.0
_ROW_PICTURE_MM = (78.0, 62.0)  # of one of more than two designs
_DETAIL_MM = 33.0
_PLOT_MM = (32.0, 46.0)
_TITLE_PT, _VERDICT_PT, _NAME_PT, _SMALL_PT, _FIGURE_PT = 15.0, 11.5, 9.0, 6.6, 7.4
_BADGE_MM = 4.6
# Told apart in black and white too: by darkness, and by the letter at the end of each line.
COLOURS: tuple[Colour, ...] = (
    (20, 20, 22),
    (0, 94, 168),
    (206, 84, 0),
    (0, 128, 96),
    (150, 60, 140),
    (120, 110, 0),
)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Material:
    """All that goes on a page, in the order of the designs."""

    title: str
    verdict: str
    pictures: Sequence[Picture]
    common: CommonPart
    details: Sequence[Detail]
    figures: Sequence[DesignFigures]
    curves: Curves
    light_words: str
    view_words: str

    def shape(self, longest_px: float, tallest_px: float) -> tuple[int, int]:
        """Return rows and columns of the common part within bounds, the same for all designs."""
        wide, high = self.common.width_mm, self.common.height_mm
        scale = min(longest_px / wide, tallest_px / high)
        return max(1, round(high * scale)), max(1, round(wide * scale))

    def picture(self, number: int, shape: tuple[int, int]) -> Codes:
        """Return a design's picture of the common part."""
        return shown(self.pictures[number], self.common, self.common.whole, shape)

    def detail(self, number: int, detail: Detail, size_px: int) -> Codes:
        """Return a detail of a design's picture, square."""
        place = detail.place(self.common)
        return shown(self.pictures[number], self.common, place, (size_px, size_px))

    def film_enlarged(self, number: int, detail: Detail, size_mm: float) -> float:
        """Return how many times larger than on a design's film a detail of a size on paper is.

        In the film's middle, as bent film draws other places at other scales.
        """
        own = self.pictures[number].camera.focal_length_mm
        return size_mm / (detail.side_mm * own / self.common.surface.focal_length_mm)

    def detail_deg(self, detail: Detail) -> float:
        """Return how wide a detail in the middle of the picture would be, deg."""
        return math.degrees(detail.side_mm / self.common.surface.focal_length_mm)

    def mark(self, detail: Detail) -> Place:
        """Return where a detail stands on the pictures as they are looked at."""
        place = detail.place(self.common)
        x, y = turned(
            self.pictures[0], place.left + 0.5 * place.width, place.top + 0.5 * place.height
        )
        return Place(x - 0.5 * place.width, y - 0.5 * place.height, place.width, place.height)


def laid_out(material: Material) -> Leaf:
    """Return the page."""
    leaf = Leaf(A4_MM[0])
    room = A4_MM[0] - 2.0 * MARGIN_MM
    words = " ".join(
        one
        for one in (legend(material.figures, material.view_words), time_notes(material.figures))
        if one
    )
    foot = height_mm(_SMALL_PT, len(broken(words, _SMALL_PT, room))) + MARGIN_MM - 2.0
    top = _head(leaf, material)
    if len(material.pictures) == 2:
        bottom = _two(leaf, material, top, A4_MM[1] - foot - 1.5)
    else:
        bottom = _rows(leaf, material, top)
    page = max(A4_MM[1], math.ceil(bottom + 1.5 + foot - 1e-6))
    leaf.text(MARGIN_MM, page - foot, words, _SMALL_PT, colour=FAINT, room_mm=room)
    leaf.page_height_mm = float(page)
    return leaf


def _head(leaf: Leaf, material: Material) -> float:
    """Write title and verdict; return the y below them."""
    room = A4_MM[0] - 2.0 * MARGIN_MM
    y = leaf.text(MARGIN_MM, MARGIN_MM - 2.0, material.title, _TITLE_PT, room_mm=room)
    look = LOOK_TEXT[material.pictures[0].look]
    leaf.text(MARGIN_MM, y, look, _FIGURE_PT, colour=FAINT)
    beside = width_mm(f"{look};  ", _FIGURE_PT)
    y = leaf.text(
        MARGIN_MM + beside,
        y,
        material.light_words,
        _FIGURE_PT,
        colour=FAINT,
        room_mm=room - beside,
    )
    y += 1.6
    lines = broken(material.verdict, _VERDICT_PT, room - 8.0)
    high = height_mm(_VERDICT_PT, len(lines)) + 3.6
    leaf.box(MARGIN_MM, y, room, high, fill=SHADE)
    leaf.box(MARGIN_MM, y, 1.4, high, fill=INK)
    leaf.text(MARGIN_MM + 4.0, y + 1.6, material.verdict, _VERDICT_PT, heavy=True, room_mm=room - 8)
    return y + high + 3.4


def _badge(leaf: Leaf, x: float, y: float, letter: str, size_mm: float = _BADGE_MM) -> None:
    """Draw a design's letter, white on black."""
    leaf.box(x, y, size_mm, size_mm, fill=INK)
    size = size_mm / 4.6 * 10.0
    leaf.text(
        x + 0.5 * (size_mm - width_mm(letter, size)),
        y + 0.06 * size_mm,
        letter,
        size,
        colour=PAPER,
        heavy=True,
    )


def _pill(leaf: Leaf, x: float, y: float, word: str, size: float) -> float:
    """Write a word white on black; return its width."""
    wide = width_mm(word, size) + 2.0
    leaf.box(x, y, wide, height_mm(size) + 0.2, fill=INK)
    leaf.text(x + 1.0, y + 0.25, word, size, colour=PAPER)
    return wide


def _name(leaf: Leaf, material: Material, number: int, x: float, y: float, room: float) -> float:
    """Write which design stands below; return the y below that."""
    design = material.figures[number]
    _badge(leaf, x, y, design.letter)
    inner = x + _BADGE_MM + 1.6
    below = leaf.text(
        inner, y - 0.2, design.name, _NAME_PT, heavy=True, room_mm=room - _BADGE_MM - 2
    )
    below = leaf.text(inner, below, design.summary, _FIGURE_PT, room_mm=room - _BADGE_MM - 2)
    camera = material.pictures[number].camera
    words = f"{camera.material_name}, {camera.tone}; {cropped_words(design)}"
    return leaf.text(inner, below, words, _SMALL_PT, colour=FAINT, room_mm=room - _BADGE_MM - 2)


def cropped_words(design: DesignFigures) -> str:
    """Say how much of a frame is left out."""
    if design.hidden_share < 0.005:
        return "the whole frame"
    return f"cropped to {100.0 * (1.0 - design.hidden_share):.0f} % of the frame, which all show"


def _name_height(material: Material, room: float) -> float:
    """Return how much height the tallest name takes."""
    probe = Leaf(A4_MM[0])
    return max(_name(probe, material, i, 0.0, 0.0, room) for i in range(len(material.pictures)))


def _picture(
    leaf: Leaf, material: Material, number: int, x: float, y: float, shape: tuple[int, int]
) -> None:
    """Lay down a picture with its details marked by their numbers."""
    wide, high = leaf.picture(material.picture(number, shape), x, y)
    leaf.box(x, y, wide, high, outline=FAINT, thick=0.1)
    for count, detail in enumerate(material.details, start=1):
        mark = material.mark(detail)
        left, top = x + mark.left * wide, y + mark.top * high
        w, h = mark.width * wide, mark.height * high
        leaf.box(left - 0.35, top - 0.35, w + 0.7, h + 0.7, outline=INK, thick=0.35)
        leaf.box(left, top, w, h, outline=PAPER, thick=0.25)
        tag = 3.0
        above = top - 0.35 - tag if top - 0.35 - tag > y else top + h + 0.35
        above = min(above, y + high - tag)
        leaf.box(left - 0.35, above, tag, tag, fill=INK)
        at = left - 0.35 + 0.5 * (tag - width_mm(str(count), 6.4))
        leaf.text(at, above + 0.2, str(count), 6.4, colour=PAPER)


def _two(leaf: Leaf, material: Material, top: float, end: float) -> float:
    """Lay two designs beside each other; return the y below. end : where it should be at most."""
    column = 0.5 * (A4_MM[0] - 2.0 * MARGIN_MM - _SIDE_MM - 6.0 - _GAP_MM)
    names = _name_height(material, column)
    shape = material.shape(to_px(column), to_px(_TALLEST_MM))
    # Of slim pictures the two stand at the left of their columns.
    for number in range(2):
        x = MARGIN_MM + number * (column + _GAP_MM)
        _name(leaf, material, number, x, top, column)
        _picture(leaf, material, number, x, top + names + 1.5, shape)
    pictures = top + names + 1.5 + shape[0] / PX_PER_MM
    x = A4_MM[0] - MARGIN_MM - _SIDE_MM
    side = _table(leaf, material, x, top, _SIDE_MM) + 1.4
    pairs = _Pairs(material)
    # The plot is as high as the page leaves room for.
    free = end - pairs.height_mm - 1.6 - side - height_mm(_SMALL_PT)
    low, high = _PLOT_MM
    side = _plot(leaf, material, x, side, _SIDE_MM, min(max(free, low), high))
    return pairs.draw(leaf, max(pictures + 3.0, side + 1.6))


class _Pairs:
    """Each detail of two designs side by side, in one row or two."""

    def __init__(self, material: Material) -> None:
        self._material = material
        self._room = A4_MM[0] - 2.0 * MARGIN_MM
        count = len(material.details)
        self._across = count if count <= 4 else math.ceil(count / 2)
        pair = (self._room - 5.0 * (self._across - 1)) / self._across
        self._size = min(_DETAIL_MM, 0.5 * (pair - 1.0))
        self._row = height_mm(_FIGURE_PT) + self._size + 0.9 + height_mm(_SMALL_PT)
        rows = math.ceil(count / self._across)
        self.height_mm = height_mm(_FIGURE_PT) + 1.5 + rows * self._row + (rows - 1) * 2.0

    def draw(self, leaf: Leaf, top: float) -> float:
        """Lay them down; return the y below them."""
        material, size = self._material, self._size
        pair = 2.0 * size + 1.0
        step = min((self._room - pair) / max(self._across - 1, 1), pair + 8.0)
        y = leaf.text(MARGIN_MM, top, _details_words(material, size), _FIGURE_PT) + 1.5
        for i, detail in enumerate(material.details):
            x = MARGIN_MM + (i % self._across) * step
            row = y + (i // self._across) * (self._row + 2.0)
            title = broken(detail_title(i, detail), _FIGURE_PT, pair)[0]
            below = leaf.text(x, row, title, _FIGURE_PT, heavy=True)
            for number in range(2):
                at = x + number * (size + 1.0)
                _detail(leaf, material, number, i, at, below, size)
                _badge(leaf, at, below + 0.4, material.figures[number].letter, 3.6)
        return top + self.height_mm


def _detail(
    leaf: Leaf, material: Material, number: int, i: int, x: float, y: float, size: float
) -> None:
    """Lay down one detail of one design, with its finest detail below."""
    leaf.picture(material.detail(number, material.details[i], to_px(size)), x, y + 0.4)
    leaf.box(x, y + 0.4, size, size, outline=FAINT, thick=0.1)
    own = material.figures[number].places[i].plain_cycles_deg
    best = max(one.places[i].plain_cycles_deg for one in material.figures)
    words = f"{own:#.3g}".rstrip(".") + " cycles/deg" if own > 0.0 else "nothing is drawn"
    leaf.text(x, y + size + 0.9, words, _SMALL_PT, heavy=own == best)


def detail_title(i: int, detail: Detail) -> str:
    """Return the number, name, place and distance of a detail."""
    far = "" if math.isinf(detail.distance_mm) else f", {format_length(_two_figures(detail))}"
    where = f", {detail.where}" if detail.where else ""
    return f"{i + 1}  {detail.name}{where}{far}"


def _two_figures(detail: Detail) -> float:
    size = 10.0 ** (math.floor(math.log10(detail.distance_mm)) - 1)
    return round(detail.distance_mm / size) * size


def _details_words(material: Material, size_mm: float) -> str:
    """Say at what scale the details are."""
    first = material.details[0]
    enlarged = [material.film_enlarged(i, first, size_mm) for i in range(len(material.pictures))]
    same = max(enlarged) < 1.01 * min(enlarged)
    times = (
        f"{enlarged[0]:.1f} x the film"
        if same
        else ", ".join(
            f"{one.letter} {n:.1f} x its film"
            for one, n in zip(material.figures, enlarged, strict=True)
        )
    )
    return (
        f"Details, all at one scale: {size_mm:.0f} mm of paper is {material.detail_deg(first):.1f} deg "
        f"of the scene, {times}"
    )


def _rows(leaf: Leaf, material: Material, top: float) -> float:
    """Give each design a row: its picture, and its details beside it."""
    room = A4_MM[0] - 2.0 * MARGIN_MM
    shape = material.shape(*(to_px(side) for side in _ROW_PICTURE_MM))
    wide, high = shape[1] / PX_PER_MM, shape[0] / PX_PER_MM
    count = len(material.details)
    beside = MARGIN_MM + wide + 5.0
    free = A4_MM[0] - MARGIN_MM - beside
    size = min(44.0, (free - 2.0 * (count - 1)) / count)
    y = leaf.text(MARGIN_MM, top, _details_words(material, size), _FIGURE_PT, room_mm=room) + 2.0
    for number in range(len(material.pictures)):
        below = _name(leaf, material, number, MARGIN_MM, y, room) + 1.0
        _picture(leaf, material, number, MARGIN_MM, below, shape)
        caption = height_mm(_FIGURE_PT)
        for i, detail in enumerate(material.details):
            x = beside + i * (size + 2.0)
            title = broken(detail_title(i, detail), _FIGURE_PT, size)[0]
            leaf.text(x, below, title, _FIGURE_PT)
            _detail(leaf, material, number, i, x, below + caption - 0.4, size)
        y = below + max(high, caption + size + 0.4 + height_mm(_SMALL_PT)) + 5.0
    plot = 92.0
    figures = _table(leaf, material, MARGIN_MM, y, room - plot - 8.0)
    curves = _plot(leaf, material, MARGIN_MM + room - plot, y, plot, 60.0)
    return max(figures, curves)


def _table(leaf: Leaf, material: Material, x: float, y: float, room: float) -> float:
    """Draw the figures, a column for each design; return the y below."""
    designs = material.figures
    label = min(36.0, 0.36 * room)
    column = (room - label) / len(designs)
    for i, design in enumerate(designs):
        at = x + label + i * column
        _badge(leaf, at, y, design.letter, 4.0)
    y += 5.2
    step = height_mm(_FIGURE_PT) + 0.45
    for group in table(designs):
        leaf.line([(x, y - 0.2), (x + room, y - 0.2)])
        leaf.text(x, y + 0.35, group.title, _SMALL_PT, colour=FAINT)
        y += height_mm(_SMALL_PT) + 0.7
        for row in group.rows:
            leaf.text(x, y, broken(row.label, _FIGURE_PT, label - 1.0)[0], _FIGURE_PT)
            for i, cell in enumerate(row.cells):
                _cell(leaf, cell, x + label + i * column, y, column - 1.0)
            y += step
        y += 0.6
    return y


def _cell(leaf: Leaf, cell: Cell, x: float, y: float, room: float) -> None:
    size = _FIGURE_PT
    pill = width_mm(cell.mark, _SMALL_PT) + 3.4 if cell.mark else 0.0
    while size > 5.0 and width_mm(cell.text, size) + pill > room:
        size -= 0.2
    leaf.text(x, y, cell.text, size, heavy=bool(cell.mark))
    if cell.mark:
        _pill(leaf, x + width_mm(cell.text, size) + 1.4, y - 0.05, cell.mark, _SMALL_PT)


def _plot(leaf: Leaf, material: Material, x: float, y: float, wide: float, high: float) -> float:
    """Draw contrast against detail; return the y below the plot and its words."""
    curves = material.curves
    y = leaf.text(
        x, y, "Contrast that is left, against detail in the scene", _FIGURE_PT, heavy=True
    )
    left, right, top, bottom = x + 8.0, x + wide - 1.0, y + 1.5, y + high - 8.0
    end = float(curves.cycles_deg[-1])

    def across(value: float) -> float:
        return left + (right - left) * value / end

    def down(value: float) -> float:
        return bottom - (bottom - top) * value

    for level in (0.0, 0.2, 0.5, 1.0):
        strong = level in {0.0, 0.2}
        leaf.line(
            [(left, down(level)), (right, down(level))],
            colour=FAINT if strong else HAIR,
            dashes=(0.8, 0.8) if level == 0.2 else (),
        )
        words = f"{100.0 * level:.0f} %"
        leaf.text(left - 1.0 - width_mm(words, _SMALL_PT), down(level) - 1.5, words, _SMALL_PT)
    for i in range(round(end / curves.step) + 1):
        value = i * curves.step
        leaf.line([(across(value), bottom), (across(value), bottom + 0.8)], colour=FAINT)
        words = f"{value:g}"
        leaf.text(across(value) - 0.5 * width_mm(words, _SMALL_PT), bottom + 1.0, words, _SMALL_PT)
    # Letters stand on the lines at heights of their own, so that none covers another.
    heights = np.linspace(0.78, 0.34, max(len(curves.lines), 2))
    for number, line in enumerate(curves.lines):
        colour = COLOURS[line.design % len(COLOURS)]
        middle = line.place == curves.lines[0].place
        points = [
            (across(float(nu)), down(max(float(one), 0.0)))
            for nu, one in zip(curves.cycles_deg, line.contrast, strict=True)
        ]
        leaf.line(points, colour=colour, thick=0.4, dashes=() if middle else (1.6, 0.9))
        at = int((line.contrast <= heights[number]).argmax())
        letter_x, letter_y = points[at]
        leaf.box(letter_x - 1.5, letter_y - 1.5, 3.0, 3.0, fill=PAPER, outline=colour)
        leaf.text(
            letter_x - 0.5 * width_mm(line.letter, _SMALL_PT),
            letter_y - 1.35,
            line.letter,
            _SMALL_PT,
            colour=colour,
            heavy=True,
        )
    places = list(dict.fromkeys(line.place for line in curves.lines))
    words = "cycles per degree; " + (
        f"full lines {places[0]}, broken lines {places[1]}"
        if len(places) == 2
        else f"{places[0] if places else 'no light'}"
    )
    return leaf.text(left, bottom + 4.0, words, _SMALL_PT, colour=FAINT, room_mm=right - left)
