"""pinsim preview: one scene through one camera."""

import contextlib
import importlib
import math
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from pinsim.cli import options

if TYPE_CHECKING:
    from pinsim.camera import Camera


@click.command("preview")
@click.argument("scene")
@click.argument("camera", required=False)
@options.scene_options
@options.camera_options
@options.light_options
@click.option("--width", "width_px", type=int, help="Width of the picture in pixels.")
@click.option("--grain", is_flag=True, help="With --time: draw the material's grain, at true size.")
@click.option(
    "--seed", type=int, help="Draw the grain of this number; the same number, the same grain."
)
@click.option(
    "--bracket",
    type=int,
    is_flag=False,
    flag_value=5,
    metavar="[N]",
    help="A strip of N pictures (5) under times a stop apart, around --time, usually auto.",
)
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
    from pinsim.cli.memory import tune_for_one_picture
    from pinsim.cli.scenes import load_scene

    tune_for_one_picture()
    # A large photo takes as long to decode as all the rest to get ready: both at once.
    with ThreadPoolExecutor(1) as aside:
        reading = aside.submit(load_scene, scene, given)
        design, target, seed = _prepare(scene, camera, output, overwrite, given)
        _make_ready(design, given)
        place = reading.result()
    from pinsim.cli.designs import assumed
    from pinsim.cli.show import progress_bar, tell
    from pinsim.files import keep_inputs

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
            grain_seed=seed,
            report=report,
        )
    if given["bracket"] is not None:
        from pinsim.sheets.bracket import bracket_strip

        sheet = bracket_strip(picture, count=given["bracket"])
        sheet.save(target, overwrite=overwrite)
        rows, columns = sheet.codes.shape[:2]
        result = f"{given['bracket']} exposures a stop apart"
    else:
        picture.save(target, bits=given["bits"], overwrite=overwrite)
        rows, columns = picture.exposure.shape[:2]
        result = f"prints {design.film.width_mm:g} x {design.film.height_mm:g} mm"
    tell(
        [
            f"{target}: {columns} x {rows} px, {result}; {design.tone}, {LOOK_TEXT[picture.look]}",
            f"camera: {design.name}, {design.summary}, {design.material_name}",
            *(f"note: {note}" for note in (*assumed([camera], given), *picture.notes)),
        ]
    )


def _prepare(
    scene: str, camera: str | None, output: str | None, overwrite: bool, given: dict[str, Any]
) -> tuple["Camera", Path, int | None]:
    """Return the design, where its picture goes and the grain's seed; refuse what cannot be."""
    from pinsim.cli.designs import camera_stem, default_output, input_files, make_camera
    from pinsim.errors import DesignError
    from pinsim.files import EXPOSURE_SUFFIXES, check_bits, check_target
    from pinsim.samples import PREFIX

    seed = given["seed"]
    if seed is not None and not 0 <= seed < 2**63:
        raise DesignError(f"--seed is {seed}; it must be a whole number from 0 on.")
    if given["grain"] and seed is None:
        seed = 1
    design = make_camera(
        camera, hole_mm=given["hole_mm"], focal_mm=given["focal_mm"], options=given
    )
    stem = f"{Path(scene.removeprefix(PREFIX)).stem}-{camera_stem(camera, design)}"
    suffixes: tuple[str, ...] = EXPOSURE_SUFFIXES
    if given["bracket"] is not None:
        suffixes = _prepare_bracket(given, design)
        stem += "-bracket"
    target = Path(output) if output else default_output(stem)
    inputs = input_files(scene, camera, given["distance_map"])
    check_target(target, overwrite=overwrite, suffixes=suffixes, inputs=inputs)
    check_bits(target.suffix.lower(), given["bits"])
    return design, target, seed


def _make_ready(design: "Camera", given: dict[str, Any]) -> None:
    """Load the renderer, and make the kernels for the distance that most scenes have."""
    importlib.import_module("pinsim.render.preview")
    from pinsim.errors import PinsimError
    from pinsim.render.plan import plan_for

    distance, width_px = given["distance_mm"] or math.inf, given["width_px"]
    if width_px is not None and width_px < 1:
        return
    # What is wrong with the design is said when it is used, by the main thread.
    with contextlib.suppress(PinsimError):
        plan_for((distance, distance), design, given["wavelength_nm"], width_px, False)


def _prepare_bracket(given: dict[str, Any], design: "Camera") -> tuple[str, ...]:
    """Set what a strip needs: a time, and a small picture; return the files that it can be."""
    from pinsim.errors import DesignError
    from pinsim.sheets.bracket import bracket_times_s, cell_width_px
    from pinsim.sheets.lettering import SHEET_SUFFIXES

    for name in ("width_px", "bits"):
        if given[name] is not None:
            raise DesignError(
                f"--{name.removesuffix('_px')} does not go with --bracket: a strip has its own size."
            )
    bracket_times_s(1.0, given["bracket"])  # refuses a wrong count before any work is done
    if given["time_s"] is None:
        given["time_s"] = "auto"
    given["width_px"] = cell_width_px(design.film.width_mm, design.film.height_mm)
    return SHEET_SUFFIXES
