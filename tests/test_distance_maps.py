"""Distances of a scene in every form, held against geometry worked out another way; bad ones refused.

Reference figures are built here from points in space: a point is placed, seen by a camera and measured.
"""

import math
import pickle
import re
import zipfile
from pathlib import Path

import numpy as np
import pytest
import tifffile
from conftest import TYPED_CAMERA, contents
from PIL import Image
from scipy.ndimage import distance_transform_edt, uniform_filter

from pinsim import Scene, SceneError, UnitError
from pinsim.scene import DistanceMap, Ground, MapFile, Plane, Planes
from pinsim.scene.fit import at_size, fitted
from pinsim.scene.ground import horizon_from
from pinsim.scene.photo import photo_from_linear

ROWS, COLUMNS = 60, 90
VIEW_DEG = 70.0
# float32 holds 7 digits; a value passes through a few operations.
FLOAT32 = {"rtol": 2e-6, "atol": 0}


def rays(rows=ROWS, columns=COLUMNS, view_deg=VIEW_DEG):
    """Return the unit direction of every pixel, (rows, columns, 3): right, down, ahead."""
    wide = math.tan(math.radians(view_deg / 2))
    right = (np.arange(columns) + 0.5 - columns / 2) * (2 * wide / columns)
    down = (np.arange(rows) + 0.5 - rows / 2) * (2 * wide / columns)
    points = np.empty((rows, columns, 3))
    points[..., 0], points[..., 1], points[..., 2] = right, down[:, None], 1.0
    return points / np.linalg.norm(points, axis=2, keepdims=True)


def everywhere(distance):
    rows, columns = distance.shape
    return distance.inverse_mm(np.arange(rows)[:, None], np.arange(columns)[None, :])


def distances_of(scene):
    with np.errstate(divide="ignore"):
        return 1.0 / everywhere(scene.distance).astype(np.float64)


@pytest.fixture
def here(tmp_path):
    """Return a folder with a plain photo."""
    Image.new("RGB", (COLUMNS, ROWS), (90, 120, 140)).save(tmp_path / "photo.png")
    return tmp_path


@pytest.fixture
def load(here):
    """Return a function that writes the [distance] table of a scene file and loads the scene."""

    def call(table, *, view_deg=VIEW_DEG, head=""):
        text = f'photo = "photo.png"\nhorizontal_view = "{view_deg} deg"\n{head}[distance]\n{table}'
        (here / "scene.toml").write_text(text, encoding="utf-8")
        return Scene.load(here / "scene.toml")

    return call


# What the numbers mean ------------------------------------------------------------------------


def test_distances_along_the_ray_become_distances_along_the_axis(here, load):
    """A wall 4 m ahead: its points are placed in space and their distances from the hole measured.

    The third coordinate of a point against its length; elementary geometry, no source needed.
    """
    wall = rays() * (4000.0 / rays()[..., 2:])
    np.save(here / "map.npy", np.linalg.norm(wall, axis=2))
    scene = load('map = "map.npy"\nunit = "mm"\nalong = "ray"\n')
    np.testing.assert_allclose(distances_of(scene), 4000.0, **FLOAT32)
    assert scene.distance.along == "axis"
    assert scene.distance.nearest_mm == pytest.approx(4000.0, rel=2e-6)
    assert scene.distance.farthest_mm == pytest.approx(4000.0, rel=2e-6)
    # The corner's ray is 1 / cos(39.719 deg) as long as the axis; computed independently by hand:
    # its middle is 53.39 px from the photo's, the focal length is 45 px / tan 35 deg = 64.267 px.
    as_axis = load('map = "map.npy"\nunit = "mm"\nalong = "axis"\n')
    assert distances_of(as_axis)[0, 0] == pytest.approx(
        4000.0 / math.cos(math.radians(39.719)), 1e-5
    )


def test_whole_numbers_along_the_ray_stay_whole_numbers_in_memory(here, load):
    codes = np.round(np.linalg.norm(rays() * (4000.0 / rays()[..., 2:]), axis=2)).astype(np.uint16)
    Image.fromarray(codes).save(here / "map.png")
    scene = load('map = "map.png"\nstep = "1 mm"\nalong = "ray"\n')
    assert scene.distance.codes.dtype == np.uint16
    np.testing.assert_allclose(distances_of(scene), 4000.0, rtol=0.5 / 4000.0 + 2e-6)


@pytest.mark.parametrize("share", [1, 2])
@pytest.mark.parametrize("known", [True, False])
def test_a_disparity_gives_back_the_distance_of_points_seen_by_two_cameras(
    here, load, share, known
):
    """Points are projected into two cameras 65 mm apart and their shift is measured.

    Z = f B / d for parallel cameras: Hartley and Zisserman, Multiple View Geometry, from memory.
    With a map half as wide the same shift counts half as many of its pixels.
    """
    # A slanting plane, whose 1/Z is linear over the picture, so that interpolation is exact.
    z_mm = 1.0 / np.linspace(1 / 700.0, 1 / 9000.0, ROWS // share)[:, None].repeat(
        COLUMNS // share, 1
    )
    focal_px = 0.5 * (COLUMNS // share) / math.tan(math.radians(VIEW_DEG / 2))
    points = rays(ROWS // share, COLUMNS // share)
    points = points * (z_mm / points[..., 2])[..., None]
    left = focal_px * points[..., 0] / points[..., 2]
    right = focal_px * (points[..., 0] - 65.0) / points[..., 2]
    np.save(here / "map.npy", left - right)
    own = f"focal_length_px = {focal_px}\n" if known else ""
    scene = load(f'map = "map.npy"\nkind = "disparity"\nbaseline = "65 mm"\n{own}')
    found = distances_of(scene)
    if share == 2:
        found, z_mm = (2.0 / (1.0 / found[::2] + 1.0 / found[1::2]))[1:-1, ::2], z_mm[1:-1]
    np.testing.assert_allclose(found, z_mm, rtol=1e-5)


def test_a_disparity_in_sixteenths_of_pixels(here, load):
    """16 codes are one pixel: 2048 codes, 128 px, focal length 1280 px, 100 mm apart, give 1 m."""
    codes = np.full((ROWS, COLUMNS), 2048, np.uint16)
    codes[0] = 0
    Image.fromarray(codes).save(here / "map.png")
    scene = load(
        'map = "map.png"\nkind = "disparity"\nstep = "1/16 px"\nbaseline = "100 mm"\n'
        'focal_length_px = 1280\nholes = "far"\n'
    )
    np.testing.assert_allclose(distances_of(scene)[1:], 1000.0, **FLOAT32)
    assert np.isinf(distances_of(scene)[0]).all()
    assert scene.notes == ()


@pytest.mark.parametrize(
    ("far", "middle_mm"), [("infinity", 1000.0), ("2 m", 800.0), ("1 m", 2000.0 / 3.0)]
)
@pytest.mark.parametrize("bits", [8, 16, 32])
def test_an_inverse_map_is_linear_in_one_over_distance(here, load, far, middle_mm, bits):
    """Half way between 1/far and 1/0.5 m: harmonic means, computed by hand."""
    if bits == 32:
        tifffile.imwrite(here / "map.tif", np.full((ROWS, COLUMNS), 0.5, np.float32))
    else:
        top = 2**bits - 1
        codes = np.zeros((ROWS, COLUMNS), np.uint8 if bits == 8 else np.uint16)
        codes[: ROWS // 2] = top
        name = "map.tif" if bits == 8 else "map.png"
        Image.fromarray(codes).save(here / name)
    name = "map.png" if bits == 16 else "map.tif"
    scene = load(f'map = "{name}"\nkind = "inverse"\nnear = "0.5 m"\nfar = "{far}"\n')
    found = distances_of(scene)
    if bits == 32:
        np.testing.assert_allclose(found, middle_mm, **FLOAT32)
    else:
        assert found[0, 0] == pytest.approx(500.0, rel=2e-6)
        assert 0.5 * (1 / found[0, 0] + 1 / found[-1, 0]) == pytest.approx(1 / middle_mm, rel=2e-6)
    assert scene.notes == ()


@pytest.mark.parametrize("unit", ["mm", "cm", "m", "in", "ft"])
@pytest.mark.parametrize("kind", ["npy", "npz", "tif", "npy-columns", "npy-big", "npy-double"])
def test_decimal_numbers_in_every_unit_and_file(here, load, unit, kind):
    """1 in = 25.4 mm and 1 ft = 304.8 mm exactly (international yard and pound agreement, 1959)."""
    per_mm = {"mm": 1.0, "cm": 10.0, "m": 1000.0, "in": 25.4, "ft": 304.8}[unit]
    mm = np.linspace(400.0, 6000.0, ROWS * COLUMNS).reshape(ROWS, COLUMNS)
    mm[0, 0] = np.inf
    values = (mm / per_mm).astype(np.float32)
    name = f"map.{kind[:3]}"
    if kind == "tif":
        tifffile.imwrite(here / name, values)
    elif kind == "npz":
        np.savez(here / name, values, allow_pickle=False)
        name = rename_member(here / name, "arr_0.npy", "whatever.npy")
    elif kind == "npy-columns":
        np.save(here / name, np.asfortranarray(values))
    elif kind == "npy-big":
        np.save(here / name, values.astype(">f4"))
    else:
        np.save(here / name, values.astype(np.float64 if kind == "npy-double" else np.float32))
    scene = load(f'map = "{name}"\nunit = "{unit}"\n')
    np.testing.assert_allclose(distances_of(scene), mm, **FLOAT32)
    assert scene.distance.nearest_mm == pytest.approx(mm[0, 1], rel=1e-5)
    assert scene.distance.farthest_mm == math.inf
    assert here / name in scene.files


def rename_member(path, old, new):
    with zipfile.ZipFile(path) as archive:
        data = archive.read(old)
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr(new, data)
    return path.name


@pytest.mark.parametrize("name", ["distance", "depth"])
def test_of_several_arrays_the_one_called_distance_or_depth_counts(here, load, name):
    mm = np.full((ROWS, COLUMNS), 1234.0)
    np.savez(here / "map.npz", **{name: mm, "colour": np.zeros((2, 2, 3)), "other": mm * 2})
    scene = load('map = "map.npz"\nunit = "mm"\n')
    np.testing.assert_allclose(distances_of(scene), 1234.0, **FLOAT32)


def test_other_whole_numbers_are_taken_as_16_bits(here, load):
    np.save(here / "map.npy", np.full((ROWS, COLUMNS, 1), 2500, np.int64))
    scene = load('map = "map.npy"\nstep = "1 mm"\n')
    assert scene.distance.codes.dtype == np.uint16
    np.testing.assert_allclose(distances_of(scene), 2500.0, **FLOAT32)


# Panoramas ------------------------------------------------------------------------------------


def panorama_axis_share(view_deg):
    """Return what share of each ray of a panorama lies along its middle's axis."""
    per_rad = COLUMNS / math.radians(view_deg)
    up = (np.arange(ROWS) + 0.5 - ROWS / 2) / per_rad
    right = (np.arange(COLUMNS) + 0.5 - COLUMNS / 2) / per_rad
    ahead = np.empty((ROWS, COLUMNS, 3))
    ahead[..., 0] = np.cos(up)[:, None] * np.sin(right)
    ahead[..., 1] = np.sin(up)[:, None]
    ahead[..., 2] = np.cos(up)[:, None] * np.cos(right)
    return ahead[..., 2]


PANORAMA = 'projection = "equirectangular"\n'


def test_a_panorama_keeps_distances_along_the_ray(here, load):
    np.save(here / "map.npy", np.full((ROWS, COLUMNS), 3.0))
    for along in ("", 'along = "ray"\n'):
        scene = load(f'map = "map.npy"\nunit = "m"\n{along}', view_deg=200, head=PANORAMA)
        assert scene.distance.along == "ray"
        np.testing.assert_allclose(distances_of(scene), 3000.0, **FLOAT32)


def test_a_part_of_a_panorama_may_tell_distances_along_its_middle(here, load):
    """A wall 3 m ahead is 3 m / cos away along the ray; cosines from directions in space."""
    np.save(here / "map.npy", np.full((ROWS, COLUMNS), 3.0))
    scene = load('map = "map.npy"\nunit = "m"\nalong = "axis"\n', view_deg=120, head=PANORAMA)
    assert scene.distance.along == "ray"
    np.testing.assert_allclose(distances_of(scene), 3000.0 / panorama_axis_share(120.0), rtol=5e-6)
    with pytest.raises(
        SceneError, match=r"map.npy: a panorama that reaches sideways and back has no"
    ):
        load('map = "map.npy"\nunit = "m"\nalong = "axis"\n', view_deg=200, head=PANORAMA)


# Ground ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("pitch_deg", [0.0, 12.0, -9.0, 40.0])
def test_the_ground_of_a_camera_that_looks_down_or_up(pitch_deg):
    """Points on the ground 1.6 m below are turned by the pitch and projected.

    A camera turned down by p sees a point (y down, z ahead) at y' = y cos p - z sin p ahead by
    z' = y sin p + z cos p: rotation about the horizontal axis, elementary geometry.
    """
    rows, columns = 4000, 6000
    focal_px = 0.5 * columns / math.tan(math.radians(VIEW_DEG / 2))
    p = math.radians(pitch_deg)
    y, z = 1600.0, np.geomspace(1800.0, 200_000.0, 30)
    ahead = y * math.sin(p) + z * math.cos(p)
    row = rows / 2 + focal_px * (y * math.cos(p) - z * math.sin(p)) / ahead - 0.5
    seen = (row >= 0) & (row <= rows - 1)
    assert seen.sum() > 3
    horizon = 0.5 - math.tan(p) * focal_px / rows
    ground = Ground(camera_height_mm=1600.0, horizon_share=horizon)
    photo = photo_from_linear(np.ones((rows, 1), np.float32))
    made, notes = ground.lay(photo, focal_length_px=focal_px)
    column = made.inverse_mm(np.arange(rows), np.zeros(rows, int))
    # 1/Z is linear over the rows, so interpolation between whole rows is exact.
    found = np.interp(row[seen], np.arange(rows), column)
    np.testing.assert_allclose(found, 1.0 / ahead[seen], rtol=2e-5)
    assert (column[: max(0, math.floor(horizon * rows))] == 0.0).all()
    assert notes == ()


def test_level_ground_by_similar_triangles(load):
    """Level: Z = f h / (rows below the horizon); at the lower edge of a 90 deg square, Z = h."""
    scene = load('ground = { camera_height = "1.5 m", horizon_row = 0.5 }', view_deg=90)
    f = 45.0
    expected = f * 1500.0 / (np.arange(ROWS // 2) + 0.5)
    np.testing.assert_allclose(distances_of(scene)[ROWS // 2 :, 7], expected, **FLOAT32)
    assert np.isinf(distances_of(scene)[: ROWS // 2]).all()
    same = load('[distance.ground]\ncamera_height = "1.5 m"\nhorizon_row = "30 px"\n', view_deg=90)
    np.testing.assert_array_equal(distances_of(same), distances_of(scene))


def test_the_ground_may_end(load):
    scene = load('ground = { camera_height = "1.5 m", horizon_row = 0.5, far = "10 m" }')
    found = distances_of(scene)
    assert found[np.isfinite(found)].max() <= 10_000.0
    free = distances_of(load('ground = { camera_height = "1.5 m", horizon_row = 0.5 }'))
    np.testing.assert_array_equal(found, np.where(free > 10_000.0, np.inf, free))


def test_the_ground_of_a_panorama_is_measured_along_the_ray(load):
    """A right triangle: height over the sine of the angle below the horizon."""
    scene = load('ground = { camera_height = "2 m" }', view_deg=270, head=PANORAMA)
    assert scene.distance.along == "ray"
    below = (np.arange(ROWS // 2) + 0.5) * math.radians(270 / COLUMNS)
    np.testing.assert_allclose(
        distances_of(scene)[ROWS // 2 :, 3], 2000.0 / np.sin(below), **FLOAT32
    )
    assert scene.notes == ()
    with pytest.raises(SceneError, match=r"a panorama has its own horizon; leave it out"):
        load('ground = { camera_height = "2 m", horizon_row = 0.4 }', view_deg=270, head=PANORAMA)


def test_the_ground_of_a_tilted_panorama():
    """Ground points 1.5 m below are placed around, seen by a camera turned up 20 and rolled 10 deg.

    Turning by hand: first back by the pitch about the horizontal axis, then by the roll about the
    way it looks; elementary rotations.
    """
    from pinsim.scene.panorama import PanoramaPlace

    place = PanoramaPlace(full_width_px=3600, full_height_px=1800, pitch_deg=20.0, roll_deg=10.0)
    azimuth, away = np.meshgrid(np.radians(np.arange(5, 360, 10)), [800.0, 3000.0, 15_000.0])
    east, north, up = away * np.sin(azimuth), away * np.cos(azimuth), -1500.0
    p, r = math.radians(20.0), math.radians(10.0)
    ahead = north * math.cos(p) + up * math.sin(p)
    above = up * math.cos(p) - north * math.sin(p)
    # Rolled clockwise, the camera's own right points down to the right.
    across, above = (
        east * math.cos(r) - above * math.sin(r),
        east * math.sin(r) + above * math.cos(r),
    )
    length = np.sqrt(across**2 + above**2 + ahead**2)
    column = 1800.0 + np.arctan2(across, ahead) * 1800.0 / math.pi - 0.5
    row = 900.0 - np.arcsin(above / length) * 1800.0 / math.pi - 0.5
    made, _ = Ground(camera_height_mm=1500.0).lay(
        photo_from_linear(np.ones((1800, 3600), np.float32)), focal_length_px=1.0, panorama=place
    )
    found = made.inverse_mm(np.rint(row).astype(int), np.rint(column).astype(int) % 3600)
    # Half a pixel is 0.05 deg, which is sqrt(2) * 0.00087 of the height in its sine.
    np.testing.assert_allclose(found * 1500.0, 1500.0 / length, atol=1.3e-3)


# Planes ---------------------------------------------------------------------------------------

PLANES = """rest = "4 m"
[[distance.plane]]
distance = "0.4 m"
mask = "near.png"
[[distance.plane]]
distance = "2 m"
mask = "middle.png"
"""


def test_planes_lie_over_one_another_first_one_first(here, load):
    near, middle = np.zeros((2, ROWS, COLUMNS), np.uint8)
    near[:, :40], middle[:, 20:60] = 255, 128
    middle[:, 60:] = 127  # less than half of white, while 128 is more
    Image.fromarray(near).save(here / "near.png")
    Image.fromarray(middle.astype(np.uint16) * 257).save(here / "middle.png")
    scene = load(PLANES)
    expected = np.full((ROWS, COLUMNS), 4000.0)
    expected[:, 20:60] = 2000.0
    expected[:, :40] = 400.0
    np.testing.assert_allclose(distances_of(scene), expected, **FLOAT32)
    assert {here / "near.png", here / "middle.png"} <= set(scene.files)
    assert scene.distance.codes.dtype == np.uint8
    endless = load(PLANES.replace('rest = "4 m"\n', ""))
    assert np.isinf(distances_of(endless)[:, 60:]).all()


def test_a_mask_of_black_and_white_and_of_another_size(here, load):
    half = np.zeros((ROWS // 2, COLUMNS // 2), bool)
    half[:, : COLUMNS // 4] = True
    Image.fromarray(half).save(here / "near.png")
    Image.fromarray(~np.zeros((ROWS, COLUMNS), bool)).save(here / "middle.png")
    found = distances_of(load(PLANES))
    np.testing.assert_allclose(found[:, : 2 * (COLUMNS // 4)], 400.0, **FLOAT32)
    np.testing.assert_allclose(found[:, 2 * (COLUMNS // 4) :], 2000.0, **FLOAT32)


# Another size ---------------------------------------------------------------------------------

NEAR_MM, FAR_MM = 800.0, 5000.0


def two_planes(pole_px=32.0, noise=0.01, rows=600, columns=900):
    """Return a photo of a round thing and a slanted pole before a wall, and which pixels are near."""
    rng = np.random.default_rng(7)
    y, x = np.mgrid[:rows, :columns]
    near = np.hypot(x - 0.55 * columns, y - 0.5 * rows) < 0.3 * rows
    near |= np.abs(x - 0.1 * columns - 0.2 * y) < 0.5 * pole_px
    light = np.where(near[..., None], [0.30, 0.16, 0.10], [0.10, 0.20, 0.26])
    light = light + noise * rng.standard_normal((rows, columns, 1))
    return photo_from_linear(np.maximum(light, 0.0).astype(np.float32)), near


@pytest.mark.parametrize("shrink", [2, 5, 7.5, 12])
@pytest.mark.parametrize("smear", [1, 2, 3])
def test_an_edge_of_a_small_map_lies_on_the_edge_of_the_photo(shrink, smear):
    """A circle and a line drawn here; smeared as by whoever scaled the map with averaging.

    At most 3 photo pixels off, though one of the map is up to 12; nothing between the planes.
    The pole must be wider than the smear, or nothing of its distance is left in the map.
    """
    photo, near = two_planes(pole_px=max(32.0, 2.0 * smear * shrink))
    true = np.where(near, 1.0 / NEAR_MM, 1.0 / FAR_MM).astype(np.float32)
    small = at_size(true, (round(600 / shrink), round(900 / shrink)))
    found = fitted(uniform_filter(small, smear), photo)
    if smear == 1:
        assert set(np.unique(found)) == set(np.unique(true))
    to_near, to_far = np.abs(found * NEAR_MM - 1.0), np.abs(found * FAR_MM - 1.0)
    assert np.minimum(to_near, to_far).max() < 0.02
    wrong = (to_near < to_far) != near
    off_px = np.where(near, distance_transform_edt(near), distance_transform_edt(~near))
    # A box of even width moves the map by half a pixel of its own.
    assert off_px[wrong].max(initial=0.0) <= max(3.0, 0.5 * shrink if smear == 2 else 0.0)


def test_without_colours_the_map_alone_decides():
    """A grey photo tells nothing; the edge stays within half a map pixel, as with the nearest one."""
    _, near = two_planes()
    photo = photo_from_linear(np.full((600, 900, 3), 0.2, np.float32))
    true = np.where(near, 1.0 / NEAR_MM, 1.0 / FAR_MM).astype(np.float32)
    found = fitted(at_size(true, (75, 112)), photo)
    assert set(np.unique(found)) == set(np.unique(true))
    off_px = np.where(near, distance_transform_edt(near), distance_transform_edt(~near))
    assert off_px[found != true].max() <= 8.0 * math.sqrt(2.0)


def test_a_slanting_plane_is_no_staircase():
    """1/Z of a plane is linear over the picture: n.X = c with X = Z (x/f, y/f, 1)."""
    photo = photo_from_linear(np.full((600, 900, 3), 0.2, np.float32))
    rows, columns = np.mgrid[:600, :900]
    true = (1.0 / 4000.0 + rows * 1e-6 + columns * 5e-7).astype(np.float32)
    block = true.reshape(100, 6, 150, 6).mean(axis=(1, 3))
    found = fitted(block.astype(np.float32), photo)
    inside = slice(3, -3), slice(3, -3)  # beyond the outermost pixels' middles nothing is known
    np.testing.assert_allclose(found[inside], true[inside], rtol=1e-5)


def test_three_depths_meeting_stay_three(here):
    """Where more than two depths meet none of them is mixed with another."""
    depths = np.array([1 / 500.0, 1 / 1500.0, 0.0], np.float32)
    rows, columns = np.mgrid[:300, :450]
    which = np.where(columns < 200, 0, np.where(rows < 150, 1, 2))
    light = np.array([[0.4, 0.1, 0.1], [0.1, 0.4, 0.1], [0.1, 0.1, 0.4]], np.float32)[which]
    found = fitted(at_size(depths[which], (50, 75)), photo_from_linear(light))
    assert set(np.unique(found)) == set(depths)
    assert (found != depths[which]).mean() < 5e-4


@pytest.mark.parametrize("rise", [1.0, -1.0])
def test_a_thing_before_a_steep_slope_keeps_its_edge(rise):
    """A slope from 1.4 m to 3.3 m within few map pixels, and before it a thing a fifth nearer."""
    rows, columns = np.mgrid[:240, :360]
    floor = (0.5e-3 + rise * 0.4e-3 * ((rows % 80) / 80.0 - 0.5)).astype(np.float32)
    floor = np.where(rows // 80 == 1, floor, np.float32(0.7e-3))
    thing = (columns > 183) & (rows >= 80) & (rows < 160)
    true = np.where(thing, np.float32(0.85e-3), floor)
    light = np.where(thing[..., None], [0.4, 0.1, 0.1], [0.1, 0.1, 0.4]).astype(np.float32)
    found = fitted(at_size(true, (24, 36)), photo_from_linear(light))
    between = (found > 0.705e-3) & (found < 0.845e-3)
    assert not between.any()
    assert ((found > 0.8e-3) != thing).sum() <= 60


def test_twigs_have_no_distances_of_their_own():
    """A map in which each pixel is near, middle or far by chance: no fourth distance comes of it."""
    depths = np.array([1 / 900.0, 1 / 2000.0, 1 / 9000.0], np.float32)
    rng = np.random.default_rng(5)
    small = depths[rng.integers(0, 3, (40, 60))]
    light = rng.random((240, 360, 3)).astype(np.float32)
    assert set(np.unique(fitted(small, photo_from_linear(light)))) == set(depths)


@pytest.mark.parametrize("gap_px", [8, 10, 12])
def test_colour_moves_an_edge_by_one_map_pixel_at_most(gap_px):
    """Behind a red thing's edge a red stripe hangs on the far blue wall, a map pixel away or more."""
    columns = np.arange(720)
    near = np.broadcast_to(columns < 400, (480, 720))
    red = near | np.broadcast_to((columns >= 400 + gap_px) & (columns < 424), near.shape)
    light = np.where(red[..., None], [0.4, 0.1, 0.1], [0.1, 0.1, 0.4]).astype(np.float32)
    true = np.where(near, np.float32(1 / NEAR_MM), np.float32(1 / FAR_MM))
    found = fitted(at_size(true, (60, 90)), photo_from_linear(light))
    np.testing.assert_array_equal(found, true)


@pytest.mark.parametrize(("rows", "columns"), [(20, 30), (40, 60), (120, 180), (601, 900)])
def test_a_map_of_another_size_is_brought_to_the_photo(here, load, rows, columns):
    """Two halves, 1 m and 3 m: whatever the size, halves remain, and nothing lies between."""
    mm = np.where(np.arange(columns) < columns / 2, 1000, 3000).astype(np.uint16)
    Image.fromarray(np.broadcast_to(mm, (rows, columns)).copy()).save(here / "map.png")
    scene = load('map = "map.png"\nstep = "1 mm"\n')
    found = distances_of(scene)
    assert scene.distance.shape == (ROWS, COLUMNS)
    np.testing.assert_allclose(found[:, :44], 1000.0, **FLOAT32)
    np.testing.assert_allclose(found[:, 46:], 3000.0, **FLOAT32)
    assert np.isclose(found, 1000.0).sum() + np.isclose(found, 3000.0).sum() == found.size
    note = f"the distance map of {columns} x {rows} px was brought to the photo's 90 x 60 px"
    assert note in scene.notes
    if rows > ROWS:
        assert scene.distance.codes.dtype == np.uint16


# Holes ----------------------------------------------------------------------------------------


@pytest.fixture
def holed(here):
    """Two halves of a photo, red at 1 m and blue at 3 m; where they meet the map has a wide hole.

    What is nearest in the picture would be right only up to the hole's middle, five pixels off.
    """
    codes = np.zeros((ROWS, COLUMNS, 3), np.uint8)
    codes[:, :45], codes[:, 45:] = (200, 60, 50), (40, 70, 180)
    Image.fromarray(codes).save(here / "photo.png")
    mm = np.full((ROWS, COLUMNS), 1000, np.uint16)
    mm[:, 45:] = 3000
    true = mm.copy()
    mm[:, 30:70] = 0
    Image.fromarray(mm).save(here / "map.png")
    tifffile.imwrite(here / "zero.tif", mm.astype(np.float32))
    tifffile.imwrite(here / "nan.tif", np.where(mm == 0, np.nan, mm).astype(np.float32))
    return true


SHARE = f"{100 * 40 / COLUMNS:.1f} %"


@pytest.mark.parametrize("name", ["map.png", "zero.tif", "nan.tif"])
def test_holes_are_filled_up_to_the_photos_edge(holed, load, name):
    scene = load(f'map = "{name}"\nstep = "1 mm"\nholes = "fill"\n')
    found = distances_of(scene)
    assert np.isfinite(found).all()
    # The edge of the gradient is two pixels wide, and either side may have them.
    np.testing.assert_allclose(np.delete(found, [44, 45], 1), np.delete(holed, [44, 45], 1), 2e-6)
    assert np.isclose(found, 1000.0).sum() + np.isclose(found, 3000.0).sum() == found.size
    assert f"{SHARE} of the distance map were holes, filled from what is around them" in scene.notes


@pytest.mark.parametrize("name", ["map.png", "zero.tif", "nan.tif"])
def test_holes_may_be_infinitely_far(holed, load, name):
    scene = load(f'map = "{name}"\nstep = "1 mm"\nholes = "far"\n')
    assert np.isinf(distances_of(scene)[:, 30:70]).all()
    assert np.isfinite(distances_of(scene)).sum() == ROWS * (COLUMNS - 40)
    assert scene.notes == ()


def test_unstated_zeros_are_far_and_told_and_nan_is_refused(holed, load):
    scene = load('map = "map.png"\nstep = "1 mm"\n')
    assert np.isinf(distances_of(scene)[:, 30:70]).all()
    assert any(note.startswith(f"{SHARE} of the distance map are 0, taken") for note in scene.notes)
    with pytest.raises(SceneError, match=r'2400 distances are NaN.*holes = "far".*holes = "fill"'):
        load('map = "nan.tif"\nstep = "1 mm"\n')


def test_holes_of_a_large_map_are_filled_with_whole_values(here, monkeypatch):
    """On the coarser grid that large maps are filled on, too."""
    from pinsim.scene import fit

    monkeypatch.setattr(fit, "_FILL_PX", 1500)
    rng = np.random.default_rng(3)
    codes = np.where(np.arange(COLUMNS) < 45, 1000, 3000).astype(np.uint16)
    codes = np.broadcast_to(codes, (ROWS, COLUMNS)).copy()
    holes = rng.random(codes.shape) < 0.1
    holes[20:40, 10:30] = True
    light = np.where(codes[..., None] == 1000, [0.4, 0.1, 0.1], [0.1, 0.1, 0.4])
    result = fit.filled(codes * ~holes, holes, photo_from_linear(light))
    assert set(np.unique(result)) == {1000, 3000}
    assert (result[:, :40] == 1000).all()
    assert (result[:, 50:] == 3000).all()


# From Python and on the line ------------------------------------------------------------------


def test_distances_of_numbers(frozen):
    mm = frozen([[1000.0, 2000.0, 0.0], [500.0, math.inf, 4000.0]])
    scene = Scene.from_light(np.ones((2, 3), np.float32), horizontal_view_deg=60, distance_mm=mm)
    np.testing.assert_allclose(distances_of(scene), np.where(mm == 0, np.inf, mm), **FLOAT32)
    assert scene.distance.nearest_mm == pytest.approx(500.0, rel=1e-7)
    assert scene.distance.farthest_mm == math.inf
    assert not scene.distance.codes.flags.writeable
    for wrong, text in (
        (np.array([[math.nan]]), "NaN or numbers below 0"),
        (np.array([[-5.0]]), "NaN or numbers below 0"),
        (np.array([5.0]), r"shape \(1,\)"),
        (np.array([[0.5]]), "nearest distance is 0.5 mm, too near to draw"),
    ):
        with pytest.raises(SceneError, match=text):
            DistanceMap.from_distances(wrong)
    with pytest.raises(SceneError, match="of 3 x 2 pixels but the photo is 5 x 4"):
        Scene.from_light(np.ones((4, 5), np.float32), horizontal_view_deg=60, distance_mm=mm)


def test_python_and_the_scene_file_say_the_same(holed, here, load):
    meant = MapFile(path=here / "map.png", step_mm=1.0, along="ray", holes="fill")
    typed = Scene.load(here / "photo.png", horizontal_view_deg=VIEW_DEG, distances=meant)
    written = load('map = "map.png"\nstep = "1 mm"\nalong = "ray"\nholes = "fill"\n')
    np.testing.assert_array_equal(distances_of(typed), distances_of(written))
    mask = Plane(distance_mm=700.0, mask=here / "map.png")
    with pytest.raises(SceneError, match=r"map.png has no white; paint white what is 700 mm away"):
        Scene.load(here / "photo.png", horizontal_view_deg=50, distances=Planes(planes=(mask,)))


LINES = {
    ("--distance-map", "map.png", "--map-step", "1mm", "--holes", "fill", "--map-along", "ray"): (
        'map = "map.png"\nstep = "1 mm"\nholes = "fill"\nalong = "ray"\n'
    ),
    ("--distance-map", "nan.tif", "--map-unit", "mm", "--holes", "far"): (
        'map = "nan.tif"\nunit = "mm"\nholes = "far"\n'
    ),
    (
        *("--distance-map", "map.png", "--map-kind", "inverse", "--near", "50cm"),
        *("--far", "infinity"),
    ): 'map = "map.png"\nkind = "inverse"\nnear = "50 cm"\nfar = "infinity"\n',
    (
        *("--distance-map", "map.png", "--map-kind", "disparity", "--baseline", "65mm"),
        *("--map-step", "1/256 px", "--map-focal-length", "1200px"),
    ): (
        'map = "map.png"\nkind = "disparity"\nstep = "0.00390625 px"\nbaseline = "6.5 cm"\n'
        'focal_length_px = "1200 px"\n'
    ),
    ("--ground", "1.6m", "--horizon", "0.4", "--far", "20m"): (
        'ground = { camera_height = "160 cm", horizon_row = 0.4, far = "20 m" }'
    ),
    ("--ground", "1.6m", "--horizon", "12px"): (
        'ground = { camera_height = "1.6 m", horizon_row = "12 px" }'
    ),
}


@pytest.mark.parametrize("line", LINES, ids=lambda line: " ".join(line)[:60])
def test_the_line_and_the_scene_file_say_the_same(holed, load, here, monkeypatch, line):
    import click

    from pinsim.cli.preview import command
    from pinsim.cli.scenes import load_scene

    monkeypatch.chdir(here)
    written = load(LINES[line])
    options = command.make_context("preview", ["photo.png", "--view", f"{VIEW_DEG}deg", *line])
    assert isinstance(options, click.Context)
    typed = load_scene("photo.png", options.params)
    np.testing.assert_array_equal(distances_of(typed), distances_of(written))


def test_a_preview_with_ground_runs(here, run):
    arguments = ("--view", "60deg", "--ground", "1.2m", *TYPED_CAMERA, "-o", "out.png")
    code, out, err = run("preview", "photo.png", *arguments)
    assert (code, err) == (0, "")
    assert "note: horizon taken as the photo's middle" in out


# Bad input ------------------------------------------------------------------------------------


@pytest.fixture
def folder(here):
    """Return a folder of maps that are right or wrong in one way each."""
    good = np.full((ROWS, COLUMNS), 2000, np.uint16)
    Image.fromarray(good).save(here / "map.png")
    Image.fromarray(np.full((ROWS, COLUMNS), 200, np.uint8)).save(here / "mask.png")
    Image.fromarray(np.zeros((ROWS, COLUMNS), np.uint8)).save(here / "black.png")
    Image.fromarray(np.full((40, 70), 200, np.uint8)).save(here / "other.png")
    Image.fromarray(good.T.copy()).save(here / "turned.png")
    Image.fromarray(good[::3, ::3].T.copy()).save(here / "small-turned.png")
    Image.fromarray(np.ones((ROWS, COLUMNS), bool)).save(here / "bits.png")
    decimal = good.astype(np.float32)
    tifffile.imwrite(here / "map.tif", decimal)
    tifffile.imwrite(here / "two.tif", decimal / 1000.0)
    arrays = {
        "objects": np.array([[{}, 1], [2, 3]], object),
        "complex": decimal.astype(complex),
        "flat": decimal.ravel(),
        "deep": np.zeros((ROWS, COLUMNS, 3), np.float32),
        "empty": np.zeros((0, 5)),
        "negative": -decimal,
        "signed": -good.astype(np.int32),
        "huge": good.astype(np.int64) * 1000,
        "nan": decimal * np.nan,
        "bool": decimal > 0,
        "text": np.full((ROWS, COLUMNS), "2 m"),
    }
    for name, array in arrays.items():
        np.save(here / f"{name}.npy", array, allow_pickle=name == "objects")
    np.save(here / "cut.npy", decimal)
    cut = (here / "cut.npy").read_bytes()
    (here / "cut.npy").write_bytes(cut[:500])
    (here / "head.npy").write_bytes(cut[:60])
    (here / "claims.npy").write_bytes(
        cut.replace(b"(60, 90), ", b"(60000, 90000), ").replace(b" " * 10, b"    ", 1)
    )
    (here / "version.npy").write_bytes(cut[:6] + b"\x09" + cut[7:])
    (here / "text.npz").write_text("no numbers")
    np.savez(here / "several.npz", left=decimal, right=decimal)
    np.savez(here / "none.npz")
    np.savez(here / "sound.npz", decimal)
    (here / "cut.npz").write_bytes((here / "sound.npz").read_bytes()[:3000])
    return here


MAP = 'map = "map.png"\nstep = "1 mm"\n'
WRONG = {
    'map = "other.png"\nstep = "1 cm"': "other.png is 70 x 40 pixels but the photo is 90 x 60. Save",
    'map = "turned.png"\nstep = "1 cm"': "turned.png is 60 x 90 .* It looks turned: rotate it",
    'map = "small-turned.png"\nstep = "1 cm"': "is 20 x 30 .* It looks turned: rotate it",
    'map = "bits.png"\nstep = "1 cm"': "bits.png is only black and white",
    'map = "map.tif"': 'map.tif holds numbers without a unit.*unit = "m".*--map-unit m',
    'map = "map.png"': 'map.png: what does one code value.*--map-step 1mm.*step = "1 mm"',
    'map = "gone.npy"\nunit = "m"': "gone.npy: no such file; give the path of a distance map",
    MAP + 'unit = "m"': r"\[distance\]: step and .*unit exclude each other",
    'map = "map.tif"\nunit = "yard"': "unit is 'yard'; it must be one of: cm, ft, in, m, mm",
    'map = "map.tif"\nunit = "m "': "unit is 'm '.* Did you mean",
    'map = "map.tif"\nunit = "m"': None,
    'map = "two.tif"\nunit = "mm"': "half of it|nearest distance is 2 mm|2 mm, which is within",
    'map = "map.png"\nstep = "0.01 mm"': "half of it is nearer than 20 mm.*is the step or unit, 0.01",
    'map = "map.png"\nstep = "1/10000 mm"': "nearest distance is 0.2 mm, too near to draw",
    'map = "map.tif"\nstep = "10 m"': None,
    'map = "huge.npy"\nstep = "1 m"': "huge.npy: whole numbers up to 2000000 do not fit 16 bits",
    'map = "objects.npy"\nunit = "m"': "objects.npy holds values of type object; a map is numbers",
    'map = "complex.npy"\nunit = "m"': "complex.npy holds values of type complex",
    'map = "text.npy"\nunit = "m"': "text.npy holds values of type <U3",
    'map = "bool.npy"\nunit = "m"': "bool.npy holds values of type bool",
    'map = "flat.npy"\nunit = "m"': r"flat.npy holds an array of shape \(5400,\); a map is",
    'map = "deep.npy"\nunit = "m"': r"deep.npy holds an array of shape \(60, 90, 3\)",
    'map = "empty.npy"\nunit = "m"': r"empty.npy holds an array of shape \(0, 5\)",
    'map = "negative.npy"\nunit = "mm"': "distances go down to -2000 mm; they start at 0",
    'map = "signed.npy"\nunit = "mm"': "numbers go down to -2000; they start at 0",
    'map = "nan.npy"\nunit = "mm"\nholes = "fill"': "nan.npy holds nothing but NaN",
    'map = "black.png"\nstep = "1 mm"\nholes = "fill"': "black.png has holes only: not one distance",
    'map = "cut.npy"\nunit = "mm"': "cut.npy is damaged or cut short",
    'map = "head.npy"\nunit = "mm"': "head.npy is damaged or cut short",
    'map = "claims.npy"\nunit = "mm"': "claims.npy: 5400 megapixels is more than the",
    'map = "version.npy"\nunit = "mm"': "version.npy (holds no plain numbers|is damaged)",
    'map = "text.npz"\nunit = "mm"': "text.npz is no numpy file, whatever its ending",
    'map = "cut.npz"\nunit = "mm"': "cut.npz is damaged or cut short",
    'map = "several.npz"\nunit = "mm"': "several.npz holds these arrays: 'left', 'right'; the map must",
    'map = "none.npz"\nunit = "mm"': "none.npz (holds these arrays: none|is no numpy file)",
    MAP + 'along = "wall"': "along is 'wall'; it must be one of: axis, ray",
    MAP + 'holes = "near"': "holes is 'near'; it must be one of: far, fill",
    MAP + 'kind = "depth"': "kind is 'depth'; it must be one of: disparity, distance, inverse",
    MAP + 'near = "1 m"': "map.png: near belongs to a map of kind 'inverse', and this is",
    MAP + 'baseline = "65 mm"': "a baseline belongs to a map of kind 'disparity'",
    MAP + "focal_length_px = 900": "a focal length of the map belongs to .* 'disparity'",
    MAP + 'kind = "inverse"': "a step belongs to a map of kind 'distance', and this is one of",
    MAP + 'rest = "4 m"': "rest belongs to planes",
    MAP + 'hole = "far"': "unknown key 'hole'. Did you mean 'holes'",
    'map = "map.png"\nstpe = "1 mm"': "unknown key 'stpe'. Did you mean 'step'",
    'map = "map.png"\nkind = "inverse"': 'needs the distances of.*near = "0.5 m".*--near 0.5m --far',
    'map = "map.png"\nkind = "inverse"\nnear = "0.5 m"': "needs the distances of",
    'map = "map.png"\nkind = "inverse"\nnear = "2 m"\nfar = "1 m"': (
        "near, 2 m, is not nearer than far, 1 m; near belongs to the map's highest value"
    ),
    'map = "map.png"\nkind = "inverse"\nnear = "0.1 mm"\nfar = "1 m"': "near is 0.1 mm; it must be 1",
    'map = "map.tif"\nkind = "inverse"\nnear = "1 m"\nfar = "2 m"': "go from 0 .* to 1 .* 2000",
    'map = "map.png"\nkind = "disparity"\nstep = "1 px"': "how far apart its two pictures were taken",
    'map = "map.png"\nkind = "disparity"\nbaseline = "6 cm"': "how many pixels of disparity is one",
    'map = "map.png"\nkind = "disparity"\nbaseline = "6 cm"\nstep = "1 mm"': (
        "the unit of '1 mm' is not one of px"
    ),
    'map = "map.png"\nkind = "disparity"\nbaseline = "0 mm"\nstep = "1 px"': "baseline is 0 mm",
    'map = "map.png"\nkind = "disparity"\nbaseline = "6 cm"\nstep = "0 px"': "step is 0 px; it must",
    'map = "map.png"\nkind = "disparity"\nbaseline = "6 cm"\nstep = "1 px"\nalong = "ray"': (
        "a disparity always gives the distance along the axis"
    ),
    'map = "map.png"\nkind = "disparity"\nbaseline = "6 cm"\nstep = "1 px"': (
        "half of it is nearer than .* are step, baseline and focal length right"
    ),
    'map = "map.png"\nkind = "disparity"\nbaseline = "6 cm"\nstep = "1 px"\nfocal_length_px = true': (
        "focal_length_px is True"
    ),
    'map = "negative.npy"\nkind = "disparity"\nbaseline = "6 cm"': "disparities go down to -2000 px",
    'kind = "inverse"': 'a kind belongs to a map; write map = "FILE" beside it',
    'constant = "4 m"\nfar = "9 m"': "far belongs to a map",
    'constant = "4 m"\nground = { camera_height = "1 m" }': "constant and ground exclude each other",
    MAP + '[[distance.plane]]\ndistance = "1 m"\nmask = "mask.png"': "map and plane exclude each",
    'camera_height = "1.6 m"': "unknown key 'camera_height'.*ground",
    "ground = { horizon_row = 0.5 }": r"\[ground\]: camera_height is missing; write for example",
    'ground = { camera_height = "0 m" }': r"\[ground\]: camera_height is 0 mm; it must be 1 to",
    "ground = { camera_height = 1.6 }": "camera_height is 1.6, a number without a unit",
    'ground = { camera_height = "1 m", horizon = 0.4 }': "unknown key 'horizon'. Did you mean 'horiz",
    'ground = { camera_height = "1 m", horizon_row = 812 }': "horizon_row is 812.*write '812 px'",
    'ground = { camera_height = "1 m", horizon_row = "8 mm" }': "unit of '8 mm' is not one of px",
    'ground = { camera_height = "1 m", horizon_row = true }': "horizon_row is True; write a share",
    'ground = { camera_height = "1 m", horizon_row = nan }': "horizon_row is nan",
    'ground = { camera_height = "1 m", horizon_row = "61 px" }': (
        "scene.toml: the horizon is 61 px below the photo's top, which is only 60 px high"
    ),
    'ground = { camera_height = "1 m", horizon_row = "-2000 px" }': "camera pointing 88 deg down",
    'ground = { camera_height = "1 m", far = "0.1 mm" }': "far is 0.1 mm; it must be 1 to inf",
    "ground = 5": r"\[ground\] is 5; it must be a table",
    'rest = "4 m"': r"rest belongs to planes; write \[\[distance.plane\]\]",
    "[[distance.plane]]\n": r"plane 1: distance is missing; write for example: distance = ",
    '[[distance.plane]]\ndistance = "1 m"': "plane 1: mask is missing",
    '[[distance.plane]]\ndistance = "1 m"\nmask = 4': "plane 1: mask is 4; it must be a file name",
    '[[distance.plane]]\ndistance = "1 m"\nmaks = "a"': "unknown key 'maks'. Did you mean 'mask'",
    '[[distance.plane]]\ndistance = "0.1 mm"\nmask = "mask.png"': "mask.png: the plane's distance is",
    '[[distance.plane]]\ndistance = "1 m"\nmask = "black.png"': "black.png has no white",
    '[[distance.plane]]\ndistance = "1 m"\nmask = "gone.png"': "gone.png: no such file; .* mask",
    '[[distance.plane]]\ndistance = "1 m"\nmask = "other.png"': "other.png is 70 x 40 .* Save the mask",
    'plane = "near.png"': r"plane 1 is 'near.png'; it must be a table",
    "plane = []": "0 planes are given; it must be 1 to 255",
}


@pytest.mark.parametrize("table", WRONG, ids=lambda table: ascii(table)[:60])
def test_a_wrong_table_is_refused_in_one_line(folder, run, table):
    text = f'photo = "photo.png"\nhorizontal_view = "70 deg"\n[distance]\n{table}\n'
    (folder / "scene.toml").write_text(text, encoding="utf-8")
    before = contents(folder)
    code, _, err = run("preview", "scene.toml", *TYPED_CAMERA, "-o", "out.png")
    if WRONG[table] is None:
        assert (code, err) == (0, "")
        return
    assert code == 2, err
    assert err.startswith("pinsim: ")
    assert err.count("\n") == 1
    assert err.isascii()
    assert re.search(WRONG[table], err), err
    assert contents(folder) == before


WRONG_LINES = {
    ("--map-unit", "m"): r"--map-unit needs a distance map \(--distance-map FILE\)",
    ("--holes", "fill"): "--holes needs a distance map",
    ("--far", "20m"): "--far needs a distance map",
    ("--horizon", "0.4"): r"a horizon needs the camera's height above the ground \(--ground 1.6m\)",
    ("--ground", "1.6"): "--ground: '1.6' has no unit",
    ("--ground", "1.6m", "--horizon", "4"): "--horizon is 4; as a share .*write '4 px'",
    ("--ground", "1.6m", "--horizon", "low"): "--horizon: cannot read 'low'",
    ("--ground", "1.6m", "--near", "1m"): "--near needs a distance map",
    ("--ground", "1.6m", "--distance", "4m"): "exclude each other; keep one",
    ("--ground", "1.6m", "--distance-map", "map.png"): "a distance map and a ground exclude each",
    (
        "--distance-map",
        "map.png",
        "--map-step",
        "1px",
    ): "--map-step: the unit of '1px' is not one of",
    ("--distance-map", "map.png", "--map-unit", "mile"): "'mile' is not one of 'mm', 'cm'",
    ("--distance-map", "map.png", "--map-step", "1mm", "--map-unit", "m"): (
        "--map-step and --map-unit exclude each other"
    ),
    ("--distance-map", "map.png", "--map-kind", "inverse", "--near", "1m", "--far", "x"): (
        "--far: cannot read 'x'"
    ),
    ("--distance-map", ""): "--distance-map is empty",
}


@pytest.mark.parametrize("line", WRONG_LINES, ids=lambda line: " ".join(line)[:60])
def test_a_wrong_line_is_refused(folder, run, line):
    code, _, err = run("preview", "photo.png", "--view", "70deg", *TYPED_CAMERA, *line)
    assert code == 2, err
    assert err.count("\n") == 1
    assert re.search(WRONG_LINES[line], err), err


def test_everything_beyond_the_horizon_is_a_wrong_unit(folder, load):
    np.save(folder / "map.npy", np.full((ROWS, COLUMNS), 2e8))
    with pytest.raises(SceneError, match=r"everything is farther than 100 km, the nearest 200 km"):
        load('map = "map.npy"\nunit = "mm"\n')


class Harmful:
    def __reduce__(self):
        return Path.touch, (Path("touched"),)


@pytest.mark.parametrize("name", ["map.npy", "map.npz"])
def test_a_map_never_runs_what_it_carries(folder, run, name):
    """Pickled objects can carry any command (Python's documentation of pickle warns of it)."""
    array = np.array([[Harmful()]], object)
    if name.endswith("npz"):
        np.savez(folder / name, depth=array)
    else:
        np.save(folder / name, array)
    run("preview", "photo.png", "--view", "70deg", *TYPED_CAMERA, "--distance-map", name)
    assert not (folder / "touched").exists()
    pickle.loads(pickle.dumps(Harmful()))  # the check itself: read as objects it would run
    assert (folder / "touched").exists()


def test_a_wrong_record_is_refused(here):
    for wrong, text in (
        ({"kind": "depth"}, "kind is 'depth'"),
        ({"along": "wall"}, "along is 'wall'"),
        ({"holes": "near"}, "holes is 'near'"),
        ({"step_mm": 0.0}, "the map's step is 0 mm"),
        ({"step_mm": math.nan}, "the map's step is nan mm"),
    ):
        with pytest.raises(SceneError, match=text):
            MapFile(path=here / "map.png", **wrong)
    with pytest.raises(SceneError, match="keep one of them"):
        Ground(camera_height_mm=1000.0, horizon_share=0.5, horizon_px=3.0)
    with pytest.raises(UnitError, match="cannot read 'low'"):
        horizon_from("low", "--horizon")


# The page -------------------------------------------------------------------------------------

PAGE = Path(__file__).resolve().parents[1] / "docs" / "how-far.md"
EXAMPLES = re.findall(r"^```toml\n(.*?)^```$", PAGE.read_text("utf-8"), re.MULTILINE | re.DOTALL)


def test_the_page_has_examples():
    assert len(EXAMPLES) >= 2


@pytest.mark.parametrize("table", EXAMPLES)
def test_an_example_of_the_page_loads(here, table):
    half = np.zeros((ROWS, COLUMNS), np.uint8)
    half[:, :30] = 255
    for name in re.findall(r'"([\w-]+\.png)"', table):
        Image.fromarray(half).save(here / name)
    text = f'photo = "photo.png"\nhorizontal_view = "70 deg"\n{table}'
    (here / "scene.toml").write_text(text, encoding="utf-8")
    assert isinstance(Scene.load(here / "scene.toml").distance, DistanceMap)


@pytest.mark.parametrize(
    "key", ["step", "unit", "kind", "along", "holes", "near", "far", "baseline"]
)
def test_the_page_tells_of_every_key(key):
    assert f"`{key}" in PAGE.read_text("utf-8")
