"""The whole road in one call: a Scene through a Camera to a Picture."""

import math

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.exposure import exposure_note, gain_of
from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.develop import LOOKS, Look
from pinsim.render.illuminate import illuminate
from pinsim.render.picture import Picture
from pinsim.render.plan import MAX_WIDTH_PX, coarse_photo_note, make_plan
from pinsim.render.project import FilmView, project
from pinsim.render.resample import interpolate
from pinsim.render.spread import spread
from pinsim.scene import Scene

Float = NDArray[np.float32]


def preview(
    scene: Scene,
    camera: Camera,
    *,
    time_s: float | None = None,
    ev: float | None = None,
    wavelength_nm: float | None = None,
    look: Look = "upright",
    width_px: int | None = None,
    averaged: bool = False,
    report: Reporter = ignore,
) -> Picture:
    """Return what the camera would record of the scene.

    time_s : exposure time; brightness is then that of this time against the metered one for `ev`
    (or the scene's own ev). Without it the picture is exposed as the photo is.
    wavelength_nm : all light at this one wavelength (a narrow-band filter; 1 nm is the geometric
    limit); tones stay as they are. look : where the film is looked at from.
    width_px : columns of the picture; without it, as many as the film image needs. Each pixel is the
    exposure at its own middle; with `averaged` a smaller picture shows the means over its pixels, as
    is pleasant to look at.
    Raises DesignError or SceneError, in one line.
    """
    if look not in LOOKS:
        raise DesignError(f"look is {look!r}; it must be one of: {', '.join(LOOKS)}.")
    light_ev = scene.ev if ev is None else ev
    gain = gain_of(camera, time_s=time_s, ev=light_ev)
    if width_px is not None and not 16 <= width_px <= MAX_WIDTH_PX:
        raise DesignError(
            f"a picture {width_px} px wide is not possible; give 16 to {MAX_WIDTH_PX}."
        )
    plan = make_plan(
        scene, camera, wavelength_nm=wavelength_nm, averaged_px=width_px if averaged else None
    )
    notes = [*scene.notes, *plan.notes]
    if time_s is not None and light_ev is not None:
        notes.append(exposure_note(camera, time_s=time_s, ev=light_ev))
    coarse = coarse_photo_note(scene, plan)
    if coarse:
        notes.append(coarse)
    report(Progress(0, 1, "laying the scene on the film"))
    view = project(scene, plan)
    covered = view.covered_share
    if covered < 1.0:
        # Rounded down: a frame that is not all covered is never said to be.
        share = math.floor(1000.0 * covered) / 10.0
        notes.append(
            f"the photo covers {share:g} % of the frame; the rest is hatched (the film sees "
            f"{camera.horizontal_view_deg:.0f} x {camera.vertical_view_deg:.0f} deg, "
            f"the photo {scene.horizontal_view_deg:.0f} x {scene.vertical_view_deg:.0f} deg)"
        )
    view = illuminate(view)
    if view.unlit_share > 0.0:
        notes.append(
            f"{100.0 * view.unlit_share:.1f} % of the frame stays unlit and is drawn black: "
            "the plate's bore or the film's bend shuts the light out there"
        )
    planes = spread(view, report=report)
    exposure, pitch_mm = _on_pixels(planes, view, width_px)
    return Picture(
        exposure=exposure,
        pitch_mm=pitch_mm,
        camera=camera,
        scene_name=scene.name,
        look=look,
        gain=gain,
        covered_share=covered,
        notes=tuple(notes),
    )


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
    # A hard edge may ring a little below black; film cannot be exposed by less than nothing.
    exposure = np.ascontiguousarray(np.maximum(np.moveaxis(exposure, 0, -1), 0.0))
    exposure[~covered] = np.nan
    return exposure, pitch_mm
