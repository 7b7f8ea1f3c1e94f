"""Figures of a state: those of the command line, times, curves, and what lies under the pointer."""

import base64
import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.best import light_for
from pinsim.camera import Camera
from pinsim.exposure import LightLevel, time_for
from pinsim.exposure.light import at_ev
from pinsim.exposure.times import light_share
from pinsim.live.pictures import grey_png
from pinsim.live.refused import RefusedError
from pinsim.live.state import State
from pinsim.numbers import figures, outwards, plain_figures, usual_places
from pinsim.optics.sharpness import detail_anywhere, light_ray_otf, point_image
from pinsim.render.expose import expose, exposure_notes
from pinsim.scene import DistanceMap, Scene
from pinsim.units import format_length

Array = NDArray[np.float64]

_CURVE_POINTS = 121
_SPOT_PX = 96
_SPOT_GAMMA = 0.5  # so that faint rings show
_LEAST_CONTRAST = 0.1
# Wavelengths that stand for a light, as pinsim.numbers has them, a few more for rings.
_WAVELENGTHS = {"round": 6, "oval": 6, "slit": 12, "traced": 3}
_LEAST_AHEAD = 1e-6


def numbers(state: State, *, quick: bool) -> dict[str, Any]:
    """Return the object of `pinsim numbers --json`; quick : without places and advice."""
    found = figures(state.camera, wavelength_nm=state.wavelength_nm, best=not quick)
    plain = plain_figures(found)
    if quick:
        for row in plain["distances"]:
            row["best_hole_mm"] = None  # not looked for; JSON has no NaN
    return plain


def exposure(state: State, scene: Scene | None) -> dict[str, Any] | None:
    """Return the time for the light told, or the scene's; None where neither is known."""
    light = state.light
    if light is None:
        if scene is None or scene.ev is None:
            return None
        light = at_ev(scene.ev, given=f"EV {scene.ev:g}", note="as the scene says")
    camera = state.camera
    # As the command line reads it: rounded to what a meter tells.
    light = _rounded(light)
    middle = time_for(camera, light)
    corner = time_for(camera, light, share=light_share(camera, *camera.far_corner))
    law = camera.material.reciprocity
    given_s = state.time_s if isinstance(state.time_s, float) else middle.set_s
    exposed = expose(camera, time_s=given_s, ev=light.ev)
    answer = {
        "ev": light.ev,
        "ev_text": light.ev_text,
        "given": light.given,
        "words": light.words,
        "ev_note": light.note,
        "metered_s": middle.metered_s,
        "time_s": middle.corrected_s,
        "set_s": middle.set_s,
        "text": middle.text,
        "by_hand": middle.by_hand,
        "corrected": middle.corrected_s > 1.01 * middle.metered_s,
        "reciprocity": law.label,
        "outside": list(middle.outside),
        "corner_time_s": corner.corrected_s,
        "corner_text": corner.text,
        "note": "; ".join(exposure_notes(camera, exposed)),
    }
    return {
        key: "infinity" if isinstance(value, float) and math.isinf(value) else value
        for key, value in answer.items()
    }


def _rounded(light: LightLevel) -> LightLevel:
    from dataclasses import replace

    return replace(light, ev=round(light.ev, 2))


def curves(state: State, scene: Scene | None) -> dict[str, Any]:
    """Return contrast curves and point images at centre, edge and corner.

    For objects at the scene's one distance, else far away. RefusedError when no light comes to any.
    """
    camera = state.camera
    distance_mm = math.inf
    if scene is not None and not isinstance(scene.distance, DistanceMap):
        distance_mm = scene.distance
    light = light_for(state.wavelength_nm, camera.material)
    common: dict[str, Any] = {
        "opening": camera.opening,
        "plate_thickness_mm": camera.plate_thickness_mm,
        "light": light.condensed(_WAVELENGTHS[camera.hole.shape]),
        "distance_mm": distance_mm,
    }
    lit = []
    dark = []
    for name, place in _three_places(camera).items():
        share = light_share(camera, *place)
        if share <= 0.0:
            dark.append(name)
            continue
        point = camera.frame_point_mm(*place)
        rays = camera.surface.chief_rays(*point)
        out = outwards(point)
        ways = np.array([out, (-out[1], out[0])])
        finest = detail_anywhere(
            ways, rays=rays, contrasts=(state.contrast, _LEAST_CONTRAST), samples=160, **common
        )
        lit.append((name, point, rays, share, ways, finest))
    if not lit:
        raise RefusedError(
            "no light reaches the film's centre, edge or corner; use a thinner plate, a larger hole or "
            "less shift.",
            field="plate_mm",
        )
    top = 1.4 * max(float(one[-1][:, 1].max()) for one in lit)
    frequency = np.linspace(0.0, top, _CURVE_POINTS)
    side_mm = _spot_side_mm(camera, light.mean_nm, distance_mm, [one[2] for one in lit])
    full = None
    places = []
    for name, point, rays, share, ways, finest in lit:
        along = frequency[:, None] * ways[:, None, :]
        flat = light_ray_otf(along.reshape(-1, 2), rays=rays, **common)
        both = flat.reshape(2, frequency.size)
        contrast = both.real if camera.opening.mirrored else np.abs(both)
        image = share * point_image(rays=rays, width_mm=side_mm, count=_SPOT_PX, **common)
        full = float(image.max()) if full is None else full
        places.append(
            {
                "name": name,
                "right_mm": point[0],
                "up_mm": point[1],
                "light_share": share,
                "curves": {
                    way: np.stack([frequency, contrast[k]], axis=-1).round(5).tolist()
                    for k, way in enumerate(("outwards", "around"))
                },
                "detail_cycles_mm": {
                    way: float(finest[k, 0]) for k, way in enumerate(("outwards", "around"))
                },
                "spot": {
                    "png": _data_url(grey_png(image / full, _SPOT_GAMMA)),
                    "side_mm": side_mm,
                    "gamma": _SPOT_GAMMA,
                },
            }
        )
    return {
        "places": places,
        "unlit": dark,
        "contrast": state.contrast,
        "object_distance_mm": "infinity" if math.isinf(distance_mm) else distance_mm,
        "f_max_cycles_mm": top,
    }


def _data_url(png: bytes) -> str:
    return f"data:image/png;base64,{base64.b64encode(png).decode()}"


def _three_places(camera: Camera) -> dict[str, tuple[float, float]]:
    """Return the centre, the farther edge of the longer side, and the corner, by name."""
    places = usual_places(camera)
    sideways = camera.film.width_mm >= camera.film.height_mm
    return {
        name: place
        for name, place in places.items()
        if not name.endswith("edge") or (name in {"left edge", "right edge"}) == sideways
    }


def _spot_side_mm(camera: Camera, mean_nm: float, distance_mm: float, rays: list[Any]) -> float:
    """Return a width that holds the hole's shadow and its diffraction, not too slant a corner's."""
    z = camera.focal_length_mm
    shadow = camera.hole.greatest_mm * (1.0 + z / distance_mm)
    least = mean_nm * 1e-6 * z / camera.hole.diameter_mm
    reach = max(float(np.linalg.norm(one.shift, 2)) for one in rays)
    spread = min(mean_nm * 1e-6 * reach / camera.hole.diameter_mm, 4.0 * least)
    return 1.1 * shadow + 2.4 * max(spread, least)


# Under the pointer -----------------------------------------------------------------------------


def point(state: State, scene: Scene, right: float, up: float) -> dict[str, Any]:
    """Return what lies at a place of the frame, -1 to 1 from left to right and from below to above.

    As the scene is seen, whatever the look. Directions deg, from the hole's axis.
    """
    camera = state.camera
    u, v = camera.frame_point_mm(right, up)
    rays = camera.surface.chief_rays(u, v)
    x, y, z = (float(part) for part in rays.direction)
    share = light_share(camera, right, up)
    row, column, yaw, pitch = _in_photo(scene, np.array([x, y, z]))
    rows, columns = scene.photo.shape
    covered = row is not None and -0.5 <= row <= rows - 0.5 and -0.5 <= column <= columns - 0.5
    distance = None
    if not isinstance(scene.distance, DistanceMap):
        distance = scene.distance
    elif covered and row is not None:
        inverse = scene.distance.inverse_mm(
            np.array([min(max(round(row), 0), rows - 1)]),
            np.array([min(max(round(column), 0), columns - 1)]),
        )
        distance = 1.0 / float(inverse[0]) if inverse[0] > 0.0 else math.inf
    return {
        "right_mm": u,
        "up_mm": v,
        "right_deg": math.degrees(math.atan2(x, z)),
        "up_deg": math.degrees(math.atan2(y, z)),
        "off_axis_deg": math.degrees(math.atan2(math.hypot(x, y), z)),
        "distance_mm": "infinity" if distance is not None and math.isinf(distance) else distance,
        "distance_text": None if distance is None else format_length(distance),
        "along": "ray" if scene.projection == "equirectangular" else "axis",
        "falloff_stops": abs(math.log2(share)) if share > 0.0 else "infinity",
        "covered": covered,
        "yaw_deg": yaw,
        "pitch_deg": pitch,
        "photo": {"column": column, "row": row} if covered else None,
    }


def _in_photo(
    scene: Scene, direction: Array
) -> tuple[float | None, float, float | None, float | None]:
    """Return the photo's row and column (row None: behind it), and in a panorama azimuth and height."""
    rows, columns = scene.photo.shape
    if scene.projection == "equirectangular":
        x, y, z = scene.camera_to_image @ direction
        height, azimuth = math.atan2(y, math.hypot(x, z)), math.atan2(x, z)
        place = scene.place
        turn = 2.0 * math.pi * place.column_per_rad
        column = place.ahead_column + place.column_per_rad * azimuth
        # The same direction once round: where the picture's own columns are.
        column = (column + 0.5) % turn - 0.5
        row = place.horizon_row - place.row_per_rad * height
        return row, column, math.degrees(azimuth), math.degrees(height)
    if direction[2] < _LEAST_AHEAD:
        return None, 0.0, None, None
    scale = scene.focal_length_px / float(direction[2])
    column = 0.5 * (columns - 1) + scale * float(direction[0])
    row = 0.5 * (rows - 1) - scale * float(direction[1])
    return row, column, None, None


# Two states ------------------------------------------------------------------------------------


def difference(
    state: State, other: State, scene: Scene | None, other_scene: Scene | None
) -> dict[str, Any]:
    """Return what a state does otherwise than another one, in words and as rows of both.

    Detail is compared at the object, as depths may differ.
    """
    now, then = (
        figures(one.camera, wavelength_nm=one.wavelength_nm, best=False) for one in (state, other)
    )
    rows: list[dict[str, Any]] = []
    sentences: list[str] = []

    def row(name: str, was: str, is_now: str, words: str) -> None:
        rows.append({"name": name, "other": was, "now": is_now, "words": words})
        if words and words != "the same":
            sentences.append(words)

    stops = 2.0 * math.log2(then.f_number / now.f_number)
    row(
        "light on the film",
        f"f/{then.f_number:.0f}",
        f"f/{now.f_number:.0f}",
        _more(stops, "stops", "light"),
    )
    finer = (now.far.detail_cycles_mm * now.focal_length_mm) / (
        then.far.detail_cycles_mm * then.focal_length_mm
    )
    row(
        "far detail in the middle",
        f"{then.far.detail_cycles_mm:.3g} cycles/mm",
        f"{now.far.detail_cycles_mm:.3g} cycles/mm",
        _percent(finer, "finer", "coarser", "far detail in the middle"),
    )
    row(
        "angle of view",
        f"{then.horizontal_view_deg:.0f} x {then.vertical_view_deg:.0f} deg",
        f"{now.horizontal_view_deg:.0f} x {now.vertical_view_deg:.0f} deg",
        _percent(
            now.horizontal_view_deg / then.horizontal_view_deg, "wider", "narrower", "view across"
        ),
    )
    falls = then.corner_falloff_stops, now.corner_falloff_stops
    if all(math.isfinite(one) for one in falls):
        apart = falls[1] - falls[0]
        words = (
            "the same"
            if abs(apart) < 0.05
            else f"corner {abs(apart):.1f} stops {'darker' if apart > 0 else 'brighter'}"
        )
    else:
        words = "" if falls[0] == falls[1] else "a corner is unlit in one of them"
    row("corner darker by", _stops(falls[0]), _stops(falls[1]), words)
    times = exposure(other, other_scene), exposure(state, scene)
    if times[0] is not None and times[1] is not None:
        texts = [str(one["text"]) for one in times if one is not None]
        row(
            "time",
            texts[0],
            texts[1],
            "the same" if texts[0] == texts[1] else f"{texts[1]} instead of {texts[0]}",
        )
    return {"rows": rows, "sentences": sentences}


def _stops(value: float) -> str:
    return f"{value:.1f} stops" if math.isfinite(value) else "unlit"


def _more(stops: float, unit: str, what: str) -> str:
    if abs(stops) < 0.05:
        return "the same"
    return f"{abs(stops):.1f} {unit} {'more' if stops > 0.0 else 'less'} {what}"


def _percent(ratio: float, above: str, below: str, what: str) -> str:
    if abs(ratio - 1.0) < 0.01:
        return "the same"
    if ratio > 1.0:
        return f"{what} {100.0 * (ratio - 1.0):.0f} % {above}"
    return f"{what} {100.0 * (1.0 / ratio - 1.0):.0f} % {below}"
