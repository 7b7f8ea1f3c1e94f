"""Traced holes: scans of known size, made here pixel by pixel, against what is found in them.

Where nothing else is said, the expected value is plane geometry: the area of a circle, an ellipse or
a closed curve in polar form, and the axes of an ellipse (closed forms, from memory). A scan is made by
counting which of 8 x 8 points in each pixel lie in the hole, then softened by a Gaussian.
"""

import json
import math
from pathlib import Path

import imagecodecs
import numpy as np
import pytest
import tifffile
from PIL import Image
from scipy import ndimage
from scipy.special import j1

import pinsim
from pinsim.camera import Camera, Film, Hole
from pinsim.errors import DesignError, OutputError, SceneError
from pinsim.optics import Traced, film_otf, round_otf
from pinsim.scene.photo import photo_from_linear
from pinsim.sheets.hole_overlay import hole_overlay
from pinsim.tracing import Scale, measure_hole, read_reference, trace_hole
from pinsim.tracing.outline import area_and_centroid, clear_cells

UM = 1e-3
FINE = 8  # points counted along each side of a pixel


# --- scans of known holes ------------------------------------------------------------------------


def covered(shape, inside):
    """Return the share of each pixel that lies in a hole. inside(x, y) : column and row, pixel middles
    at whole numbers."""
    offsets = (np.arange(FINE) + 0.5) / FINE - 0.5
    y = (np.arange(shape[0])[:, None] + offsets).ravel()
    x = (np.arange(shape[1])[:, None] + offsets).ravel()
    hits = inside(x[None, :], y[:, None])
    return hits.reshape(shape[0], FINE, shape[1], FINE).mean(axis=(1, 3))


def disc(diameter_px, x0, y0):
    return lambda x, y: (x - x0) ** 2 + (y - y0) ** 2 < 0.25 * diameter_px**2


def ellipse(long_px, short_px, turn_deg, x0, y0):
    c, s = math.cos(math.radians(turn_deg)), math.sin(math.radians(turn_deg))

    def inside(x, y):
        along = (x - x0) * c - (y - y0) * s  # rows run down, angles go up
        across = (x - x0) * s + (y - y0) * c
        return (along / long_px) ** 2 + (across / short_px) ** 2 < 0.25

    return inside


def polar(radius, x0, y0):
    """A hole r < radius(angle), the angle from right through up."""
    return lambda x, y: np.hypot(x - x0, y - y0) < radius(np.arctan2(y0 - y, x - x0))


def lit(share, *, hole=0.7, plate=0.05, soft_px=1.0, tilt=(0.0, 0.0), noise=0.0, seed=0):
    """Return linear light, (rows, columns): a lamp that falls off to one side, and noise."""
    share = ndimage.gaussian_filter(share, soft_px) if soft_px else share
    y, x = np.mgrid[-1 : 1 : share.shape[0] * 1j, -1 : 1 : share.shape[1] * 1j]
    light = (plate + (hole - plate) * share) * (1.0 + tilt[0] * x + tilt[1] * y)
    light = light + noise * np.random.default_rng(seed).standard_normal(share.shape)
    return np.clip(light, 0.0, 1.0).astype(np.float32)


def srgb(light):
    """IEC 61966-2-1 written anew, so that a slip in pinsim's own cannot hide."""
    light = np.asarray(light, np.float64)
    return np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055)


def write_scan(path: Path, light, *, quality=95):
    """Write grey light as an sRGB file; the ending says which: .png, .jpg (8 bits), .png16, .tif."""
    if path.name.endswith(".16.png"):
        path.write_bytes(imagecodecs.png_encode(np.round(srgb(light) * 65535).astype(np.uint16)))
        return path
    if path.suffix == ".tif":
        tifffile.imwrite(path, np.round(srgb(light) * 65535).astype(np.uint16))
        return path
    codes = np.round(srgb(light) * 255).astype(np.uint8)
    image = Image.fromarray(np.repeat(codes[..., None], 3, axis=2))
    image.save(path, **({"quality": quality} if path.suffix == ".jpg" else {}))
    return path


BRIGHT = {"hole": 0.7, "plate": 0.05}
DARK = {"hole": 0.05, "plate": 0.6}
SIDES = pytest.mark.parametrize("side", [BRIGHT, DARK], ids=["bright", "dark"])


# --- how large -----------------------------------------------------------------------------------

# What scanners and macro photos do, and how far the diameter may be off then.
CONDITIONS = {
    "ideal": ({}, 1e-3),
    "hard edge": ({"soft_px": 0.0}, 1e-3),
    "soft": ({"soft_px": 2.5}, 1e-3),
    "lamp from one side": ({"tilt": (0.6, -0.3)}, 1e-3),
    "noise": ({"noise": 0.03}, 2e-3),
    "lamp and much noise": ({"tilt": (0.4, 0.3), "noise": 0.06}, 4e-3),
}


@SIDES
@pytest.mark.parametrize("condition", CONDITIONS)
@pytest.mark.parametrize("diameter_px", [60.0, 151.3])
def test_a_round_hole_has_its_diameter(condition, diameter_px, side, frozen):
    how, limit = CONDITIONS[condition]
    size = round(2.2 * diameter_px)
    x0, y0 = 0.5 * size + 0.37, 0.5 * size - 0.21
    light = frozen(lit(covered((size, size + 9), disc(diameter_px, x0, y0)), **side, **how))
    hole = measure_hole(light, pixel_mm=2.0 * UM)
    assert hole.polarity == ("bright" if side is BRIGHT else "dark")
    assert hole.area_equivalent_diameter_mm == pytest.approx(diameter_px * 2.0 * UM, rel=limit)
    assert hole.longest_mm == pytest.approx(diameter_px * 2.0 * UM, rel=0.01)
    assert hole.shortest_mm == pytest.approx(diameter_px * 2.0 * UM, rel=0.01)
    assert hole.centroid_px == pytest.approx((x0, y0), abs=0.1)
    assert hole.circularity == pytest.approx(1.0, abs=0.01)
    assert hole.roughness_mm < 0.002 * diameter_px * 2.0 * UM


@pytest.mark.parametrize("shift_px", [0.0, 0.13, 0.25, 0.5, 0.77])
def test_where_the_pixels_lie_does_not_change_the_diameter(shift_px):
    share = covered((100, 100), disc(40.0, 50.0 + shift_px, 50.0 - 0.6 * shift_px))
    hole = measure_hole(lit(share, soft_px=0.7), pixel_mm=UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(40.0 * UM, rel=1e-3)
    assert hole.centroid_px == pytest.approx((50.0 + shift_px, 50.0 - 0.6 * shift_px), abs=0.02)


# Few pixels, soft edge: the half-way line of a small blurred disc lies inside its edge, here by 0.9 %.
@pytest.mark.parametrize("soft_px", [0.5, 1.0, 2.0])
@pytest.mark.parametrize("diameter_px", [21.0, 25.5])
def test_the_smallest_holes_that_are_taken_have_their_diameter(diameter_px, soft_px):
    light = lit(covered((64, 64), disc(diameter_px, 31.6, 32.2)), soft_px=soft_px, noise=0.01)
    hole = measure_hole(light, pixel_mm=UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(diameter_px * UM, rel=3e-3)


@SIDES
@pytest.mark.parametrize("turn_deg", [0.0, 30.0, 115.0])
def test_an_oval_has_its_two_axes(turn_deg, side):
    light = lit(
        covered((230, 240), ellipse(150.0, 100.0, turn_deg, 120.3, 114.8)),
        **side,
        tilt=(0.3, 0.3),
        noise=0.02,
    )
    hole = measure_hole(light, pixel_mm=UM)
    assert hole.longest_mm == pytest.approx(150.0 * UM, rel=0.01)
    assert hole.shortest_mm == pytest.approx(100.0 * UM, rel=0.01)
    assert hole.area_equivalent_diameter_mm == pytest.approx(math.sqrt(15000.0) * UM, rel=2e-3)
    # An oval hole is not a rough one.
    assert hole.roughness_mm < 0.3 * UM
    (x0, y0), (x1, y1) = hole.longest.first, hole.longest.second
    angle = math.degrees(math.atan2(y1 - y0, x1 - x0)) % 180.0
    assert abs((angle - turn_deg + 90.0) % 180.0 - 90.0) < 4.0
    # 4 pi A / P^2, P by Ramanujan's second approximation (1914, from memory): 0.9401 here.
    a, b = 75.0, 50.0
    h = ((a - b) / (a + b)) ** 2
    length = math.pi * (a + b) * (1 + 3 * h / (10 + math.sqrt(4 - 3 * h)))
    assert hole.circularity == pytest.approx(4 * math.pi * math.pi * a * b / length**2, abs=0.005)


# r = R (1 + e cos k t): area pi R^2 (1 + e^2/2); from its best ellipse, a circle, it departs by
# e R cos k t, whose rms is e R / sqrt 2 (to first order in e).
@SIDES
@pytest.mark.parametrize(("waves", "depth"), [(5, 0.04), (9, 0.02), (14, 0.02)])
def test_a_ragged_hole_has_its_area_and_its_roughness(waves, depth, side):
    radius_px = 80.0
    inside = polar(lambda t: radius_px * (1.0 + depth * np.cos(waves * t)), 110.2, 109.7)
    light = lit(covered((220, 222), inside), **side, noise=0.02, tilt=(0.2, -0.3))
    hole = measure_hole(light, pixel_mm=UM)
    area = math.pi * radius_px**2 * (1.0 + 0.5 * depth**2)
    assert hole.area_equivalent_diameter_mm == pytest.approx(
        2.0 * math.sqrt(area / math.pi) * UM, rel=3e-3
    )
    assert hole.roughness_mm == pytest.approx(depth * radius_px / math.sqrt(2.0) * UM, rel=0.05)
    assert hole.circularity < 0.99


# A burr: a bump of Gaussian section on a circle; area 1/2 int r^2 dt by the trapezium rule.
def test_a_burred_hole_has_its_area_and_its_calipers():
    def radius(t):
        return 90.0 - 12.0 * np.exp(-((t - 1.0) ** 2) / 0.005) + 8.0 * np.exp(-(t**2) / 0.01)

    t = np.linspace(-math.pi, math.pi, 20_001)
    area = np.trapezoid(0.5 * radius(t) ** 2, t)
    light = lit(covered((240, 250), polar(radius, 125.0, 120.0)), noise=0.02)
    hole = measure_hole(light, pixel_mm=UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(
        2 * math.sqrt(area / math.pi) * UM, rel=2e-3
    )
    assert hole.longest_mm == pytest.approx((98.0 + 90.0) * UM, rel=0.01)
    assert hole.shortest_mm == pytest.approx(180.0 * UM, rel=0.01)


def test_noise_does_not_lengthen_the_perimeter():
    share = covered((250, 250), disc(180.0, 125.0, 125.0))
    values = [measure_hole(lit(share, noise=n), pixel_mm=UM).circularity for n in (0.0, 0.04, 0.1)]
    assert values == pytest.approx([1.0, 1.0, 1.0], abs=2e-3)


# A circle's chord polygons aside, the outline itself is what the numbers are of.
def test_the_outline_is_anticlockwise_and_centred_on_its_area():
    light = lit(covered((220, 200), polar(lambda t: 70.0 + 15.0 * np.cos(t - 1.0), 95.0, 110.0)))
    hole = measure_hole(light, pixel_mm=UM)
    area, centroid = area_and_centroid(hole.outline_mm)
    assert area == pytest.approx(math.pi / 4 * hole.area_equivalent_diameter_mm**2, rel=1e-12)
    assert np.abs(centroid).max() < 1e-9
    back = hole.scan_px(np.zeros((1, 2)))[0]
    assert tuple(back) == pytest.approx(hole.centroid_px, abs=1e-9)


# --- dust, borders, files ------------------------------------------------------------------------


def with_dust(light, *, keep_off, count=80, seed=5):
    """Return light with black and white specks anywhere but across a circle (x, y, radius)."""
    random = np.random.default_rng(seed)
    light = light.copy()
    y, x = np.mgrid[: light.shape[0], : light.shape[1]]
    for _ in range(count):
        x0, y0 = random.uniform(0, light.shape[1]), random.uniform(0, light.shape[0])
        size = random.uniform(0.7, 3.0)
        value = random.choice([0.01, 0.95])
        if abs(math.hypot(x0 - keep_off[0], y0 - keep_off[1]) - keep_off[2]) > size + 4.0:
            light[np.hypot(x - x0, y - y0) < size] = value
    return light


@SIDES
def test_dust_on_plate_and_hole_does_not_count(side):
    share = covered((330, 340), disc(160.0, 170.2, 165.4))
    light = with_dust(lit(share, **side, noise=0.01), keep_off=(170.2, 165.4, 80.0))
    hole = measure_hole(light, pixel_mm=UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(160.0 * UM, rel=2e-3)
    assert hole.roughness_mm < 0.2 * UM
    assert any("dust" in note for note in hole.notes)


@SIDES
def test_stains_beside_the_edge_do_not_move_it(side):
    """A grey stain on the plate and one in the hole; a fit that they could bend is out by 0.8 %."""
    light = lit(covered((160, 160), disc(60.0, 80.0, 80.0)), **side, soft_px=3.0, noise=0.01)
    y, x = np.mgrid[:160, :160]
    quarter = 0.25 * (side["hole"] - side["plate"])
    light = np.where((np.abs(x - 80) < 25) & (y < 35), side["plate"] + quarter, light)
    light = np.where(np.hypot(x - 80, y - 92) < 7, side["hole"] - quarter, light)
    hole = measure_hole(light, pixel_mm=UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(60.0 * UM, rel=2e-3)
    assert hole.centroid_px == pytest.approx((80.0, 80.0), abs=0.1)


@SIDES
@pytest.mark.parametrize("border", [0.0, 1.0], ids=["black", "white"])
@pytest.mark.parametrize("turn", [0.0, 0.03], ids=["straight", "turned"])
def test_a_border_around_the_scan_is_not_taken_for_a_hole(side, border, turn):
    light = lit(covered((400, 420), disc(120.0, 200.0, 190.0)), **side, noise=0.01)
    y, x = np.mgrid[:400, :420]
    u, v = x + turn * y, y - turn * x
    framed = np.where((u > 30) & (u < 405) & (v > 12) & (v < 380), light, np.float32(border))
    hole = measure_hole(framed, pixel_mm=UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(120.0 * UM, rel=2e-3)
    strip = light.copy()
    strip[:25] = border
    assert measure_hole(strip, pixel_mm=UM).area_equivalent_diameter_mm == pytest.approx(
        120.0 * UM, rel=2e-3
    )


@SIDES
def test_a_small_hole_in_a_large_picture_is_found(side):
    light = lit(covered((700, 1300), disc(30.0, 900.4, 222.7)), **side, noise=0.02)
    hole = measure_hole(light, pixel_mm=UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(30.0 * UM, rel=0.01)
    assert hole.centroid_px == pytest.approx((900.4, 222.7), abs=0.1)


def test_a_hole_of_thousands_of_pixels_is_measured_too():
    y, x = np.mgrid[:2600, :2700]
    edge = 1050.0 - np.hypot(x - 1340.3, y - 1299.8)
    light = (0.05 + 0.65 * np.clip(edge + 0.5, 0.0, 1.0)).astype(np.float32)
    hole = measure_hole(light, pixel_mm=0.2 * UM)
    assert hole.area_equivalent_diameter_mm == pytest.approx(420.0 * UM, rel=5e-4)
    assert hole.centroid_px == pytest.approx((1340.3, 1299.8), abs=0.1)


@SIDES
@pytest.mark.parametrize("name", ["scan.png", "scan.16.png", "scan.tif", "scan.jpg"])
def test_files_of_every_kind_give_the_same_hole(tmp_path, name, side):
    share = covered((260, 270), disc(140.0, 134.6, 130.2))
    light = lit(share, **side, tilt=(0.3, 0.2), noise=0.01)
    # JPEG at quality 80, as phones and scanners write it.
    path = write_scan(tmp_path / name, light, quality=80)
    hole = trace_hole(path, scale=Scale(pixel_size_mm=2.2 * UM))
    assert hole.area_equivalent_diameter_mm == pytest.approx(140.0 * 2.2 * UM, rel=2e-3)
    assert hole.longest_mm == pytest.approx(140.0 * 2.2 * UM, rel=0.01)
    assert hole.roughness_mm < 0.2 * 2.2 * UM


def test_gamma_is_undone_before_the_edge_is_read(tmp_path):
    """Half way between sRGB codes lies 21 % of the light: 1.2 px farther out on an edge this soft."""
    share = covered((200, 200), disc(100.0, 100.0, 100.0))
    path = write_scan(tmp_path / "scan.png", lit(share, plate=0.0, hole=0.9, soft_px=2.0))
    hole = trace_hole(path, scale=Scale(pixel_size_mm=UM))
    assert hole.area_equivalent_diameter_mm == pytest.approx(100.0 * UM, rel=1e-3)


# --- scale ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("scale", "pixel_mm"),
    [
        (Scale(pixel_size_mm=0.0025), 0.0025),
        (Scale(dpi=4800.0), 25.4 / 4800.0),  # an inch is 25.4 mm (1959)
        (Scale(reference=read_reference("10,20,190,20=0.36mm", "--reference")), 0.002),
        (Scale(reference=read_reference(" 30 , 40, 120,160 = 300 um", "x")), 0.002),  # 3-4-5
    ],
)
def test_the_scale_can_be_told_in_three_ways(tmp_path, scale, pixel_mm):
    path = write_scan(tmp_path / "s.png", lit(covered((200, 200), disc(100.0, 100.0, 100.0))))
    hole = trace_hole(path, scale=scale)
    assert hole.pixel_mm == pytest.approx(pixel_mm, rel=1e-12)
    assert hole.area_equivalent_diameter_mm == pytest.approx(100.0 * pixel_mm, rel=1e-3)


def test_a_known_diameter_sets_the_scale(tmp_path):
    path = write_scan(
        tmp_path / "s.png", lit(covered((220, 220), ellipse(150.0, 96.0, 0.0, 110.0, 110.0)))
    )
    hole = trace_hole(path, scale=Scale(), diameter_mm=0.31)
    assert hole.area_equivalent_diameter_mm == 0.31
    assert hole.longest_mm == pytest.approx(0.31 * 150.0 / 120.0, rel=2e-3)
    assert hole.opening.area_mm2 == pytest.approx(math.pi / 4 * 0.31**2, rel=1e-9)
    assert hole.pixel_mm == pytest.approx(0.31 / 120.0, rel=2e-3)


# --- the opening that optics takes ---------------------------------------------------------------


def test_cells_are_filled_by_their_exact_share():
    # A right triangle of legs 3 and 2 cells, the shares of the cells along its slope by hand.
    triangle = np.array([[-1.0, -1.0], [2.0, -1.0], [-1.0, 1.0]])
    cells = clear_cells(triangle, 1.0, 4)
    expected = np.zeros((4, 4))
    # The slope is x = 0.5 - 1.5 y: lower row from x = 2 to 0.5, upper row from 0.5 to -1.
    expected[2] = [0.0, 1.0, 11.0 / 12.0, 1.0 / 3.0]
    expected[1] = [0.0, 2.0 / 3.0, 1.0 / 12.0, 0.0]
    assert cells.sum() == pytest.approx(3.0, abs=1e-12)
    np.testing.assert_allclose(cells, expected, atol=1e-12)


def test_the_opening_holds_the_area_on_fine_cells():
    light = lit(covered((220, 222), polar(lambda t: 80 + 6 * np.cos(5 * t), 110.2, 109.7)))
    hole = measure_hole(light, pixel_mm=2 * UM)
    opening = hole.opening
    assert isinstance(opening, Traced)
    assert opening.cell_mm <= hole.area_equivalent_diameter_mm / 256 * (1 + 1e-12)
    assert opening.area_mm2 == pytest.approx(
        math.pi / 4 * hole.area_equivalent_diameter_mm**2, rel=1e-9
    )
    n = opening.clear.shape[0]
    middle = np.arange(n) - 0.5 * (n - 1)
    # Its middle is the area's, so that the chief ray goes through it.
    assert abs(opening.clear.sum(axis=0) @ middle) / opening.clear.sum() < 1e-3
    assert abs(opening.clear.sum(axis=1) @ middle) / opening.clear.sum() < 1e-3


def round_scan(diameter_px=240.0):
    return lit(covered((460, 470), disc(diameter_px, 233.7, 229.4)), tilt=(0.3, 0.2), noise=0.02)


def a_camera(hole, **changes):
    keywords = {"focal_length_mm": 40.0, "film": Film(width_mm=7.0, height_mm=5.0)}
    return Camera(hole=hole, **{**keywords, **changes})


# round_otf is itself held against published tables in test_optics_near_field.py.
@pytest.mark.parametrize("wavelength_nm", [430.0, 550.0, 650.0])
@pytest.mark.parametrize("distance_mm", [math.inf, 200.0])
def test_a_traced_round_hole_has_the_round_holes_transfer_function(wavelength_nm, distance_mm):
    hole = measure_hole(round_scan(), pixel_mm=0.30 / 240.0)
    camera = a_camera(Hole.traced(hole.opening), focal_length_mm=60.0)
    cutoff = 0.30 / (wavelength_nm * 1e-6 * 60.0)
    frequency = np.linspace(0.0, 1.05 * cutoff, 60)
    known = round_otf(
        frequency,
        diameter_mm=0.30,
        focal_length_mm=60.0,
        distance_mm=distance_mm,
        wavelength_nm=wavelength_nm,
    )
    for right, up in ((1.0, 0.0), (0.0, 1.0), (0.6, -0.8)):
        otf = film_otf(
            right * frequency,
            up * frequency,
            camera=camera,
            film_point_mm=(0.0, 0.0),
            distance_mm=distance_mm,
            wavelength_nm=wavelength_nm,
        )
        np.testing.assert_allclose(otf, known, rtol=0, atol=1e-3)


def pattern_scene():
    """A chart of bars, discs and a slope, unlike its mirror images."""
    y, x = np.mgrid[:420, :560] / 100.0
    light = 0.15 + 0.1 * x
    light = np.where(np.sin(6.0 * x * (1 + 0.3 * x)) > 0.2, 0.8, light)
    light = np.where(np.hypot(x - 1.5, y - 1.2) < 0.7, 0.05, light)
    light = np.where(np.hypot(x - 4.2, y - 3.1) < 0.08, 1.0, light)
    rgb = np.stack([light, 0.8 * light, 0.9 * light[::-1]], axis=-1)
    return pinsim.Scene(
        name="chart", photo=photo_from_linear(rgb.astype(np.float32)), horizontal_view_deg=24.0
    )


def psnr(one, other):
    """Peak signal to noise of pictures encoded for the eye, 1.0 = white."""
    return -10.0 * math.log10(np.mean((srgb(one.clip(0, 1)) - srgb(other.clip(0, 1))) ** 2))


def test_a_traced_round_hole_draws_the_round_holes_picture():
    scene = pattern_scene()
    hole = measure_hole(round_scan(), pixel_mm=0.30 / 240.0)
    exposures = [
        pinsim.preview(scene, a_camera(one), width_px=200).exposure
        for one in (Hole.traced(hole.opening), Hole(diameter_mm=0.30), Hole(diameter_mm=0.40))
    ]
    inner = (slice(8, -8), slice(8, -8))
    traced, same, larger = (one[inner] for one in exposures)
    assert np.isfinite(traced).all()
    assert psnr(traced, same) >= 50.0
    # And the measure would tell: a hole a third larger draws another picture.
    assert psnr(larger, same) < 45.0


# --- which way round -----------------------------------------------------------------------------


def notched(x, y):
    """A disc with a slot cut towards the upper right of the picture: 70 px, slot to its middle."""
    round_part = np.hypot(x - 100.0, y - 100.0) < 70.0
    slot = (x > 100.0) & (y < 100.0) & (np.abs((x - 100.0) + (y - 100.0)) < 14.0)
    return round_part & ~slot


def light_of_quarters(opening):
    """Return the open area of the quarters (up left, up right, down left, down right)."""
    n = opening.clear.shape[0] // 2
    c = opening.clear
    return np.array([c[:n, :n].sum(), c[:n, n:].sum(), c[n:, :n].sum(), c[n:, n:].sum()])


@SIDES
def test_a_hole_seen_from_the_front_is_mirrored_left_to_right(side):
    light = lit(covered((200, 200), notched), **side)
    behind = measure_hole(light, pixel_mm=UM)
    front = measure_hole(light, pixel_mm=UM, seen_from="front")
    mirrored = measure_hole(light[:, ::-1], pixel_mm=UM)
    assert int(np.argmin(light_of_quarters(behind.opening))) == 1
    assert int(np.argmin(light_of_quarters(front.opening))) == 0
    # The same hole but for the smoothing's beginning at another point: a tenth of a cell at corners.
    assert np.abs(front.opening.clear - mirrored.opening.clear).max() < 0.1
    assert np.abs(front.opening.clear[:, ::-1] - behind.opening.clear).max() < 1e-9
    # Back on the scan, both outlines lie on the same edge: 70 px about (100, 100).
    for hole in (behind, front):
        places = hole.scan_px(hole.outline_mm)
        away = np.hypot(places[:, 0] - 100.0, places[:, 1] - 100.0)
        on_rim = places[:, 0] < 95.0
        assert np.abs(away[on_rim] - 70.0).max() < 0.3


def wedge(x, y):
    """A right triangle, legs of 120 px along the left and the lower side."""
    return (x > 40.0) & (y < 160.0) & (x - 40.0 < y - 40.0)


def wedge_camera():
    hole = measure_hole(lit(covered((200, 200), wedge), soft_px=0.5), pixel_mm=0.0025)
    return a_camera(Hole.traced(hole.opening), focal_length_mm=60.0)


FREQUENCIES = ((1.5, 0.0), (0.0, 1.5), (1.2, 1.2), (1.2, -1.2), (2.0, 1.0))


def test_the_blur_stands_turned_as_the_hole_is_seen_from_behind():
    """The shadow of a hole on the film is the hole as seen from behind; in the upright picture, which
    is the film's turned by 180 degrees, it stands on its head (geometric optics).
    """
    camera = wedge_camera()
    y, x = np.mgrid[:200:0.5, :200:0.5]
    right, up = 0.0025 * x[wedge(x, y)], -0.0025 * y[wedge(x, y)]
    right, up = right - right.mean(), up - up.mean()
    for u, v in (*FREQUENCIES, (3.0, 0.0), (0.0, 3.0), (3.0, 3.0)):
        # The transform exp(-2 pi i nu x) of a spot at x = -(right, up).
        shadow = np.exp(2j * math.pi * (u * right + v * up)).mean()
        otf = film_otf(u, v, camera=camera, film_point_mm=(0.0, 0.0), wavelength_nm=40.0)
        # At 40 nm diffraction still takes a few hundredths, of the order lambda z nu / (hole's size).
        assert abs(complex(otf) - shadow) < 0.045
        # A hole the other way round would have the complex conjugate.
        if abs(shadow.imag) > 0.1:
            assert abs(complex(otf) - shadow.conjugate()) > 0.2


def test_an_unsymmetrical_hole_has_the_transfer_function_of_its_overlap():
    """OTF = 1/|A| int over (A - s/2) and (A + s/2) of exp(2 pi i q x) dx, s = lambda z nu, q = nu for a
    far object (the autocorrelation of the pupil with its defocus; Hopkins 1955, Goodman, from memory),
    summed here point by point over the triangle itself.
    """
    camera = wedge_camera()
    step = 0.25
    y, x = np.mgrid[0:200:step, 0:200:step] + 0.5 * step
    area = wedge(x, y)
    middle = x[area].mean(), y[area].mean()
    right, up = 0.0025 * (x - middle[0]), 0.0025 * (middle[1] - y)
    for u, v in FREQUENCIES:
        apart = 550e-6 * 60.0 / 0.0025 * np.array([u, -v]) / 2.0  # columns and rows, in pixels
        both = wedge(x - apart[0], y - apart[1]) & wedge(x + apart[0], y + apart[1])
        wave = np.exp(2j * math.pi * (u * right[both] + v * up[both]))
        otf = film_otf(u, v, camera=camera, film_point_mm=(0.0, 0.0), wavelength_nm=550.0)
        assert abs(complex(otf) - wave.sum() / area.sum()) < 4e-3


# --- designs -------------------------------------------------------------------------------------

SCAN_PX = 100.0


@pytest.fixture
def scan(tmp_path):
    """Return a scan of a round hole, 100 px across, in a folder of its own."""
    folder = tmp_path / "scans"
    folder.mkdir()
    light = lit(covered((210, 220), disc(SCAN_PX, 110.3, 104.6)), noise=0.01)
    return write_scan(folder / "hole no 7.png", light)


def design(tmp_path, hole_lines, name="box.toml"):
    path = tmp_path / name
    path.write_text(
        'focal_length = "40 mm"\n[hole]\nshape = "traced"\n'
        f"{hole_lines}\n"
        '[film]\nwidth = "12 mm"\nheight = "9 mm"\n',
        encoding="utf-8",
    )
    return path


@pytest.mark.parametrize(
    ("lines", "diameter_mm"),
    [
        ('pixel_size = "3 um"', 0.3),
        ("dpi = 8466.6667", 0.3),
        ('reference = { from = [10, 20], to = [210, 20], length = "0.6 mm" }', 0.3),
        ('pixel_size = "3 um"\ndiameter = "0.31 mm"', 0.31),
        ('diameter = "0.31 mm"', 0.31),
        ('pixel_size = "3 um"\nseen_from = "front"\npolarity = "bright"', 0.3),
    ],
)
def test_a_design_finds_its_scan_beside_it(tmp_path, scan, lines, diameter_mm, monkeypatch):
    path = design(tmp_path, f'image = "scans/{scan.name}"\n{lines}')
    monkeypatch.chdir("/")  # the path is the design's, not the working folder's
    camera = pinsim.Camera.load(path)
    assert camera.hole.shape == "traced"
    assert camera.hole.diameter_mm == pytest.approx(diameter_mm, rel=2e-3)
    assert camera.f_number == pytest.approx(40.0 / diameter_mm, rel=2e-3)


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        ('pixel_size = "3 um"', "image is missing"),
        ('image = "scans/hole no 7.png"', "how large is a pixel"),
        ('image = "scans/gone.png"\ndpi = 4800', "no such file"),
        ("image = 7\ndpi = 4800", "must be a file name"),
        ('image = "scans/hole no 7.png"\ndpi = "4800"', "must be a number"),
        ('image = "scans/hole no 7.png"\ndpi = 3', "dpi is 3; it must be 25 to"),
        ('image = "scans/hole no 7.png"\npixel_size = 3', "without a unit"),
        ('image = "scans/hole no 7.png"\npixel_size = "3 m"', "pixel size is 3000 mm"),
        ('image = "scans/hole no 7.png"\npixel_sise = "3 um"', "unknown key 'pixel_sise'"),
        ('image = "scans/hole no 7.png"\ndpi = 4800\npixel_size = "3 um"', "exclude each other"),
        ('image = "scans/hole no 7.png"\ndpi = 4800\npolarity = "white"', "must be one of"),
        ('image = "scans/hole no 7.png"\ndpi = 4800\nseen_from = "top"', "must be one of"),
        ('image = "scans/hole no 7.png"\nreference = { from = [1, 2], length = "1 mm" }', "to is"),
        (
            'image = "scans/hole no 7.png"\n'
            'reference = { from = [1, 2], to = [3, 4, 5], length = "1 mm" }',
            "must be column and row",
        ),
        (
            'image = "scans/hole no 7.png"\n'
            'reference = { from = [1, 2], to = [3, 4], length = "1 mm" }',
            "too short to measure by",
        ),
        (
            'image = "scans/hole no 7.png"\n'
            'reference = { from = [1, 2], to = [900, 4], length = "1 mm" }',
            "lies outside the picture, which is 220 x 210 px",
        ),
        ('image = "scans/hole no 7.png"\ndiameter = "300 mm"', "hole diameter is 300 mm"),
    ],
)
def test_a_wrong_design_of_a_traced_hole_is_told_in_one_line(tmp_path, scan, lines, message):
    path = design(tmp_path, lines)
    with pytest.raises(pinsim.errors.PinsimError, match=message) as caught:
        pinsim.Camera.load(path)
    assert isinstance(caught.value, DesignError | pinsim.errors.UnitError)
    text = str(caught.value)
    assert str(path) in text
    assert "\n" not in text
    assert text.isascii()


# --- the command ---------------------------------------------------------------------------------


def test_trace_measures_draws_and_designs(run, tmp_path, scan):
    (tmp_path / "designs").mkdir()
    code, out, err = run(
        "trace", scan, "--pixel-size", "3um", "--focal-length", "40mm", "--film", "6mmx5mm",
        "--plate", "0.05mm", "--rise", "1mm", "--tone", "negative", "--name", "Box \"7\"",
        "--design", "designs/box.toml", "-o", "look.png",
    )  # fmt: skip
    assert (code, err) == (0, "")
    assert out.isascii()
    for words in ("0.3", "circularity", "Finest detail", "as a round one", "f/133", "look.png"):
        assert words in out
    with Image.open(tmp_path / "look.png") as sheet:
        assert sheet.size[0] > 1000
    text = (tmp_path / "designs/box.toml").read_text(encoding="utf-8")
    assert 'image = "../scans/hole no 7.png"' in text
    camera = pinsim.Camera.load(tmp_path / "designs/box.toml")
    assert camera.name == 'Box "7"'
    assert camera.hole.diameter_mm == pytest.approx(0.3, rel=2e-3)
    assert camera.plate_thickness_mm == 0.05
    assert (camera.film.width_mm, camera.film.height_mm, camera.film.shift_up_mm) == (6, 5, 1)
    assert camera.tone == "negative"
    picture = pinsim.preview(pattern_scene(), camera, width_px=64)
    assert np.isfinite(picture.exposure[5:-5, 5:-5]).all()


def test_the_numbers_of_trace_can_be_read_by_programs(run, scan):
    code, out, _ = run(
        "trace",
        scan,
        "--dpi",
        "8466.6667",
        "--focal-length",
        "40mm",
        "--json",
        "--polarity",
        "bright",
    )
    assert code == 0
    told = json.loads(out)
    assert told["area_equivalent_diameter_mm"] == pytest.approx(0.3, rel=2e-3)
    assert told["polarity"] == "bright"
    detail = told["against_round"]["detail"]
    # A round hole against a round hole.
    assert detail["right_cycles_mm"] == pytest.approx(detail["round_cycles_mm"], rel=3e-3)
    assert detail["up_cycles_mm"] == pytest.approx(detail["round_cycles_mm"], rel=3e-3)


# Geometric limit of a rectangle's and of a disc's blur: sin(pi b nu)/(pi b nu) = 0.2 at b nu = 0.8262,
# and 2 J1(x)/x = 0.2 at an x found by bisection here (Fourier transforms of both, from memory).
def test_what_a_long_hole_does_to_detail_follows_its_sides(run, tmp_path):
    def slot(x, y):
        return (np.abs(x - 150.0) < 120.0) & (np.abs(y - 100.0) < 60.0)

    path = write_scan(tmp_path / "slot.png", lit(covered((200, 300), slot), soft_px=0.6))
    # 2.4 x 1.2 mm at 40 mm is far in the shadow regime: Fresnel number above 20.
    code, out, err = run(
        "trace", path, "--pixel-size", "10um", "--focal-length", "40mm", "--film", "6x6", "--json"
    )
    assert (code, err) == (0, "")
    told = json.loads(out)["against_round"]
    diameter = math.sqrt(4.0 * 2.4 * 1.2 / math.pi)
    low, high = 1.0, 3.8
    for _ in range(60):
        x = 0.5 * (low + high)
        low, high = (x, high) if 2.0 * j1(x) / x > 0.2 else (low, x)
    assert told["detail"]["right_cycles_mm"] == pytest.approx(0.8262 / 2.4, rel=0.02)
    assert told["detail"]["up_cycles_mm"] == pytest.approx(0.8262 / 1.2, rel=0.02)
    assert told["detail"]["round_cycles_mm"] == pytest.approx(low / (math.pi * diameter), rel=0.02)


def test_nothing_is_written_over_and_the_scan_is_left_alone(run, tmp_path, scan):
    before = scan.read_bytes()
    given = ("trace", scan, "--pixel-size", "3um", "--focal-length", "40mm")
    (tmp_path / "box.toml").write_text("mine", encoding="utf-8")
    code, _, err = run(*given, "--design", "box.toml", "-o", "a.png")
    assert code == 2
    assert "exists already" in err
    assert not (tmp_path / "a.png").exists()
    assert (tmp_path / "box.toml").read_text(encoding="utf-8") == "mine"
    code, _, err = run(*given, "-o", scan, "--overwrite")
    assert code == 2
    assert "made from" in err
    assert run(*given, "--design", "box.toml", "-o", "a.png", "--overwrite")[0] == 0
    assert pinsim.Camera.load(tmp_path / "box.toml").hole.shape == "traced"
    assert scan.read_bytes() == before
    assert sorted(f.name for f in tmp_path.iterdir()) == ["a.png", "box.toml", "scans"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((), "how large is a pixel"),
        (("--dpi", "4800", "--pixel-size", "2um"), "exclude each other"),
        (("--pixel-size", "2"), "has no unit"),
        (("--reference", "1,2,3=4mm"), "12,40,980,44=10mm"),
        (("--dpi", "4800", "--design", "box.toml"), "--design is of a camera"),
        (("--dpi", "4800", "--film", "6x6"), "--focal-length 60mm"),
        (("--dpi", "4800", "--focal-length", "40mm", "--design", "box.txt"), "use one of .toml"),
        (("--dpi", "4800", "--polarity", "dark"), "no hole found"),
    ],
)
def test_what_is_missing_or_wrong_is_told_in_one_line(run, tmp_path, scan, arguments, message):
    code, out, err = run("trace", scan, *arguments)
    assert (code, out) == (2, "")
    assert message in err
    assert len(err.splitlines()) == 1
    assert [f.name for f in tmp_path.iterdir()] == ["scans"]


# --- scans that cannot be used -------------------------------------------------------------------


def failing(light, message, **keywords):
    with pytest.raises(SceneError, match=message) as caught:
        measure_hole(light, pixel_mm=UM, where="foil.png", **keywords)
    text = str(caught.value)
    assert text.startswith("foil.png: ")
    assert "\n" not in text
    assert text.isascii()


@pytest.mark.parametrize("tilt", [(0.0, 0.0), (0.6, 0.3)])
@pytest.mark.parametrize("noise", [0.0, 0.02])
def test_a_plate_without_a_hole_has_none(tilt, noise):
    failing(lit(np.zeros((200, 220)), plate=0.4, tilt=tilt, noise=noise), "no hole found")


def test_two_holes_are_one_too_many():
    def both(x, y):
        return disc(80.0, 100.0, 120.0)(x, y) | disc(70.0, 280.0, 200.0)(x, y)

    failing(lit(covered((300, 380), both)), r"2 spots of like size .*80 px across at 100,120")
    # A far smaller one is dust.
    one = lit(covered((300, 380), lambda x, y: both(x, y) & (x < 200) | disc(20, 300, 200)(x, y)))
    assert measure_hole(one, pixel_mm=UM).area_equivalent_diameter_mm == pytest.approx(
        0.08, rel=2e-3
    )


@SIDES
@pytest.mark.parametrize(
    ("x0", "y0", "edge"), [(20, 150, "left"), (150, 15, "top"), (295, 150, "")]
)
def test_a_hole_that_the_picture_cuts_off_is_refused(x0, y0, edge, side):
    light = lit(covered((300, 300), disc(120.0, x0, y0)), **side, noise=0.01)
    failing(light, f"touches the picture's {edge}")


def test_a_hole_of_too_few_pixels_is_refused_with_their_number():
    failing(lit(covered((80, 80), disc(13.0, 40.0, 40.0))), r"only 13 px across; 20 are needed")


def test_words_that_are_not_known_are_refused():
    light = lit(covered((100, 100), disc(40.0, 50.0, 50.0)))
    with pytest.raises(DesignError, match="polarity is 'white'; it must be one of: auto"):
        measure_hole(light, pixel_mm=UM, polarity="white")
    with pytest.raises(DesignError, match="seen_from is 'above'"):
        measure_hole(light, pixel_mm=UM, seen_from="above")


def test_what_makes_a_measure_doubtful_is_said():
    share = covered((160, 160), disc(60.0, 80.0, 80.0))
    over = measure_hole(np.minimum(lit(share, hole=1.0), 0.4) / 0.4, pixel_mm=UM)
    assert any("overexposed" in note for note in over.notes)
    soft = measure_hole(lit(share, soft_px=8.0), pixel_mm=UM)
    assert any("soft" in note for note in soft.notes)
    assert soft.blur_mm == pytest.approx(8.0 * UM, rel=0.1)
    assert measure_hole(lit(share), pixel_mm=UM).notes == ()


# --- the drawing ---------------------------------------------------------------------------------


def test_the_outline_is_drawn_on_the_edge(tmp_path, scan):
    """Orange pixels on the sheet lie on a circle of the hole's size at the picture's scale."""
    hole = trace_hole(scan, scale=Scale(pixel_size_mm=3 * UM))
    photo = photo_from_linear(lit(covered((210, 220), disc(SCAN_PX, 110.3, 104.6))))
    sheet = hole_overlay(photo, hole, title="hole no 7", lines=())
    picture = sheet.codes[60:1030, 28:990].astype(int)
    orange = (picture[..., 0] > 200) & (picture[..., 2] < 60)
    y, x = np.nonzero(orange)
    radius = np.hypot(x - x.mean(), y - y.mean())
    # 960 px show 1.45 times the longest diameter.
    assert np.median(radius) == pytest.approx(0.5 * 960 / 1.45, rel=0.01)
    assert np.ptp(radius[np.abs(radius - np.median(radius)) < 30]) < 12
    again = hole_overlay(photo, hole, title="hole no 7", lines=())
    assert np.array_equal(sheet.codes, again.codes)
    sheet.save(tmp_path / "sheet.png")
    with pytest.raises(OutputError, match="exists already"):
        sheet.save(tmp_path / "sheet.png")
    with Image.open(tmp_path / "sheet.png") as image:
        assert image.size == sheet.codes.shape[1::-1]
