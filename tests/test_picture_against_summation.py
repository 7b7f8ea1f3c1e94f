"""The whole picture against a film summed point by point, and what light must never do.

The reference adds, for every lit photo pixel, its own point image (tests/reference/fresnel.py,
which imports nothing of pinsim and transforms no picture). A photo's values are samples of a
band-limited scene; with photo pixels of 0.05 mm on the film the sum over pixels is the exact
integral, because no point image here holds a frequency above 10 cycles/mm. "Computed
independently" stands for that.
"""

from dataclasses import dataclass

import numpy as np
import pytest
from reference import charts, fresnel
from scipy.ndimage import map_coordinates

import pinsim
from pinsim.material import material

PHOTO_PITCH_MM = 0.05  # a photo pixel, carried through the hole to the film
STEP_MM = 0.00025  # of the tabulated point image; linear reading errs by 2e-5 of its peak
LEAST_PSNR_DB = 60.0  # rms 1e-3 of white: an eighth of an 8-bit step at middle grey


def psnr_db(picture, reference):
    """Return 10 log10(1/mse), peak = 1.0 = white."""
    return -10 * np.log10(np.mean((np.asarray(picture, float) - reference) ** 2))


@dataclass(frozen=True)
class Bench:
    """A camera with a round hole before a plane photo whose pixels are 0.05 mm on the film."""

    diameter_mm: float = 0.3
    focal_length_mm: float = 100.0
    distance_mm: float = np.inf
    frame_mm: float = 5.0
    width_px: int | None = 100  # finer than any film image here needs, so an interpolation of it
    shift_mm: tuple[float, float] = (0.0, 0.0)

    @property
    def focal_length_px(self):
        return self.focal_length_mm / PHOTO_PITCH_MM

    def setup(self, wavelength_nm):
        return fresnel.Setup(
            diameter_mm=self.diameter_mm,
            focal_length_mm=self.focal_length_mm,
            distance_mm=self.distance_mm,
            wavelength_nm=wavelength_nm,
        )

    def photo(self, codes):
        return fresnel.Photo(
            light=charts.linear_of_srgb(codes), focal_length_px=self.focal_length_px
        )

    def preview(self, folder, codes, wavelength_nm=None):
        view_deg = charts.view_deg_of(self.focal_length_px, codes.shape[1])
        scene = charts.write_scene(folder, codes, view_deg=view_deg, distance_mm=self.distance_mm)
        camera = charts.write_camera(
            folder,
            diameter_mm=self.diameter_mm,
            focal_length_mm=self.focal_length_mm,
            width_mm=self.frame_mm,
            height_mm=self.frame_mm,
            shift_mm=self.shift_mm,
        )
        return pinsim.preview(
            pinsim.Scene.load(scene),
            pinsim.Camera.load(camera),
            wavelength_nm=wavelength_nm,
            width_px=self.width_px,
        )

    def radial_film(self, photo, picture, setups, shares):
        """Return the axial reference on the pixels of a picture; its frame stands on the axis."""
        y_mm, x_mm = fresnel.film_positions(picture.exposure.shape[:2], picture.pitch_mm)
        reach_mm = np.hypot(*photo.light.shape) * PHOTO_PITCH_MM / 2 + self.frame_mm
        table = fresnel.psf_on_fine_radii(setups, shares, reach_mm=reach_mm, step_mm=STEP_MM)
        return fresnel.film_by_radial_sum(
            photo,
            table,
            step_mm=STEP_MM,
            focal_length_mm=self.focal_length_mm,
            y_mm=y_mm,
            x_mm=x_mm,
        )


# --- a chart -----------------------------------------------------------------------------------


@pytest.mark.parametrize("distance_mm", [np.inf, 300.0], ids=["far", "300mm"])
@pytest.mark.parametrize("diameter_mm", [0.3, 0.5])
def test_a_chart_in_one_colour_is_drawn_as_the_sum_of_its_points(
    tmp_path, diameter_mm, distance_mm
):
    """Computed independently; a constant point image errs by 6e-5 rms over these 2 degrees."""
    bench = Bench(diameter_mm=diameter_mm, distance_mm=distance_mm)
    codes = charts.grey_chart(92, 220, rng=np.random.default_rng(11))
    # 0.5 mm at 650 nm draws up to 7.7 cycles/mm; the finest bars of the photo have 10.
    wavelength_nm = 550.0 if diameter_mm < 0.5 else 650.0
    picture = bench.preview(tmp_path, codes, wavelength_nm)
    film = bench.radial_film(bench.photo(codes), picture, [bench.setup(wavelength_nm)], [1.0])
    for channel in np.moveaxis(picture.exposure, -1, 0):
        assert psnr_db(channel, film) >= LEAST_PSNR_DB


@pytest.mark.parametrize("width_px", [None, 40, 150], ids=["native", "40px", "150px"])
def test_each_pixel_is_the_films_exposure_at_its_own_place(tmp_path, width_px):
    """Computed independently. A smaller or larger picture samples the same film image."""
    bench = Bench(width_px=width_px)
    codes = charts.grey_chart(92, 220, rng=np.random.default_rng(15))
    picture = bench.preview(tmp_path, codes, 550.0)
    film = bench.radial_film(bench.photo(codes), picture, [bench.setup(550.0)], [1.0])
    assert psnr_db(picture.exposure[..., 1], film) >= LEAST_PSNR_DB


@pytest.mark.parametrize("distance_mm", [np.inf, 300.0], ids=["far", "300mm"])
def test_a_chart_in_white_light_is_drawn_as_the_sum_of_its_points(tmp_path, distance_mm):
    """Computed independently, over every wavelength of every channel of the colour material."""
    bench = Bench(distance_mm=distance_mm)
    grey = charts.grey_chart(92, 220, rng=np.random.default_rng(12))
    codes = np.stack([grey, grey[::-1], grey.T], axis=-1)  # each colour its own chart
    picture = bench.preview(tmp_path, codes)
    channels = material("colour").channels
    assert picture.exposure.shape[2] == len(channels)
    for index, channel in enumerate(channels):
        assert len(channel.wavelengths_nm) >= 9
        assert np.sum(channel.weights) == pytest.approx(1.0)
        setups = [bench.setup(float(nm)) for nm in channel.wavelengths_nm]
        film = np.zeros(picture.exposure.shape[:2])
        for photo_band in range(3):
            shares = channel.weights[:, photo_band]
            if shares.any():
                photo = bench.photo(codes[..., photo_band])
                film += bench.radial_film(photo, picture, setups, shares)
        assert psnr_db(picture.exposure[..., index], film) >= LEAST_PSNR_DB


@pytest.mark.parametrize("distance_mm", [np.inf, 300.0], ids=["far", "300mm"])
def test_a_chart_far_off_the_axis_is_drawn_through_the_foreshortened_hole(tmp_path, distance_mm):
    """28 degrees right and up; computed independently from path lengths, see film_by_oblique_sum.

    That reference agrees with a sum over exact path lengths to 3.5e-4 of the peak up to 45 degrees.
    """
    bench = Bench(
        focal_length_mm=60.0, distance_mm=distance_mm, shift_mm=(30.0, 10.0), width_px=160
    )
    chart = charts.grey_chart(92, 220, rng=np.random.default_rng(13))
    codes = np.zeros((640, 1440), np.uint8)
    right, up = (int(side / PHOTO_PITCH_MM) for side in bench.shift_mm)
    top, left = 320 - up - 110, 720 + right - 110
    codes[top : top + 220, left : left + 220] = chart
    picture = bench.preview(tmp_path, codes, 550.0)
    rows, columns = picture.exposure.shape[:2]
    y_mm, x_mm = fresnel.film_positions((rows, columns), picture.pitch_mm)
    row, column = np.random.default_rng(14).integers(0, min(rows, columns), (2, 100))
    film = fresnel.film_by_oblique_sum(
        bench.photo(codes),
        bench.setup(550.0),
        y_mm=y_mm[row] - bench.shift_mm[1],
        x_mm=x_mm[column] + bench.shift_mm[0],
    )
    assert psnr_db(picture.exposure[row, column, 1], film) >= LEAST_PSNR_DB


# --- plain walls and fine patterns -------------------------------------------------------------


def tail_share(bench, radius_mm, wavelength_nm=550.0):
    """Return the share of a point's light beyond a radius: 2/(pi v) (from memory, recomputed)."""
    return 2 / (np.pi * bench.setup(wavelength_nm).v_per_mm * radius_mm)


def cos4(bench, picture):
    y_mm, x_mm = fresnel.film_positions(picture.exposure.shape[:2], picture.pitch_mm)
    tangent2 = (x_mm**2 + y_mm[:, None] ** 2) / bench.focal_length_mm**2
    return ((1 + tangent2) ** -2)[..., None]


@pytest.mark.parametrize("wavelength_nm", [None, 550.0], ids=["white-light", "550nm"])
def test_a_plain_wall_stays_plain(tmp_path, wavelength_nm):
    """Blurring nothing must change nothing but cos^4 (its source: see test_falloff.py)."""
    bench = Bench(focal_length_mm=40.0, frame_mm=24.0, width_px=120)
    codes = np.full((1600, 1600), 188, np.uint8)
    picture = bench.preview(tmp_path, codes, wavelength_nm)
    wall = picture.exposure / cos4(bench, picture)
    light = charts.linear_of_srgb(codes[0, 0])
    # The photo ends 28 mm beyond the frame, so at most the tail past 28 mm is missing, and the same
    # again is exchanged between brighter and darker parts of the falloff.
    tolerance = 2 * tail_share(bench, 28.0, 690.0)
    np.testing.assert_allclose(wall, light, rtol=tolerance, atol=0)


@pytest.mark.parametrize("period_px", [2, 4])
def test_a_fine_chequerboard_of_black_and_white_turns_into_half_the_light(tmp_path, period_px):
    """Codes 0 and 255 average to 0.5 linear, which is code 188 (IEC 61966-2-1), not 128."""
    bench = Bench(diameter_mm=0.25, focal_length_mm=60.0, frame_mm=4.0, width_px=64)
    y, x = np.mgrid[0:480, 0:480] // (period_px // 2)
    codes = (255 * ((x + y) % 2)).astype(np.uint8)
    picture = bench.preview(tmp_path, codes, 800.0)
    # 0.25 mm, 60 mm, 800 nm draw up to 5.2 cycles/mm; the boards have 7.1 and 14.1 on the diagonal.
    assert bench.setup(800.0).cutoff_per_mm < 1 / (PHOTO_PITCH_MM * period_px) * np.sqrt(2)
    light = picture.exposure / cos4(bench, picture)
    np.testing.assert_allclose(light, 0.5, rtol=tail_share(bench, 10.0, 800.0), atol=0)
    code = 255 * (1.055 * float(light.mean()) ** (1 / 2.4) - 0.055)
    assert code == pytest.approx(187.516, abs=0.3)  # 0.3 % of light


# --- a point of light --------------------------------------------------------------------------

# Deep, so that the field stays below 1.4 degrees and one axial point image serves all of it.
POINT_BENCH = Bench(diameter_mm=0.5, focal_length_mm=200.0, frame_mm=8.0, width_px=128)
NEAR_THE_MIDDLE = (131, 107)
NEAR_THE_EDGE = (64, 194)  # 0.28 mm from the right edge of the frame, 2.8 mm above its middle


@pytest.fixture(scope="module", params=[NEAR_THE_MIDDLE, NEAR_THE_EDGE], ids=["middle", "edge"])
def point(request, tmp_path_factory):
    """Return (picture, its green channel, the reference film, the photo) of one white pixel."""
    codes = np.zeros((240, 240), np.uint8)
    codes[request.param] = 255
    folder = tmp_path_factory.mktemp("point")
    picture = POINT_BENCH.preview(folder, codes, 550.0)
    photo = POINT_BENCH.photo(codes)
    film = POINT_BENCH.radial_film(photo, picture, [POINT_BENCH.setup(550.0)], [1.0])
    return picture, np.asarray(picture.exposure[..., 1], float), film, photo


def test_a_point_of_light_is_drawn_as_its_diffraction_image(point):
    """Computed independently, to an 8-bit step of its own peak; 8e-4 of it is foreshortening."""
    _, exposure, film, _ = point
    np.testing.assert_allclose(exposure, film, rtol=0, atol=film.max() / 255)


def test_a_point_keeps_its_light(point):
    """What a photo pixel covers of the film arrives: area, cos^4, less what leaves the frame."""
    picture, exposure, film, photo = point
    tangent_x, tangent_y, _ = photo.lit()
    arriving_mm2 = PHOTO_PITCH_MM**2 * float((1 + tangent_x**2 + tangent_y**2)[0] ** -2)
    on_the_frame_mm2 = exposure.sum() * picture.pitch_mm**2
    share_of_reference = film.sum() * picture.pitch_mm**2 / arriving_mm2
    # abs: 0.003 stops of the point. What has left the frame (1 % and 9 %) must not come back.
    assert on_the_frame_mm2 / arriving_mm2 == pytest.approx(share_of_reference, abs=2e-3)
    assert on_the_frame_mm2 < arriving_mm2


def test_a_point_of_light_keeps_its_place(point):
    """To a hundredth of a pixel, by least squares against the reference moved to and fro."""
    _, exposure, film, _ = point
    shift = 0.05
    rows, columns = np.indices(film.shape)

    def moved(down, right):
        return map_coordinates(film, [rows - down, columns - right], order=5, mode="nearest")

    slopes = [
        (moved(shift, 0) - moved(-shift, 0)) / (2 * shift),
        (moved(0, shift) - moved(0, -shift)) / (2 * shift),
        film,
    ]
    inner = np.s_[4:-4, 4:-4]  # away from where the spline looks over the frame's edge
    basis = np.stack([s[inner].ravel() for s in slopes], axis=1)
    down_px, right_px, _ = np.linalg.lstsq(basis, (exposure - film)[inner].ravel())[0]
    assert down_px == pytest.approx(0.0, abs=0.01)
    assert right_px == pytest.approx(0.0, abs=0.01)


def test_a_point_of_light_at_the_edge_does_not_wrap_round(point):
    """What leaves one side of the frame must not come in at the other (the common FFT slip)."""
    _, exposure, film, _ = point
    for side in (np.s_[:, :12], np.s_[:, -12:], np.s_[:12], np.s_[-12:]):
        # A wrapped copy would lift the far side from 1e-5 of the peak to 0.1 of it.
        strayed = np.abs(exposure[side] - film[side]).max()
        if film[side].max() < 1e-3 * film.max():
            assert strayed < 2e-4 * film.max()
            assert exposure[side].max() < 2 * film[side].max() + 1e-5 * film.max()
    assert film[:, :12].max() < 1e-3 * film.max()


def test_no_film_receives_less_than_no_light(point):
    """Irradiance is never negative; 1e-6 of the peak is float32 transform noise."""
    _, exposure, film, _ = point
    assert exposure.min() >= -1e-6 * film.max()
