"""pinsim exposure: times by light, for one camera, several materials or several holes."""

import json
import math
import shutil
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from pinsim.cli import options

if TYPE_CHECKING:
    from pinsim.camera import Camera
    from pinsim.exposure.table import Cell, TimeTable
    from pinsim.exposure.times import Time

_WIDE = 100  # columns of a terminal from which on there is room for lux and metered times


@click.command("exposure")
@click.argument("camera", required=False)
@options.times_options
@click.option("--json", "as_json", is_flag=True, help="Print JSON: times in seconds.")
@click.option(
    "--card-size",
    default="A6",
    show_default=True,
    metavar="SIZE",
    help="Size of the card: A4, A5, A6, A7, or width x height such as 120mmx80mm.",
)
@options.output_options
def command(
    camera: str | None,
    lights: tuple[Any, ...],
    as_json: bool,
    card_size: str,
    output: str | None,
    overwrite: bool,
    **given: Any,
) -> None:
    """Tell exposure times by light: the table to pin in the box's lid.

    Lights go down; materials (repeat --material) or holes (repeat --hole) go across. CAMERA is a
    design file or sample:NAME; or type it: --hole 0.30mm --focal-length 60mm. Times are corrected for
    long exposure as the material needs. With -o card.pdf they are also drawn as a card of true size.
    """
    from pinsim.cli.designs import assumed, input_files, read_as
    from pinsim.exposure.light import usual_lights
    from pinsim.exposure.table import time_table

    target = Path(output) if output else None
    size_mm = _card_size_mm(card_size)
    if target is not None:
        from pinsim.files import check_target
        from pinsim.sheets.exposure_card import CARD_SUFFIXES

        check_target(
            target,
            overwrite=overwrite,
            suffixes=CARD_SUFFIXES,
            inputs=input_files(camera, given["materials_file"]),
        )
    table = time_table(
        _cameras(camera, given), lights or usual_lights(), filter_factor=_filter_factor(given)
    )
    if target is not None:
        from pinsim.sheets.exposure_card import exposure_card

        card = exposure_card(table, size_mm=size_mm)
        card.save(target, overwrite=overwrite)
    if as_json:
        click.echo(json.dumps(_plain(table), indent=2))
    else:
        width = max(shutil.get_terminal_size((80, 24)).columns, 60)
        notes = [*assumed([camera], given), *(read_as(light) for light in lights)]
        for line in (*_text(table, width), *(f"note: {note}" for note in notes)):
            click.echo(line.encode("ascii", "backslashreplace").decode())
    if target is not None:
        width_mm, height_mm = size_mm
        click.echo(
            f"{target}: a card of {width_mm:g} x {height_mm:g} mm; print it at 100 %", err=as_json
        )


def _cameras(path: str | None, given: dict[str, Any]) -> list["Camera"]:
    from pinsim.cli.designs import make_camera

    holes: Sequence[float | None] = given["holes_mm"] or (None,)
    materials: Sequence[str | None] = given["material_names"] or (None,)
    return [
        make_camera(
            path, hole_mm=hole, focal_mm=given["focal_mm"], options={**given, "material": material}
        )
        for hole in dict.fromkeys(holes)
        for material in dict.fromkeys(materials)
    ]


def _filter_factor(given: dict[str, Any]) -> float:
    from pinsim.errors import DesignError

    factor, stops = given["filter_factor"], given["filter_stops"]
    if factor is not None and stops is not None:
        raise DesignError(
            "--filter-factor and --filter-stops tell the same; give one of them (8 is 3 stops)."
        )
    if stops is None:
        return 1.0 if factor is None else float(factor)
    if not 0.0 <= stops <= 19.0:  # also refuses nan
        raise DesignError(f"--filter-stops is {stops:g}; it must be 0 to 19, such as 3.")
    return float(2.0**stops)


# ISO 216, held sideways.
_CARDS_MM = {
    "a4": (297.0, 210.0),
    "a5": (210.0, 148.0),
    "a6": (148.0, 105.0),
    "a7": (105.0, 74.0),
}
_CARD_RANGE_MM = (50.0, 500.0)


def _card_size_mm(text: str) -> tuple[float, float]:
    from pinsim.errors import DesignError, nearest, out_of_range
    from pinsim.units import length_mm

    name = text.strip().lower()
    if name in _CARDS_MM:
        return _CARDS_MM[name]
    width, cross, height = name.partition("x")
    if not cross or not any(letter.isdigit() for letter in width):
        raise DesignError(
            f"--card-size: no card is called {text!a}.{nearest(name, _CARDS_MM)} "
            "Known: A4, A5, A6, A7; or give width and height, for example 120mmx80mm."
        )
    sides = length_mm(width, "--card-size"), length_mm(height, "--card-size")
    for side in sides:
        if not _CARD_RANGE_MM[0] <= side <= _CARD_RANGE_MM[1]:
            raise DesignError(out_of_range("--card-size", side, "mm", *_CARD_RANGE_MM))
    return sides


@dataclass(frozen=True, slots=True)
class _Printed:
    """A column of text: what stands above it, and its cells."""

    heads: tuple[str, ...]
    cells: list[str]

    @property
    def width(self) -> int:
        return max(map(len, (*self.heads, *self.cells)))


def _text(table: "TimeTable", width: int) -> list[str]:
    """Return the table as lines, in as many blocks as the width needs, and its legend below."""
    import textwrap

    single = len(table.columns) == 1
    lead = [
        _Printed(("light",), [light.words for light in table.lights]),
        _Printed(("EV",), [light.ev_text for light in table.lights]),
    ]
    columns = _single_columns(table, width) if single else _many_columns(table)
    head = f"{table.name}: {table.summary}"
    if single:
        only = table.columns[0].camera
        head += f", {only.material_name} at EI {only.material.speed_iso:g}"
    lines = textwrap.wrap(head, width, subsequent_indent="  ")
    for block in _blocks(lead, columns, width):
        lines += ["", *block]
    lines.append("")
    for line in table.legend():
        lines += textwrap.wrap(line, width, subsequent_indent="  ")
    return lines


def _single_columns(table: "TimeTable", width: int) -> list[_Printed]:
    from pinsim.exposure.light import lux_text
    from pinsim.exposure.times import time_text

    cells = [row[0] for row in table.cells]
    columns = [
        _Printed(("", "centre"), _times([cell.centre for cell in cells])),
        _Printed(("", "corner"), _times([cell.corner for cell in cells])),
        _Printed(("centre,", "stop less"), _times([cell.less for cell in cells])),
        _Printed(("centre,", "stop more"), _times([cell.more for cell in cells])),
    ]
    if width >= _WIDE:
        lux = [lux_text(light.illuminance_lx) for light in table.lights]
        columns.insert(0, _Printed(("on the", "scene"), lux))
        if table.columns[0].camera.material.reciprocity.needed:
            metered = [time_text(cell.centre.metered_s) for cell in cells]
            columns.insert(1, _Printed(("", "metered"), metered))
    return columns


def _times(times: Sequence["Time"]) -> list[str]:
    """Return times in words, with marks that hang out so that units stand below each other."""
    from pinsim.exposure.table import marked

    texts = [marked(time) for time in times]
    hang = " " if any(time.outside or not time.by_hand for time in times) else ""
    return [
        text if text != time.text else text + hang for text, time in zip(texts, times, strict=True)
    ]


def _many_columns(table: "TimeTable") -> list[_Printed]:
    columns = []
    for index, column in enumerate(table.columns):
        cells = [row[index] for row in table.cells]
        parts = [
            _Printed(("centre",), _times([cell.centre for cell in cells])),
            _Printed(("corner",), _times([cell.corner for cell in cells])),
        ]
        both = [
            f"{centre:>{parts[0].width}}  {corner:>{parts[1].width}}"
            for centre, corner in zip(*((*part.heads, *part.cells) for part in parts), strict=True)
        ]
        columns.append(_Printed((column.title, column.subtitle, both[0]), both[1:]))
    return columns


def _blocks(lead: list[_Printed], columns: list[_Printed], width: int) -> list[list[str]]:
    """Lay columns out beside the leading ones, as many at a time as fit."""
    left = sum(column.width + 2 for column in lead)
    blocks: list[list[_Printed]] = [[]]
    for column in columns:
        used = left + sum(one.width + 2 for one in blocks[-1])
        if blocks[-1] and used + column.width > width:
            blocks.append([])
        blocks[-1].append(column)
    return [_laid_out([*lead, *block]) for block in blocks]


def _laid_out(columns: list[_Printed]) -> list[str]:
    """Return lines: heads standing on a rule, then cells; words to the left, figures to the right."""
    deep = max(len(column.heads) for column in columns)
    heads = [("",) * (deep - len(column.heads)) + column.heads for column in columns]
    rows = [
        *(row for row in zip(*heads, strict=True) if any(row)),
        tuple("-" * column.width for column in columns),
        *zip(*(column.cells for column in columns), strict=True),
    ]
    return [
        "  ".join(
            f"{word:{'<' if i == 0 else '>'}{column.width}}"
            for i, (word, column) in enumerate(zip(row, columns, strict=True))
        ).rstrip()
        for row in rows
    ]


def _plain(table: "TimeTable") -> dict[str, Any]:
    """Return the table as JSON takes it; infinity has no number there and becomes null."""

    def number(value: float) -> float | None:
        return None if math.isinf(value) else value

    def time(one: "Time") -> dict[str, Any]:
        return {
            "metered_s": number(one.metered_s),
            "corrected_s": number(one.corrected_s),
            "set_s": number(one.set_s),
            "text": one.text,
            "by_hand": one.by_hand,
            "outside_the_data": list(one.outside),
        }

    def cell(one: "Cell") -> dict[str, Any]:
        return {
            "centre": time(one.centre),
            "corner": time(one.corner),
            "one_stop_less": time(one.less),
            "one_stop_more": time(one.more),
        }

    return {
        "name": table.name,
        "filter_factor": table.filter_factor,
        "columns": [
            {
                "title": column.title,
                "hole_mm": column.camera.hole.diameter_mm,
                "focal_length_mm": column.camera.focal_length_mm,
                "f_number": column.camera.f_number,
                "frame": column.camera.film.label,
                "material": column.camera.material_name,
                "speed_iso": column.camera.material.speed_iso,
                "correction": column.camera.material.reciprocity.label,
                "correction_source": column.camera.material.reciprocity.source,
                "correction_data_to_s": number(column.camera.material.reciprocity.data_to_s),
                "corner_stops_darker": number(column.corner_stops),
            }
            for column in table.columns
        ],
        "rows": [
            {
                "light": light.label,
                "given": light.given,
                "note": light.note,
                "ev": light.ev,
                "low_ev": light.low_ev,
                "high_ev": light.high_ev,
                "illuminance_lx": light.illuminance_lx,
                "luminance_cd_m2": light.luminance_cd_m2,
                "times": [cell(one) for one in row],
            }
            for light, row in zip(table.lights, table.cells, strict=True)
        ],
        "legend": table.legend(),
    }
