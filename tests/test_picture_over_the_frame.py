"""Whole pictures whose kernel changes over the frame, against every source pixel's own point image.

Each lit photo pixel is scattered over the film by the brute-force Rayleigh-Sommerfeld integral of
tests/reference/rayleigh_sommerfeld.py, which imports nothing of pinsim: 90 degrees across, 96 x 96
film pixels, flat film, an arc about the hole and a round tin; far, near and through a thick plate.
"Computed independently" stands for that.
"""

import numpy as np
import pytest
from reference import rayleigh_sommerfeld as rs

import pinsim

DEPTH_MM = 12.0
HOLE_MM = 0.12
WAVELENGTH_NM = 550.0
PIXELS = 96
FRAME_MM = 2.0 * DEPTH_MM  # 90 degrees across, on flat film
PHOTO_PITCH_MM = 0.024  # on the plane of flat film: finer than 1/(2 x 18 cycles/mm), the cut-off
PHOTO_SIDE = 1100  # 95 degrees: a dark rim all round
BLOB_SIGMA_PX = 1.5  # a smooth lamp holds nothing that photo pixels could not
BLOB_PX = 4  # half its width; beyond, exp(-3.5) and less is cut off alike on both sides
REACH_MM = 0.6  # farther away a lamp has less than 1e-4 of its peak

RMS_BOUND = 1e-3
LARGEST_BOUND = 5e-3

SURFACES = {"flat": np.inf, "arc about the hole": DEPTH_MM, "round tin": DEPTH_MM / 2}


def lamps(count, rng, half_width_mm, half_height_mm):
    """Return a dark photo with smooth lamps of unlike brightness all over what the film sees."""
    photo = np.zeros((PHOTO_SIDE, PHOTO_SIDE))
    offset = np.arange(-BLOB_PX, BLOB_PX + 1)
    blob = np.exp(-0.5 * (offset[:, None] ** 2 + offset**2) / BLOB_SIGMA_PX**2)
    for k in range(count):
        x = half_width_mm * (2.0 * (k + rng.random()) / count - 1.0)
        y = half_height_mm * rng.uniform(-1.0, 1.0)
        row = round(0.5 * (PHOTO_SIDE - 1) - y / PHOTO_PITCH_MM)
        column = round(0.5 * (PHOTO_SIDE - 1) + x / PHOTO_PITCH_MM)
        photo[row - BLOB_PX : row + BLOB_PX + 1, column - BLOB_PX : column + BLOB_PX + 1] += (
            rng.uniform(0.3, 1.0) * blob
        )
    return photo


def film_point(bend_radius_mm, x_mm, y_mm):
    """Return film coordinates where the ray with these tangents, times the depth, meets the film."""
    if np.isinf(bend_radius_mm):
        return x_mm, y_mm
    azimuth = np.arctan2(x_mm, DEPTH_MM)
    at_film = np.arcsin((DEPTH_MM - bend_radius_mm) / bend_radius_mm * np.sin(azimuth))
    turn = azimuth + at_film
    ahead = DEPTH_MM - bend_radius_mm + bend_radius_mm * np.cos(turn)
    return bend_radius_mm * turn, y_mm / DEPTH_MM * ahead


def summed(photo, bend_radius_mm, width_mm, height_mm, shape, pitch_mm, distance_mm, plate_mm):
    """Return the film's exposure: every lit pixel's light, scattered by its own point image."""
    film = rs.Film(focal_length_mm=DEPTH_MM, bend_radius_mm=bend_radius_mm)
    v = (0.5 * (shape[0] - 1) - np.arange(shape[0])) * pitch_mm
    u = (np.arange(shape[1]) - 0.5 * (shape[1] - 1)) * pitch_mm
    exposure = np.zeros(shape)
    for row, column in np.argwhere(photo > 0.0):
        x = (column - 0.5 * (PHOTO_SIDE - 1)) * PHOTO_PITCH_MM
        y = (0.5 * (PHOTO_SIDE - 1) - row) * PHOTO_PITCH_MM
        tangent = np.array([x, y]) / DEPTH_MM
        # White light on flat film is cos^4; the power of a photo pixel is that times its area there.
        power = photo[row, column] * PHOTO_PITCH_MM**2 / (1.0 + tangent @ tangent) ** 2
        bore = plate_mm * tangent
        opening = rs.lens(HOLE_MM, HOLE_MM, (bore[0], bore[1]), count=64)
        clear = opening.area_mm2.sum() / (np.pi / 4 * HOLE_MM**2)
        u0, v0 = film_point(bend_radius_mm, x, y)
        rows = np.flatnonzero(np.abs(v - v0) <= REACH_MM)
        columns = np.flatnonzero(np.abs(u - u0) <= REACH_MM)
        if rows.size == 0 or columns.size == 0:
            continue
        image = rs.point_image(
            opening,
            film,
            film_point_mm=(u0, v0),
            du_mm=u[columns] - u0,
            dv_mm=v[rows] - v0,
            wavelength_nm=WAVELENGTH_NM,
            distance_mm=distance_mm,
        )
        exposure[np.ix_(rows, columns)] += power * clear * image
    return exposure


CASES = [
    ("flat", np.inf, 0.0),
    ("flat", 60.0, 0.0),
    ("flat", np.inf, 0.03),
    ("arc about the hole", np.inf, 0.0),
    ("round tin", np.inf, 0.0),
]


@pytest.mark.parametrize(
    ("surface", "distance_mm", "plate_mm"), CASES, ids=[f"{s}-{d:g}mm-{p:g}mm" for s, d, p in CASES]
)
def test_every_lamp_is_drawn_as_its_own_place_on_the_film_draws_it(surface, distance_mm, plate_mm):
    """Computed independently; rms at most 1e-3 of white, largest 5e-3, white being the brightest."""
    rng = np.random.default_rng(7)
    bend = SURFACES[surface]
    # A round tin bends through twice the angle: 90 degrees across is a film as long as its half turn.
    width = FRAME_MM if np.isinf(bend) else np.radians(90.0) * DEPTH_MM
    height = FRAME_MM if np.isinf(bend) else 12.0
    half_height = 10.5 if np.isinf(bend) else 3.6
    photo = lamps(12, rng, 11.4, half_height)
    scene = pinsim.Scene.from_light(
        photo.astype(np.float32),
        horizontal_view_deg=float(
            np.degrees(2 * np.arctan(0.5 * PHOTO_SIDE * PHOTO_PITCH_MM / DEPTH_MM))
        ),
        distance_mm=distance_mm,
    )
    camera = pinsim.Camera(
        focal_length_mm=DEPTH_MM,
        hole=pinsim.Hole(diameter_mm=HOLE_MM, plate_thickness_mm=plate_mm),
        film=pinsim.Film(width_mm=width, height_mm=height, bend_radius_mm=bend),
    )
    picture = pinsim.preview(scene, camera, wavelength_nm=WAVELENGTH_NM, width_px=PIXELS)
    exposure = picture.exposure[..., 1].astype(float)
    assert exposure.shape[1] == PIXELS
    film = summed(
        photo,
        bend,
        width,
        height,
        exposure.shape,
        picture.pitch_mm,
        distance_mm,
        plate_mm,
    )
    white = film.max()
    error = (np.nan_to_num(exposure) - film) / white
    assert np.sqrt(np.mean(error**2)) <= RMS_BOUND
    assert np.abs(error).max() <= LARGEST_BOUND


@pytest.mark.parametrize("surface", SURFACES)
def test_a_plain_wall_has_no_seams_on_any_film(surface):
    """White everywhere, falloff divided out: neighbours agree to 1e-4, as nothing is tiled."""
    bend = SURFACES[surface]
    width = 56.0 if np.isinf(bend) else 40.0
    scene = pinsim.Scene.from_light(np.ones((300, 400, 3), np.float32), horizontal_view_deg=140.0)
    scale = 1.0 if np.isinf(bend) else 60.0 / DEPTH_MM
    camera = pinsim.Camera(
        focal_length_mm=40.0 if np.isinf(bend) else 60.0,
        hole=pinsim.Hole(diameter_mm=0.5),
        film=pinsim.Film(width_mm=width, height_mm=width, bend_radius_mm=bend * scale),
    )
    picture = pinsim.preview(scene, camera, wavelength_nm=WAVELENGTH_NM, width_px=256)
    rows, columns = picture.exposure.shape[:2]
    v = (0.5 * (rows - 1) - np.arange(rows)) * picture.pitch_mm
    u = (np.arange(columns) - 0.5 * (columns - 1)) * picture.pitch_mm
    film = rs.Film(
        focal_length_mm=camera.focal_length_mm, bend_radius_mm=camera.film.bend_radius_mm
    )
    points = film.points(*np.meshgrid(u, v))
    normals = film.normals(*np.meshgrid(u, v))
    r = np.linalg.norm(points, axis=-1)
    # E = L A cos(hole) cos(film) / r^2, relative to the axis.
    falloff = points[..., 2] * np.einsum("ijk,ijk->ij", points, normals) / r**4
    falloff *= camera.focal_length_mm**2
    flat = picture.exposure[..., 0] / falloff
    assert np.abs(np.diff(flat, axis=0)).max() < 1e-4
    assert np.abs(np.diff(flat, axis=1)).max() < 1e-4
    assert flat == pytest.approx(1.0, abs=3e-3)
