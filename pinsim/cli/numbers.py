"""pinsim numbers: one camera's figures, as a table or as JSON."""

import json
import math
from typing import Any

import click

from pinsim.cli import options


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
def command(
    camera: str | None,
    distances_mm: tuple[float, ...],
    wavelength_nm: float | None,
    as_json: bool,
    **given: Any,
) -> None:
    """Print a camera's figures: sharpness, angles, light, best hole.

    CAMERA is a design file or sample:NAME; or type it: --hole 0.30mm --focal-length 60mm --film 6x6.
    """
    from pinsim.cli.designs import make_camera
    from pinsim.numbers import USUAL_DISTANCES_MM, Figures, figures

    design = make_camera(
        camera, hole_mm=given["hole_mm"], focal_mm=given["focal_mm"], options=given
    )
    result = figures(
        design, distances_mm=distances_mm or USUAL_DISTANCES_MM, wavelength_nm=wavelength_nm
    )
    if as_json:
        click.echo(json.dumps(_plain(result), indent=2))
        return
    if not isinstance(result, Figures):
        raise TypeError("figures() returned something else")
    _table(result)


def _plain(value: Any) -> Any:
    """Return figures as JSON takes them; infinity has no number there and becomes a word."""
    from dataclasses import asdict

    def clean(item: Any) -> Any:
        if isinstance(item, dict):
            return {key: clean(one) for key, one in item.items()}
        if isinstance(item, list | tuple):
            return [clean(one) for one in item]
        if isinstance(item, float) and math.isinf(item):
            return "infinity"
        return item

    plain = clean(asdict(value))
    plain["times_s"] = [{"ev": ev, "time_s": time} for ev, time in plain["times_s"]]
    return plain


def _table(figures: Any) -> None:
    from rich import box
    from rich.console import Console
    from rich.table import Table

    from pinsim.units import format_length, format_time

    console = Console(highlight=False, markup=False, width=None)
    head = Table(box=None, show_header=False, pad_edge=False)
    head.add_column(style="bold")
    head.add_column()
    for name, value in (
        ("camera", figures.name),
        ("hole", f"{figures.hole_mm:.3g} mm"),
        ("hole to film", f"{figures.focal_length_mm:g} mm"),
        ("f-number", f"f/{figures.f_number:.0f}"),
        ("frame", f"{figures.frame}: {figures.frame_width_mm:g} x {figures.frame_height_mm:g} mm"),
        (
            "angle of view",
            f"{figures.horizontal_view_deg:.0f} deg across, {figures.vertical_view_deg:.0f} deg high, "
            f"{figures.diagonal_view_deg:.0f} deg corner to corner",
        ),
        (
            "corners",
            f"{figures.corner_falloff_stops:.1f} stops darker at {figures.corner_deg:.0f} deg",
        ),
        (
            "material",
            f"{figures.material}, judged at {figures.mean_wavelength_nm:.0f} nm on average",
        ),
        (
            "cut-off",
            f"nothing finer than {figures.cutoff_cycles_mm:.3g} cycles/mm reaches the film",
        ),
        (
            "best hole",
            f"{figures.far.best_hole_mm:.3f} mm for this depth, "
            f"objects at {format_length(figures.far.distance_mm)}",
        ),
    ):
        head.add_row(name, value)
    console.print(head)
    console.print(
        "\nIn the middle of the film, by distance of the object (detail at 20 % contrast):"
    )
    table = Table(box=box.ASCII)
    for title in (
        "distance",
        "half of a point's\nlight within",
        "finest detail\non the film",
        "one cycle\nat the object",
        "best hole",
    ):
        table.add_column(title, justify="right")
    for row in figures.distances:
        there = (
            f"{60.0 * math.degrees(1.0 / (row.detail_cycles_mm * figures.focal_length_mm)):.1f} arcmin"
            if math.isinf(row.distance_mm)
            else format_length(row.object_mm)
        )
        table.add_row(
            format_length(row.distance_mm),
            f"{row.spot_mm:.3g} mm",
            f"{row.detail_cycles_mm:.3g} cycles/mm",
            there,
            f"{row.best_hole_mm:.3f} mm",
        )
    console.print(table)
    times = ", ".join(f"EV {ev:g}: {format_time(time)}" for ev, time in figures.times_s)
    console.print(
        f"Metered times (EV at ISO 100; {figures.material} at its usual speed; "
        f"no reciprocity correction): {times}"
    )
