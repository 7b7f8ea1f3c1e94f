"""pinsim compare: two designs or two hole sizes side by side."""

from pathlib import Path
from typing import Any

import click

from pinsim.cli import options


@click.command("compare")
@click.argument("scene")
@click.argument("cameras", nargs=-1, metavar="[CAMERA] [CAMERA]")
@options.scene_options
@options.cameras_options
@options.light_options
@options.output_options
def command(
    scene: str,
    cameras: tuple[str, ...],
    holes_mm: tuple[float, ...],
    focals_mm: tuple[float, ...],
    output: str | None,
    overwrite: bool,
    **given: Any,
) -> None:
    """Lay two designs or two hole sizes side by side.

    The same part of SCENE through two design files; or through one design, or a typed one, with two
    holes: --hole 0.20mm --hole 0.40mm (or two --focal-length). One CAMERA with one --hole compares the
    design with itself under the other hole. A centre and a corner detail stand below each.
    """
    from pinsim.cli.designs import (
        assumed,
        default_output,
        input_files,
        load_scene,
        make_camera,
        make_cameras,
    )
    from pinsim.cli.show import progress_bar, tell
    from pinsim.errors import DesignError
    from pinsim.files import PICTURE_SUFFIXES, check_target, keep_inputs
    from pinsim.samples import PREFIX
    from pinsim.sheets.side_by_side import compare

    designs = make_cameras(cameras, holes_mm=holes_mm, focals_mm=focals_mm, options=given)
    if len(designs) == 1 and cameras and len(holes_mm) + len(focals_mm) == 1:
        designs.insert(0, make_camera(cameras[0], hole_mm=None, focal_mm=None, options=given))
    if len(designs) != 2:
        raise DesignError(
            f"compare needs two designs, these are {len(designs)}; give two CAMERAs, "
            "or one with two holes: --hole 0.20mm --hole 0.40mm"
        )
    target = (
        Path(output)
        if output
        else default_output(f"{Path(scene.removeprefix(PREFIX)).stem}-compared")
    )
    inputs = input_files(scene, *cameras, given["distance_map"])
    check_target(target, overwrite=overwrite, suffixes=PICTURE_SUFFIXES, inputs=inputs)
    place = load_scene(scene, given)
    keep_inputs(target, place.files)
    notes: list[str] = []
    with progress_bar(place.name) as report:
        sheet = compare(
            place,
            designs,
            time_s=given["time_s"],
            ev=given["ev"],
            wavelength_nm=given["wavelength_nm"],
            look=given["look"],
            report=report,
            on_picture=lambda picture: notes.extend(picture.notes),
        )
    sheet.save(target, overwrite=overwrite)
    tell(
        [
            f"{target}: {sheet.codes.shape[1]} x {sheet.codes.shape[0]} px",
            f"left:  {designs[0].name}, {designs[0].summary}",
            f"right: {designs[1].name}, {designs[1].summary}",
            *(f"note: {note}" for note in (*assumed(cameras, given), *notes)),
        ]
    )
