"""Pieces of old buildings and gardens that more than one outdoor scene uses.

Openings, arches, windows and tiles are made in the plane y = 0 with their front towards -y.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from typing import Any

import common as c
import mitsuba as mi
import numpy as np
from common import Array, Mesh

Objects = dict[str, Any]


def shifted(rng: np.random.Generator, mesh: Mesh) -> Mesh:
    """Return the mesh with its uv moved at random, so that equal stones do not look equal."""
    assert mesh.uv is not None
    return dataclasses.replace(mesh, uv=mesh.uv + rng.uniform(0, 5, 2))


def stone_tile(rng: np.random.Generator, colour: Sequence[float], *, px: int = 1024) -> Array:
    """Return a tileable (px, px, 3) albedo of hewn stone."""
    wide = c.noise(rng, (px, px), largest_px=px / 2, smallest_px=6, roughness=1.3)
    mid = c.noise(rng, (px, px), largest_px=px / 12, smallest_px=2, roughness=0.9)
    fine = c.noise(rng, (px, px), largest_px=8, smallest_px=2, roughness=0.3)
    pits = c.smoothstep(1.4, 2.3, mid)
    albedo = np.asarray(colour) * (1 + 0.13 * wide + 0.1 * mid + 0.07 * fine)[..., None]
    albedo = albedo * (1 - 0.45 * pits)[..., None]
    lichen = c.smoothstep(1.5, 1.9, wide + 0.5 * mid)
    albedo = c.mix(albedo, (0.40, 0.38, 0.27), 0.5 * lichen)
    return np.asarray(np.clip(albedo, 0.01, 0.9), np.float32)


def arch_outline(half_m: float, spring_m: float, *, points: int = 25) -> Array:
    """Return a round arch (n, 2) from its right foot over the crown to its left foot."""
    a = np.linspace(0, np.pi, points)
    curve = np.column_stack([half_m * np.cos(a), spring_m + half_m * np.sin(a)])
    return np.vstack([[half_m, 0.0], curve, [-half_m, 0.0]])


def in_arch(u: Array, v: Array, half_m: float, spring_m: float) -> Array:
    """Return whether a point is in an arch standing on v = 0 with its middle at u = 0."""
    return np.asarray((np.abs(u) < half_m) & (np.hypot(u, np.maximum(v - spring_m, 0)) < half_m))


def voussoirs(
    rng: np.random.Generator, half_m: float, spring_m: float, *, deep_m: float, out_m: float
) -> Mesh:
    """Return the ring and jambs of an arch in the plane y = 0, standing out by `out_m`."""
    stones = []
    count = 15
    edges = np.linspace(0, np.pi, count + 1)
    for k in range(count):
        a0, a1 = edges[k] + 0.012, edges[k + 1] - 0.012
        wide = deep_m * (1.3 if k == count // 2 else rng.uniform(0.95, 1.05))
        ring = [
            (r * np.cos(a), spring_m + r * np.sin(a))
            for r, a in (
                (half_m, a0),
                (half_m + wide, a0),
                (half_m + wide, a1),
                (half_m, (a0 + a1) / 2),
            )
        ]
        ring.insert(3, (half_m * np.cos(a1), spring_m + half_m * np.sin(a1)))
        o = out_m + rng.normal(0, 0.006)
        stones.append(shifted(rng, c.place(c.prism(np.array(ring), o + 0.1), (0, -o, 0))))
    for side in (-1, 1):
        z = 0.0
        while z < spring_m - 0.02:
            tall = min(rng.uniform(0.26, 0.42), spring_m - z)
            if spring_m - z - tall < 0.15:
                tall = spring_m - z
            wide = deep_m * rng.choice([0.85, 1.3])
            o = out_m + rng.normal(0, 0.006)
            block = c.box((wide, o + 0.1, tall - 0.012), bevel_m=0.012)
            at = (side * (half_m + wide / 2), (0.1 - o) / 2, z + tall / 2)
            stones.append(shifted(rng, c.place(block, at)))
            z += tall
    return c.merge(stones)


def reveal(outline_m: Array, depth_m: float) -> Mesh:
    """Return the inside of an opening: an outline (n, 2) in x and z, drawn back along +y."""
    y = np.array([0.0, depth_m])
    p = np.empty((2, len(outline_m), 3))
    p[..., 0], p[..., 2] = outline_m[:, 0], outline_m[:, 1]
    p[..., 1] = y[:, None]
    mesh = c.sheet(p)
    run = np.concatenate([[0], np.cumsum(np.linalg.norm(np.diff(outline_m, axis=0), axis=1))])
    uv = np.stack(np.meshgrid(run, y), -1).reshape(-1, 2)
    return dataclasses.replace(mesh, uv=uv)


def tiles(
    rng: np.random.Generator, first_m: Array, last_m: Array, out: Array, *, radius_m: float = 0.085
) -> Mesh:
    """Return a row of round roof tiles between two points, each pointing along `out` (metres)."""
    count = int(np.linalg.norm(last_m - first_m) / (2.15 * radius_m))
    t = (np.arange(count) + 0.5) / count
    start = first_m + (last_m - first_m) * t[:, None] + rng.normal(0, 0.008, (count, 3))
    paths = start[:, None] + np.array([0.0, 1.0])[None, :, None] * out
    paths = paths + rng.normal(0, 0.006, (count, 1, 3))
    radii = np.full((count, 2), radius_m) * [1.0, 0.85]
    mesh = c.tubes(paths, radii, sides=14)
    tone = np.array([0.42, 0.19, 0.10]) * (1 + 0.2 * rng.normal(0, 1, (count, 1)))
    tone = tone + np.array([0.05, 0.05, 0.05]) * rng.random((count, 1))
    return mesh.painted(np.clip(np.repeat(tone, len(mesh.vertices) // count, axis=0), 0.03, 0.8))


def window(
    rng: np.random.Generator, width_m: float, height_m: float, *, open_deg: float
) -> tuple[Mesh, Mesh, Mesh]:
    """Return frame, panes and louvred shutters of a window in y = 0, its sill at z = 0."""
    frame, panes, shutters = [], [], []
    bar = 0.055
    for x in (-width_m / 2 + bar / 2, 0, width_m / 2 - bar / 2):
        frame.append(c.place(c.box((bar, 0.05, height_m)), (x, 0.10, height_m / 2)))
    for k in range(5):
        z = bar / 2 + (height_m - bar) * k / 4
        thick = bar if k in (0, 4) else 0.022
        frame.append(c.place(c.box((width_m, 0.04, thick)), (0, 0.10, z)))
    panes.append(c.place(c.box((width_m, 0.004, height_m)), (0, 0.115, height_m / 2)))
    leaf_m = width_m / 2
    for side in (-1, 1):
        parts = []
        for x in (0.03, leaf_m - 0.03):
            parts.append(c.place(c.box((0.06, 0.035, height_m)), (x, 0, height_m / 2)))
        for z in (0.04, height_m * 0.5, height_m - 0.04):
            parts.append(c.place(c.box((leaf_m, 0.033, 0.08)), (leaf_m / 2, 0, z)))
        slats = int((height_m - 0.16) / 0.042)
        slat = c.box((leaf_m - 0.11, 0.05, 0.008))
        for k in range(slats):
            tip = c.rotation((1, 0, 0), -38 + rng.normal(0, 2.0))
            z = 0.1 + k * 0.042
            parts.append(c.place(slat, (leaf_m / 2, 0, z), turn=tip))
        leafs = c.merge(parts)
        angle = open_deg + rng.normal(0, 5)
        # The leaf hangs on the outer edge and swings out towards -y.
        if side < 0:
            turn, hinge = c.rotation((0, 0, 1), -(180 - (180 - angle))), -width_m / 2
            shutters.append(c.place(leafs, (hinge, -0.03, 0), turn=turn))
        else:
            mirrored = c.place(leafs, (0, 0, 0), turn=c.rotation((0, 0, 1), 180))
            turn = c.rotation((0, 0, 1), angle)
            shutters.append(c.place(mirrored, (width_m / 2, -0.03, 0), turn=turn))
    return c.merge(frame), c.merge(panes), c.merge(shutters)


POT = np.array(
    [
        [0.0, 0.0],
        [0.62, 0.0],
        [0.66, 0.03],
        [0.86, 0.72],
        [0.90, 0.74],
        [1.0, 0.75],
        [1.01, 0.86],
        [1.0, 0.97],
        [0.97, 1.0],
        [0.90, 1.0],
        [0.86, 0.95],
        [0.84, 0.9],
        [0.0, 0.88],
    ]
)


def terracotta(rng: np.random.Generator) -> Objects:
    """Return the material of flower pots: fired clay with lime bloom and tide marks."""
    px = 1024
    mid = c.noise(rng, (px, px), largest_px=200, smallest_px=3, roughness=1.2)
    fine = c.noise(rng, (px, px), largest_px=20, smallest_px=2, roughness=0.5)
    rings = c.noise(rng, (px, px), largest_px=60, smallest_px=2, stretch=14.0)
    albedo = np.array([0.47, 0.21, 0.11]) * (1 + 0.1 * mid + 0.05 * fine)[..., None]
    albedo = c.mix(albedo, (0.56, 0.47, 0.38), 0.6 * c.smoothstep(0.3, 2.2, mid + 0.5 * fine))
    albedo = c.mix(albedo, (0.16, 0.14, 0.09), 0.6 * c.smoothstep(1.0, 2.4, -mid + 0.4 * rings))
    picture = c.bitmap(np.clip(albedo, 0.01, 0.9))
    picture["to_uv"] = mi.ScalarTransform4f().scale([1, 1.6, 1])
    return c.matte(picture)


def bush(
    rng: np.random.Generator,
    *,
    stems: int,
    leaves: int,
    reach_m: float,
    leaf_m: float,
    greens: Array,
    near: bool = False,
) -> tuple[Mesh, Mesh, Array]:
    """Return stems, painted leaves and stem tips (K, 3) of a leafy plant at the origin.

    near : leaves with veins and waves, for a plant within a metre or so.
    """
    points = 7
    heading = rng.normal(0, 1, (stems, 3)) * [0.55, 0.55, 0.1] + [0, 0, 1]
    heading /= np.linalg.norm(heading, axis=1, keepdims=True)
    length = reach_m * rng.uniform(0.55, 1.0, stems)
    p = np.zeros((stems, points, 3))
    p[:, 0] = rng.normal(0, 0.12 * reach_m, (stems, 3)) * [1, 1, 0]
    d = heading
    for k in range(1, points):
        d = d + rng.normal(0, 0.13, d.shape) + [0, 0, -0.03]
        d /= np.linalg.norm(d, axis=1, keepdims=True)
        p[:, k] = p[:, k - 1] + d * (length / (points - 1))[:, None]
    stalk = c.tubes(p, np.full((stems, points), 0.012 * reach_m) * np.linspace(1, 0.4, points))
    which = rng.integers(0, stems, leaves)
    s = rng.uniform(0.15, 1.0, leaves) ** 0.7 * (points - 1.001)
    step = s.astype(int)
    at = p[which, step] + (p[which, step + 1] - p[which, step]) * (s - step)[:, None]
    axis_z = rng.normal(0, 0.5, (leaves, 3)) + np.array([0, 0, 1.0])
    axis_x = rng.normal(0, 1, (leaves, 3)) + 1.5 * (at / reach_m) * [1, 1, 0]
    axis_x += [0, 0, 0.4]
    axis_z /= np.linalg.norm(axis_z, axis=1, keepdims=True)
    axis_x -= (axis_x * axis_z).sum(1, keepdims=True) * axis_z
    axis_x /= np.linalg.norm(axis_x, axis=1, keepdims=True)
    turns = np.stack([axis_x, np.cross(axis_z, axis_x), axis_z], -1)
    tone = greens[rng.integers(0, len(greens), leaves)] * rng.uniform(0.7, 1.3, (leaves, 1))
    shape = c.leaf(leaf_m, leaf_m * 0.52, fold=0.35, droop=0.35)
    veins = np.ones((len(shape.vertices), 1))
    if near:
        shape, veins = veined_leaf(leaf_m, leaf_m * 0.56)
    foliage = c.scatter(shape, at, turns, rng.uniform(0.6, 1.15, leaves), tone)
    assert foliage.colour is not None
    foliage = foliage.painted(foliage.colour * np.tile(veins, (leaves, 1)))
    return stalk, foliage, p[:, -1]


def veined_leaf(length_m: float, width_m: float) -> tuple[Mesh, Array]:
    """Return a leaf along +x with waves and a toothed edge, and the tone (N, 1) of its veins."""
    t, side = np.meshgrid(np.linspace(0, 1, 57), np.linspace(-1, 1, 25))
    half = 0.5 * width_m * np.sin(np.pi * t**0.72) ** 0.85 * (1 - 0.2 * t)
    half = half * (1 + 0.05 * np.abs((t * 16) % 1 - 0.5) * np.abs(side))
    y = side * half
    z = 0.33 * np.abs(y) - 0.3 * length_m * t**2
    z = z + 0.035 * length_m * np.sin(9 * t + 2 * np.sign(side)) * side**2
    slant = (t - 0.42 * np.abs(side) * (1 - 0.4 * t)) * 8
    rib = np.exp(-(((np.abs(slant - np.round(slant))) / 0.10) ** 2)) * (1 - 0.6 * np.abs(side))
    middle = np.exp(-((side / 0.07) ** 2)) * (1 - 0.5 * t)
    z = z + 0.006 * length_m * np.cos(2 * np.pi * slant) * np.abs(side)
    tone = 0.92 + 0.35 * rib + 0.9 * middle - 0.12 * np.abs(side) ** 3
    return c.sheet(np.stack([length_m * t, y, z], -1)), tone.reshape(-1, 1)


def petal(length_m: float, width_m: float) -> Mesh:
    """Return a round, cupped petal along +x."""
    t, side = np.meshgrid(np.linspace(0.02, 1, 15), np.linspace(-1, 1, 13))
    half = 0.5 * width_m * np.sqrt(np.clip(1 - (1.35 * t - 0.5) ** 2 / 0.74, 0.0, 1))
    y = side * half
    z = 0.22 * length_m * t**2 - 0.5 * np.abs(y) * t + 0.05 * length_m * np.sin(5 * side) * t
    return c.sheet(np.stack([length_m * t, y, z], -1))


def foliage() -> Objects:
    """Return the material of leaves: lets some light through, with a soft sheen."""
    return {
        "type": "principledthin",
        "base_color": c.vertex_colour(),
        "roughness": 0.5,
        "diff_trans": 0.7,
        "spec_trans": 0.0,
        "eta": 1.4,
    }
