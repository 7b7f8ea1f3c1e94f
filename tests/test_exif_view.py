"""The angle of view from what a camera wrote into its photo.

Tags: Exif 2.32, CIPA DC-008 (from memory); 35 mm-equivalent angles computed independently from
2 atan(side / 2 f) with the 36 x 24 mm frame of ISO 1007.
"""

import math
import re

import numpy as np
import pytest
from PIL import Image
from PIL.TiffImagePlugin import IFDRational

from pinsim import Scene, SceneError
from pinsim.scene.exif_view import focal_length_px, horizontal_view_deg, told_focal_length

FOCAL_LENGTH = 0x920A
FOCAL_LENGTH_35MM = 0xA405
X_RESOLUTION = 0xA20E
RESOLUTION_UNIT = 0xA210
PIXEL_X = 0xA002
EXIF_DIRECTORY = 0x8769
ORIENTATION = 0x0112

# f35 mm: horizontal, vertical, diagonal degrees of a 3:2 picture.
VIEWS = {
    18: (90.0000, 67.3801, 100.4757),
    24: (73.7398, 53.1301, 84.0622),
    28: (65.4705, 46.3972, 75.3806),
    35: (54.4322, 37.8493, 63.4400),
    50: (39.5978, 26.9915, 46.7930),
    85: (23.9132, 16.0714, 28.5583),
    135: (15.1893, 10.1592, 18.2081),
}
PLACES = 6e-5


@pytest.mark.parametrize("f35", VIEWS)
def test_the_35_mm_equivalent_gives_the_published_angles(f35):
    focal_px = focal_length_px({FOCAL_LENGTH_35MM: f35}, 6000, 4000)
    across, high, diagonal = VIEWS[f35]
    assert horizontal_view_deg(focal_px, 6000) == pytest.approx(across, abs=PLACES)
    assert horizontal_view_deg(focal_px, 4000) == pytest.approx(high, abs=PLACES)
    assert 2 * math.degrees(math.atan(math.hypot(6000, 4000) / 2 / focal_px)) == pytest.approx(
        diagonal, abs=PLACES
    )


def test_a_4_to_3_photo_goes_by_the_diagonal():
    """26 mm, 5712 x 4284 px: 4290.6 px (read in a public test of another package)."""
    assert focal_length_px({FOCAL_LENGTH_35MM: 26}, 5712, 4284) == pytest.approx(4290.6, abs=0.05)


def test_zero_means_unknown_so_the_sensor_is_asked_next():
    tags = {FOCAL_LENGTH_35MM: 0, FOCAL_LENGTH: 50.0, X_RESOLUTION: 6000 / 36 * 25.4}
    focal_px = focal_length_px(tags, 6000, 4000)
    assert horizontal_view_deg(focal_px, 6000) == pytest.approx(39.5978, abs=PLACES)


@pytest.mark.parametrize(
    ("unit", "resolution"), [(2, 6000 / 36 * 25.4), (3, 6000 / 36 * 10), (None, 6000 / 36 * 25.4)]
)
def test_focal_plane_resolution_is_per_inch_or_centimetre_and_inch_when_unsaid(unit, resolution):
    tags = {FOCAL_LENGTH: 35.0, X_RESOLUTION: resolution}
    if unit is not None:
        tags[RESOLUTION_UNIT] = unit
    focal_px = focal_length_px(tags, 6000, 4000)
    assert horizontal_view_deg(focal_px, 6000) == pytest.approx(54.4322, abs=PLACES)


def test_a_photo_made_smaller_keeps_its_angle_of_view():
    """The resolution tells of the 6000 px that were recorded, the picture has 1500 px left."""
    tags = {FOCAL_LENGTH: 35.0, X_RESOLUTION: 6000 / 36 * 25.4, PIXEL_X: 6000}
    focal_px = focal_length_px(tags, 1500, 1000)
    assert horizontal_view_deg(focal_px, 1500) == pytest.approx(54.4322, abs=PLACES)


@pytest.mark.parametrize(
    "tags",
    [
        {},
        {FOCAL_LENGTH: 35.0},
        {X_RESOLUTION: 4000.0},
        {FOCAL_LENGTH: 35.0, X_RESOLUTION: 4000.0, RESOLUTION_UNIT: 1},
        {FOCAL_LENGTH: 0.0, X_RESOLUTION: 4000.0},
        {FOCAL_LENGTH_35MM: "wide"},
        {FOCAL_LENGTH_35MM: IFDRational(1, 0)},
        {FOCAL_LENGTH_35MM: -24},
    ],
)
def test_tags_that_do_not_tell_are_never_guessed_at(tags):
    assert focal_length_px(tags, 6000, 4000) is None


def write(path, size, directory, orientation=None):
    image = Image.fromarray(np.zeros((size[1], size[0], 3), np.uint8))
    exif = Image.Exif()
    exif[ORIENTATION] = orientation or 1
    exif.get_ifd(EXIF_DIRECTORY).update(directory)
    image.save(path, exif=exif.tobytes())
    return path


@pytest.mark.parametrize("suffix", [".jpg", ".png", ".tif"])
def test_a_photo_file_tells_its_angle(tmp_path, suffix):
    path = write(tmp_path / f"photo{suffix}", (60, 40), {FOCAL_LENGTH_35MM: 24})
    scene = Scene.load(path)
    assert scene.horizontal_view_deg == pytest.approx(73.7398, abs=PLACES)
    assert "angle of view 73.7 deg across, from the photo's Exif data" in scene.notes


@pytest.mark.parametrize("suffix", [".jpg", ".png", ".tif"])
def test_a_photo_held_upright_has_the_short_sides_angle_across(tmp_path, suffix):
    path = write(tmp_path / f"photo{suffix}", (60, 40), {FOCAL_LENGTH_35MM: 24}, orientation=6)
    scene = Scene.load(path)
    assert scene.photo.shape == (60, 40)
    assert scene.horizontal_view_deg == pytest.approx(53.1301, abs=PLACES)


@pytest.mark.parametrize("suffix", [".jpg", ".tif"])
def test_a_turned_and_shrunk_photo_goes_by_its_stored_width(tmp_path, suffix):
    directory = {
        FOCAL_LENGTH: IFDRational(35),
        X_RESOLUTION: IFDRational(2540 * 600, 36 * 100),
        PIXEL_X: 600,
    }
    path = write(tmp_path / f"photo{suffix}", (60, 40), directory, orientation=8)
    assert Scene.load(path).horizontal_view_deg == pytest.approx(37.8493, abs=1e-3)


def test_what_is_typed_comes_before_what_the_file_tells(tmp_path):
    path = write(tmp_path / "photo.jpg", (60, 40), {FOCAL_LENGTH_35MM: 24})
    assert Scene.load(path, horizontal_view_deg=30.0).horizontal_view_deg == 30.0


def test_a_photo_that_does_not_tell_is_asked_for_not_guessed(tmp_path):
    path = write(tmp_path / "photo.jpg", (60, 40), {})
    with pytest.raises(SceneError, match=r"does not tell its angle of view.*--view 65deg"):
        Scene.load(path)


def test_damaged_exif_data_does_not_spoil_sound_pixels(tmp_path):
    path = tmp_path / "photo.jpg"
    Image.fromarray(np.full((40, 60, 3), 128, np.uint8)).save(
        path, exif=b"Exif\0\0II*\0\xff\xff\xff\x7fnonsense"
    )
    scene = Scene.load(path, horizontal_view_deg=60.0)
    assert scene.photo.shape == (40, 60)


# What is told and cannot be ------------------------------------------------------------------


@pytest.mark.parametrize(
    ("tags", "note"),
    [
        ({FOCAL_LENGTH: 0}, "the focal length in its Exif data is 0; ignored"),
        (
            {FOCAL_LENGTH_35MM: 1},
            r"\(1 mm in 35 mm film\) would be an angle of view of 174 deg; ignored",
        ),
        ({FOCAL_LENGTH_35MM: 9000}, r"\(9000 mm in 35 mm film\) would be .* 0.229 deg; ignored"),
        (
            {FOCAL_LENGTH: 35.0, X_RESOLUTION: 72},
            r"\(35 mm at 2.83 pixels per mm\) would be an angle of view of 176 deg; ignored",
        ),
        ({FOCAL_LENGTH: 35.0, X_RESOLUTION: 1e9}, r"would be an angle of view of .* deg; ignored"),
    ],
)
def test_an_angle_that_no_lens_has_is_ignored_with_a_word(tags, note):
    """2 atan(long side / 2 f), computed independently; only 2 to 170 deg are believed."""
    focal_px, told = told_focal_length(tags, 6000, 4000)
    assert focal_px is None
    assert re.search(note, told), told


def test_an_absurd_equivalent_gives_way_to_what_the_sensor_tells():
    tags = {FOCAL_LENGTH_35MM: 65535, FOCAL_LENGTH: 35.0, X_RESOLUTION: 6000 / 36 * 25.4}
    focal_px, told = told_focal_length(tags, 6000, 4000)
    assert horizontal_view_deg(focal_px, 6000) == pytest.approx(54.4322, abs=PLACES)
    assert "65535 mm in 35 mm film" in told


def test_zero_is_no_word_when_the_equivalent_tells():
    assert told_focal_length({FOCAL_LENGTH: 0, FOCAL_LENGTH_35MM: 24}, 6000, 4000).note == ""
    assert told_focal_length({FOCAL_LENGTH_35MM: 0}, 6000, 4000) == (None, "")


@pytest.mark.parametrize(("unit", "resolution"), [(4, 6000 / 36), (5, 6000 / 36_000)])
def test_raw_files_may_count_pixels_per_mm_or_um(unit, resolution):
    """TIFF/EP, ISO 12234-2, FocalPlaneResolutionUnit: 4 mm, 5 um (from memory)."""
    tags = {FOCAL_LENGTH: 35.0, X_RESOLUTION: resolution, RESOLUTION_UNIT: unit}
    focal_px = focal_length_px(tags, 6000, 4000)
    assert horizontal_view_deg(focal_px, 6000) == pytest.approx(54.4322, abs=PLACES)


def test_the_reason_stands_in_the_note_and_in_the_question(tmp_path):
    path = write(tmp_path / "photo.jpg", (60, 40), {FOCAL_LENGTH_35MM: 9000})
    with pytest.raises(SceneError, match=r"angle of view \(the focal length.*ignored\); give the"):
        Scene.load(path)
    notes = Scene.load(path, horizontal_view_deg=60.0).notes
    assert any("9000 mm in 35 mm film" in note for note in notes)
