"""What a hole's shape does to the picture: against a round hole of the same area."""

from dataclasses import dataclass, replace

import numpy as np

from pinsim.best import light_for
from pinsim.camera import Camera, Hole
from pinsim.optics.sharpness import detail_anywhere

CONTRAST = 0.2
_STEPS = 400


@dataclass(frozen=True, slots=True, kw_only=True)
class Detail:
    """The finest detail drawn at 20 % contrast in the middle of the film, cycles/mm.

    right : of detail repeated to the right (upright lines); up : of detail repeated upwards. round :
    of the round hole of the same area, the same both ways.
    """

    right_cycles_mm: float
    up_cycles_mm: float
    round_cycles_mm: float

    @property
    def right_loss(self) -> float:
        """The share of the round hole's detail that is lost to the right; negative is a gain."""
        return 1.0 - self.right_cycles_mm / self.round_cycles_mm

    @property
    def up_loss(self) -> float:
        """The share that is lost upwards."""
        return 1.0 - self.up_cycles_mm / self.round_cycles_mm


@dataclass(frozen=True, slots=True, kw_only=True)
class AgainstRound:
    """A hole against the round one of the same area in the same camera, a far scene.

    f_number : alike for both, as equal areas pass equal light in the middle. corner_light,
    round_corner_light : shares of light that the plate's thickness leaves at the frame's corner.
    """

    detail: Detail
    diameter_mm: float
    f_number: float
    corner_light: float
    round_corner_light: float


def against_round(camera: Camera, *, wavelength_nm: float | None = None) -> AgainstRound:
    """Return what a camera's hole does against a round one, for its material's light or one colour."""
    light = light_for(wavelength_nm, camera.material).condensed()
    hole = Hole(
        diameter_mm=camera.hole.diameter_mm, plate_thickness_mm=camera.hole.plate_thickness_mm
    )
    round_camera = replace(camera, hole=hole)

    def finest(of: Camera) -> tuple[float, float]:
        right, up = detail_anywhere(
            np.eye(2),
            rays=of.surface.chief_rays(0.0, 0.0),
            opening=of.opening,
            plate_thickness_mm=of.plate_thickness_mm,
            light=light,
            contrasts=(CONTRAST,),
            samples=_STEPS,
        )[:, 0]
        return float(right), float(up)

    right, up = finest(camera)
    of_round, _ = finest(round_camera)
    rays = camera.rays_to(camera.far_corner)
    apart = camera.plate_thickness_mm * np.asarray(rays.tangent)
    return AgainstRound(
        detail=Detail(right_cycles_mm=right, up_cycles_mm=up, round_cycles_mm=of_round),
        diameter_mm=camera.hole.diameter_mm,
        f_number=camera.f_number,
        corner_light=float(np.squeeze(camera.opening.clear_share(apart))),
        round_corner_light=float(np.squeeze(round_camera.opening.clear_share(apart))),
    )
