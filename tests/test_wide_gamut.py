"""Colours outside sRGB: brought in by luminance and dominant wavelength, and told in per cent.

Matrices to linear sRGB (Bradford): computed with colour-science 0.4.7, which has no part in pinsim,
from the primaries of SMPTE EG 432-1 (P3), Adobe RGB (1998) and ISO 22028-2 (ROMM, "ProPhoto").
"""

import imagecodecs
import numpy as np
import pytest
import tifffile
from photo_files import D65, between, to_xyz
from PIL import Image

from pinsim.scene.door import read_photo
from pinsim.scene.gamut import bring_in

D50 = (0.3457, 0.3585)
SPACES = {
    # name: primaries, white, power, matrix by colour-science
    "Display P3": (
        ((0.680, 0.320), (0.265, 0.690), (0.150, 0.060)),
        D65,
        2.2,
        [
            [1.2248021, -0.2249113, -0.0000476],
            [-0.0419281, 1.0420299, -0.0000026],
            [-0.0196088, -0.0786321, 1.0983154],
        ],
    ),
    "Adobe RGB": (
        ((0.64, 0.33), (0.21, 0.71), (0.15, 0.06)),
        D65,
        2.2,
        [
            [1.3982086, -0.3982981, -0.0000398],
            [0.0001366, 0.9999464, -0.0000065],
            [0.0000339, -0.0429264, 1.0429716],
        ],
    ),
    "ProPhoto, linear": (
        ((0.7347, 0.2653), (0.1596, 0.8404), (0.0366, 0.0001)),
        D50,
        1.0,
        [
            [2.0340627, -0.7275928, -0.3068261],
            [-0.2286894, 1.231768, -0.0028927],
            [-0.0084997, -0.1532892, 1.1615689],
        ],
    ),
}
LUMINANCE = np.array([0.2126, 0.7152, 0.0722])  # IEC 61966-2-1
SRGB_TO_XYZ = to_xyz(((0.64, 0.33), (0.30, 0.60), (0.15, 0.06)), D65)


def xy(light):
    """Return chromaticities of linear sRGB (CIE 15)."""
    xyz = np.asarray(light, np.float64) @ SRGB_TO_XYZ.T
    return xyz[..., :2] / xyz.sum(axis=-1, keepdims=True)


@pytest.mark.parametrize("name", SPACES)
def test_the_matrix_that_tests_use_is_that_of_an_independent_library(name):
    primaries, white, _, matrix = SPACES[name]
    # That library keeps sRGB's printed matrix of four digits.
    np.testing.assert_allclose(between(primaries, white), matrix, atol=4e-4)


@pytest.mark.parametrize("bits", [8, 16])
@pytest.mark.parametrize("name", SPACES)
def test_a_wide_photo_keeps_its_colours_as_far_as_srgb_goes(tmp_path, name, bits):
    primaries, white, power, matrix = SPACES[name]
    top = (1 << bits) - 1
    rng = np.random.default_rng(7)
    codes = rng.integers(top // 8, top + 1, (20, 30, 3)).astype(
        np.uint8 if bits == 8 else np.uint16
    )
    profile = imagecodecs.cms_profile(
        "rgb",
        whitepoint=[*white, 1.0],
        primaries=[v for x, y in primaries for v in (x, y, 1.0)],
        gamma=power,
    )
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, codes, photometric="rgb", iccprofile=profile)
    photo = read_photo(path)
    assert photo.codes.dtype == codes.dtype  # no second, larger copy
    true = (codes / top) ** power @ np.array(matrix).T
    light = photo.linear()
    inside = true.min(axis=2) >= 0.0
    np.testing.assert_allclose(light[inside], true[inside], atol=2e-3)
    outside = true.min(axis=2) < -0.01
    assert outside.any()
    assert light.min() >= 0.0
    np.testing.assert_allclose(light[outside] @ LUMINANCE, true[outside] @ LUMINANCE, atol=3e-3)
    assert true.max() > 1.05
    assert light.max() == pytest.approx(true[inside].max(), abs=0.4)
    share = 100.0 * (true.min(axis=2) < -2e-3).mean()
    told = next(note for note in photo.notes if "outside sRGB" in note)
    assert float(told.split(" %")[0]) == pytest.approx(share, abs=0.7)


@pytest.mark.parametrize("name", ["Display P3", "Adobe RGB"])
def test_what_is_brought_in_keeps_its_dominant_wavelength(name):
    """White, the colour drawn and the true colour lie on one line of the chromaticity diagram."""
    true = np.eye(3) @ np.array(SPACES[name][3]).T + 0.01
    drawn = bring_in(true.astype(np.float32).copy()).astype(float)
    for wanted, got in zip(xy(true) - D65, xy(drawn) - D65, strict=True):
        turn = np.degrees(np.arctan2(wanted[1], wanted[0]) - np.arctan2(got[1], got[0]))
        assert abs(turn) < 0.1
        assert np.hypot(*got) <= np.hypot(*wanted) + 1e-4


def test_colours_inside_srgb_are_left_alone(frozen):
    light = frozen(np.linspace(0.0, 4.0, 300, dtype=np.float32).reshape(10, 10, 3))
    np.testing.assert_array_equal(bring_in(light), light)


def test_a_photo_within_srgb_says_nothing(tmp_path):
    primaries, white, power, _ = SPACES["Display P3"]
    profile = imagecodecs.cms_profile(
        "rgb",
        whitepoint=[*white, 1.0],
        primaries=[v for x, y in primaries for v in (x, y, 1.0)],
        gamma=power,
    )
    path = tmp_path / "photo.png"
    Image.fromarray(np.full((20, 30, 3), (120, 130, 125), np.uint8)).save(path, icc_profile=profile)
    assert read_photo(path).notes == ()


def test_a_profile_that_does_not_add_up_is_taken_pixel_by_pixel(tmp_path):
    """A print profile: no ink is white, one ink is L* = 66.7, which is Y = 0.362 (CIE 15)."""
    codes = np.zeros((4, 4, 4), np.uint8)
    codes[2:, :, 1] = 255
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, codes, photometric="separated", iccprofile=profile_of_paper())
    photo = read_photo(path)
    assert not any("cannot be used" in note for note in photo.notes)
    np.testing.assert_allclose(photo.linear()[:2], 1.0, atol=0.01)
    np.testing.assert_allclose(photo.linear()[2:], ((200 / 3 + 16) / 116) ** 3, atol=0.01)


def profile_of_paper():
    """Return a small CMYK profile whose table says: no ink is white, all ink is black (ICC.1, lut8)."""
    import struct

    def tag(kind, body):
        return kind + bytes(4) + body

    identity = struct.pack(">9i", *(65536 * v for v in (1, 0, 0, 0, 1, 0, 0, 0, 1)))
    ramp = bytes(range(256))
    grid = bytearray()
    for index in range(16):
        ink = [(index >> (3 - k)) & 1 for k in range(4)]
        lightness = 255 if not any(ink) else 0 if ink[3] else 255 * (3 - sum(ink)) // 3
        grid += bytes((lightness, 128, 128))
    a2b = tag(b"mft1", bytes((4, 3, 2, 0)) + identity + ramp * 4 + bytes(grid) + ramp * 3)
    white = tag(b"XYZ ", struct.pack(">3i", 63190, 65536, 54061))
    text = tag(b"text", b"homemade\0")
    description = tag(b"desc", struct.pack(">I", 6) + b"paper\0" + bytes(78 + 4 + 4 + 1))
    tags = {b"A2B0": a2b, b"wtpt": white, b"cprt": text, b"desc": description}
    at = 128 + 4 + 12 * len(tags)
    table, body = struct.pack(">I", len(tags)), b""
    for name, data in tags.items():
        table += name + struct.pack(">II", at + len(body), len(data))
        body += data + bytes(-len(data) % 4)
    head = bytearray(128)
    struct.pack_into(">I", head, 0, at + len(body))
    head[8:12] = bytes((2, 0x40, 0, 0))
    head[12:24] = b"prtrCMYKLab "
    head[36:40] = b"acsp"
    struct.pack_into(">3i", head, 68, 63190, 65536, 54061)
    return bytes(head) + table + body
