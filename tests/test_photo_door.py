"""The photo door: whatever kind of file a photo is, what comes out is upright linear light.

Expected light is computed here, from the constants of IEC 61966-2-1 and, for profiled photos, from
the primaries, white points and powers that the profiles were made of (matrix and curve, ICC.1).
"""

import imagecodecs
import numpy as np
import pytest
import tifffile
from photo_files import (
    D65,
    ORIENTATION,
    SRGB_PRIMARIES,
    STORED,
    between,
    light_of,
    picture,
    with_exif,
)
from PIL import Image, ImageCms

from pinsim import Scene, SceneError
from pinsim.scene.door import read_photo


def mode_of(path):
    with Image.open(path) as image:
        return image.mode


def check(path, expected, atol=1e-6):
    photo = read_photo(path)
    light = photo.linear()
    assert light.dtype == np.float32
    assert light.shape == expected.shape
    np.testing.assert_allclose(light, expected, rtol=0, atol=atol)
    return photo


@pytest.mark.parametrize("kind", ["png", "png16", "tif", "tif grey", "tif16", "tif float"])
@pytest.mark.parametrize("orientation", STORED)
def test_eight_orientations_give_one_picture(tmp_path, kind, orientation):
    upright = picture()
    stored = np.ascontiguousarray(STORED[orientation](upright))
    path = tmp_path / f"photo.{kind[:3]}"
    exif = Image.Exif()
    exif[ORIENTATION] = orientation
    tag = [(ORIENTATION, "H", 1, orientation, True)]
    expected = light_of(upright)
    if kind == "png":
        Image.fromarray(stored).save(path, exif=exif)
    elif kind == "tif grey":
        tifffile.imwrite(path, stored[..., 1], photometric="minisblack", extratags=tag)
        expected = light_of(upright[..., 1:2]).repeat(3, 2)
    elif kind == "png16":
        path.write_bytes(with_exif(imagecodecs.png_encode(stored.astype(np.uint16) * 257), exif))
    elif kind == "tif":
        tifffile.imwrite(path, stored, photometric="rgb", extratags=tag)
    elif kind == "tif16":
        tifffile.imwrite(path, stored.astype(np.uint16) * 257, photometric="rgb", extratags=tag)
    else:
        tifffile.imwrite(path, stored.astype(np.float32) / 255, photometric="rgb", extratags=tag)
        expected = upright / 255
    check(path, expected)


@pytest.mark.parametrize("orientation", range(1, 9))
def test_a_turned_jpeg_comes_upright(tmp_path, orientation):
    corner = np.zeros((32, 48, 3), np.uint8)
    corner[:16, :16] = 255
    corner[:16, 32:] = (255, 0, 0)
    path = tmp_path / "photo.jpg"
    exif = Image.Exif()
    exif[ORIENTATION] = orientation
    image = Image.fromarray(np.ascontiguousarray(STORED[orientation](corner)))
    image.save(path, quality=100, subsampling=0, exif=exif)
    check(path, light_of(corner), atol=0.03)


@pytest.mark.parametrize(
    ("kind", "orientation"),
    [
        *((kind, n) for kind in ("jpg", "png", "tif", "tif16") for n in (0, 1, 8, 9, 65535)),
        ("tif16", (6, 6)),
    ],
)
def test_an_orientation_that_means_nothing_gets_a_word(tmp_path, kind, orientation):
    """1 to 8 are defined (Exif 2.32); another number, or a list, leaves the photo as it is stored."""
    path = tmp_path / f"photo.{kind[:3]}"
    known = orientation in (1, 8)
    codes = np.full((16, 24, 3), 128, np.uint8)
    if kind.startswith("tif"):
        several = orientation if isinstance(orientation, tuple) else (orientation,)
        tag = [(ORIENTATION, "H", len(several), several if several[1:] else several[0], True)]
        deep = codes.astype(np.uint16) * 257 if kind == "tif16" else codes
        tifffile.imwrite(path, deep, photometric="rgb", extratags=tag)
    else:
        exif = Image.Exif()
        exif[ORIENTATION] = orientation
        Image.fromarray(codes).save(path, exif=exif)
    photo = read_photo(path)
    assert photo.shape == ((24, 16) if orientation == 8 else (16, 24))
    told = f"is {orientation}" if isinstance(orientation, int) else "is no single number"
    wanted = f"its orientation tag {told}, which means nothing (1 to 8 do); taken as upright"
    assert photo.notes == (() if known else (wanted,))


@pytest.mark.parametrize("orientation", [5, 6, 7, 8])
@pytest.mark.parametrize("kind", ["png", "tif", "tif16"])
def test_a_distance_map_is_turned_like_its_photo(tmp_path, orientation, kind):
    codes = 1000 + picture(channels=1, dtype=np.uint16)[..., 0]
    if kind != "tif16":
        codes = (codes - 900).astype(np.uint8) | 1
    Image.fromarray(picture()).save(tmp_path / "photo.png")
    stored = np.ascontiguousarray(STORED[orientation](codes))
    path = tmp_path / f"map.{kind[:3]}"
    if kind == "png":
        exif = Image.Exif()
        exif[ORIENTATION] = orientation
        Image.fromarray(stored).save(path, exif=exif)
    else:
        tag = [(ORIENTATION, "H", 1, orientation, True)]
        tifffile.imwrite(path, stored, photometric="minisblack", extratags=tag)
    scene = Scene.load(
        tmp_path / "photo.png", horizontal_view_deg=60, distance_map=path, map_step_mm=10.0
    )
    np.testing.assert_array_equal(scene.distance.codes, codes)


def test_8_bit_png_of_every_kind(tmp_path):
    path = tmp_path / "photo.png"
    rgb = picture()
    Image.fromarray(rgb).save(path)
    check(path, light_of(rgb))
    grey = rgb[..., 0]
    Image.fromarray(grey).save(path)
    check(path, light_of(grey)[..., None].repeat(3, 2))
    bits = grey > 100
    Image.fromarray(bits).save(path)
    assert mode_of(path) == "1"
    check(path, bits[..., None].repeat(3, 2).astype(float))


def test_a_palette_png_shows_its_colours(tmp_path):
    path = tmp_path / "photo.png"
    index = (picture(channels=1)[..., 0] % 4).astype(np.uint8)
    colours = np.array([(10, 20, 30), (200, 100, 50), (255, 255, 255), (0, 0, 0)], np.uint8)
    image = Image.fromarray(index, "L")
    image = image.convert("P")
    image.putpalette(colours.tobytes())
    image.putdata(index.ravel().tolist())
    image.save(path)
    assert mode_of(path) == "P"
    check(path, light_of(colours[index]))
    image.save(path, transparency=1)
    expected = light_of(colours[index])
    expected[index == 1] = 1.0
    photo = check(path, expected)
    assert photo.notes == ("transparent parts are taken as white paper",)


@pytest.mark.parametrize("channels", [2, 4], ids=["grey-alpha", "RGBA"])
@pytest.mark.parametrize("bits", [8, 16])
def test_transparency_is_white_paper_mixed_in_linear_light(tmp_path, channels, bits):
    top = (1 << bits) - 1
    codes = picture(channels=channels, top=top, dtype=np.uint8 if bits == 8 else np.uint16)
    path = tmp_path / "photo.png"
    path.write_bytes(imagecodecs.png_encode(codes))
    clear = codes[..., -1:] / top
    light = light_of(codes[..., :-1], top) * clear + 1.0 - clear
    photo = check(path, np.broadcast_to(light, (*codes.shape[:2], 3)))
    assert photo.notes == ("transparent parts are taken as white paper",)


@pytest.mark.parametrize("bits", [8, 16])
def test_an_opaque_alpha_channel_changes_nothing(tmp_path, bits):
    top = (1 << bits) - 1
    codes = picture(channels=4, top=top, dtype=np.uint8 if bits == 8 else np.uint16)
    codes[..., 3] = top
    path = tmp_path / "photo.png"
    path.write_bytes(imagecodecs.png_encode(codes))
    photo = check(path, light_of(codes[..., :3], top))
    assert photo.notes == ()


@pytest.mark.parametrize("channels", [1, 3], ids=["grey", "RGB"])
def test_16_bit_png_keeps_its_16_bits(tmp_path, channels):
    codes = picture(channels=channels, top=65535, dtype=np.uint16)
    path = tmp_path / "photo.png"
    path.write_bytes(imagecodecs.png_encode(codes[..., 0] if channels == 1 else codes))
    photo = check(path, np.broadcast_to(light_of(codes, 65535), (*codes.shape[:2], 3)))
    assert photo.codes.dtype == np.uint16


@pytest.mark.parametrize("compression", [None, "lzw", "zlib", "packbits"])
@pytest.mark.parametrize("dtype", [np.uint8, np.uint16, np.float32, np.float16])
@pytest.mark.parametrize("channels", [1, 3], ids=["grey", "RGB"])
def test_tiff_of_every_depth_and_packing(tmp_path, compression, dtype, channels):
    floating = np.issubdtype(dtype, np.floating)
    top = 1.0 if floating else np.iinfo(dtype).max
    codes = (
        (picture(channels=channels) / 200).astype(dtype)
        if floating
        else picture(channels=channels, top=top, dtype=dtype)
    )
    path = tmp_path / "photo.tif"
    tifffile.imwrite(
        path,
        codes[..., 0] if channels == 1 else codes,
        photometric="minisblack" if channels == 1 else "rgb",
        compression=compression,
        predictor=compression in {"lzw", "zlib"},
    )
    # Float files are linear light, and may be brighter than white.
    expected = codes.astype(float) if floating else light_of(codes, top)
    check(path, np.broadcast_to(expected, (*codes.shape[:2], 3)))


def test_tiff_with_planes_one_after_the_other(tmp_path):
    codes = picture(top=65535, dtype=np.uint16)
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, np.moveaxis(codes, -1, 0), photometric="rgb", planarconfig="separate")
    check(path, light_of(codes, 65535))


def test_big_endian_tiled_and_big_tiff(tmp_path):
    codes = picture(rows=40, columns=50, top=65535, dtype=np.uint16)
    path = tmp_path / "photo.tif"
    for options in ({"byteorder": ">"}, {"tile": (16, 16)}, {"bigtiff": True}):
        tifffile.imwrite(path, codes, photometric="rgb", **options)
        check(path, light_of(codes, 65535))


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16])
def test_a_tiff_whose_white_is_zero_is_no_negative(tmp_path, dtype):
    top = np.iinfo(dtype).max
    codes = picture(channels=1, top=top, dtype=dtype)[..., 0]
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, top - codes, photometric="miniswhite")
    check(path, light_of(codes, top)[..., None].repeat(3, 2))


@pytest.mark.parametrize("dtype", [np.uint16, np.float32])
@pytest.mark.parametrize("kind", ["unassalpha", "assocalpha", "unspecified"])
def test_extra_channels_of_a_deep_tiff_are_what_the_file_says(tmp_path, dtype, kind):
    """Alpha beside the colours, alpha multiplied into them already, or no alpha at all."""
    floating = dtype is np.float32
    top = 1.0 if floating else 65535
    rng = np.random.default_rng(5)
    codes = (rng.uniform(0.2, 1.0, (6, 8, 4)) * top).astype(dtype)
    alpha = codes[..., 3:] / np.float64(top)
    stored = codes.copy()
    if kind == "assocalpha":
        stored[..., :3] = (codes[..., :3] * alpha).astype(dtype)
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, stored, photometric="rgb", extrasamples=[kind])
    light = codes[..., :3].astype(float) if floating else light_of(codes[..., :3], top)
    expected = light if kind == "unspecified" else light * alpha + 1.0 - alpha
    # 16-bit codes multiplied by alpha were rounded to whole codes: 1/0.2 of a code of slope 2.3.
    check(path, expected, atol=1e-6 if kind != "assocalpha" or floating else 2e-4)


def test_jpeg_grey_and_colour(tmp_path):
    path = tmp_path / "photo.jpg"
    flat = np.full((16, 24, 3), (180, 90, 40), np.uint8)
    Image.fromarray(flat).save(path, quality=100, subsampling=0)
    check(path, light_of(flat), atol=0.012)  # two codes of JPEG rounding
    Image.fromarray(flat[..., 0]).save(path, quality=100)
    check(path, light_of(flat[..., :1]).repeat(3, 2), atol=0.006)


@pytest.mark.parametrize("suffix", [".jpg", ".tif"])
def test_cmyk_without_a_profile_goes_by_the_plain_rule(tmp_path, suffix):
    """Paper white times what each ink leaves; all of black ink leaves nothing."""
    inks = np.zeros((16, 24, 4), np.uint8)
    inks[:, 8:16] = (0, 128, 255, 0)
    inks[:, 16:] = (0, 0, 0, 255)
    path = tmp_path / f"photo{suffix}"
    Image.fromarray(inks, "CMYK").save(path, **({"quality": 100} if suffix == ".jpg" else {}))
    rgb = np.zeros((16, 24, 3), np.uint8)
    rgb[:, :8] = 255
    rgb[:, 8:16] = (255, 127, 0)
    check(path, light_of(rgb), atol=0.02)


def test_16_bit_cmyk_is_not_taken_for_red_green_blue_and_alpha(tmp_path):
    inks = np.zeros((6, 8, 4), np.uint16)
    inks[:, 4:] = (0, 32768, 65535, 0)
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, inks, photometric="separated")
    rgb = np.full((6, 8, 3), 65535)
    rgb[:, 4:] = (65535, 32767, 0)
    check(path, light_of(rgb, 65535), atol=1e-5)


# Colour profiles ------------------------------------------------------------------------------


SPACES = {
    # name: primaries, white, power
    "wide gamut, power 1.8": (((0.70, 0.29), (0.20, 0.72), (0.14, 0.05)), D65, 1.8),
    "P3 primaries, power 2.2": (((0.680, 0.320), (0.265, 0.690), (0.150, 0.060)), D65, 2.2),
    "warm white, power 2.2": (((0.64, 0.34), (0.29, 0.60), (0.15, 0.06)), (0.3457, 0.3585), 2.2),
    "sRGB primaries, linear": (SRGB_PRIMARIES, D65, 1.0),
}


def profile_of(primaries, white, power):
    return imagecodecs.cms_profile(
        "rgb",
        whitepoint=[*white, 1.0],
        primaries=[value for x, y in primaries for value in (x, y, 1.0)],
        gamma=power,
    )


@pytest.mark.parametrize("bits", [8, 16])
@pytest.mark.parametrize("name", SPACES)
def test_a_profiled_photo_is_read_by_its_profile(tmp_path, name, bits):
    primaries, white, power = SPACES[name]
    top = (1 << bits) - 1
    # Muted colours, so that all of them exist in sRGB and none is clipped.
    muted = 0.25 + 0.12 * (picture(channels=3) / 255.0 - 0.5)
    codes = np.round(top * muted ** (1 / power)).astype(np.uint8 if bits == 8 else np.uint16)
    path = tmp_path / "photo.png"
    path.write_bytes(imagecodecs.png_encode(codes))
    profile = profile_of(primaries, white, power)
    if bits == 8:
        Image.fromarray(codes).save(path, icc_profile=profile)
    else:
        path = tmp_path / "photo.tif"
        tifffile.imwrite(path, codes, photometric="rgb", iccprofile=profile)
    expected = (codes / top) ** power @ between(primaries, white).T
    assert expected.min() > 0.0
    # Profiles hold their numbers with 16 bits, lcms works with 16 bits: a few 1e-4 of white.
    photo = check(path, expected, atol=1.2e-3)
    assert photo.notes == ()
    assert np.abs(photo.linear() - light_of(codes, top)).max() > 0.01  # unlike plain sRGB


def test_greys_stay_grey_and_white_stays_white_through_a_profile(tmp_path):
    greys = np.arange(256, dtype=np.uint8)[None, :, None].repeat(3, 2).repeat(4, 0)
    path = tmp_path / "photo.png"
    Image.fromarray(greys).save(path, icc_profile=profile_of(*SPACES["warm white, power 2.2"]))
    light = check(path, (greys / 255.0) ** 2.2, atol=1.2e-3).linear()
    np.testing.assert_allclose(light[:, 255], 1.0, atol=3e-4)


def test_the_name_srgb_in_a_profile_does_not_make_it_srgb(tmp_path):
    """A linear profile with sRGB primaries is often called that; the curve counts, not the name."""
    codes = picture()
    path = tmp_path / "photo.png"
    profile = bytearray(profile_of(SRGB_PRIMARIES, D65, 1.0))
    at = profile.find("RGB".encode("utf-16-be"))
    if at >= 2:
        profile[at - 2 : at + 6] = "sRGB".encode("utf-16-be")
    Image.fromarray(codes).save(path, icc_profile=bytes(profile))
    check(path, codes / 255.0, atol=1e-4)


def test_an_srgb_profile_changes_not_one_value(tmp_path):
    codes = picture(top=250)
    path = tmp_path / "photo.png"
    srgb = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()
    Image.fromarray(codes).save(path, icc_profile=srgb)
    photo = check(path, light_of(codes))
    assert photo.codes.dtype == np.uint8
    assert photo.notes == ()


def test_a_grey_photo_with_an_srgb_profile_is_read_as_srgb(tmp_path):
    grey = picture(channels=1)[..., 0]
    path = tmp_path / "photo.jpg"
    srgb = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()
    Image.fromarray(np.full((16, 16), grey[2, 3])).save(path, quality=100, icc_profile=srgb)
    expected = np.full((16, 16, 3), light_of(grey[2, 3]))
    assert check(path, expected, atol=0.006).notes == ()


@pytest.mark.parametrize("bits", [8, 16])
def test_a_grey_profile_is_used(tmp_path, bits):
    profile = imagecodecs.cms_profile("gray", whitepoint=[*D65, 1.0], gamma=1.8)
    top = (1 << bits) - 1
    grey = picture(channels=1, top=top - 5, dtype=np.uint8 if bits == 8 else np.uint16)[..., 0]
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, grey, photometric="minisblack", iccprofile=profile)
    expected = ((grey / top) ** 1.8)[..., None].repeat(3, 2)
    assert check(path, expected, atol=1.2e-3).notes == ()


@pytest.mark.parametrize("profile", [b"not a profile at all", bytes(200)])
@pytest.mark.parametrize("channels", [1, 3])
def test_a_broken_profile_is_said_and_the_photo_read_as_srgb(tmp_path, profile, channels):
    codes = picture(channels=channels, top=250)
    path = tmp_path / "photo.png"
    Image.fromarray(codes[..., 0] if channels == 1 else codes).save(path, icc_profile=profile)
    photo = check(path, np.broadcast_to(light_of(codes), (*codes.shape[:2], 3)))
    assert photo.notes == ("its colour profile cannot be used; read as sRGB",)


def test_a_profile_cut_short_is_said_too(tmp_path):
    codes = picture(top=250)
    whole = profile_of(*SPACES["wide gamut, power 1.8"])
    path = tmp_path / "photo.png"
    Image.fromarray(codes).save(path, icc_profile=whole[: len(whole) // 2])
    photo = check(path, light_of(codes))
    assert photo.notes == ("its colour profile cannot be used; read as sRGB",)


def test_16_bit_cmyk_with_a_profile_for_other_colours_goes_by_the_plain_rule(tmp_path):
    inks = np.zeros((6, 8, 4), np.uint16)
    inks[..., 3] = 65535
    path = tmp_path / "photo.tif"
    profile = profile_of(*SPACES["wide gamut, power 1.8"])
    tifffile.imwrite(path, inks, photometric="separated", iccprofile=profile)
    photo = check(path, np.zeros((6, 8, 3)))
    assert photo.notes == ("its colour profile cannot be used; read as sRGB",)


# What a Photo promises ------------------------------------------------------------------------


def test_rows_and_columns_can_be_asked_for_alone(tmp_path):
    codes = picture(rows=20, columns=30)
    path = tmp_path / "photo.png"
    Image.fromarray(codes).save(path)
    photo = read_photo(path)
    part = photo.linear(slice(3, 9), slice(10, 27))
    np.testing.assert_array_equal(part, photo.linear()[3:9, 10:27])
    assert part.shape == (6, 17, 3)


@pytest.mark.parametrize("kind", ["codes", "profiled", "float"])
def test_nobody_can_write_into_a_photo(tmp_path, kind):
    path = tmp_path / ("photo.tif" if kind == "float" else "photo.png")
    if kind == "float":
        tifffile.imwrite(path, picture() / np.float32(255), photometric="rgb")
    else:
        profile = profile_of(*SPACES["wide gamut, power 1.8"]) if kind == "profiled" else None
        Image.fromarray(picture()).save(path, icc_profile=profile)
    with pytest.raises(ValueError, match=r"read-only"):
        read_photo(path).codes[0, 0, 0] = 1


def test_light_given_as_an_array_is_copied_and_left_alone(frozen):
    light = frozen(np.linspace(0, 1, 48, dtype=np.float32).reshape(4, 4, 3))
    scene = Scene.from_light(light, horizontal_view_deg=40)
    np.testing.assert_array_equal(scene.photo.linear(), light)
    own = np.ones((4, 4))
    scene = Scene.from_light(own, horizontal_view_deg=40)
    own[:] = 0.0
    assert scene.photo.linear().min() == 1.0


@pytest.mark.parametrize(
    ("light", "message"),
    [
        (np.zeros((4, 4, 3), np.uint8), "is of type uint8; give floats"),
        (np.zeros((4, 4, 4)), r"has shape \(4, 4, 4\); it must be \(rows, columns, 3\)"),
        (np.zeros((0, 4, 3)), r"has shape \(0, 4, 3\)"),
        (np.full((2, 2, 3), np.nan), "holds 12 values that are NaN or infinite"),
        (np.full((2, 2, 3), -0.5), "negative light, down to -0.5"),
    ],
)
def test_what_cannot_be_light_is_refused(light, message):
    with pytest.raises(SceneError, match=message):
        Scene.from_light(light, horizontal_view_deg=40)


@pytest.mark.parametrize("value", [np.nan, np.inf, -1.0])
def test_a_float_photo_that_cannot_be_light_is_refused(tmp_path, value):
    light = np.full((4, 4, 3), 0.5, np.float32)
    light[1, 1] = value
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, light, photometric="rgb")
    with pytest.raises(SceneError, match=r"NaN or infinite|negative light"):
        read_photo(path)


@pytest.mark.parametrize("dtype", [np.int16, np.uint32])
def test_numbers_whose_white_is_not_known_are_refused(tmp_path, dtype):
    path = tmp_path / "photo.tif"
    tifffile.imwrite(path, np.ones((4, 4), dtype), photometric="minisblack")
    with pytest.raises(SceneError, match=f"numbers of type {dtype.__name__}; export it with 8"):
        read_photo(path)


def test_colour_that_cannot_be_told_is_refused_by_name(tmp_path):
    path = tmp_path / "photo.tif"
    Image.new("LAB", (8, 6)).save(path)
    with pytest.raises(SceneError, match=r"picture in LAB colour.*export it as RGB"):
        read_photo(path)
    tifffile.imwrite(path, picture(dtype=np.uint16), photometric="cielab")
    with pytest.raises(SceneError, match=r"TIFF of another kind of colour"):
        read_photo(path)


def test_a_palette_of_greys_is_a_distance_map_by_its_greys(tmp_path):
    index = np.arange(48, dtype=np.uint8).reshape(6, 8)
    image = Image.fromarray(index).convert("P")
    image.putpalette(bytes(v for i in range(256) for v in ((255 - i) & 255,) * 3))
    image.putdata(index.ravel().tolist())
    image.save(tmp_path / "map.png")
    Image.fromarray(picture()).save(tmp_path / "photo.png")
    scene = Scene.load(
        tmp_path / "photo.png",
        horizontal_view_deg=60,
        distance_map=tmp_path / "map.png",
        map_step_mm=10.0,
    )
    np.testing.assert_array_equal(scene.distance.codes, 255 - index)
