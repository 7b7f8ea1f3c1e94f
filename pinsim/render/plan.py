"""Everything a rendering will do, decided before any pixel is touched.

The film image of a hole holds nothing above a known frequency, so it is computed on the coarsest
grid that carries it all. A larger picture is an interpolation of it, a smaller one an average.
"""

import math
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.camera.hole import HOLE_RANGE_MM
from pinsim.errors import DesignError, out_of_range
from pinsim.material import LONGEST_NM, SHORTEST_NM, Channel, Material
from pinsim.optics import Ellipse, Light, finest_detail
from pinsim.optics.sharpness import light_ray_otf
from pinsim.render.kernels import FilmRange, Kernels, prepared
from pinsim.scene import DistanceMap, Scene

Array = NDArray[np.float64]

# A transfer function below this everywhere beyond a frequency carries no visible detail there: in
# the mere shadow of a large hole it has fallen to this at 9 cycles across the hole.
NEGLIGIBLE_OTF = 1e-2
# Where diffraction ends the transfer function for good soon after, the grid goes on to that end:
# cut off before, even a trace of it rings around points of light.
ENDED_OTF = 3e-4
END_IS_NEAR = 1.2
# The grid's Nyquist frequency over the film image's last one: room for the resampling kernel to end.
HEADROOM = 1.06
# Light from a point that falls farther away than the margin; what it would add is of the order of
# this share of the difference between the true and the imagined surroundings.
TAIL_SHARE = 3e-3
LARGE_TAIL_SHARE = 6e-3
LARGE_FRAME_PX = 250_000
# A margin this wide costs little whatever the frame.
CHEAP_MARGIN_PX = 250
# Round holes whose diameters lie within this step share margins and fields; the grid's pitch in steps.
FAMILY_STEP = 2.0
LEAST_FAMILY_SHADE = 0.5
GRID_STEP = 1.12
MOST_STEPPED_PX = 2_500_000
MAX_GRID_PIXELS = 25_000_000
MAX_WIDTH_PX = 20_000
# Distances whose m = 1 + z/zo differ by no more than this are drawn as one: all that lies beyond 20 box
# depths is, and then the far ones' blur is at most 1 part in 40 too large, the near ones' too small.
ONE_DISTANCE = 1.05
# Of the slant to which a panorama's distances along its rays are followed.
LEAST_COSINE = 0.2
_FEW_WAVELENGTHS = 5


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RenderPlan:
    """What will be rendered, at which sampling, for which distances.

    pitch_mm : the grid's; shape : rows and columns of the frame; padded : of the grid with its
    margins; margin : rows above and columns left of the frame. distances_mm : nearest and farthest.
    varied : these differ enough to be drawn apart.
    kernels : how the hole draws over the film and over these distances. family : the camera with the
    hole that stands for all similar ones, by which the light is dimmed and the margins are set; None
    where there is no such family.
    averaged : the grid is coarser than the film image needs, so each pixel shows its own mean.
    """

    camera: Camera
    material: Material
    pitch_mm: float
    shape: tuple[int, int]
    padded: tuple[int, int]
    margin: tuple[int, int]
    distances_mm: tuple[float, float]
    varied: bool
    kernels: Kernels
    family: Camera | None
    averaged: bool
    notes: tuple[str, ...] = ()

    def right_mm(self) -> Array:
        """Film coordinates of the padded grid's columns, to the right as the scene is seen."""
        n = self.padded[1]
        middle = self.margin[1] + 0.5 * (self.shape[1] - 1)
        return np.asarray((np.arange(n) - middle) * self.pitch_mm + self.camera.film.shift_right_mm)

    def up_mm(self) -> Array:
        """Film coordinates of the padded grid's rows, upwards as the scene is seen."""
        n = self.padded[0]
        middle = self.margin[0] + 0.5 * (self.shape[0] - 1)
        return np.asarray((middle - np.arange(n)) * self.pitch_mm + self.camera.film.shift_up_mm)

    @property
    def inside(self) -> tuple[slice, slice]:
        """The frame within the padded grid."""
        top, left = self.margin
        return slice(top, top + self.shape[0]), slice(left, left + self.shape[1])


def _film_points(camera: Camera) -> list[tuple[float, float]]:
    """Return film points where the finest detail of the frame may lie: the middle, edges, a corner."""
    film = camera.film
    ends_u = [film.shift_right_mm + side * 0.5 * film.width_mm for side in (-1.0, 1.0)]
    ends_v = [film.shift_up_mm + side * 0.5 * film.height_mm for side in (-1.0, 1.0)]
    u = min(max(0.0, ends_u[0]), ends_u[1])
    v = min(max(0.0, ends_v[0]), ends_v[1])
    far_u, far_v = max(ends_u, key=abs), max(ends_v, key=abs)
    if camera.surface.flat:
        return [(u, v)]  # on flat film nothing is finer than nearest to the axis
    return [(u, v), (far_u, v), (u, far_v), (far_u, far_v)]


def _detail_limit(camera: Camera, material: Material, distance_mm: float) -> tuple[float, float]:
    """Return the frequency above which no channel has anything to show, and where all ends."""
    opening = camera.opening
    angle = np.pi * np.arange(4) / 4.0
    directions = np.stack([np.cos(angle), np.sin(angle)], axis=-1)
    points = _film_points(camera)
    if isinstance(opening, Ellipse) and camera.surface.flat:
        directions = directions[::2]
        if camera.hole.shape == "round" and points == [(0.0, 0.0)]:
            directions = directions[:1]  # on the axis all are alike
    shortest_mm = 1e-6 * min(float(c.wavelengths_nm.min()) for c in material.channels)
    seen, end = 0.0, 0.0
    for point in points:
        rays = camera.surface.chief_rays(*point)
        if float(rays.falloff) <= 0.0:
            continue
        wave = rays.focus(distance_mm) @ rays.shift
        finest_shift = float(np.linalg.svd(rays.shift, compute_uv=False)[-1])
        finest_wave = float(np.linalg.svd(wave, compute_uv=False)[-1])
        # Geometric blur has ended when the jinc's envelope, 1.6/(pi x)^1.5, has.
        ended = (1.6 / NEGLIGIBLE_OTF) ** (2.0 / 3.0) / math.pi
        top = min(
            1.01 * opening.width_mm / (shortest_mm * finest_shift),
            1.05 * ended / (camera.hole.diameter_mm * finest_wave),
        )
        radius = np.linspace(0.0, top, 400)
        frequency = (radius[:, None, None] * directions).reshape(-1, 2)
        strongest = np.zeros(radius.size)
        for light in _few_lights(material.channels):
            values = light_ray_otf(
                frequency,
                rays=rays,
                opening=opening,
                plate_thickness_mm=0.0,
                light=light,
                distance_mm=distance_mm,
                quick=True,
            )
            strongest = np.maximum(strongest, np.abs(values).reshape(radius.size, -1).max(axis=1))
        here = float(radius[np.flatnonzero(strongest > NEGLIGIBLE_OTF)[-1]])
        last = float(radius[np.flatnonzero(strongest > ENDED_OTF)[-1]])
        if last < END_IS_NEAR * here and last < 0.999 * top:
            here = last
        seen, end = max(seen, here), max(end, top)
    return seen, end


@lru_cache(maxsize=8)
def _few_lights(channels: tuple[Channel, ...]) -> list[Light]:
    return [channel.light.condensed(_FEW_WAVELENGTHS) for channel in channels]


def _good_length(least: int) -> int:
    """Return the next length of at least `least` whose only factors are 2, 3 and 5."""
    best = 1 << (least - 1).bit_length()
    for fives in range(8):
        for threes in range(12):
            odd = 5**fives * 3**threes
            twos = max(0, math.ceil(math.log2(least / odd)))
            length = odd << twos
            if length >= least:
                best = min(best, length)
    return best


def _distances(scene: Scene, camera: Camera) -> tuple[float, float]:
    """Return the nearest and the farthest distance of a scene along the hole's axis, mm."""
    if not isinstance(scene.distance, DistanceMap):
        return scene.distance, scene.distance
    nearest = scene.distance.nearest_mm
    if scene.distance.along == "ray":
        # What is as far along a slanting ray is nearer along the axis.
        film = camera.film
        corners = camera.surface.chief_rays(
            film.shift_right_mm + 0.5 * film.width_mm * np.array([-1.0, 1.0, -1.0, 1.0]),
            film.shift_up_mm + 0.5 * film.height_mm * np.array([-1.0, -1.0, 1.0, 1.0]),
        )
        nearest *= max(LEAST_COSINE, float(corners.direction[..., 2].min()))
    return nearest, scene.distance.farthest_mm


def make_plan(
    scene: Scene,
    camera: Camera,
    *,
    wavelength_nm: float | None = None,
    averaged_px: int | None = None,
    in_steps: bool = False,
) -> RenderPlan:
    """Decide grid, margin and kernels; refuse what cannot be rendered.

    averaged_px : columns of a coarser picture whose pixels are means, if one is wanted. in_steps : the
    grid's pitch goes in steps, a little finer than need be, so that similar holes share a grid.
    """
    return plan_for(_distances(scene, camera), camera, wavelength_nm, averaged_px, in_steps)


@lru_cache(maxsize=8)
def plan_for(
    distances_mm: tuple[float, float],
    camera: Camera,
    wavelength_nm: float | None = None,
    averaged_px: int | None = None,
    in_steps: bool = False,
) -> RenderPlan:
    """Return the plan for any scene between two distances, as make_plan does for one.

    It needs nothing of the photo, so it can be made while that is still being read.
    """
    material = camera.material
    if wavelength_nm is not None:
        if not SHORTEST_NM <= wavelength_nm <= LONGEST_NM:
            raise DesignError(
                out_of_range("wavelength", wavelength_nm, "nm", SHORTEST_NM, LONGEST_NM)
            )
        material = material.at(wavelength_nm)
    film = camera.film
    nearest, farthest = distances_mm
    limit, end = _detail_limit(camera, material, farthest)
    natural = 0.5 / (HEADROOM * limit)
    if in_steps and film.width_mm * film.height_mm < MOST_STEPPED_PX * natural**2:
        natural = GRID_STEP ** math.floor(math.log(natural) / math.log(GRID_STEP))
    notes = []
    least = math.sqrt(film.width_mm * film.height_mm / MAX_GRID_PIXELS)
    pitch = max(natural, least)
    if least > natural:
        notes.append(
            f"the film could hold {film.width_mm / natural:.0f} px across; "
            f"drawn at {film.width_mm / pitch:.0f} px, finer detail is averaged"
        )
    if averaged_px is not None:
        asked = film.width_mm / averaged_px
        # A picture of moderate size is drawn on its own pixels even where fewer would do: then its
        # grid is the same for every hole.
        moderate = film.width_mm * film.height_mm < MOST_STEPPED_PX * asked**2
        pitch = max(asked, least) if moderate else max(pitch, asked)
    columns = max(1, math.ceil(film.width_mm / pitch - 1e-9))
    pitch = film.width_mm / columns
    rows = max(1, round(film.height_mm / pitch))
    family = _family(camera)
    widest = camera if family is None else family
    greatest_mm = widest.hole.greatest_mm * (1.0 if family is None else FAMILY_STEP)
    padded, margin = _with_margins(widest, greatest_mm, nearest, pitch, (rows, columns), material)
    z = camera.focal_length_mm
    scale = (1.0 + z / farthest, 1.0 + z / nearest)
    varied = scale[1] > ONE_DISTANCE * scale[0]
    if not varied:
        scale = (0.5 * sum(scale),) * 2
    # What lies beyond the frame is drawn as at its edge, a blur's width farther.
    beyond = 2.0 * greatest_mm * (1.0 + z / nearest)
    film_range = FilmRange(
        u_mm=_reach(film.shift_right_mm, film.width_mm, beyond),
        v_mm=_reach(film.shift_up_mm, film.height_mm, beyond),
        scale=scale,
    )
    return RenderPlan(
        camera=camera,
        material=material,
        pitch_mm=pitch,
        shape=(rows, columns),
        padded=padded,
        margin=margin,
        distances_mm=(nearest, farthest),
        varied=varied,
        kernels=prepared(
            camera,
            wavelength_nm,
            film_range,
            min(end, 1.0001 * math.sqrt(2.0) * max(HEADROOM * limit, 0.5 / pitch)),
            family=None if varied else family,
        ),
        family=family,
        averaged=pitch > 1.001 * natural,
        notes=tuple(notes),
    )


def _reach(shift_mm: float, side_mm: float, beyond_mm: float) -> tuple[float, float]:
    """Return the ends of a side of the frame, a little beyond."""
    half = 0.5 * side_mm + beyond_mm
    return shift_mm - half, shift_mm + half


def _family(camera: Camera) -> Camera | None:
    """Return the camera with the hole that stands for all similar ones.

    These are the round ones from its diameter to FAMILY_STEP times it; the classical best holes, 1.4 to
    2 times sqrt(lambda z), are one family. A thick plate with a small hole has none: its shade over the
    frame is too much each hole's own.
    """
    hole, film = camera.hole, camera.film
    if hole.shape != "round":
        return None
    unit_mm = math.sqrt(550e-6 * camera.focal_length_mm)
    step = math.floor(math.log(hole.diameter_mm / unit_mm) / math.log(FAMILY_STEP))
    smallest_mm = unit_mm * FAMILY_STEP**step
    if smallest_mm < HOLE_RANGE_MM[0]:
        return None
    family = replace(camera, hole=replace(hole, diameter_mm=smallest_mm))
    if hole.plate_thickness_mm > 0.0:
        u = film.shift_right_mm + 0.5 * film.width_mm * np.array([-1.0, 1.0])
        v = film.shift_up_mm + 0.5 * film.height_mm * np.array([-1.0, 1.0])
        corners = camera.surface.chief_rays(*np.meshgrid(u, v))
        shade = family.opening.clear_share(hole.plate_thickness_mm * corners.tangent)
        if float(shade.min()) < LEAST_FAMILY_SHADE:
            return None
    return family


def _with_margins(
    camera: Camera,
    greatest_mm: float,
    nearest_mm: float,
    pitch_mm: float,
    shape: tuple[int, int],
    material: Material,
) -> tuple[tuple[int, int], tuple[int, int]]:
    """Return the padded shape and the margin above and left of the frame, in pixels."""
    z = camera.focal_length_mm
    # A family's middle hole: twice as large ones have half the tail.
    d = math.sqrt(camera.hole.diameter_mm * greatest_mm)
    longest_mm = 1e-6 * max(float(c.wavelengths_nm.max()) for c in material.channels)
    # Share 2 lambda z / (pi^2 d r) of a point's light lies beyond r: half the slope of the
    # transfer function at zero, which no focus changes.
    large = shape[0] * shape[1] > LARGE_FRAME_PX
    share = LARGE_TAIL_SHARE if large else TAIL_SHARE
    tail_mm = 2.0 * longest_mm * z / (math.pi**2 * d * share)
    shadow_mm = greatest_mm * (1.0 + z / nearest_mm)
    # At most half the frame beyond each side: past that a tail this faint is cheaper imagined.
    widest = pitch_mm * max(0.25 * (shape[0] + shape[1]), CHEAP_MARGIN_PX)
    reach_px = math.ceil((min(tail_mm, widest) + shadow_mm) / pitch_mm) + 8
    padded = (_good_length(shape[0] + 2 * reach_px), _good_length(shape[1] + 2 * reach_px))
    return padded, ((padded[0] - shape[0]) // 2, (padded[1] - shape[1]) // 2)


def coarse_photo_note(scene: Scene, plan: RenderPlan) -> str | None:
    """Return a line for a photo whose pixel projects larger than a third of the blur, else None.

    The blur is the period of the finest detail drawn at 20 % contrast, in the farthest layer.
    """
    camera = plan.camera
    pixel_mm = camera.focal_length_mm / scene.focal_length_px
    detail = finest_detail(
        diameter_mm=camera.hole.diameter_mm,
        focal_length_mm=camera.focal_length_mm,
        light=plan.material.light,
        distance_mm=plan.distances_mm[1],
        samples=200,
    )
    blur_mm = 1.0 / detail
    if pixel_mm <= blur_mm / 3.0:
        return None
    need = math.ceil(scene.photo.shape[1] * 3.0 * pixel_mm / blur_mm / 100.0) * 100
    return (
        f"the photo is too coarse for this design: its pixel is {pixel_mm:.2g} mm on the film, more "
        f"than a third of the blur of {blur_mm:.2g} mm; use one at least {need} px wide"
    )
