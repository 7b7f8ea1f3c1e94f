"""Quantities with units as option types, and the groups of options that commands share."""

from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from pinsim import units

Command = TypeVar("Command", bound=Callable[..., Any])

if TYPE_CHECKING:
    _FloatType = click.ParamType[float]
else:
    _FloatType = click.ParamType  # click took up type parameters later than the oldest we run on


class Quantity(_FloatType):
    """Text with a unit to a number in pinsim's own unit."""

    def __init__(self, name: str, parse: Callable[[object, str], float]) -> None:
        self.name = name
        self._parse = parse

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        """Return the number; a wrong one is a UnitError, whose text needs nothing of click's."""
        if isinstance(value, float):
            return value
        where = param.opts[0] if param is not None else self.name
        return self._parse(value, where)


LENGTH = Quantity("length", units.length_mm)
DISTANCE = Quantity("distance", units.distance_mm)
ANGLE = Quantity("angle", units.angle_deg)
WAVELENGTH = Quantity("wavelength", units.wavelength_nm)
TIME = Quantity("time", units.time_s)
EV = Quantity("number", units.exposure_value)


def _all(*options: Callable[[Command], Command]) -> Callable[[Command], Command]:
    def decorate(command: Command) -> Command:
        for option in reversed(options):
            command = option(command)
        return command

    return decorate


scene_options = _all(
    click.option(
        "--view",
        "view_deg",
        type=ANGLE,
        help="The photo's angle of view from its left edge to its right; else from its Exif data.",
    ),
    click.option(
        "--distance", "distance_mm", type=DISTANCE, help="How far everything is: 4m, infinity."
    ),
    click.option(
        "--distance-map",
        type=click.Path(),
        help="A grey picture of the photo's size whose values are distances; 0 is infinity.",
    ),
    click.option("--map-step", "map_step_mm", type=LENGTH, help="What one value of the map means."),
    click.option(
        "--projection",
        type=click.Choice(["rectilinear", "equirectangular"]),
        help="How the photo maps angles: rectilinear as lenses do, or equirectangular panoramas.",
    ),
    click.option(
        "--beyond",
        type=click.Choice(["mirror", "extend", "black"]),
        help="What is imagined beyond the photo's edge, for the little light from there.",
    ),
)

_single_film = (
    click.option(
        "--film", metavar="FRAME", help="A frame such as 6x6, 36x24, 4x5, or a size: 90mmx60mm."
    ),
    click.option("--portrait", is_flag=True, help="Hold the frame upright."),
    click.option("--plate", "plate_mm", type=LENGTH, help="Thickness of the plate with the hole."),
    click.option("--shift", "shift_mm", type=LENGTH, help="Move the film's middle to the right."),
    click.option("--rise", "rise_mm", type=LENGTH, help="Move the film's middle up."),
    click.option(
        "--material", metavar="NAME", help="What is exposed, such as colour, panchromatic-100."
    ),
    click.option(
        "--tone", type=click.Choice(["positive", "negative"]), help="Tones of the picture."
    ),
)

camera_options = _all(
    click.option("--hole", "hole_mm", type=LENGTH, help="Diameter of the hole: 0.30mm."),
    click.option(
        "--focal-length", "focal_mm", type=LENGTH, help="From the hole to the film: 60mm."
    ),
    *_single_film,
)

cameras_options = _all(
    click.option(
        "--hole",
        "holes_mm",
        type=LENGTH,
        multiple=True,
        help="Diameter of a hole; repeat for more.",
    ),
    click.option(
        "--focal-length",
        "focals_mm",
        type=LENGTH,
        multiple=True,
        help="From the hole to the film; repeat for more.",
    ),
    *_single_film,
)

traced_camera_options = _all(
    click.option(
        "--focal-length",
        "focal_mm",
        type=LENGTH,
        help="From the hole to the film: tells what the hole does to the picture.",
    ),
    *_single_film,
)

trace_options = _all(
    click.option("--pixel-size", "pixel_mm", type=LENGTH, help="Size of the scan's pixels: 2.5um."),
    click.option("--dpi", type=float, help="Dots per inch that the scanner was set to."),
    click.option(
        "--reference",
        metavar="X,Y,X,Y=LENGTH",
        help="Two points of the scan, column and row from its top left, and their distance: "
        "12,40,980,44=10mm.",
    ),
    click.option(
        "--diameter",
        "diameter_mm",
        type=LENGTH,
        help="Diameter of the round hole of the same area, if known better than the scale.",
    ),
    click.option(
        "--polarity",
        type=click.Choice(["auto", "bright", "dark"]),
        default="auto",
        show_default=True,
        help="Whether the hole is brighter or darker than its plate.",
    ),
    click.option(
        "--seen-from",
        type=click.Choice(["behind", "front"]),
        default="behind",
        show_default=True,
        help="The plate's side that the scan shows: as from inside the box, or from the scene.",
    ),
)

light_options = _all(
    click.option(
        "--wavelength", "wavelength_nm", type=WAVELENGTH, help="All light of one colour: 550nm."
    ),
    click.option(
        "--time", "time_s", type=TIME, help="Exposure time: shows over- and underexposure."
    ),
    click.option("--ev", type=EV, help="Brightness of the scene, EV at ISO 100; sun is about 15."),
    click.option(
        "--look",
        type=click.Choice(["upright", "screen", "emulsion"]),
        default="upright",
        show_default=True,
        help="Seen as the scene, from behind the film, or on its exposed face.",
    ),
)

output_options = _all(
    click.option(
        "-o", "--output", type=click.Path(), help="Where to write; the ending sets the kind."
    ),
    click.option("--overwrite", is_flag=True, help="Replace the file if it exists."),
)
