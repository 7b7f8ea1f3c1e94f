"""HEIC photos of phones and 10-bit HEIF: turned once, by their own colour, with their angle of view.

Orientation: Exif 2.32 and the turning boxes of ISO/IEC 23008-12. Curves: IEC 61966-2-1, SMPTE ST 2084
and ITU-R BT.2100; white at 203 cd/m2 and at 75 % of HLG's signal: ITU-R BT.2408. Numbers of the curves
were computed with colour-science 0.4.7, which has no part in pinsim.
"""

import io
import subprocess
import sys

import numpy as np
import pytest
from photo_files import D65, ORIENTATION, STORED, between, light_of
from PIL import Image
from PIL.TiffImagePlugin import IFDRational

from pinsim import Scene, SceneError
from pinsim.scene.door import read_photo, read_plain

pillow_heif = pytest.importorskip("pillow_heif", reason="the extra `phone` is not installed")

EXIF_DIRECTORY = 0x8769
FOCAL_LENGTH_35MM = 0xA405
P3 = ((0.680, 0.320), (0.265, 0.690), (0.150, 0.060))  # SMPTE EG 432-1
LOSSLESS = {"quality": -1, "chroma": 444, "matrix_coefficients": 0, "full_range_flag": 1}


def blocks(rows=64, columns=96):
    """Return codes in blocks of 16 pixels that differ everywhere; even codes, as RGB in HEVC asks."""
    n = (rows // 16) * (columns // 16) * 3
    spread = (np.arange(n) * 5 % n) * 254 // (n - 1) & ~1
    small = spread.astype(np.uint8).reshape(rows // 16, columns // 16, 3)
    return small.repeat(16, 0).repeat(16, 1)


def write(path, codes, *, orientation=1, f35=None, bits=8, sensor=None, **options):
    exif = Image.Exif()
    exif[ORIENTATION] = orientation
    if sensor:
        exif.get_ifd(EXIF_DIRECTORY).update(sensor)
    if f35:
        exif.get_ifd(EXIF_DIRECTORY)[FOCAL_LENGTH_35MM] = f35
    if bits == 8:
        mode, data = "RGB", codes
    else:
        mode, data = "RGB;16", (codes.astype(np.uint16) << (16 - bits))
    buffer = io.BytesIO()
    size = (codes.shape[1], codes.shape[0])
    file = pillow_heif.from_bytes(mode, size, np.ascontiguousarray(data).tobytes())
    file.save(buffer, exif=exif.tobytes(), **{**LOSSLESS, **options})
    path.write_bytes(buffer.getvalue())
    return path


@pytest.mark.parametrize("orientation", range(1, 9))
def test_a_heic_photo_is_turned_once(tmp_path, orientation):
    upright = blocks()
    stored = np.ascontiguousarray(STORED[orientation](upright))
    path = write(tmp_path / "photo.heic", stored, orientation=orientation)
    light = read_photo(path).linear()
    np.testing.assert_allclose(light, light_of(upright), atol=0.01)


@pytest.mark.parametrize(("orientation", "view_deg"), [(1, 73.7398), (6, 53.1301)])
def test_a_heic_photo_tells_its_angle_of_view(tmp_path, orientation, view_deg):
    """24 mm equivalent, 3:2: 73.74 deg across, or 53.13 deg when held upright (see test_exif_view)."""
    path = write(tmp_path / "photo.heic", blocks(), orientation=orientation, f35=24)
    scene = Scene.load(path)
    assert scene.horizontal_view_deg == pytest.approx(view_deg, abs=1e-3)


def test_the_sensors_tags_speak_of_the_photo_before_it_was_turned(tmp_path):
    """35 mm, 960 pixels on 36 mm, kept as 96: held upright the short side, 64 pixels, is across.

    2 atan(24 / 2 / 35) = 37.85 deg, computed independently.
    """
    sensor = {0x920A: IFDRational(35), 0xA20E: IFDRational(2540 * 960, 36 * 100), 0xA002: 960}
    path = write(tmp_path / "photo.heic", blocks(), orientation=6, sensor=sensor)
    assert Scene.load(path).horizontal_view_deg == pytest.approx(37.8493, abs=1e-3)


def test_display_p3_by_code_points_is_read_as_p3(tmp_path):
    codes = np.full((64, 96, 3), (120, 160, 90), np.uint8)
    path = write(tmp_path / "photo.heic", codes, color_primaries=12, transfer_characteristics=13)
    expected = light_of(codes) @ between(P3, D65).T
    assert np.abs(expected - light_of(codes)).max() > 0.02
    np.testing.assert_allclose(read_photo(path).linear(), expected, atol=0.006)


@pytest.mark.parametrize("bits", [8, 10])
def test_display_p3_by_an_embedded_profile_is_read_as_p3(tmp_path, bits):
    import imagecodecs

    profile = imagecodecs.cms_profile(
        "rgb",
        whitepoint=[*D65, 1.0],
        primaries=[v for x, y in P3 for v in (x, y, 1.0)],
        gamma=2.2,
    )
    top = (1 << bits) - 1
    codes = np.full((64, 96, 3), (0.5, 0.625, 0.375)) * top
    codes = codes.astype(np.uint16 if bits > 8 else np.uint8)
    path = write(tmp_path / "photo.heic", codes, bits=bits, icc_profile=profile)
    expected = (codes / top) ** 2.2 @ between(P3, D65).T
    np.testing.assert_allclose(
        read_photo(path).linear(), expected, atol=0.006 if bits == 8 else 2e-3
    )


def test_ten_bits_stay_ten_bits(tmp_path):
    """A ramp of 1024 codes gives as many different values of light, white at 1."""
    ramp = np.arange(1024, dtype=np.uint16)[None, :, None].repeat(64, 0).repeat(3, 2)
    path = write(
        tmp_path / "photo.heic", ramp, bits=10, color_primaries=1, transfer_characteristics=13
    )
    light = read_photo(path).linear()
    assert len(np.unique(light[0])) > 1000
    np.testing.assert_allclose(light, light_of(ramp, 1023), atol=3e-3)
    assert light[0, 1023].min() == 1.0


# Signal and light, 1.0 = diffuse white: colour-science 0.4.7, ST 2084 / 203 and BT.2100 / 0.2649626.
CURVES = {
    16: {0.0: 0.0, 0.25: 5.154176 / 203, 0.5: 92.245709 / 203, 0.75: 983.3778556 / 203},
    18: {0.0: 0.0, 0.25: 0.0208333 / 0.2649626, 0.5: 0.0833333 / 0.2649626, 1.0: 1 / 0.2649626},
}


@pytest.mark.parametrize("transfer", CURVES)
def test_high_dynamic_range_of_cameras_is_light_above_white(tmp_path, transfer):
    for signal, expected in CURVES[transfer].items():
        code = round(signal * 1023)
        codes = np.full((64, 96, 3), code, np.uint16)
        path = write(
            tmp_path / "photo.hif",
            codes,
            bits=10,
            color_primaries=9,
            transfer_characteristics=transfer,
        )
        light = read_photo(path).linear()
        # Half a code of 1023 is up to 1 % of light on these curves.
        np.testing.assert_allclose(light, expected, rtol=0.012, atol=1e-6)


def test_a_heic_photo_cut_short_is_said_in_one_line(tmp_path):
    path = write(tmp_path / "photo.heic", blocks())
    whole = path.read_bytes()
    for size in (30, 300, len(whole) // 2, len(whole) - 10):
        path.write_bytes(whole[:size])
        with pytest.raises(
            SceneError, match=r"damaged or cut short \(.*\); copy or export"
        ) as told:
            read_photo(path)
        assert "\n" not in str(told.value)
        assert str(told.value).isascii()


def test_a_heic_picture_is_no_distance_map(tmp_path):
    path = write(tmp_path / "map.heic", blocks())
    with pytest.raises(SceneError, match=r"no bare numbers; save the distance map as PNG, TIFF"):
        read_plain(path, "distance map")


@pytest.mark.parametrize(
    ("package", "head", "extra"),
    [
        ("pillow_heif", b"\0\0\0\x18ftypheic\0\0\0\0mif1heic", "phone"),
        ("rawpy", b"FUJIFILMCCD-RAW 0201", "raw"),
        ("OpenEXR", b"\x76\x2f\x31\x01\x02\0\0\0", "hdr"),
    ],
)
def test_without_its_package_one_line_says_what_to_install(tmp_path, package, head, extra):
    path = tmp_path / "photo.jpg"
    path.write_bytes(head + bytes(200))
    code = (
        f"import sys; sys.modules[{package!r}] = None\n"
        "from pathlib import Path\nfrom pinsim.scene.door import read_photo\n"
        f"try: read_photo(Path({str(path)!r}))\n"
        "except Exception as error: print(type(error).__name__, error)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    )
    assert done.stderr == ""
    assert done.stdout.count("\n") == 1
    assert done.stdout.startswith(f"SceneError {path} is ")
    assert f"pip install 'pinsim[{extra}]'" in done.stdout
