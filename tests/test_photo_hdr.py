"""OpenEXR and Radiance pictures: linear light as it stands, above white too.

OpenEXR: half and float channels, windows and the chromaticities attribute (openexr.com, "Technical
Introduction"; from memory). Radiance: Ward, "Real Pixels", Graphics Gems II: one exponent per pixel, so
1 % of the brightest channel.
"""

import imagecodecs
import numpy as np
import pytest
from photo_files import D65, SRGB_PRIMARIES, between

from pinsim import SceneError
from pinsim.scene.door import read_photo, read_plain

P3 = ((0.680, 0.320), (0.265, 0.690), (0.150, 0.060))
ACES_CG = ((0.713, 0.293), (0.165, 0.830), (0.128, 0.044))  # Academy S-2014-004, AP1
ACES_WHITE = (0.32168, 0.33767)


@pytest.fixture
def exr():
    """Return the OpenEXR package, or skip when the extra `hdr` is not installed."""
    return pytest.importorskip("OpenEXR", reason="the extra `hdr` is not installed")


def light(rows=20, columns=30, channels=3, dtype=np.float32):
    n = rows * columns * channels
    return (
        (40.0 * ((np.arange(n) * 37 % n) / n) ** 3).astype(dtype).reshape(rows, columns, channels)
    )


def write(exr, path, channels, **header):
    exr.File({"type": exr.scanlineimage, **header}, channels).write(str(path))
    return path


@pytest.mark.parametrize("dtype", [np.float16, np.float32])
def test_exr_is_linear_light_and_keeps_what_is_above_white(tmp_path, exr, dtype):
    expected = light(dtype=dtype)
    photo = read_photo(write(exr, tmp_path / "photo.exr", {"RGB": expected}))
    assert photo.linear().dtype == np.float32
    np.testing.assert_array_equal(photo.linear(), expected.astype(np.float32))
    assert photo.linear().max() > 10.0
    assert photo.notes == ()
    assert photo.codes.dtype == dtype  # half stays half: a panorama of it must fit


def test_grey_exr_and_transparency(tmp_path, exr):
    grey = light(channels=1)[..., 0]
    photo = read_photo(write(exr, tmp_path / "grey.exr", {"Y": grey}))
    np.testing.assert_array_equal(photo.linear(), grey[..., None].repeat(3, 2))
    clear = np.concatenate([light(), np.full((20, 30, 1), 0.5, np.float32)], axis=2)
    photo = read_photo(write(exr, tmp_path / "clear.exr", {"RGBA": clear}))
    np.testing.assert_array_equal(photo.linear(), light())
    assert photo.notes == (
        "transparent parts hold no light of their own and stay as dark as they are",
    )


@pytest.mark.parametrize(
    ("primaries", "white"), [(P3, D65), (ACES_CG, ACES_WHITE)], ids=["P3", "ACEScg"]
)
def test_chromaticities_are_honoured(tmp_path, exr, primaries, white):
    inside = 0.5 + 0.1 * light() / 40.0
    told = tuple(v for one in (*primaries, white) for v in one)
    photo = read_photo(write(exr, tmp_path / "photo.exr", {"RGB": inside}, chromaticities=told))
    expected = inside @ between(primaries, white).T
    np.testing.assert_allclose(photo.linear(), expected, rtol=2e-4)
    assert np.abs(expected - inside).max() > 0.01


def test_srgb_chromaticities_change_nothing(tmp_path, exr):
    told = tuple(v for one in (*SRGB_PRIMARIES, D65) for v in one)
    photo = read_photo(write(exr, tmp_path / "photo.exr", {"RGB": light()}, chromaticities=told))
    np.testing.assert_array_equal(photo.linear(), light())


def test_a_data_window_lies_where_it_says_in_its_picture(tmp_path, exr):
    def box(left, top, right, bottom):
        return np.array([left, top], np.int32), np.array([right, bottom], np.int32)

    windows = {"dataWindow": box(-2, 3, 27, 22), "displayWindow": box(0, 0, 39, 29)}
    photo = read_photo(write(exr, tmp_path / "photo.exr", {"RGB": light()}, **windows))
    expected = np.zeros((30, 40, 3), np.float32)
    expected[3:23, :28] = light()[:, 2:]
    np.testing.assert_array_equal(photo.linear(), expected)


def test_a_colour_outside_srgb_is_brought_in_but_negative_light_is_refused(tmp_path, exr):
    some = np.full((20, 30, 3), 0.5, np.float32)
    some[:5] = (-0.1, 0.9, 0.4)
    photo = read_photo(write(exr, tmp_path / "photo.exr", {"RGB": some}))
    weights = np.array([0.2126, 0.7152, 0.0722])  # IEC 61966-2-1
    assert photo.linear().min() == 0.0
    np.testing.assert_allclose(photo.linear() @ weights, some @ weights, rtol=1e-5)
    assert photo.notes[0].startswith("25.0 % of the photo has colours outside sRGB")
    some[0, 0] = -0.2
    with pytest.raises(SceneError, match=r"holds negative light, down to -0.2"):
        read_photo(write(exr, tmp_path / "photo.exr", {"RGB": some}))


@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_what_is_no_number_is_counted_and_refused(tmp_path, exr, value):
    some = light()
    some[3, 4] = value
    path = write(exr, tmp_path / "photo.exr", {"RGB": some})
    with pytest.raises(SceneError, match=r"photo.exr holds 3 values that are NaN or infinite"):
        read_photo(path)


def test_other_channels_are_named(tmp_path, exr):
    path = write(exr, tmp_path / "photo.exr", {"Z": light(channels=1)[..., 0]})
    with pytest.raises(SceneError, match=r"has no channels R, G, B or Y but Z; export"):
        read_photo(path)
    np.testing.assert_array_equal(read_plain(path, "distance map"), light(channels=1)[..., 0])


def test_of_several_parts_a_photo_takes_colour_and_a_map_takes_depth(tmp_path, exr):
    """As renderers write them: one part for each thing they computed."""
    depth, beauty = 3.0 + light(channels=1)[..., 0], light()
    path = tmp_path / "parts.exr"
    for names in (("depth", "beauty"), ("beauty", "depth")):
        channels = {"depth": {"Z": depth}, "beauty": {"RGB": beauty}}
        parts = [exr.Part({"type": exr.scanlineimage}, channels[one], name=one) for one in names]
        exr.File(parts).write(str(path))
        np.testing.assert_array_equal(read_photo(path).linear(), beauty)
        np.testing.assert_array_equal(read_plain(path, "distance map"), depth)


def test_an_exr_cut_short_is_one_line_and_nothing_else(tmp_path, exr, capfd):
    path = write(exr, tmp_path / "photo.exr", {"RGB": light()})
    whole = path.read_bytes()
    for size in (50, 330, len(whole) // 2, len(whole) - 10):
        path.write_bytes(whole[:size])
        with pytest.raises(SceneError, match=r"photo.exr is damaged or cut short \(.*\); copy"):
            read_photo(path)
    assert capfd.readouterr() == ("", "")


def test_an_exr_that_claims_too_much_is_refused_before_it_is_read(tmp_path, exr):
    path = write(exr, tmp_path / "photo.exr", {"RGB": light()})
    data = path.read_bytes()
    at = data.index(b"displayWindow") + len(b"displayWindow\0box2i\0") + 4
    huge = np.array([0, 0, 39_999, 29_999], "<i4").tobytes()
    path.write_bytes(data[:at] + huge + data[at + 16 :])
    with pytest.raises(SceneError, match=r"1200 megapixels is more than the 300"):
        read_photo(path)


def test_radiance_pictures_are_linear_light(tmp_path):
    expected = light()
    path = tmp_path / "photo.hdr"
    path.write_bytes(imagecodecs.rgbe_encode(expected))
    photo = read_photo(path)
    brightest = expected.max(axis=2, keepdims=True)
    assert (np.abs(photo.linear() - expected) <= 0.01 * brightest + 1e-9).all()
    path.write_bytes(path.read_bytes()[:300])
    with pytest.raises(SceneError, match=r"photo.hdr is damaged or cut short"):
        read_photo(path)
