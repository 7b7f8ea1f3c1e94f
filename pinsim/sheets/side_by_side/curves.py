"""Contrast against detail of all designs, in the scene's own measure, for the middle and the corner."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.best import light_for
from pinsim.camera import Camera
from pinsim.optics.sharpness import light_ray_otf
from pinsim.render.picture import Picture
from pinsim.sheets.side_by_side.common_part import CommonPart, Slopes
from pinsim.sheets.side_by_side.details import Detail
from pinsim.sheets.side_by_side.figures import DesignFigures, degrees_per_mm, directions_at

Array = NDArray[np.float64]

_COUNT = 121
_WAVELENGTHS = {"round": 6, "oval": 6, "slit": 12, "traced": 3}
_ROUND_STEPS = (1.0, 2.0, 2.5, 5.0, 10.0)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Curve:
    """One line of the plot: contrast (n,) at the plot's cycles_deg; below 0 light and dark change."""

    design: int
    letter: str
    place: str
    contrast: Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Curves:
    """The lines, on one axis. cycles_deg : (n,); step : between marks of the axis."""

    cycles_deg: Array
    step: float
    lines: tuple[Curve, ...]


def contrast_curves(
    pictures: Sequence[Picture],
    common: CommonPart,
    details: Sequence[Detail],
    figures: Sequence[DesignFigures],
    *,
    wavelength_nm: float | None,
) -> Curves:
    """Return contrast against cycles per degree, in the middle and the corner (or the first places).

    In the direction where finest detail at 20 % contrast is poorest, as in the figures.
    """
    wanted = [one for one in details if one.name in {"centre", "corner"}] or list(details[:2])
    most = max(max(one.cycles_deg) for design in figures for one in design.places)
    step, end = axis_steps(1.08 * most)
    frequency = np.linspace(0.0, end, _COUNT)
    lines = []
    for number, picture in enumerate(pictures):
        for detail in wanted:
            contrast = _contrast(
                picture.camera, detail.slopes(common), detail, frequency, wavelength_nm
            )
            if contrast is not None:
                letter = figures[number].letter
                lines.append(
                    Curve(design=number, letter=letter, place=detail.name, contrast=contrast)
                )
    return Curves(cycles_deg=frequency, step=step, lines=tuple(lines))


def axis_steps(most: float) -> tuple[float, float]:
    """Return a round step and the end of an axis that holds `most` in about six steps."""
    if not most > 0.0:
        return 0.2, 1.0
    size = 10.0 ** math.floor(math.log10(most / 6.0))
    step = next(size * one for one in _ROUND_STEPS if most / (size * one) <= 6.5)
    return step, step * math.ceil(most / step)


def _contrast(
    camera: Camera,
    slopes: Slopes,
    detail: Detail,
    cycles_deg: Array,
    wavelength_nm: float | None,
) -> Array | None:
    """Return the contrast in the poorest direction, (n,); None where no light comes."""
    point = camera.surface.meet_mm(*slopes)
    rays = camera.surface.chief_rays(*point)
    bore_mm = camera.plate_thickness_mm * rays.tangent
    if float(rays.falloff) <= 0.0 or float(camera.opening.clear_share(bore_mm)) <= 0.0:
        return None
    directions = directions_at(point)
    per_mm = degrees_per_mm(camera, point, directions)
    film = cycles_deg[None, :, None] * per_mm[:, None, None] * directions[:, None, :]
    light = light_for(wavelength_nm, camera.material).condensed(_WAVELENGTHS[camera.hole.shape])
    curves = light_ray_otf(
        film.reshape(-1, 2),
        rays=rays,
        opening=camera.opening,
        plate_thickness_mm=camera.plate_thickness_mm,
        light=light,
        distance_mm=detail.distance_mm,
    ).reshape(len(directions), -1)
    contrast = curves.real if camera.opening.mirrored else np.abs(curves)
    reach = (contrast > 0.2).cumprod(axis=1).sum(axis=1)
    return np.asarray(contrast[int(reach.argmin())])
