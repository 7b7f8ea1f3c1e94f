"""pinsim contact-sheet: scenes down, designs across."""

from pathlib import Path
from typing import Any

import click

from pinsim.cli import options


@click.command("contact-sheet")
@click.argument("scenes", nargs=-1, required=True, metavar="SCENE...")
@click.option(
    "--camera", "cameras", multiple=True, help="A design file or sample:NAME; repeat for more."
)
@options.scene_options
@options.cameras_options
@options.light_options
@options.output_options
def command(
    scenes: tuple[str, ...],
    cameras: tuple[str, ...],
    holes_mm: tuple[float, ...],
    focals_mm: tuple[float, ...],
    output: str | None,
    overwrite: bool,
    **given: Any,
) -> None:
    """Lay scenes and designs out on one sheet.

    Every SCENE through every design: each --camera with each --hole and each --focal-length given.
    Several scenes stand below each other, their designs side by side.
    """
    from pinsim.cli.designs import (
        assumed,
        default_output,
        input_files,
        load_scene,
        make_cameras,
    )
    from pinsim.cli.show import progress_bar, tell
    from pinsim.files import PICTURE_SUFFIXES, check_target, keep_inputs
    from pinsim.sheets.contact import contact_sheet

    designs = make_cameras(cameras, holes_mm=holes_mm, focals_mm=focals_mm, options=given)
    target = Path(output) if output else default_output("contact-sheet")
    inputs = input_files(*scenes, *cameras, given["distance_map"])
    check_target(target, overwrite=overwrite, suffixes=PICTURE_SUFFIXES, inputs=inputs)
    places = [load_scene(scene, given) for scene in scenes]
    keep_inputs(target, [file for place in places for file in place.files])
    notes: list[str] = []
    with progress_bar("contact sheet") as report:
        sheet = contact_sheet(
            places,
            designs,
            time_s=given["time_s"],
            ev=given["ev"],
            wavelength_nm=given["wavelength_nm"],
            look=given["look"],
            report=report,
            on_picture=lambda picture: notes.extend(
                f"{picture.scene_name}: {note}" for note in picture.notes
            ),
        )
    sheet.save(target, overwrite=overwrite)
    tell(
        [
            f"{target}: {sheet.codes.shape[1]} x {sheet.codes.shape[0]} px, "
            f"{_count(len(places), 'scene')} x {_count(len(designs), 'design')}",
            *(f"note: {note}" for note in (*assumed(cameras, given), *notes)),
        ]
    )


def _count(number: int, thing: str) -> str:
    return f"{number} {thing}" if number == 1 else f"{number} {thing}s"
