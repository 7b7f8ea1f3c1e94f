"""A straight line of the scene lies on the film where geometry says, from photos and panoramas alike.

A straight line and the hole's middle span a plane; where that plane cuts the film is the line's image.
Film points are those of reference/bent_film.py, so the image of the plane n . p = 0 is
v = -(n_x x + n_z z) / n_y, or for a steep line and flat film u = -(n_y v + n_z z) / n_x: elementary
geometry, derived here. Light is measured as projected, before falloff and blur.
"""

import math

import numpy as np
import pytest
from reference.bent_film import BentFilm

from pinsim.render.plan import make_plan
from pinsim.render.project import project
from pinsim.scene import Scene
from pinsim.scene.photo import photo_from_linear

FOCAL_MM = 20.0
FILMS = {
    "flat": BentFilm(FOCAL_MM, 16.0, 12.0),
    "flat, raised and moved aside": BentFilm(FOCAL_MM, 16.0, 12.0, math.inf, "vertical", 6.0, 5.0),
    "arc about the hole": BentFilm(FOCAL_MM, 26.0, 12.0, 20.0),
    "arc about the hole, off centre": BentFilm(FOCAL_MM, 20.0, 12.0, 20.0, "vertical", 5.0, 4.0),
    "round tin": BentFilm(FOCAL_MM, 22.0, 12.0, 10.0),
    "round tin, lying": BentFilm(FOCAL_MM, 12.0, 22.0, 10.0, "horizontal"),
    "round tin, off centre": BentFilm(FOCAL_MM, 16.0, 12.0, 10.0, "vertical", -4.0, 3.0),
}
# Photo pixels per film pixel near the axis, about: averaged, and interpolated.
SCALES = {"finer than the film": 1.9, "coarser than the film": 0.4}
LARGEST_ERROR_PX = 0.02


def soft_line(off, sigma):
    """Return a soft bright line, sigma radians wide, by how far directions are off its plane."""
    return 0.02 + np.exp(-0.5 * (off / sigma) ** 2)


def rectilinear(per_radian, normal, sigma):
    """Return a photo of 2 x 60 degrees by 2 x 52; soft lines need no averaging over its pixels."""
    half = math.tan(math.radians(60.0)), math.tan(math.radians(52.0))
    columns, rows = (2 * round(per_radian * one) for one in half)
    x = (np.arange(columns) - 0.5 * (columns - 1)) / per_radian
    y = (0.5 * (rows - 1) - np.arange(rows)) / per_radian
    off = x * normal[0] + y[:, None] * normal[1] + normal[2]
    return Scene(
        name="photo",
        photo=photo_from_linear(soft_line(off / np.hypot(np.hypot(x, y[:, None]), 1.0), sigma)),
        horizontal_view_deg=2.0 * math.degrees(math.atan(0.5 * columns / per_radian)),
    )


def panorama(per_radian, normal, sigma):
    """Return a whole sphere."""
    rows = round(math.pi * per_radian)
    azimuth = ((np.arange(2 * rows) + 0.5) / rows - 1.0) * math.pi
    height = 0.5 * math.pi - (np.arange(rows)[:, None] + 0.5) / rows * math.pi
    ring = normal[0] * np.sin(azimuth) + normal[2] * np.cos(azimuth)
    return Scene(
        name="panorama",
        photo=photo_from_linear(
            soft_line(np.cos(height) * ring + normal[1] * np.sin(height), sigma)
        ),
        horizontal_view_deg=360.0,
        projection="equirectangular",
    )


def crossings(film, plan, normal, *, steep):
    """Return where the line's image cuts each column (or row, if steep), in grid pixels, and which.

    By bisection of n . p = 0 along the column: one root where the signs at its ends differ.
    """
    right, up = plan.right_mm(), plan.up_mm()
    along, across = (right, up) if steep else (up, right)
    picked = across[plan.inside[0 if steep else 1]][6:-6:7]

    def off(place):
        points = FILMS[film].points_mm(*((place, picked) if steep else (picked, place)))
        return points @ normal

    inner = along[plan.inside[1 if steep else 0]]
    low, high = np.full(picked.size, inner[12]), np.full(picked.size, inner[-13])
    found = np.sign(off(low)) != np.sign(off(high))
    for _ in range(60):
        middle = 0.5 * (low + high)
        same = np.sign(off(middle)) == np.sign(off(low))
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    place = (0.5 * (low + high) - along[0]) / (along[1] - along[0])
    which = np.rint((picked - across[0]) / (across[1] - across[0])).astype(int)
    return place[found], which[found]


def middle_of(profile, near):
    """Return the middle of a peak near a place, by a parabola through its logarithms."""
    top = round(near)
    top += int(np.argmax(profile[top - 3 : top + 4])) - 3
    around = np.arange(-2, 3)
    curve, slope, _ = np.polyfit(around, np.log(np.maximum(profile[top + around], 1e-6)), 2)
    return top - 0.5 * slope / curve


def worst_error_px(film, make, scale, *, steep):
    camera = FILMS[film].camera()
    blank = Scene.from_light(np.ones((4, 4)), horizontal_view_deg=60.0)
    pitch = make_plan(blank, camera, wavelength_nm=550.0).pitch_mm
    per_radian = scale * FOCAL_MM / pitch
    width, height = FILMS[film].width, FILMS[film].height
    right, up = FILMS[film].shift_right, FILMS[film].rise
    # A slanting plane through the middle of the frame.
    middle = FILMS[film].points_mm(np.float64(right + 0.04 * width), np.float64(up + 0.03 * height))
    lean = np.array([1.0, 0.21, 0.1]) if steep else np.array([0.17, 1.0, 0.1])
    normal = lean - middle * (lean @ middle) / (middle @ middle)
    normal /= np.linalg.norm(normal)
    # As wide as a film pixel and no narrower than a photo's.
    sigma = max(1.2 * pitch / FOCAL_MM, 1.2 / per_radian)
    scene = make(per_radian, normal, sigma)
    plan = make_plan(scene, camera, wavelength_nm=550.0)
    assert plan.pitch_mm == pitch
    light = project(scene, plan).light[..., 1]
    places, which = crossings(film, plan, normal, steep=steep)
    assert places.size > 20
    lines = light if steep else light.T
    found = [middle_of(lines[k], place) for k, place in zip(which, places, strict=True)]
    return float(np.abs(np.array(found) - places).max())


@pytest.mark.parametrize("steep", [False, True], ids=["level", "steep"])
@pytest.mark.parametrize("scale", SCALES)
@pytest.mark.parametrize("make", [rectilinear, panorama], ids=["photo", "panorama"])
@pytest.mark.parametrize("film", FILMS)
def test_a_straight_line_is_where_geometry_says(film, make, scale, steep):
    """Derived here, see above; a fiftieth of a film pixel is 1/100 of the finest period."""
    assert worst_error_px(film, make, SCALES[scale], steep=steep) < LARGEST_ERROR_PX
