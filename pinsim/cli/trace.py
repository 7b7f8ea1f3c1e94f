"""pinsim trace: a drilled hole from its scan."""

import json
import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from pinsim.cli import options

if TYPE_CHECKING:
    from pinsim.against_round import AgainstRound
    from pinsim.camera import Camera
    from pinsim.tracing import HoleScan, Scale


@click.command("trace")
@click.argument("scan")
@options.trace_options
@options.traced_camera_options
@click.option(
    "--design",
    type=click.Path(),
    help="Write a design with the traced opening; needs --focal-length.",
)
@click.option("--name", help="The design's name; else the scan's.")
@click.option("--wavelength", "wavelength_nm", type=options.WAVELENGTH, help="Light of one colour.")
@click.option("--json", "as_json", is_flag=True, help="Print JSON: lengths mm, frequencies /mm.")
@options.output_options
def command(
    scan: str,
    design: str | None,
    name: str | None,
    wavelength_nm: float | None,
    as_json: bool,
    output: str | None,
    overwrite: bool,
    **given: Any,
) -> None:
    """Measure a drilled hole from a scan or macro photo of it.

    SCAN shows the hole bright on dark (lit through) or dark on bright. Its scale is told by
    --pixel-size, --dpi or --reference. The outline is drawn over the scan for the eye to check. With
    --focal-length it is told what the hole does to the picture; --design writes it as a camera.
    """
    from pinsim.against_round import against_round
    from pinsim.cli.designs import default_output
    from pinsim.cli.show import tell
    from pinsim.files import PICTURE_SUFFIXES, check_target
    from pinsim.scene.door import read_photo
    from pinsim.sheets.hole_overlay import hole_overlay
    from pinsim.tracing import Scale, read_reference, trace_hole

    if given["focal_mm"] is None:
        _refuse_camera_options({"design": design, "name": name, **given})
    scale = Scale(
        pixel_size_mm=given["pixel_mm"],
        dpi=given["dpi"],
        reference=read_reference(given["reference"], "--reference") if given["reference"] else None,
    )
    source = Path(scan)
    target = Path(output) if output else default_output(f"{source.stem}-traced")
    check_target(target, overwrite=overwrite, suffixes=PICTURE_SUFFIXES, inputs=[source])
    design_file = Path(design) if design else None
    if design_file:
        inputs = [source, *([Path(given["materials_file"])] if given["materials_file"] else [])]
        check_target(design_file, overwrite=overwrite, suffixes=(".toml",), inputs=inputs)
    hole = trace_hole(
        source,
        scale=scale,
        diameter_mm=given["diameter_mm"],
        polarity=given["polarity"],
        seen_from=given["seen_from"],
    )
    camera = _camera(hole, name or source.stem, given) if given["focal_mm"] is not None else None
    effect = against_round(camera, wavelength_nm=wavelength_nm) if camera else None
    words = _effect_lines(camera, effect) if camera and effect else []
    sheet = hole_overlay(read_photo(source), hole, title=source.name, lines=tuple(words))
    sheet.save(target, overwrite=overwrite)
    if design_file and camera:
        _write_design(design_file, source, camera, hole, scale, given, overwrite)
    if as_json:
        click.echo(json.dumps(_plain(hole, camera, effect), indent=2))
        return
    _table(hole)
    tell(
        [
            *words,
            *(f"note: {note}" for note in hole.notes),
            f"{target}: the outline over the scan; look whether it follows the hole's edge",
            *([f"{design_file}: the design with this hole"] if design_file else []),
        ]
    )


def _refuse_camera_options(given: dict[str, Any]) -> None:
    """Refuse what says something of a camera when there is none."""
    from pinsim.errors import DesignError

    of_film = ("film", "plate_mm", "shift_mm", "rise_mm", "material", "materials_file", "tone")
    for key in ("design", "name", *of_film):
        if given[key] is not None:
            option = f"--{key.removesuffix('_mm').removesuffix('_file')}"
            raise DesignError(
                f"{option} is of a camera, but how far its film is from the hole is not told; "
                "give it, for example --focal-length 60mm."
            )


def _camera(hole: "HoleScan", name: str, given: dict[str, Any]) -> "Camera":
    from dataclasses import replace

    from pinsim.camera import Camera, Hole, named_film
    from pinsim.cli.designs import DEFAULT_FILM, change_camera

    camera = Camera(
        name=name,
        focal_length_mm=given["focal_mm"],
        hole=Hole.traced(hole.opening),
        film=named_film(DEFAULT_FILM),
    )
    return replace(change_camera(camera, given), name=name)


def _write_design(
    file: Path,
    source: Path,
    camera: "Camera",
    hole: "HoleScan",
    scale: "Scale",
    given: dict[str, Any],
    overwrite: bool,
) -> None:
    from pinsim.camera.design_text import TracedFrom, design_text
    from pinsim.files import write_whole

    traced = TracedFrom(
        image=_as_seen_from(file, source),
        scale=scale,
        seen_from=hole.seen_from,
        polarity=hole.polarity,
        diameter_mm=given["diameter_mm"],
    )
    own = camera.materials.file
    text = design_text(
        camera, traced=traced, materials=_as_seen_from(file, Path(own)) if own else ""
    )
    write_whole(file, lambda out: _put(out, text), overwrite=overwrite)


def _as_seen_from(design: Path, other: Path) -> str:
    """Return the path of a file as a design names it."""
    try:
        return Path(os.path.relpath(other.resolve(), design.resolve().parent)).as_posix()
    except ValueError:  # on another drive of Windows there is no way from here to there
        return other.resolve().as_posix()


def _put(out: Any, text: str) -> None:
    out.write(text.encode("utf-8"))


def _change(loss: float) -> str:
    if abs(loss) < 0.005:
        return "as a round one"
    return f"{abs(100.0 * loss):.0f} % {'coarser' if loss > 0 else 'finer'} than a round one"


def _effect_lines(camera: "Camera", effect: "AgainstRound") -> list[str]:
    detail = effect.detail
    lines = [
        f"In the picture, against a round hole of {effect.diameter_mm:.3g} mm (same area), "
        f"{camera.focal_length_mm:g} mm from the film, {camera.material_name}, far scene, middle:",
        f"Finest detail at 20 % contrast: {detail.right_cycles_mm:.3g} cycles/mm to the right "
        f"({_change(detail.right_loss)}), {detail.up_cycles_mm:.3g} cycles/mm upwards "
        f"({_change(detail.up_loss)}); round {detail.round_cycles_mm:.3g} cycles/mm",
        f"Light: f/{effect.f_number:.0f}, as the round hole of the same area has",
    ]
    if camera.plate_thickness_mm > 0.0:
        lines.append(
            f"The plate's thickness leaves {100.0 * effect.corner_light:.1f} % of the light at the "
            f"corner; of a round hole's {100.0 * effect.round_corner_light:.1f} %"
        )
    return lines


def _plain(
    hole: "HoleScan", camera: "Camera | None", effect: "AgainstRound | None"
) -> dict[str, Any]:
    from dataclasses import asdict

    plain: dict[str, Any] = {
        "area_equivalent_diameter_mm": hole.area_equivalent_diameter_mm,
        "longest_mm": hole.longest_mm,
        "shortest_mm": hole.shortest_mm,
        "roughness_mm": hole.roughness_mm,
        "circularity": hole.circularity,
        "centroid_px": list(hole.centroid_px),
        "pixel_mm": hole.pixel_mm,
        "polarity": hole.polarity,
        "seen_from": hole.seen_from,
        "blur_mm": hole.blur_mm,
        "noise_mm": hole.noise_mm,
        "notes": list(hole.notes),
    }
    if camera and effect:
        plain["against_round"] = {
            "focal_length_mm": camera.focal_length_mm,
            "material": camera.material_name,
            **asdict(effect),
        }
    return plain


def _table(hole: "HoleScan") -> None:
    from rich.console import Console
    from rich.table import Table

    console = Console(highlight=False, markup=False)
    table = Table(box=None, show_header=False, pad_edge=False)
    table.add_column(style="bold")
    table.add_column()
    for name, value in (
        ("diameter", f"{hole.area_equivalent_diameter_mm:.4g} mm (round hole of the same area)"),
        ("longest", f"{hole.longest_mm:.4g} mm"),
        ("shortest", f"{hole.shortest_mm:.4g} mm"),
        ("roughness", f"{1000.0 * hole.roughness_mm:.2g} um rms from the best ellipse"),
        ("circularity", f"{hole.circularity:.3f} (a circle has 1)"),
        (
            "scan",
            f"{hole.polarity} hole {hole.area_equivalent_diameter_mm / hole.pixel_mm:.0f} px across "
            f"at {hole.centroid_px[0]:.0f},{hole.centroid_px[1]:.0f}, "
            f"{1000.0 * hole.pixel_mm:.4g} um to a pixel, seen from {hole.seen_from}",
        ),
        (
            "certainty",
            f"the scan's noise moves points of the outline by {1000.0 * hole.noise_mm:.2g} um; "
            f"its edge is soft by {1000.0 * hole.blur_mm:.2g} um",
        ),
    ):
        table.add_row(name, value)
    console.print(table)
