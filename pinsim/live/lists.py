"""Everything that the page lets choose, and its limits."""

from typing import Any

from pinsim import __version__
from pinsim.camera import FRAMES_MM, TONES
from pinsim.camera.film import BEND_AXES
from pinsim.camera.hole import SHAPES
from pinsim.exposure.light import LIGHT_NAMES, light_in_words
from pinsim.live import sizes
from pinsim.live.refused import plain_line
from pinsim.live.shelf import MOST_BYTES
from pinsim.live.state import CONTRASTS, LIMITS, LOOKS
from pinsim.material import Catalogue
from pinsim.scene.distance import ALONGS
from pinsim.scene.distance_file import HOLES, KINDS, MAP_UNITS
from pinsim.scene.door import MAX_PIXELS
from pinsim.scene.scene import BOUNDARIES, PROJECTIONS


def choices(catalogue: Catalogue) -> dict[str, Any]:
    """Return all lists to choose from, with the materials of a catalogue, and limits by key."""
    return {
        "version": __version__,
        "frames": [
            {"name": name, "width_mm": width, "height_mm": height}
            for name, (width, height) in FRAMES_MM.items()
        ],
        "materials": [_material(catalogue, name) for name in catalogue.names],
        "lights": [
            {"name": name, "words": light.label, "ev": light.ev, "ev_text": light.ev_text}
            for name in LIGHT_NAMES
            for light in (light_in_words(name),)
        ],
        "shapes": SHAPES,
        "tones": TONES,
        "looks": LOOKS,
        "bend_axes": BEND_AXES,
        "projections": PROJECTIONS,
        "beyonds": BOUNDARIES,
        "map_kinds": KINDS,
        "map_units": MAP_UNITS,
        "map_alongs": ALONGS,
        "map_holes": HOLES,
        "contrasts": CONTRASTS,
        "limits": {
            key: {"low": low, "high": high, "unit": unit}
            for key, (low, high, unit) in LIMITS.items()
        },
        "upload": {"bytes": MOST_BYTES, "megapixels": MAX_PIXELS // 1_000_000},
        "save": sizes.SAVE_FORMATS,
    }


def _material(catalogue: Catalogue, name: str) -> dict[str, Any]:
    material = catalogue.material(name)
    return {
        "name": name,
        "title": name,
        "description": plain_line(material.description),
        "kind": material.process,
        "support": material.support,
        "channels": len(material.channels),
        "colours_seen": list(material.colours_seen),
        "speed_iso": material.speed_iso,
        "speed_unsure_stops": material.speed_unsure_stops,
        "reciprocity": material.reciprocity.label,
        "own": name in catalogue.own_names,
    }
