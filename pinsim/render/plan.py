"""Everything a rendering will do, decided before any pixel is touched.

The film image of a hole holds nothing above a known frequency, so it is computed on the coarsest
grid that carries it all. A larger picture is an interpolation of it, a smaller one an average.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Camera
from pinsim.errors import DesignError, out_of_range
from pinsim.material import LONGEST_NM, SHORTEST_NM, Material
from pinsim.optics import finest_detail
from pinsim.optics.round_hole import overlap_otf
from pinsim.scene import DistanceMap, Scene

Array = NDArray[np.float64]

# A transfer function below this everywhere beyond a frequency carries no visible detail there.
NEGLIGIBLE_OTF = 3e-3
# Where diffraction ends the transfer function for good soon after, the grid goes on to that end:
# cut off before, even a trace of it rings around points of light.
ENDED_OTF = 3e-4
END_IS_NEAR = 1.2
# The grid's Nyquist frequency over the film image's last one: room for the resampling kernel to end.
HEADROOM = 1.06
# Light from a point that falls farther away than the margin; what it would add is of the order of
# this share of the difference between the true and the imagined surroundings.
TAIL_SHARE = 3e-3
# A margin this wide costs little whatever the frame.
CHEAP_MARGIN_PX = 250
# Knots of a tabulated transfer function per cycle across the shadow; linear between them within 1e-5.
KNOTS_PER_SHADOW = 150.0
MAX_LAYERS = 24
LAYER_STEP = 0.05
MAX_GRID_PIXELS = 60_000_000
MAX_WIDTH_PX = 20_000


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RenderPlan:
    """What will be rendered, at which sampling, for which distances.

    pitch_mm : the grid's; shape : rows and columns of the frame; padded : of the grid with its
    margins; margin : rows above and columns left of the frame. distances_mm : one for each layer.
    averaged : the grid is coarser than the film image needs, so each pixel shows its own mean.
    """

    camera: Camera
    material: Material
    pitch_mm: float
    shape: tuple[int, int]
    padded: tuple[int, int]
    margin: tuple[int, int]
    distances_mm: tuple[float, ...]
    averaged: bool
    natural_pitch_mm: float
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


def band_tables(
    camera: Camera, material: Material, distance_mm: float, top_frequency: float
) -> tuple[Array, Array]:
    """Return transfer functions against frequency for every channel and photo band.

    Returns frequencies (n,), cycles/mm, evenly spaced from 0 to top_frequency, and
    tables (channels, 3, n): the channel's exposure per unit of the photo's red, green and blue.
    Bands that a channel does not record are zero.
    """
    z, d = camera.focal_length_mm, camera.hole.diameter_mm
    shadow_mm = d * (1.0 + z / distance_mm)
    count = max(64, math.ceil(top_frequency * shadow_mm * KNOTS_PER_SHADOW))
    frequency = np.linspace(0.0, top_frequency, count)
    phase = (1.0 + z / distance_mm) * frequency
    tables = np.empty((len(material.channels), 3, count))
    for row, channel in zip(tables, material.channels, strict=True):
        shift = np.outer(channel.wavelengths_nm * (1e-6 * z), frequency)
        otf = overlap_otf(shift, np.broadcast_to(phase, shift.shape), diameter_mm=d)
        row[...] = channel.weights.T @ otf
    return frequency, tables


def _detail_limit(camera: Camera, material: Material, distance_mm: float) -> float:
    """Return the frequency above which no channel has anything to show, cycles/mm."""
    z, d = camera.focal_length_mm, camera.hole.diameter_mm
    shortest_mm = 1e-6 * min(float(c.wavelengths_nm.min()) for c in material.channels)
    shadow_mm = d * (1.0 + z / distance_mm)
    # Geometric blur has ended when the jinc's envelope, 1.6/(pi x)^1.5, has.
    ended = (1.6 / NEGLIGIBLE_OTF) ** (2.0 / 3.0) / (math.pi * shadow_mm)
    top = min(1.01 * d / (shortest_mm * z), 1.05 * ended)
    frequency, tables = band_tables(camera, material, distance_mm, top)
    strongest = np.abs(tables.sum(axis=1)).max(axis=0)
    seen = float(frequency[np.flatnonzero(strongest > NEGLIGIBLE_OTF)[-1]])
    end = float(frequency[np.flatnonzero(strongest > ENDED_OTF)[-1]])
    return end if end < END_IS_NEAR * seen and end < 0.999 * top else seen


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


def _layers(scene: Scene, focal_length_mm: float) -> tuple[float, ...]:
    """Return the distances for which kernels are made; only m = 1 + z/zo matters to a kernel."""
    if not isinstance(scene.distance, DistanceMap):
        return (scene.distance,)
    codes = scene.distance.codes
    nearest = scene.distance.nearest_mm
    if math.isinf(nearest):
        return (math.inf,)
    farthest = math.inf if (codes == 0).any() else float(codes.max()) * scene.distance.step_mm
    low, high = focal_length_mm / farthest, focal_length_mm / nearest
    # Even steps of the shadow's size; between two layers a point is shared in proportion.
    steps = math.ceil(math.log((1.0 + high) / (1.0 + low)) / math.log1p(LAYER_STEP))
    count = min(MAX_LAYERS, 1 + max(steps, 0))
    scale = np.geomspace(1.0 + low, 1.0 + high, count)
    return tuple(math.inf if m <= 1.0 else float(focal_length_mm / (m - 1.0)) for m in scale)


def make_plan(
    scene: Scene,
    camera: Camera,
    *,
    wavelength_nm: float | None = None,
    averaged_px: int | None = None,
) -> RenderPlan:
    """Decide grid, margin and layers; refuse what cannot be rendered.

    averaged_px : columns of a coarser picture whose pixels are means, if one is wanted.
    """
    material = camera.material
    if wavelength_nm is not None:
        if not SHORTEST_NM <= wavelength_nm <= LONGEST_NM:
            raise DesignError(
                out_of_range("wavelength", wavelength_nm, "nm", SHORTEST_NM, LONGEST_NM)
            )
        material = material.at(wavelength_nm)
    film = camera.film
    layers = _layers(scene, camera.focal_length_mm)
    limit = _detail_limit(camera, material, max(layers))
    natural = 0.5 / (HEADROOM * limit)
    notes = []
    least = math.sqrt(film.width_mm * film.height_mm / MAX_GRID_PIXELS)
    pitch = max(natural, least)
    if least > natural:
        notes.append(
            f"the film could hold {film.width_mm / natural:.0f} px across; "
            f"drawn at {film.width_mm / pitch:.0f} px, finer detail is averaged"
        )
    if averaged_px is not None:
        pitch = max(pitch, film.width_mm / averaged_px)
    columns = max(1, math.ceil(film.width_mm / pitch - 1e-9))
    pitch = film.width_mm / columns
    rows = max(1, round(film.height_mm / pitch))
    padded, margin = _with_margins(camera, layers, pitch, (rows, columns), material)
    return RenderPlan(
        camera=camera,
        material=material,
        pitch_mm=pitch,
        shape=(rows, columns),
        padded=padded,
        margin=margin,
        distances_mm=layers,
        averaged=pitch > 1.001 * natural,
        natural_pitch_mm=natural,
        notes=tuple(notes),
    )


def _with_margins(
    camera: Camera,
    layers: tuple[float, ...],
    pitch_mm: float,
    shape: tuple[int, int],
    material: Material,
) -> tuple[tuple[int, int], tuple[int, int]]:
    """Return the padded shape and the margin above and left of the frame, in pixels."""
    z, d = camera.focal_length_mm, camera.hole.diameter_mm
    longest_mm = 1e-6 * max(float(c.wavelengths_nm.max()) for c in material.channels)
    # Share 2 lambda z / (pi^2 d r) of a point's light lies beyond r: half the slope of the
    # transfer function at zero, which no focus changes.
    tail_mm = 2.0 * longest_mm * z / (math.pi**2 * d * TAIL_SHARE)
    shadow_mm = d * (1.0 + z / min(layers))
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
        distance_mm=max(plan.distances_mm),
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
