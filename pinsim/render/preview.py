"""The whole road in one call: a Scene through a Camera to a Picture."""

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.exposure import auto_time_s, gain_of
from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.develop import LOOKS, Look
from pinsim.render.expose import Exposed, expose, exposure_notes
from pinsim.render.hiding import hide
from pinsim.render.illuminate import illuminate
from pinsim.render.kept import kept_for
from pinsim.render.picture import Picture
from pinsim.render.plan import MAX_WIDTH_PX, coarse_photo_note, make_plan
from pinsim.render.project import FilmView, project
from pinsim.render.resample import interpolate
from pinsim.render.spread import spread
from pinsim.scene import Scene
from pinsim.threads import THREADS

Float = NDArray[np.float32]

LEAST_INVENTED = 5e-4  # a smaller share of filled-in light is not worth a line


def preview(
    scene: Scene,
    camera: Camera,
    *,
    time_s: float | Literal["auto"] | None = None,
    ev: float | None = None,
    wavelength_nm: float | None = None,
    look: Look = "upright",
    width_px: int | None = None,
    averaged: bool = False,
    grain_seed: int | None = None,
    report: Reporter = ignore,
) -> Picture:
    """Return what the camera would record of the scene.

    time_s : exposure time; tones are then those that the material gives after this time in a light of
    `ev` (or the scene's own ev). "auto" is the time it needs. Without it tones are the photo's.
    wavelength_nm : all light at this one wavelength (a narrow-band filter; 1 nm is the geometric
    limit); tones stay as they are. look : where the film is looked at from.
    width_px : columns of the picture; without it, as many as the film image needs. Each pixel is the
    exposure at its own middle; with `averaged` a smaller picture shows the means over its pixels, as
    is pleasant to look at. grain_seed : with a time, also draw the material's grain, by this seed.
    Raises DesignError or SceneError, in one line.
    """
    if look not in LOOKS:
        raise DesignError(f"look is {look!r}; it must be one of: {', '.join(LOOKS)}.")
    light_ev = scene.ev if ev is None else ev
    exposed = _exposed(camera, time_s, light_ev, grain_seed)
    if width_px is not None and not 16 <= width_px <= MAX_WIDTH_PX:
        raise DesignError(
            f"a picture {width_px} px wide is not possible; give 16 to {MAX_WIDTH_PX}."
        )
    plan = make_plan(
        scene,
        camera,
        wavelength_nm=wavelength_nm,
        averaged_px=width_px if averaged else None,
        in_steps=not averaged,
    )
    notes = [*scene.notes, *plan.notes]
    if exposed is not None:
        notes.extend(exposure_notes(camera, exposed))
    coarse = coarse_photo_note(scene, plan)
    if coarse:
        notes.append(coarse)
    report(Progress(0, 1, "laying the scene on the film"))
    kept = kept_for(scene, plan)
    if kept is None or kept.view is None:
        view = illuminate(project(scene, plan))
    else:
        view = replace(kept.view, plan=plan)
    if kept is not None:
        kept.view = view
    covered = view.covered_share
    if covered < 1.0:
        # Rounded down: a frame that is not all covered is never said to be.
        share = math.floor(1000.0 * covered) / 10.0
        notes.append(
            f"the photo covers {share:g} % of the frame; the rest is hatched (the film sees "
            f"{camera.horizontal_view_deg:.0f} x {camera.vertical_view_deg:.0f} deg, "
            f"the photo {scene.horizontal_view_deg:.0f} x {scene.vertical_view_deg:.0f} deg)"
        )
    if view.unlit_share > 0.0:
        notes.append(
            f"{100.0 * view.unlit_share:.1f} % of the frame stays unlit and is drawn black: "
            "the plate's bore or the film's bend shuts the light out there"
        )
    hidden = hide(view, spread(view, kept=kept, report=report))
    planes = hidden.exposure
    if hidden.invented_share >= LEAST_INVENTED:
        notes.append(
            f"{100.0 * hidden.invented_share:.1f} % of the light comes from behind near edges, where "
            "the photo shows nothing; it is filled in from what lies beside them"
        )
    exposure, pitch_mm = _on_pixels(planes, view, width_px)
    return Picture(
        exposure=exposure,
        pitch_mm=pitch_mm,
        camera=camera,
        scene_name=scene.name,
        look=look,
        gain=1.0 if exposed is None else exposed.gain,
        exposed=exposed,
        grain_seed=grain_seed,
        covered_share=covered,
        notes=tuple(notes),
    )


def _exposed(
    camera: Camera,
    time_s: float | Literal["auto"] | None,
    ev: float | None,
    grain_seed: int | None,
) -> Exposed | None:
    """Return how the material is exposed, if a time is given; check what goes with it."""
    if time_s is None:
        if grain_seed is not None:
            raise DesignError(
                "grain is drawn in what the material shows after a time; give one too, "
                "for example --time auto."
            )
        return None
    gain_of(camera, time_s=1.0 if time_s == "auto" else time_s, ev=ev)  # refuses what cannot be
    if ev is None:
        raise DesignError("a time needs the light it is meant for; give the scene's EV at ISO 100.")
    return expose(camera, time_s=auto_time_s(camera, ev) if time_s == "auto" else time_s, ev=ev)


def _on_pixels(planes: Float, view: FilmView, width_px: int | None) -> tuple[Float, float]:
    """Return the frame's exposure at the pixels asked for, and their pitch; NaN where not covered."""
    plan = view.plan
    pitch_mm = plan.pitch_mm
    covered = view.covered
    if width_px is None or width_px == plan.shape[1]:
        exposure = planes[(slice(None), *plan.inside)]
    else:
        # The grid carries all that is on the film, so this reads the film between its points;
        # the margins lend their light to what lies at the frame's edge.
        step = plan.shape[1] / width_px
        shape = max(1, round(plan.camera.film.height_mm / (step * plan.pitch_mm))), width_px
        places = [
            margin + 0.5 * (size - 1) + (np.arange(count) - 0.5 * (count - 1)) * step
            for margin, size, count in zip(plan.margin, plan.shape, shape, strict=True)
        ]
        exposure = interpolate(planes, places[0], places[1])
        pitch_mm = plan.pitch_mm * step
        nearest = [
            np.clip(np.rint(place - margin), 0, size - 1).astype(np.intp)
            for place, margin, size in zip(places, plan.margin, plan.shape, strict=True)
        ]
        covered = covered[np.ix_(*nearest)]
    picture = np.empty((*exposure.shape[1:], exposure.shape[0]), np.float32)

    def lay(channel: int) -> None:
        # A hard edge may ring a little below black; film cannot be exposed by less than nothing.
        np.maximum(exposure[channel], 0.0, out=picture[..., channel])

    with ThreadPoolExecutor(THREADS) as pool:
        for _ in pool.map(lay, range(len(exposure))):
            pass
    if not covered.all():
        picture[~covered] = np.nan
    return picture, pitch_mm
