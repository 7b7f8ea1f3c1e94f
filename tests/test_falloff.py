"""How dark the corners get: cos^4 of the field angle on flat film behind a thin plate."""

import numpy as np
import pytest
from reference import charts

import pinsim

FOCAL_LENGTH_MM = 20.0
VIEW_DEG = 150.0

# E = L A cos(hole) cos(film) / R^2: Gardner, J. Res. NBS 39 (1947) 213; Reiss, JOSA 38 (1948) 980
# (citations from memory; the values are re-derived).
COS4 = [
    (10.0, 0.940602),
    (15.0, 0.870513),
    (20.0, 0.779728),
    (25.0, 0.674688),
    (30.0, 0.562500),
    (35.0, 0.450255),
    (40.0, 0.344363),
    (45.0, 0.250000),
    (50.0, 0.170714),
    (55.0, 0.108234),
    (60.0, 0.062500),
]

# Relative. 1 nm leaves the 0.2 mm disc alone, over which cos^4 bends by 1e-4 of itself; 2e-3 also
# covers reading the value between two pixels 0.25 mm apart by a straight line.
# At 550 nm a share 2 lambda z/(pi^2 d r) of the light lies beyond r; 1.5e-4 of the centre's light
# then reaches the 35 mm to the 60 degree point, and 2e-3 of that point's own light is drawn by what
# lies beyond the photo, 40 mm on, through a hole that foreshortens to an eighth.
TOLERANCE = {1.0: 2e-3, 550.0: 8e-3}


@pytest.fixture(scope="module", params=sorted(TOLERANCE))
def white_wall(request, tmp_path_factory):
    """Return (wavelength, film x mm, exposure of the middle row) of a white wall, 150 degrees."""
    folder = tmp_path_factory.mktemp("wall")
    codes = np.full((300, 600, 3), 255, np.uint8)
    scene = charts.write_scene(folder, codes, view_deg=VIEW_DEG)
    camera = charts.write_camera(
        folder, diameter_mm=0.2, focal_length_mm=FOCAL_LENGTH_MM, width_mm=80.25, height_mm=3.75
    )
    picture = pinsim.preview(
        pinsim.Scene.load(scene),
        pinsim.Camera.load(camera),
        wavelength_nm=request.param,
        width_px=321,
    )
    rows, columns, _ = picture.exposure.shape
    x_mm = (np.arange(columns) - (columns - 1) / 2) * picture.pitch_mm
    assert np.ptp(x_mm) + picture.pitch_mm == pytest.approx(80.25, rel=2e-3)
    middle = picture.exposure[(rows - 1) // 2 : rows // 2 + 1].mean(axis=(0, 2))
    return request.param, x_mm, middle


@pytest.mark.parametrize("side", [-1, 1], ids=["left", "right"])
@pytest.mark.parametrize(("angle_deg", "cos4"), COS4)
def test_a_white_wall_darkens_with_the_fourth_power_of_the_cosine(
    white_wall, angle_deg, cos4, side
):
    wavelength_nm, x_mm, exposure = white_wall
    position_mm = side * FOCAL_LENGTH_MM * np.tan(np.radians(angle_deg))
    seen = np.interp(position_mm, x_mm, exposure)
    assert seen == pytest.approx(cos4, rel=TOLERANCE[wavelength_nm])


def test_a_white_wall_is_exposed_to_one_on_the_axis(white_wall):
    """By the definition of the exposure scale: 1.0 = an evenly lit white scene at the axis."""
    wavelength_nm, x_mm, exposure = white_wall
    assert np.interp(0.0, x_mm, exposure) == pytest.approx(1.0, rel=TOLERANCE[wavelength_nm])
