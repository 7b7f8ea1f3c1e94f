"""The whole road in one call: a Scene through a Camera to a Picture."""

from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.exposure import gain_of
from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.develop import LOOKS, Look
from pinsim.render.illuminate import illuminate
from pinsim.render.picture import Picture
from pinsim.render.plan import coarse_photo_note, make_plan
from pinsim.render.project import project
from pinsim.render.resample import resample_part, whole
from pinsim.render.spread import spread
from pinsim.scene import Scene


def preview(
    scene: Scene,
    camera: Camera,
    *,
    time_s: float | None = None,
    ev: float | None = None,
    wavelength_nm: float | None = None,
    look: Look = "upright",
    width_px: int | None = None,
    report: Reporter = ignore,
) -> Picture:
    """Return what the camera would record of the scene.

    time_s : exposure time; brightness is then that of this time against the metered one for `ev`
    (or the scene's own ev). Without it the picture is exposed as the photo is.
    wavelength_nm : all light at this one wavelength (a narrow-band filter; 1 nm is the geometric
    limit); tones stay as they are. look : where the film is looked at from.
    width_px : columns of the picture; without it, as many as the film image needs.
    Raises DesignError or SceneError, in one line.
    """
    if look not in LOOKS:
        raise DesignError(f"look is {look!r}; it must be one of: {', '.join(LOOKS)}.")
    gain = gain_of(camera, time_s=time_s, ev=scene.ev if ev is None else ev)
    plan = make_plan(scene, camera, wavelength_nm=wavelength_nm, width_px=width_px)
    notes = [*scene.notes, *plan.notes]
    coarse = coarse_photo_note(scene, plan)
    if coarse:
        notes.append(coarse)
    report(Progress(0, 1, "laying the scene on the film"))
    view = project(scene, plan)
    covered = view.covered_share
    if covered < 1.0:
        notes.append(
            f"the photo covers {100.0 * covered:.0f} % of the frame; the rest is hatched "
            f"(the film sees {camera.horizontal_view_deg:.0f} deg across, "
            f"the photo {scene.horizontal_view_deg:.0f} deg)"
        )
    exposure = spread(illuminate(view), report=report)
    pitch_mm = plan.pitch_mm
    if width_px is not None and width_px > exposure.shape[1]:
        pitch_mm = camera.film.width_mm / width_px
        height_px = max(1, round(exposure.shape[0] * width_px / exposure.shape[1]))
        exposure = resample_part(exposure, whole(exposure), (height_px, width_px))
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
