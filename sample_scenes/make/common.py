"""Pieces every sample scene is made of: meshes, surfaces, sky, rendering and the three files.

World axes: x to the right, y away from the camera, z up; lengths in metres. A scene script
gives a `Shot` and a function that returns Mitsuba objects; `run` does the rest. Light is
linear sRGB with 1.0 = a white sheet facing the sun, before the exposure factor of the shot.
Chance comes in as numpy generators, so that a scene is the same each time it is made.

    shapes      Mesh, merge, place, scatter, box, tube, lathe, sheet, prism, leaf, tree
    surfaces    noise, Relief, masonry, cobbles, plaster, planks, and relief_mesh to build one
    materials   matte, glossy, glass, metal, bitmap, vertex_colour
    light       sky_and_sun
    output      Shot, run (command line: --draft, --out, --width, --spp, --linear, --retone)
"""

from __future__ import annotations

import argparse
import dataclasses
import struct
import time
import zlib
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import drjit as dr
import mitsuba as mi
import numpy as np
import numpy.typing as npt
import pyoidn  # type: ignore[import-untyped]
from PIL import Image, ImageCms
from scipy import ndimage
from scipy.spatial import cKDTree

Array = npt.NDArray[Any]
Vector = Sequence[float] | Array
SCENES = Path(__file__).resolve().parent.parent
DISTANCE_GRID = 0.003  # relative; finer than any blur this map is used for, and packs well


# --- shapes ------------------------------------------------------------------------------


@dataclasses.dataclass(frozen=True, kw_only=True)
class Mesh:
    """Triangles: vertices (N, 3) in metres, faces (M, 3), optional uv (N, 2), colour (N, 3)."""

    vertices: Array
    faces: Array
    uv: Array | None = None
    colour: Array | None = None

    def painted(self, colour: Vector) -> Mesh:
        """Return the mesh with one linear RGB colour, or one row of (N, 3) for each vertex."""
        rows = np.broadcast_to(np.asarray(colour, np.float32), self.vertices.shape)
        return dataclasses.replace(self, colour=rows)


def merge(meshes: Sequence[Mesh]) -> Mesh:
    """Return one mesh of many; uv or colour is kept where any mesh has it (else 0 or grey)."""
    if not meshes:
        raise ValueError("merge needs at least one mesh; got an empty list.")
    offsets = np.cumsum([0] + [len(m.vertices) for m in meshes[:-1]])
    uv = colour = None
    if any(m.uv is not None for m in meshes):
        uv = np.concatenate(
            [m.uv if m.uv is not None else np.zeros((len(m.vertices), 2)) for m in meshes]
        )
    if any(m.colour is not None for m in meshes):
        colour = np.concatenate(
            [m.colour if m.colour is not None else np.full(m.vertices.shape, 0.5) for m in meshes]
        )
    return Mesh(
        vertices=np.concatenate([m.vertices for m in meshes]),
        faces=np.concatenate([m.faces + o for m, o in zip(meshes, offsets, strict=True)]),
        uv=uv,
        colour=colour,
    )


def rotation(axis: Vector, angle_deg: float) -> Array:
    """Return the (3, 3) rotation about an axis, right-handed (Rodrigues' formula)."""
    x, y, z = np.asarray(axis, float) / np.linalg.norm(axis)
    k = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
    a = np.radians(angle_deg)
    return np.asarray(np.eye(3) + np.sin(a) * k + (1 - np.cos(a)) * (k @ k))


def place(
    mesh: Mesh, at_m: Vector = (0, 0, 0), *, turn: Array | None = None, scale: Vector | float = 1.0
) -> Mesh:
    """Return the mesh scaled, then turned by a (3, 3) rotation, then moved to `at_m`."""
    v = mesh.vertices * np.asarray(scale, float)
    if turn is not None:
        v = v @ np.asarray(turn).T
    return dataclasses.replace(mesh, vertices=v + np.asarray(at_m, float))


def scatter(mesh: Mesh, at_m: Array, turns: Array, scales: Array, colours: Array | None) -> Mesh:
    """Return K copies as one mesh: at_m (K, 3), turns (K, 3, 3), scales (K,), colours (K, 3)."""
    count, per = len(at_m), len(mesh.vertices)
    v = np.einsum("kij,nj->kni", turns, mesh.vertices) * scales[:, None, None] + at_m[:, None]
    faces = mesh.faces[None] + (np.arange(count) * per)[:, None, None]
    return Mesh(
        vertices=v.reshape(-1, 3),
        faces=faces.reshape(-1, 3),
        uv=None if mesh.uv is None else np.tile(mesh.uv, (count, 1)),
        colour=None if colours is None else np.repeat(colours, per, axis=0),
    )


def random_turns(rng: np.random.Generator, count: int) -> Array:
    """Return (count, 3, 3) rotations, evenly spread (Shoemake's quaternions)."""
    a, b, c = rng.random((3, count))
    w, x = np.sqrt(1 - a) * np.sin(2 * np.pi * b), np.sqrt(1 - a) * np.cos(2 * np.pi * b)
    y, z = np.sqrt(a) * np.sin(2 * np.pi * c), np.sqrt(a) * np.cos(2 * np.pi * c)
    rows = [
        [1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)],
        [2 * (x * y + z * w), 1 - 2 * (x * x + z * z), 2 * (y * z - x * w)],
        [2 * (x * z - y * w), 2 * (y * z + x * w), 1 - 2 * (x * x + y * y)],
    ]
    return np.asarray(np.moveaxis(np.array(rows), -1, 0))


def box(size_m: Vector, *, bevel_m: float = 0.0) -> Mesh:
    """Return a box centred on the origin, its edges cut at 45 degrees by `bevel_m`.

    Vertices are not shared between faces, so shading stays flat. uv is in metres on each face.
    """
    half = np.asarray(size_m, float) / 2
    quads: list[Array] = []
    signs = (-1.0, 1.0)

    def corner(sign: Array, axis: int) -> Array:
        inset = np.full(3, bevel_m)
        inset[axis] = 0.0
        return np.asarray(sign * (half - inset))

    for axis in range(3):
        a, b = (axis + 1) % 3, (axis + 2) % 3
        for s in signs:
            ring = []
            for sa, sb in ((-1.0, -1.0), (1.0, -1.0), (1.0, 1.0), (-1.0, 1.0)):
                sign = np.zeros(3)
                sign[axis], sign[a], sign[b] = s, sa, sb
                ring.append(corner(sign, axis))
            quads.append(np.array(ring if s > 0 else ring[::-1]))
    if bevel_m > 0:
        for axis in range(3):
            a, b = (axis + 1) % 3, (axis + 2) % 3
            for sa in signs:
                for sb in signs:
                    lo, hi = np.zeros(3), np.zeros(3)
                    lo[[axis, a, b]], hi[[axis, a, b]] = (-1, sa, sb), (1, sa, sb)
                    ring = [corner(lo, a), corner(hi, a), corner(hi, b), corner(lo, b)]
                    quads.append(np.array(ring if sa * sb < 0 else ring[::-1]))
        for sx in signs:
            for sy in signs:
                for sz in signs:
                    sign = np.array([sx, sy, sz])
                    ring = [corner(sign, 0), corner(sign, 1), corner(sign, 2), corner(sign, 2)]
                    quads.append(np.array(ring if sx * sy * sz > 0 else ring[::-1]))
    q = np.array(quads)
    index = np.arange(len(q))[:, None, None] * 4 + np.array([[0, 1, 2], [0, 2, 3]])
    v = q.reshape(-1, 3)
    normal_axis = np.repeat(np.argmax(np.abs(np.cross(q[:, 1] - q[:, 0], q[:, 2] - q[:, 0])), 1), 4)
    uv = np.where(
        (normal_axis == 0)[:, None],
        v[:, [1, 2]],
        np.where((normal_axis == 1)[:, None], v[:, [0, 2]], v[:, [0, 1]]),
    )
    return Mesh(vertices=v, faces=index.reshape(-1, 3), uv=uv)


def tubes(paths_m: Array, radii_m: Array, *, sides: int = 6) -> Mesh:
    """Return round rods: paths (B, n, 3), radii (B, n); open ends, smooth shading works.

    uv: u once round, v the length along the path in metres.
    """
    p, r = np.asarray(paths_m, float), np.asarray(radii_m, float)
    b, n, _ = p.shape
    t = np.gradient(p, axis=1)
    t /= np.linalg.norm(t, axis=2, keepdims=True) + 1e-12
    # One reference per path, the axis least along it, keeps the rods free of twist.
    ref = np.eye(3)[np.argmin(np.abs(t).mean(axis=1), axis=1)][:, None, :]
    e1 = np.cross(t, np.broadcast_to(ref, t.shape))
    e1 /= np.linalg.norm(e1, axis=2, keepdims=True) + 1e-12
    e2 = np.cross(t, e1)
    a = np.arange(sides + 1) * 2 * np.pi / sides
    ring = e1[:, :, None] * np.cos(a)[:, None] + e2[:, :, None] * np.sin(a)[:, None]
    v = p[:, :, None] + ring * r[:, :, None, None]
    along = np.cumsum(
        np.concatenate([np.zeros((b, 1)), np.linalg.norm(np.diff(p, axis=1), axis=2)], 1), axis=1
    )
    uv = np.stack(
        [
            np.broadcast_to(a / (2 * np.pi), (b, n, sides + 1)),
            np.broadcast_to(along[:, :, None], (b, n, sides + 1)),
        ],
        axis=-1,
    )
    index = np.arange(b * n * (sides + 1)).reshape(b, n, sides + 1)
    i00, i01 = index[:, :-1, :-1], index[:, :-1, 1:]
    i10, i11 = index[:, 1:, :-1], index[:, 1:, 1:]
    faces = np.stack([np.stack([i00, i01, i11], -1), np.stack([i00, i11, i10], -1)], -2)
    return Mesh(vertices=v.reshape(-1, 3), faces=faces.reshape(-1, 3), uv=uv.reshape(-1, 2))


def tube(path_m: Array, radius_m: float | Array, *, sides: int = 12) -> Mesh:
    """Return one round rod along a path (n, 3); the radius may change along it (n,)."""
    p = np.asarray(path_m, float)
    return tubes(p[None], np.broadcast_to(radius_m, (1, len(p))), sides=sides)


def lathe(profile_m: Array, *, sides: int = 48) -> Mesh:
    """Return a turned body about the z axis from a profile (n, 2) of radius and height.

    List the profile from the bottom up for outward normals. uv: round, and along the profile.
    """
    p = np.asarray(profile_m, float)
    a = np.linspace(0, 2 * np.pi, sides + 1)
    v = np.stack(
        [
            p[:, :1] * np.cos(a),
            p[:, :1] * np.sin(a),
            np.broadcast_to(p[:, 1:], (len(p), sides + 1)),
        ],
        axis=-1,
    )
    run_m = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(p, axis=0), axis=1))])
    uv = np.stack(np.meshgrid(a / (2 * np.pi), run_m), axis=-1)
    return Mesh(
        vertices=v.reshape(-1, 3), faces=grid_faces(len(p), sides + 1), uv=uv.reshape(-1, 2)
    )


def grid_faces(rows: int, columns: int) -> Array:
    """Return the faces of a (rows, columns) grid of vertices, counted row by row."""
    i = np.arange(rows * columns).reshape(rows, columns)
    a, b, c, d = i[:-1, :-1], i[:-1, 1:], i[1:, 1:], i[1:, :-1]
    return np.stack([np.stack([a, b, c], -1), np.stack([a, c, d], -1)], -2).reshape(-1, 3)


def sheet(points_m: Array) -> Mesh:
    """Return a surface through a (rows, columns, 3) grid of points; uv 0..1 over the grid."""
    p = np.asarray(points_m, float)
    rows, columns = p.shape[:2]
    uv = np.stack(np.meshgrid(np.linspace(0, 1, columns), np.linspace(0, 1, rows)), axis=-1)
    return Mesh(vertices=p.reshape(-1, 3), faces=grid_faces(rows, columns), uv=uv.reshape(-1, 2))


def prism(outline_m: Array, depth_m: float) -> Mesh:
    """Return a star-shaped outline (n, 2) in x and z, closed, given thickness along +y.

    "Star-shaped": every point of the outline can be seen from its mean.
    """
    o = np.asarray(outline_m, float)
    n = len(o)
    front = np.column_stack([o[:, 0], np.zeros(n), o[:, 1]])
    thick = np.array([0.0, depth_m, 0.0])
    back = front + thick
    centre = front.mean(axis=0)
    v = np.concatenate(
        [front, [centre], back, [centre + thick], front, back]
    )  # rims apart from caps, so that shading stays flat
    i = np.arange(n)
    j = (i + 1) % n
    f = [
        np.stack([np.full(n, n), i, j], 1),
        np.stack([np.full(n, 2 * n + 1), n + 1 + j, n + 1 + i], 1),
        np.stack([2 * n + 2 + i, 3 * n + 2 + i, 3 * n + 2 + j], 1),
        np.stack([2 * n + 2 + i, 3 * n + 2 + j, 2 * n + 2 + j], 1),
    ]
    return Mesh(vertices=v, faces=np.concatenate(f), uv=v[:, [0, 2]])


def leaf(length_m: float, width_m: float, *, fold: float = 0.3, droop: float = 0.3) -> Mesh:
    """Return a pointed leaf from the origin along +x, folded on its midrib and drooping."""
    t = np.linspace(0, 1, 7)
    half = 0.5 * width_m * np.sin(np.pi * t**0.75) * (1 - 0.15 * t)
    rows = []
    for side in (-1.0, 0.0, 1.0):
        z = fold * half * abs(side) - droop * length_m * t**2
        rows.append(np.column_stack([length_m * t, side * half, z]))
    return sheet(np.array(rows))


def tree(
    rng: np.random.Generator,
    *,
    height_m: float,
    radius_m: float,
    levels: int = 5,
    children: Sequence[int] = (9, 7, 6, 5, 4),
    spread_deg: float = 48.0,
    lift: float = 0.12,
    wander: float = 0.16,
    thinnest_m: float = 0.0012,
    shorten: float = 0.56,
) -> tuple[Mesh, Array, Array]:
    """Return a bare branching tree at the origin, its twig tips (K, 3) and their directions.

    levels : how often it branches; children[k] : branches on each branch of level k.
    lift : how strongly branches turn up (negative: weep); wander : crookedness per step.
    shorten : length of a branch of level 2 and up beside the one it grows from.
    """
    points = 9
    start = np.zeros((1, 3))
    heading = np.array([[0.0, 0.0, 1.0]])
    length = np.array([height_m * 0.62])
    radius = np.array([radius_m])
    parts: list[Mesh] = []
    tips, tip_headings = start, heading
    for level in range(levels):
        b = len(start)
        p = np.empty((b, points, 3))
        p[:, 0] = start
        d = heading.copy()
        for k in range(1, points):
            amount = wander * (0.35 if level == 0 else 1.0)
            d = d + rng.normal(0, amount, d.shape) + [0, 0, lift * (level > 0)]
            d /= np.linalg.norm(d, axis=1, keepdims=True)
            p[:, k] = p[:, k - 1] + d * (length / (points - 1))[:, None]
        end = 0.45 if level == 0 else 0.25
        r = radius[:, None] * np.linspace(1, end, points)
        if level == 0:
            r = r * (1 + 0.7 * np.exp(-np.arange(points) * 1.3))  # the root flare
        parts.append(tubes(p, np.maximum(r, thinnest_m), sides=(14, 9, 6, 4, 3, 3)[min(level, 5)]))
        tips, tip_headings = p[:, -1], d
        if level == levels - 1:
            break
        n = children[min(level, len(children) - 1)]
        low = 0.38 if level == 0 else 0.2
        s = np.clip(
            low + (1 - low) * (np.arange(n) + rng.random((b, n))) / n, 0, 0.999
        )  # places along the parent
        step = (s * (points - 1)).astype(int)
        f = (s * (points - 1) - step)[..., None]
        rows = np.arange(b)[:, None]
        base = p[rows, step] * (1 - f) + p[rows, step + 1] * f
        t = p[rows, step + 1] - p[rows, step]
        t /= np.linalg.norm(t, axis=2, keepdims=True)
        side = rng.normal(0, 1, t.shape)
        turn = np.arange(n) * 2.4 + rng.random((b, 1)) * 6.28  # the golden angle
        if level == 0:
            side = np.stack([np.cos(turn), np.sin(turn), np.zeros_like(turn)], -1)
        side -= (side * t).sum(2, keepdims=True) * t
        side /= np.linalg.norm(side, axis=2, keepdims=True)
        angle = np.radians(spread_deg * rng.uniform(0.6, 1.25, (b, n)))[..., None]
        heading = (t * np.cos(angle) + side * np.sin(angle)).reshape(-1, 3)
        start = base.reshape(-1, 3)
        here = radius[:, None] * (1 + (end - 1) * s)
        shrink = (0.5 if level == 0 else 0.55) * rng.uniform(0.75, 1.1, (b, n))
        radius = np.maximum(here * shrink, thinnest_m).reshape(-1)
        reach = (1.05 - 0.6 * (s - low) / (1 - low)) * rng.uniform(0.7, 1.15, (b, n))
        length = (length[:, None] * reach * (0.68 if level == 0 else shorten)).reshape(-1)
    return merge(parts), tips, tip_headings


# --- surfaces ----------------------------------------------------------------------------


def noise(
    rng: np.random.Generator,
    shape: tuple[int, int],
    *,
    largest_px: float,
    smallest_px: float = 2.0,
    roughness: float = 1.0,
    stretch: float = 1.0,
) -> Array:
    """Return tileable noise (H, W), mean 0, standard deviation 1, made by filtering in frequency.

    largest_px, smallest_px : range of feature sizes; roughness : fall of amplitude with
    frequency (1 is like clouds and stone, 2 smoother, 0 white); stretch > 1 : features that
    many times as tall as wide (streaks, grain).
    """
    fy = np.fft.fftfreq(shape[0])[:, None] * stretch
    fx = np.fft.rfftfreq(shape[1])[None, :]
    f = np.hypot(fx, fy)
    low, high = 1.0 / largest_px, 1.0 / smallest_px
    gain = (f + low) ** (-roughness - 1e-9) * np.exp(-((f / high) ** 2)) * (f > 0)
    gain *= 1 - np.exp(-((f / low) ** 2))
    white = rng.standard_normal(shape, dtype=np.float32)
    field = np.fft.irfft2(np.fft.rfft2(white) * gain, s=shape)
    return np.asarray((field - field.mean()) / (field.std() + 1e-12), np.float32)


def smoothstep(low: float, high: float, x: Array) -> Array:
    """Return 0 below `low`, 1 above `high`, a smooth cubic between."""
    t = np.clip((x - low) / (high - low), 0, 1)
    return np.asarray(t * t * (3 - 2 * t))


def mix(a: Array | Vector, b: Array | Vector, t: Array) -> Array:
    """Return a (H, W, 3) or (3,) faded to b where t (H, W) goes from 0 to 1."""
    w = np.asarray(t)[..., None]
    return np.asarray(np.asarray(a) * (1 - w) + np.asarray(b) * w, np.float32)


@dataclasses.dataclass(frozen=True, kw_only=True)
class Relief:
    """A surface: albedo (H, W, 3) linear, height_m (H, W) outwards; row 0 is its upper edge."""

    albedo: Array
    height_m: Array
    px_per_m: float

    @property
    def size_m(self) -> tuple[float, float]:
        """Width and height in metres."""
        rows, columns = self.height_m.shape
        return columns / self.px_per_m, rows / self.px_per_m


def lay_rows(
    rng: np.random.Generator,
    x: Array,
    y: Array,
    *,
    row_m: tuple[float, float],
    length_m: tuple[float, float],
    running: bool,
    size_m: tuple[float, float],
) -> tuple[Array, tuple[Array, Array, Array, Array], int]:
    """Return which stone each place (H, W) of a wall is in, that stone's sides, and their count.

    x, y : places in metres from the upper left corner; the sides are left, right, top, bottom.
    """
    width_m, height_m = size_m
    edges = [-row_m[1] * rng.random()]
    while edges[-1] < height_m + row_m[1]:
        edges.append(edges[-1] + rng.uniform(*row_m))
    row = np.clip(np.searchsorted(edges, y.ravel()) - 1, 0, len(edges) - 2).reshape(y.shape)
    ident = np.zeros(x.shape, np.int32)
    left, right = np.zeros(x.shape, np.float32), np.zeros(x.shape, np.float32)
    count = 0
    stones = max(int((width_m + 3 * length_m[1]) / length_m[0]) + 2, 2)
    for k in range(len(edges) - 1):
        here = row == k
        if running:
            first = -length_m[1] * (1 + 0.5 * (k % 2)) + rng.normal(0, 0.004)
        else:
            first = -length_m[1] * (1 + rng.random())
        joints = first + np.concatenate([[0.0], np.cumsum(rng.uniform(*length_m, stones))])
        at = np.clip(np.searchsorted(joints, x[here]) - 1, 0, stones - 1)
        left[here], right[here] = joints[at], joints[at + 1]
        ident[here] = count + at
        count += stones
    e = np.array(edges, np.float32)
    return ident, (left, right, e[row], e[row + 1]), count


def masonry(
    rng: np.random.Generator,
    *,
    width_m: float,
    height_m: float,
    px_per_m: float,
    row_m: tuple[float, float],
    length_m: tuple[float, float],
    palette: Sequence[Vector],
    running: bool = False,
    joint_m: float = 0.01,
    round_m: float = 0.01,
    wobble_m: float = 0.004,
    mortar: Vector = (0.42, 0.38, 0.32),
    mortar_depth_m: float = 0.012,
    uneven_m: float = 0.006,
    grain_m: float = 0.0015,
    colour_spread: float = 0.14,
    stain: float = 0.25,
) -> Relief:
    """Return laid stones or bricks: rows of a height range, stones of a length range.

    running : half-stone bond (bricks) instead of chance joints. uneven_m : how far stones
    stand out; grain_m : roughness of their faces; stain 0..1 : weathering, streaks, soot.
    For brick: row_m (0.075, 0.075), length_m (0.225, 0.225), running; for paving: large ones.
    """
    shape = (round(height_m * px_per_m), round(width_m * px_per_m))
    px = px_per_m
    y, x = np.meshgrid(
        np.arange(shape[0], dtype=np.float32) / px,
        np.arange(shape[1], dtype=np.float32) / px,
        indexing="ij",
    )
    size = max(length_m[1] * px, 8)
    x = x + wobble_m * noise(rng, shape, largest_px=size, smallest_px=size / 12)
    y = y + wobble_m * noise(rng, shape, largest_px=size, smallest_px=size / 12)
    ident, box_m, count = lay_rows(
        rng, x, y, row_m=row_m, length_m=length_m, running=running, size_m=(width_m, height_m)
    )
    left, right, top, bottom = box_m
    half_w, half_h = (right - left) / 2, (bottom - top) / 2
    cx, cy = (right + left) / 2, (bottom + top) / 2
    qx = np.abs(x - cx) - (half_w - joint_m / 2 - round_m)
    qy = np.abs(y - cy) - (half_h - joint_m / 2 - round_m)
    inside = round_m - (
        np.hypot(np.maximum(qx, 0), np.maximum(qy, 0)) + np.minimum(np.maximum(qx, qy), 0)
    )
    rough = noise(rng, shape, largest_px=0.05 * px, smallest_px=2, roughness=0.8)
    inside = inside + 0.18 * round_m * rough
    stone = smoothstep(-0.0015, 0.0015, inside)
    # Each stone stands out by its own amount and is a little tilted.
    out = rng.normal(0, 1, count).astype(np.float32)[ident] * uneven_m * 0.5
    tilt = rng.normal(0, uneven_m * 0.6, (2, count)).astype(np.float32)
    out += tilt[0][ident] * (x - cx) / half_w + tilt[1][ident] * (y - cy) / half_h
    fine = noise(rng, shape, largest_px=0.03 * px, smallest_px=2, roughness=0.7)
    face = out + grain_m * (0.6 * rough + 0.5 * fine)
    edge = smoothstep(0, max(round_m, 0.002) * 1.5, inside)
    height = stone * (mortar_depth_m * (0.35 + 0.65 * edge) + face) + (1 - stone) * grain_m * fine
    tone: Array = np.asarray(palette, np.float32)[rng.integers(0, len(palette), count)]
    tone = tone * (1 + colour_spread * rng.normal(0, 1, (count, 1)))
    tone = tone * (1 + 0.25 * colour_spread * rng.normal(0, 1, (count, 3)))
    albedo = np.clip(tone, 0.015, 0.9).astype(np.float32)[ident]
    blotch = noise(rng, shape, largest_px=0.25 * px, smallest_px=3, roughness=1.1)
    albedo *= (1 + 0.09 * blotch + 0.07 * rough + 0.06 * fine)[..., None]
    pits = smoothstep(1.5, 2.4, fine * 0.7 + rough * 0.7)
    albedo *= (1 - 0.35 * pits)[..., None]
    height -= stone * pits * grain_m * 1.5
    bed = np.asarray(mortar, np.float32) * (1 + 0.12 * fine + 0.1 * blotch)[..., None]
    albedo = mix(bed, albedo, stone)
    if stain > 0:
        albedo = weathered(rng, albedo, px_per_m, stain)
    return Relief(
        albedo=np.clip(albedo, 0.01, 0.92).astype(np.float32),
        height_m=height.astype(np.float32),
        px_per_m=px,
    )


def weathered(rng: np.random.Generator, albedo: Array, px_per_m: float, amount: float) -> Array:
    """Return the albedo with wide dark blotches, run-off streaks and lichen, by 0..1."""
    shape = (albedo.shape[0], albedo.shape[1])
    wide = noise(rng, shape, largest_px=1.5 * px_per_m, smallest_px=6, roughness=1.3)
    streak = noise(rng, shape, largest_px=0.15 * px_per_m, smallest_px=3, stretch=0.12)
    dark = smoothstep(0.2, 2.2, wide + 0.6 * streak)
    worn = mix(albedo, albedo * np.array([0.42, 0.42, 0.4]), dark * min(1.0, 2 * amount))
    spots = noise(rng, shape, largest_px=0.06 * px_per_m, smallest_px=3, roughness=0.9)
    lichen = smoothstep(1.7, 2.1, spots + 0.5 * wide) * amount
    return mix(worn, np.array([0.42, 0.41, 0.3]), lichen)


def cobbles(
    rng: np.random.Generator,
    *,
    width_m: float,
    height_m: float,
    px_per_m: float,
    stone_m: float,
    palette: Sequence[Vector],
    dome_m: float = 0.012,
    joint: Vector = (0.16, 0.14, 0.11),
    joint_m: float = 0.012,
    jitter: float = 0.38,
    colour_spread: float = 0.18,
    rows: bool = True,
) -> Relief:
    """Return cobbles or (with a small stone_m and jitter near 1) gravel, seen from above.

    rows : every second row is shifted by half a stone, as setts are laid.
    """
    shape = (round(height_m * px_per_m), round(width_m * px_per_m))
    nx, ny = int(width_m / stone_m) + 4, int(height_m / stone_m) + 4
    gx, gy = np.meshgrid(np.arange(-2, nx), np.arange(-2, ny))
    px_m = (gx + 0.5 + (0.5 * (gy % 2) if rows else 0.0)) * stone_m
    centres = np.stack([px_m, (gy + 0.5) * stone_m], -1).reshape(-1, 2)
    centres = centres + rng.uniform(-0.5, 0.5, centres.shape) * jitter * stone_m
    y, x = np.meshgrid(
        np.arange(shape[0], dtype=np.float32) / px_per_m,
        np.arange(shape[1], dtype=np.float32) / px_per_m,
        indexing="ij",
    )
    size = stone_m * px_per_m
    warp = [noise(rng, shape, largest_px=size, smallest_px=size / 10) for _ in range(2)]
    at = np.stack([x + warp[0] * stone_m * 0.03, y + warp[1] * stone_m * 0.03], -1)
    distance, index = cKDTree(centres).query(at.reshape(-1, 2), k=2, workers=2)
    ident = index[:, 0].reshape(shape)
    edge = ((distance[:, 1] - distance[:, 0]) / 2).reshape(shape) - joint_m / 2
    rough = noise(rng, shape, largest_px=size / 3, smallest_px=2, roughness=0.8)
    fine = noise(rng, shape, largest_px=12, smallest_px=2, roughness=0.5)
    edge = edge + 0.02 * stone_m * rough
    stone = smoothstep(-0.001, 0.002, edge)
    count = len(centres)
    rise = np.clip(edge / (0.5 * stone_m), 0, 1)
    dome = np.sqrt(np.clip(1 - (1 - rise) ** 2.4, 0, 1))
    level = rng.normal(0, 0.25 * dome_m, count).astype(np.float32)[ident]
    height = stone * (dome * dome_m + level + 0.04 * dome_m * (rough + fine))
    height += (1 - stone) * 0.05 * dome_m * fine
    tone: Array = np.asarray(palette, np.float32)[rng.integers(0, len(palette), count)]
    tone = tone * (1 + colour_spread * rng.normal(0, 1, (count, 1)))
    albedo = np.clip(tone, 0.02, 0.85).astype(np.float32)[ident]
    albedo *= (1 + 0.12 * rough + 0.1 * fine)[..., None]
    bed = np.asarray(joint, np.float32) * (1 + 0.2 * fine)[..., None]
    albedo = mix(bed, albedo, stone * (0.55 + 0.45 * dome))
    albedo = weathered(rng, albedo, px_per_m, 0.12)
    return Relief(
        albedo=np.clip(albedo, 0.01, 0.9).astype(np.float32),
        height_m=height.astype(np.float32),
        px_per_m=px_per_m,
    )


def plaster(
    rng: np.random.Generator,
    *,
    width_m: float,
    height_m: float,
    px_per_m: float,
    colour: Vector,
    under: Relief | None = None,
    loss: float = 0.0,
    stain: float = 0.3,
    bump_m: float = 0.004,
) -> Relief:
    """Return old plaster: trowel marks, hair cracks, stains; patches fallen off show `under`.

    loss 0..1 : about that share of the plaster is gone (needs `under` of the same shape).
    """
    shape = (round(height_m * px_per_m), round(width_m * px_per_m))
    px = px_per_m
    wide = noise(rng, shape, largest_px=0.8 * px, smallest_px=0.02 * px, roughness=1.2)
    swell = noise(rng, shape, largest_px=0.8 * px, smallest_px=0.08 * px, roughness=1.6)
    trowel = noise(rng, shape, largest_px=0.2 * px, smallest_px=2, stretch=0.35)
    fine = noise(rng, shape, largest_px=8, smallest_px=2, roughness=0.4)
    vein = noise(rng, shape, largest_px=0.7 * px, smallest_px=3, roughness=1.25)
    crack = 1 - smoothstep(0.004, 0.018, np.abs(vein - 0.9))
    albedo = np.asarray(colour, np.float32) * (
        1 + 0.07 * wide + 0.05 * trowel + 0.035 * fine - 0.4 * crack
    )[..., None].astype(np.float32)
    height = bump_m * (0.7 * swell + 0.05 * trowel + 0.015 * fine) - 0.003 * crack
    albedo = weathered(rng, albedo, px, stain)
    if under is not None and loss > 0:
        patch = noise(rng, shape, largest_px=1.2 * px, smallest_px=0.03 * px, roughness=1.7)
        line = float(np.quantile(patch, 1 - loss))
        gone = smoothstep(line, line + 0.03, patch + 0.015 * fine + 0.02 * trowel)
        rim = smoothstep(line - 0.12, line, patch) * (1 - gone)
        albedo = mix(albedo * (1 + 0.1 * rim)[..., None], under.albedo, gone)
        height = (1 - gone) * (height + 0.018) + gone * (under.height_m - 0.004)
    return Relief(
        albedo=np.clip(albedo, 0.01, 0.92).astype(np.float32),
        height_m=height.astype(np.float32),
        px_per_m=px,
    )


def planks(
    rng: np.random.Generator,
    *,
    width_m: float,
    height_m: float,
    px_per_m: float,
    plank_m: float,
    palette: Sequence[Vector],
    gap_m: float = 0.004,
    worn: float = 0.3,
    paint: Vector | None = None,
) -> Relief:
    """Return upright boards with grain and knots; with `paint`, flaked by the share `worn`."""
    shape = (round(height_m * px_per_m), round(width_m * px_per_m))
    px = px_per_m
    x = np.broadcast_to(np.arange(shape[1]) / px, shape)
    board = (x / plank_m).astype(int)
    count = int(board.max()) + 1
    within = x - board * plank_m
    edge = np.minimum(within, plank_m - within)
    # Boards must not share their grain: each reads the noise from its own place.
    shift = rng.integers(0, shape[0], count)
    rows = (np.arange(shape[0])[:, None] + shift[board]) % shape[0]
    columns = np.broadcast_to(np.arange(shape[1]), shape)
    grain = noise(rng, shape, largest_px=0.03 * px, smallest_px=2, stretch=0.04, roughness=0.7)
    wide = noise(rng, shape, largest_px=0.1 * px, smallest_px=3, stretch=0.12)
    bend = noise(rng, shape, largest_px=0.3 * px, smallest_px=8, stretch=0.3, roughness=1.5)
    rings = np.sin(60 * (within / plank_m) + 5 * bend[rows, columns])
    grain = 0.7 * grain[rows, columns] + 0.5 * rings
    wide = wide[rows, columns]
    tone: Array = np.asarray(palette, np.float32)[rng.integers(0, len(palette), count)]
    tone = tone * (1 + 0.12 * rng.normal(0, 1, (count, 1)))
    albedo = tone[board] * (1 + 0.13 * grain + 0.14 * wide)[..., None]
    height = 0.0006 * grain + rng.normal(0, 0.0012, count)[board]
    if paint is not None:
        flake = noise(rng, shape, largest_px=0.15 * px, smallest_px=2, stretch=0.4, roughness=0.9)
        flake = flake + 0.5 * grain
        line = float(np.quantile(flake, worn))
        left = smoothstep(line, line + 0.15, flake)
        coat = np.asarray(paint) * (1 + 0.05 * wide + 0.03 * grain)[..., None]
        albedo = mix(albedo, coat, left)
        height = height * (1 - 0.5 * left) + 0.0005 * left
    gap = 1 - smoothstep(gap_m / 2, gap_m / 2 + 0.003, edge)
    albedo = albedo * (1 - 0.85 * gap)[..., None]
    return Relief(
        albedo=np.clip(albedo, 0.008, 0.92).astype(np.float32),
        height_m=(height - 0.008 * gap).astype(np.float32),
        px_per_m=px,
    )


def relief_mesh(
    relief: Relief,
    *,
    corner_m: Vector,
    right: Vector,
    up: Vector,
    cell_m: float,
    keep: Callable[[Array, Array], Array] | None = None,
) -> Mesh:
    """Return the relief as a displaced grid of cells; heights go along right x up.

    corner_m : where its lower left corner is; right, up : directions, of length one.
    keep : given metres from that corner to the right and up, (N,) each, says which cells
    stay; this is how openings are cut. Use the relief's albedo as `matte(bitmap(...))`.
    """
    width_m, height_m = relief.size_m
    columns, rows = max(round(width_m / cell_m), 1) + 1, max(round(height_m / cell_m), 1) + 1
    cell_px = cell_m * relief.px_per_m
    h = relief.height_m
    if cell_px > 1.5:
        h = ndimage.gaussian_filter(h, cell_px * 0.35)
    v, u = np.meshgrid(np.linspace(1, 0, rows), np.linspace(0, 1, columns), indexing="ij")
    at = [(1 - v) * (h.shape[0] - 1), u * (h.shape[1] - 1)]
    z = ndimage.map_coordinates(h, at, order=1, mode="nearest")
    r, w = np.asarray(right, float), np.asarray(up, float)
    p = (
        np.asarray(corner_m, float)
        + (u * width_m)[..., None] * r
        + (v * height_m)[..., None] * w
        + z[..., None] * np.cross(r, w)
    )
    faces = grid_faces(rows, columns)[:, ::-1]  # rows go down, so turn the faces outwards
    uv = np.stack([u, 1 - v], -1).reshape(-1, 2)
    if keep is not None:
        centre_u = uv[faces, 0].mean(axis=1) * width_m
        centre_v = (1 - uv[faces, 1].mean(axis=1)) * height_m
        faces = faces[keep(centre_u, centre_v)]
    return Mesh(vertices=p.reshape(-1, 3), faces=faces, uv=uv)


# --- materials (Mitsuba dictionaries) and light ------------------------------------------


def bitmap(albedo: Array, *, repeat_m: float | None = None) -> dict[str, Any]:
    """Return a texture of a linear (H, W, 3) array; row 0 is at v = 0 (see `relief_mesh`).

    repeat_m : for uv given in metres, the size after which the picture repeats.
    """
    picture = mi.Bitmap(np.ascontiguousarray(albedo, np.float32))
    texture: dict[str, Any] = {"type": "bitmap", "bitmap": picture, "raw": True}
    if repeat_m is not None:
        texture["to_uv"] = mi.ScalarTransform4f().scale([1 / repeat_m, 1 / repeat_m, 1])
    return texture


def vertex_colour() -> dict[str, Any]:
    """Return the texture that reads a mesh's own `colour`."""
    return {"type": "mesh_attribute", "name": "vertex_color"}


def colour_of(colour: Vector | dict[str, Any]) -> dict[str, Any]:
    """Return a texture as it is, and an RGB triple as a plain colour."""
    if isinstance(colour, dict):
        return colour
    return {"type": "rgb", "value": [float(c) for c in colour]}


def matte(colour: Vector | dict[str, Any]) -> dict[str, Any]:
    """Return a dull two-sided material; colour: linear RGB or a texture."""
    return {"type": "twosided", "bsdf": {"type": "diffuse", "reflectance": colour_of(colour)}}


def glossy(
    colour: Vector | dict[str, Any], *, roughness: float = 0.35, specular: float = 0.5
) -> dict[str, Any]:
    """Return a two-sided material with a sheen: paint, glaze, polished wood, wet stone."""
    return {
        "type": "twosided",
        "bsdf": {
            "type": "principled",
            "base_color": colour_of(colour),
            "roughness": roughness,
            "specular": specular,
        },
    }


def metal(colour: Vector | dict[str, Any], *, roughness: float = 0.35) -> dict[str, Any]:
    """Return bare metal of a colour."""
    return {
        "type": "twosided",
        "bsdf": {
            "type": "principled",
            "base_color": colour_of(colour),
            "roughness": roughness,
            "metallic": 1.0,
        },
    }


def glass(colour: Vector = (0.02, 0.025, 0.03)) -> dict[str, Any]:
    """Return a window pane over a dark room: opaque and mirror-like, so its distance is exact."""
    return {
        "type": "twosided",
        "bsdf": {
            "type": "plastic",
            "diffuse_reflectance": colour_of(colour),
            "int_ior": 1.52,
        },
    }


def solid(mesh: Mesh, material: dict[str, Any], *, smooth: bool = False) -> Any:
    """Return a Mitsuba shape of a mesh; smooth : shade it as a rounded surface."""
    properties = mi.Properties()
    properties["bsdf"] = mi.load_dict(material)
    shape = mi.Mesh(
        "mesh",
        vertex_count=len(mesh.vertices),
        face_count=len(mesh.faces),
        has_vertex_normals=smooth,
        has_vertex_texcoords=mesh.uv is not None,
        props=properties,
    )
    if mesh.colour is not None:
        colour = np.ascontiguousarray(mesh.colour, np.float32).ravel()
        shape.add_attribute("vertex_color", 3, colour)  # type: ignore[arg-type]
    values = mi.traverse(shape)
    values["vertex_positions"] = mi.Float(np.ascontiguousarray(mesh.vertices, np.float32).ravel())
    values["faces"] = mi.UInt32(np.ascontiguousarray(mesh.faces, np.uint32).ravel())
    if mesh.uv is not None:
        values["vertex_texcoords"] = mi.Float(np.ascontiguousarray(mesh.uv, np.float32).ravel())
    values.update()
    return shape


def direction(azimuth_deg: float, elevation_deg: float) -> Array:
    """Return the unit vector at an azimuth (0 = +y, 90 = +x) and elevation."""
    a, e = np.radians([azimuth_deg, elevation_deg])
    return np.array([np.sin(a) * np.cos(e), np.cos(a) * np.cos(e), np.sin(e)])


def sky_and_sun(
    rng: np.random.Generator,
    *,
    sun_azimuth_deg: float,
    sun_elevation_deg: float,
    sun: Vector = (1.0, 0.91, 0.78),
    sun_radius_deg: float = 0.3,
    zenith: Vector = (0.055, 0.13, 0.34),
    horizon: Vector = (0.42, 0.50, 0.60),
    clouds: float = 0.5,
    cloud_light: float = 0.75,
    columns: int = 4096,
) -> dict[str, Any]:
    """Return the emitters: a sky with soft clouds all round, and a sun far away.

    sun : what a white sheet facing the sun sends back of the sun's light alone, so 1.0 is
    white; sky colours are on the same scale. clouds 0..1 : share of the sky they take.
    """
    rows = columns // 2
    polar = (np.arange(rows)[:, None] + 0.5) / rows * np.pi
    azimuth = (np.arange(columns)[None, :] + 0.5) / columns * 2 * np.pi
    up = np.cos(polar) * np.ones_like(azimuth)
    east, north = np.sin(polar) * np.sin(azimuth), np.sin(polar) * np.cos(azimuth)
    s = direction(sun_azimuth_deg, sun_elevation_deg)
    toward = np.clip(east * s[0] + north * s[1] + up * s[2], -1, 1)
    sky = mix(horizon, zenith, np.clip(up, 0, 1) ** 0.45)
    glow = 0.5 * np.exp(-np.arccos(toward) / 0.22) + 0.12 * np.exp(-np.arccos(toward) / 0.8)
    sky = sky + glow[..., None] * np.array([1.0, 0.93, 0.8])
    # Clouds lie on a flat layer, so that they shrink and close up towards the horizon.
    size = 1024
    cover = noise(rng, (size, size), largest_px=300, smallest_px=3, roughness=1.8)
    detail = noise(rng, (size, size), largest_px=40, smallest_px=2, roughness=1.1)
    layer = cover + 0.09 * detail
    reach = 1.0 / (np.clip(up, 0.0, 1) + 0.13)
    cx, cy = east * reach * 130 + 200, north * reach * 130 + 500
    amount = ndimage.map_coordinates(layer, [cy, cx], order=1, mode="grid-wrap")
    line = float(np.quantile(layer, 1 - clouds))
    dense = smoothstep(line - 0.15, line + 1.3, amount)
    toward_sun = ndimage.map_coordinates(
        ndimage.gaussian_filter(layer, 6, mode="wrap"),
        [cy + 9 * s[1], cx + 9 * s[0]],
        order=1,
        mode="grid-wrap",
    )
    shade = np.clip(0.86 + 0.22 * (amount - toward_sun) - 0.2 * dense**2, 0.45, 1.15)
    lit = cloud_light * shade[..., None] * np.array([1.0, 0.97, 0.93])
    fade = smoothstep(0.0, 0.10, up)
    sky = sky * (1 - 0.92 * (dense * fade)[..., None]) + lit * (0.92 * dense * fade)[..., None]
    sky = mix(sky, np.array([0.2, 0.18, 0.15]), smoothstep(0.0, 0.03, -up))
    turn = mi.ScalarTransform4f().rotate([1, 0, 0], 90)
    away_m = 20_000.0
    radius_m = float(away_m * np.tan(np.radians(sun_radius_deg)))
    radiance = np.asarray(sun, float) * (away_m / radius_m) ** 2
    disk = mi.ScalarTransform4f().look_at(
        origin=[float(c) for c in s * away_m], target=[0, 0, 0], up=[0.123, 0.3, 0.9]
    )
    return {
        "sky": {
            "type": "envmap",
            "bitmap": mi.Bitmap(np.ascontiguousarray(sky, np.float32)),
            "to_world": turn,
        },
        "sun": {
            "type": "disk",
            "to_world": disk @ mi.ScalarTransform4f().scale([radius_m, radius_m, 1]),
            "emitter": {"type": "area", "radiance": {"type": "rgb", "value": list(radiance)}},
        },
    }


# --- rendering ---------------------------------------------------------------------------


@dataclasses.dataclass(frozen=True, kw_only=True)
class Shot:
    """One picture: where the camera stands, how wide it sees, how it is exposed.

    The camera should be level (target at the eye's height) if uprights are to stay upright.
    exposure : factor before the tone curve; noise_kept 0..1 : share of the render's own
    grain that stays after denoising.
    """

    name: str
    place: str
    eye_m: tuple[float, float, float]
    target_m: tuple[float, float, float]
    horizontal_view_deg: float
    ev: float
    step_mm: int = 1
    width_px: int = 2400
    height_px: int = 1600
    exposure: float = 1.0
    knee: float = 0.8
    white: float = 1.5
    samples: int = 96
    bounces: int = 5
    noise_kept: float = 0.06
    jpeg_quality: int = 92


def tone(light: Array, *, exposure: float, knee: float, white: float) -> Array:
    """Return sRGB 0..1 (IEC 61966-2-1) of linear light; straight to `knee`, 1.0 from `white` on.

    Between, a power curve meets the straight part with the same slope.
    """
    x = np.clip(light * exposure, 0, white)
    power = (white - knee) / (1 - knee)
    t = np.clip((x - knee) / (white - knee), 0, 1)
    x = np.where(x < knee, x, 1 - (1 - knee) * (1 - t) ** power)
    encoded = np.where(x <= 0.0031308, 12.92 * x, 1.055 * np.maximum(x, 1e-9) ** (1 / 2.4) - 0.055)
    return np.asarray(np.clip(encoded, 0, 1), np.float32)


def start_mitsuba() -> None:
    """Choose the fast variant of Mitsuba, or say what it lacks."""
    mi.set_variant("llvm_ad_rgb")
    try:
        dr.eval(mi.Float([1.0, 2.0]) + 1)
    except Exception as error:
        raise SystemExit(
            f"Mitsuba needs LLVM (Debian: apt-get install libllvm19): {error}"
        ) from error


def render_light(scene: Any, shot: Shot, *, samples: int, minutes: float) -> Array:
    """Return denoised linear light (H, W, 3), float32; no new pass begins after `minutes`."""
    shape = (shot.height_px, shot.width_px)
    # One pass must fit in memory: about 16 million paths at a time.
    per_pass = max(1, min(samples, int(1.6e7 / (shape[0] * shape[1]))))
    passes = max(1, round(samples / per_pass))
    total: Array | None = None
    done = 0
    begun = time.time()
    for k in range(passes):
        part = np.array(mi.render(scene, spp=per_pass, seed=mi.UInt32(k)), np.float32)
        part[..., :3] = np.minimum(np.nan_to_num(part[..., :3]), 40.0)  # stray sparks
        total = part if total is None else total + part
        done = k + 1
        print(f"  pass {done} of {passes}, {time.time() - begun:.0f} s", flush=True)
        if time.time() - begun > 60 * minutes:
            break
    assert total is not None
    image = total / done
    colour, albedo, normal = image[..., :3], image[..., -6:-3], image[..., -3:]
    clean = pyoidn.denoise(
        np.ascontiguousarray(colour),
        albedo=np.ascontiguousarray(np.clip(albedo, 0, 1)),
        normal=np.ascontiguousarray(normal),
        hdr=True,
    )
    grain = np.clip(colour - clean, -0.5 * clean, 0.5 * clean)
    return np.asarray(clean + shot.noise_kept * grain, np.float32)


def view_distance_m(scene: Any, shot: Shot) -> Array:
    """Return distance along the axis of view (H, W) at pixel centres; inf where there is sky."""
    sensor = scene.sensors()[0]
    w, h = shot.width_px, shot.height_px
    axis = np.asarray(shot.target_m, float) - np.asarray(shot.eye_m, float)
    axis /= np.linalg.norm(axis)
    index = dr.arange(mi.UInt32, w * h)
    at = mi.Point2f((mi.Float(index % w) + 0.5) / w, (mi.Float(index // w) + 0.5) / h)
    ray, _ = sensor.sample_ray(0.0, 0.5, at, mi.Point2f(0.5))
    hit = scene.ray_intersect_preliminary(ray)
    # Rays start on the near plane, so measure from the eye itself.
    valid = np.array(hit.is_valid())
    p = np.array(ray(dr.select(hit.is_valid(), hit.t, 0.0))).reshape(3, -1)
    z = (p - np.asarray(shot.eye_m, float)[:, None]).T @ axis
    return np.where(valid, z, np.inf).reshape(h, w)


def distance_codes(distance_m: Array, *, step_mm: int) -> Array:
    """Return uint16 codes, code x step = distance on a relative grid; 0 = infinitely far."""
    reach = np.isfinite(distance_m) & (distance_m > 0)
    log = np.log(np.where(reach, distance_m, 1.0)) / np.log1p(DISTANCE_GRID)
    code = np.rint(np.exp(np.rint(log) * np.log1p(DISTANCE_GRID)) * 1000 / step_mm)
    return np.where(reach & (code <= 65535), code, 0).astype(np.uint16)


def write_png16(path: Path, codes: Array) -> None:
    """Write a one-channel 16-bit PNG (ISO/IEC 15948), with whichever row filter packs best."""
    h, w = codes.shape
    rows = codes.astype(">u2").view(np.uint8).reshape(h, w * 2)
    left = np.zeros_like(rows)
    left[:, 2:] = rows[:, :-2]
    above = np.zeros_like(rows)
    above[1:] = rows[:-1]
    filters = {0: rows, 1: rows - left, 2: rows - above}  # bytes, modulo 256
    packed = min(
        (
            zlib.compress(np.insert(body, 0, kind, axis=1).tobytes(), 9)
            for kind, body in filters.items()
        ),
        key=len,
    )

    def chunk(name: bytes, data: bytes) -> bytes:
        check = zlib.crc32(name + data)
        return struct.pack(">I", len(data)) + name + data + struct.pack(">I", check)

    header = struct.pack(">IIBBBBB", w, h, 16, 0, 0, 0, 0)
    path.write_bytes(
        b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", header) + chunk(b"IDAT", packed) + chunk(b"IEND", b"")
    )


def write_photo(path: Path, srgb: Array, *, quality: int) -> None:
    """Write sRGB 0..1 (H, W, 3) as a JPEG with full colour resolution and an sRGB profile."""
    profile = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()
    picture = Image.fromarray((srgb * 255 + 0.5).astype(np.uint8))
    picture.save(path, quality=quality, subsampling=0, optimize=True, icc_profile=profile)


def write_scene(path: Path, shot: Shot) -> None:
    """Write scene.toml."""
    path.write_text(
        f"# {shot.place}\n"
        'photo = "photo.jpg"\n'
        f'horizontal_view = "{shot.horizontal_view_deg:g} deg"\n'
        'projection = "rectilinear"\n'
        "[distance]\n"
        'map = "distance.png"\n'
        f'step = "{shot.step_mm} mm"\n'
        'holes = "far"\n'
        "[light]\n"
        f"ev = {shot.ev:g}          # scene average, ISO 100\n",
        encoding="ascii",
    )


def make_scene(objects: dict[str, Any], shot: Shot) -> Any:
    """Return the Mitsuba scene of the objects, seen as the shot says."""
    camera = {
        "type": "perspective",
        "fov": shot.horizontal_view_deg,
        "fov_axis": "x",
        "near_clip": 0.02,
        "far_clip": 1e5,
        "to_world": mi.ScalarTransform4f().look_at(
            origin=list(shot.eye_m), target=list(shot.target_m), up=[0, 0, 1]
        ),
        "film": {
            "type": "hdrfilm",
            "width": shot.width_px,
            "height": shot.height_px,
            "pixel_format": "rgb",
            "rfilter": {"type": "box"},  # a wider one ties pixels together and defeats denoising
        },
        "sampler": {"type": "independent"},
    }
    light = {"type": "path", "max_depth": shot.bounces, "rr_depth": 3}
    integrator = {"type": "aov", "aovs": "albedo:albedo,normal:sh_normal", "light": light}
    return mi.load_dict({"type": "scene", "integrator": integrator, "camera": camera, **objects})


def run(shot: Shot, build: Callable[[bool], dict[str, Any]]) -> None:
    """Make one scene from the command line: build, render, denoise, write the three files.

    build : given whether this is a draft, returns Mitsuba shapes and emitters by name.
    """
    parser = argparse.ArgumentParser(description=shot.place)
    parser.add_argument("--draft", action="store_true", help="small and quick, to look at")
    parser.add_argument("--out", type=Path, default=SCENES / shot.name, help="folder to write")
    parser.add_argument("--width", type=int, help="pixels; the height follows")
    parser.add_argument("--spp", type=int, help="paths for each pixel")
    parser.add_argument("--minutes", type=float, default=1e9, help="stop adding paths after this")
    parser.add_argument("--linear", type=Path, help="also keep the linear light as .npy here")
    parser.add_argument("--retone", type=Path, help="write the photo again from such a file only")
    args = parser.parse_args()
    args.out.mkdir(parents=True, exist_ok=True)
    photo = args.out / "photo.jpg"
    if args.retone is not None:
        light = np.load(args.retone)
    else:
        width = args.width or (600 if args.draft else shot.width_px)
        height = round(width * shot.height_px / shot.width_px)
        sized = dataclasses.replace(shot, width_px=width, height_px=height)
        begun = time.time()
        start_mitsuba()
        scene = make_scene(build(args.draft), sized)
        print(f"built in {time.time() - begun:.0f} s", flush=True)
        distance_m = view_distance_m(scene, sized)
        codes = distance_codes(distance_m, step_mm=shot.step_mm)
        write_png16(args.out / "distance.png", codes)
        near, far = np.min(distance_m), int(codes.max()) * shot.step_mm / 1000
        print(
            f"nearest {near:.2f} m, farthest coded {far:.1f} m, {np.mean(codes == 0):.1%} infinite"
        )
        samples = args.spp or (12 if args.draft else shot.samples)
        light = render_light(scene, sized, samples=samples, minutes=args.minutes)
        if args.linear is not None:
            np.save(args.linear, light)
    srgb = tone(light, exposure=shot.exposure, knee=shot.knee, white=shot.white)
    write_photo(photo, srgb, quality=shot.jpeg_quality)
    write_scene(args.out / "scene.toml", shot)
    clipped = float(np.mean((srgb > 0.998).any(axis=2)))
    print(f"median {np.median(srgb):.2f} sRGB, {clipped:.1%} of pixels reach white in a channel")
