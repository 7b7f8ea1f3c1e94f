"""Where everything lies on the pages of a contact sheet, in millimetres."""

import math
import re
from collections.abc import Collection, Sequence
from dataclasses import dataclass, field

from pinsim.batch.draw import ENLARGED, STRIP_SHARE
from pinsim.errors import DesignError, UnitError
from pinsim.sheets.contact.captions import (
    ASKED,
    FOLLOWS,
    Entry,
    caption,
    common,
    common_notes,
    worded,
)
from pinsim.sheets.contact.paper import Box, Page, Place, Text, broken, line_mm, width_mm
from pinsim.sheets.lettering import SHEET_DPI
from pinsim.units import length_mm

# ISO 216 and the two usual American sheets (ANSI Y14.1); upright.
PAGES_MM = {
    "A2": (420.0, 594.0),
    "A3": (297.0, 420.0),
    "A4": (210.0, 297.0),
    "A5": (148.0, 210.0),
    "letter": (215.9, 279.4),
    "tabloid": (279.4, 431.8),
}
AS_LARGE_AS_NEEDED = "fit"
MOST_ACROSS = 24
_WRAP_ACROSS, _USUAL_ACROSS = 3, 6
_LEAST_CELL_MM = 44.0  # what a column is given on a page unless more columns are asked for
# Of a page that is as large as needed: lines above tiny frames need some room, too.
_TALLEST_MM, _NARROWEST_MM = 600.0, 64.0
_TITLE_PT, _GROUP_PT, _CAPTION_PT, _SMALL_PT = 12.0, 8.5, 6.6, 6.0
_SIZE = re.compile(r"(?P<width>[\d.]+\s*[a-z]+)\s*x\s*(?P<height>[\d.]+\s*[a-z]+)")
_MOST_NOTES = 4


@dataclass(frozen=True, slots=True, kw_only=True)
class PageFormat:
    """A page's size, mm; None is as large as needed. margin_mm, gap_mm : around and between frames."""

    size_mm: tuple[float, float] | None
    margin_mm: float
    gap_mm: float


def page_format(text: str | None) -> PageFormat:
    """Return a page from its name, "A4 landscape", "200mmx150mm" or "fit"; DesignError otherwise."""
    words = (text or AS_LARGE_AS_NEEDED).split()
    names = {name.lower(): size for name, size in PAGES_MM.items()}
    if [word.lower() for word in words] == [AS_LARGE_AS_NEEDED]:
        return PageFormat(size_mm=None, margin_mm=3.6, gap_mm=3.6)
    size = names.get(words[0].lower())
    turned = len(words) == 2 and words[1].lower() in {"landscape", "upright", "portrait"}
    if size is not None and (len(words) == 1 or turned):
        if turned and words[1].lower() == "landscape":
            size = size[1], size[0]
        return PageFormat(size_mm=size, margin_mm=10.0, gap_mm=4.0)
    typed = _SIZE.fullmatch(" ".join(words))
    if typed is not None:
        try:
            sides = length_mm(typed["width"], "page"), length_mm(typed["height"], "page")
        except UnitError as error:
            raise DesignError(str(error)) from None
        if not all(60.0 <= side <= 2000.0 for side in sides):
            raise DesignError(
                f"a page of {sides[0]:g} x {sides[1]:g} mm is not possible; give 60 to 2000 mm a side."
            )
        return PageFormat(size_mm=sides, margin_mm=min(10.0, 0.05 * min(sides)), gap_mm=4.0)
    raise DesignError(
        f"no page is called {text!r}. Known: {', '.join(PAGES_MM)} (A4 landscape), a size such as "
        f"200mmx150mm, or {AS_LARGE_AS_NEEDED}."
    )


def columns_for(format_: PageFormat, groups: Sequence[Sequence[Entry]], asked: int | None) -> int:
    """Return how many frames lie side by side; DesignError for what cannot be."""
    longest = max(len(group) for group in groups)
    if asked is not None:
        if not 1 <= asked <= MOST_ACROSS:
            raise DesignError(f"{asked} columns are not possible; give 1 to {MOST_ACROSS}.")
        return asked
    if format_.size_mm is None:
        if longest <= _WRAP_ACROSS + 1:
            return longest
        if len(groups) == 1 and longest <= 4 * _WRAP_ACROSS:
            return _WRAP_ACROSS
        most = _USUAL_ACROSS
    else:
        inner = format_.size_mm[0] - 2.0 * format_.margin_mm
        most = max(1, math.floor((inner + format_.gap_mm) / (_LEAST_CELL_MM + format_.gap_mm)))
        if longest <= most:
            return max(longest, min(2, most))
    # As few rows as can be, all about equally long.
    return math.ceil(longest / math.ceil(longest / most))


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """Pages, their scale, and where each entry lies: page, row and column, all from 1."""

    pages: tuple[Page, ...]
    px_per_mm: float
    places: tuple[tuple[int, int, int], ...]


@dataclass(slots=True)
class _Cell:
    """A frame's own part of a row."""

    entry: int
    frame_mm: tuple[float, float]
    lines: list[tuple[str, float, bool, bool]]  # words, letter size, bold, faint
    number: str
    near: bool


@dataclass(slots=True)
class _Pages:
    """Pages being filled from the top."""

    format: PageFormat
    width_mm: float
    done: list[tuple[list[Text | Place | Box], float]] = field(default_factory=list)
    things: list[Text | Place | Box] = field(default_factory=list)
    y_mm: float = 0.0

    @property
    def limit_mm(self) -> float:
        if self.format.size_mm is None:
            return _TALLEST_MM
        return self.format.size_mm[1] - self.format.margin_mm

    def write(
        self, x_mm: float, lines: Sequence[str], size_pt: float, *, bold: bool, faint: bool
    ) -> None:
        """Write lines at the present height and go on below them."""
        for line in lines:
            self.things.append(
                Text(x_mm=x_mm, y_mm=self.y_mm, line=line, size_pt=size_pt, bold=bold, faint=faint)
            )
            self.y_mm += line_mm(size_pt)

    def turn(self) -> None:
        """End a page."""
        self.done.append((self.things, self.y_mm))
        self.things, self.y_mm = [], 0.0


def lay_out(
    groups: Sequence[Sequence[Entry]],
    *,
    format_: PageFormat,
    columns: int,
    longer_px: int,
    detail: bool,
    title: str,
    near: Collection[int],
    need: str,
    remarks: Sequence[str] = (),
) -> Layout:
    """Return the pages of groups of entries.

    longer_px : pixels of a frame's longer side, which is as wide as a column. near : places, in the
    groups' order, of entries to be marked; need : why. remarks : lines below the title.
    """
    entries = [entry for group in groups for entry in group]
    if format_.size_mm is None:
        px_per_mm = SHEET_DPI / 25.4
        cell_mm = longer_px / px_per_mm
        width = columns * (cell_mm + format_.gap_mm) - format_.gap_mm + 2.0 * format_.margin_mm
        width = max(width, _NARROWEST_MM)
    else:
        width = format_.size_mm[0]
        cell_mm = (width - 2.0 * format_.margin_mm + format_.gap_mm) / columns - format_.gap_mm
        if cell_mm < 8.0:
            raise DesignError(
                f"{columns} columns leave {cell_mm:.1f} mm for a frame on a page {width:g} mm wide; "
                "give fewer columns or a larger page."
            )
        px_per_mm = longer_px / cell_mm
    pages = _Pages(format_, width)
    shared, notes = common(entries), common_notes(entries)
    near_lines = _near_line(entries, near, need, shared)
    remarks = [*remarks, *_legend(entries, shared, notes, detail), *near_lines]
    places: list[tuple[int, int, int]] = []
    _head(pages, title, remarks, shared)
    top = pages.y_mm
    start = 0
    for group in groups:
        said = set(shared) | (set(common(group)) if len(groups) > 1 else set())
        heading = _group_heading(group, shared) if len(groups) > 1 else ""
        told = (*notes, *(common_notes(group) if len(groups) > 1 else ()))
        extra = [note for note in told if note not in notes]
        cells = [
            _cell(entry, start + i, said, told, px_per_mm, cell_mm, start + i in near, longer_px)
            for i, entry in enumerate(group)
        ]
        if len(entries) == 1:
            cells[0].number = ""
        again = False
        for first in range(0, len(cells), columns):
            row = cells[first : first + columns]
            tall = _row_mm(row, cell_mm, detail)
            head_mm = 0.0
            if heading and (first == 0 or again):
                head_mm = line_mm(_GROUP_PT) + len(extra) * line_mm(_SMALL_PT) + 1.5
            needs_head = heading and first == 0
            if pages.y_mm + head_mm + tall > pages.limit_mm and pages.y_mm > top + 0.01:
                pages.turn()
                _head(pages, title, remarks, shared)
                needs_head = bool(heading)
            if pages.y_mm + tall > pages.limit_mm and format_.size_mm is not None:
                raise DesignError(
                    f"a row of frames is {tall:.0f} mm high and does not fit on the page, "
                    f"{format_.size_mm[1]:g} mm high; give more columns or a larger page."
                )
            if needs_head:
                _group_head(pages, heading + (" (continued)" if first else ""), extra)
            number = len({place[:2] for place in places if place[0] == len(pages.done) + 1}) + 1
            for i in range(len(row)):
                places.append((len(pages.done) + 1, number, i + 1))
            _lay_row(pages, row, entries, cell_mm, detail)
            again = True
        start += len(group)
        pages.y_mm += 1.0
    pages.turn()
    return Layout(pages=_finished(pages, title), px_per_mm=px_per_mm, places=tuple(places))


def _finished(pages: _Pages, title: str) -> tuple[Page, ...]:
    count = len(pages.done)
    finished = []
    for number, (things, used) in enumerate(pages.done, 1):
        if pages.format.size_mm is not None:
            height = pages.format.size_mm[1]
        else:
            height = used + pages.format.margin_mm - pages.format.gap_mm
        if count > 1:
            words = f"page {number} of {count}"
            x = pages.width_mm - pages.format.margin_mm - width_mm(words, _GROUP_PT)
            things.append(
                Text(
                    x_mm=x,
                    y_mm=pages.format.margin_mm + 0.8,
                    line=words,
                    size_pt=_GROUP_PT,
                    faint=True,
                )
            )
        finished.append(Page(width_mm=pages.width_mm, height_mm=height, things=tuple(things)))
    return tuple(finished)


def _head(pages: _Pages, title: str, remarks: Sequence[str], shared: dict[str, str]) -> None:
    margin = pages.format.margin_mm
    inner = pages.width_mm - 2.0 * margin
    pages.y_mm = margin
    beside = width_mm("page 100 of 100", _GROUP_PT) + 3.0
    lines = broken(title, _TITLE_PT, max(20.0, inner - beside), bold=True)
    pages.write(margin, lines, _TITLE_PT, bold=True, faint=False)
    pages.y_mm += 0.8
    said = worded({k: v for k, v in shared.items() if k not in {"scene", "ev"}}, (*ASKED, *FOLLOWS))
    if said:
        lines = broken(said, 7.5, inner)
        pages.write(margin, lines, 7.5, bold=False, faint=False)
    for remark in remarks:
        wanted = remark.startswith("Need:")
        lines = broken(remark, 7.5 if wanted else _SMALL_PT + 0.3, inner, bold=wanted)
        pages.write(
            margin, lines, 7.5 if wanted else _SMALL_PT + 0.3, bold=wanted, faint=not wanted
        )
    pages.y_mm += 2.5


def _group_head(pages: _Pages, heading: str, notes: Sequence[str]) -> None:
    margin = pages.format.margin_mm
    inner = pages.width_mm - 2.0 * margin
    lines = broken(heading, _GROUP_PT, inner, bold=True)
    pages.write(margin, lines, _GROUP_PT, bold=True, faint=False)
    for note in notes[:_MOST_NOTES]:
        pages.write(margin, broken(note, _SMALL_PT, inner), _SMALL_PT, bold=False, faint=True)
    pages.y_mm += 1.5


def _legend(
    entries: Sequence[Entry], shared: dict[str, str], notes: Sequence[str], detail: bool
) -> list[str]:
    parts = [shared[key] for key in ("wavelength", "look") if key in shared]
    if detail:
        parts.append(f"below each its middle, {ENLARGED:g} x enlarged")
    if any("detail" in entry.fact_of for entry in entries):
        parts.append(
            "c/mm: finest detail on the film at 20 % contrast, in the middle, in the corner"
        )
        light = f" at {shared['ev']}" if "ev" in shared else " at its EV"
        parts.append(f"s, min: what the material needs{light}")
    return ["; ".join(parts), *notes[:_MOST_NOTES]]


def _near_line(
    entries: Sequence[Entry], near: Collection[int], need: str, shared: dict[str, str]
) -> list[str]:
    if not need:
        return []
    if not near:
        return [f"Need: {need}. No frame tells."]
    ordered = sorted(near)
    first = entries[ordered[0]]
    own = {key: text for key, text in first.fact_of.items() if key not in shared}
    words = worded(own, (*ASKED, *FOLLOWS))
    also = f"; as near: {', '.join(str(i + 1) for i in ordered[1:6])}" if len(ordered) > 1 else ""
    more = ", ..." if len(ordered) > 6 else ""
    said = f" ({words})" if words else ""
    return [f"Need: {need}. Frame {ordered[0] + 1}{said}{also}{more}"]


def _group_heading(group: Sequence[Entry], shared: dict[str, str]) -> str:
    own = {key: text for key, text in common(group).items() if key not in shared}
    return worded(own, (*ASKED, *FOLLOWS))


def _cell(
    entry: Entry,
    place: int,
    said: set[str],
    told: Sequence[str],
    px_per_mm: float,
    cell_mm: float,
    near: bool,
    longer_px: int,
) -> _Cell:
    asked, follows, notes = caption(entry, said, told)
    number = str(place + 1)
    beside = width_mm(number, _SMALL_PT) + 1.0
    lines: list[tuple[str, float, bool, bool]] = []
    wide = max(6.0, cell_mm - beside)
    lines += [
        (line, _CAPTION_PT, True, False) for line in broken(asked, _CAPTION_PT, wide, bold=True)
    ]
    lines += [
        (line, _CAPTION_PT, False, False)
        for line in broken(follows, _CAPTION_PT, cell_mm if asked else wide)
    ]
    if near:
        words = "nearest to the need"
        lines += [(line, _CAPTION_PT, True, False) for line in broken(words, _CAPTION_PT, wide)]
    for note in notes:
        lines += [(line, _SMALL_PT, False, True) for line in broken(note, _SMALL_PT, cell_mm)]
    return _Cell(place, _frame_mm(entry, px_per_mm, longer_px), lines, number, near)


def _frame_mm(entry: Entry, px_per_mm: float, longer_px: int) -> tuple[float, float]:
    if entry.about is not None:
        return entry.about["columns"] / px_per_mm, entry.about["rows"] / px_per_mm
    frame = entry.frame
    if frame.camera is None:
        return longer_px / px_per_mm, 0.7 * longer_px / px_per_mm
    film = frame.camera.film
    rows = max(1, round(frame.width_px * film.height_mm / film.width_mm))
    return frame.width_px / px_per_mm, rows / px_per_mm


def _row_mm(row: Sequence[_Cell], cell_mm: float, detail: bool) -> float:
    """Return the height of a row without the gap below it."""
    tallest = max(cell.frame_mm[1] for cell in row)
    strip = (1.2 + STRIP_SHARE * cell_mm) if detail else 0.0
    return tallest + strip + 1.2 + max(_caption_mm(cell) for cell in row)


def _caption_mm(cell: _Cell) -> float:
    text = sum(line_mm(size) for _, size, _, _ in cell.lines)
    return max(text, line_mm(_SMALL_PT) if cell.number else 0.0)


def _lay_row(
    pages: _Pages, row: Sequence[_Cell], entries: Sequence[Entry], cell_mm: float, detail: bool
) -> None:
    tallest = max(cell.frame_mm[1] for cell in row)
    for i, cell in enumerate(row):
        entry = entries[cell.entry]
        x = pages.format.margin_mm + i * (cell_mm + pages.format.gap_mm)
        wide, tall = cell.frame_mm
        # Pictures of one row stand on one line, like prints on a shelf.
        top = pages.y_mm + tallest - tall
        pages.things.append(
            Place(
                x_mm=x,
                y_mm=top,
                width_mm=wide,
                height_mm=tall,
                frame=cell.entry,
                what="failed" if entry.about is None else "frame",
            )
        )
        if entry.about is None:
            _say_why(pages, entry, x, top, wide)
        below = pages.y_mm + tallest
        if detail:
            if entry.about is not None and entry.about.get("detail_rows"):
                share = entry.about["detail_rows"] / entry.about["columns"]
                pages.things.append(
                    Place(
                        x_mm=x,
                        y_mm=below + 1.2,
                        width_mm=wide,
                        height_mm=share * wide,
                        frame=cell.entry,
                        what="detail",
                    )
                )
            below += 1.2 + STRIP_SHARE * cell_mm
        below += 1.2
        if cell.number:
            pages.things.append(
                Text(
                    x_mm=x + cell_mm - width_mm(cell.number, _SMALL_PT),
                    y_mm=below,
                    line=cell.number,
                    size_pt=_SMALL_PT,
                    faint=True,
                )
            )
        y = below
        for words, size, bold, faint in cell.lines:
            pages.things.append(
                Text(x_mm=x, y_mm=y, line=words, size_pt=size, bold=bold, faint=faint)
            )
            y += line_mm(size)
        if cell.near:
            pages.things.append(
                Box(
                    x_mm=x - 1.2,
                    y_mm=pages.y_mm - 1.2,
                    width_mm=cell_mm + 2.4,
                    height_mm=below + _caption_mm(cell) - pages.y_mm + 2.0,
                    weight_mm=0.7,
                )
            )
    pages.y_mm += _row_mm(row, cell_mm, detail) + pages.format.gap_mm


def _say_why(pages: _Pages, entry: Entry, x: float, top: float, wide: float) -> None:
    """Write into the empty place that there is no picture; the reason stands below it."""
    words = "not drawn"
    pages.things.append(
        Text(
            x_mm=x + max(0.5, 0.5 * (wide - width_mm(words, _GROUP_PT, bold=True))),
            y_mm=top + 2.0,
            line=words,
            size_pt=_GROUP_PT,
            bold=True,
            faint=True,
        )
    )
