"""Make the sample scene "tabletop": a still life on a work table, 12 cm to 60 cm from the hole.

Everything is invented and built here from formulas and seeded random numbers: planks, cloth woven
thread by thread, twigs, a jug, a bottle, brass. Lengths are mm; X is right, Y is away from the
camera along the table, Z is up, and the table top is Z = 0.

    python tabletop.py                         into sample_scenes/tabletop/
    python tabletop.py --draft --out FOLDER    a small one to look at

The scene is in mm although common.py speaks of metres, because the renderer lifts each new ray
off its surface by about a ten-thousandth of a unit: in metres that would be 0.1 mm, too much for
threads and hairs.
"""

from __future__ import annotations

import argparse
import math
import tempfile
import time
from collections.abc import Callable, Iterable
from pathlib import Path
from typing import Any

import common
import mitsuba as mi
import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter, gaussian_filter1d, map_coordinates

Array = NDArray[np.float64]
Spec = dict[str, Any]
Curve = tuple[Array, Array]  # points (N, 3) mm, radii (N,) mm

SEED = 20240
CAMERA_HEIGHT_MM = 66.0
PITCH_DEG = 7.0
HORIZONTAL_VIEW_DEG = 62.0
SUN_AZIMUTH_DEG = 38.0  # the light travels right and away from the camera
SUN_ELEVATION_DEG = 15.0
WINDOW_X_MM = -650.0
WALL_Y_MM = 780.0
STEP_MM = 0.05  # one code value of the distance map
EV = 10.0
JUG_SCALE = 0.69
CLOTH_MM = 1.3  # the height at which things on the cloth stand


# ---------------------------------------------------------------- noise and pictures


def noise(rng: np.random.Generator, shape: tuple[int, int], sigma: tuple[float, float]) -> Array:
    """Return smooth noise (H, W), mean 0, deviation 1; sigma is (rows, columns) in samples."""
    # Wide noise is made small and enlarged: filtering it at full size would take minutes.
    step = [max(1, int(s // 4)) for s in sigma]
    small = [math.ceil(n / k) + 3 for n, k in zip(shape, step, strict=True)]
    field = rng.standard_normal(small)
    field = gaussian_filter(field, [s / k for s, k in zip(sigma, step, strict=True)], mode="wrap")
    if max(step) > 1:
        rows = np.arange(shape[0]) / step[0]
        columns = np.arange(shape[1]) / step[1]
        field = map_coordinates(field, np.meshgrid(rows, columns, indexing="ij"), order=1)
    field = field[: shape[0], : shape[1]]
    return np.asarray((field - field.mean()) / (field.std() + 1e-9))


def smoothstep(low: float, high: float, x: Array) -> Array:
    """Return 0 below `low`, 1 above `high`, smooth between."""
    t = np.clip((x - low) / (high - low), 0.0, 1.0)
    return np.asarray(t * t * (3.0 - 2.0 * t))


def mix(a: Iterable[float] | Array, b: Iterable[float] | Array, weight: Array) -> Array:
    """Return (H, W, 3) between two colours or colour fields, by weight (H, W)."""
    first, second = np.asarray(a, float), np.asarray(b, float)
    w = np.clip(weight, 0.0, 1.0)[..., None]
    return np.asarray(first * (1.0 - w) + second * w)


def scratches(
    rng: np.random.Generator, shape: tuple[int, int], count: int, length_px: float
) -> Array:
    """Return (H, W), 0 to 1: thin straight and slightly curved scratches."""
    field = np.zeros(shape)
    for _ in range(count):
        n = int(rng.exponential(length_px)) + 8
        angle = rng.uniform(0, 2 * np.pi) + rng.normal(0, 0.15) * np.linspace(0, 1, n)
        rows = np.cumsum(np.sin(angle)) + rng.uniform(0, shape[0])
        columns = np.cumsum(np.cos(angle)) + rng.uniform(0, shape[1])
        keep = (rows >= 0) & (rows < shape[0]) & (columns >= 0) & (columns < shape[1])
        fade = np.sin(np.linspace(0, np.pi, n))[keep] * rng.uniform(0.3, 1.0)
        spot = rows[keep].astype(int), columns[keep].astype(int)
        field[spot] = np.maximum(field[spot], fade)
    return field


def picture(colour: Array) -> Spec:
    """Return a bitmap texture from linear light (H, W, 3)."""
    return {
        "type": "bitmap",
        "bitmap": mi.Bitmap(np.clip(colour, 0.0, 1.0).astype(np.float32)),
        "raw": True,
    }


def relief(bsdf: Spec, height_mm: Array) -> Spec:
    """Return `bsdf` with a surface relief (H, W), mm."""
    bitmap = mi.Bitmap(height_mm.astype(np.float32)[..., None])
    texture = {"type": "bitmap", "bitmap": bitmap, "raw": True}
    return {"type": "bumpmap", "height": texture, "scale": 1.0, "bsdf": bsdf}


def matt(colour: Array | list[float], roughness: float = 0.6, specular: float = 0.4) -> Spec:
    """Return an opaque, more or less rough material of one colour or a colour field."""
    paint = picture(colour) if isinstance(colour, np.ndarray) else {"type": "rgb", "value": colour}
    base = {
        "type": "principled",
        "base_color": paint,
        "roughness": roughness,
        "specular": specular,
    }
    return {"type": "twosided", "bsdf": base}


# ---------------------------------------------------------------- meshes and curves


class Workshop:
    """Collects the parts of the scene; meshes and curves pass through files in `folder`."""

    def __init__(self, folder: Path) -> None:
        """Begin with nothing."""
        self.folder = folder
        self.parts: Spec = {}

    def _name(self, name: str) -> str:
        """Return the name with a number that no other part has."""
        return f"{name}_{len(self.parts):03d}"

    def add(self, name: str, spec: Spec) -> None:
        """Add any part."""
        self.parts[self._name(name)] = spec

    def mesh(
        self,
        name: str,
        points: Array,
        bsdf: Spec,
        *,
        smooth: bool = True,
        uv: tuple[Array, Array] | None = None,
    ) -> None:
        """Add a grid of points (rows, columns, 3); its picture spans it once unless uv is given."""
        rows, columns = points.shape[:2]
        index = np.arange(rows * columns).reshape(rows, columns)
        a, b, c, d = index[:-1, :-1], index[:-1, 1:], index[1:, 1:], index[1:, :-1]
        faces = np.concatenate([np.stack(t, -1).reshape(-1, 3) for t in ((a, b, c), (a, c, d))])
        v, u = np.meshgrid(np.linspace(0, 1, rows), np.linspace(0, 1, columns), indexing="ij")
        u, v = (u, v) if uv is None else uv
        flat = points.reshape(-1, 3)
        table = np.concatenate(
            [flat, _normals(flat, faces), np.stack([u.ravel(), v.ravel()], -1)], axis=1
        )
        path = self.folder / f"{self._name(name)}.ply"
        _write_ply(path, table, faces)
        spec = {"type": "ply", "filename": str(path), "face_normals": not smooth, "bsdf": bsdf}
        self.add(name, spec)

    def curves(
        self, name: str, curves: list[Curve], bsdf: Spec, *, sides: int = 8, finer: bool = False
    ) -> None:
        """Add round threads along B-splines, as meshes; `finer` doubles the points along them."""
        by_length: dict[int, list[Curve]] = {}
        for curve in curves:
            by_length.setdefault(len(curve[0]), []).append(curve)
        tables, faces, count = [], [], 0
        for group in by_length.values():
            table, triangles = _rods(
                np.stack([p for p, _ in group]), np.stack([r for _, r in group]), sides, finer
            )
            tables.append(table)
            faces.append(triangles + count)
            count += len(table)
        path = self.folder / f"{self._name(name)}.ply"
        _write_ply(path, np.concatenate(tables), np.concatenate(faces))
        self.add(name, {"type": "ply", "filename": str(path), "bsdf": bsdf})


def _rods(points: Array, radii: Array, sides: int, finer: bool) -> tuple[Array, NDArray[np.int64]]:
    """Return vertices (N, 8) and faces of rods along cubic B-splines (B, n, 3) with radii (B, n)."""
    line = np.concatenate([points, radii[..., None]], -1)
    # One more point beyond each end lets the spline begin and end at the points given.
    line = np.concatenate(
        [2 * line[:, :1] - line[:, 1:2], line, 2 * line[:, -1:] - line[:, -2:-1]], axis=1
    )
    knots = (line[:, :-2] + 4 * line[:, 1:-1] + line[:, 2:]) / 6
    if finer:
        between = (line[:, :-3] + 23 * line[:, 1:-2] + 23 * line[:, 2:-1] + line[:, 3:]) / 48
        dense = np.empty((len(line), knots.shape[1] + between.shape[1], 4))
        dense[:, ::2], dense[:, 1::2] = knots, between
        knots = dense
    middle, radius = knots[..., :3], knots[..., 3]
    forward = np.gradient(middle, axis=1)
    forward /= np.linalg.norm(forward, axis=2, keepdims=True) + 1e-12
    # One reference for each rod, the axis least along it, keeps rods free of twist.
    reference = np.eye(3)[np.argmin(np.abs(forward).mean(axis=1), axis=1)][:, None, :]
    first = np.cross(forward, reference)
    first /= np.linalg.norm(first, axis=2, keepdims=True) + 1e-12
    second = np.cross(forward, first)
    turn = np.arange(sides + 1) * 2 * np.pi / sides
    normal = first[:, :, None] * np.cos(turn)[:, None] + second[:, :, None] * np.sin(turn)[:, None]
    vertex = middle[:, :, None] + normal * radius[..., None, None]
    b, n = radius.shape
    u, v = np.broadcast_arrays(turn / (2 * np.pi), np.linspace(0, 1, n)[:, None])
    uv = np.broadcast_to(np.stack([u, v], -1), (b, n, sides + 1, 2))
    index = np.arange(b * n * (sides + 1)).reshape(b, n, sides + 1)
    p, q = index[:, :-1, :-1], index[:, :-1, 1:]
    s, t = index[:, 1:, :-1], index[:, 1:, 1:]
    faces = np.concatenate([np.stack(k, -1).reshape(-1, 3) for k in ((p, q, t), (p, t, s))])
    return np.concatenate([vertex, normal, uv], -1).reshape(-1, 8), faces


def _normals(points: Array, faces: NDArray[np.int64]) -> Array:
    """Return unit normals (N, 3), shared by points that lie in the same place (seams, poles)."""
    corner = points[faces]
    face = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    _, same = np.unique(np.round(points, 4), axis=0, return_inverse=True)
    same = same.reshape(-1)
    total = np.zeros((same.max() + 1, 3))
    for k in range(3):
        np.add.at(total, same[faces[:, k]], face)
    normal = total[same]
    return np.asarray(normal / (np.linalg.norm(normal, axis=1, keepdims=True) + 1e-12))


def _write_ply(path: Path, table: Array, faces: NDArray[np.int64]) -> None:
    """Write a binary mesh; table is (N, 8): position, normal, picture coordinates."""
    names = ["x", "y", "z", "nx", "ny", "nz", "u", "v"]
    head = ["ply", "format binary_little_endian 1.0", f"element vertex {len(table)}"]
    head += [f"property float {n}" for n in names]
    head += [f"element face {len(faces)}", "property list uchar int vertex_indices", "end_header"]
    packed = np.empty(len(faces), dtype=[("n", "u1"), ("i", "<i4", 3)])
    packed["n"], packed["i"] = 3, faces
    with path.open("wb") as file:
        file.write(("\n".join(head) + "\n").encode("ascii"))
        file.write(table.astype("<f4").tobytes())
        file.write(packed.tobytes())


def turned(
    profile: list[tuple[float, float]],
    *,
    sides: int = 160,
    rows: int = 240,
    shape: Callable[[Array, Array], Array] | None = None,
    round_corners: bool = True,
) -> Array:
    """Return a turned body (rows, sides + 1, 3) from a profile of (radius, height) mm.

    shape(turn angle in rad, height in mm) gives a radius change in mm, (rows, sides + 1).
    """
    knots = np.asarray(profile, float)
    along = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(knots, axis=0), axis=1))])
    s = np.linspace(0.0, along[-1], rows)
    line = np.stack([np.interp(s, along, knots[:, k]) for k in (0, 1)], -1)
    if round_corners:
        # Corners that catch no light look like paper models; ends stay where they are.
        soft = gaussian_filter1d(line, 1.6, axis=0, mode="nearest")
        soft[[0, -1]] = line[[0, -1]]
        line = soft
    turn = np.linspace(0.0, 2 * np.pi, sides + 1)
    angle, _ = np.meshgrid(turn, s)
    radius = np.repeat(line[:, :1], sides + 1, 1)
    height = np.repeat(line[:, 1:], sides + 1, 1)
    if shape is not None:
        change = shape(angle, height)
        radius = np.maximum(radius + change * smoothstep(0, 2, radius), 0.0)
    return np.stack([radius * np.cos(angle), radius * np.sin(angle), height], -1)


def smooth_profile(knots: list[tuple[float, float]], softness: float) -> list[tuple[float, float]]:
    """Return a profile rounded by a Gaussian of `softness` mm of its length, ends kept."""
    line = np.asarray(knots, float)
    along = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1))])
    s = np.arange(0.0, along[-1], 0.25)
    dense = np.stack([np.interp(s, along, line[:, k]) for k in (0, 1)], -1)
    ends = dense[[0, -1]]
    # Odd reflection keeps the ends in place and lets the slope there stay.
    n = min(int(4 * softness / 0.25), len(s) - 1)
    padded = np.concatenate(
        [2 * ends[0] - dense[n:0:-1], dense, 2 * ends[1] - dense[-2 : -n - 2 : -1]]
    )
    soft = gaussian_filter1d(padded, softness / 0.25, axis=0)[n : n + len(s)]
    return [(max(float(r), 0.0), float(z)) for r, z in soft]


def rotation(axis: str, degrees: float) -> Array:
    """Return a rotation matrix (3, 3) about x, y or z."""
    c, s = math.cos(math.radians(degrees)), math.sin(math.radians(degrees))
    i, j = {"x": (1, 2), "y": (2, 0), "z": (0, 1)}[axis]
    m = np.eye(3)
    m[i, i], m[j, j], m[i, j], m[j, i] = c, c, -s, s
    return m


def placed(points: Array, at: tuple[float, float, float], *turns: tuple[str, float]) -> Array:
    """Return points (..., 3) turned one after the other, then moved to `at`."""
    for axis, degrees in turns:
        points = points @ rotation(axis, degrees).T
    return np.asarray(points + np.asarray(at))


def rested(points: Array, x: float, y: float, z: float, *turns: tuple[str, float]) -> Array:
    """Return points turned and set down so that the lowest touches height z."""
    body = placed(points, (0.0, 0.0, 0.0), *turns)
    middle = (body.reshape(-1, 3).min(0) + body.reshape(-1, 3).max(0)) / 2
    low = body[..., 2].min()
    return np.asarray(body + np.array([x - middle[0], y - middle[1], z - low]))


def slab(width: float, length: float, thick: float, edge: float = 0.6) -> Array:
    """Return a rounded bar as a grid: columns across and round it, rows along it."""
    half = width / 2
    corner = np.linspace(0, np.pi / 2, 5)
    right = np.stack([half - edge + edge * np.sin(corner), -edge + edge * np.cos(corner)], -1)
    top = np.linspace(-(half - edge), half - edge, 24)
    section = np.concatenate(
        [
            [[-half, -thick]],
            right[::-1] * [-1, 1],
            np.stack([top, np.zeros(24)], -1)[1:-1],
            right,
            [[half, -thick]],
        ]
    )
    y = np.array([0.0, 0.0, 0.15, 0.5, *np.linspace(1.5, length - 1.5, 40), length - 0.5])
    y = np.concatenate([y, [length - 0.15, length, length]])
    grid = np.zeros((len(y), len(section), 3))
    grid[..., 0], grid[..., 1], grid[..., 2] = section[:, 0], y[:, None], section[:, 1]
    # The ends are drawn in so that the bar closes with a small bevel.
    for row, down in ((0, thick), (1, 0.35), (2, 0.12), (-1, thick), (-2, 0.35), (-3, 0.12)):
        grid[row, :, 2] = np.maximum(grid[row, :, 2] - down, -thick)
    return grid


def slab_uv(grid: Array) -> tuple[Array, Array]:
    """Return picture coordinates of a bar seen from above: u across it, v along it."""
    low, high = grid.min((0, 1)), grid.max((0, 1))
    scaled = 0.002 + 0.996 * (grid - low) / (high - low)
    return scaled[..., 0], scaled[..., 1]


# ---------------------------------------------------------------- wood


def wood(
    rng: np.random.Generator,
    width_mm: float,
    length_mm: float,
    pixel_mm: float,
    tint: float = 0.0,
) -> tuple[Array, Array]:
    """Return colour (H, W, 3) and relief in mm (H, W) of a plank; the grain runs along rows."""
    shape = (int(length_mm / pixel_mm), int(width_mm / pixel_mm))
    k = 1.0 / pixel_mm
    x = (np.arange(shape[1]) * pixel_mm - width_mm * rng.uniform(-0.2, 1.2))[None, :]
    wander = noise(rng, shape, (120 * k, 14 * k)) * 5.0 + noise(rng, shape, (40 * k, 5 * k)) * 0.8
    pith_mm = rng.uniform(12.0, 45.0)
    depth = pith_mm + noise(rng, shape, (160 * k, 60 * k)) * 5.0
    radius = np.hypot(x + wander, depth)
    spacing = rng.uniform(2.6, 4.2)
    phase = radius / spacing + 0.35 * noise(rng, shape, (90 * k, 20 * k))
    ring = phase - np.floor(phase)
    late = smoothstep(0.35, 0.93, ring) * (1.0 - smoothstep(0.95, 1.0, ring))
    ring_tone = 0.65 + 0.35 * np.sin(np.floor(phase) * 12.9898) ** 2
    fibre = noise(rng, shape, (5.0 * k, 0.09 * k))
    streak = noise(rng, shape, (28 * k, 0.35 * k))
    pore = smoothstep(1.9, 2.5, noise(rng, shape, (1.3 * k, 0.06 * k)))
    blotch = noise(rng, shape, (60 * k, 25 * k))
    pale, dark = np.array([0.40, 0.235, 0.115]), np.array([0.165, 0.078, 0.032])
    pale = pale * (1 + tint)
    dark = dark * (1 + 0.7 * tint)
    weight = 0.75 * late * ring_tone + 0.11 * fibre + 0.09 * streak + 0.08 * blotch + 0.12
    colour = mix(pale, dark, weight)
    colour = mix(colour, [0.035, 0.018, 0.009], 0.75 * pore)
    height = 0.035 * late * ring_tone + 0.010 * fibre + 0.012 * streak - 0.07 * pore
    return colour, height


def worn(
    rng: np.random.Generator, colour: Array, height: Array, pixel_mm: float, scratch_count: int
) -> tuple[Array, Array]:
    """Return the plank after years of use: scratches, dents, dark stains, pale rubbed places."""
    shape = (colour.shape[0], colour.shape[1])
    k = 1.0 / pixel_mm
    marks = scratches(rng, shape, scratch_count, 25 * k)
    marks = np.minimum(gaussian_filter(marks, 0.8) * 2.2, 1.0)
    stain = smoothstep(1.1, 2.3, noise(rng, shape, (16 * k, 9 * k)))
    specks = smoothstep(2.7, 3.3, noise(rng, shape, (0.35 * k, 0.3 * k)))
    rubbed = smoothstep(0.6, 2.4, noise(rng, shape, (45 * k, 16 * k)))
    colour = mix(colour, colour * 0.45, 0.7 * stain)
    colour = mix(colour, colour * 0.3, specks)
    colour = mix(colour, colour * 1.25 + 0.02, 0.6 * rubbed)
    tone = smoothstep(-0.3, 0.3, noise(rng, shape, (30 * k, 30 * k)))
    colour = mix(colour, mix([0.50, 0.34, 0.19], [0.06, 0.032, 0.016], tone), 0.65 * marks)
    dents = smoothstep(2.2, 3.2, noise(rng, shape, (1.6 * k, 1.3 * k)))
    return colour, height - 0.09 * marks - 0.18 * dents


def add_table(shop: Workshop, rng: np.random.Generator, pixel_mm: float) -> None:
    """Add the planks, a little skewed to the axis of view, with dark gaps between them."""
    # Each plank is (middle of its width, width); the skew turns all of them together.
    x = -520.0
    while x < 560.0:
        width = rng.uniform(84, 128)
        plank = slab(width - 0.9, 800.0, 25.0, edge=rng.uniform(0.8, 1.6))
        near = abs(x + width / 2) < 330
        p = pixel_mm if near else 2 * pixel_mm
        colour, height = wood(rng, width, 800.0, p, tint=rng.uniform(-0.28, 0.22))
        colour, height = worn(rng, colour, height, p, int(1.1 * width))
        body = placed(plank, (x + width / 2, -70.0, rng.uniform(-0.5, 0.0)))
        body = placed(body, (0.0, 0.0, 0.0), ("z", -9.0))
        uv = slab_uv(plank)
        shop.mesh("plank", body, relief(matt(colour, 0.42, 0.35), height), uv=uv)
        x += width


# ---------------------------------------------------------------- room and light


def sun_direction(azimuth_deg: float, elevation_deg: float) -> list[float]:
    """Return the unit vector along which sunlight travels."""
    a, e = math.radians(azimuth_deg), math.radians(elevation_deg)
    return [math.cos(e) * math.cos(a), math.cos(e) * math.sin(a), -math.sin(e)]


def add_box(shop: Workshop, name: str, low: list[float], high: list[float], bsdf: Spec) -> None:
    """Add an upright box between two corners."""
    to_world = mi.ScalarTransform4f()
    middle = [(a + b) / 2 for a, b in zip(low, high, strict=True)]
    half = [(b - a) / 2 for a, b in zip(low, high, strict=True)]
    to_world = to_world.translate(middle).scale(half)
    shop.add(name, {"type": "cube", "to_world": to_world, "bsdf": bsdf})


def add_light(shop: Workshop) -> None:
    """Add a low sun through a window on the left, the sky in its upper part, a dim room."""
    # Several thin suns over the 0.53 degree disc give shadow edges their true softness; being
    # pure directions they make no fireflies through the glass.
    count = 9
    for n in range(count):
        r, t = 0.27 * math.sqrt((n + 0.5) / count), 2.399963 * n
        direction = sun_direction(
            SUN_AZIMUTH_DEG + r * math.cos(t), SUN_ELEVATION_DEG + r * math.sin(t)
        )
        power = [12.5 / count, 9.4 / count, 6.1 / count]
        shop.add(
            "sun",
            {
                "type": "directional",
                "direction": direction,
                "irradiance": {"type": "rgb", "value": power},
                "sampling_weight": 0.35,
            },
        )
    add_window(shop)
    shop.add(
        "room",
        {
            "type": "constant",
            "radiance": {"type": "rgb", "value": [0.075, 0.068, 0.06]},
            "sampling_weight": 1.5,
        },
    )


def add_window(shop: Workshop) -> None:
    """Add the left wall with a window of four panes, and the sky seen above the sun."""
    x = WINDOW_X_MM
    frame = matt([0.30, 0.28, 0.25])
    y0, y1, z0, z1 = -430.0, 235.0, 60.0, 480.0
    for low, high in (
        ([x - 20, -3000, -900], [x, y0, 3000]),
        ([x - 20, y1, -900], [x, 3000, 3000]),
        ([x - 20, y0, -900], [x, y1, z0]),
        ([x - 20, y0, z1], [x, y1, 3000]),
        ([x - 20, -215.0, z0], [x, -185.0, z1]),
        ([x - 20, y0, 352.0], [x, y1, 374.0]),
    ):
        add_box(shop, "window", low, high, frame)
    sky = mi.ScalarTransform4f().translate([x + 15, -120, 1050]).rotate([0, 1, 0], 90)
    shop.add(
        "sky",
        {
            "type": "rectangle",
            "to_world": sky.scale([480, 520, 1]),
            "emitter": {
                "type": "area",
                "radiance": {"type": "rgb", "value": [1.0, 1.25, 1.6]},
                "sampling_weight": 3.0,
            },
        },
    )


def add_wall(shop: Workshop, rng: np.random.Generator) -> None:
    """Add a rough plastered wall behind the table."""
    shape = (1900, 4200)
    k = 1.0 / 0.35
    trowel = noise(rng, shape, (5 * k, 22 * k))
    lumps = noise(rng, shape, (12 * k, 12 * k))
    grit = noise(rng, shape, (0.45 * k, 0.45 * k))
    pits = smoothstep(2.1, 3.0, noise(rng, shape, (0.8 * k, 0.8 * k)))
    cracks = np.abs(noise(rng, shape, (28 * k, 28 * k)) + 0.12 * noise(rng, shape, (4 * k, 4 * k)))
    cracks = (1 - smoothstep(0.004, 0.016, cracks)) * (lumps > 0.5)
    height = 0.22 * trowel + 0.5 * lumps + 0.06 * grit - 0.3 * pits - 0.25 * cracks
    colour = mix(
        [0.30, 0.285, 0.245], [0.215, 0.22, 0.205], 0.5 + 0.3 * noise(rng, shape, (90, 120))
    )
    colour = mix(colour, [0.36, 0.31, 0.24], 0.3 * smoothstep(0.3, 2.0, lumps))
    colour = colour * (1 + 0.035 * grit[..., None] + 0.03 * trowel[..., None])
    colour = mix(colour, colour * 0.5, 0.8 * pits + 0.7 * cracks)
    x = np.linspace(-735.0, 735.0, 8)
    z = np.linspace(-185.0, 480.0, 8)
    grid = np.zeros((8, 8, 3))
    grid[..., 0], grid[..., 1], grid[..., 2] = x[None, :], WALL_Y_MM, z[:, None]
    shop.mesh("wall", grid, relief(matt(colour, 0.9, 0.2), height))


# ---------------------------------------------------------------- cloth and string


def cloth_height(x: Array, y: Array) -> Array:
    """Return how high the cloth lies (mm) over its own coordinates x, y (mm): a few soft folds."""
    height = np.zeros_like(x)
    for x0, y0, angle_deg, amplitude, width in (
        (-78.0, -40.0, 62.0, 9.0, 9.5),
        (-30.0, -85.0, 24.0, 6.0, 9.0),
        (70.0, -92.0, -38.0, 5.0, 8.0),
        (-98.0, 60.0, 80.0, 4.0, 9.0),
    ):
        a = math.radians(angle_deg)
        across = -(x - x0) * math.sin(a) + (y - y0) * math.cos(a)
        along = (x - x0) * math.cos(a) + (y - y0) * math.sin(a)
        across = across + 5.0 * np.sin(along / 21.0 + x0)
        fade = np.exp(-((along / 52.0) ** 2))
        height = height + amplitude * fade * np.exp(-((across / width) ** 2))
    ripple = 0.35 * np.sin(x / 17.0 + y / 31.0) + 0.3 * np.sin(y / 13.0 - x / 23.0)
    return np.asarray(height + 0.35 + ripple * 0.5)


def add_cloth(shop: Workshop, rng: np.random.Generator) -> None:
    """Add a linen cloth, woven of single threads, with a fringe on two sides."""
    size_x, size_y, pitch = 225.0, 215.0, 0.92
    at, turn = (-142.0, 398.0), rotation("z", -17.0)
    groups: dict[str, list[Curve]] = {"linen": [], "pale": [], "blue": []}
    for direction in (0, 1):
        length, width = ((size_x, size_y), (size_y, size_x))[direction]
        crossings, count = int(length / pitch), int(width / pitch)
        for k in range(count):
            fringe = rng.integers(7, 13) if direction == 0 else 2
            n = np.arange(-fringe, crossings + fringe)
            along = n * pitch - length / 2
            wander = gaussian_filter1d(rng.standard_normal(len(n)), 6) * 0.25
            across = (k + rng.normal(0, 0.06)) * pitch - width / 2 + wander
            outside: Array = np.maximum(0.0, np.maximum(-n, n - crossings))
            drift = rng.normal(0, 0.10) * outside + rng.normal(0, 0.006) * outside**2
            x, y = (along, across + drift) if direction == 0 else (across + drift, along)
            side = np.where((n + k) % 2 == direction, 1.0, -1.0)
            # A B-spline through alternating points keeps a third of their swing.
            z = (
                cloth_height(np.asarray(x, float), np.asarray(y, float))
                + 0.75 * np.where(outside > 1, 0.1, side)
                + 0.45
            )
            z = np.maximum(z - 0.05 * outside, 0.4)
            world = np.stack([x, y, z], -1) @ turn.T + np.array([*at, 0.0])
            slub = np.exp(0.22 * gaussian_filter1d(rng.standard_normal(len(n)), 5) * 3)
            radii = 0.40 * slub * math.exp(rng.normal(0, 0.07))
            radii = np.where(outside > 1, radii * 0.75, radii)
            stripe = direction == 0 and 14 <= k % 78 < 24 and k % 78 not in (17, 20)
            group = "blue" if stripe else ("pale" if rng.random() < 0.42 else "linen")
            groups[group].append((world, radii))
    colours = {"linen": [0.47, 0.40, 0.30], "pale": [0.56, 0.50, 0.40], "blue": [0.07, 0.12, 0.21]}
    for group, threads in groups.items():
        shop.curves("thread", threads, matt(colours[group], 0.85, 0.15), finer=True)
    fuzz = []
    for _ in range(5200):
        x, y = rng.uniform(-0.5, 0.5, 2) * [size_x, size_y]
        start = np.array([x, y, float(cloth_height(np.array(x), np.array(y))) + 0.9])
        step = rng.normal(0, 1, 3) * [0.55, 0.55, 0.2] + [0, 0, 0.22]
        bend = rng.normal(0, 0.16, 3)
        t = np.linspace(0.0, 2.2, 5)[:, None]
        hair = (start + t * step + t**2 * bend) @ turn.T + np.array([*at, 0.0])
        fuzz.append((hair, np.full(5, 0.028)))
    shop.curves("fuzz", fuzz, matt([0.55, 0.49, 0.39], 0.8, 0.2), sides=3)


def twisted(
    path: Array, radius_mm: float, pitch_mm: float, rng: np.random.Generator
) -> list[Curve]:
    """Return the two plies of a string along a path (N, 3) mm."""
    step = np.linalg.norm(np.diff(path, axis=0), axis=1)
    along = np.concatenate([[0.0], np.cumsum(step)])
    s = np.arange(0.0, along[-1], pitch_mm / 7)
    points = np.stack([np.interp(s, along, path[:, k]) for k in range(3)], -1)
    forward = np.gradient(points, axis=0)
    forward /= np.linalg.norm(forward, axis=1, keepdims=True) + 1e-9
    helper = np.where(np.abs(forward[:, 2:]) < 0.8, [[0.0, 0, 1]], [[1.0, 0, 0]])
    side = np.cross(forward, helper)
    side /= np.linalg.norm(side, axis=1, keepdims=True) + 1e-9
    up = np.cross(side, forward)
    plies = []
    for ply in (0.0, np.pi):
        a = 2 * np.pi * s / pitch_mm + ply
        offset = 0.56 * radius_mm * (np.cos(a)[:, None] * side + np.sin(a)[:, None] * up)
        rough = np.exp(0.10 * gaussian_filter1d(rng.standard_normal(len(s)), 2) * 2)
        plies.append((points + offset, 0.56 * radius_mm * rough))
    return plies


def ball_path(rng: np.random.Generator, radius_mm: float, turns: int) -> Array:
    """Return the path (N, 3) of string wound on a ball about its middle, in bundles of turns."""
    t = np.linspace(0, 2 * np.pi, 72, endpoint=False)
    out = []
    pole = rng.standard_normal(3)
    for n in range(turns):
        if n % 13 == 0:
            pole = rng.standard_normal(3)
        pole = pole / np.linalg.norm(pole)
        helper = np.array([0.3, 0.9, 0.1]) if abs(pole[1]) < 0.8 else np.array([0.9, 0.1, 0.3])
        first = np.cross(pole, helper)
        first /= np.linalg.norm(first)
        second = np.cross(pole, first)
        shift = ((n % 13) - 6) * 0.052
        r = radius_mm * (0.94 + 0.075 * n / turns)
        ring = math.cos(shift) * (np.cos(t)[:, None] * first + np.sin(t)[:, None] * second)
        out.append(r * (ring + math.sin(shift) * pole))
    return np.concatenate(out)


def add_string(shop: Workshop, rng: np.random.Generator) -> None:
    """Add a ball of hemp string and its loose end on the table."""
    radius, at = 27.0, np.array([146.0, 316.0, 0.0])
    ball = ball_path(rng, radius, 300)
    plies: list[Curve] = []
    for chunk in np.array_split(ball, 300 // 13 + 1):
        plies += twisted(chunk + at + [0, 0, radius + 0.6], 1.1, 3.9, rng)
    knots = np.array(
        [
            [138, 288, 22], [132, 285, 7], [116, 277, 1.2], [96, 260, 1.0], [96, 236, 1.0],
            [118, 222, 1.0], [137, 232, 1.0], [134, 251, 2.6], [112, 252, 2.8], [88, 236, 1.0],
            [70, 212, 1.0], [59, 194, 1.0], [61, 177, 1.0], [74, 167, 1.0],
        ]
    )  # fmt: skip
    t = np.linspace(0, len(knots) - 1, 500)
    loose = np.stack([np.interp(t, range(len(knots)), knots[:, k]) for k in range(3)], -1)
    loose = gaussian_filter1d(loose, 22, axis=0, mode="nearest")
    plies += twisted(loose, 1.1, 3.9, rng)
    shop.curves("string", plies, matt([0.34, 0.24, 0.135], 0.8, 0.2))
    fibres = []
    for points, _ in plies:
        for p in points[rng.random(len(points)) < 0.10]:
            out = p - (at + np.array([0, 0, radius])) if p[1] > 288 else np.array([0, 0, 1.0])
            out = out / np.linalg.norm(out) * 0.5 + rng.normal(0, 0.5, 3)
            bend = rng.normal(0, 0.1, 3)
            k = np.linspace(0.0, 1.7, 5)[:, None]
            fibres.append(
                (p + k * out * 0.7 + k**2 * bend, np.array([0.06, 0.05, 0.04, 0.03, 0.02]))
            )
    shop.curves("fibre", fibres, matt([0.50, 0.38, 0.23], 0.7, 0.2), sides=3)


# ---------------------------------------------------------------- plants


def wandering(
    rng: np.random.Generator, start: Array, heading: Array, length: float, lift: float, wild: float
) -> Array:
    """Return a stem (N, 3) that starts at `start`, wanders and is drawn up (or down) by `lift`."""
    n = max(5, int(length / 4.0))
    heading = heading / np.linalg.norm(heading)
    points = [start - heading * 1.0]
    sway = gaussian_filter1d(rng.standard_normal((n, 3)), 2.0, axis=0) * wild
    for k in range(n):
        heading = heading + sway[k] + np.array([0.0, 0.0, lift])
        heading = heading / np.linalg.norm(heading)
        points.append(points[-1] + heading * length / n)
    return np.asarray(points)


def branch(
    rng: np.random.Generator,
    start: Array,
    heading: Array,
    length: float,
    radius: float,
    level: int,
    out: list[Curve],
) -> None:
    """Add a twig and, by recursion, its finer side twigs to `out`."""
    points = wandering(rng, start, heading, length, 0.012, 0.10)
    n = len(points)
    taper = radius * np.linspace(1.0, 0.55 if level else 0.5, n)
    knots = rng.random(n) < 0.16
    out.append((points, np.maximum(taper * np.where(knots, 1.28, 1.0), 0.2)))
    if level == 0:
        # A bud at the tip.
        tip, last = points[-1], points[-1] - points[-2]
        last = last / np.linalg.norm(last)
        bud = tip + np.outer([0.0, 0.5, 1.2, 2.0, 2.5], last)
        out.append((bud, np.array([0.3, 0.6, 0.75, 0.45, 0.1]) * rng.uniform(0.8, 1.25)))
        return
    count = min(int(rng.integers(4, 7) if level > 1 else rng.integers(3, 6)), n // 2)
    side = 1.0
    for k in np.sort(rng.choice(np.arange(n // 4, n - 1), count, replace=False)):
        ahead = points[k + 1] - points[k]
        ahead = ahead / np.linalg.norm(ahead)
        across = np.cross(ahead, rng.standard_normal(3))
        across = across / np.linalg.norm(across)
        side = -side
        new = ahead + across * rng.uniform(0.5, 0.95) + np.array([0.25 * side, 0, 0.1])
        share = rng.uniform(0.38, 0.62) * (1 - 0.4 * k / n)
        branch(rng, points[k], new, length * share, taper[k] * 0.62, level - 1, out)
    end = points[-1] - points[-2]
    branch(rng, points[-1], end, length * 0.45, taper[-1] * 0.9, level - 1, out)


def grain_ear(rng: np.random.Generator, stem: Array, out: list[Curve]) -> None:
    """Add an ear of bearded grain on the end of a stem (N, 3)."""
    axis = stem[-1] - stem[-3]
    axis = axis / np.linalg.norm(axis)
    right = np.cross(axis, rng.standard_normal(3))
    right = right / np.linalg.norm(right)
    droop = np.array([0.0, 0.0, -1.0])
    for k in range(30):
        foot = stem[-1] + axis * 1.9 * k + droop * 0.006 * k**2
        sideways = right * (1 if k % 2 else -1) + 0.35 * rng.standard_normal(3)
        lean = axis + 0.33 * sideways + droop * 0.01 * k
        lean = lean / np.linalg.norm(lean)
        seed = foot + np.outer([0.0, 1.0, 3.0, 5.0, 6.6], lean)
        out.append((seed, np.array([0.4, 1.1, 1.55, 1.1, 0.2])))
        t = np.linspace(0, 1, 9)[:, None]
        length = rng.uniform(46, 66) * (1 - 0.35 * k / 30)
        awn = foot + lean * 7 + t * length * (axis * 0.85 + 0.22 * lean) + droop * 6 * t**2
        awn = awn + t**2 * rng.normal(0, 1.6, 3)
        out.append((awn, 0.21 * (1 - 0.7 * t[:, 0])))


def umbel(
    rng: np.random.Generator, top: Array, heading: Array, size: float, out: list[Curve]
) -> None:
    """Add a dry umbel: rays, small rays on them, a seed on each."""
    axis = heading / np.linalg.norm(heading)
    for k in range(17):
        spread = 0.95 * math.sqrt((k + 0.5) / 17)
        turn = 2.399963 * k + rng.normal(0, 0.12)
        first = np.cross(axis, [0.31, 0.83, 0.2])
        first = first / np.linalg.norm(first)
        out_way = math.cos(turn) * first + math.sin(turn) * np.cross(axis, first)
        t = np.linspace(0, 1, 7)[:, None]
        ray = top + size * (t * axis * (1 - 0.35 * spread) + t**0.75 * out_way * spread * 0.8)
        ray = ray + t * rng.normal(0, 0.05 * size, 3)
        out.append((ray, np.linspace(0.42, 0.28, 7)))
        end = ray[-1]
        ahead = ray[-1] - ray[-2]
        ahead = ahead / np.linalg.norm(ahead)
        for _ in range(rng.integers(7, 13)):
            way = ahead + 0.85 * rng.standard_normal(3)
            way = way / np.linalg.norm(way)
            length = size * rng.uniform(0.14, 0.22)
            out.append((end + np.outer(np.linspace(-0.1, 1, 5), way) * length, np.full(5, 0.19)))
            seed = end + np.outer(length + np.array([-0.3, 0.3, 0.9, 1.4, 1.8]), way)
            out.append((seed, np.array([0.2, 0.5, 0.65, 0.5, 0.15])))


def add_seed_head(
    shop: Workshop,
    rng: np.random.Generator,
    at: Array,
    heading: Array,
    size: float,
) -> None:
    """Add a dry, ribbed seed capsule with a scalloped crown, its foot at `at`."""
    knots = [(0.9, -3.0), (1.2, 0.0), (3.2, 1.2), (2.6, 2.6), (7.0, 6.0), (9.8, 12.0)]
    knots += [(9.9, 17.0), (8.4, 22.5), (5.4, 25.2), (5.0, 26.2), (9.2, 27.2), (9.6, 28.0)]
    knots += [(6.0, 29.0), (0.0, 29.6)]

    def ribs(turn: Array, z: Array) -> Array:
        """Ribs and wrinkles of the body, scallops of the crown."""
        body = smoothstep(4, 9, z) * (1 - smoothstep(21, 25, z))
        crown = smoothstep(26.4, 27.2, z) * (1 - smoothstep(28.4, 29.4, z))
        wrinkle = 0.14 * np.sin(23 * turn + 0.7 * z) * np.sin(0.9 * z + 5 * turn)
        return np.asarray(
            body * (0.42 * np.abs(np.cos(5.5 * turn)) ** 3 - 0.2 + wrinkle)
            - 1.5 * crown * np.abs(np.sin(5.5 * turn)) ** 2
        )

    points = turned(smooth_profile(knots, 0.45), sides=320, rows=300, shape=ribs) * size / 10.0
    axis = heading / np.linalg.norm(heading)
    tilt = math.degrees(math.acos(np.clip(axis[2], -1, 1)))
    turn = math.degrees(math.atan2(axis[1], axis[0]))
    body = placed(points, tuple(at), ("z", rng.uniform(0, 360)), ("y", tilt), ("z", turn))
    shape = (420, 700)
    fine = noise(rng, shape, (14, 1.1))
    colour = mix(
        [0.36, 0.275, 0.165], [0.17, 0.115, 0.065], 0.4 + 0.35 * noise(rng, shape, (30, 30))
    )
    colour = colour * (1 + 0.16 * fine[..., None])
    colour = mix(colour, [0.07, 0.05, 0.035], smoothstep(1.7, 2.4, noise(rng, shape, (2.0, 2.0))))
    v = np.linspace(0, 1, shape[0])[:, None]
    colour = mix(colour, colour * 0.5, np.broadcast_to(smoothstep(0.84, 0.93, v), shape))
    shop.mesh("capsule", body, relief(matt(colour, 0.75, 0.25), 0.05 * fine))


def add_bouquet(shop: Workshop, rng: np.random.Generator, mouth: Array) -> None:
    """Add what stands in the jug: bare twigs, capsules on stems, an umbel or two, grain."""
    twigs: list[Curve] = []
    for x, y, length, radius in (
        (0.20, 0.05, 88.0, 1.4),
        (-0.34, 0.10, 70.0, 1.3),
        (0.62, -0.05, 84.0, 1.3),
    ):
        start = mouth + np.array([x * 15, y * 14, -6])
        branch(rng, start, np.array([x, y, 0.95]), length, radius, 3, twigs)
    shop.curves("twig", twigs, matt([0.20, 0.125, 0.085], 0.65, 0.35), finer=True)
    straw: list[Curve] = []
    for x, y, length in (
        (0.42, -0.18, 56.0),
        (-0.45, -0.12, 42.0),
        (0.05, -0.3, 32.0),
        (-0.16, 0.2, 60.0),
    ):
        start = mouth + np.array([x * 15, y * 14, -6])
        stem = wandering(rng, start, np.array([x, y, 1.0]), length, 0.0, 0.035)
        straw.append((stem, np.linspace(1.15, 0.85, len(stem))))
        add_seed_head(shop, rng, stem[-1], stem[-1] - stem[-2], rng.uniform(6.2, 8.4))
    for x, y, length in ((0.75, 0.0, 66.0), (0.95, -0.2, 60.0), (-0.75, -0.1, 64.0)):
        start = mouth + np.array([x * 14, y * 14, -6])
        stem = wandering(rng, start, np.array([x, y, 1.0]), length, -0.012, 0.02)
        straw.append((stem, np.full(len(stem), 0.75)))
        grain_ear(rng, stem, straw)
    shop.curves("straw", straw, matt([0.40, 0.285, 0.14], 0.55, 0.4), finer=True)
    dry: list[Curve] = []
    for x, y, length, size in (
        (-0.1, -0.1, 46.0, 25.0),
        (0.3, 0.25, 62.0, 28.0),
        (-0.55, 0.15, 54.0, 22.0),
    ):
        start = mouth + np.array([x * 15, y * 14, -6])
        stem = wandering(rng, start, np.array([x, y, 1.1]), length, 0.0, 0.04)
        dry.append((stem, np.linspace(1.2, 0.7, len(stem))))
        umbel(rng, stem[-1], stem[-1] - stem[-2], size, dry)
    shop.curves("umbel", dry, matt([0.33, 0.22, 0.12], 0.75, 0.2), finer=True)


def add_fallen(shop: Workshop, rng: np.random.Generator) -> None:
    """Add the nearest thing: a capsule that lies on the table with its stem."""
    foot, way = np.array([-72.0, 137.0, 6.0]), np.array([0.82, -0.57, 0.12])
    add_seed_head(shop, rng, foot, way, 9.6)
    away = wandering(rng, foot, np.array([-0.9, 0.42, 0.0]), 70.0, 0.0, 0.02)
    away[:, 2] = np.linspace(foot[2], 1.2, len(away))
    stems = [(away, np.linspace(1.1, 1.3, len(away)))]
    shop.curves("stem", stems, matt([0.32, 0.22, 0.11], 0.6, 0.4), finer=True)


# ---------------------------------------------------------------- jug, bottle, brass


def swept(path: Array, half_a: Array, half_b: Array) -> Array:
    """Return an oval rod along a path (N, 3); half axes (N,) across x-z bends and along y."""
    forward = np.gradient(path, axis=0)
    forward /= np.linalg.norm(forward, axis=1, keepdims=True)
    side = np.broadcast_to([0.0, 1.0, 0.0], path.shape)
    up = np.cross(side, forward)
    turn = np.linspace(0, -2 * np.pi, 41)
    ring = np.cos(turn)[None, :, None] * up[:, None] * half_a[:, None, None]
    ring = ring + np.sin(turn)[None, :, None] * side[:, None] * half_b[:, None, None]
    return np.asarray(path[:, None] + ring)


def add_jug(shop: Workshop, rng: np.random.Generator, x: float, y: float) -> Array:
    """Add a stoneware jug, glazed but for its foot; return the middle of its mouth (3,)."""
    outer = [(0.0, 0.0), (33.0, 0.0), (37.0, 1.2), (43.0, 12.0), (51.0, 36.0), (53.0, 58.0)]
    outer += [(47.0, 84.0), (35.0, 103.0), (29.5, 116.0), (29.0, 130.0), (33.0, 143.0)]
    outer += [(34.0, 146.0), (32.6, 147.6), (30.8, 146.4)]
    inner = [(28.0, 134.0), (26.0, 118.0), (33.0, 100.0), (46.0, 70.0), (40.0, 14.0), (0.0, 8.0)]

    def hand(turn: Array, z: Array) -> Array:
        """Throwing rings, a spout, and a hand that was not quite steady."""
        rings = 0.28 * np.sin(z * 0.95 + 0.5 * np.sin(turn)) * smoothstep(8, 30, z)
        lip = smoothstep(126, 147, z) * np.exp(-((np.angle(np.exp(1j * (turn - 3.6))) / 0.42) ** 2))
        wobble = 0.5 * np.sin(2 * turn + z / 40) + 0.25 * np.sin(3 * turn - z / 27)
        return np.asarray(rings + wobble + 7.5 * lip)

    body = turned(
        smooth_profile(outer, 1.6) + smooth_profile(inner, 2.0), sides=300, rows=500, shape=hand
    )
    shape = (1800, 1500)
    v = np.broadcast_to(np.linspace(0, 1, shape[0])[:, None], shape)
    edge = 0.185 + 0.012 * noise(rng, shape, (400, 60)) + 0.004 * noise(rng, shape, (200, 14))
    glazed = smoothstep(0.0, 0.006, v - edge)
    thin = np.exp(-np.maximum(v - edge, 0) / 0.02) * glazed
    cloud = noise(rng, shape, (90, 130))
    speck = smoothstep(2.55, 3.1, noise(rng, shape, (1.9, 2.2)))
    fine_speck = smoothstep(2.5, 3.2, noise(rng, shape, (0.9, 1.0)))
    glaze = mix([0.36, 0.355, 0.315], [0.26, 0.285, 0.27], 0.5 + 0.4 * cloud)
    glaze = mix(glaze, [0.27, 0.17, 0.085], 0.85 * thin)
    band = 0.75 * smoothstep(0.47, 0.475, v) * (1 - smoothstep(0.497, 0.502, v))
    glaze = mix(glaze, [0.045, 0.065, 0.10], band * (0.8 + 0.15 * noise(rng, shape, (8, 60))))
    glaze = mix(glaze, [0.075, 0.045, 0.025], np.maximum(0.9 * speck, 0.5 * fine_speck))
    grit = noise(rng, shape, (1.4, 1.4))
    clay = mix([0.255, 0.155, 0.088], [0.17, 0.10, 0.06], 0.5 + 0.22 * grit + 0.2 * cloud)
    colour = mix(clay, glaze, glazed)
    height = (
        0.35 * glazed + 0.05 * grit * (1 - glazed) + 0.04 * noise(rng, shape, (12, 14)) * glazed
    )
    rough = mix([0.85] * 3, [0.23] * 3, glazed)
    bsdf = relief(pottery(colour, rough), height)
    at = (x, y, CLOTH_MM)
    shop.mesh("jug", placed(JUG_SCALE * body, at, ("z", 20.0)), bsdf)
    t = np.linspace(0, 1, 90)
    knots = np.array([[29, 132], [39, 141], [58, 136], [66, 116], [64, 92], [56, 72], [49, 63]])
    line = np.stack([np.interp(t * 6, range(7), knots[:, k]) for k in (0, 1)], -1)
    line = gaussian_filter1d(line, 7, axis=0, mode="nearest")
    path = np.stack([line[:, 0], np.zeros(90), line[:, 1]], -1)
    width = 7.5 + 2.5 * (2 * t - 1) ** 4
    grip = swept(path, 4.3 + 1.2 * (2 * t - 1) ** 6, width)
    bsdf = relief(
        pottery(colour[500:1300, :700], rough[500:1300, :700]), 0.3 * height[500:1300, :700]
    )
    shop.mesh("handle", placed(JUG_SCALE * grip, at, ("z", -28.0)), bsdf)
    return np.array([x, y, CLOTH_MM + 142.0 * JUG_SCALE])


def pottery(colour: Array, rough: Array) -> Spec:
    """Return glazed or bare clay: colour and roughness (H, W, 3)."""
    base = {
        "type": "principled",
        "base_color": picture(colour),
        "roughness": picture(rough),
        "specular": 0.5,
    }
    return {"type": "twosided", "bsdf": base}


def add_bottle(shop: Workshop, x: float, y: float) -> None:
    """Add a hand-blown green bottle, its wall of uneven thickness."""
    outer = [(0.0, 5.0), (14.0, 3.0), (24.0, 0.0), (29.0, 1.0), (31.5, 6.0), (32.0, 60.0)]
    outer += [(31.6, 80.0), (24.0, 104.0), (12.0, 120.0), (10.6, 130.0), (10.2, 151.0)]
    lip = [(10.2, 151.0), (10.4, 152.4), (13.2, 153.5), (13.6, 160.0), (11.5, 162.5), (9.6, 162.5)]
    inner = [(7.8, 160.0), (7.6, 130.0), (9.5, 118.0), (19.0, 104.0), (28.0, 86.0), (29.0, 60.0)]
    inner += [(28.4, 11.0), (22.0, 8.0), (10.0, 12.0), (0.0, 14.0)]

    def blown(turn: Array, z: Array) -> Array:
        """The unevenness of blown glass."""
        return np.asarray(0.35 * np.sin(2 * turn + z / 33) + 0.25 * np.sin(3 * turn - z / 21))

    body = turned(
        smooth_profile(outer, 3.6) + smooth_profile(lip, 0.7) + smooth_profile(inner, 3.6),
        sides=300,
        rows=520,
        shape=blown,
    )
    glass = {
        "type": "dielectric",
        "int_ior": 1.52,
        "specular_transmittance": {"type": "rgb", "value": [0.66, 0.82, 0.68]},
    }
    shop.mesh("bottle", placed(body, (x, y, 0.05)), glass)
    cork = turned(
        [(0.0, 146.0), (7.2, 146.0), (8.4, 160.0), (9.0, 172.0), (8.4, 173.0), (0.0, 173.2)]
    )
    shop.mesh("cork", placed(cork, (x, y, 0.0)), matt([0.36, 0.23, 0.125], 0.9, 0.2))


def metal(colour: Array, rough: Array) -> Spec:
    """Return a bare metal: colour (H, W, 3) and roughness (H, W)."""
    base = {
        "type": "principled",
        "base_color": picture(colour),
        "metallic": 1.0,
        "roughness": picture(np.repeat(rough[..., None], 3, -1)),
    }
    return {"type": "twosided", "bsdf": base}


def tarnished(
    rng: np.random.Generator, shape: tuple[int, int], bright: list[float], dull: list[float]
) -> tuple[Spec, Array]:
    """Return a turned metal with tarnish and scratches, and its relief in mm (H, W)."""
    spots = noise(rng, shape, (30, 40)) + 0.5 * noise(rng, shape, (6, 8))
    dullness = smoothstep(-0.4, 1.9, spots)
    rings = noise(rng, shape, (1.0, 300))
    marks = scratches(rng, shape, 160, 60)
    colour = mix(bright, dull, 0.85 * dullness + 0.06 * rings)
    colour = mix(colour, np.array(dull) * 0.35, smoothstep(2.4, 3.0, noise(rng, shape, (2, 2))))
    rough = np.clip(0.24 + 0.22 * dullness + 0.05 * rings + 0.15 * marks, 0.12, 0.9)
    return metal(colour, rough), 0.006 * rings - 0.02 * gaussian_filter(marks, 0.7)


def add_brass(shop: Workshop, rng: np.random.Generator, x: float, y: float) -> None:
    """Add a turned brass weight with a milled band and a knob."""
    knots = [(0.0, 0.0), (18.0, 0.0), (18.8, 0.8), (18.8, 7.0), (18.0, 7.6), (18.0, 8.6)]
    knots += [(18.8, 9.2), (18.8, 37.0), (17.6, 38.4), (9.0, 39.6), (5.4, 42.0), (4.6, 46.0)]
    knots += [(6.6, 49.0), (9.6, 52.0), (10.2, 55.0), (8.8, 58.4), (5.0, 60.4), (0.0, 61.0)]

    def milled(turn: Array, z: Array) -> Array:
        """A band of crossed cuts."""
        band = smoothstep(16.0, 16.6, z) * (1 - smoothstep(29.4, 30.0, z))
        cut = np.abs(((turn * 18.8 + z) / 1.4) % 1 - 0.5) + np.abs(
            ((turn * 18.8 - z) / 1.4) % 1 - 0.5
        )
        return np.asarray(-0.55 * band * (cut - 0.35))

    body = turned(smooth_profile(knots, 0.30), sides=1000, rows=700, shape=milled)
    bsdf, height = tarnished(rng, (900, 1200), [0.80, 0.56, 0.24], [0.30, 0.18, 0.075])
    shop.mesh("weight", placed(body, (x, y, 0.05), ("z", 40.0)), relief(bsdf, height))


def add_screw(
    shop: Workshop, bsdf: Spec, length: float, at: tuple[float, float], turn_deg: float
) -> None:
    """Add a slotted countersunk wood screw lying on the table."""
    r = 2.0 * length / 26.0 + 0.4
    knots = [(0.0, 0.0), (r, length * 0.25), (r, length - 4.0), (2.1 * r, length - 0.4)]
    knots += [(2.1 * r, length), (0.0, length + 0.25)]

    def thread(turn: Array, z: Array) -> Array:
        """A sharp thread on the lower part."""
        pitch = 0.85 * r
        wave = np.abs((z / pitch - turn / (2 * np.pi)) % 1.0 - 0.5)
        long = 1 - smoothstep(0.60 * length, 0.68 * length, z)
        return np.asarray(long * (0.85 * smoothstep(0.28, 0.5, wave) - 0.5))

    body = turned(knots, sides=140, rows=700, shape=thread, round_corners=False)
    top = (body[..., 2] > length - 0.1) & (np.abs(body[..., 0]) < 0.22 * r)
    body[..., 2] -= np.where(top, 0.9, 0.0)
    lying = rested(body, at[0], at[1], 0.02, ("x", -78.0), ("z", turn_deg))
    shop.mesh("screw", lying, bsdf)


def add_key(shop: Workshop, rng: np.random.Generator, x: float, y: float, turn_deg: float) -> None:
    """Add an old iron key."""
    shape = (500, 500)
    rust = smoothstep(-0.2, 1.6, noise(rng, shape, (18, 18)) + 0.5 * noise(rng, shape, (3, 3)))
    grit = noise(rng, shape, (1.6, 1.6))
    bsdf = relief(
        metal(mix([0.20, 0.185, 0.17], [0.105, 0.05, 0.026], rust), 0.34 + 0.35 * rust),
        0.035 * grit * (0.4 + rust),
    )
    shaft = [(0.0, -2.0), (2.9, -2.0), (2.9, 2.0), (4.2, 3.0), (4.2, 4.6), (2.9, 5.4), (3.5, 7.6)]
    shaft += [
        (2.6, 9.5),
        (2.5, 46.0),
        (2.9, 46.8),
        (2.9, 48.5),
        (2.4, 49.0),
        (2.3, 55.0),
        (0.0, 55.8),
    ]
    parts = [placed(turned(smooth_profile(shaft, 0.25), sides=60), (0, 0, 0), ("x", -90.0))]
    t = np.linspace(0, 2 * np.pi, 120)
    ring = np.stack([10.5 * np.cos(t), 0 * t, 8.8 * np.sin(t)], -1)
    bow = swept(ring, np.full(120, 2.1), np.full(120, 1.9))
    parts.append(placed(bow, (0.0, -10.5, 0.0), ("x", -90.0)))
    for a, b, reach in (
        (36.0, 39.4, 13.5),
        (40.4, 42.0, 10.0),
        (36.2, 45.6, 8.0),
        (43.0, 45.6, 13.0),
    ):
        bit = slab(b - a, reach, 2.3, edge=0.4)
        parts.append(placed(bit, (0.0, (a + b) / 2, 1.15), ("z", -90.0)))
    for part in parts:
        shop.mesh("key", placed(part, (x, y, 2.95), ("z", turn_deg)), bsdf)


# ---------------------------------------------------------------- fruit, rule, card, beads


def add_lemon(shop: Workshop, rng: np.random.Generator, x: float, y: float) -> None:
    """Add a lemon with a pitted skin."""
    knots = [(0.0, -38.0), (3.0, -37.5), (4.2, -35.0), (9.0, -31.0), (19.0, -22.0), (25.0, -6.0)]
    knots += [
        (25.5, 6.0),
        (21.0, 20.0),
        (12.0, 29.0),
        (6.5, 32.5),
        (5.4, 37.5),
        (3.4, 40.0),
        (0.0, 40.6),
    ]

    def grown(turn: Array, z: Array) -> Array:
        """The lobes of a grown fruit."""
        lobes = 0.55 * np.sin(3 * turn + 0.4) + 0.35 * np.sin(5 * turn + z / 14)
        return np.asarray(lobes + 0.4 * np.sin(turn - 1.0) * np.sin(z / 11))

    body = turned(smooth_profile(knots, 2.2), sides=300, rows=400, shape=grown)
    shape = (1100, 1700)
    pits = smoothstep(0.7, 2.2, noise(rng, shape, (4.6, 5.0)))
    fine = noise(rng, shape, (1.8, 1.8))
    lump = noise(rng, shape, (26, 30))
    colour = mix(
        [0.57, 0.375, 0.06], [0.50, 0.29, 0.032], 0.5 + 0.3 * noise(rng, shape, (120, 160))
    )
    colour = mix(colour, [0.48, 0.27, 0.02], 0.6 * pits)
    v = np.broadcast_to(np.linspace(-1, 1, shape[0])[:, None], shape)
    green = smoothstep(0.72, 1.0, np.abs(v) + 0.05 * lump)
    colour = mix(colour, [0.34, 0.33, 0.04], 0.75 * green)
    scars = smoothstep(2.1, 2.7, noise(rng, shape, (9, 5)) + 0.3 * fine)
    colour = mix(colour, [0.36, 0.20, 0.07], 0.7 * scars)
    stalk = smoothstep(0.965, 0.985, v)
    colour = mix(colour, [0.16, 0.10, 0.045], stalk)
    height = 0.10 * lump - 0.22 * pits + 0.025 * fine
    skin = relief(matt(colour, 0.36, 0.5), height)
    shop.mesh("lemon", rested(body, x, y, CLOTH_MM - 0.4, ("x", -84.0), ("z", 118.0)), skin)


def add_egg(shop: Workshop, rng: np.random.Generator, at: tuple[float, float], turn: float) -> None:
    """Add a freckled brown egg, lying."""
    t = np.linspace(0, np.pi, 60)
    profile = [
        (float(21.0 * np.sin(a) * (1 + 0.12 * np.cos(a))), float(-28.0 * np.cos(a))) for a in t
    ]
    body = turned(profile, sides=240, rows=240, round_corners=False)
    shape = (900, 1300)
    v = np.broadcast_to(np.linspace(-1, 1, shape[0])[:, None], shape)
    density = noise(rng, shape, (4.2, 4.8)) + 0.35 * v
    freckle = smoothstep(1.75, 2.2, density) + 0.5 * smoothstep(
        2.3, 3.0, noise(rng, shape, (10, 11))
    )
    cloud = noise(rng, shape, (80, 110))
    grain = noise(rng, shape, (1.1, 1.1))
    colour = mix([0.54, 0.335, 0.20], [0.46, 0.26, 0.145], 0.5 + 0.35 * cloud)
    colour = mix(colour, [0.20, 0.085, 0.04], 0.8 * freckle) * (1 + 0.03 * grain[..., None])
    shell = relief(matt(colour, 0.55, 0.35), 0.02 * grain + 0.02 * noise(rng, shape, (5, 5)))
    lying = rested(body, at[0], at[1], CLOTH_MM - 0.5, ("x", -86.0), ("z", turn))
    shop.mesh("egg", lying, shell)


def add_rule(shop: Workshop, rng: np.random.Generator, pixel_mm: float) -> None:
    """Add a wooden rule that runs away from the camera, divided by bars into mm and 5 mm."""
    width, length = 29.0, 296.0
    colour, height = wood(rng, width, length, pixel_mm, tint=0.0)
    tone = colour.mean(-1, keepdims=True)
    colour = np.array([0.62, 0.45, 0.235]) * (0.52 + 1.35 * tone / tone.mean() * 0.35)
    colour, height = worn(rng, colour, 0.5 * height, pixel_mm, 70)
    rows, columns = height.shape
    y = (np.arange(rows) + 0.5)[:, None] * length / rows
    x = (np.arange(columns) + 0.5)[None, :] * width / columns
    ink = np.zeros_like(height)
    # Left edge: 1, 5 and 10 mm; right edge: every 1.5 mm and every sixth longer.
    for edge, pitch, reach in (
        (x, 1.0, 4.2),
        (x, 5.0, 6.4),
        (x, 10.0, 9.2),
        (width - x, 1.5, 3.8),
        (width - x, 4.5, 5.4),
        (width - x, 9.0, 7.4),
    ):
        off = np.abs((y - 8.0 + pitch / 2) % pitch - pitch / 2)
        half = 0.13 if pitch < 2 else 0.19
        inside = (y > 7.5) & (y < length - 7.5) & (edge < reach) & (edge > 0.5)
        ink = np.maximum(ink, inside * (1 - smoothstep(half, half + pixel_mm, off)))
    for k in range(28):
        # In the place of figures: a pair of short bars at each tenth line.
        for across in (10.8, 12.2, 13.6)[: 1 + k % 3]:
            spot = (np.abs(y - 8.0 - 10.0 * k) < 1.5) & (np.abs(x - across) < 0.3)
            ink = np.maximum(ink, spot)
    wear = smoothstep(-1.9, -0.9, noise(rng, (rows, columns), (14 / pixel_mm, 5 / pixel_mm)))
    colour = mix(colour, [0.022, 0.017, 0.014], 0.93 * ink * wear)
    bar = slab(width, length, 2.4, edge=0.7)
    at = ((-46.0, 133.0, 2.45), ("z", -12.2))
    body = placed(bar, *at)
    look = relief(matt(colour, 0.40, 0.4), height - 0.03 * ink)
    shop.mesh("rule", body, look, uv=slab_uv(bar))
    brass, _ = tarnished(rng, (60, 300), [0.78, 0.55, 0.24], [0.36, 0.22, 0.09])
    for start in (0.0, length - 5.0):
        cap = slab(width + 0.5, 5.0, 2.8, edge=0.4)
        cap = cap + np.array([0.0, start, 0.25])
        shop.mesh("cap", placed(cap, *at), brass)


def card_pattern(rng: np.random.Generator, panels: int, pixels: tuple[int, int]) -> Array:
    """Return ink 0 to 1 (H, panels * W): a different pattern of lines on each panel."""
    rows, columns = pixels
    y, x = np.meshgrid(np.linspace(0, 1, rows), np.linspace(0, 1, columns), indexing="ij")
    frame = (x > 0.09) & (x < 0.91) & (y > 0.06) & (y < 0.94)
    words = np.zeros_like(x)
    for line in np.arange(0.09, 0.92, 0.042):
        at = 0.1
        while at < 0.86:
            size = rng.uniform(0.03, 0.15)
            on = (np.abs(y - line) < 0.008) & (x > at) & (x < min(at + size, 0.9))
            words = np.maximum(words, on)
            at += size + 0.025
    sweep = np.sin(2 * np.pi * (3.0 * x + 14.0 * x**2.2)) > 0
    stack = np.sin(2 * np.pi * (4.0 * y + 24.0 * y**2.2)) > 0
    r, a = np.hypot(x - 0.5, (y - 0.5) * 1.8), np.arctan2((y - 0.5) * 1.8, x - 0.5)
    star = (np.sin(36 * a) > 0) & (r < 0.39) & (r > 0.03)
    rings = (np.sin(2 * np.pi * 34 * r**1.4) > 0) & (r < 0.39)
    grid = ((x * 11) % 1 < 0.16) | ((y * 19) % 1 < 0.16)
    sets = [words, sweep * frame, star, stack * frame, words[::-1], rings, grid * frame]
    return np.concatenate([np.asarray(sets[k % len(sets)], float) for k in range(panels)], axis=1)


def add_card(shop: Workshop, rng: np.random.Generator, x: float, y: float) -> None:
    """Add a strip of paper folded to and fro, standing, printed with lines."""
    panels, width, height, pixels = 5, 29.0, 62.0, (1180, 600)
    ink = gaussian_filter(card_pattern(rng, panels, pixels), 0.7)
    shape = ink.shape
    fibre = noise(rng, shape, (1.2, 2.5))
    cloud = noise(rng, shape, (120, 120))
    colour = mix([0.72, 0.67, 0.56], [0.63, 0.565, 0.44], 0.4 + 0.3 * cloud)
    colour = colour * (1 + 0.025 * fibre[..., None])
    colour = mix(colour, [0.30, 0.19, 0.09], 0.5 * smoothstep(2.3, 3.4, noise(rng, shape, (3, 3))))
    colour = mix(colour, [0.035, 0.032, 0.04], 0.9 * ink)
    angles = np.array([24.0, -38.0, 30.0, -36.0, 27.0])
    t = np.linspace(0, panels, panels * 16 + 1)
    # The folds are sharp but not perfectly so, and the panels bow a little.
    heading = np.radians(np.repeat(angles, 16) + 5.0 * np.tile(np.linspace(-1, 1, 16), panels))
    heading = gaussian_filter1d(heading, 0.6, mode="nearest") + math.radians(-14.0)
    px = np.concatenate([[0.0], np.cumsum(np.cos(heading))]) * width / 16
    py = np.concatenate([[0.0], np.cumsum(np.sin(heading))]) * width / 16
    z = np.linspace(0.05, height, 20)
    grid = np.zeros((20, len(t), 3))
    grid[..., 0] = x + px
    grid[..., 1] = y + py + 0.0009 * (z[:, None] - 20) ** 2
    grid[..., 2] = z[:, None]
    shop.mesh("card", grid, relief(matt(colour[::-1], 0.8, 0.25), 0.012 * fibre[::-1]))


def add_beads(shop: Workshop, rng: np.random.Generator) -> None:
    """Add a few turned wooden beads, some painted."""
    paints = [[0.38, 0.055, 0.035], [0.42, 0.25, 0.11], [0.04, 0.13, 0.17], [0.55, 0.40, 0.12]]
    spots = [(108, 204), (121, 211), (100, 219), (131, 222), (119, 194), (80, 150), (-3, 183)]
    for k, (x, y) in enumerate(spots):
        r = rng.uniform(4.6, 6.4)
        a = np.linspace(-1.25, 1.25, 40)
        hole = r * math.cos(1.25)
        profile = [(hole, 0.0)] + [(float(r * np.cos(b)), float(r * 0.92 * np.sin(b))) for b in a]
        profile.append((hole * 0.95, 0.0))
        body = turned(profile, sides=90, rows=160)
        shape = (220, 400)
        grain = noise(rng, shape, (22, 0.9))
        worn_off = smoothstep(0.9, 1.6, noise(rng, shape, (12, 12)) + 0.3 * grain)
        colour = mix(paints[k % 4], [0.42, 0.26, 0.12], worn_off * (0.5 if k % 4 != 1 else 0.0))
        colour = colour * (1 + 0.12 * grain[..., None])
        look = relief(matt(colour, 0.38, 0.45), 0.02 * grain)
        turns = (("x", rng.uniform(40, 120)), ("z", rng.uniform(0, 360)))
        shop.mesh("bead", rested(body, x, y, 0.02, *turns), look)


# ---------------------------------------------------------------- the picture


def build(folder: Path, *, draft: bool) -> Spec:
    """Return all parts of the scene; `folder` keeps the mesh and curve files."""
    shop = Workshop(folder)
    seeds = iter(np.random.SeedSequence(SEED).spawn(40))

    def rng() -> np.random.Generator:
        """A generator of its own for each part, so that a change to one leaves the others."""
        return np.random.default_rng(next(seeds))

    add_light(shop)
    add_wall(shop, rng())
    add_table(shop, rng(), 0.4 if draft else 0.12)
    add_cloth(shop, rng())
    mouth = add_jug(shop, rng(), -118.0, 452.0)
    add_bouquet(shop, rng(), mouth)
    add_bottle(shop, 186.0, 520.0)
    add_brass(shop, rng(), 90.0, 424.0)
    add_string(shop, rng())
    add_lemon(shop, rng(), -58.0, 338.0)
    add_egg(shop, rng(), (-122.0, 322.0), 78.0)
    add_rule(shop, rng(), 0.1 if draft else 0.045)
    add_card(shop, rng(), 6.0, 520.0)
    add_key(shop, rng(), 26.0, 196.0, -38.0)
    brass, _ = tarnished(rng(), (200, 300), [0.72, 0.50, 0.22], [0.24, 0.14, 0.06])
    for length, at, turn in (
        (27.0, (14.0, 151.0), 62.0),
        (21.0, (44.0, 158.0), -25.0),
        (27.0, (87.0, 189.0), 118.0),
    ):
        add_screw(shop, brass, length, at, turn)
    add_beads(shop, rng())
    add_fallen(shop, rng())
    return shop.parts


def shot(args: argparse.Namespace) -> common.Shot:
    """Return where the camera stands; lengths are mm here (see the head of this file)."""
    pitch = math.radians(PITCH_DEG)
    eye = (0.0, 0.0, CAMERA_HEIGHT_MM)
    target = (0.0, math.cos(pitch), CAMERA_HEIGHT_MM - math.sin(pitch))
    return common.Shot(
        name="tabletop",
        place="A still life on a work table by a window, 12 cm to 60 cm away.",
        eye_m=eye,
        target_m=target,
        horizontal_view_deg=HORIZONTAL_VIEW_DEG,
        ev=EV,
        width_px=args.width,
        height_px=round(args.width * 2 / 3),
        exposure=1.05,
        knee=0.7,
        white=2.2,
        samples=args.spp,
        bounces=7,
        noise_kept=0.08,
    )


def camera(view: common.Shot) -> Spec:
    """Return the camera of a shot, each pixel's light being its own.

    A wider filter spreads a path over its neighbours; the noise of the dim light here is then no
    longer one of single pixels, and the denoiser keeps it as if it were texture.
    """
    return {
        "type": "perspective",
        "fov": view.horizontal_view_deg,
        "fov_axis": "x",
        "near_clip": 1.0,
        "far_clip": 1e5,
        "to_world": mi.ScalarTransform4f().look_at(
            origin=list(view.eye_m), target=list(view.target_m), up=[0, 0, 1]
        ),
        "film": {
            "type": "hdrfilm",
            "width": view.width_px,
            "height": view.height_px,
            "pixel_format": "rgb",
            "rfilter": {"type": "box"},
        },
        "sampler": {"type": "independent"},
    }


def distance_codes(distance_mm: Array) -> NDArray[np.uint16]:
    """Return distance along the axis of view in steps of STEP_MM; 0 where there is nothing."""
    code = np.rint(np.where(np.isfinite(distance_mm), distance_mm, 0.0) / STEP_MM)
    return np.where((code > 0) & (code <= 65535), code, 0).astype(np.uint16)


def write_scene(path: Path, view: common.Shot) -> None:
    """Write scene.toml."""
    lines = [
        f"# {view.place}",
        'photo = "photo.jpg"',
        f'horizontal_view = "{view.horizontal_view_deg:g} deg"',
        'projection = "rectilinear"',
        "[distance]",
        'map = "distance.png"',
        f'step = "{STEP_MM:g} mm"',
        "[light]",
        f"ev = {view.ev:g}          # scene average, ISO 100",
    ]
    path.write_text("\n".join(lines) + "\n", encoding="ascii")


def arguments() -> argparse.Namespace:
    """Return the options of the command line."""
    parser = argparse.ArgumentParser(description="Make the sample scene tabletop.")
    parser.add_argument("--draft", action="store_true", help="small and quick, to look at")
    parser.add_argument("--out", type=Path, default=common.SCENES / "tabletop")
    parser.add_argument("--width", type=int, help="pixels; the height follows")
    parser.add_argument("--spp", type=int, help="paths for each pixel")
    parser.add_argument("--minutes", type=float, default=1e9, help="stop adding paths after this")
    parser.add_argument("--linear", type=Path, help="also keep the linear light as .npy here")
    parser.add_argument("--retone", type=Path, help="write the photo again from such a file only")
    args = parser.parse_args()
    args.width = args.width or (600 if args.draft else 2400)
    args.spp = args.spp or (12 if args.draft else 48)
    return args


def trace(args: argparse.Namespace, view: common.Shot) -> Array:
    """Build and render; write distance.png and scene.toml, return linear light (H, W, 3)."""
    common.start_mitsuba()
    begun = time.time()
    with tempfile.TemporaryDirectory() as folder:
        parts = {**build(Path(folder), draft=args.draft), "camera": camera(view)}
        scene = common.make_scene(parts, view)
    print(f"built in {time.time() - begun:.0f} s", flush=True)
    distance_mm = common.view_distance_m(scene, view)  # in the unit of the scene, here mm
    print(f"distance {distance_mm.min():.2f} to {distance_mm.max():.2f} mm", flush=True)
    common.write_png16(args.out / "distance.png", distance_codes(distance_mm))
    write_scene(args.out / "scene.toml", view)
    light = common.render_light(scene, view, samples=view.samples, minutes=args.minutes)
    if args.linear is not None:
        np.save(args.linear, light)
    return np.asarray(light)


def main() -> None:
    """Make the scene, or with --retone only its photo from light that was kept."""
    args = arguments()
    args.out.mkdir(parents=True, exist_ok=True)
    view = shot(args)
    light = np.load(args.retone) if args.retone is not None else trace(args, view)
    srgb = common.tone(light, exposure=view.exposure, knee=view.knee, white=view.white)
    common.write_photo(args.out / "photo.jpg", srgb, quality=view.jpeg_quality)
    print(f"median {np.median(srgb):.2f} sRGB")


if __name__ == "__main__":
    main()
