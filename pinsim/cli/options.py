"""Quantities with units as option types, and the groups of options that commands share."""

import math
from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from pinsim import units
from pinsim.errors import UnitError

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


if TYPE_CHECKING:
    from pinsim.exposure.light import LightLevel

    _LightType = click.ParamType[LightLevel]
else:
    _LightType = click.ParamType


class Light(_LightType):
    """A light in words, as a meter's reading, in lux or candela, to its brightness."""

    name = "light"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> "LightLevel":
        """Return the brightness; what cannot be read is a UnitError."""
        from pinsim.exposure.light import LightLevel, read_light

        if isinstance(value, LightLevel):
            return value
        return read_light(value, param.opts[0] if param is not None else self.name)


LIGHT = Light()
_LIGHT_HELP = (
    "Brightness of the scene as a word (sun, overcast, room), a meter's reading "
    "('f/16 1/125 ISO 100'), '12000 lx' or '400 cd/m2'"
)


if TYPE_CHECKING:
    _AnglesType = click.ParamType[tuple[float, ...]]
else:
    _AnglesType = click.ParamType


class Angles(_AnglesType):
    """Angles with commas between them; a plain number is degrees."""

    name = "angles"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[float, ...]:
        """Return degrees; what cannot be read is a UnitError."""
        if isinstance(value, tuple):
            return value
        where = param.opts[0] if param is not None else self.name
        parts = [part.strip() for part in str(value).split(",")]
        if not 2 <= len(parts) <= 3:
            raise UnitError(
                f"{where} is {value!a}; write yaw and pitch, and roll if wanted, with commas between "
                "them and a point for decimals: 30,-10."
            )
        return tuple(
            units.angle_deg(f"{part} deg" if part[-1:].isdigit() else part, where) for part in parts
        )


LOOK_AT = Angles()


if TYPE_CHECKING:
    _PlaceType = click.ParamType[tuple[float, float]]
else:
    _PlaceType = click.ParamType


class Place(_PlaceType):
    """A place in a picture: shares from its left and its top, with a comma between them."""

    name = "place"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[float, float]:
        """Return (x, y), each 0 to 1; what cannot be read is a UnitError."""
        if isinstance(value, tuple):
            return value
        where = param.opts[0] if param is not None else self.name
        try:
            x, y = (float(part) for part in str(value).split(","))
        except ValueError:
            x = y = math.nan
        if not (0.0 <= x <= 1.0 and 0.0 <= y <= 1.0):
            raise UnitError(
                f"{where} is {value!a}; write two shares of the picture, 0 to 1, from its left and its "
                "top, with a comma between them: 0.3,0.6."
            )
        return x, y


PLACE = Place()


def _ev_or_light(ctx: click.Context, param: click.Parameter, value: float | None) -> float | None:
    """Take the EV from --light, which is read before it, if it is not given itself."""
    light = ctx.params.get("light")
    if light is None:
        return value
    if value is not None:
        raise click.UsageError("--ev and --light both tell the brightness; give one of them.", ctx)
    return round(float(light.ev), 2)  # finer than any meter, and it can be read in notes


class TimeOrAuto(Quantity):
    """A time with its unit, or "auto": the one that the material needs."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        """Return seconds or "auto"."""
        if isinstance(value, str) and value.strip().lower() == "auto":
            return "auto"
        try:
            return super().convert(value, param, ctx)
        except UnitError as error:
            raise UnitError(f"{str(error).rstrip('.')}, or 'auto'.") from None


TIME_OR_AUTO = TimeOrAuto("time", units.time_s)


def _all(*options: Callable[[Command], Command]) -> Callable[[Command], Command]:
    def decorate(command: Command) -> Command:
        for option in reversed(options):
            command = option(command)
        return command

    return decorate


_view = click.option(
    "--view",
    "view_deg",
    type=ANGLE,
    help="The photo's angle of view from its left edge to its right; else from its Exif data.",
)

_photo = (
    click.option(
        "--distance-map",
        metavar="FILE",
        type=click.Path(),
        help="A picture or array whose values tell distances; 0 is infinity.",
    ),
    click.option("--map-step", metavar="LENGTH", help="What one value of the map means: 5cm."),
    click.option(
        "--map-unit",
        type=click.Choice(["mm", "cm", "m", "in", "ft"]),
        help="The unit of a map's decimal numbers.",
    ),
    click.option(
        "--map-along",
        type=click.Choice(["axis", "ray"]),
        help="How the map measures: along the axis of view (usual), or along each ray.",
    ),
    click.option(
        "--map-kind",
        type=click.Choice(["distance", "inverse", "disparity"]),
        help="What the map holds: distances (usual), inverse distances from --far to --near, or "
        "disparities of two pictures, with --baseline.",
    ),
    click.option("--near", metavar="LENGTH", help="Distance of an inverse map's highest value."),
    click.option(
        "--far",
        metavar="LENGTH",
        help="Distance of an inverse map's 0; of --ground, where it ends: 200m, infinity.",
    ),
    click.option(
        "--baseline", metavar="LENGTH", help="How far apart a disparity's two pictures were taken."
    ),
    click.option(
        "--map-focal-length",
        metavar="PIXELS",
        help="Focal length in a disparity's pixels: 1200px; else from the angle of view.",
    ),
    click.option(
        "--holes",
        type=click.Choice(["far", "fill"]),
        help="What a map's 0 and NaN are: infinitely far, or like what is around them.",
    ),
    click.option(
        "--ground",
        metavar="HEIGHT",
        help="No map, but level ground, this far below the camera: 1.6m.",
    ),
    click.option(
        "--horizon",
        metavar="ROW",
        help="Where the ground's horizon is, from the photo's top: 0.45 of its height, or 812px.",
    ),
    click.option(
        "--projection",
        type=click.Choice(["rectilinear", "equirectangular"]),
        help="How the photo maps angles: rectilinear as lenses do, or equirectangular panoramas.",
    ),
    click.option(
        "--look-at",
        "look_at_deg",
        metavar="YAW,PITCH[,ROLL]",
        type=LOOK_AT,
        help="Where the camera looks in a panorama, in degrees: to the right of its middle, up, and "
        "turned clockwise: 30,-10.",
    ),
    click.option(
        "--beyond",
        type=click.Choice(["mirror", "extend", "black"]),
        help="What is imagined beyond the photo's edge, for the little light from there.",
    ),
    click.option(
        "--highlight-lift",
        "highlight_lift_stops",
        metavar="STOPS",
        type=float,
        help="Brighten what is clipped white in the photo, as lamps are, by up to so many stops. "
        "This light is invented.",
    ),
)

scene_options = _all(
    _view,
    click.option(
        "--distance", "distance_mm", type=DISTANCE, help="How far everything is: 4m, infinity."
    ),
    *_photo,
)

scenes_options = _all(
    _view,
    click.option(
        "--distance",
        "distances_mm",
        type=DISTANCE,
        multiple=True,
        help="How far everything is: 4m, infinity; repeat for more.",
    ),
    *_photo,
)

own_materials = click.option(
    "--materials",
    "materials_file",
    type=click.Path(),
    metavar="FILE",
    help="A file (.toml) of your own materials, or changes to those that are known.",
)

_box = (
    click.option(
        "--film", metavar="FRAME", help="A frame such as 6x6, 36x24, 4x5, or a size: 90mmx60mm."
    ),
    click.option("--portrait", is_flag=True, help="Hold the frame upright."),
    click.option("--plate", "plate_mm", type=LENGTH, help="Thickness of the plate with the hole."),
    click.option("--shift", "shift_mm", type=LENGTH, help="Move the film's middle to the right."),
    click.option("--rise", "rise_mm", type=LENGTH, help="Move the film's middle up."),
    own_materials,
)

_single_film = (
    *_box,
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

_wavelength = click.option(
    "--wavelength", "wavelength_nm", type=WAVELENGTH, help="All light of one colour: 550nm."
)

_light = (
    click.option("--light", type=LIGHT, is_eager=True, help=f"{_LIGHT_HELP}."),
    click.option(
        "--ev",
        type=EV,
        callback=_ev_or_light,
        help="Brightness of the scene, EV at ISO 100; sun is about 15.",
    ),
    click.option(
        "--look",
        type=click.Choice(["upright", "screen", "emulsion"]),
        default="upright",
        show_default=True,
        help="Seen as the scene, from behind the film, or on its exposed face.",
    ),
)

_TIME_HELP = "Exposure time, or auto: the picture then has the material's own tones"

light_options = _all(
    _wavelength,
    click.option("--time", "time_s", type=TIME_OR_AUTO, help=f"{_TIME_HELP}."),
    *_light,
)

lights_options = _all(
    _wavelength,
    click.option(
        "--time",
        "times_s",
        type=TIME_OR_AUTO,
        multiple=True,
        help=f"{_TIME_HELP}; repeat for more.",
    ),
    *_light,
)

times_options = _all(
    click.option(
        "--hole",
        "holes_mm",
        type=LENGTH,
        multiple=True,
        help="Diameter of a hole; repeat for more.",
    ),
    click.option(
        "--focal-length", "focal_mm", type=LENGTH, help="From the hole to the film: 60mm."
    ),
    *_box,
    click.option(
        "--material",
        "material_names",
        metavar="NAME",
        multiple=True,
        help="What is exposed, such as panchromatic-100; repeat for more.",
    ),
    click.option(
        "--light",
        "lights",
        type=LIGHT,
        multiple=True,
        help=f"{_LIGHT_HELP}; repeat for more. Without it, from sun to moonlight.",
    ),
    click.option(
        "--filter-factor", type=float, help="How many times longer for a filter: 8 is 3 stops."
    ),
    click.option("--filter-stops", type=float, help="The same in stops: 3."),
)

output_options = _all(
    click.option(
        "-o", "--output", type=click.Path(), help="Where to write; the ending sets the kind."
    ),
    click.option("--overwrite", is_flag=True, help="Replace the file if it exists."),
)
