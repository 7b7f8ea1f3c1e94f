"""pinsim preview: one scene through one camera."""

import importlib
import threading
from pathlib import Path
from typing import Any

import click

from pinsim.cli import options


@click.command("preview")
@click.argument("scene")
@click.argument("camera", required=False)
@options.scene_options
@options.camera_options
@options.light_options
@click.option("--width", "width_px", type=int, help="Width of the picture in pixels.")
@click.option(
    "--bits",
    type=click.Choice(["8", "16", "float"]),
    help="Depth of a .tif: 8, 16 or float exposure.",
)
@options.output_options
def command(
    scene: str, camera: str | None, output: str | None, overwrite: bool, **given: Any
) -> None:
    """Draw what a camera would record of a scene.

    SCENE is a photo, a scene file (.toml) or sample:NAME. CAMERA is a design file (.toml) or
    sample:NAME; or type the camera: --hole 0.30mm --focal-length 60mm --film 6x6. The picture prints
    at the film's true size.
    """
    from pinsim.cli.designs import (
        assumed,
        camera_stem,
        default_output,
        input_files,
        load_scene,
        make_camera,
    )
    from pinsim.cli.show import progress_bar, tell
    from pinsim.files import EXPOSURE_SUFFIXES, check_bits, check_target, keep_inputs
    from pinsim.samples import PREFIX

    design = make_camera(
        camera, hole_mm=given["hole_mm"], focal_mm=given["focal_mm"], options=given
    )
    stem = Path(scene.removeprefix(PREFIX)).stem
    target = Path(output) if output else default_output(f"{stem}-{camera_stem(camera, design)}")
    inputs = input_files(scene, camera, given["distance_map"])
    check_target(target, overwrite=overwrite, suffixes=EXPOSURE_SUFFIXES, inputs=inputs)
    check_bits(target.suffix.lower(), given["bits"])
    # The renderer's libraries take as long to load as a large photo to decode: both at once.
    loading = threading.Thread(target=importlib.import_module, args=("pinsim.render.spread",))
    loading.start()
    try:
        place = load_scene(scene, given)
    finally:
        loading.join()
    keep_inputs(target, place.files)
    from pinsim.render.develop import LOOK_TEXT
    from pinsim.render.preview import preview

    with progress_bar(place.name) as report:
        picture = preview(
            place,
            design,
            time_s=given["time_s"],
            ev=given["ev"],
            wavelength_nm=given["wavelength_nm"],
            look=given["look"],
            width_px=given["width_px"],
            averaged=True,
            report=report,
        )
    picture.save(target, bits=given["bits"], overwrite=overwrite)
    rows, columns = picture.exposure.shape[:2]
    tell(
        [
            f"{target}: {columns} x {rows} px, prints {design.film.width_mm:g} x "
            f"{design.film.height_mm:g} mm; {design.tone}, {LOOK_TEXT[picture.look]}",
            f"camera: {design.name}, {design.summary}, {design.material_name}",
            *(f"note: {note}" for note in (*assumed([camera], given), *picture.notes)),
        ]
    )
