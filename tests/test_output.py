"""What is written: kinds of file, colour tags, print size, looks, and that nothing is ever spoilt."""

import json
import math
import warnings
from dataclasses import replace

import numpy as np
import pytest
import tifffile
from conftest import CAMERA_TOML, contents, landscape_codes
from PIL import Image, ImageCms
from PIL.PngImagePlugin import PngInfo

import pinsim
from pinsim import Camera, Film, Hole, OutputError
from pinsim.render.picture import Picture

WIDTH_MM, HEIGHT_MM = 6.0, 4.5
GREEN = ("--wavelength", "550nm")  # one colour is rendered sooner
COLUMNS, ROWS = 240, 180


@pytest.fixture
def camera():
    return Camera(
        name="Test box",
        focal_length_mm=20.0,
        hole=Hole(diameter_mm=0.5),
        film=Film(width_mm=WIDTH_MM, height_mm=HEIGHT_MM),
    )


@pytest.fixture
def picture(camera, frozen):
    """Return a picture of soft colours, unlike its mirror images, made without rendering."""
    y, x = np.mgrid[0:ROWS, 0:COLUMNS] / COLUMNS
    light = np.stack([0.1 + 0.8 * x, 0.2 + 0.6 * y, 0.5 - 0.4 * x * y], axis=-1)
    return Picture(
        exposure=frozen(light.astype(np.float32)),
        pitch_mm=WIDTH_MM / COLUMNS,
        camera=camera,
        scene_name="place",
    )


@pytest.fixture
def grey(picture, frozen):
    return replace(picture, exposure=frozen(picture.exposure[..., :1]))


def srgb_codes(light, top=255):
    """Return exact codes, from the constants of IEC 61966-2-1."""
    wide = np.clip(light.astype(np.float64), 0, 1)
    encoded = np.where(wide <= 0.0031308, 12.92 * wide, 1.055 * wide ** (1 / 2.4) - 0.055)
    return np.round(top * encoded).astype(int)


def opened(path):
    with Image.open(path) as image:
        image.load()
        return image


def profile_light(profile, codes, mode):
    """Return what a colour-managed reader (lcms through Pillow) shows of codes, as sRGB codes."""
    import io

    image = Image.fromarray(codes)
    source = ImageCms.ImageCmsProfile(io.BytesIO(profile))
    return np.asarray(
        ImageCms.profileToProfile(image, source, ImageCms.createProfile("sRGB"), outputMode=mode)
    )


# Kinds of file --------------------------------------------------------------------------------


@pytest.mark.parametrize("suffix", [".png", ".PNG", ".tif", ".tiff"])
def test_lossless_8_bit_files_hold_the_codes(picture, tmp_path, suffix):
    path = tmp_path / f"a{suffix}"
    picture.save(path, bits="8")
    image = opened(path)
    assert image.mode == "RGB"
    assert np.abs(np.asarray(image).astype(int) - srgb_codes(picture.exposure)).max() <= 1


@pytest.mark.parametrize("suffix", [".jpg", ".jpeg"])
def test_jpeg_is_4_4_4_at_quality_95(picture, tmp_path, suffix):
    path = tmp_path / f"a{suffix}"
    picture.save(path)
    image = opened(path)
    assert image.format == "JPEG"
    # One chroma sample for each luma sample: sampling factors 1 x 1 in all three components.
    assert [layer[1:3] for layer in image.layer] == [(1, 1)] * 3
    # Quality 95 divides the luma table of ITU-T T.81 annex K by ten: 16 -> 2 at the mean.
    assert image.quantization[0][0] == 2
    assert np.abs(np.asarray(image).astype(int) - srgb_codes(picture.exposure)).max() <= 8


def test_a_red_line_one_pixel_wide_stays_red_in_jpeg(camera, tmp_path):
    """What 4:4:4 is for: subsampled chroma would wash it out."""
    light = np.full((64, 64, 3), 0.2, np.float32)
    light[:, 31] = (0.9, 0.02, 0.02)
    path = tmp_path / "a.jpg"
    Picture(exposure=light, pitch_mm=0.1, camera=camera, scene_name="x").save(path)
    line = np.asarray(opened(path))[32, 31].astype(int)
    assert line[0] - line[1] > 150


def test_16_bit_tiff_is_what_tif_means_unless_told(picture, tmp_path):
    path = tmp_path / "a.tif"
    picture.save(path)
    codes = tifffile.imread(path)
    assert codes.dtype == np.uint16
    assert np.abs(codes.astype(int) - srgb_codes(picture.exposure, 65535)).max() <= 1


def test_float_tiff_and_npz_hold_the_exposure_itself(picture, tmp_path, frozen):
    exposure = np.array(picture.exposure)
    exposure[:4] = np.nan
    exposure[5, 5] = 3.5
    picture = replace(picture, exposure=frozen(exposure), look="screen", gain=2.0)
    picture.save(tmp_path / "a.tif", bits="float")
    picture.save(tmp_path / "a.npz")
    np.testing.assert_array_equal(tifffile.imread(tmp_path / "a.tif"), exposure)
    with np.load(tmp_path / "a.npz") as stored:
        np.testing.assert_array_equal(stored["exposure"], exposure)
        assert stored["exposure"].dtype == np.float32
        assert stored["pitch_mm"] == picture.pitch_mm
        about = json.loads(str(stored["about"]))
    assert about["hole_mm"] == 0.5
    assert about["focal_length_mm"] == 20.0
    assert "upright, as the scene; linear exposure, 1.0 = white on the axis" in about["description"]


@pytest.mark.parametrize("suffix", [".png", ".jpg", ".tif", ".npz"])
def test_one_channel_is_written_as_grey(grey, tmp_path, suffix):
    path = tmp_path / f"a{suffix}"
    grey.save(path)
    if suffix == ".npz":
        with np.load(path) as stored:
            assert stored["exposure"].shape == (ROWS, COLUMNS, 1)
    elif suffix == ".tif":
        assert tifffile.imread(path).shape == (ROWS, COLUMNS)
    else:
        assert opened(path).mode == "L"


@pytest.mark.parametrize("suffix", [".png", ".jpg", ".tif"])
@pytest.mark.parametrize("kind", ["picture", "grey"])
def test_every_picture_is_tagged_with_the_srgb_curve(request, tmp_path, suffix, kind):
    path = tmp_path / f"a{suffix}"
    request.getfixturevalue(kind).save(path, bits="8")
    profile = opened(path).info["icc_profile"]
    greys = np.arange(256, dtype=np.uint8)[None].repeat(8, 0)
    codes = greys if kind == "grey" else greys[..., None].repeat(3, 2)
    shown = profile_light(profile, codes, "RGB").astype(int)
    assert np.abs(shown - greys[..., None]).max() <= 1
    assert profile[16:20] == (b"GRAY" if kind == "grey" else b"RGB ")


def test_a_saturated_colour_is_tagged_as_the_srgb_it_is(picture, tmp_path):
    picture.save(tmp_path / "a.png")
    profile = opened(tmp_path / "a.png").info["icc_profile"]
    codes = np.zeros((4, 4, 3), np.uint8)
    codes[:] = (230, 40, 120)
    assert np.abs(profile_light(profile, codes, "RGB").astype(int) - codes).max() <= 1


def test_the_float_exposure_claims_no_colour_space(picture, tmp_path):
    picture.save(tmp_path / "a.tif", bits="float")
    with tifffile.TiffFile(tmp_path / "a.tif") as tiff:
        assert "InterColorProfile" not in tiff.pages[0].tags


def test_equal_pictures_are_equal_files(picture, tmp_path):
    for suffix in (".png", ".jpg", ".tif"):
        picture.save(tmp_path / f"a{suffix}")
        picture.save(tmp_path / f"b{suffix}")
        assert (tmp_path / f"a{suffix}").read_bytes() == (tmp_path / f"b{suffix}").read_bytes()


# Print size -----------------------------------------------------------------------------------

# PNG holds whole pixels per metre, JPEG whole pixels per inch, TIFF a fraction.
DPI_STEP = {".png": 0.0254, ".jpg": 1.0, ".tif": 0.01}


@pytest.mark.parametrize("suffix", DPI_STEP)
@pytest.mark.parametrize("kind", ["picture", "grey"])
def test_it_prints_at_the_films_true_size(request, tmp_path, suffix, kind):
    """Inches times 25.4: the width on paper is the width of the film."""
    path = tmp_path / f"a{suffix}"
    request.getfixturevalue(kind).save(path, bits="8")
    image = opened(path)
    dpi = np.array(image.info["dpi"], float)
    true = COLUMNS / WIDTH_MM * 25.4
    np.testing.assert_allclose(dpi, true, rtol=0, atol=0.51 * DPI_STEP[suffix])
    assert 25.4 * image.width / dpi[0] == pytest.approx(WIDTH_MM, rel=1e-3)
    assert 25.4 * image.height / dpi[1] == pytest.approx(HEIGHT_MM, rel=1e-3)


def test_16_bit_and_float_tiff_print_at_true_size_too(picture, tmp_path):
    for bits in ("16", "float"):
        picture.save(tmp_path / f"{bits}.tif", bits=bits)
        with tifffile.TiffFile(tmp_path / f"{bits}.tif") as tiff:
            tags = tiff.pages[0].tags
            over, under = tags["XResolution"].value
            assert tags["ResolutionUnit"].value == 2  # inch
            assert 25.4 * COLUMNS / (over / under) == pytest.approx(WIDTH_MM, rel=1e-4)


# What a file says -----------------------------------------------------------------------------


def said_by(path):
    if path.suffix == ".tif":
        with tifffile.TiffFile(path) as tiff:
            return tiff.pages[0].description
    info = opened(path).info
    text = info.get("Description") or info["comment"]
    return text.decode() if isinstance(text, bytes) else text


LOOK_WORDS = {
    "upright": "upright, as the scene",
    "screen": "seen from behind the film like a focusing screen: turned by 180 degrees",
    "emulsion": "the exposed face of the film: upside down, not reversed sideways",
}


@pytest.mark.parametrize("suffix", [".png", ".jpg", ".tif"])
@pytest.mark.parametrize("look", LOOK_WORDS)
@pytest.mark.parametrize("tone", ["positive", "negative"])
def test_a_file_says_what_it_is_and_from_where_it_is_seen(picture, tmp_path, suffix, look, tone):
    path = tmp_path / f"a{suffix}"
    replace(picture, look=look, camera=replace(picture.camera, tone=tone)).save(path)
    text = said_by(path)
    assert text == (
        "pinsim: place through Test box (hole 0.5 mm, 20 mm to film, f/40, 6 x 4.5 mm); "
        f"{tone}, {LOOK_WORDS[look]}"
    )


@pytest.mark.parametrize("suffix", [".png", ".jpg", ".tif", ".npz"])
def test_names_of_any_letters_can_be_written(picture, tmp_path, suffix):
    name = "H\N{LATIN SMALL LETTER O WITH DIAERESIS}he \N{GREEK SMALL LETTER LAMDA} \N{SNOWMAN}"
    path = tmp_path / f"{name}{suffix}"
    replace(picture, scene_name=name).save(path)
    assert path.stat().st_size > 1000


SECRETS = (b"Brandless", b"SECRET", b"GPS", b"photoshop", b"xmpmeta", b"owner@example.org")


def photo_with_everything(path):
    """Write a photo that says where it was taken, with what, and by whom."""
    exif = Image.Exif()
    exif[0x010F] = "Brandless SECRET maker"
    exif[0x0110] = "SECRET camera"
    exif[0x013B] = "owner@example.org"
    exif[0x9286] = "SECRET comment"
    exif.get_ifd(0x8769).update({0xA405: 28, 0xA431: "SECRET-SERIAL"})
    exif.get_ifd(0x8825).update({1: "N", 2: (10.0, 20.0, 30.0), 3: "E", 4: (1.0, 2.0, 3.0)})
    xmp = b'<x:xmpmeta xmlns:x="adobe:ns:meta/">SECRET GPS</x:xmpmeta>'
    image = Image.fromarray(landscape_codes())
    if path.suffix == ".jpg":
        image.save(path, exif=exif.tobytes(), xmp=xmp, comment=b"SECRET")
    elif path.suffix == ".png":
        text = PngInfo()
        text.add_text("Author", "owner@example.org SECRET")
        text.add_itxt("XML:com.adobe.xmp", xmp.decode())
        image.save(path, exif=exif.tobytes(), pnginfo=text)
    else:
        image.save(path, exif=exif.tobytes(), tiffinfo={700: xmp})
    assert b"SECRET" in path.read_bytes()


@pytest.mark.parametrize("source", [".jpg", ".png", ".tif"])
def test_nothing_of_the_photos_own_metadata_travels_along(tmp_path, source):
    photo = tmp_path / f"photo{source}"
    photo_with_everything(photo)
    scene = pinsim.Scene.load(photo, horizontal_view_deg=40)
    (tmp_path / "box.toml").write_text(CAMERA_TOML)
    camera = Camera.load(tmp_path / "box.toml")
    picture = pinsim.preview(scene, camera, width_px=64, wavelength_nm=550)
    sheet = pinsim.contact_sheet([scene], [camera], wavelength_nm=550)
    for suffix in (".png", ".jpg", ".tif", ".npz"):
        path = tmp_path / f"out{suffix}"
        picture.save(path)
        if suffix != ".npz":
            sheet.save(tmp_path / f"sheet{suffix}")
            with Image.open(path) as image:
                assert not image.getexif().get_ifd(0x8825)
                assert 0x010F not in image.getexif()
    for path in [*tmp_path.glob("out.*"), *tmp_path.glob("sheet.*")]:
        for word in SECRETS:
            assert word not in path.read_bytes(), (path, word)


# Nothing is spoilt ----------------------------------------------------------------------------


@pytest.mark.parametrize("suffix", [".png", ".jpg", ".tif", ".npz"])
def test_an_existing_file_is_replaced_only_when_told(picture, tmp_path, suffix):
    path = tmp_path / f"a{suffix}"
    path.write_text("precious")
    with pytest.raises(OutputError, match=r"exists already; give another name, or allow it"):
        picture.save(path)
    assert path.read_text() == "precious"
    picture.save(path, overwrite=True)
    assert path.stat().st_size > 1000
    assert list(contents(tmp_path)) == [path.name]


@pytest.mark.parametrize("error", [RuntimeError("torn"), OSError(28, "No space left on device")])
@pytest.mark.parametrize("before", [None, "precious"])
def test_a_file_appears_whole_or_not_at_all(picture, tmp_path, monkeypatch, error, before):
    path = tmp_path / "a.png"
    if before:
        path.write_text(before)

    def torn(self, file, *_, **__):
        file.write(b"half a picture")
        raise error

    monkeypatch.setattr(Image.Image, "save", torn)
    expected = (
        (OutputError, "No space left") if isinstance(error, OSError) else (RuntimeError, "torn")
    )
    with pytest.raises(expected[0], match=expected[1]):
        picture.save(path, overwrite=True)
    assert [file.name for file in tmp_path.iterdir()] == (["a.png"] if before else [])
    if before:
        assert path.read_text() == before


def test_a_file_that_came_in_between_is_not_replaced(picture, tmp_path, monkeypatch):
    path = tmp_path / "a.png"
    save = Image.Image.save

    def slow(self, file, *args, **options):
        save(self, file, *args, **options)
        path.write_text("somebody else's")

    monkeypatch.setattr(Image.Image, "save", slow)
    with pytest.raises(OutputError, match=r"a.png exists already"):
        picture.save(path)
    assert path.read_text() == "somebody else's"
    assert [file.name for file in tmp_path.iterdir()] == ["a.png"]


def test_without_hard_links_a_file_still_appears(picture, tmp_path, monkeypatch):
    """As on FAT sticks and some network drives."""

    def refuses(*_, **__):
        raise PermissionError(1, "Operation not permitted")

    monkeypatch.setattr("os.link", refuses)
    picture.save(tmp_path / "a.png")
    assert list(contents(tmp_path)) == ["a.png"]
    with pytest.raises(OutputError, match=r"exists already"):
        picture.save(tmp_path / "a.png")


def test_a_written_file_has_ordinary_permissions(picture, tmp_path):
    import os

    mask = os.umask(0)
    os.umask(mask)
    picture.save(tmp_path / "a.png")
    assert (tmp_path / "a.png").stat().st_mode & 0o777 == 0o666 & ~mask


@pytest.mark.parametrize(
    ("name", "bits", "message"),
    [
        ("a.png", "16", "a .png file is written with 8 bits; for 16 use .tif"),
        ("a.jpg", "float", "a .jpg file holds no float; use .tif or .npz"),
        ("a.tif", "12", "bits is '12'; it must be one of: 8, 16, float"),
        ("a.npz", "8", "a .npz file holds the exposure as float"),
        ("a.gif", None, "a file's ending tells its kind, and this has .gif"),
    ],
)
def test_what_a_kind_of_file_cannot_hold_is_refused(picture, tmp_path, name, bits, message):
    with pytest.raises(OutputError, match=message):
        picture.save(tmp_path / name, bits=bits)
    assert contents(tmp_path) == {}


# How it looks ---------------------------------------------------------------------------------


def test_looks_are_turned_as_one_stands(picture):
    """From behind, the film's picture is turned by half a turn; the exposed face is upside down only.

    The hole turns the picture by 180 degrees as seen from behind, as every pinhole image is; walking
    round to the exposed face mirrors that sideways, which leaves it upside down. Elementary geometry.
    """
    upright = picture.codes()
    np.testing.assert_array_equal(picture.looked_at("screen").codes(), np.rot90(upright, 2))
    np.testing.assert_array_equal(picture.looked_at("emulsion").codes(), np.flipud(upright))
    assert not np.array_equal(upright, np.flipud(upright))
    assert not np.array_equal(upright, np.fliplr(upright))


@pytest.mark.parametrize("look", ["screen", "emulsion"])
def test_a_saved_look_is_turned_but_the_exposure_stays_upright(picture, tmp_path, look):
    turned = picture.looked_at(look)
    np.testing.assert_array_equal(turned.exposure, picture.exposure)
    turned.save(tmp_path / "a.png")
    shown = np.asarray(opened(tmp_path / "a.png"))
    turn = {"screen": lambda a: a[::-1, ::-1], "emulsion": lambda a: a[::-1]}[look]
    np.testing.assert_array_equal(shown, turn(picture.codes()))


@pytest.mark.parametrize("bits", [8, 16])
def test_a_negative_is_the_plain_inversion(picture, bits):
    negative = replace(picture, camera=replace(picture.camera, tone="negative"))
    top = (1 << bits) - 1
    np.testing.assert_array_equal(negative.codes(bits), top - picture.codes(bits))


def test_twice_the_exposure_is_one_stop_brighter(picture):
    brighter = replace(picture, gain=2.0)
    expected = srgb_codes(2.0 * picture.exposure)
    assert np.abs(brighter.codes().astype(int) - expected).max() <= 1
    np.testing.assert_array_equal(brighter.exposure, picture.exposure)


@pytest.mark.parametrize("tone", ["positive", "negative"])
@pytest.mark.parametrize("bits", [8, 16])
def test_what_the_photo_does_not_show_is_hatched(picture, frozen, tone, bits):
    exposure = np.array(picture.exposure)
    exposure[:60] = np.nan
    camera = replace(picture.camera, tone=tone)
    hatched = replace(picture, exposure=frozen(exposure), camera=camera).codes(bits)
    scale = 1 if bits == 8 else 257
    values = np.unique(hatched[:60].reshape(-1, 3), axis=0)
    assert values.tolist() == [[112 * scale] * 3, [168 * scale] * 3]
    # Stripes, both ways: every row and every column of the place changes more than once.
    assert (np.abs(np.diff(hatched[:60, :, 0].astype(int), axis=0)).sum(axis=0) > 0).all()
    assert (np.abs(np.diff(hatched[:60, :, 0].astype(int), axis=1)).sum(axis=1) > 0).all()
    plain = replace(picture, camera=camera).codes(bits)
    np.testing.assert_array_equal(hatched[60:], plain[60:])


def test_developing_warns_of_nothing_and_changes_nothing(picture, frozen):
    exposure = np.array(picture.exposure)
    exposure[0, 0] = np.nan
    exposure[0, 1] = 1e30
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        codes = replace(picture, exposure=frozen(exposure), gain=1e4).codes()
    assert codes[0, 1].tolist() == [255, 255, 255]


def test_the_command_line_writes_what_was_asked(run, photo, camera_file):
    arguments = ("preview", photo, camera_file, "--view", "40deg", "--width", 80, *GREEN)
    code, out, err = run(*arguments, "-o", "a.tif", "--bits", "16", "--look", "screen")
    assert (code, err) == (0, "")
    assert out.splitlines()[0] == (
        "a.tif: 80 x 60 px, prints 8 x 6 mm; positive, "
        "seen from behind the film like a focusing screen: turned by 180 degrees"
    )
    assert tifffile.imread(photo.parent / "a.tif").dtype == np.uint16
    code, out, err = run(*arguments, "-o", "a.tif")
    assert code == 2
    code, out, err = run(*arguments, "-o", "a.tif", "--bits", "float", "--overwrite")
    assert code == 0
    assert tifffile.imread(photo.parent / "a.tif").dtype == np.float32


def test_without_a_name_the_file_is_called_after_scene_and_camera(run, photo, camera_file):
    assert run("preview", photo, camera_file, "--view", "40deg", "--width", 80, *GREEN)[0] == 0
    assert (photo.parent / "photo-box.png").is_file()
    assert run("preview", photo, "--view", "40deg", "--hole", "0.5mm", "--focal-length", "20mm",
               "--film", "8mmx6mm", "--width", 80, *GREEN)[0] == 0  # fmt: skip
    assert (photo.parent / "photo-0.5mm-at-20mm.png").is_file()


def test_a_time_makes_the_picture_brighter_or_darker(run, photo, camera_file):
    """Metered time t = N^2 / (2^EV S/100) (ISO 2720): f/40, ISO 100, EV 10: 1.5625 s."""
    common = ("preview", photo, camera_file, "--view", "40deg", "--width", 80, "--ev", 10, *GREEN)
    means = {}
    for time in ("1.5625s", "781.25ms", "none"):
        extra = () if time == "none" else ("--time", time)
        assert run(*common, *extra, "-o", f"{time}.png")[0] == 0
        codes = np.asarray(opened(photo.parent / f"{time}.png")) / 255
        light = np.where(codes <= 0.04045, codes / 12.92, ((codes + 0.055) / 1.055) ** 2.4)
        means[time] = light.mean()
    assert means["1.5625s"] == pytest.approx(means["none"], rel=1e-3)
    assert means["781.25ms"] == pytest.approx(0.5 * means["none"], rel=1e-2)
    assert math.isfinite(means["none"])
