"""Make the sample scene "courtyard": a walled court in winter sun, from 0.5 m to the horizon.

The camera looks over a stone parapet and an iron railing; an arch opens on fields and hills.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from typing import Any

import common as c
import mitsuba as mi
import numpy as np
import pieces as p
from common import Array, Mesh
from scipy import ndimage

SHOT = c.Shot(
    name="courtyard",
    place="A walled courtyard in low winter sun, an arch open on fields and hills; invented.",
    eye_m=(0.0, 0.0, 2.35),
    target_m=(0.0, 10.0, 2.35),
    horizontal_view_deg=84.0,
    ev=14,
    step_mm=2,
    exposure=1.42,
    samples=48,
)
SUN_AZIMUTH_DEG, SUN_ELEVATION_DEG = -112.0, 37.0
BACK_Y_M, SIDE_X_M = 13.0, 4.5
ARCH_X_M, ARCH_HALF_M, ARCH_SPRING_M = 0.9, 1.25, 1.75
LOGGIA_Y_M = (5.7, 8.3, 10.9)
SANDSTONE = [(0.50, 0.41, 0.28), (0.44, 0.35, 0.24), (0.55, 0.47, 0.34), (0.40, 0.34, 0.26)]
OAK = [(0.22, 0.15, 0.09), (0.27, 0.19, 0.12), (0.19, 0.13, 0.08)]
SHUTTER = (0.10, 0.20, 0.19)
IRON = (0.028, 0.027, 0.027)

Objects = dict[str, Any]
Ground = Callable[[Array, Array], Array]


def onto(mesh: Mesh, wall: str, along_m: float, z_m: float, *, out_m: float = 0.0) -> Mesh:
    """Return a piece made in the plane y = 0 (front to -y) moved onto one of the walls."""
    if wall == "back":
        return c.place(mesh, (along_m, BACK_Y_M - out_m, z_m))
    if wall == "left":
        return c.place(mesh, (-SIDE_X_M + out_m, along_m, z_m), turn=c.rotation((0, 0, 1), 90))
    return c.place(mesh, (SIDE_X_M - out_m, along_m, z_m), turn=c.rotation((0, 0, 1), -90))


def floor(rng: np.random.Generator) -> Objects:
    """Return paving with a cobbled middle, grass in the joints and fallen leaves."""
    px = 300.0
    flags = c.masonry(
        rng,
        width_m=2 * SIDE_X_M,
        height_m=10.0,
        px_per_m=px,
        row_m=(0.42, 0.68),
        length_m=(0.45, 0.95),
        palette=[(0.40, 0.36, 0.30), (0.34, 0.31, 0.27), (0.44, 0.38, 0.30), (0.37, 0.35, 0.33)],
        joint_m=0.022,
        round_m=0.02,
        wobble_m=0.008,
        mortar=(0.17, 0.15, 0.09),
        mortar_depth_m=0.018,
        uneven_m=0.007,
        grain_m=0.0012,
        stain=0.3,
    )
    setts = c.cobbles(
        rng,
        width_m=2 * SIDE_X_M,
        height_m=10.0,
        px_per_m=px,
        stone_m=0.105,
        palette=[(0.30, 0.27, 0.24), (0.25, 0.24, 0.23), (0.36, 0.30, 0.24)],
        dome_m=0.014,
    )
    rows, columns = flags.height_m.shape
    x = (np.arange(columns) / px - SIDE_X_M)[None, :]
    wave = 0.35 * np.sin(np.arange(rows) / px * 0.8)[:, None]
    path = (np.abs(x - ARCH_X_M * 0.6 - wave * 0.3) < 0.95).astype(np.float32)
    kerb = (np.abs(np.abs(x - ARCH_X_M * 0.6 - wave * 0.3) - 0.95) < 0.02).astype(np.float32)
    mixed = c.Relief(
        albedo=c.mix(flags.albedo, setts.albedo, path) * (1 - 0.6 * kerb)[..., None],
        height_m=flags.height_m * (1 - path) + setts.height_m * path - 0.01 * kerb,
        px_per_m=px,
    )
    ground = c.relief_mesh(
        mixed, corner_m=(-SIDE_X_M, 3.2, 0), right=(1, 0, 0), up=(0, 1, 0), cell_m=0.009
    )
    low = np.argwhere(mixed.height_m < np.quantile(mixed.height_m, 0.07))
    pick = low[rng.integers(0, len(low), 26000)]
    wide = c.noise(rng, (rows, columns), largest_px=500, smallest_px=60, roughness=1.4)
    pick = pick[wide[pick[:, 0], pick[:, 1]] > 0.1]
    at = np.column_stack([pick[:, 1] / px - SIDE_X_M, 13.2 - pick[:, 0] / px, np.zeros(len(pick))])
    blade = c.place(c.leaf(0.07, 0.006, fold=0.5, droop=0.45), turn=c.rotation((0, 1, 0), -62))
    spin = rng.uniform(0, 360, len(at))
    turns = np.array([c.rotation((0, 0, 1), a) for a in spin])
    tone = np.array([0.10, 0.15, 0.04]) * rng.uniform(0.6, 1.5, (len(at), 1))
    tone = tone + np.array([0.10, 0.07, 0.02]) * rng.random((len(at), 1))
    grass = c.scatter(blade, at, turns, rng.uniform(0.4, 1.3, len(at)), tone)
    count = 900
    spot = rng.normal(0, 1, (count, 2)) * [2.0, 1.8] + [-0.6, 9.2]
    spot = np.clip(spot, [-4.3, 3.6], [4.3, 12.7])
    edge = rng.random(count) < 0.3
    spot[edge, 0] = np.where(rng.random(edge.sum()) < 0.5, -4.35, 4.3) + rng.normal(
        0, 0.08, edge.sum()
    )
    fallen_at = np.column_stack([spot, np.full(count, 0.028)])
    tip = [
        c.rotation((0, 0, 1), rng.uniform(0, 360))
        @ c.rotation(rng.normal(0, 1, 3) * [1, 1, 0.1], rng.uniform(-25, 25))
        for _ in range(count)
    ]
    browns = np.array([[0.33, 0.17, 0.05], [0.42, 0.26, 0.07], [0.22, 0.11, 0.05]])
    tone = browns[rng.integers(0, 3, count)] * rng.uniform(0.6, 1.3, (count, 1))
    fallen = c.scatter(
        c.leaf(0.085, 0.05, fold=0.35, droop=0.2),
        fallen_at,
        np.array(tip),
        rng.uniform(0.6, 1.3, count),
        tone,
    )
    return {
        "ground": c.solid(ground, c.matte(c.bitmap(mixed.albedo)), smooth=True),
        "grass": c.solid(grass, c.matte(c.vertex_colour())),
        "fallen": c.solid(fallen, c.matte(c.vertex_colour())),
    }


def back_wall(rng: np.random.Generator, stone: Objects, tile_paint: Objects) -> Objects:
    """Return the rubble wall with its arch, gate, tiled top, sundial board and potted trees."""
    tall = 3.05
    wall = c.masonry(
        rng,
        width_m=2 * SIDE_X_M,
        height_m=tall,
        px_per_m=220,
        row_m=(0.13, 0.30),
        length_m=(0.18, 0.55),
        palette=SANDSTONE,
        joint_m=0.02,
        round_m=0.03,
        wobble_m=0.014,
        mortar=(0.40, 0.35, 0.27),
        mortar_depth_m=0.03,
        uneven_m=0.018,
        grain_m=0.003,
        stain=0.3,
    )
    middle = ARCH_X_M + SIDE_X_M
    mesh = c.relief_mesh(
        wall,
        corner_m=(-SIDE_X_M, BACK_Y_M, 0),
        right=(1, 0, 0),
        up=(0, 0, 1),
        cell_m=0.009,
        keep=lambda u, v: ~p.in_arch(u - middle, v, ARCH_HALF_M + 0.02, ARCH_SPRING_M),
    )
    ring = p.voussoirs(rng, ARCH_HALF_M, ARCH_SPRING_M, deep_m=0.34, out_m=0.045)
    inside = p.reveal(p.arch_outline(ARCH_HALF_M, ARCH_SPRING_M), 0.55)
    # A pediment block carries the arch above the wall.
    top = [
        p.tiles(rng, np.array([x0, BACK_Y_M - 0.14, z]), np.array([x1, BACK_Y_M - 0.14, z]), out)
        for x0, x1, z, out in (
            (-SIDE_X_M, ARCH_X_M - 1.75, tall + 0.05, np.array([0, 0.6, 0.16])),
            (ARCH_X_M + 1.75, SIDE_X_M, tall + 0.05, np.array([0, 0.6, 0.16])),
            (ARCH_X_M - 1.85, ARCH_X_M + 1.85, 3.72, np.array([0, 0.75, 0.22])),
        )
    ]
    head = c.masonry(
        rng,
        width_m=3.5,
        height_m=0.62,
        px_per_m=220,
        row_m=(0.18, 0.24),
        length_m=(0.3, 0.6),
        palette=SANDSTONE,
        joint_m=0.016,
        round_m=0.02,
        mortar_depth_m=0.02,
        uneven_m=0.012,
        stain=0.35,
    )
    head_mesh = c.relief_mesh(
        head,
        corner_m=(ARCH_X_M - 1.75, BACK_Y_M - 0.03, tall),
        right=(1, 0, 0),
        up=(0, 0, 1),
        cell_m=0.009,
    )
    ends = [
        c.place(c.box((0.06, 0.6, 0.62)), (ARCH_X_M + s * 1.74, BACK_Y_M + 0.27, tall + 0.31))
        for s in (-1, 1)
    ]
    gate = []
    for side, angle in ((-1, 68), (1, 80)):
        parts = []
        wide = ARCH_HALF_M - 0.03
        for k in range(10):
            x = 0.03 + (wide - 0.04) * k / 9
            h = ARCH_SPRING_M + np.sqrt(max(wide**2 - (wide - x) ** 2, 0)) * 0.93
            parts.append(c.tube(np.array([[x, 0, 0.08], [x, 0, h]]), 0.011, sides=8))
            spear = np.array([[0.0, 0.0], [0.02, 0.03], [0.0, 0.11]])
            parts.append(c.place(c.lathe(spear, sides=8), (x, 0, h)))
        for z in (0.14, 0.95, 1.08, 1.7):
            parts.append(c.place(c.box((wide, 0.014, 0.035)), (wide / 2, 0, z)))
        circle = np.linspace(0, 2 * np.pi, 21)
        for k in range(9):
            x = 0.03 + (wide - 0.04) * (k + 0.5) / 9
            loop = np.column_stack(
                [x + 0.05 * np.cos(circle), 0 * circle, 1.015 + 0.05 * np.sin(circle)]
            )
            parts.append(c.tube(loop, 0.006, sides=6))
        leafs = c.merge(parts)
        turn = c.rotation((0, 0, 1), angle if side < 0 else 180 - angle)
        gate.append(c.place(leafs, (ARCH_X_M + side * (ARCH_HALF_M - 0.02), 13.3, 0.0), turn=turn))
    return {
        "back_wall": c.solid(mesh, c.matte(c.bitmap(wall.albedo)), smooth=True),
        "arch_ring": c.solid(onto(ring, "back", ARCH_X_M, 0), stone),
        "arch_inside": c.solid(onto(inside, "back", ARCH_X_M, 0), stone),
        "arch_head": c.solid(head_mesh, c.matte(c.bitmap(head.albedo)), smooth=True),
        "arch_ends": c.solid(c.merge(ends), stone),
        "wall_tiles": c.solid(c.merge(top), tile_paint, smooth=True),
        "gate": c.solid(c.merge(gate), c.glossy(IRON, roughness=0.45)),
        **sundial(rng),
    }


def sundial(rng: np.random.Generator) -> Objects:
    """Return a painted board with hour lines and a gnomon, on the back wall, left of the arch."""
    px = 500
    h, w = px, int(px * 0.86)
    y, x = np.mgrid[0:h, 0:w] / px
    dx, dy = x - 0.43, y - 0.16
    angle = np.degrees(np.arctan2(dx, dy))
    reach = np.hypot(dx, dy)
    paint = np.ones((h, w), np.float32)
    for k in range(-6, 7):
        thick = 0.006 if k % 3 == 0 else 0.0035
        line = (np.abs(np.sin(np.radians(angle - 13 * k))) * reach < thick / 2) & (dy > 0)
        paint[line & (reach > 0.08) & (reach < (0.66 if k % 3 == 0 else 0.58))] = 0.12
    for r, thick in ((0.58, 0.004), (0.64, 0.009), (0.70, 0.004)):
        paint[(np.abs(reach - r) < thick / 2) & (np.abs(angle) < 80) & (x > 0.06) & (x < 0.8)] = (
            0.12
        )
    step = (np.round((angle + 90) / 2.6) % 2 == 0) & (reach > 0.585) & (reach < 0.635)
    paint[step & (np.abs(angle) < 78)] = 0.14
    border = np.minimum(np.minimum(x, 0.86 - x), np.minimum(y, 1 - y))
    paint[(np.abs(border - 0.03) < 0.006) | (np.abs(border - 0.05) < 0.002)] = 0.3
    disc = np.hypot(dx, dy) < 0.05
    colour = paint[..., None] * np.array([0.72, 0.66, 0.54])
    colour[disc] = (0.62, 0.36, 0.08)
    worn = c.noise(rng, (h, w), largest_px=90, smallest_px=2, roughness=1.0)
    colour = c.mix(colour, (0.42, 0.36, 0.28), 0.75 * c.smoothstep(0.9, 1.9, worn))
    colour = np.asarray(colour * (1 + 0.04 * worn)[..., None], np.float32)
    board = c.sheet(
        np.array([[[-0.43, -0.05, 1.0], [0.43, -0.05, 1.0]], [[-0.43, -0.05, 0], [0.43, -0.05, 0]]])
    )
    frame = [c.place(c.box((0.92, 0.07, 0.04)), (0, -0.035, z)) for z in (-0.015, 1.015)] + [
        c.place(c.box((0.04, 0.07, 1.0)), (x0, -0.035, 0.5)) for x0 in (-0.44, 0.44)
    ]
    rod = c.tube(np.array([[0, -0.05, 0.84], [0.0, -0.34, 0.60]]), 0.008, sides=8)
    stay = c.tube(np.array([[0, -0.05, 0.60], [0.0, -0.33, 0.605]]), 0.005, sides=6)
    x0, z0 = 3.05, 1.35
    return {
        "sundial": c.solid(onto(board, "back", x0, z0, out_m=0.02), c.matte(c.bitmap(colour))),
        "sundial_frame": c.solid(
            onto(c.merge(frame), "back", x0, z0, out_m=0.02), c.matte((0.14, 0.09, 0.05))
        ),
        "gnomon": c.solid(onto(c.merge([rod, stay]), "back", x0, z0, out_m=0.02), c.matte(IRON)),
    }


def loggia(rng: np.random.Generator, stone: Objects, tile_paint: Objects) -> Objects:
    """Return the arcade along the left side, in shade, with its tiled eaves."""
    tall, first = 3.35, 3.2
    brick = c.masonry(
        rng,
        width_m=BACK_Y_M - first,
        height_m=tall,
        px_per_m=260,
        row_m=(0.068, 0.070),
        length_m=(0.225, 0.235),
        running=True,
        palette=[(0.42, 0.20, 0.11), (0.36, 0.16, 0.09), (0.47, 0.26, 0.15), (0.30, 0.14, 0.09)],
        joint_m=0.011,
        round_m=0.005,
        wobble_m=0.004,
        mortar=(0.46, 0.41, 0.33),
        uneven_m=0.005,
        stain=0.35,
    )
    half, spring = 0.98, 1.75

    def solid_part(u: Array, v: Array) -> Array:
        holes = [p.in_arch(u + first - y, v, half + 0.02, spring) for y in LOGGIA_Y_M]
        return np.asarray(~np.any(holes, axis=0))

    mesh = c.relief_mesh(
        brick,
        corner_m=(-SIDE_X_M, first, 0),
        right=(0, 1, 0),
        up=(0, 0, 1),
        cell_m=0.009,
        keep=solid_part,
    )
    rings = c.merge(
        [
            onto(p.voussoirs(rng, half, spring, deep_m=0.22, out_m=0.03), "left", y, 0)
            for y in LOGGIA_Y_M
        ]
    )
    insides = c.merge(
        [onto(p.reveal(p.arch_outline(half, spring), 0.45), "left", y, 0) for y in LOGGIA_Y_M]
    )
    inner = c.plaster(
        rng,
        width_m=BACK_Y_M - first,
        height_m=tall,
        px_per_m=120,
        colour=(0.62, 0.50, 0.34),
        stain=0.5,
    )
    room = c.relief_mesh(
        inner, corner_m=(-7.2, first, 0), right=(0, 1, 0), up=(0, 0, 1), cell_m=0.03
    )
    end = c.relief_mesh(
        inner,
        corner_m=(-7.2, BACK_Y_M, 0),
        right=(1, 0, 0),
        up=(0, 0, 1),
        cell_m=0.03,
        keep=lambda u, v: u < 7.2 - SIDE_X_M,
    )
    flat = c.box((2.75, BACK_Y_M - first, 0.1))
    lid = c.place(flat, (-5.85, (BACK_Y_M + first) / 2, tall + 0.02))
    under = c.place(flat, (-5.85, (BACK_Y_M + first) / 2, -0.05))
    beams = [
        c.place(c.box((2.4, 0.14, 0.18)), (-6.0, y, tall - 0.12)) for y in np.arange(3.6, 13, 0.85)
    ]
    soffit = c.place(c.box((0.9, BACK_Y_M - first, 0.03)), (-4.5, 8.1, tall + 0.035))
    doors = [c.place(c.box((0.06, 1.0, 2.1)), (-7.13, y, 1.05)) for y in (7.2, 10.4)]
    eaves = p.tiles(
        rng,
        np.array([-SIDE_X_M + 0.28, first, tall + 0.12]),
        np.array([-SIDE_X_M + 0.28, BACK_Y_M + 0.3, tall + 0.12]),
        np.array([-1.6, 0, 0.5]),
    )
    rafters = [
        c.place(c.box((0.5, 0.07, 0.09)), (-SIDE_X_M + 0.02, y, tall - 0.02))
        for y in np.arange(first + 0.2, BACK_Y_M, 0.45)
    ]
    return {
        "loggia": c.solid(mesh, c.matte(c.bitmap(brick.albedo)), smooth=True),
        "loggia_rings": c.solid(rings, stone),
        "loggia_insides": c.solid(insides, stone),
        "loggia_room": c.solid(c.merge([room, end]), c.matte(c.bitmap(inner.albedo))),
        "loggia_lid": c.solid(lid, c.matte((0.3, 0.22, 0.15))),
        "loggia_floor": c.solid(under, c.matte((0.3, 0.25, 0.2))),
        "loggia_wood": c.solid(
            c.merge([*beams, *doors, *rafters, soffit]), c.matte((0.15, 0.10, 0.06))
        ),
        "loggia_tiles": c.solid(eaves, tile_paint, smooth=True),
    }


def house(rng: np.random.Generator, stone: Objects, tile_paint: Objects) -> Objects:
    """Return the sunlit house on the right: old plaster, shutters, a door, a bench."""
    tall, first = 5.9, 3.2
    wide_m, px = BACK_Y_M - first, 240.0
    brick = c.masonry(
        rng,
        width_m=wide_m,
        height_m=tall,
        px_per_m=px,
        row_m=(0.068, 0.070),
        length_m=(0.225, 0.235),
        running=True,
        palette=[(0.42, 0.20, 0.11), (0.36, 0.16, 0.09), (0.47, 0.26, 0.15)],
        joint_m=0.011,
        round_m=0.005,
        uneven_m=0.005,
        stain=0.2,
    )
    skin = c.plaster(
        rng,
        width_m=wide_m,
        height_m=tall,
        px_per_m=px,
        colour=(0.66, 0.46, 0.27),
        under=brick,
        loss=0.13,
        stain=0.3,
        bump_m=0.006,
    )
    lower, upper, door_y = (7.3, 12.0), (7.3, 9.75, 12.0), 9.75
    wide, low_z, high_z, high_m = 0.95, 1.0, 3.65, 1.4

    def solid_part(u: Array, v: Array) -> Array:
        y = BACK_Y_M - u
        hole = (np.abs(y - door_y) < 0.6) & (v < 2.35)
        for ys, z in ((lower, low_z), (upper, high_z)):
            for at in ys:
                hole |= (np.abs(y - at) < wide / 2) & (v > z) & (v < z + high_m)
        return np.asarray(~hole)

    mesh = c.relief_mesh(
        skin,
        corner_m=(SIDE_X_M, BACK_Y_M, 0),
        right=(0, -1, 0),
        up=(0, 0, 1),
        cell_m=0.010,
        keep=solid_part,
    )
    frames, panes, shutters, stones, insides = [], [], [], [], []
    for ys, z, angles in ((lower, low_z, (168, 172)), (upper, high_z, (170, 120, 165))):
        for y, angle in zip(ys, angles, strict=True):
            f, g, s = p.window(rng, wide, high_m, open_deg=angle)
            frames.append(onto(f, "right", y, z, out_m=-0.02))
            panes.append(onto(g, "right", y, z, out_m=-0.02))
            shutters.append(onto(s, "right", y, z, out_m=0.045))
            sill = c.box((wide + 0.24, 0.26, 0.09), bevel_m=0.01)
            stones.append(p.shifted(rng, onto(sill, "right", y, z - 0.045, out_m=0.03)))
            lintel = c.box((wide + 0.3, 0.2, 0.2), bevel_m=0.01)
            stones.append(p.shifted(rng, onto(lintel, "right", y, z + high_m + 0.1, out_m=-0.065)))
            ring = np.array(
                [[wide / 2, 0], [wide / 2, high_m], [-wide / 2, high_m], [-wide / 2, 0]]
            )
            insides.append(onto(p.reveal(ring, 0.16), "right", y, z))
    for side in (-1, 1):
        z = 0.0
        for k in range(6):
            w = (0.20, 0.30)[k % 2]
            block = c.box((w, 0.2, 0.38), bevel_m=0.012)
            stones.append(
                p.shifted(
                    rng, onto(block, "right", door_y + side * (0.6 + w / 2), z + 0.195, out_m=-0.06)
                )
            )
            z += 0.392
    stones.append(
        p.shifted(
            rng, onto(c.box((1.75, 0.22, 0.26), bevel_m=0.015), "right", door_y, 2.48, out_m=-0.05)
        )
    )
    for k in range(2):
        step = c.box((1.9 - 0.4 * k, 0.75 - 0.36 * k, 0.15), bevel_m=0.02)
        stones.append(
            p.shifted(rng, onto(step, "right", door_y, 0.075 + 0.15 * k, out_m=0.36 - 0.18 * k))
        )
    z = 0.0
    k = 0
    while z < tall - 0.2:
        w = (0.34, 0.52)[k % 2]
        block = c.box((w, 0.2, 0.33), bevel_m=0.015)
        stones.append(p.shifted(rng, onto(block, "right", BACK_Y_M - w / 2, z + 0.17, out_m=-0.05)))
        z += 0.342
        k += 1
    boards = c.planks(
        rng,
        width_m=1.2,
        height_m=2.05,
        px_per_m=260,
        plank_m=0.15,
        palette=OAK,
        paint=(0.30, 0.07, 0.05),
        worn=0.2,
    )
    door = c.relief_mesh(
        boards,
        corner_m=(SIDE_X_M + 0.1, door_y + 0.6, 0.3),
        right=(0, -1, 0),
        up=(0, 0, 1),
        cell_m=0.012,
    )
    straps = [
        onto(c.box((0.95, 0.012, 0.05)), "right", door_y - 0.1, z0, out_m=-0.085)
        for z0 in (0.7, 1.9)
    ]
    pull = c.place(
        c.tube(
            np.column_stack(
                [
                    0.06 * np.cos(np.linspace(0, 6.3, 17)),
                    np.zeros(17),
                    0.06 * np.sin(np.linspace(0, 6.3, 17)),
                ]
            ),
            0.008,
        )
    )
    straps.append(onto(pull, "right", door_y - 0.42, 1.3, out_m=-0.07))
    eaves = p.tiles(
        rng,
        np.array([SIDE_X_M - 0.42, first, tall + 0.1]),
        np.array([SIDE_X_M - 0.42, BACK_Y_M + 0.2, tall + 0.1]),
        np.array([1.6, 0, 0.5]),
    )
    rafters = [
        c.place(c.box((0.6, 0.08, 0.11)), (SIDE_X_M - 0.1, y, tall - 0.04))
        for y in np.arange(first + 0.2, BACK_Y_M, 0.5)
    ]
    pipe = c.tube(np.array([[SIDE_X_M - 0.09, 8.55, 0.05], [SIDE_X_M - 0.09, 8.55, tall]]), 0.045)
    gutter = c.tube(
        np.array([[SIDE_X_M - 0.5, first, tall + 0.02], [SIDE_X_M - 0.5, BACK_Y_M, tall + 0.02]]),
        0.06,
    )
    shell = c.place(c.box((0.1, BACK_Y_M - first, tall)), (SIDE_X_M + 0.75, 8.1, tall / 2))
    gable = c.place(c.box((1.5, 0.1, tall)), (SIDE_X_M + 0.8, BACK_Y_M + 0.05, tall / 2))
    return {
        "house": c.solid(mesh, c.matte(c.bitmap(skin.albedo)), smooth=True),
        "house_frames": c.solid(c.merge(frames), c.matte((0.55, 0.52, 0.46))),
        "house_panes": c.solid(c.merge(panes), c.glass()),
        "house_shutters": c.solid(c.merge(shutters), c.glossy(SHUTTER, roughness=0.5)),
        "house_stones": c.solid(c.merge(stones), stone),
        "house_insides": c.solid(c.merge(insides), c.matte((0.55, 0.42, 0.28))),
        "house_door": c.solid(door, c.glossy(c.bitmap(boards.albedo), roughness=0.5)),
        "house_straps": c.solid(c.merge(straps), c.matte(IRON)),
        "house_tiles": c.solid(eaves, tile_paint, smooth=True),
        "house_rafters": c.solid(c.merge(rafters), c.matte((0.16, 0.11, 0.07))),
        "house_pipes": c.solid(
            c.merge([pipe, gutter]), c.metal((0.36, 0.25, 0.18), roughness=0.5), smooth=True
        ),
        "house_shell": c.solid(c.merge([shell, gable]), c.matte((0.3, 0.25, 0.2))),
        **bench(rng),
    }


def bench(rng: np.random.Generator) -> Objects:
    """Return a slatted bench in the sun."""
    slats, iron = [], []
    for k in range(4):
        slats.append(
            c.place(c.box((1.5, 0.075, 0.03), bevel_m=0.004), (0, -0.12 - 0.095 * k, 0.45))
        )
    for k in range(4):
        slats.append(
            c.place(
                c.box((1.5, 0.028, 0.07), bevel_m=0.004),
                (0, -0.055 + 0.018 * k, 0.56 + 0.095 * k),
                turn=c.rotation((1, 0, 0), -8),
            )
        )
    for x in (-0.62, 0.62):
        for path in (
            [[x, -0.03, 0.92], [x, -0.09, 0.5], [x, -0.06, 0.2], [x, 0.0, 0.0]],
            [[x, -0.46, 0.0], [x, -0.42, 0.25], [x, -0.44, 0.43], [x, -0.08, 0.43]],
            [[x, -0.08, 0.66], [x, -0.3, 0.68], [x, -0.46, 0.64], [x, -0.44, 0.43]],
        ):
            iron.append(c.tube(np.array(path), 0.016, sides=8))
    px = 400
    wood = c.planks(
        rng, width_m=1.5, height_m=1.5, px_per_m=px, plank_m=0.4, palette=[(0.42, 0.36, 0.29)]
    )
    grain = np.ascontiguousarray(wood.albedo.transpose(1, 0, 2))

    def put(mesh: Mesh) -> Mesh:
        return c.place(mesh, (2.35, 8.9, 0.015), turn=c.rotation((0, 0, 1), -62))

    meshes = [p.shifted(rng, put(m)) for m in slats]
    return {
        "bench": c.solid(c.merge(meshes), c.matte(c.bitmap(grain, repeat_m=1.5))),
        "bench_iron": c.solid(put(c.merge(iron)), c.glossy(IRON, roughness=0.4)),
    }


def pots(rng: np.random.Generator, clay: Objects) -> Objects:
    """Return potted shrubs by the arch and along the house."""
    greens = np.array([[0.07, 0.13, 0.04], [0.10, 0.17, 0.05], [0.05, 0.10, 0.035]])
    places = [
        (ARCH_X_M - 1.95, 12.35, 0.27, 0.9),
        (ARCH_X_M + 1.95, 12.35, 0.27, 0.95),
        (3.9, 11.15, 0.2, 0.55),
        (4.0, 8.7, 0.17, 0.5),
        (-3.95, 7.0, 0.24, 0.8),
        (3.55, 11.5, 0.15, 0.3),
    ]
    bodies, stalks, leaves = [], [], []
    for x, y, r, reach in places:
        tall = 1.75 * r
        bodies.append(c.place(c.lathe(p.POT), (x, y, 0.02), scale=(r, r, tall)))
        s, f, _ = p.bush(rng, stems=46, leaves=1500, reach_m=reach, leaf_m=0.085, greens=greens)
        stalks.append(c.place(s, (x, y, tall * 0.9)))
        leaves.append(c.place(f, (x, y, tall * 0.9)))
    return {
        "pots": c.solid(c.merge(bodies), clay, smooth=True),
        "pot_stalks": c.solid(c.merge(stalks), c.matte((0.12, 0.09, 0.05))),
        "pot_leaves": c.solid(c.merge(leaves), p.foliage()),
    }


def foreground(rng: np.random.Generator, clay: Objects) -> Objects:
    """Return what stands within a metre: parapet, flower pot, lemons, iron railing."""
    eye = SHOT.eye_m[2]
    top = eye - 0.30
    px = 2200.0
    slab = c.plaster(
        rng,
        width_m=1.25,
        height_m=0.36,
        px_per_m=px,
        colour=(0.50, 0.44, 0.34),
        stain=0.45,
        bump_m=0.003,
    )
    shape = slab.height_m.shape
    pit = c.noise(rng, shape, largest_px=40, smallest_px=2, roughness=0.9)
    holes = c.smoothstep(1.3, 2.4, pit)
    speck = c.noise(rng, shape, largest_px=7, smallest_px=2, roughness=0.2)
    moss = c.smoothstep(0.9, 2.0, c.noise(rng, shape, largest_px=500, smallest_px=4, roughness=1.2))
    albedo = slab.albedo * (1 - 0.4 * holes + 0.08 * speck)[..., None]
    albedo = c.mix(albedo, (0.34, 0.33, 0.16), 0.55 * moss)
    rows = (np.arange(shape[0]) / px)[:, None] * np.ones(shape)
    edge = np.minimum(rows, 0.36 - rows)
    worn = np.clip(1 - edge / 0.025, 0, 1) ** 2
    height = slab.height_m + 0.0012 * pit * 0.4 - 0.003 * holes - 0.012 * worn
    slab = c.Relief(albedo=np.clip(albedo, 0.01, 0.9), height_m=height, px_per_m=px)
    x0, y0 = -0.14, 0.53
    coping = c.relief_mesh(
        slab, corner_m=(x0, y0, top), right=(1, 0, 0), up=(0, 1, 0), cell_m=0.0012
    )
    side = c.place(c.box((1.25, 0.34, 0.3)), (x0 + 0.625, y0 + 0.18, top - 0.163))
    end = c.relief_mesh(
        slab, corner_m=(x0, y0 + 0.36, top - 0.37), right=(0, -1, 0), up=(0, 0, 1), cell_m=0.003
    )
    pot_at = (0.50, 0.77, top + 0.004)
    pot = c.place(c.lathe(p.POT, sides=96), pot_at, scale=(0.105, 0.105, 0.19))
    soil = c.place(c.lathe(np.array([[0.095, 0.17], [0.0, 0.175]])), pot_at)
    greens = np.array([[0.09, 0.19, 0.05], [0.12, 0.23, 0.06], [0.07, 0.15, 0.05]])
    stalk, leaves, tips = p.bush(
        rng, stems=26, leaves=330, reach_m=0.30, leaf_m=0.055, greens=greens, near=True
    )
    soil_at = (pot_at[0], pot_at[1], pot_at[2] + 0.165)
    petals_at, petal_turns = [], []
    for t in tips[rng.permutation(len(tips))[:11]]:
        for _ in range(rng.integers(14, 26)):
            d = rng.normal(0, 1, 3) + np.array([0, 0, 0.5])
            d /= np.linalg.norm(d)
            petals_at.append(t + d * 0.014)
            s = np.cross(d, rng.normal(0, 1, 3))
            s /= np.linalg.norm(s)
            petal_turns.append(np.stack([d, s, np.cross(d, s)], -1))
    count = len(petals_at)
    tone = np.array([0.62, 0.06, 0.03]) * rng.uniform(0.6, 1.25, (count, 1))
    petals = c.scatter(
        p.petal(0.017, 0.017),
        np.array(petals_at),
        np.array(petal_turns),
        rng.uniform(0.7, 1.2, count),
        tone,
    )
    fruit, peel = lemons(rng, top)
    return {
        "coping": c.solid(coping, c.matte(c.bitmap(slab.albedo)), smooth=True),
        "coping_side": c.solid(side, c.matte((0.42, 0.37, 0.29))),
        "coping_end": c.solid(end, c.matte(c.bitmap(slab.albedo)), smooth=True),
        "near_pot": c.solid(pot, clay, smooth=True),
        "near_soil": c.solid(soil, c.matte((0.06, 0.045, 0.03))),
        "near_stalks": c.solid(c.place(stalk, soil_at), c.matte((0.16, 0.20, 0.07))),
        "near_leaves": c.solid(c.place(leaves, soil_at), p.foliage(), smooth=True),
        "near_petals": c.solid(c.place(petals, soil_at), p.foliage(), smooth=True),
        "lemons": c.solid(fruit, peel, smooth=True),
        **railing(rng, eye),
    }


def lemons(rng: np.random.Generator, top: float) -> tuple[Mesh, Objects]:
    """Return three lemons lying at the height `top`, and their peel."""
    n = 512
    peel = c.noise(rng, (n, n), largest_px=120, smallest_px=3, roughness=1.1)
    pores = c.smoothstep(0.8, 2.0, c.noise(rng, (n, n), largest_px=9, smallest_px=3, roughness=0))
    yellow = np.array([0.76, 0.53, 0.05]) * (1 + 0.05 * peel - 0.10 * pores)[..., None]
    yellow = c.mix(yellow, (0.50, 0.52, 0.08), 0.6 * c.smoothstep(1.0, 2.4, peel))
    skin = c.bitmap(np.clip(yellow, 0.01, 0.9))
    skin["to_uv"] = mi.ScalarTransform4f().scale([1, 6, 1])
    a = np.linspace(-np.pi / 2, np.pi / 2, 41)
    shape_m = np.column_stack(
        [
            0.029 * np.cos(a) ** 0.9,
            0.036 * np.sin(a) + 0.006 * np.sign(np.sin(a)) * np.abs(np.sin(a)) ** 9,
        ]
    )
    fruit = []
    for x, y, tip, spin in ((0.10, 0.66, 82, 20), (0.172, 0.715, 95, 110), (0.02, 0.78, 75, 200)):
        body = c.lathe(np.maximum(shape_m, [0, -1]), sides=64)
        v = body.vertices
        dimple = 0.00016 * np.sin(v[:, 0] * 500 + 2 * np.sin(v[:, 2] * 400)) * np.sin(v[:, 1] * 450)
        body = dataclasses.replace(body, vertices=v * (1 + dimple / 0.03)[:, None])
        turn = c.rotation((0, 0, 1), spin) @ c.rotation((1, 0, 0), tip)
        fruit.append(c.place(body, (x, y, top + 0.031), turn=turn))
    return c.merge(fruit), c.glossy(skin, roughness=0.38)


def railing(rng: np.random.Generator, eye: float) -> Objects:
    """Return a wrought iron railing at the left, 0.6 m away, with scrolls and a newel."""
    y, left, right = 0.62, -0.72, -0.165
    rail_z = eye - 0.165
    parts = [
        c.place(c.box((right - left, 0.034, 0.012), bevel_m=0.003), ((left + right) / 2, y, rail_z))
    ]
    parts.append(
        c.place(c.box((right - left, 0.012, 0.012)), ((left + right) / 2, y, rail_z - 0.105))
    )
    turns = np.linspace(0, 2.6 * np.pi, 60)
    r = 0.042 * np.exp(-0.16 * turns)
    for k, x in enumerate(np.arange(left + 0.03, right, 0.098)):
        parts.append(c.tube(np.array([[x, y, rail_z], [x, y, rail_z - 0.6]]), 0.0062, sides=10))
        collar = np.array([[0.0062, -0.012], [0.011, -0.006], [0.011, 0.006], [0.0062, 0.012]])
        parts.append(c.place(c.lathe(collar, sides=16), (x, y, rail_z - 0.2)))
        s = 1 if k % 2 else -1
        scroll = np.column_stack(
            [x + 0.049 + s * r * np.cos(turns), np.full(60, y), rail_z - 0.055 + r * np.sin(turns)]
        )
        if x + 0.098 < right:
            parts.append(c.tube(scroll, 0.0042, sides=8))
    post = c.place(c.box((0.026, 0.026, 0.9), bevel_m=0.004), (right - 0.004, y, rail_z - 0.40))
    ball = np.linspace(-np.pi / 2, np.pi / 2, 24)
    knob = c.lathe(np.column_stack([0.026 * np.cos(ball), 0.026 * np.sin(ball)]), sides=40)
    neck = c.lathe(np.array([[0.02, 0], [0.02, 0.008], [0.011, 0.014], [0.011, 0.03]]), sides=24)
    parts += [post, c.place(neck, (right - 0.004, y, rail_z + 0.05))]
    parts.append(c.place(knob, (right - 0.004, y, rail_z + 0.10)))
    turned = [m for m in parts if m.uv is not None and np.ptp(m.uv[:, 0]) == 1.0]
    flat = [m for m in parts if m.uv is None or np.ptp(m.uv[:, 0]) != 1.0]
    iron = c.glossy(c.vertex_colour(), roughness=0.4)
    return {
        "railing_round": c.solid(rusty(rng, c.merge(turned)), iron, smooth=True),
        "railing_flat": c.solid(rusty(rng, c.merge(flat)), iron),
    }


def rusty(rng: np.random.Generator, mesh: Mesh) -> Mesh:
    """Return black iron with patches of rust."""
    v = mesh.vertices
    flake = np.sin(v[:, 0] * 61 + v[:, 2] * 47) * np.sin(v[:, 2] * 83 + v[:, 0] * 29)
    rust = c.smoothstep(0.3, 1.0, flake + rng.normal(0, 0.35, len(v)))
    paint = c.mix(np.array(IRON), (0.16, 0.07, 0.03), 0.8 * rust)
    return mesh.painted(paint)


def look_up(field: Array, x: Array, y: Array, scale_m: float) -> Array:
    """Return a tileable noise field read at places on the land, `scale_m` metres a pixel."""
    at = [np.asarray(y) / scale_m + 700, np.asarray(x) / scale_m + 900]
    return np.asarray(ndimage.map_coordinates(field, at, order=1, mode="grid-wrap"))


def country(rng: np.random.Generator) -> Objects:
    """Return the land behind the wall: a path, fields, trees and hills out to the horizon."""
    size = 2048
    swell = c.noise(rng, (size, size), largest_px=500, smallest_px=12, roughness=2.5)
    patch = c.noise(rng, (size, size), largest_px=160, smallest_px=8, roughness=1.2)

    def ground_z(x: Array, y: Array) -> Array:
        d = np.hypot(x, y)
        valley = -9.0 * c.smoothstep(18, 160, d) - 16 * c.smoothstep(150, 600, d)
        near_hill = 95 * c.smoothstep(420, 1500, d) * (0.75 + 0.35 * look_up(swell, x, y, 4.0))
        far_hill = 400 * c.smoothstep(1400, 4800, d) * (0.9 + 0.35 * look_up(swell, x, y, 11.0))
        slope = 18 * np.clip(x / 300, -1, 1) * c.smoothstep(60, 400, d)
        rough = 0.25 * look_up(swell, x, y, 0.35) * c.smoothstep(15, 40, d)
        return np.asarray(-0.05 + valley + near_hill + far_hill + slope + rough)

    angle = np.radians(np.linspace(-50, 50, 1300))
    radius = np.geomspace(13.4, 6500, 1500)
    a, r = np.meshgrid(angle, radius)
    x, y = r * np.sin(a), r * np.cos(a)
    z = ground_z(x, y)
    fields = look_up(patch, x, y, 1.1)
    kind = np.clip((fields * 1.3 + 3).astype(int), 0, 5)
    tones = np.array(
        [
            [0.20, 0.24, 0.08],
            [0.30, 0.27, 0.13],
            [0.16, 0.21, 0.07],
            [0.36, 0.29, 0.17],
            [0.13, 0.18, 0.06],
            [0.27, 0.19, 0.12],
        ]
    )
    tone = tones[kind] * (1 + 0.16 * look_up(patch, x, y, 0.12))[..., None]
    centre = track_x(y)
    track = 1 - c.smoothstep(
        0.9, 1.35, np.abs(x - centre) * (1 + 0.08 * look_up(patch, x, y, 0.04))
    )
    verge = (np.abs(x - centre) < 0.28) * 0.45
    tone = c.mix(tone, (0.50, 0.42, 0.30), track * (1 - verge) * (y < 420))
    haze = 1 - np.exp(-r / 3600.0)
    tone = c.mix(tone, (0.20, 0.28, 0.38), haze)
    land = c.sheet(np.stack([x, y, z], -1))
    land = dataclasses.replace(land, colour=tone.reshape(-1, 3))

    return {
        "land": c.solid(land, c.matte(c.vertex_colour()), smooth=True),
        "crowns": c.solid(far_trees(rng, ground_z, patch), c.matte(c.vertex_colour())),
        "meadow": c.solid(meadow(rng, ground_z), c.matte(c.vertex_colour())),
    }


def track_x(y: Array) -> Array:
    """Return the middle of the track beyond the arch, by distance (metres)."""
    return np.asarray(
        ARCH_X_M + 0.5 + 5.0 * np.sin((y - BACK_Y_M) / 26.0) * c.smoothstep(14, 60, y)
    )


def meadow(rng: np.random.Generator, ground_z: Ground) -> Mesh:
    """Return grass blades beside the track, dense near the arch."""
    count = 60000
    y = np.exp(rng.uniform(np.log(13.8), np.log(60), count))
    x = track_x(y) + rng.normal(0, 0.13, count) * y
    off = np.abs(x - track_x(y))
    fits = ((off > 0.95) | (off < 0.24)) & (rng.random(count) < 0.4 + 0.6 * (off > 0.95))
    x, y, off = x[fits], y[fits], off[fits]
    blade = c.place(c.leaf(0.2, 0.012, fold=0.5, droop=0.45), turn=c.rotation((0, 1, 0), -64))
    tone = np.array([0.13, 0.17, 0.05]) * rng.uniform(0.6, 1.5, (len(x), 1))
    tone = tone + np.array([0.16, 0.11, 0.03]) * rng.random((len(x), 1)) ** 2
    turns = np.array([c.rotation((0, 0, 1), a) for a in rng.uniform(0, 360, len(x))])
    scale = rng.uniform(0.4, 1.2, len(x)) * (0.35 + 0.65 * (off > 0.95)) * (0.7 + y / 40)
    return c.scatter(blade, np.column_stack([x, y, ground_z(x, y) - 0.01]), turns, scale, tone)


def far_trees(rng: np.random.Generator, ground_z: Ground, patch: Array) -> Mesh:
    """Return the trees of the plain, round and slender: trunks, and crowns of leaf tufts."""
    tuft = Mesh(
        vertices=np.array([[-0.5, 0, 0], [0, -0.35, 0.1], [0.5, 0, 0], [0, 0.35, 0.1]]),
        faces=np.array([[0, 1, 2], [0, 2, 3]]),
    )
    parts = []
    count = 1500
    bearing = np.radians(rng.uniform(-50, 50, count))
    away = np.exp(rng.uniform(np.log(55), np.log(2600), count))
    x, y = away * np.sin(bearing), away * np.cos(bearing)
    z = ground_z(x, y)
    field = look_up(patch, x, y, 1.1) * 1.3
    # Along the borders of the fields, and anywhere on the far slopes; not on the track.
    keep = np.abs(field - np.round(field)) < 0.13 + 0.25 * (away > 600)
    keep &= (np.abs(x - track_x(y)) > 6) | (away > 450)
    for at, r in zip(np.column_stack([x, y, z])[keep], away[keep], strict=True):
        slender = rng.random() < 0.3
        high = rng.uniform(5, 10) if slender else rng.uniform(4, 8)
        green = np.array([0.07, 0.10, 0.035]) * rng.uniform(0.7, 1.6)
        if not slender and rng.random() < 0.5:
            green = np.array([0.22, 0.15, 0.07]) * rng.uniform(0.7, 1.3)
        green = c.mix(green, (0.20, 0.28, 0.38), np.array(1 - np.exp(-r / 3600.0)))
        n = int(np.clip(150000 / r, 60, 2500))
        if slender:
            up = rng.uniform(0.08, 1.0, n)
            wide = 0.12 * np.sin(np.pi * up**0.6) ** 0.8
            around = rng.uniform(0, 2 * np.pi, n)
            spot = np.column_stack([wide * np.cos(around), wide * np.sin(around), up])
        else:
            lobes = rng.normal(0, 0.17, (9, 3)) * [1, 1, 0.7] + [0, 0, 0.62]
            d = rng.normal(0, 1, (n, 3))
            d /= np.linalg.norm(d, axis=1, keepdims=True)
            spot = lobes[rng.integers(0, 9, n)] + 0.19 * d * rng.uniform(0.8, 1.05, (n, 1))
        light = 0.55 + 0.6 * np.clip(spot[:, 2], 0, 1) + rng.normal(0, 0.15, n)
        crown = c.scatter(
            tuft,
            at + spot * high,
            c.random_turns(rng, n),
            np.full(n, 0.17 * np.sqrt(r / 55)) * rng.uniform(0.6, 1.3, n),
            green * np.clip(light, 0.3, 1.6)[:, None],
        )
        parts.append(crown)
        if r < 500:
            trunk = at + np.array([[0, 0, -0.3], [0, 0, 0.5 * high]])
            parts.append(c.tube(trunk, 0.03 * high, sides=6).painted((0.10, 0.08, 0.06)))
    return c.merge(parts)


def trees(rng: np.random.Generator, draft: bool) -> Objects:
    """Return the bare trees: one in the court, two behind the wall, one far down the track."""
    fine = (8, 6, 5, 4, 4) if not draft else (8, 6, 5, 3, 3)
    bark = c.masonry(
        rng,
        width_m=1,
        height_m=1,
        px_per_m=512,
        row_m=(0.08, 0.2),
        length_m=(0.02, 0.05),
        palette=[(0.21, 0.17, 0.13), (0.25, 0.21, 0.16), (0.17, 0.14, 0.11)],
        joint_m=0.008,
        wobble_m=0.02,
        mortar=(0.09, 0.07, 0.05),
        stain=0.3,
    )
    out: Objects = {}
    for k, (x, y, z, tall, thick, seed) in enumerate(
        (
            (-1.35, 9.3, 0.0, 6.2, 0.14, 5),
            (-3.6, 17.0, -0.2, 9.0, 0.24, 11),
            (7.2, 24.0, -0.7, 10.0, 0.26, 12),
            (4.2, 42.0, -2.4, 9.0, 0.25, 13),
        )
    ):
        body, _, _ = c.tree(
            np.random.default_rng(seed),
            height_m=tall,
            radius_m=thick,
            levels=6,
            children=fine,
            shorten=0.72,
            lift=0.10,
            thinnest_m=0.0022 + 0.0006 * k,
        )
        out[f"tree_{k}"] = c.solid(
            c.place(body, (x, y, z)), c.matte(c.bitmap(bark.albedo, repeat_m=1.0)), smooth=True
        )
    ring = []
    for k in range(14):
        a0 = k * 2 * np.pi / 14
        block = c.box((0.32, 0.16, 0.2), bevel_m=0.015)
        turn = c.rotation((0, 0, 1), np.degrees(a0) + 90)
        at = (-1.35 + 0.72 * np.cos(a0), 9.3 + 0.72 * np.sin(a0), 0.08)
        ring.append(p.shifted(rng, c.place(block, at, turn=turn)))
    earth = c.place(c.lathe(np.array([[0.68, 0.08], [0.0, 0.14]])), (-1.35, 9.3, 0))
    out["tree_ring"] = c.solid(
        c.merge(ring), c.matte(c.bitmap(p.stone_tile(rng, (0.4, 0.35, 0.27))))
    )
    out["tree_earth"] = c.solid(earth, c.matte((0.10, 0.07, 0.045)))
    return out


def wires() -> Objects:
    """Return a string of little lamps across the court, and a wire to the house."""
    cords, lamps = [], []
    bulb = c.lathe(
        np.array([[0.0, -0.06], [0.022, -0.045], [0.026, -0.025], [0.014, 0.0], [0.014, 0.03]]),
        sides=14,
    )
    for y, z0, z1, sag in ((7.2, 3.3, 5.3, 0.75), (11.0, 3.3, 5.4, 0.7)):
        t = np.linspace(0, 1, 41)
        x = -SIDE_X_M + 0.1 + (2 * SIDE_X_M - 0.2) * t
        z = z0 + (z1 - z0) * t - sag * 4 * t * (1 - t)
        cords.append(c.tube(np.column_stack([x, y + 0.7 * t, z]), 0.004, sides=5))
        for k in range(2, 40, 3):
            lamps.append(c.place(bulb, (x[k], y + 0.7 * t[k], z[k] - 0.035)))
    return {
        "cords": c.solid(c.merge(cords), c.matte(IRON)),
        "lamps": c.solid(c.merge(lamps), c.glossy((0.72, 0.70, 0.62), roughness=0.15), smooth=True),
    }


def build(draft: bool) -> Objects:
    """Return the Mitsuba objects of the scene."""
    rng = np.random.default_rng(20)
    stone = c.matte(c.bitmap(p.stone_tile(rng, (0.52, 0.45, 0.34)), repeat_m=1.0))
    clay = p.terracotta(rng)
    tile_paint = c.matte(c.vertex_colour())
    return {
        **c.sky_and_sun(
            np.random.default_rng(8),
            sun_azimuth_deg=SUN_AZIMUTH_DEG,
            sun_elevation_deg=SUN_ELEVATION_DEG,
            clouds=0.45,
        ),
        **floor(rng),
        **back_wall(rng, stone, tile_paint),
        **loggia(rng, stone, tile_paint),
        **house(rng, stone, tile_paint),
        **pots(rng, clay),
        **foreground(rng, clay),
        **country(rng),
        **trees(rng, draft),
        **wires(),
    }


if __name__ == "__main__":
    c.run(SHOT, build)
