"""pinsim compare: two designs or more, the same part of the scene, and which draws finer."""

from pathlib import Path
from typing import Any

import click

from pinsim.cli import options


@click.command("compare")
@click.argument("scene")
@click.argument("cameras", nargs=-1, metavar="[CAMERA]...")
@options.scene_options
@options.cameras_options
@options.light_options
@click.option(
    "--detail",
    "details",
    type=options.PLACE,
    multiple=True,
    metavar="X,Y",
    help="A place to look at closely, as shares from left and top of what all designs show: 0.3,0.6; "
    "repeat for more. Without it: centre, edge, corner, nearest thing.",
)
@click.option(
    "--page",
    type=click.Path(),
    metavar="FILE",
    help="Also write a page for a browser (.html): a divider across the pictures, and a loupe.",
)
@options.output_options
def command(
    scene: str,
    cameras: tuple[str, ...],
    holes_mm: tuple[float, ...],
    focals_mm: tuple[float, ...],
    details: tuple[tuple[float, float], ...],
    page: str | None,
    output: str | None,
    overwrite: bool,
    **given: Any,
) -> None:
    """Lay two designs or two hole sizes side by side, and say which draws finer, and what it costs.

    The same part of SCENE through design files; or through one design, or a typed one, with several
    holes: --hole 0.20mm --hole 0.40mm (or several --focal-length). One CAMERA with one --hole compares
    the design with itself under the other hole. Of more than two, up to six, each has a row.
    The output is one page, .png, .jpg, .tif or .pdf, of its true size.
    """
    from pinsim.cli.designs import (
        assumed,
        default_output,
        input_files,
        make_camera,
        make_cameras,
    )
    from pinsim.cli.scenes import load_scene
    from pinsim.cli.show import progress_bar, tell
    from pinsim.errors import DesignError
    from pinsim.files import check_target, keep_inputs
    from pinsim.samples import PREFIX
    from pinsim.sheets.lettering import SHEET_SUFFIXES
    from pinsim.sheets.side_by_side import PAGE_SUFFIXES, check_compare, compare

    designs = make_cameras(cameras, holes_mm=holes_mm, focals_mm=focals_mm, options=given)
    if len(designs) == 1 and cameras and len(holes_mm) + len(focals_mm) == 1:
        designs.insert(0, make_camera(cameras[0], hole_mm=None, focal_mm=None, options=given))
    if len(designs) < 2:
        raise DesignError(
            "compare needs two designs, these are 1; give two CAMERAs, "
            "or one with two holes: --hole 0.20mm --hole 0.40mm"
        )
    check_compare(designs, details)
    target = (
        Path(output)
        if output
        else default_output(f"{Path(scene.removeprefix(PREFIX)).stem}-compared")
    )
    inputs = input_files(scene, *cameras, given["distance_map"], given["materials_file"])
    check_target(target, overwrite=overwrite, suffixes=SHEET_SUFFIXES, inputs=inputs)
    page_target = None if page is None else Path(page)
    if page_target is not None:
        check_target(page_target, overwrite=overwrite, suffixes=PAGE_SUFFIXES, inputs=inputs)
    place = load_scene(scene, given)
    keep_inputs(target, place.files)
    if page_target is not None:
        keep_inputs(page_target, place.files)
    notes: list[str] = []
    with progress_bar(place.name) as report:
        sheet = compare(
            place,
            designs,
            details=details,
            time_s=given["time_s"],
            ev=given["ev"],
            wavelength_nm=given["wavelength_nm"],
            look=given["look"],
            report=report,
            on_picture=lambda picture: notes.extend(picture.notes),
        )
    sheet.save(target, overwrite=overwrite)
    lines = [f"{target}: {sheet.size_text}"]
    if page_target is not None:
        sheet.save_page(page_target, overwrite=overwrite)
        lines.append(f"{page_target}: {page_target.stat().st_size / 1e6:.1f} MB, for a browser")
    tell(
        [
            *lines,
            *(f"{one.letter}: {one.name}, {one.summary}" for one in sheet.figures),
            sheet.verdict,
            *(f"note: {note}" for note in (*assumed(cameras, given), *dict.fromkeys(notes))),
        ]
    )
