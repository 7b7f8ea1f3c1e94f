"""pinsim numbers: one camera's figures, as a table or as JSON."""

import json
import math
from typing import TYPE_CHECKING, Any

import click

from pinsim.cli import options

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table

    from pinsim.numbers import Advice, Figures


@click.command("numbers")
@click.argument("camera", required=False)
@options.camera_options
@click.option(
    "--distance",
    "distances_mm",
    type=options.DISTANCE,
    multiple=True,
    help="A distance to tell sharpness for; repeat for more.",
)
@click.option("--wavelength", "wavelength_nm", type=options.WAVELENGTH, help="Light of one colour.")
@click.option(
    "--json", "as_json", is_flag=True, help="Print JSON: lengths mm, angles deg, times s."
)
@click.option(
    "--plot",
    type=click.Path(),
    metavar="FILE",
    help="Also draw contrast curves and point images as a picture (.png, .jpg, .tif).",
)
@click.option("--overwrite", is_flag=True, help="Replace the plot's file if it exists.")
def command(
    camera: str | None,
    distances_mm: tuple[float, ...],
    wavelength_nm: float | None,
    as_json: bool,
    plot: str | None,
    overwrite: bool,
    **given: Any,
) -> None:
    """Print a camera's figures: sharpness over the frame, angles, light, best hole and tools for it.

    CAMERA is a design file or sample:NAME; or type it: --hole 0.30mm --focal-length 60mm --film 6x6.
    """
    from pinsim.cli.designs import input_files, make_camera
    from pinsim.numbers import USUAL_DISTANCES_MM, figures, plain_figures

    if plot is not None:  # before any work is done
        from pathlib import Path

        from pinsim.files import PICTURE_SUFFIXES, check_target

        check_target(
            Path(plot),
            overwrite=overwrite,
            suffixes=PICTURE_SUFFIXES,
            inputs=input_files(camera),
        )
    design = make_camera(
        camera, hole_mm=given["hole_mm"], focal_mm=given["focal_mm"], options=given
    )
    distances = distances_mm or USUAL_DISTANCES_MM
    result = figures(design, distances_mm=distances, wavelength_nm=wavelength_nm)
    if as_json:
        click.echo(json.dumps(plain_figures(result), indent=2))
    else:
        _tables(result)
    if plot is not None:
        from pinsim.sheets.numbers_plot import numbers_plot

        sheet = numbers_plot(design, distance_mm=distances[0], wavelength_nm=wavelength_nm)
        sheet.save(plot, overwrite=overwrite)
        click.echo(f"wrote {plot}", err=as_json)


def _frame(figures: Any) -> str:
    size = f"{figures.frame_width_mm:g} x {figures.frame_height_mm:g} mm"
    return str(figures.frame) if figures.frame.startswith(size) else f"{figures.frame}: {size}"


def _tables(figures: "Figures") -> None:
    from rich.console import Console

    from pinsim.units import format_time

    console = Console(highlight=False, markup=False)
    _head(console, figures)
    _distances(console, figures)
    if figures.advice is not None:
        _places(console, figures, figures.advice)
        _best(console, figures.advice)
        _choices(console, figures.advice)
        _classical(console, figures, figures.advice)
    times = ", ".join(f"EV {ev:g}: {format_time(time)}" for ev, time in figures.times_s)
    console.print(
        f"\nMetered times (EV at ISO 100; {figures.material} at its usual speed; "
        f"no reciprocity correction): {times}. pinsim exposure gives the times to set."
    )


def _head(console: "Console", figures: "Figures") -> None:
    from rich.table import Table

    from pinsim.units import format_length

    head = Table(box=None, show_header=False, pad_edge=False)
    head.add_column(style="bold")
    head.add_column()
    plate = f", plate {figures.plate_thickness_mm:g} mm" if figures.plate_thickness_mm > 0.0 else ""
    hole = f"{figures.hole_mm:.3g} mm" if figures.round_hole else figures.hole
    for name, value in (
        ("camera", figures.name),
        ("hole", f"{hole}{plate}"),
        ("hole to film", f"{figures.focal_length_mm:g} mm"),
        ("f-number", f"f/{figures.f_number:.0f}"),
        ("frame", _frame(figures)),
        (
            "angle of view",
            f"{figures.horizontal_view_deg:.0f} deg across, {figures.vertical_view_deg:.0f} deg high, "
            f"{figures.diagonal_view_deg:.0f} deg corner to corner",
        ),
        ("corners", f"{_darker(figures.corner_falloff_stops)} at {figures.corner_deg:.0f} deg"),
        (
            "material",
            f"{figures.material}, judged at {figures.mean_wavelength_nm:.0f} nm on average",
        ),
        (
            "cut-off",
            f"contrast ends at {figures.cutoff_cycles_mm:.3g} cycles/mm for the average wavelength",
        ),
    ):
        head.add_row(name, value)
    if figures.advice is not None:
        head.add_row(
            "best hole",
            f"{figures.advice.best_hole_mm:.3f} mm over the frame, "
            f"{figures.far.best_hole_mm:.3f} mm in the middle (objects at "
            f"{format_length(figures.far.distance_mm)})",
        )
    console.print(head)


def _grid(*titles: str) -> "Table":
    """Return an empty table; the first column is words, the others are figures."""
    from rich import box
    from rich.table import Table

    table = Table(box=box.ASCII)
    for i, title in enumerate(titles):
        table.add_column(title, justify="right" if i else "left")
    return table


def _darker(stops: float) -> str:
    if math.isinf(stops):
        return "unlit"
    return "0 stops" if stops < 0.05 else f"{stops:.1f} stops darker"


def _distances(console: "Console", figures: "Figures") -> None:
    from pinsim.numbers import format_detail
    from pinsim.units import format_length

    console.print(
        "\nWhere the hole's axis meets the film, by distance of the object (at 20 % contrast):"
    )
    table = _grid(
        "distance",
        "half of a point's\nlight within",
        "finest detail\non the film" if figures.round_hole else "detail, right\nand up",
        "one cycle\nat the object",
        "best hole",
    )
    for row in figures.distances:
        there = (
            f"{60.0 * math.degrees(1.0 / (row.detail_cycles_mm * figures.focal_length_mm)):.1f} arcmin"
            if math.isinf(row.distance_mm)
            else format_length(row.object_mm)
        )
        detail = (
            f"{format_detail(row.detail_cycles_mm)} cycles/mm"
            if figures.round_hole
            else f"{format_detail(row.right_cycles_mm)}, {format_detail(row.up_cycles_mm)} c/mm"
        )
        table.add_row(
            format_length(row.distance_mm),
            f"{row.spot_mm:.3g} mm",
            detail,
            there,
            f"{row.best_hole_mm:.3f} mm",
        )
    console.print(table)


def _places(console: "Console", figures: "Figures", advice: "Advice") -> None:
    from pinsim.numbers import format_detail
    from pinsim.units import format_length

    console.print(
        f"\nOver the frame, objects at {format_length(advice.distance_mm)} "
        "(finest detail, cycles/mm at 20 %):"
    )
    titles = ("outwards", "around") if figures.round_hole else ("to the right", "upwards")
    table = _grid("place", "off the axis", "light", *titles)
    for place in figures.places:
        pair = (
            (place.tangential_cycles_mm, place.sagittal_cycles_mm)
            if figures.round_hole
            else (place.right_cycles_mm, place.up_cycles_mm)
        )
        table.add_row(
            place.name,
            f"{place.field_deg:.0f} deg",
            _darker(place.falloff_stops),
            *("-" if one <= 0.0 else format_detail(one) for one in pair),
        )
    console.print(table)
    if figures.round_hole:
        console.print(
            "Outwards: fine lines that follow each other away from the middle (tangential); "
            "around: those that follow each other round it (sagittal)."
        )
    else:
        console.print(
            "To the right: upright lines that follow each other to the right; upwards: level ones."
        )


def _best(console: "Console", advice: "Advice") -> None:
    console.print("\nThe round hole that draws the finest detail, by what must still be seen:")
    table = _grid("contrast", "in the middle", "over the frame", "in the corner")
    words = {0.5: "clear", 0.2: "plain to see", 0.1: "just seen"}
    for row in advice.best:
        table.add_row(
            f"{100.0 * row.contrast:.0f} %, {words[row.contrast]}",
            f"{row.middle_mm:.3f} mm",
            f"{row.frame_mm:.3f} mm",
            "unlit" if row.corner_mm is None else f"{row.corner_mm:.3f} mm",
        )
    console.print(table)
    console.print(
        "Over the frame is the compromise: it maximises the geometric mean of the finest detail "
        "over the frame's area, outwards and around."
    )
    tolerance = advice.tolerance
    ends = []
    if tolerance.low_mm is not None and tolerance.smaller_share is not None:
        ends.append(f"down to {tolerance.low_mm:.3f} mm (-{100.0 * tolerance.smaller_share:.0f} %)")
    if tolerance.high_mm is not None and tolerance.larger_share is not None:
        ends.append(f"up to {tolerance.high_mm:.3f} mm (+{100.0 * tolerance.larger_share:.0f} %)")
    if ends:
        console.print(
            f"Tolerance: a hole {' or '.join(ends)} loses "
            f"{100.0 * tolerance.lost_share:.0f} % of the finest detail at 20 % contrast."
        )


def _choices(console: "Console", advice: "Advice") -> None:
    console.print(
        "\nDrills and needles near it; what each costs over the frame, against the best hole:"
    )
    table = _grid("hole", "diameter", "finest detail", "light on the film")
    rows = (advice.best_choice, advice.own, *advice.choices)
    for row in sorted(rows, key=lambda one: one.diameter_mm):
        unsure = f" +- {row.unsure_mm:.2f}" if row.unsure_mm > 0.0 else ""
        loss = 100.0 * row.detail_loss_share
        table.add_row(
            row.label,
            f"{row.diameter_mm:.3f}{unsure} mm",
            "the finest"
            if row is advice.best_choice
            else "as the best"
            if loss < 0.5
            else f"-{loss:.0f} %",
            "the same" if abs(row.exposure_stops) < 0.05 else f"{row.exposure_stops:+.1f} stops",
        )
    console.print(table)
    if advice.note:
        console.print(advice.note)
    console.print(
        "Lists of needle sizes disagree by up to 25 %: measure the hole. " + advice.caution
    )


def _classical(console: "Console", figures: "Figures", advice: "Advice") -> None:
    from pinsim.numbers import format_detail

    console.print(
        f"\nWhat books give for this depth, d = k sqrt(lambda f) at "
        f"{figures.mean_wavelength_nm:.0f} nm (cycles/mm in the middle):"
    )
    table = _grid("author", "year", "k", "hole", "cycles/mm", "best for")
    table.columns[-1].justify = "left"
    for row in advice.classical:
        table.add_row(
            row.author,
            row.year,
            f"{row.constant:.2f}",
            f"{row.diameter_mm:.3f} mm",
            format_detail(row.detail_cycles_mm),
            row.best_for,
        )
    console.print(table)
    console.print(
        "None of them is wrong: each suits another need. Kingslake's and Abney's formulas are from "
        "memory, Reynolds and Ward's constant is inferred; sources: --json."
    )
