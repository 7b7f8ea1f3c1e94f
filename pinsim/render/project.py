"""Scene to film: what light comes from where each film pixel looks, and how far away that is."""

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Film
from pinsim.render.plan import RenderPlan
from pinsim.render.resample import ALIAS_FREE, Block, fold, make_blocks, resample_line
from pinsim.scene import DistanceMap, Scene
from pinsim.threads import THREADS

Float = NDArray[np.float32]

# Film that looks sideways or back, this close to the hole's plane: a flat photo has nothing there.
_LEAST_AHEAD = 1e-3
# Photo columns linearised at once, for so many groups of film rows: the strip stays in the processor's
# cache, and few photo rows are linearised twice.
_STRIP = 512
_TOGETHER = 4


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FilmView:
    """The scene on the film's own grid, with its margins.

    light : (rows, columns, 3), linear; first radiance, after `illuminate` irradiance.
    inverse_distance : (rows, columns), 1/mm, or None when the whole scene has one distance.
    covered : (rows, columns) of the frame, True where the photo shows what the film sees.
    compensate : the light was dimmed by resample.response, to be given back while spreading.
    exact_share : how much of the frame the photo covers, where geometry tells it; else None.
    unlit_share : how much of the frame no light reaches, 0 to 1; known after `illuminate`.
    """

    plan: RenderPlan
    light: Float
    inverse_distance: Float | None
    covered: NDArray[np.bool_]
    compensate: bool
    exact_share: float | None = None
    unlit_share: float = 0.0

    @property
    def covered_share(self) -> float:
        """How much of the frame the photo covers, 0 to 1; the same however finely it is drawn."""
        counted = float(self.covered.mean())
        return counted if self.exact_share is None or counted == 1.0 else self.exact_share


def project(scene: Scene, plan: RenderPlan) -> FilmView:
    """Lay the scene on the film grid, upright as the scene is seen."""
    if scene.projection == "equirectangular":
        # Loaded here, as it makes the FilmView defined above.
        from pinsim.render.panorama import project_panorama

        return project_panorama(scene, plan)
    if plan.camera.surface.flat:
        return _project_planes(scene, plan)
    return _project_bent(scene, plan)


def _project_planes(scene: Scene, plan: RenderPlan) -> FilmView:
    # Film and photo are both planes in front of one centre: film coordinates are photo coordinates
    # times one number, so rows and columns are resampled apart.
    rows, columns = scene.photo.shape
    scale = scene.focal_length_px / plan.camera.focal_length_mm
    column = 0.5 * (columns - 1) + plan.right_mm() * scale
    row = 0.5 * (rows - 1) - plan.up_mm() * scale
    step = plan.pitch_mm * scale
    # A photo finer than the film grid must not alias; one that is coarser is only interpolated.
    cutoff = ALIAS_FREE if step >= 1.0 else 1.0
    down = make_blocks(row, rows, step=step, beyond=scene.beyond, cutoff=cutoff)
    across = make_blocks(column, columns, step=step, beyond=scene.beyond, cutoff=cutoff)
    planes = np.empty((3, *plan.padded), np.float32)
    needed = slice(min(b.take.start for b in across), max(b.take.stop for b in across))

    def lay(start: int) -> None:
        _lay_rows(scene, down[start : start + _TOGETHER], across, needed, planes)

    with ThreadPoolExecutor(THREADS) as pool:
        for _ in pool.map(lay, range(0, len(down), _TOGETHER)):
            pass
    inside = plan.inside
    seen_rows = (row[inside[0]] >= -0.5) & (row[inside[0]] <= rows - 0.5)
    seen_columns = (column[inside[1]] >= -0.5) & (column[inside[1]] <= columns - 0.5)
    return FilmView(
        plan=plan,
        light=np.moveaxis(planes, 0, -1),
        inverse_distance=_distances(scene, plan, np.rint(row)[:, None], np.rint(column)[None, :]),
        covered=seen_rows[:, None] & seen_columns[None, :],
        compensate=step >= 1.0,
        exact_share=_covered_share(plan.camera.film, columns / scale, rows / scale),
    )


def _covered_share(film: Film, width_mm: float, height_mm: float) -> float:
    """Return how much of a flat frame a photo of this size covers, its middle on the axis."""
    share = 1.0
    for shift, side, covered in (
        (film.shift_right_mm, film.width_mm, width_mm),
        (film.shift_up_mm, film.height_mm, height_mm),
    ):
        low, high = max(shift - 0.5 * side, -0.5 * covered), min(shift + 0.5 * side, 0.5 * covered)
        share *= max(0.0, high - low) / side
    return min(share, 1.0)


def _lay_rows(
    scene: Scene, blocks: list[Block], across: list[Block], needed: slice, planes: Float
) -> None:
    """Resample some groups of film rows: down the photo first, as that leaves least to do."""
    to = slice(blocks[0].to.start, blocks[-1].to.stop)
    taken = slice(min(b.take.start for b in blocks), max(b.take.stop for b in blocks))
    height, width = to.stop - to.start, needed.stop - needed.start
    tall = np.empty((height, width, 3), np.float32)
    for start in range(needed.start, needed.stop, _STRIP):
        columns = slice(start, min(start + _STRIP, needed.stop))
        light = scene.photo.linear(taken, columns).reshape(taken.stop - taken.start, -1)
        across_strip = slice(columns.start - needed.start, columns.stop - needed.start)
        for block in blocks:
            strip = (
                block.weights
                @ light[block.take.start - taken.start : block.take.stop - taken.start]
            )
            rows = slice(block.to.start - to.start, block.to.stop - to.start)
            tall[rows, across_strip] = strip.reshape(strip.shape[0], -1, 3)
    flat = np.ascontiguousarray(np.moveaxis(tall, -1, 0)).reshape(3 * height, width)
    for part in across:
        take = slice(part.take.start - needed.start, part.take.stop - needed.start)
        planes[:, to, part.to] = (flat[:, take] @ part.weights.T).reshape(3, height, -1)


def _project_bent(scene: Scene, plan: RenderPlan) -> FilmView:
    """Lay a flat photo on film bent about one axis, exactly: first along the bend, then across it.

    Along the bend the photo's place depends on that coordinate only; across it each line of the
    film is the photo's line at a scale of its own. Both are band-limited at their own local scale.
    """
    camera = plan.camera
    upright = camera.film.bend_axis == "vertical"  # bent along u
    rows, columns = scene.photo.shape
    bent_mm, straight_mm = (
        (plan.right_mm(), plan.up_mm()) if upright else (plan.up_mm(), plan.right_mm())
    )
    along_size, across_size = (columns, rows) if upright else (rows, columns)
    # Rows of a photo run down while up is up.
    along_sign, across_sign = (1.0, -1.0) if upright else (-1.0, 1.0)
    zero = np.zeros(1)
    points = (
        camera.surface.points_mm(bent_mm, zero)
        if upright
        else camera.surface.points_mm(zero, bent_mm)
    )
    aside, depth = points[..., 0 if upright else 1], points[..., 2]
    ahead = depth > _LEAST_AHEAD * camera.focal_length_mm
    depth = np.maximum(depth, _LEAST_AHEAD * camera.focal_length_mm)
    far = 2.0 * along_size
    along = np.clip(scene.focal_length_px * aside / depth, -far, far)
    scale = scene.focal_length_px / depth  # photo pixels per mm across the bend
    steps_along = np.maximum(np.abs(np.gradient(along)), 1e-6)
    steps_across = scale * plan.pitch_mm
    place = 0.5 * (along_size - 1) + along_sign * along
    across = 0.5 * (across_size - 1) + across_sign * np.outer(scale, straight_mm)
    seen = ahead & (place >= -0.5) & (place <= along_size - 0.5)
    compensate = (
        bool(min(steps_along[seen].min(), steps_across[seen].min()) >= ALIAS_FREE)
        if (seen.any())
        else False
    )
    cutoff = ALIAS_FREE if compensate else 1.0
    lines = np.empty((bent_mm.size, across_size, 3), np.float32)
    for block in make_blocks(
        place, along_size, step=steps_along, beyond=scene.beyond, cutoff=cutoff
    ):
        if upright:
            light = scene.photo.linear(columns=block.take).swapaxes(0, 1)
        else:
            light = scene.photo.linear(rows=block.take)
        flat = block.weights @ np.ascontiguousarray(light).reshape(light.shape[0], -1)
        lines[block.to] = flat.reshape(-1, across_size, 3)
    planes = np.empty((3, *plan.padded), np.float32)

    def lay(k: int) -> None:
        line = resample_line(
            lines[k], across[k], step=float(steps_across[k]), beyond=scene.beyond, cutoff=cutoff
        )
        if upright:
            planes[:, :, k] = line.T
        else:
            planes[:, k, :] = line.T

    with ThreadPoolExecutor(THREADS) as pool:
        for _ in pool.map(lay, range(bent_mm.size)):
            pass
    within = (across >= -0.5) & (across <= across_size - 0.5) & seen[:, None]
    bent_index = np.rint(place)[:, None]
    straight_index = np.rint(across)
    if upright:
        within = within.T
        distances = _distances(scene, plan, straight_index.T, bent_index.T)
    else:
        distances = _distances(scene, plan, bent_index, straight_index)
    return FilmView(
        plan=plan,
        light=np.moveaxis(planes, 0, -1),
        inverse_distance=distances,
        covered=np.ascontiguousarray(within[plan.inside]),
        compensate=compensate,
    )


def _distances(
    scene: Scene, plan: RenderPlan, row: NDArray[np.float64], column: NDArray[np.float64]
) -> Float | None:
    """Return 1/distance at the nearest photo pixel; edges between near and far stay edges."""
    if not plan.varied or not isinstance(scene.distance, DistanceMap):
        return None
    # Distance always goes on beyond the photo's edge: "black" is about light only.
    beyond = "extend" if scene.beyond == "extend" else "mirror"
    rows, columns = scene.photo.shape
    return scene.distance.inverse_mm(
        fold(row.astype(np.intp), rows, beyond), fold(column.astype(np.intp), columns, beyond)
    )
