"""The finished sheet: its pages, how they are saved, and its table."""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from pinsim import files
from pinsim.batch.draw import codes_of
from pinsim.batch.needs import Need, nearest_to, sort_key
from pinsim.batch.store import Store
from pinsim.errors import DesignError
from pinsim.sheets.contact.captions import Entry, choose_group, common, grouped
from pinsim.sheets.contact.layout import Layout, PageFormat, columns_for, lay_out
from pinsim.sheets.contact.paper import Codes, Place, as_picture, write_pdf
from pinsim.sheets.contact.table import rows_of, save_table
from pinsim.sheets.lettering import SHEET_SUFFIXES, Sheet


@dataclass(frozen=True, slots=True, kw_only=True)
class Style:
    """How a sheet is laid out; see contact_sheet for what each means."""

    longer_px: int = 460
    detail: bool = True
    need: Need | None = None
    sort: tuple[str, ...] = ()
    group: str | None = None
    page: PageFormat
    columns: int | None = None
    title: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class ContactSheet:
    """Frames laid out on one or more pages.

    entries : in the order of the sheet. nearest : places of those that meet the need best.
    """

    description: str
    entries: tuple[Entry, ...]
    nearest: tuple[int, ...]
    layout: Layout
    need: str
    inputs: Mapping[str, str]
    _store: Store = field(repr=False)

    @property
    def page_count(self) -> int:
        """How many pages it has."""
        return len(self.layout.pages)

    @property
    def failed(self) -> int:
        """How many frames could not be drawn."""
        return sum(entry.about is None for entry in self.entries)

    @property
    def codes(self) -> Codes:
        """The first page, sRGB codes, uint8 (rows, columns, 3)."""
        return self.page(0)

    def page(self, number: int) -> Codes:
        """Return a page, from 0, as sRGB codes; it is made anew each time."""
        return as_picture(self.layout.pages[number], self.layout.px_per_mm, self._fetch)

    def pages(self) -> Iterator[Sheet]:
        """Yield the pages one after another, so that only one is in memory."""
        for number in range(self.page_count):
            yield Sheet(self.page(number), self.description)

    def page_paths(self, path: str | Path) -> list[Path]:
        """Return the files that `save` writes: one, or for pictures one for each page."""
        target = Path(path)
        if target.suffix.lower() in {".pdf", ".tif", ".tiff"}:
            return [target]
        others = range(2, self.page_count + 1)
        return [target, *(target.with_stem(f"{target.stem}-{number}") for number in others)]

    def save(self, path: str | Path, *, overwrite: bool = False) -> list[Path]:
        """Write all pages; return the files.

        .pdf and .tif hold all pages; of .png and .jpg the first has the name given, the others -2, -3
        and so on before the ending. Raises OutputError, before anything is written where it can.
        """
        paths = self.page_paths(path)
        for one in paths:
            files.check_target(one, overwrite=overwrite, suffixes=SHEET_SUFFIXES)
        suffix = paths[0].suffix.lower()
        dpi = self.layout.px_per_mm * 25.4
        write: Callable[[Any], None]
        if suffix == ".pdf":

            def write(file: Any) -> None:
                write_pdf(file, self.layout.pages, self._fetch_png, title=self.description)

            files.write_whole(paths[0], write, overwrite=overwrite)
        elif suffix in {".tif", ".tiff"}:

            def write(file: Any) -> None:
                pages = (sheet.codes for sheet in self.pages())
                files.write_tiff_pages(file, pages, dpi=dpi, description=self.description)

            files.write_whole(paths[0], write, overwrite=overwrite)
        else:
            for one, sheet in zip(paths, self.pages(), strict=True):
                encoded = files.encode_picture(
                    sheet.codes, suffix, dpi=dpi, description=self.description
                )
                files.write_whole(one, encoded, overwrite=overwrite)
        return paths

    def table(self) -> list[dict[str, Any]]:
        """Return a record of every frame's figures, in the order of the sheet."""
        return rows_of(self.entries, self.layout.places, self.nearest)

    def save_table(self, path: str | Path, *, overwrite: bool = False) -> None:
        """Write the figures as .csv or .json."""
        save_table(
            Path(path), self.table(), need=self.need, inputs=self.inputs, overwrite=overwrite
        )

    def _fetch(self, place: Place) -> Codes:
        return codes_of(self._fetch_png(place))

    def _fetch_png(self, place: Place) -> bytes:
        return self._store.png(self.entries[place.frame].key, detail=place.what != "frame")


def compose(
    entries: Sequence[Entry],
    store: Store,
    style: Style,
    *,
    inputs: Mapping[str, str] | None = None,
    remarks: Sequence[str] = (),
) -> ContactSheet:
    """Return the sheet of entries: sorted, grouped, laid out, the nearest to the need marked."""
    if not entries:
        raise DesignError("a contact sheet needs at least one frame.")
    words = style.sort
    ordered = sorted(entries, key=lambda one: sort_key(words, one.frame, one.about or {}))
    groups = grouped(ordered, choose_group(ordered, style.group))
    laid = [entry for group in groups for entry in group]
    need = style.need
    near = nearest_to(need, [entry.about for entry in laid]) if need else []
    shared = common(laid)
    names = list(dict.fromkeys(entry.frame.scene_name for entry in laid))
    count = f"{len(laid)} frames" if len(laid) > 1 else ""
    title = style.title or ": ".join(
        part for part in (shared.get("scene") or ", ".join(names[:4]), count) if part
    )
    layout = lay_out(
        groups,
        format_=style.page,
        columns=columns_for(style.page, groups, style.columns),
        longer_px=style.longer_px,
        detail=style.detail,
        title=title,
        near=near,
        need=need.means if need else "",
        remarks=remarks,
    )
    look = shared.get("look", "")
    return ContactSheet(
        description=f"pinsim contact sheet: {', '.join(names)}{'; ' if look else ''}{look}",
        entries=tuple(laid),
        nearest=tuple(near),
        layout=layout,
        need=need.means if need else "",
        inputs=dict(inputs or {}),
        _store=store,
    )
