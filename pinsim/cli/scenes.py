"""What was typed on the line to a Scene."""

from collections.abc import Mapping
from typing import Any

from pinsim.scene import Scene
from pinsim.scene.distance_table import distances_from_options


def load_scene(path: str, options: Mapping[str, Any]) -> Scene:
    """Return a scene from its path and the scene options."""
    return Scene.load(
        path,
        horizontal_view_deg=options.get("view_deg"),
        distance_mm=options.get("distance_mm"),
        distances=distances_from_options(options),
        projection=options.get("projection"),
        beyond=options.get("beyond"),
        look_at_deg=options.get("look_at_deg"),
        highlight_lift_stops=options.get("highlight_lift_stops"),
    )
