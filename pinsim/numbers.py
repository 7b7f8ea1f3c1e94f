"""The figures behind the picture: one camera's sharpness, light and angles, without a scene."""

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from pinsim import optics
from pinsim.best import CONTRASTS, FrameBest, FrameDetail, Tolerance, light_for
from pinsim.camera import Camera
from pinsim.classical import Classical, classical_holes
from pinsim.exposure import metered_time_s
from pinsim.exposure.times import light_share
from pinsim.optics.sharpness import detail_anywhere
from pinsim.tools import CAUTION, Tool, how_to_make, tools_around

CONTRAST = 0.2
USUAL_DISTANCES_MM = (math.inf, 2000.0, 500.0)
USUAL_EV = (15.0, 12.0, 9.0)
# Wavelengths that stand for a light, for the camera's own hole: 2 leave an error of 2e-4 in its finest
# detail, 4 none. An outline is transformed anew for each; a slit's curve has a kink for each.
_WAVELENGTHS = {"round": 4, "oval": 4, "slit": 12, "traced": 2}
_SAMPLES = 160

Vector = tuple[float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class AtDistance:
    """Sharpness where the hole's axis meets the film, for objects at one distance.

    spot_mm : diameter of the circle on the film that holds half of a point's light; of a hole that is
    not round, for the round one of the same area. right_cycles_mm, up_cycles_mm : finest detail at
    20 % contrast, on the film, repeating to the right and upwards; detail_cycles_mm the poorer.
    object_mm : one such cycle there. best_hole_mm : the round hole that would draw the finest detail
    at this distance.
    """

    distance_mm: float
    spot_mm: float
    detail_cycles_mm: float
    right_cycles_mm: float
    up_cycles_mm: float
    object_mm: float
    best_hole_mm: float


@dataclass(frozen=True, slots=True, kw_only=True)
class AtPlace:
    """Light and sharpness at one place of the film, for the first distance.

    field_deg : from the hole's axis. falloff_stops : below the axis, by distance, slant and plate;
    infinity where no light comes. Finest detail at 20 % contrast in cycles/mm along the film: to the
    right, upwards, outwards from the axis (tangential) and around it (sagittal).
    """

    name: str
    right_mm: float
    up_mm: float
    field_deg: float
    falloff_stops: float
    right_cycles_mm: float
    up_cycles_mm: float
    tangential_cycles_mm: float
    sagittal_cycles_mm: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Choice:
    """One hole that could be made, against the best over the frame.

    detail_loss_share : of the finest detail over the frame at 20 % contrast. exposure_stops : more
    light than the best hole passes; negative is less. unsure_mm : how far its size may be off.
    """

    label: str
    diameter_mm: float
    unsure_mm: float
    detail_loss_share: float
    exposure_stops: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Advice:
    """Which hole, and what a departure from it costs; for the first distance.

    best : for each contrast. tolerance : of the best over the frame at 20 % contrast. own : the
    design's hole, as the round one of its area. best_choice, choices : the best, and drills and
    needles around both.
    classical : what books give. note : how to make the best hole if no drill does.
    """

    distance_mm: float
    best: tuple[FrameBest, ...]
    tolerance: Tolerance
    own: Choice
    best_choice: Choice
    choices: tuple[Choice, ...]
    classical: tuple[Classical, ...]
    note: str
    caution: str = CAUTION

    @property
    def best_hole_mm(self) -> float:
        """The best compromise over the frame at 20 % contrast."""
        return self.tolerance.best_mm


@dataclass(frozen=True, slots=True, kw_only=True)
class Figures:
    """What pinsim says of a design; lengths mm, angles deg, times s.

    places, advice : empty and None when only the quick figures were asked for.
    """

    name: str
    hole_mm: float
    hole: str
    round_hole: bool
    plate_thickness_mm: float
    focal_length_mm: float
    f_number: float
    frame: str
    frame_width_mm: float
    frame_height_mm: float
    material: str
    horizontal_view_deg: float
    vertical_view_deg: float
    diagonal_view_deg: float
    mean_wavelength_nm: float
    cutoff_cycles_mm: float
    corner_deg: float
    corner_falloff_stops: float
    distances: tuple[AtDistance, ...]
    times_s: tuple[tuple[float, float], ...]
    places: tuple[AtPlace, ...] = ()
    advice: Advice | None = None

    @property
    def far(self) -> AtDistance:
        """The first distance asked for; infinity unless told otherwise."""
        return self.distances[0]


def figures(
    camera: Camera,
    *,
    distances_mm: Sequence[float] = USUAL_DISTANCES_MM,
    wavelength_nm: float | None = None,
    best: bool = True,
) -> Figures:
    """Return a camera's figures for its material's light, or for one wavelength.

    best : also look for the best hole, what others cost, and at places off the middle (the slow
    part; NaN, None and nothing without it).
    """
    light = light_for(wavelength_nm, camera.material)
    return Figures(
        name=camera.name,
        hole_mm=camera.hole.diameter_mm,
        hole=camera.hole.label,
        round_hole=camera.hole.shape == "round",
        plate_thickness_mm=camera.plate_thickness_mm,
        focal_length_mm=camera.focal_length_mm,
        f_number=camera.f_number,
        frame=camera.film.label,
        frame_width_mm=camera.film.width_mm,
        frame_height_mm=camera.film.height_mm,
        material=camera.material_name,
        horizontal_view_deg=camera.horizontal_view_deg,
        vertical_view_deg=camera.vertical_view_deg,
        diagonal_view_deg=camera.diagonal_view_deg,
        mean_wavelength_nm=light.mean_nm,
        cutoff_cycles_mm=camera.hole.greatest_mm / (light.mean_nm * 1e-6 * camera.focal_length_mm),
        corner_deg=camera.corner_deg,
        corner_falloff_stops=corner_falloff_stops(camera),
        distances=tuple(_at_distance(camera, light, one, best=best) for one in distances_mm),
        times_s=tuple((ev, metered_time_s(camera, ev)) for ev in USUAL_EV),
        places=_places(camera, light, distances_mm[0]) if best else (),
        advice=_advice(camera, light, distances_mm[0]) if best else None,
    )


def plain_figures(result: Figures) -> dict[str, Any]:
    """Return figures as JSON takes them; infinity has no number there and becomes a word."""

    def clean(item: Any) -> Any:
        if isinstance(item, dict):
            return {key: clean(one) for key, one in item.items()}
        if isinstance(item, list | tuple):
            return [clean(one) for one in item]
        if isinstance(item, float) and math.isinf(item):
            return "infinity"
        return item

    plain: dict[str, Any] = clean(asdict(result))
    plain["times_s"] = [{"ev": ev, "time_s": time} for ev, time in plain["times_s"]]
    if result.advice is not None:
        plain["advice"]["best_hole_mm"] = result.advice.best_hole_mm
        plain["advice"]["tolerance"]["smaller_share"] = result.advice.tolerance.smaller_share
        plain["advice"]["tolerance"]["larger_share"] = result.advice.tolerance.larger_share
    return plain


def corner_falloff_stops(camera: Camera) -> float:
    """Return how many stops darker than the middle the far corner is."""
    return _stops_below(light_share(camera, *camera.far_corner))


def _stops_below(share: float) -> float:
    return abs(math.log2(share)) if share > 0.0 else math.inf


def _details(
    camera: Camera,
    light: optics.Light,
    point_mm: Vector,
    directions: Sequence[Vector],
    distance_mm: float,
) -> list[float]:
    """Return the finest detail of the camera's own hole along directions at a film point."""
    unlike, which = np.unique(np.array(directions), axis=0, return_inverse=True)
    found = detail_anywhere(
        unlike,
        rays=camera.surface.chief_rays(*point_mm),
        opening=camera.opening,
        plate_thickness_mm=camera.plate_thickness_mm,
        light=light.condensed(_WAVELENGTHS[camera.hole.shape]),
        distance_mm=distance_mm,
        contrasts=(CONTRAST,),
        samples=_SAMPLES,
    )
    return [float(one) for one in found[which.ravel(), 0]]


def detail_on_axis(
    camera: Camera, *, distance_mm: float = math.inf, wavelength_nm: float | None = None
) -> float:
    """Return the finest detail in the middle, cycles/mm, as figures tell it, and nothing else."""
    return min(_on_axis(camera, light_for(wavelength_nm, camera.material), distance_mm))


def _on_axis(camera: Camera, light: optics.Light, distance_mm: float) -> tuple[float, float]:
    """Return the finest detail right and up before the hole."""
    if camera.hole.shape != "round":
        right, up = _details(camera, light, (0.0, 0.0), [(1.0, 0.0), (0.0, 1.0)], distance_mm)
        return right, up
    both = optics.finest_detail(
        diameter_mm=camera.hole.diameter_mm,
        focal_length_mm=camera.focal_length_mm,
        light=light,
        distance_mm=distance_mm,
        contrast=CONTRAST,
    )
    return both, both


def _at_distance(
    camera: Camera, light: optics.Light, distance_mm: float, *, best: bool
) -> AtDistance:
    diameter, depth = camera.hole.diameter_mm, camera.focal_length_mm
    right, up = _on_axis(camera, light, distance_mm)
    return AtDistance(
        distance_mm=distance_mm,
        spot_mm=optics.spot_diameter_mm(
            diameter_mm=diameter, focal_length_mm=depth, light=light, distance_mm=distance_mm
        ),
        detail_cycles_mm=min(right, up),
        right_cycles_mm=right,
        up_cycles_mm=up,
        object_mm=distance_mm / depth / min(right, up),
        best_hole_mm=optics.best_diameter_mm(
            focal_length_mm=depth, light=light, distance_mm=distance_mm, contrast=CONTRAST
        )
        if best
        else math.nan,
    )


def format_detail(cycles_mm: float) -> str:
    """Return a frequency for people, with three figures: "4.60", "12.0", "134"."""
    return f"{cycles_mm:#.3g}".rstrip(".")


def usual_places(camera: Camera) -> dict[str, Vector]:
    """Return the places that stand for a frame, as for Camera.frame_point_mm, by name.

    Of two edges or four corners the one farthest from the hole's axis.
    """
    across, up = camera.far_corner
    return {
        "centre": (0.0, 0.0),
        "left edge" if across < 0.0 else "right edge": (across, 0.0),
        "lower edge" if up < 0.0 else "upper edge": (0.0, up),
        "corner": (across, up),
    }


def outwards(point_mm: Vector) -> Vector:
    """Return the unit direction along the film away from the axis; to the right on the axis."""
    far = math.hypot(*point_mm)
    return (point_mm[0] / far, point_mm[1] / far) if far > 1e-9 else (1.0, 0.0)


def places(
    camera: Camera, *, distance_mm: float = math.inf, wavelength_nm: float | None = None
) -> tuple[AtPlace, ...]:
    """Return light and sharpness at the places that stand for a frame, and no best hole."""
    return _places(camera, light_for(wavelength_nm, camera.material), distance_mm)


def _places(camera: Camera, light: optics.Light, distance_mm: float) -> tuple[AtPlace, ...]:
    found = []
    for name, place in usual_places(camera).items():
        point = camera.frame_point_mm(*place)
        x, y = outwards(point)
        right, up, tangential, sagittal = _details(
            camera, light, point, [(1.0, 0.0), (0.0, 1.0), (x, y), (-y, x)], distance_mm
        )
        ahead = float(camera.rays_to(place).direction[0, 2])
        found.append(
            AtPlace(
                name=name,
                right_mm=point[0],
                up_mm=point[1],
                field_deg=math.degrees(math.acos(min(ahead, 1.0))),
                falloff_stops=_stops_below(light_share(camera, *place)),
                right_cycles_mm=right,
                up_cycles_mm=up,
                tangential_cycles_mm=tangential,
                sagittal_cycles_mm=sagittal,
            )
        )
    return tuple(found)


def _advice(camera: Camera, light: optics.Light, distance_mm: float) -> Advice:
    frame = FrameDetail(camera, light=light, distance_mm=distance_mm)
    tolerance = frame.tolerance(CONTRAST)
    best_mm = tolerance.best_mm
    finest = frame.detail(best_mm, CONTRAST)

    def choice(label: str, diameter_mm: float, unsure_mm: float = 0.0) -> Choice:
        return Choice(
            label=label,
            diameter_mm=diameter_mm,
            unsure_mm=unsure_mm,
            detail_loss_share=1.0 - frame.detail(diameter_mm, CONTRAST) / finest,
            exposure_stops=2.0 * math.log2(diameter_mm / best_mm),
        )

    def with_tool(tool: Tool) -> Choice:
        return choice(tool.label, tool.diameter_mm, tool.unsure_mm)

    own_mm = camera.hole.diameter_mm
    return Advice(
        distance_mm=distance_mm,
        best=tuple(frame.best(contrast) for contrast in CONTRASTS),
        tolerance=tolerance,
        own=choice("this design", own_mm),
        best_choice=choice("best over frame", best_mm),
        choices=tuple(with_tool(tool) for tool in tools_around((best_mm, own_mm))),
        classical=classical_holes(camera.focal_length_mm, light=light, distance_mm=distance_mm),
        note=how_to_make(best_mm),
    )
