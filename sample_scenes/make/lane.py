"""Make the sample scene "lane": a narrow old lane seen very wide, from 0.8 m to some 60 m.

Hard sun from the right over the roofs, a bridge house across the lane, washing, a fruit stall.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from typing import Any, Literal

import common as c
import numpy as np
import pieces as p
from common import Array, Mesh

SHOT = c.Shot(
    name="lane",
    place="A narrow old lane with a fruit stall, washing and a bridge house; invented.",
    eye_m=(0.0, 0.0, 1.6),
    target_m=(0.0, 10.0, 1.6),
    horizontal_view_deg=110.0,
    ev=13,
    step_mm=1,
    exposure=1.9,
    white=2.0,
    samples=40,
)
SUN_AZIMUTH_DEG, SUN_ELEVATION_DEG = 69.0, 61.0
LEFT_X_M, RIGHT_X_M = -1.9, 1.8
UP = (0, 0, 1)
IRON = (0.03, 0.03, 0.03)
BRICKS = [(0.42, 0.20, 0.11), (0.36, 0.16, 0.09), (0.47, 0.26, 0.15), (0.30, 0.14, 0.09)]
RUBBLE = [(0.46, 0.39, 0.29), (0.40, 0.34, 0.26), (0.52, 0.45, 0.34), (0.36, 0.32, 0.27)]
GREENS = np.array([[0.08, 0.16, 0.05], [0.11, 0.20, 0.06], [0.06, 0.12, 0.04]])

Objects = dict[str, Any]
Side = Literal["left", "right"]


def onto(mesh: Mesh, side: Side, y_m: float, z_m: float, *, out_m: float = 0.0) -> Mesh:
    """Return a piece made in the plane y = 0 (front to -y) moved onto a side of the lane."""
    if side == "left":
        turn, x = c.rotation(UP, 90), LEFT_X_M + out_m
    else:
        turn, x = c.rotation(UP, -90), RIGHT_X_M - out_m
    return c.place(mesh, (x, y_m, z_m), turn=turn)


def brick(rng: np.random.Generator, wide: float, tall: float, px: float) -> c.Relief:
    """Return a brick wall in running bond."""
    return c.masonry(
        rng,
        width_m=wide,
        height_m=tall,
        px_per_m=px,
        row_m=(0.068, 0.070),
        length_m=(0.225, 0.235),
        running=True,
        palette=BRICKS,
        joint_m=0.011,
        round_m=0.005,
        mortar=(0.46, 0.41, 0.33),
        uneven_m=0.005,
        stain=0.3,
    )


def rubble(rng: np.random.Generator, wide: float, tall: float, px: float) -> c.Relief:
    """Return a wall of stones laid in rough rows."""
    return c.masonry(
        rng,
        width_m=wide,
        height_m=tall,
        px_per_m=px,
        row_m=(0.14, 0.30),
        length_m=(0.18, 0.55),
        palette=RUBBLE,
        joint_m=0.02,
        round_m=0.03,
        wobble_m=0.013,
        mortar=(0.42, 0.37, 0.29),
        mortar_depth_m=0.028,
        uneven_m=0.016,
        grain_m=0.003,
        stain=0.3,
    )


def coat(
    rng: np.random.Generator, wide: float, tall: float, px: float, colour: Sequence[float]
) -> c.Relief:
    """Return plaster of a colour, in places fallen off the bricks."""
    return c.plaster(
        rng,
        width_m=wide,
        height_m=tall,
        px_per_m=px,
        colour=colour,
        under=brick(rng, wide, tall, px),
        loss=0.1,
        stain=0.35,
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class House:
    """One front: its stretch of the lane, its height, openings as (y, sill, width, height)."""

    name: str
    side: Side
    near_m: float
    far_m: float
    tall_m: float
    wall: str
    colour: tuple[float, float, float] = (0.6, 0.5, 0.35)
    px_per_m: float = 180.0
    windows: tuple[tuple[float, float, float, float], ...] = ()
    door_m: float | None = None
    paint: tuple[float, float, float] = (0.1, 0.2, 0.19)


def doorway(rng: np.random.Generator, house: House, at_m: float) -> tuple[Mesh, Any, Mesh]:
    """Return the stones of an arched doorway, the door in it (a Mitsuba shape), and its knob."""
    left = house.side == "left"
    stones = []
    arch = p.voussoirs(rng, 0.55, 1.65, deep_m=0.2, out_m=0.03)
    stones.append(onto(arch, house.side, at_m, 0))
    stones.append(onto(p.reveal(p.arch_outline(0.55, 1.65), 0.2), house.side, at_m, 0))
    step = onto(c.box((1.3, 0.4, 0.14), bevel_m=0.02), house.side, at_m, 0.07)
    stones.append(p.shifted(rng, step))
    boards = c.planks(
        rng,
        width_m=1.12,
        height_m=2.25,
        px_per_m=300,
        plank_m=0.14,
        palette=[(0.22, 0.15, 0.09), (0.27, 0.19, 0.12)],
        paint=house.paint,
        worn=0.25,
    )
    x = LEFT_X_M - 0.14 if left else RIGHT_X_M + 0.14
    door = c.relief_mesh(
        boards,
        corner_m=(x, at_m + (-0.56 if left else 0.56), 0.0),
        right=(0, 1, 0) if left else (0, -1, 0),
        up=UP,
        cell_m=0.01,
    )
    panel = c.solid(door, c.glossy(c.bitmap(boards.albedo), roughness=0.5))
    knob = c.lathe(np.array([[0.03, 0.0], [0.035, 0.02], [0.02, 0.045], [0, 0.05]]), sides=16)
    turned = c.place(knob, turn=c.rotation((1, 0, 0), 90))
    knob = onto(turned, house.side, at_m, 1.1, out_m=-0.13)
    return c.merge(stones), panel, knob


def roof_edge(rng: np.random.Generator, house: House) -> tuple[Mesh, Mesh]:
    """Return the eaves of a house: a row of tiles, and the rafters with the boards on them."""
    sign = 1 if house.side == "left" else -1
    edge_x = LEFT_X_M + 0.3 if house.side == "left" else RIGHT_X_M - 0.3
    ends = [np.array([edge_x, y, house.tall_m + 0.1]) for y in (house.near_m, house.far_m)]
    tiles = p.tiles(rng, ends[0], ends[1], np.array([-sign * 1.4, 0, 0.45]))
    wood = []
    for y in np.arange(house.near_m + 0.1, house.far_m, 0.5):
        beam = c.box((0.5, 0.07, 0.1))
        wood.append(c.place(beam, (edge_x - sign * 0.15, y, house.tall_m - 0.04)))
    lid = c.box((0.6, house.far_m - house.near_m, 0.03))
    over = (edge_x - sign * 0.3, (house.near_m + house.far_m) / 2, house.tall_m + 0.02)
    wood.append(c.place(lid, over))
    return tiles, c.merge(wood)


def front(rng: np.random.Generator, house: House, stone: Objects) -> Objects:
    """Return a house front with windows, shutters, a door, eaves and its roof as a lid."""
    wide = house.far_m - house.near_m
    makers = {"brick": brick, "rubble": rubble}
    if house.wall in makers:
        relief = makers[house.wall](rng, wide, house.tall_m, house.px_per_m)
    else:
        relief = coat(rng, wide, house.tall_m, house.px_per_m, house.colour)
    left = house.side == "left"

    def solid_part(u: Array, v: Array) -> Array:
        y = house.near_m + u if left else house.far_m - u
        hole = np.zeros(u.shape, bool)
        for at, sill, w, h in house.windows:
            hole |= (np.abs(y - at) < w / 2) & (v > sill) & (v < sill + h)
        if house.door_m is not None:
            hole |= p.in_arch(y - house.door_m, v, 0.56, 1.65)
        return ~hole

    mesh = c.relief_mesh(
        relief,
        corner_m=(LEFT_X_M, house.near_m, 0) if left else (RIGHT_X_M, house.far_m, 0),
        right=(0, 1, 0) if left else (0, -1, 0),
        up=UP,
        cell_m=max(2.2 / house.px_per_m, 0.005),
        keep=solid_part,
    )
    stones, frames, panes, shutters, insides, wood = [], [], [], [], [], []
    for at, sill, w, h in house.windows:
        f, g, s = p.window(rng, w, h, open_deg=float(rng.choice([172, 168, 125])))
        frames.append(onto(f, house.side, at, sill, out_m=-0.02))
        panes.append(onto(g, house.side, at, sill, out_m=-0.02))
        shutters.append(onto(s, house.side, at, sill, out_m=0.045))
        ledge = onto(c.box((w + 0.22, 0.24, 0.08), bevel_m=0.01), house.side, at, sill - 0.04)
        block = c.box((w + 0.26, 0.2, 0.18), bevel_m=0.01)
        lintel = onto(block, house.side, at, sill + h + 0.09, out_m=-0.07)
        stones += [p.shifted(rng, ledge), p.shifted(rng, lintel)]
        ring = np.array([[w / 2, 0], [w / 2, h], [-w / 2, h], [-w / 2, 0]])
        insides.append(onto(p.reveal(ring, 0.16), house.side, at, sill))
    out: Objects = {}
    if house.door_m is not None:
        surround, out["door"], knob = doorway(rng, house, house.door_m)
        stones.append(surround)
        wood.append(knob)
    inner = LEFT_X_M - 0.26 if left else RIGHT_X_M + 0.26
    shell = c.place(
        c.box((0.1, wide, house.tall_m)),
        (inner, (house.near_m + house.far_m) / 2, house.tall_m / 2),
    )
    tiles, timber = roof_edge(rng, house)
    wood.append(timber)
    out["tiles"] = c.solid(tiles, c.matte(c.vertex_colour()), smooth=True)
    out["wall"] = c.solid(mesh, c.matte(c.bitmap(relief.albedo)), smooth=True)
    out["shell"] = c.solid(shell, c.matte((0.12, 0.10, 0.08)))
    middle = LEFT_X_M - 1.52 if left else RIGHT_X_M + 1.52
    gable = c.place(
        c.box((3.0, 0.1, house.tall_m)), (middle, house.near_m + 0.05, house.tall_m / 2)
    )
    out["gable"] = c.solid(p.shifted(rng, gable), stone)
    if stones:
        out["stones"] = c.solid(c.merge(stones), stone)
    if frames:
        out["frames"] = c.solid(c.merge(frames), c.matte((0.52, 0.49, 0.43)))
        out["panes"] = c.solid(c.merge(panes), c.glass())
        out["shutters"] = c.solid(c.merge(shutters), c.glossy(house.paint, roughness=0.5))
        out["insides"] = c.solid(c.merge(insides), c.matte((0.5, 0.42, 0.3)))
    out["wood"] = c.solid(c.merge(wood), c.matte((0.15, 0.10, 0.065)))
    return {f"{house.name}_{key}": shape for key, shape in out.items()}


HOUSES = (
    House(
        name="l1",
        side="left",
        near_m=0.8,
        far_m=4.7,
        tall_m=5.8,
        wall="plaster",
        colour=(0.66, 0.44, 0.22),
        px_per_m=330,
        windows=((2.95, 1.25, 0.9, 1.3), (2.95, 3.75, 0.9, 1.3)),
        paint=(0.11, 0.21, 0.12),
    ),
    House(
        name="l2",
        side="left",
        near_m=4.7,
        far_m=9.6,
        tall_m=7.2,
        wall="rubble",
        windows=((8.2, 1.3, 0.85, 1.2), (6.1, 4.0, 0.85, 1.25), (8.2, 4.0, 0.85, 1.25)),
        door_m=6.1,
        paint=(0.08, 0.16, 0.26),
    ),
    House(
        name="l3",
        side="left",
        near_m=9.6,
        far_m=16.0,
        tall_m=6.3,
        wall="plaster",
        colour=(0.62, 0.34, 0.25),
        windows=((11.0, 1.3, 0.9, 1.2), (11.0, 3.8, 0.9, 1.3), (13.8, 3.8, 0.9, 1.3)),
        door_m=13.8,
    ),
    House(
        name="l4",
        side="left",
        near_m=19.0,
        far_m=36.0,
        tall_m=7.0,
        wall="plaster",
        colour=(0.66, 0.55, 0.36),
        px_per_m=90,
        windows=(
            (21.5, 1.3, 0.9, 1.3),
            (25, 1.3, 0.9, 1.3),
            (23, 3.9, 0.9, 1.3),
            (27, 3.9, 0.9, 1.3),
        ),
    ),
    House(
        name="l5",
        side="left",
        near_m=36.0,
        far_m=56.0,
        tall_m=5.5,
        wall="rubble",
        px_per_m=60,
        windows=((39, 2.0, 1, 1.3), (44, 2.0, 1, 1.3)),
    ),
    House(
        name="r1",
        side="right",
        near_m=0.8,
        far_m=4.2,
        tall_m=3.3,
        wall="brick",
        px_per_m=330,
        windows=((2.55, 0.75, 1.5, 1.55),),
        paint=(0.32, 0.07, 0.05),
    ),
    House(
        name="r2",
        side="right",
        near_m=4.2,
        far_m=9.0,
        tall_m=5.7,
        wall="plaster",
        colour=(0.62, 0.56, 0.44),
        px_per_m=220,
        windows=((7.9, 1.25, 0.85, 1.25), (5.4, 3.8, 0.85, 1.25), (7.9, 3.8, 0.85, 1.25)),
        door_m=5.3,
        paint=(0.10, 0.20, 0.25),
    ),
    House(
        name="r4",
        side="right",
        near_m=12.4,
        far_m=16.0,
        tall_m=6.6,
        wall="brick",
        windows=((14.2, 1.3, 0.9, 1.25), (14.2, 3.9, 0.9, 1.25)),
        paint=(0.16, 0.22, 0.10),
    ),
    House(
        name="r5",
        side="right",
        near_m=19.0,
        far_m=31.0,
        tall_m=4.6,
        wall="rubble",
        px_per_m=90,
        windows=((22, 1.4, 0.9, 1.2), (26, 1.4, 0.9, 1.2)),
    ),
    House(
        name="r6",
        side="right",
        near_m=31.0,
        far_m=56.0,
        tall_m=6.4,
        wall="plaster",
        colour=(0.60, 0.42, 0.30),
        px_per_m=60,
        windows=((36, 3.6, 1, 1.3), (42, 3.6, 1, 1.3), (48, 3.6, 1, 1.3)),
    ),
)


def paving(rng: np.random.Generator, detail: float) -> Objects:
    """Return the cobbles, near ones fine, with a gutter of flags along the middle."""
    out: Objects = {}
    wide = RIGHT_X_M - LEFT_X_M
    for name, near, far, px, cell in (
        ("near", 1.0, 8.0, 400.0, 0.005),
        ("far", 8.3, 61.0, 90.0, 0.02),
    ):
        setts = c.cobbles(
            rng,
            width_m=wide,
            height_m=far - near,
            px_per_m=px,
            stone_m=0.115,
            palette=[
                (0.27, 0.25, 0.23),
                (0.22, 0.215, 0.21),
                (0.34, 0.29, 0.23),
                (0.30, 0.26, 0.24),
            ],
            dome_m=0.017,
            jitter=0.6,
        )
        flags = c.masonry(
            rng,
            width_m=wide,
            height_m=far - near,
            px_per_m=px,
            row_m=(0.5, 0.8),
            length_m=(8.0, 9.0),
            palette=[(0.36, 0.33, 0.28), (0.32, 0.30, 0.26)],
            joint_m=0.012,
            uneven_m=0.004,
            mortar=(0.13, 0.11, 0.08),
        )
        rows, columns = setts.height_m.shape
        x = (np.arange(columns) / px + LEFT_X_M)[None, :] * np.ones((rows, 1))
        gutter = (np.abs(x + 0.05) < 0.19).astype(np.float32)
        seam = (np.abs(np.abs(x + 0.05) - 0.19) < 0.012).astype(np.float32)
        dip = 0.03 * np.exp(-(((x + 0.05) / 0.25) ** 2))
        relief = c.Relief(
            albedo=c.mix(setts.albedo, flags.albedo, gutter) * (1 - 0.7 * seam)[..., None],
            height_m=setts.height_m * (1 - gutter) + flags.height_m * gutter - 0.01 * seam - dip,
            px_per_m=px,
        )
        raised = 0.0 if name == "near" else 0.1
        mesh = c.relief_mesh(
            relief, corner_m=(LEFT_X_M, near, raised), right=(1, 0, 0), up=(0, 1, 0), cell_m=cell
        )
        damp = c.matte(c.bitmap(relief.albedo))
        out[f"paving_{name}"] = c.solid(mesh, damp, smooth=True)
    return out


def bridge(rng: np.random.Generator, stone: Objects) -> Objects:
    """Return the house across the lane: an arch below, a latticed window above."""
    near, far, tall = 16.0, 19.0, 6.9
    wide = RIGHT_X_M - LEFT_X_M
    middle = (RIGHT_X_M + LEFT_X_M) / 2
    half, spring = 1.45, 1.45
    wall = rubble(rng, wide + 0.8, tall, 160)

    def solid_part(u: Array, v: Array) -> Array:
        x = u - wide / 2 - 0.4
        hole = p.in_arch(x, v, half + 0.02, spring)
        return ~(hole | ((np.abs(x) < 0.5) & (v > 4.0) & (v < 5.35)))

    mesh = c.relief_mesh(
        wall,
        corner_m=(LEFT_X_M - 0.4, near, 0),
        right=(1, 0, 0),
        up=UP,
        cell_m=0.014,
        keep=solid_part,
    )
    ring = p.voussoirs(rng, half, spring, deep_m=0.32, out_m=0.04)
    inside = p.reveal(p.arch_outline(half, spring), far - near)
    frame, pane, shutter = p.window(rng, 1.0, 1.35, open_deg=168)
    sill = p.shifted(rng, c.place(c.box((1.3, 0.26, 0.1)), (middle, near, 3.95)))
    tiles = p.tiles(
        rng,
        np.array([LEFT_X_M - 0.4, near - 0.3, tall + 0.05]),
        np.array([RIGHT_X_M + 0.4, near - 0.3, tall + 0.05]),
        np.array([0, 1.6, 0.6]),
    )
    block = c.place(c.box((wide + 0.8, 0.1, tall - 3.1)), (middle, far, 3.1 + (tall - 3.1) / 2))
    lid = c.place(c.box((wide + 0.8, far - near + 0.4, 0.05)), (middle, 17.4, tall))
    at = (middle, near - 0.02, 4.0)
    return {
        "bridge": c.solid(mesh, c.matte(c.bitmap(wall.albedo)), smooth=True),
        "bridge_ring": c.solid(c.place(ring, (middle, near, 0)), stone),
        "bridge_inside": c.solid(c.place(inside, (middle, near, 0)), stone),
        "bridge_sill": c.solid(sill, stone),
        "bridge_frame": c.solid(
            c.place(frame, (at[0], near + 0.02, 4.0)), c.matte((0.5, 0.47, 0.4))
        ),
        "bridge_pane": c.solid(c.place(pane, (at[0], near + 0.02, 4.0)), c.glass()),
        "bridge_shutter": c.solid(
            c.place(shutter, at), c.glossy((0.28, 0.08, 0.05), roughness=0.5)
        ),
        "bridge_tiles": c.solid(tiles, c.matte(c.vertex_colour()), smooth=True),
        "bridge_block": c.solid(c.merge([block, lid]), c.matte((0.4, 0.34, 0.25))),
    }


def far_end(rng: np.random.Generator, stone: Objects) -> Objects:
    """Return the chapel front that closes the lane, 58 m away, with a bell gable."""
    y, tall, wide = 58.0, 9.0, 12.0
    wall = c.plaster(
        rng, width_m=wide, height_m=tall, px_per_m=60, colour=(0.72, 0.62, 0.45), stain=0.4
    )

    def solid_part(u: Array, v: Array) -> Array:
        x = u - wide / 2
        hole = p.in_arch(x, v, 1.1, 2.4) | (np.hypot(x, v - 5.6) < 0.75)
        hole |= p.in_arch(x, v - 7.2, 0.45, 0.7) & (v > 7.2)
        roof = v > 9.0 - 0.62 * np.maximum(np.abs(x) - 1.3, 0)
        return ~(hole | roof)

    mesh = c.relief_mesh(
        wall, corner_m=(-wide / 2, y, 0), right=(1, 0, 0), up=UP, cell_m=0.04, keep=solid_part
    )
    ring = c.place(p.voussoirs(rng, 1.08, 2.4, deep_m=0.35, out_m=0.05), (0, y, 0))
    a = np.linspace(0, 2 * np.pi, 49)
    rose = c.tube(np.column_stack([0.8 * np.cos(a), 0 * a + y - 0.05, 5.6 + 0.8 * np.sin(a)]), 0.1)
    bars = [
        c.tube(
            np.array([[0, y, 5.6], [0.75 * np.cos(t), y, 5.6 + 0.75 * np.sin(t)]]), 0.035, sides=6
        )
        for t in np.arange(8) * np.pi / 4
    ]
    bell = c.lathe(
        np.array([[0.33, 0], [0.28, 0.1], [0.2, 0.3], [0.17, 0.45], [0.0, 0.52]]), sides=24
    )
    dark = c.place(c.box((5, 0.1, 6.6)), (0, y + 0.8, 3.3))
    return {
        "end": c.solid(mesh, c.matte(c.bitmap(wall.albedo))),
        "end_ring": c.solid(ring, stone),
        "end_rose": c.solid(c.merge([rose, *bars]), c.matte((0.45, 0.4, 0.32))),
        "end_bell": c.solid(c.place(bell, (0, y + 0.15, 7.35)), c.matte((0.2, 0.14, 0.05))),
        "end_dark": c.solid(dark, c.matte((0.05, 0.04, 0.03))),
    }


def garden(rng: np.random.Generator, stone: Objects, draft: bool) -> Objects:
    """Return the low wall on the right and the bare tree behind it, against the sky."""
    near, far, tall = 9.0, 12.4, 2.6
    wall = rubble(rng, far - near, tall, 160)
    mesh = c.relief_mesh(wall, corner_m=(RIGHT_X_M, far, 0), right=(0, -1, 0), up=UP, cell_m=0.012)
    tiles = p.tiles(
        rng,
        np.array([RIGHT_X_M - 0.12, near, tall + 0.05]),
        np.array([RIGHT_X_M - 0.12, far, tall + 0.05]),
        np.array([0.6, 0, 0.15]),
    )
    ends = [
        c.place(c.box((3.0, 0.1, h)), (RIGHT_X_M + 1.5, y, h / 2))
        for y, h in ((near - 0.05, 5.7), (far + 0.05, 6.6))
    ]
    body, _, _ = c.tree(
        np.random.default_rng(31),
        height_m=8.6,
        radius_m=0.17,
        children=(9, 8, 7, 6, 4) if not draft else (9, 7, 6, 4, 3),
        thinnest_m=0.0022,
        spread_deg=52,
    )
    return {
        "garden": c.solid(mesh, c.matte(c.bitmap(wall.albedo)), smooth=True),
        "garden_tiles": c.solid(tiles, c.matte(c.vertex_colour()), smooth=True),
        "garden_ends": c.solid(c.merge(ends), c.matte((0.5, 0.40, 0.28))),
        "garden_tree": c.solid(
            c.place(body, (2.2, 10.7, 0)), c.matte((0.17, 0.14, 0.11)), smooth=True
        ),
    }


def cloth(rng: np.random.Generator, wide: float, tall: float, kind: str) -> Mesh:
    """Return a hanging cloth or shirt in the plane y = 0, its top edge along z = 0, with folds."""
    n, m = 90, 100
    u, v = np.meshgrid(np.linspace(-0.5, 0.5, n), np.linspace(0, 1, m))
    wave = sum(
        rng.uniform(0.4, 1) * np.sin(2 * np.pi * (k * u + rng.random()) + 0.8 * v)
        for k in (1.5, 2.7, 4.1)
    )
    y = 0.028 * wave * (0.25 + 0.75 * v) + 0.06 * v**2 * rng.normal()
    sag = -0.025 * (1 - (2 * u) ** 2)
    mesh = c.sheet(np.stack([wide * u * (1 - 0.04 * v), y, sag - tall * v], -1))
    tone = np.ones((m, n, 3)) * rng.uniform(0.94, 1.0)
    if kind == "stripes":
        tone *= np.where(((u * 9) % 1 < 0.4)[..., None], np.array([0.25, 0.35, 0.6]), 1.0)
    elif kind == "hems":
        tone *= np.where((np.abs(v - 0.88) < 0.025)[..., None], np.array([0.6, 0.2, 0.15]), 1.0)
        tone *= np.where((np.abs(v - 0.94) < 0.008)[..., None], np.array([0.6, 0.2, 0.15]), 1.0)
    if kind == "shirt":
        x = np.abs(u)
        body = x < 0.29
        sleeve = (x >= 0.29) & (v < 0.34 + 0.55 * (x - 0.29)) & (v > 0.6 * (x - 0.29))
        neck = np.hypot(u * 1.0, v * tall / wide) < 0.1
        keep = ((body | sleeve) & ~neck).ravel()
        mesh = dataclasses.replace(mesh, faces=mesh.faces[keep[mesh.faces].all(axis=1)])
    return mesh.painted(tone.reshape(-1, 3) * 0.75)


def washing(rng: np.random.Generator) -> Objects:
    """Return washing lines across the lane, and power cables along and across it."""
    cords, pegs, cloths = [], [], []
    peg = c.box((0.012, 0.016, 0.07))
    for y, z, plan in (
        (4.95, 4.55, (("sheet", 1.15, 1.0), ("shirt", 0.95, 0.75), ("hems", 0.62, 0.8))),
        (
            10.2,
            4.0,
            (
                ("stripes", 0.9, 0.95),
                ("hems", 0.55, 0.7),
                ("shirt", 0.85, 0.7),
                ("sheet", 0.5, 0.5),
            ),
        ),
        (13.2, 5.2, (("shirt", 0.9, 0.75), ("stripes", 0.7, 0.8), ("sheet", 0.9, 1.0))),
    ):
        t = np.linspace(0, 1, 33)
        line = np.column_stack(
            [LEFT_X_M + (RIGHT_X_M - LEFT_X_M) * t, 0 * t + y, z - 0.22 * 4 * t * (1 - t)]
        )
        cords.append(c.tube(line, 0.004, sides=5))
        x = LEFT_X_M + 0.35
        for kind, wide, tall in plan:
            piece = cloth(rng, wide, tall, kind)
            dye = {
                "sheet": (1.0, 1.0, 1.0),
                "stripes": (1.0, 0.97, 0.9),
                "hems": (1.0, 0.95, 0.8),
                "shirt": tuple(rng.choice([[0.3, 0.5, 0.8], [0.95, 0.4, 0.25], [0.95, 0.8, 0.3]])),
            }[kind]
            assert piece.colour is not None
            piece = piece.painted(np.asarray(piece.colour) * np.array(dye))
            middle = x + wide / 2
            s = (middle - LEFT_X_M) / (RIGHT_X_M - LEFT_X_M)
            top = z - 0.22 * 4 * s * (1 - s)
            cloths.append(c.place(piece, (middle, y, top + 0.02)))
            for side in (-0.42, 0.42) if kind != "shirt" else (-0.2, 0.2):
                pegs.append(c.place(peg, (middle + side * wide, y, top + 0.0)))
            x += wide + 0.1
    for y0, y1, z0, z1 in (
        (5.0, 5.6, 5.0, 5.5),
        (9.3, 8.8, 5.6, 5.9),
        (14.6, 15.3, 5.9, 5.2),
        (24, 25, 4.4, 4.5),
    ):
        t = np.linspace(0, 1, 25)
        sag = z0 + (z1 - z0) * t - 0.9 * t * (1 - t)
        cords.append(
            c.tube(np.column_stack([LEFT_X_M + 3.7 * t, y0 + (y1 - y0) * t, sag]), 0.006, sides=5)
        )
    for side, z in ((LEFT_X_M + 0.03, 3.3), (LEFT_X_M + 0.03, 3.36), (RIGHT_X_M - 0.03, 3.4)):
        along = np.arange(1.0, 15.9, 0.3)
        run = np.column_stack([0 * along + side, along, z + 0.03 * np.sin(along * 2.1) ** 2])
        cords.append(c.tube(run, 0.007, sides=6))
    thin = {
        "type": "principledthin",
        "base_color": c.vertex_colour(),
        "roughness": 0.9,
        "diff_trans": 0.8,
        "spec_trans": 0.0,
        "eta": 1.3,
    }
    return {
        "cords": c.solid(c.merge(cords), c.matte(IRON)),
        "pegs": c.solid(c.merge(pegs), c.matte((0.45, 0.33, 0.2))),
        "cloths": c.solid(c.merge(cloths), thin, smooth=True),
    }


def bar_board(rng: np.random.Generator, kind: str) -> Array:
    """Return a painted sign (512, 512, 3) of bars, wide to fine, with a worn surface."""
    n = 512
    y, x = np.mgrid[0:n, 0:n] / n
    if kind == "steps":
        dark = np.zeros((n, n), bool)
        for row, period in enumerate((0.16, 0.08, 0.04, 0.02)):
            band = (y > 0.09 + row * 0.21) & (y < 0.27 + row * 0.21) & (x > 0.1) & (x < 0.9)
            dark |= band & (((x - 0.1) / period) % 1 < 0.5)
        ground, ink = np.array([0.68, 0.58, 0.38]), np.array([0.05, 0.07, 0.12])
    else:
        a, r = np.arctan2(y - 0.5, x - 0.5), np.hypot(x - 0.5, y - 0.5)
        dark = (np.sin(a * 18) > 0) & (r < 0.40) & (r > 0.05) | (np.abs(r - 0.45) < 0.012)
        ground, ink = np.array([0.66, 0.63, 0.55]), np.array([0.30, 0.05, 0.04])
    edge = np.minimum(np.minimum(x, 1 - x), np.minimum(y, 1 - y)) < 0.035
    worn = c.noise(rng, (n, n), largest_px=120, smallest_px=2, roughness=1.0)
    colour = np.where((dark | edge)[..., None], ink, ground) * (1 + 0.05 * worn)[..., None]
    return c.mix(colour, (0.25, 0.2, 0.15), 0.8 * c.smoothstep(1.2, 2.0, worn))


def signs(rng: np.random.Generator) -> Objects:
    """Return hanging signs with bar patterns on brackets, and lanterns."""
    out: Objects = {}
    iron, lamp = [], []
    for k, (x, y, z, size, kind, wall_x) in enumerate(
        (
            (1.28, 4.1, 2.75, 0.62, "steps", RIGHT_X_M),
            (-1.38, 9.0, 2.9, 0.66, "star", LEFT_X_M),
            (1.3, 12.6, 2.9, 0.62, "steps", RIGHT_X_M),
        )
    ):
        h = size / 2
        face = c.sheet(np.array([[[-h, 0, size], [h, 0, size]], [[-h, 0, 0], [h, 0, 0]]]))
        board = c.place(c.box((size + 0.02, 0.03, size + 0.02)), (x, y + 0.017, z + h))
        picture = c.matte(c.bitmap(bar_board(rng, kind)))
        out[f"sign_{k}"] = c.solid(c.place(face, (x, y, z)), picture)
        out[f"sign_back_{k}"] = c.solid(board, c.matte((0.1, 0.06, 0.04)))
        reach = x - np.sign(wall_x) * (h + 0.05)
        arm = z + size + 0.12
        iron.append(c.tube(np.array([[wall_x, y, arm], [reach, y, arm]]), 0.011, sides=8))
        a = np.linspace(0, 2.2 * np.pi, 40)
        r = 0.13 * np.exp(-0.2 * a)
        curl = np.column_stack(
            [
                wall_x - np.sign(wall_x) * (0.16 + r * np.cos(a)),
                0 * a + y,
                arm + 0.15 + r * np.sin(a),
            ]
        )
        iron.append(c.tube(curl, 0.007, sides=6))
        for dx in (-h * 0.8, h * 0.8):
            iron.append(c.tube(np.array([[x + dx, y, arm], [x + dx, y, z + size]]), 0.004, sides=5))
    for side, y, z in ((LEFT_X_M, 4.75, 3.0), (RIGHT_X_M, 9.1, 3.1)):
        s = -np.sign(side)
        x = side + s * 0.4
        iron.append(c.tube(np.array([[side, y, z + 0.5], [x, y, z + 0.5]]), 0.012, sides=8))
        iron.append(c.tube(np.array([[x, y, z + 0.5], [x, y, z + 0.38]]), 0.006, sides=6))
        roof = np.array([[0.16, 0.0], [0.13, 0.03], [0.04, 0.11], [0.02, 0.14], [0.0, 0.15]])
        iron.append(c.place(c.lathe(roof, sides=4), (x, y, z + 0.25)))
        iron.append(c.place(c.box((0.15, 0.15, 0.02)), (x, y, z - 0.09)))
        for cx, cy in ((-1, -1), (1, -1), (1, 1), (-1, 1)):
            low, high = np.array([x + 0.06 * cx, y + 0.06 * cy, z - 0.08]), z + 0.26
            iron.append(
                c.tube(np.array([low, [x + 0.095 * cx, y + 0.095 * cy, high]]), 0.006, sides=6)
            )
        lamp.append(
            c.place(
                c.lathe(np.array([[0.0, 0.0], [0.035, 0.02], [0.04, 0.09], [0.0, 0.13]])), (x, y, z)
            )
        )
    out["sign_iron"] = c.solid(c.merge(iron), c.glossy(IRON, roughness=0.4))
    out["lamps"] = c.solid(c.merge(lamp), c.glossy((0.75, 0.72, 0.62), roughness=0.2), smooth=True)
    return out


def bicycle(rng: np.random.Generator) -> Objects:
    """Return an old bicycle on its stand in the lane, spokes and all."""
    tyres, steel, paint = [], [], []
    a = np.linspace(0, 2 * np.pi, 61)
    r = 0.335
    hubs = (np.array([-0.52, 0.0, r]), np.array([0.53, 0.0, r]))
    for hub in hubs:
        ring = np.column_stack([np.cos(a), 0 * a, np.sin(a)])
        tyres.append(c.tube(hub + ring * r, 0.016, sides=10))
        steel.append(c.tube(hub + ring * (r - 0.022), 0.009, sides=8))
        for k in range(32):
            t = k * 2 * np.pi / 32
            lean = t + (0.28 if k % 4 < 2 else -0.28)
            start = hub + np.array([0.02 * np.cos(lean), 0.028 * (-1) ** k, 0.02 * np.sin(lean)])
            rim = hub + (r - 0.025) * np.array([np.cos(t), 0, np.sin(t)])
            steel.append(c.tube(np.array([start, rim]), 0.0013, sides=4))
        steel.append(c.tube(hub + np.array([[0, -0.06, 0], [0, 0.06, 0]]), 0.018, sides=10))
    crank, seat, head_top, head_low = (
        np.array([-0.07, 0, 0.28]),
        np.array([-0.2, 0, 0.78]),
        np.array([0.36, 0, 0.80]),
        np.array([0.40, 0, 0.66]),
    )
    for q0, q1, thick in (
        (crank, seat, 0.015),
        (seat, head_top, 0.014),
        (crank, head_low, 0.016),
        (head_low, head_top, 0.018),
        (head_low, hubs[1], 0.012),
        (crank, hubs[0], 0.010),
        (seat, hubs[0], 0.009),
    ):
        paint.append(c.tube(np.array([q0, q1]), thick, sides=10))
    steel.append(c.tube(seat + np.array([[0, 0, 0], [-0.03, 0, 0.13]]), 0.013, sides=8))
    steel.append(c.tube(head_top + np.array([[0, 0, 0], [-0.03, 0, 0.14]]), 0.012, sides=8))
    bar = np.array(
        [
            [0.14, -0.28, 0.98],
            [0.28, -0.26, 0.96],
            [0.34, -0.1, 0.94],
            [0.34, 0.1, 0.94],
            [0.28, 0.26, 0.96],
            [0.14, 0.28, 0.98],
        ]
    )
    steel.append(c.tube(bar, 0.011, sides=8))
    steel.append(
        c.tube(crank + 0.095 * np.column_stack([np.cos(a), 0 * a - 0.5, np.sin(a)]), 0.005)
    )
    for d in (1, -1):
        arm = d * np.array([[0, -0.07, 0], [0.12, -0.07, -0.12]])
        steel.append(c.tube(crank + arm, 0.008, sides=8))
        tyres.append(
            c.place(c.box((0.09, 0.06, 0.02)), crank + arm[1] + np.array([0, -0.05 * d, 0]))
        )
    steel.append(c.tube(np.array([[-0.1, 0, 0.27], [-0.14, -0.2, 0.01]]), 0.008, sides=8))
    saddle = c.place(c.box((0.26, 0.13, 0.05), bevel_m=0.02), (-0.25, 0, 0.93))
    tilt = c.rotation(UP, 22) @ c.rotation((1, 0, 0), 7)
    at = (-0.5, 3.95, 0.02)

    def put(parts: list[Mesh]) -> Mesh:
        return c.place(c.merge(parts), at, turn=tilt)

    return {
        "bike_tyres": c.solid(put([*tyres, saddle]), c.matte((0.05, 0.04, 0.035))),
        "bike_steel": c.solid(put(steel), c.metal((0.55, 0.54, 0.52), roughness=0.3)),
        "bike_paint": c.solid(
            put(paint), c.glossy((0.33, 0.05, 0.04), roughness=0.25), smooth=True
        ),
    }


FRUIT = {
    "orange": ((0.72, 0.24, 0.02), 0.038),
    "apple": ((0.42, 0.05, 0.035), 0.036),
    "green": ((0.34, 0.40, 0.06), 0.035),
    "lemon": ((0.76, 0.54, 0.05), 0.031),
}


def heap(rng: np.random.Generator, kind: str, wide: float, deep: float) -> tuple[Mesh, Mesh]:
    """Return the fruit heaped in a crate whose bottom is at z = 0, and a few leaves on them."""
    a = np.linspace(-np.pi / 2, np.pi / 2, 21)
    ball = c.lathe(np.column_stack([np.cos(a), np.sin(a)]), sides=30)
    ball = c.place(ball, scale=(1, 1, 1.22 if kind == "lemon" else 0.95))
    colour, r = FRUIT[kind]
    layers = []
    for layer in range(3):
        inset = layer * 0.9 * r
        nx = int((wide - 0.03 - 2 * inset) / (2.04 * r))
        ny = int((deep - 0.03 - 2 * inset) / (2.04 * r))
        gx, gy = np.meshgrid(np.arange(nx) - (nx - 1) / 2, np.arange(ny) - (ny - 1) / 2)
        z = np.full(nx * ny, 0.045 + r * (1 + 1.45 * layer))
        at = np.column_stack([gx.ravel() * 2.06 * r, gy.ravel() * 2.06 * r, z])
        at = at + rng.normal(0, 0.003, at.shape)
        if layer == 2:
            at = at[rng.random(len(at)) < 0.7]
        tone = np.array(colour) * rng.uniform(0.8, 1.15, (len(at), 1))
        tone[:, 1] *= rng.uniform(0.8, 1.3, len(at))
        size = r * rng.uniform(0.92, 1.05, len(at))
        layers.append(c.scatter(ball, at, c.random_turns(rng, len(at)), size, tone))
    few = at[rng.permutation(len(at))[:5]] + np.array([0, 0, 0.9 * r])
    spin = np.array([c.rotation(UP, angle) for angle in rng.uniform(0, 360, len(few))])
    shade = GREENS[rng.integers(0, 3, len(few))]
    sprig = c.leaf(0.07, 0.032, droop=0.45)
    leaves = c.scatter(sprig, few, spin, rng.uniform(0.8, 1.3, len(few)), shade)
    skins = c.merge(layers)
    assert skins.colour is not None
    x, y, z = skins.vertices.T
    mottle = np.sin(x * 310 + 2 * np.sin(y * 190)) * np.sin(z * 270 + y * 120)
    tinted = np.clip(skins.colour * (1 + 0.13 * mottle)[:, None], 0.01, 0.85)
    return skins.painted(tinted), leaves


def stall(rng: np.random.Generator) -> Objects:
    """Return the fruit stall in the near left corner, 0.8 m away: boards, crates, fruit."""
    wood = c.planks(
        rng,
        width_m=1.0,
        height_m=1.0,
        px_per_m=1400,
        plank_m=0.5,
        palette=[(0.46, 0.34, 0.21), (0.40, 0.29, 0.18)],
        gap_m=0.0,
    )
    along_y = c.matte(c.bitmap(wood.albedo, repeat_m=1.0))
    along_x = c.matte(c.bitmap(wood.albedo.transpose(1, 0, 2), repeat_m=1.0))
    top_z, x0, x1, y0, y1 = 0.80, -1.86, -0.66, 0.84, 2.3
    boards, cross = [], []
    for x in np.arange(x0 + 0.06, x1, 0.122):
        plank = c.box((0.115, y1 - y0 + rng.normal(0, 0.01), 0.028), bevel_m=0.003)
        boards.append(p.shifted(rng, c.place(plank, (x, (y0 + y1) / 2, top_z - 0.014))))
    for x, y in ((x1 - 0.1, y0 + 0.12), (x1 - 0.1, y1 - 0.12), (x0 + 0.1, y1 - 0.12)):
        boards.append(p.shifted(rng, c.place(c.box((0.07, 0.07, 0.76)), (x, y, 0.39))))
    cross.append(c.place(c.box((x1 - x0, 0.03, 0.1)), ((x0 + x1) / 2, y1 - 0.1, 0.72)))
    fruit, leaves = [], []
    crates = (
        (-0.94, 1.08, "orange"),
        (-0.94, 1.56, "apple"),
        (-0.94, 2.03, "lemon"),
        (-1.50, 1.12, "lemon"),
        (-1.50, 1.60, "orange"),
        (-1.50, 2.05, "green"),
    )
    for cx, cy, kind in crates:
        w, d, h = 0.50, 0.40, 0.15
        tip = c.rotation((0, 1, 0), 9.0)
        base = np.array([cx, cy, top_z + 0.065])

        def put(mesh: Mesh, base: Array = base, tip: Array = tip) -> Mesh:
            return c.place(mesh, base, turn=tip)

        for s in (-1, 1):
            for z in (0.035, 0.115):
                slat = c.box((w, 0.010, 0.062), bevel_m=0.002)
                cross.append(p.shifted(rng, put(c.place(slat, (0, s * d / 2, z)))))
                slat = c.box((0.012, d, 0.062), bevel_m=0.002)
                boards.append(p.shifted(rng, put(c.place(slat, (s * w / 2, 0, z)))))
            for q in (-1, 1):
                post = c.box((0.03, 0.03, h + 0.02))
                boards.append(
                    p.shifted(
                        rng, put(c.place(post, (s * (w / 2 - 0.02), q * (d / 2 - 0.02), h / 2)))
                    )
                )
        cross.append(put(c.place(c.box((w, d, 0.01)), (0, 0, 0.0))))
        heaped, green = heap(rng, kind, w, d)
        fruit.append(put(heaped))
        leaves.append(put(green))
    return {
        "stall_boards": c.solid(c.merge(boards), along_y),
        "stall_cross": c.solid(c.merge(cross), along_x),
        "stall_fruit": c.solid(
            c.merge(fruit), c.glossy(c.vertex_colour(), roughness=0.45), smooth=True
        ),
        "stall_leaves": c.solid(c.merge(leaves), p.foliage(), smooth=True),
    }


def plants(rng: np.random.Generator, clay: Objects) -> Objects:
    """Return pots along the walls and boxes of flowers under the windows."""
    bodies, stalks, leaves, petals, boxes = [], [], [], [], []
    for x, y, r, reach in (
        (1.42, 1.95, 0.17, 0.55),
        (1.5, 2.5, 0.13, 0.35),
        (1.48, 3.9, 0.2, 0.8),
        (-1.6, 5.1, 0.2, 0.75),
        (-1.62, 7.15, 0.17, 0.5),
        (1.5, 8.75, 0.22, 0.9),
        (-1.6, 10.0, 0.2, 0.7),
        (-1.6, 12.6, 0.22, 0.8),
        (1.45, 13.0, 0.2, 0.7),
    ):
        tall = 1.75 * r
        bodies.append(c.place(c.lathe(p.POT), (x, y, 0.01), scale=(r, r, tall)))
        s, f, _ = p.bush(rng, stems=40, leaves=1000, reach_m=reach, leaf_m=0.075, greens=GREENS)
        stalks.append(c.place(s, (x, y, tall * 0.9)))
        leaves.append(c.place(f, (x, y, tall * 0.9)))
    for house in HOUSES:
        for y, sill, w, _ in house.windows:
            if y > 16 or sill < 1.0:
                continue
            boxes.append(onto(c.box((w, 0.16, 0.15)), house.side, y, sill + 0.08, out_m=0.13))
            for k in range(4):
                s, f, tips = p.bush(
                    rng, stems=12, leaves=150, reach_m=0.26, leaf_m=0.05, greens=GREENS
                )
                shift = (k - 1.5) * w / 4
                stalks.append(onto(c.place(s, (shift, 0, 0.14)), house.side, y, sill, out_m=0.13))
                leaves.append(onto(c.place(f, (shift, 0, 0.14)), house.side, y, sill, out_m=0.13))
                spots = np.repeat(tips, 9, axis=0) + rng.normal(0, 0.013, (9 * len(tips), 3))
                tone = np.array([0.6, 0.06, 0.08]) if k % 2 else np.array([0.65, 0.3, 0.4])
                flower = c.scatter(
                    c.leaf(0.022, 0.016),
                    spots,
                    c.random_turns(rng, len(spots)),
                    rng.uniform(0.7, 1.2, len(spots)),
                    tone * rng.uniform(0.7, 1.2, (len(spots), 1)),
                )
                petals.append(
                    onto(c.place(flower, (shift, 0, 0.14)), house.side, y, sill, out_m=0.13)
                )
    return {
        "pots": c.solid(c.merge(bodies), clay, smooth=True),
        "boxes": c.solid(c.merge(boxes), c.matte((0.36, 0.17, 0.10))),
        "stalks": c.solid(c.merge(stalks), c.matte((0.14, 0.15, 0.06))),
        "leaves": c.solid(c.merge(leaves), p.foliage()),
        "petals": c.solid(c.merge(petals), p.foliage()),
    }


def build(draft: bool) -> Objects:
    """Return the Mitsuba objects of the scene."""
    rng = np.random.default_rng(41)
    stone = c.matte(c.bitmap(p.stone_tile(rng, (0.52, 0.45, 0.34)), repeat_m=1.0))
    objects: Objects = c.sky_and_sun(
        np.random.default_rng(9),
        sun_azimuth_deg=SUN_AZIMUTH_DEG,
        sun_elevation_deg=SUN_ELEVATION_DEG,
        clouds=0.35,
    )
    detail = 0.45 if draft else 1.0
    for house in HOUSES:
        sharp = max(60.0, house.px_per_m * detail)
        objects |= front(rng, dataclasses.replace(house, px_per_m=sharp), stone)
    kerb = c.place(c.box((RIGHT_X_M - LEFT_X_M, 0.3, 0.2), bevel_m=0.015), (-0.05, 8.15, 0.02))
    drains = [
        c.tube(np.array([[x, y, 0.05], [x, y, z]]), 0.04)
        for x, y, z in (
            (LEFT_X_M + 0.06, 4.6, 5.8),
            (RIGHT_X_M - 0.06, 8.9, 5.6),
            (LEFT_X_M + 0.06, 9.7, 6.2),
        )
    ]
    return {
        **objects,
        "kerb": c.solid(kerb, stone),
        "drains": c.solid(c.merge(drains), c.metal((0.40, 0.28, 0.2), roughness=0.5), smooth=True),
        "street": c.solid(
            c.place(c.box((60, 100, 0.1)), (0, 20, -0.12)), c.matte((0.2, 0.18, 0.15))
        ),
        **paving(rng, detail),
        **bridge(rng, stone),
        **far_end(rng, stone),
        **garden(rng, stone, draft),
        **washing(rng),
        **signs(rng),
        **bicycle(rng),
        **stall(rng),
        **plants(rng, p.terracotta(rng)),
    }


if __name__ == "__main__":
    c.run(SHOT, build)
