"""Sharpness anywhere on any film, for any hole, against waves summed point by point.

The point image that `film_otf` stands for is compared with a Rayleigh-Sommerfeld integral with
exact path lengths (reference/rayleigh_sommerfeld.py: Born & Wolf, Principles of Optics, 8.11.2;
Goodman, Introduction to Fourier Optics, 3.5; from memory), computed independently: no Fourier
transform, no expansion, no code of pinsim. Closed forms have their source beside them.
"""

import json
from pathlib import Path

import numpy as np
import pytest
from reference import rayleigh_sommerfeld as rs

import pinsim
from pinsim.optics import Traced, film_otf, round_otf

INFINITY = np.inf
OF_THE_PEAK = (
    5e-3  # paths to second order: 2.1e-3 is what they cost at 45 degrees, 1e-5 on the axis
)
OF_THE_MOMENT = 0.01
PERIOD_MM = 12.0  # the tails that neighbours add to the window's second moments: 0.15 %

# The window of the comparison: it holds 94 to 98 % of the light. Second moments of a hard-edged
# hole's image grow with the window (its tails fall with r^-3), so both are taken over this one.
WINDOW_MM = np.linspace(-0.8, 0.8, 33)

FILMS = {
    "flat film": rs.Film(focal_length_mm=60.0),
    "arc about the hole": rs.Film(focal_length_mm=60.0, bend_radius_mm=60.0),
    "round tin": rs.Film(focal_length_mm=60.0, bend_radius_mm=30.0),
    "shallow bend, top and bottom": rs.Film(
        focal_length_mm=60.0, bend_radius_mm=100.0, bend_axis="horizontal"
    ),
}
PLACES = [
    (0.0, "u"),
    (30.0, "u"),
    (30.0, "v"),
    (30.0, "uv"),
    (45.0, "u"),
    (45.0, "v"),
    (45.0, "uv"),
]


def camera_with(hole: pinsim.Hole, film: rs.Film) -> pinsim.Camera:
    """Return a camera whose frame is large enough for every place of the tests."""
    return pinsim.Camera(
        focal_length_mm=film.focal_length_mm,
        hole=hole,
        film=pinsim.Film(
            width_mm=1.7 * film.focal_length_mm,
            height_mm=2.1 * film.focal_length_mm,
            bend_radius_mm=film.bend_radius_mm,
            bend_axis=film.bend_axis,
        ),
    )


def drawn_by_pinsim(
    camera, film, place, *, window=WINDOW_MM, wavelength_nm=550.0, distance_mm=INFINITY, period=None
):
    """Return the point image of film_otf at a film point, on the window, 1/mm^2."""
    period = period or PERIOD_MM
    ray_mm = np.linalg.norm(film.points(*np.array(place)))
    # Nothing is drawn above (greatest extent)/(wavelength * ray): on tilted film still less.
    highest = camera.hole.greatest_mm / (wavelength_nm * rs.NM * ray_mm)
    count = int(np.ceil(1.01 * highest * period))
    frequency = np.arange(-count, count + 1) / period
    otf = film_otf(
        frequency[None, :],
        frequency[:, None],
        camera=camera,
        film_point_mm=place,
        distance_mm=distance_mm,
        wavelength_nm=wavelength_nm,
    )
    assert otf.shape == (frequency.size, frequency.size)
    return rs.image_of_otf(otf, period_mm=period, du_mm=window, dv_mm=window)


def compare(
    opening, hole, film, place, *, window=WINDOW_MM, wavelength_nm=550.0, distance_mm=INFINITY
):
    """Hold pinsim's point image against the summed waves: peak, second moments, middle."""
    summed = rs.point_image(
        opening,
        film,
        film_point_mm=place,
        du_mm=window,
        dv_mm=window,
        wavelength_nm=wavelength_nm,
        distance_mm=distance_mm,
    )
    drawn = drawn_by_pinsim(
        camera_with(hole, film),
        film,
        place,
        window=window,
        wavelength_nm=wavelength_nm,
        distance_mm=distance_mm,
    )
    assert np.abs(drawn - summed).max() <= OF_THE_PEAK * summed.max()
    along = film.tangential(*place)
    expected = rs.moments(summed, window, window, along)
    seen = rs.moments(drawn, window, window, along)
    np.testing.assert_allclose(seen[:2], expected[:2], rtol=OF_THE_MOMENT)
    assert abs(seen[2] - expected[2]) <= OF_THE_MOMENT * expected[:2].min()
    return summed


# The yardstick itself first. See reference/ORIGIN.md: a Rayleigh-Sommerfeld integral made by another
# program, with node counts doubled until nothing moved.
PRINTED = json.loads(
    (Path(__file__).parent / "reference" / "psf_reference.json").read_text(encoding="utf-8")
)["configurations"]


@pytest.mark.parametrize("printed", PRINTED, ids=[f"no. {one['id']}" for one in PRINTED])
def test_the_summed_waves_are_those_of_the_table(printed):
    hole, z = printed["hole_diameter_mm"], printed["zi_mm"]
    distance = printed["zo_mm"] or INFINITY
    radius = np.array(printed["r_mm"])
    turns = printed["v_per_mm"] * radius.max() / 2 + np.pi * printed["fresnel_number"]
    image = rs.point_image(
        rs.lens(hole, hole, count=int(turns + 30)),
        rs.Film(focal_length_mm=z),
        film_point_mm=(0.0, 0.0),
        du_mm=radius,
        dv_mm=np.zeros(1),
        wavelength_nm=printed["lambda_nm"],
        distance_mm=distance,
    )[0]
    # The table is |U|^2 over that of the unobstructed wave on the axis, without the film's cosine.
    thinned = np.pi / 4 * hole**2 * (1 + z / distance) ** 2
    relative = image * thinned * np.hypot(z, radius) / z
    expected = np.array(printed["I_rel_unobstructed_rs1_exact"])
    # 3e-5: the power that enters the hole is taken for that of a wave as strong all over it.
    np.testing.assert_allclose(relative, expected, atol=3e-5 * expected.max(), rtol=0)


@pytest.mark.parametrize("diameter_mm", [0.3, 1.0])
def test_the_summed_waves_on_the_axis_are_the_closed_form(diameter_mm):
    """|1 - cos(alpha) exp(i k (R - z))|^2 with cos(alpha) = z/R, R to the rim; plane wave.

    Exact within the integral: Osterberg & Smith, JOSA 51 (1961) 1050 (from memory).
    """
    rim = np.hypot(60.0, diameter_mm / 2)
    wave_number = 2 * np.pi / (550.0 * rs.NM)
    expected = np.abs(1 - 60.0 / rim * np.exp(1j * wave_number * (rim - 60.0))) ** 2
    image = rs.point_image(
        rs.lens(diameter_mm, diameter_mm, count=60),
        FILMS["flat film"],
        film_point_mm=(0.0, 0.0),
        du_mm=np.zeros(1),
        dv_mm=np.zeros(1),
        wavelength_nm=550.0,
    )
    assert image[0, 0] * np.pi / 4 * diameter_mm**2 == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize("distance_mm", [INFINITY, 250.0], ids=["far", "250 mm"])
@pytest.mark.parametrize(("angle_deg", "towards"), PLACES)
@pytest.mark.parametrize("film", FILMS.values(), ids=FILMS.keys())
def test_a_round_hole_draws_a_point_as_its_waves_add_up_anywhere_on_any_film(
    film, angle_deg, towards, distance_mm
):
    place = film.place(angle_deg, towards)
    # The place is where it is meant to be: by the ray that leads there.
    ray = film.points(*np.array(place))
    assert np.degrees(np.arccos(ray[2] / np.linalg.norm(ray))) == pytest.approx(angle_deg, abs=1e-6)
    compare(
        rs.lens(0.3, 0.3, count=40),
        pinsim.Hole(diameter_mm=0.3),
        film,
        place,
        distance_mm=distance_mm,
    )


# diameter, focal length, bend radius, wavelength, distance, half of the window; Fresnel numbers
# a^2 (1/z + 1/zo) / lambda from 0.27 (all diffraction) over 0.7 to 1.2.
OTHER_BOXES = [
    (0.15, 60.0, 60.0, 450.0, 200.0, 1.2),
    (0.20, 35.0, INFINITY, 450.0, 300.0, 0.5),
    (0.35, 60.0, 30.0, 550.0, 200.0, 0.8),
]


@pytest.mark.parametrize(
    ("diameter_mm", "focal_length_mm", "bend_mm", "wavelength_nm", "distance_mm", "half_mm"),
    OTHER_BOXES,
)
def test_small_and_large_holes_draw_as_their_waves_add_up(
    diameter_mm, focal_length_mm, bend_mm, wavelength_nm, distance_mm, half_mm
):
    film = rs.Film(focal_length_mm=focal_length_mm, bend_radius_mm=bend_mm)
    compare(
        rs.lens(diameter_mm, diameter_mm, count=44),
        pinsim.Hole(diameter_mm=diameter_mm),
        film,
        film.place(30.0, "uv"),
        window=np.linspace(-half_mm, half_mm, 33),
        wavelength_nm=wavelength_nm,
        distance_mm=distance_mm,
    )


@pytest.mark.parametrize("towards", ["u", "uv"])
@pytest.mark.parametrize("film", ["flat film", "round tin"])
def test_a_hole_far_too_large_draws_as_its_waves_add_up_but_for_a_lean(film, towards):
    """Twice the best hole and more: the third order of the paths can be seen, and nothing else can.

    It is about pi a^3 sin(theta)/(lambda r^2) = 1.6e-2 rad at the edge, odd over the hole, and makes
    light lean to one side of the image. Without the lean the agreement is as good as ever.
    """
    film = FILMS[film]
    place = film.place(30.0, towards)
    window = np.linspace(-0.6, 0.6, 31)
    summed = rs.point_image(
        rs.lens(0.6, 0.6, count=64),
        film,
        film_point_mm=place,
        du_mm=window,
        dv_mm=window,
        wavelength_nm=550.0,
        distance_mm=200.0,
    )
    camera = camera_with(pinsim.Hole(diameter_mm=0.6), film)
    drawn = drawn_by_pinsim(camera, film, place, window=window, distance_mm=200.0)
    upright_and_turned = (summed + summed[::-1, ::-1]) / 2
    assert np.abs(drawn - upright_and_turned).max() <= 1e-3 * summed.max()
    assert np.abs(drawn - summed).max() <= 1.6e-2 * summed.max()


@pytest.mark.parametrize("distance_mm", [INFINITY, 250.0], ids=["far", "250 mm"])
@pytest.mark.parametrize("film", FILMS.values(), ids=FILMS.keys())
def test_on_the_axis_any_film_is_as_sharp_as_the_round_holes_own_curve(film, distance_mm):
    """round_otf itself is held against printed tables elsewhere in these tests."""
    u, v = np.meshgrid(np.linspace(-10, 10, 21), np.linspace(-10, 10, 21))
    seen = film_otf(
        u,
        v,
        camera=camera_with(pinsim.Hole(diameter_mm=0.3), film),
        film_point_mm=(0.0, 0.0),
        distance_mm=distance_mm,
        wavelength_nm=550.0,
    )
    expected = round_otf(
        np.hypot(u, v),
        diameter_mm=0.3,
        focal_length_mm=60.0,
        distance_mm=distance_mm,
        wavelength_nm=550.0,
    )
    np.testing.assert_allclose(seen, expected, atol=1e-9, rtol=0)


@pytest.mark.parametrize("angle_deg", [30.0, 45.0])
def test_flat_film_loses_detail_outwards_with_the_cube_of_the_cosine_and_sideways_with_the_first(
    angle_deg,
):
    """Cut-off at d cos^3/(lambda z) tangential and d cos/(lambda z) sagittal.

    Far-field radii 1.22 lambda z/(d cos^3) and 1.22 lambda z/(d cos): geometry of a foreshortened
    hole and tilted film (derived; Young, Appl. Opt. 10 (1971) 2763 discusses it, from memory).
    """
    film = FILMS["flat film"]
    camera = camera_with(pinsim.Hole(diameter_mm=0.3), film)
    cosine = np.cos(np.radians(angle_deg))
    on_axis = 0.3 / (550.0 * rs.NM * 60.0)
    edges = np.array([0.995, 1.005])
    for direction, power in (((1.0, 0.0), 3), ((0.0, 1.0), 1)):
        frequency = on_axis * cosine**power * edges
        inside, outside = film_otf(
            frequency * direction[0],
            frequency * direction[1],
            camera=camera,
            film_point_mm=(60.0 * np.tan(np.radians(angle_deg)), 0.0),
            wavelength_nm=550.0,
        )
        assert inside != 0.0
        assert outside == 0.0


@pytest.mark.parametrize("distance_mm", [INFINITY, 250.0], ids=["far", "250 mm"])
@pytest.mark.parametrize("towards", ["u", "uv"])
@pytest.mark.parametrize("film", ["flat film", "round tin"])
def test_an_oval_hole_draws_as_its_waves_add_up(film, towards, distance_mm):
    film = FILMS[film]
    compare(
        rs.lens(0.42, 0.24, count=44),
        pinsim.Hole.oval(0.42, 0.24),
        film,
        film.place(30.0, towards),
        distance_mm=distance_mm,
    )


@pytest.mark.parametrize("distance_mm", [INFINITY, 250.0], ids=["far", "250 mm"])
@pytest.mark.parametrize("towards", ["v", "uv"])
def test_a_slit_draws_as_its_waves_add_up(towards, distance_mm):
    film = FILMS["arc about the hole"]
    compare(
        rs.rectangle(-0.08, 0.08, -0.22, 0.22, count=40),
        pinsim.Hole.slit(0.16, 0.44),
        film,
        film.place(30.0, towards),
        distance_mm=distance_mm,
    )


def slit_on_flat_film(frequency_u, frequency_v, *, place, wavelength_nm, distance_mm, hole):
    return film_otf(
        frequency_u,
        frequency_v,
        camera=camera_with(hole, FILMS["flat film"]),
        film_point_mm=place,
        distance_mm=distance_mm,
        wavelength_nm=wavelength_nm,
    )


@pytest.mark.parametrize("place", [(0.0, 0.0), (35.0, 0.0), (40.0, -30.0)])
def test_a_wide_slit_draws_its_shadow(place):
    """Without diffraction: sinc of the shadow's sides, m = 1 + z/zo times the slit's, flat film.

    The shadow of a hole on film parallel to it is the hole's own shape at any angle (geometry).
    """
    u, v = np.meshgrid(np.linspace(-7, 7, 15), np.linspace(-7, 7, 15))
    seen = slit_on_flat_film(
        u,
        v,
        place=place,
        wavelength_nm=1e-3,
        distance_mm=240.0,
        hole=pinsim.Hole.slit(0.2, 0.5),
    )
    shadow = 1 + 60.0 / 240.0
    expected = np.sinc(shadow * 0.2 * u) * np.sinc(shadow * 0.5 * v)
    np.testing.assert_allclose(seen, expected, atol=1e-5)


def test_a_narrow_slit_is_all_diffraction():
    """Its transfer function is a triangle: an in-focus square pupil (Goodman 6.3, from memory).

    A slit of 10 um has a Fresnel number of 8e-4; the shadow still costs 1.3e-6 of contrast.
    """
    frequency = np.linspace(-0.4, 0.4, 41)
    seen = slit_on_flat_film(
        frequency,
        0.0,
        place=(0.0, 0.0),
        wavelength_nm=550.0,
        distance_mm=INFINITY,
        hole=pinsim.Hole.slit(0.01, 0.3),
    )
    cutoff = 0.01 / (550.0 * rs.NM * 60.0)
    expected = np.maximum(1 - np.abs(frequency) / cutoff, 0)
    np.testing.assert_allclose(seen, expected, atol=2e-6)


@pytest.mark.parametrize("angle_deg", [0.0, 40.0])
@pytest.mark.parametrize("distance_mm", [INFINITY, 250.0])
def test_a_slit_between_shadow_and_diffraction_is_a_square_pupil_out_of_focus(
    angle_deg, distance_mm
):
    """Triangle times sinc[m nu (w - s)], s = lambda z nu/cos^3 outwards: Goodman 6.4.4, from memory."""
    cosine = np.cos(np.radians(angle_deg))
    cutoff = 0.3 * cosine**3 / (550.0 * rs.NM * 60.0)
    frequency = np.linspace(-1.1, 1.1, 45) * cutoff
    seen = slit_on_flat_film(
        frequency,
        0.0,
        place=(60.0 * np.tan(np.radians(angle_deg)), 0.0),
        wavelength_nm=550.0,
        distance_mm=distance_mm,
        hole=pinsim.Hole.slit(0.3, 0.4),
    )
    triangle = np.maximum(1 - np.abs(frequency) / cutoff, 0)
    shadow = (1 + 60.0 / distance_mm) * 0.3
    expected = triangle * np.sinc(shadow * frequency * triangle)
    np.testing.assert_allclose(seen, expected, atol=1e-9)


# An L seen from behind: a tall bar on the left, a foot to the right. Unlike every mirror image and
# turn of itself; its sides lie on the cells' borders, so the traced outline is exact.
TALL_BAR = (-0.15, -0.05, -0.1, 0.2)  # left, right, low, high
FOOT = (-0.05, 0.15, -0.1, 0.0)
L_AREA_MM2 = 0.1 * 0.3 + 0.2 * 0.1


def traced_l(scale: float = 1.0, cells: int = 256) -> pinsim.Hole:
    """Return the L as a traced hole on a grid 0.4 mm wide."""
    place = (np.arange(cells) - (cells - 1) / 2) * 0.4 / cells
    x, y = place[None, :], -place[:, None]  # row 0 is up
    clear = sum(
        ((x > left) & (x < right) & (y > low) & (y < high)).astype(float)
        for left, right, low, high in (TALL_BAR, FOOT)
    )
    return pinsim.Hole.traced(Traced(clear=clear, cell_mm=scale * 0.4 / cells))


def l_for_waves(count: int = 32) -> rs.Opening:
    return rs.rectangle(*TALL_BAR, count=count) + rs.rectangle(*FOOT, count=count)


@pytest.mark.parametrize("distance_mm", [INFINITY, 250.0], ids=["far", "250 mm"])
@pytest.mark.parametrize(
    ("film", "angle_deg", "towards"),
    [
        ("flat film", 0.0, "u"),
        ("flat film", 30.0, "v"),
        ("round tin", 30.0, "uv"),
        ("arc about the hole", 45.0, "uv"),
    ],
)
def test_an_l_shaped_hole_draws_as_its_waves_add_up_upside_down(
    film, angle_deg, towards, distance_mm
):
    film = FILMS[film]
    place = film.place(angle_deg, towards)
    image = compare(l_for_waves(), traced_l(), film, place, distance_mm=distance_mm)
    # The comparison can tell: none of the other ways to hold the L comes anywhere near.
    for other in (image[::-1, ::-1], image[::-1], image[:, ::-1], image.T):
        assert np.abs(other - image).max() > 0.1 * image.max()


@pytest.mark.parametrize("angle_deg", [0.0, 30.0])
def test_a_ragged_triangular_hole_draws_as_its_waves_add_up(angle_deg):
    """Slanted sides: the cells along them are open in part."""
    corners = np.array([(-0.17, -0.11), (0.16, -0.14), (0.05, 0.18)])
    cells, fine = 128, 16
    place = (np.arange(cells * fine) - (cells * fine - 1) / 2) * 0.4 / (cells * fine)
    x, y = place[None, :], -place[:, None]
    inside = np.ones((cells * fine, cells * fine), bool)
    for first, second in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        side = second - first
        inside &= side[0] * (y - first[1]) - side[1] * (x - first[0]) > 0
    clear = inside.reshape(cells, fine, cells, fine).mean(axis=(1, 3))
    film = FILMS["flat film"]
    compare(
        rs.triangle(*(tuple(corner) for corner in corners), count=44),
        pinsim.Hole.traced(Traced(clear=clear, cell_mm=0.4 / cells)),
        film,
        film.place(angle_deg, "uv"),
        distance_mm=300.0,
    )


def overlapped_l(u, v, *, place, wavelength_nm, distance_mm, scale):
    """Return the transfer function of the L in closed form, flat film 60 mm away.

    The L and its shifted self have in common, bar by bar, rectangles, and the Fourier transform of a
    rectangle is two sinc and the phase of its place. Shift: lambda z nu/cos^3 outwards and
    lambda z nu/cos sideways; frequency in the hole: m nu, m = 1 + z/zo (geometry of flat film).
    """
    radius = np.hypot(*place)
    out = np.array(place) / radius if radius else np.array([1.0, 0.0])
    cosine = 60.0 / np.hypot(60.0, radius)
    outwards, sideways = u * out[0] + v * out[1], v * out[0] - u * out[1]
    outwards, sideways = outwards / cosine**3, sideways / cosine
    reach = wavelength_nm * rs.NM * 60.0
    shift_x = reach * (outwards * out[0] - sideways * out[1])
    shift_y = reach * (outwards * out[1] + sideways * out[0])
    shadow = 1 + 60.0 / distance_mm
    total = 0
    for one in (TALL_BAR, FOOT):
        for other in (TALL_BAR, FOOT):
            strip = []
            for shift, start, frequency in ((shift_x, 0, u), (shift_y, 2, v)):
                low = np.maximum(scale * one[start] - shift / 2, scale * other[start] + shift / 2)
                high = np.minimum(
                    scale * one[start + 1] - shift / 2, scale * other[start + 1] + shift / 2
                )
                size = np.maximum(high - low, 0)
                waves = shadow * frequency
                strip.append(
                    size * np.sinc(waves * size) * np.exp(1j * np.pi * waves * (low + high))
                )
            total = total + strip[0] * strip[1]
    return total / (scale**2 * L_AREA_MM2)


@pytest.mark.parametrize("place", [(0.0, 0.0), (25.0, 30.0)])
@pytest.mark.parametrize(
    ("scale", "wavelength_nm"),
    [(1.0, 550.0), (1.0, 450.0), (3.0, 550.0), (6.0, 450.0), (1.0, 50.0), (1.0, 1.0)],
    ids=["0.3 mm", "0.3 mm blue", "0.9 mm", "1.8 mm blue", "50 nm", "1 nm, the geometric limit"],
)
def test_an_l_shaped_hole_draws_an_l_upside_down_from_diffraction_to_mere_shadow(
    scale, wavelength_nm, place
):
    u, v = np.meshgrid(np.linspace(-5, 5, 21) / scale, np.linspace(-5, 5, 21) / scale)
    keywords = {"wavelength_nm": wavelength_nm, "distance_mm": 240.0}
    seen = film_otf(
        u,
        v,
        camera=camera_with(traced_l(scale), FILMS["flat film"]),
        film_point_mm=place,
        **keywords,
    )
    expected = overlapped_l(u, v, place=place, scale=scale, **keywords)
    assert np.abs(seen - expected).max() <= 2e-3  # a traced outline's stated error: 1e-3


# A plate of thickness t leaves two openings t tan(theta) apart, one at each face of the bore: the
# hole is a lens (geometry of overlapping circles, as for the falloff of a thick plate).
@pytest.mark.parametrize(
    ("film", "angle_deg", "towards"),
    [("flat film", 30.0, "u"), ("flat film", 45.0, "uv"), ("round tin", 40.0, "uv")],
)
@pytest.mark.parametrize("kind", ["round", "oval", "slit"])
def test_through_a_thick_plate_the_hole_draws_as_a_lens_shaped_one(kind, film, angle_deg, towards):
    film = FILMS[film]
    place = film.place(angle_deg, towards)
    ray = film.points(*np.array(place))
    thickness_mm = 0.12
    # Both ends of the bore as seen along the ray; which of them lies where does not matter.
    apart = tuple(float(part) for part in thickness_mm * ray[:2] / ray[2])
    if kind == "round":
        hole = pinsim.Hole(diameter_mm=0.3, plate_thickness_mm=thickness_mm)
        opening = rs.lens(0.3, 0.3, apart, count=40)
    elif kind == "oval":
        hole = pinsim.Hole.oval(0.36, 0.25, plate_thickness_mm=thickness_mm)
        opening = rs.lens(0.36, 0.25, apart, count=40)
    else:
        hole = pinsim.Hole.slit(0.36, 0.25, plate_thickness_mm=thickness_mm)
        half_x, half_y = (0.36 - abs(apart[0])) / 2, (0.25 - abs(apart[1])) / 2
        opening = rs.rectangle(-half_x, half_x, -half_y, half_y, count=40)
    compare(opening, hole, film, place, distance_mm=300.0)


def test_through_a_thick_plate_an_l_shaped_hole_draws_with_what_is_left_of_it():
    """The overlap of two Ls apart, in rectangles counted out by hand for a shift along u."""
    film = FILMS["flat film"]
    apart = 0.06
    place = (60.0 * 0.5, 0.0)
    # The L moved by -apart/2 and by +apart/2. Above the foot only the bars overlap; in the foot's
    # rows the whole row of the L, 0.3 mm wide, does.
    bars = rs.rectangle(-0.15 + apart / 2, -0.05 - apart / 2, 0.0, 0.2, count=36)
    foot = rs.rectangle(-0.15 + apart / 2, 0.15 - apart / 2, -0.1, 0.0, count=36)
    hole = pinsim.Hole.traced(traced_l().outline, plate_thickness_mm=apart / 0.5)
    compare(bars + foot, hole, film, place)


@pytest.mark.parametrize(
    ("kind", "direction"),
    [("round", (-0.6, 0.8))]
    + [
        (kind, direction)
        for kind in ("round", "oval", "slit", "traced")
        for direction in ((1.0, 0.0), (0.0, -1.0))
    ],
)
def test_the_film_sees_no_light_beyond_where_the_bore_closes(kind, direction):
    """tan(theta) = d/t: the two faces' openings no longer overlap (geometry).

    Each hole is 0.3 mm across and the plate 0.3 mm thick, so the bore closes 60 mm off the axis,
    right and up (for the round one: anywhere).
    """
    film = FILMS["flat film"]
    outline = traced_l().outline  # 0.3 mm wide and high
    hole = {
        "round": pinsim.Hole(diameter_mm=0.3, plate_thickness_mm=0.3),
        "oval": pinsim.Hole.oval(0.3, 0.3, plate_thickness_mm=0.3),
        "slit": pinsim.Hole.slit(0.3, 0.3, plate_thickness_mm=0.3),
        "traced": pinsim.Hole.traced(outline, plate_thickness_mm=0.3),
    }[kind]
    for ratio, expected in ((0.98, 1.0), (1.02, 0.0), (1.3, 0.0)):
        seen = film_otf(
            np.array([0.0, 0.01, 30.0]),
            0.0,
            camera=camera_with(hole, film),
            film_point_mm=(60.0 * ratio * direction[0], 60.0 * ratio * direction[1]),
            wavelength_nm=550.0,
        )
        assert seen[0] == pytest.approx(
            expected, abs=1e-4
        )  # what a thick plate's quadrature states
        if expected == 0.0:
            np.testing.assert_array_equal(seen, 0.0)
