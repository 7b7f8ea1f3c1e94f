"""Camera raw files: known sensor values come out as the light they stand for.

The files are written here by DNG 1.4 (tags from memory): an even light on a Bayer sensor with black and
white levels, a white balance and a colour matrix. Expected light follows from these numbers alone.
"""

import numpy as np
import pytest
from photo_files import STORED, XYZ_TO_SRGB, light_of, mosaic, write_dng

from pinsim import Scene, SceneError
from pinsim.scene.door import read_photo, read_plain

pytest.importorskip("rawpy", reason="the extra `raw` is not installed")

BLACK, WHITE = 500, 15_000
NEUTRAL = (0.5, 1.0, 0.625)  # what the sensor records of white: red and blue are weaker
# LibRaw works in 16 bits and with matrices of four digits.
CLOSE = {"rtol": 0, "atol": 6e-4}


def patches():
    """Return light of three even patches that no turn or mirror leaves alike."""
    light = np.empty((120, 160, 3))
    light[:] = (0.2, 0.3, 0.1)
    light[:60, :80] = (0.5, 0.4, 0.6)
    light[:60, 80:] = 0.05
    return light


def sensor(light, neutral=NEUTRAL, black=BLACK, white=WHITE):
    seen = np.clip(mosaic(light * np.array(neutral)), 0.0, 1.0)
    return np.round(black + seen * (white - black)).astype(np.uint16)


def dng(path, light, **options):
    settings = {"black": BLACK, "white": WHITE, "neutral": NEUTRAL, **options}
    return write_dng(path, sensor(light, settings["neutral"]), **settings)


def middles(light):
    """Return the light in the middle of each patch, away from the blend between patches."""
    return np.array([light[r, c] for r, c in ((30, 40), (30, 120), (90, 40), (90, 120))])


def test_known_sensor_values_come_out_as_true_linear_light(tmp_path):
    photo = read_photo(dng(tmp_path / "photo.dng", patches()))
    light = photo.linear()
    assert light.shape == (120, 160, 3)
    np.testing.assert_allclose(middles(light), middles(patches()), **CLOSE)
    assert photo.notes == ()


def test_brightness_is_that_of_the_file_not_fitted_to_it(tmp_path):
    """A darker picture comes out darker by as much: no automatic brightness, no fitted white."""
    for factor in (1.0, 0.5, 0.125):
        light = read_photo(dng(tmp_path / "photo.dng", factor * patches())).linear()
        np.testing.assert_allclose(middles(light), factor * middles(patches()), **CLOSE)


@pytest.mark.parametrize("orientation", range(1, 9))
def test_orientation_is_honoured_once(tmp_path, orientation):
    stored = np.ascontiguousarray(STORED[orientation](patches()))
    photo = read_photo(dng(tmp_path / "photo.dng", stored, orientation=orientation))
    np.testing.assert_allclose(middles(photo.linear()), middles(patches()), **CLOSE)
    assert photo.shape == (120, 160)


def test_colour_goes_by_the_cameras_own_matrix(tmp_path):
    """A camera whose channels overlap: XYZ to camera is that of sRGB, then mixed."""
    mixing = np.array([[0.8, 0.15, 0.05], [0.1, 0.8, 0.1], [0.02, 0.18, 0.8]])
    light = np.empty((120, 160, 3))
    light[:] = (0.3, 0.2, 0.4)
    seen = light @ mixing.T
    path = write_dng(
        tmp_path / "photo.dng",
        sensor(seen, (1.0, 1.0, 1.0)),
        black=BLACK,
        white=WHITE,
        matrix=mixing @ np.array(XYZ_TO_SRGB),
    )
    np.testing.assert_allclose(read_photo(path).linear()[60, 80], (0.3, 0.2, 0.4), atol=2e-3)


def test_light_above_white_is_kept_and_stays_neutral(tmp_path):
    """Green is full at 1.0; red and blue go on. White twice as bright is above 1, and no magenta."""
    light = np.empty((120, 160, 3))
    light[:] = 2.0
    photo = read_photo(dng(tmp_path / "photo.dng", light))
    middle = photo.linear()[60, 80]
    # The channels are full at 1/0.5, 1/1 and 1/0.625 of white; what is left of a burnt-out white is
    # their mean, (2 + 1 + 1.6) / 3 (the blend that dcraw introduced; from memory).
    np.testing.assert_allclose(middle, (2.0 + 1.0 + 1.6) / 3, rtol=0.01)
    assert any("is clipped white" in note for note in photo.notes)
    just_below = read_photo(dng(tmp_path / "below.dng", 0.99 * light / 2.0)).linear()[60, 80]
    np.testing.assert_allclose(just_below, 0.99, atol=1e-3)


def exif_tags():
    """35 mm at 6000 pixels on 36 mm of sensor, in the Exif directory that a camera writes."""
    return [(37386, "2I", 1, (35, 1), True)]


def test_the_angle_of_view_comes_from_the_raw_files_exif(tmp_path):
    path = dng(tmp_path / "photo.dng", patches())
    append_exif(path, f35=24)
    # 24 mm by the diagonal, 4:3: 2 atan(0.8 * 43.2666 / 2 / 24), computed independently.
    assert Scene.load(path).horizontal_view_deg == pytest.approx(71.6, abs=0.05)
    append_exif(path, focal=(35, 1), per_inch=(160 * 254, 360))
    # 35 mm and 160 pixels on 36 mm: 54.43 deg (see test_exif_view).
    assert Scene.load(path).horizontal_view_deg == pytest.approx(54.4322, abs=2e-3)


def append_exif(path, *, f35=None, focal=None, per_inch=None):
    """Append an Exif directory to a little-endian TIFF and a tag that leads to it (TIFF 6.0)."""
    import struct

    data = bytearray(path.read_bytes())
    first = struct.unpack_from("<I", data, 4)[0]
    count = struct.unpack_from("<H", data, first)[0]
    entries = [
        data[first + 2 + 12 * i : first + 14 + 12 * i]
        for i in range(count)
        if struct.unpack_from("<H", data, first + 2 + 12 * i)[0] != 0x8769
    ]
    values = len(data)
    inside = []
    for tag, value in ((0x920A, focal), (0xA20E, per_inch)):
        if value:
            inside.append(struct.pack("<HHII", tag, 5, 1, len(data)))
            data += struct.pack("<II", *value)
    if f35:
        inside.append(struct.pack("<HHIHH", 0xA405, 3, 1, f35, 0))
    assert values <= len(data)
    directory = len(data)
    data += struct.pack("<H", len(inside)) + b"".join(inside) + bytes(4)
    entries.append(bytearray(struct.pack("<HHII", 0x8769, 4, 1, directory)))
    entries.sort(key=lambda one: struct.unpack_from("<H", one)[0])
    struct.pack_into("<I", data, 4, len(data))
    data += struct.pack("<H", len(entries)) + b"".join(entries) + bytes(4)
    path.write_bytes(bytes(data))


def test_a_raw_file_that_does_not_tell_is_asked_for(tmp_path):
    path = dng(tmp_path / "photo.dng", patches())
    with pytest.raises(SceneError, match=r"does not tell its angle of view.*--view 65deg"):
        Scene.load(path)


def test_a_raw_file_is_known_by_its_content_too(tmp_path):
    path = dng(tmp_path / "photo.tif", patches())
    np.testing.assert_allclose(middles(read_photo(path).linear()), middles(patches()), **CLOSE)


@pytest.mark.parametrize("share", [0.3, 0.9])
def test_a_raw_file_cut_short_is_one_line_and_nothing_else(tmp_path, capfd, share):
    path = dng(tmp_path / "photo.dng", patches())
    path.write_bytes(path.read_bytes()[: int(share * path.stat().st_size)])
    with pytest.raises(SceneError, match=r"photo.dng is damaged or cut short.*copy the raw file"):
        read_photo(path)
    assert capfd.readouterr() == ("", "")


def test_a_raw_file_of_no_known_kind_says_so(tmp_path):
    path = tmp_path / "photo.nef"
    path.write_bytes(b"II*\0" + bytes(100))
    with pytest.raises(SceneError, match=r"photo.nef is .*(raw file of a kind|damaged)"):
        read_photo(path)


def test_a_raw_file_is_no_distance_map(tmp_path):
    path = dng(tmp_path / "map.dng", patches())
    with pytest.raises(SceneError, match=r"no bare numbers"):
        read_plain(path, "distance map")


def test_the_check_itself_would_see_a_gamma_curve():
    """Half of white through sRGB's curve is far from half: the tolerance above is no excuse."""
    assert abs(light_of(128) - 0.5) > 100 * CLOSE["atol"]
