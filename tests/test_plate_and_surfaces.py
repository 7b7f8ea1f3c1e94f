"""How much light reaches a film point through a thick plate and on a bent film; boxes nobody can build.

Tables computed independently of pinsim to the digits shown: overlap of two circles (held against a
Monte Carlo count), and E = L A cos(hole) cos(film)/r^2 on each surface (brute-force geometry).
Sources of the law: Gardner, J. Res. NBS 39 (1947) 213; Reiss, JOSA 38 (1948) 980 (from memory).
"""

import re

import numpy as np
import pytest

import pinsim
from pinsim.optics import Ellipse, FilmSurface, Slit, Traced, plate_transmission

PRINTED_5 = 5.1e-6  # half of the last digit printed
PRINTED_6 = 5.1e-7

PLATE_ANGLES_DEG = (10.0, 20.0, 30.0, 40.0, 45.0, 50.0, 60.0)
# t/d, light that comes through a straight round bore at those angles, angle of the last light.
PLATE = [
    (0.05, (0.98877, 0.97683, 0.96325, 0.94660, 0.93636, 0.92418, 0.88987), 87.138),
    (0.1, (0.97755, 0.95367, 0.92653, 0.89329, 0.87289, 0.84862, 0.78058), 84.289),
    (0.2, (0.95511, 0.90740, 0.85331, 0.78733, 0.74706, 0.69942, 0.56792), 78.690),
    (0.25, (0.94389, 0.88430, 0.81686, 0.73488, 0.68504, 0.62634, 0.46642), 75.964),
    (0.5, (0.88789, 0.76957, 0.63762, 0.48193, 0.39100, 0.28896, 0.05767), 63.435),
    (1.0, (0.77666, 0.54702, 0.30807, 0.07558, 0.0, 0.0, 0.0), 45.000),
]


def tangent(angle_deg):
    return np.tan(np.radians(angle_deg))


@pytest.mark.parametrize(("ratio", "shares", "_last"), PLATE)
def test_a_plate_lets_through_what_the_table_says(ratio, shares, _last):
    seen = plate_transmission(
        tangent(np.array(PLATE_ANGLES_DEG)) ** 2,
        diameter_mm=0.3,
        plate_thickness_mm=0.3 * ratio,
    )
    np.testing.assert_allclose(seen, shares, atol=PRINTED_5, rtol=0)


@pytest.mark.parametrize(("ratio", "_shares", "last_deg"), PLATE)
def test_a_plate_lets_nothing_through_beyond_where_its_bore_closes(ratio, _shares, last_deg):
    just_inside, just_outside = plate_transmission(
        tangent(np.array([last_deg - 0.1, last_deg + 0.001])) ** 2,
        diameter_mm=0.3,
        plate_thickness_mm=0.3 * ratio,
    )
    assert just_inside > 0.0
    assert just_outside == 0.0


@pytest.mark.parametrize("towards_deg", [0.0, 90.0, 217.0])
@pytest.mark.parametrize(("ratio", "shares", "_last"), PLATE)
def test_a_round_opening_dims_by_the_plates_table_in_every_direction(
    ratio, shares, _last, towards_deg
):
    towards = np.array([np.cos(np.radians(towards_deg)), np.sin(np.radians(towards_deg))])
    shift = 0.3 * ratio * tangent(np.array(PLATE_ANGLES_DEG))[:, None] * towards
    seen = Ellipse(right_mm=0.3, up_mm=0.3).clear_share(shift)
    np.testing.assert_allclose(seen, shares, atol=PRINTED_5, rtol=0)


@pytest.mark.parametrize(("ratio", "shares", "_last"), PLATE)
def test_an_oval_hole_dims_less_along_its_longer_axis(ratio, shares, _last):
    """Stretching a circle stretches the overlap with it: each axis has its own t/d (geometry)."""
    oval = Ellipse(right_mm=0.6, up_mm=0.2)
    tangents = tangent(np.array(PLATE_ANGLES_DEG))
    none = np.zeros_like(tangents)
    for shift in (
        np.stack([0.6 * ratio * tangents, none], axis=-1),
        np.stack([none, -0.2 * ratio * tangents], axis=-1),
    ):
        np.testing.assert_allclose(oval.clear_share(shift), shares, atol=PRINTED_5, rtol=0)


@pytest.mark.parametrize(("ratio", "shares", "_last"), PLATE)
def test_a_traced_round_hole_dims_by_the_plates_table(ratio, shares, _last):
    """A grid 256 cells across; its stated error is 1e-3, half of it is asked for here."""
    cells, fine = 264, 8
    place = (np.arange(cells * fine) - (cells * fine - 1) / 2) / fine
    disc = np.hypot(place[None, :], place[:, None]) < 128
    clear = disc.reshape(cells, fine, cells, fine).mean(axis=(1, 3))
    traced = Traced(clear=clear, cell_mm=0.3 / 256)
    shift = 0.3 * ratio * tangent(np.array(PLATE_ANGLES_DEG))[:, None] * np.array([0.6, -0.8])
    np.testing.assert_allclose(traced.clear_share(shift), shares, atol=5e-4, rtol=0)


def test_a_slit_dims_by_what_is_left_of_each_side():
    """The overlap of two rectangles apart is a rectangle (geometry)."""
    slit = Slit(right_mm=0.2, up_mm=1.0)
    assert slit.clear_share(np.array([0.05, 0.0])) == pytest.approx(0.75, abs=1e-12)
    assert slit.clear_share(np.array([-0.05, 0.5])) == pytest.approx(0.375, abs=1e-12)
    assert slit.clear_share(np.array([0.21, 0.0])) == 0.0


# cos^4 of the field angle to six digits: a flat film.
COS4 = [
    (0.0, 1.0),
    (10.0, 0.940602),
    (20.0, 0.779728),
    (30.0, 0.562500),
    (40.0, 0.344363),
    (45.0, 0.250000),
    (50.0, 0.170714),
    (60.0, 0.062500),
    (70.0, 0.013684),
]
Z_MM = 60.0


@pytest.mark.parametrize("towards_deg", [0.0, 90.0, 205.0])
@pytest.mark.parametrize(("angle_deg", "cos4"), COS4)
def test_flat_film_darkens_with_the_fourth_power_of_the_cosine(angle_deg, cos4, towards_deg):
    radius = Z_MM * tangent(angle_deg)
    towards = np.radians(towards_deg)
    seen = FilmSurface(focal_length_mm=Z_MM).chief_rays(
        radius * np.cos(towards), radius * np.sin(towards)
    )
    assert float(seen.falloff) == pytest.approx(cos4, abs=PRINTED_6)


# Azimuth and elevation of the film point as the hole sees it, and E/E0: cos(azimuth) cos^4(elevation)
# on an arc about the hole, cos^4(elevation) at any azimuth in a round tin with the hole in its wall.
ARC = [
    (40.0, 20.0, 0.597306),
    (60.0, 40.0, 0.172181),
    (60.0, 0.0, 0.500000),
    (-45.0, 0.0, 0.707107),
    (0.0, -40.0, 0.344363),
    (0.0, 60.0, 0.062500),
]
TIN = [
    (0.0, 40.0, 0.344363),
    (30.0, 40.0, 0.344363),
    (-65.0, 40.0, 0.344363),
    (60.0, -20.0, 0.779728),
    (45.0, 0.0, 1.0),
    (75.0, 0.0, 1.0),
]


def point_on_bent_film(kind, azimuth_deg, elevation_deg):
    """Return (along the bend, along its axis), mm, of the point at those angles.

    On the arc the ray is z long seen from above and the film runs z per radian; in the tin the ray
    is the chord z cos(azimuth), and the film runs z/2 for the angle at the centre, twice the azimuth.
    """
    azimuth = np.radians(azimuth_deg)
    seen_from_above = Z_MM if kind == "arc" else Z_MM * np.cos(azimuth)
    return Z_MM * azimuth, seen_from_above * tangent(elevation_deg)


@pytest.mark.parametrize("axis", ["vertical", "horizontal"])
@pytest.mark.parametrize(
    ("kind", "azimuth_deg", "elevation_deg", "share"),
    [("arc", *row) for row in ARC] + [("tin", *row) for row in TIN],
)
def test_bent_film_darkens_as_its_surface_says(kind, azimuth_deg, elevation_deg, share, axis):
    bent, straight = point_on_bent_film(kind, azimuth_deg, elevation_deg)
    surface = FilmSurface(
        focal_length_mm=Z_MM, bend_radius_mm=Z_MM if kind == "arc" else Z_MM / 2, axis=axis
    )
    point = (bent, straight) if axis == "vertical" else (straight, bent)
    rays = surface.chief_rays(*point)
    assert float(rays.falloff) == pytest.approx(share, abs=PRINTED_6)
    # And the ray that leads there is the one meant: right and up as the scene is seen.
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    aside, along_axis = np.sin(azimuth) * np.cos(elevation), np.sin(elevation)
    right, up = (aside, along_axis) if axis == "vertical" else (along_axis, aside)
    ahead = np.cos(azimuth) * np.cos(elevation)
    np.testing.assert_allclose(rays.direction, (right, up, ahead), atol=1e-12)


def test_a_film_bent_ever_less_becomes_a_flat_one():
    u, v = np.meshgrid(np.linspace(-50, 50, 11), np.linspace(-50, 50, 11))
    flat = FilmSurface(focal_length_mm=Z_MM).chief_rays(u, v)
    nearly = FilmSurface(focal_length_mm=Z_MM, bend_radius_mm=1e8).chief_rays(u, v)
    np.testing.assert_allclose(nearly.falloff, flat.falloff, atol=1e-6)
    np.testing.assert_allclose(nearly.direction, flat.direction, atol=1e-6)


def camera(**film):
    return pinsim.Camera(
        focal_length_mm=Z_MM,
        hole=pinsim.Hole(diameter_mm=0.3),
        film=pinsim.Film(**film),
    )


def test_film_that_reaches_behind_the_wall_with_the_hole_is_refused():
    """An arc of 60 mm radius meets the plane of the hole after a quarter turn, 94.2 mm along it."""
    camera(width_mm=180.0, height_mm=60.0, bend_radius_mm=60.0)
    with pytest.raises(pinsim.DesignError, match=r"100 mm.*60 mm.*behind.*wall"):
        camera(width_mm=200.0, height_mm=60.0, bend_radius_mm=60.0)


def test_film_shifted_behind_the_wall_with_the_hole_is_refused():
    camera(width_mm=120.0, height_mm=60.0, bend_radius_mm=60.0, shift_right_mm=-30.0)
    with pytest.raises(pinsim.DesignError, match=r"behind.*wall"):
        camera(width_mm=120.0, height_mm=60.0, bend_radius_mm=60.0, shift_right_mm=-40.0)


def test_film_in_a_round_tin_ends_where_the_hole_is():
    """The wall of a tin 60 mm across is 188.5 mm long; film all round would cover the hole."""
    camera(width_mm=170.0, height_mm=60.0, bend_radius_mm=30.0)
    with pytest.raises(pinsim.DesignError):
        camera(width_mm=188.0, height_mm=60.0, bend_radius_mm=30.0)


@pytest.mark.parametrize("axis", ["vertical", "horizontal"])
def test_a_bend_too_tight_for_the_films_length_is_refused_with_what_it_allows(axis):
    """A bend of 20 mm has half a turn of 62.8 mm to each side."""
    size = {"width_mm": 130.0, "height_mm": 50.0}
    if axis == "horizontal":
        size = {"width_mm": 50.0, "height_mm": 130.0}
    with pytest.raises(pinsim.DesignError) as caught:
        pinsim.Film(**size, bend_radius_mm=20.0, bend_axis=axis)
    text = str(caught.value)
    assert re.search(r"65 mm", text)
    assert re.search(r"62\.8", text)
    assert re.search(r"20 mm", text)


def test_the_films_straight_side_may_be_of_any_length():
    camera(width_mm=60.0, height_mm=400.0, bend_radius_mm=30.0)
    camera(width_mm=400.0, height_mm=60.0, bend_radius_mm=30.0, bend_axis="horizontal")


@pytest.mark.parametrize(
    "hole",
    [
        pinsim.Hole(diameter_mm=10.0),
        pinsim.Hole.oval(0.5, 10.0),
        pinsim.Hole.slit(10.0, 0.5),
    ],
    ids=["round", "oval", "slit"],
)
def test_a_hole_as_large_as_the_frame_is_refused(hole):
    with pytest.raises(pinsim.DesignError, match=r"10 mm.*frame"):
        pinsim.Camera(
            focal_length_mm=Z_MM, hole=hole, film=pinsim.Film(width_mm=24.0, height_mm=10.0)
        )


@pytest.mark.parametrize("radius_mm", [0.0, -30.0, np.nan])
def test_a_bend_radius_that_is_no_radius_is_refused(radius_mm):
    with pytest.raises(pinsim.DesignError, match="bend radius"):
        pinsim.Film(width_mm=50.0, height_mm=50.0, bend_radius_mm=radius_mm)


@pytest.mark.parametrize("axis", ["vertical", "horizontal"])
@pytest.mark.parametrize("bend_radius_mm", [np.inf, 60.0, 30.0, 200.0])
def test_a_ray_meets_the_film_where_that_film_point_looks(bend_radius_mm, axis):
    """Geometry: back along the ray from a film point stands that film point; no source needed."""
    surface = FilmSurface(focal_length_mm=60.0, bend_radius_mm=bend_radius_mm, axis=axis)
    for u, v in [(0.0, 0.0), (25.0, 0.0), (-31.0, 12.0), (8.0, -27.0)]:
        x, y, ahead = surface.points_mm(u, v)
        assert surface.meet_mm(x / ahead, y / ahead) == pytest.approx((u, v), abs=1e-9)
