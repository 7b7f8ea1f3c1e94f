"""pinsim live: a page on this machine that shows the picture while the camera is changed."""

import importlib.util
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from pinsim.cli import options

if TYPE_CHECKING:
    from pinsim.live.designs import Given

_NEEDED = ("starlette", "uvicorn")
# Options of the line that are keys of the page's state under another name.
_KEY_OF = {
    "view_deg": "view_deg",
    "distance_mm": "distance_mm",
    "projection": "projection",
    "beyond": "beyond",
    "highlight_lift_stops": "highlight_lift",
    "wavelength_nm": "wavelength_nm",
    "time_s": "time",
    "look": "look",
}
_SAME = (
    *("map_step", "map_unit", "map_along", "map_kind", "near", "far", "baseline"),
    *("map_focal_length", "holes", "ground", "horizon"),
)


@click.command("live")
@click.argument("scene", required=False)
@click.argument("camera", required=False)
@options.scene_options
@options.camera_options
@options.light_options
@click.option(
    "--port",
    type=click.IntRange(0, 65535),
    default=0,
    help="Where the page is served on this machine; a free port unless told.",
)
@click.option("--no-browser", is_flag=True, help="Only print the address.")
def command(
    scene: str | None, camera: str | None, port: int, no_browser: bool, **given: Any
) -> None:
    """Show a page in the browser: the picture changes while you change the camera.

    SCENE is a photo, a scene file (.toml) or sample:NAME, else a sample; others can be dropped on the
    page. CAMERA is a design file (.toml) or sample:NAME; or type it: --hole 0.30mm --focal-length 60mm.
    The page is served to this machine only, and no photo leaves it. Ctrl-C ends it.
    """
    from pinsim.errors import PinsimError, SceneError

    missing = [name for name in _NEEDED if importlib.util.find_spec(name) is None]
    if missing:
        raise PinsimError(
            f"the page needs packages that are not installed ({', '.join(missing)}); "
            "install them with: pip install 'pinsim[live]'"
        )
    for path, kind in ((scene, "photo or scene file"), (given["distance_map"], "distance map")):
        if path and not path.startswith("sample:") and not Path(path).is_file():
            raise SceneError(f"{path}: no such file; give the path of a {kind}.")
    make: Callable[[], Given] = lambda: _given(scene, camera, given)  # noqa: E731
    typed = given["hole_mm"] is not None or given["focal_mm"] is not None
    if scene or camera or typed or any(value for value in given.values() if value != "upright"):
        made = make()  # what is wrong with it is said here, before a browser opens
        make = lambda: made  # noqa: E731
    from pinsim.live.run import serve

    serve(make, port=port, browser=not no_browser, say=click.echo)


def _given(scene: str | None, camera: str | None, given: Mapping[str, Any]) -> "Given":
    """Return what the line gave; what is wrong with it is refused here."""
    from pinsim.camera.design_file import read_traced_from
    from pinsim.cli.designs import make_camera
    from pinsim.errors import DesignError, SceneError
    from pinsim.live.designs import FIRST_CAMERA, FIRST_SCENE, Given
    from pinsim.live.refused import RefusedError
    from pinsim.live.state import camera_keys, read_state
    from pinsim.samples import PREFIX, resolve
    from pinsim.scene.distance_table import distances_from_options

    typed = given["hole_mm"] is not None and given["focal_mm"] is not None
    design = make_camera(
        camera or (None if typed else FIRST_CAMERA),
        hole_mm=given["hole_mm"],
        focal_mm=given["focal_mm"],
        options=given,
    )
    if scene is not None and scene.startswith(PREFIX):
        resolve(scene, "scene", SceneError)
    state = {key: given[name] for name, key in _KEY_OF.items() if given[name] is not None}
    state |= {key: given[key] for key in _SAME if given[key] is not None}
    if given["ev"] is not None:
        state["light"] = given["light"].given if given["light"] is not None else given["ev"]
    if given["look_at_deg"] is not None:
        angles = (*given["look_at_deg"], 0.0)[:3]
        state |= dict(zip(("yaw_deg", "pitch_deg", "roll_deg"), angles, strict=True))
    if given["distance_map"] is not None:
        state["map"] = "map-given"
    if "distance_mm" in state and state["distance_mm"] == float("inf"):
        state["distance_mm"] = "infinity"
    distances_from_options(given)  # a step without a map cannot be mended on the page
    file = Path(camera) if camera and not camera.startswith(PREFIX) else None
    own = camera_keys(design, traced="given", materials_of="given")
    try:
        read_state({**own, **state}, {"given": design}, scene or FIRST_SCENE)
    except RefusedError as problem:
        raise DesignError(str(problem)) from None
    return Given(
        scene=scene or FIRST_SCENE,
        map=None if given["distance_map"] is None else Path(given["distance_map"]),
        camera=design,
        design_file=file,
        traced=read_traced_from(file) if design.hole.shape == "traced" and file else None,
        materials=_absolute(given["materials_file"] or design.materials.file),
        state=state,
    )


def _absolute(path: str) -> str:
    return str(Path(path).absolute()) if path else ""
