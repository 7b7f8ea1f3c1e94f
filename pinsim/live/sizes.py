"""How large pictures are, what files can be made, and what they need; nothing here is heavy to load."""

import math

from pinsim.camera import Camera
from pinsim.live.refused import RefusedError
from pinsim.live.state import State
from pinsim.scene import Scene

# Few widths: the scene on a film's grid is kept from picture to picture while the grid is the same.
WIDTHS_PX = (240, 320, 400, 480, 560, 720, 840, 1000, 1240, 1440, 1720, 2000, 2880)
COARSE_PIXELS, FINE_PIXELS = 160_000, 1_000_000
WIDTH_RANGE_PX = (16, 4000)
MOST_PIXELS = 12_000_000  # of a picture on the page; a tall film's width alone would not bound it
FORMATS = {"jpeg": "image/jpeg", "png": "image/png", "webp": "image/webp"}

SAVE_FORMATS = {
    "picture": (".png", ".jpg", ".tif"),
    "comparison": (".png", ".pdf", ".jpg", ".tif"),
    "contact": (".pdf", ".png", ".jpg", ".tif"),
    "numbers": (".png", ".jpg", ".tif"),
}
MOST_DESIGNS = 30


def widths_for(camera: Camera) -> dict[str, int]:
    """Return the widths, px, of a quick picture and of one of about a megapixel, for a film's shape."""
    ratio = camera.film.width_mm / camera.film.height_mm

    def nearest(pixels: int) -> int:
        wanted = math.sqrt(pixels * ratio)
        return min(WIDTHS_PX, key=lambda one: abs(math.log(one / wanted)))

    return {"coarse": nearest(COARSE_PIXELS), "fine": nearest(FINE_PIXELS), "most": WIDTHS_PX[-1]}


def light_for(state: State, scene: Scene) -> float | None:
    """Return the brightness in EV, told or the scene's; RefusedError when a time lacks it."""
    ev = scene.ev if state.ev is None else state.ev
    if ev is None and state.time_s is not None:
        raise RefusedError(
            "a time needs the light it is meant for, and this scene does not tell it: choose one, "
            "such as sun.",
            field="light",
            needs="light",
        )
    return ev
