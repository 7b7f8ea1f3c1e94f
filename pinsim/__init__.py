"""pinsim: preview, from an ordinary photo, what a camera with a bare hole will record.

    scene = pinsim.Scene.load("courtyard.jpg", horizontal_view_deg=84)
    camera = pinsim.Camera.load("box.toml")
    picture = pinsim.preview(scene, camera)
    picture.save("preview.png")

Importing this package loads nothing heavy; each name is fetched when it is first used.
"""

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pinsim.best import best_diameter_mm
    from pinsim.camera import Camera, Film, Hole
    from pinsim.errors import DesignError, OutputError, PinsimError, SceneError, UnitError
    from pinsim.render.picture import Picture
    from pinsim.render.preview import preview
    from pinsim.scene import Scene
    from pinsim.sheets import compare, contact_sheet

__version__ = "0.1.0"

__all__ = [
    "Camera",
    "DesignError",
    "Film",
    "Hole",
    "OutputError",
    "Picture",
    "PinsimError",
    "Scene",
    "SceneError",
    "UnitError",
    "best_diameter_mm",
    "compare",
    "contact_sheet",
    "preview",
]

_ROOM_OF = {
    "Camera": "camera",
    "DesignError": "errors",
    "Film": "camera",
    "Hole": "camera",
    "OutputError": "errors",
    "Picture": "render.picture",
    "PinsimError": "errors",
    "Scene": "scene",
    "SceneError": "errors",
    "UnitError": "errors",
    "best_diameter_mm": "best",
    "compare": "sheets",
    "contact_sheet": "sheets",
    "preview": "render.preview",
}


def __getattr__(name: str) -> Any:
    import importlib

    if name in _ROOM_OF:
        value = getattr(importlib.import_module(f"{__name__}.{_ROOM_OF[name]}"), name)
        globals()[name] = value
        return value
    if name == "optics":
        return importlib.import_module(f"{__name__}.optics")
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
