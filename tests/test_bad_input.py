"""Every wrong photo, map, design, scene file or option: one line that says what, where, how to mend it.

Each case runs the command line. It must end with exit code 2 and exactly one line of ASCII on stderr
that begins with "pinsim: ", name what is wrong, print no traceback, write nothing and change no input.
"""

import os
import struct
import subprocess
import sys
import zlib
from pathlib import Path

import numpy as np
import pytest
import tifffile
from conftest import CAMERA_TOML, TYPED_CAMERA, contents, landscape_codes
from PIL import Image

ROOT = Path(__file__).resolve().parents[1]
VIEW = ("--view", "60deg")
PREVIEW = ("preview", "photo.png", *VIEW, *TYPED_CAMERA)
HOLE_AND_FILM = ("--hole", "0.5mm", "--film", "8mmx6mm")


def a_png_header(width, height, bits=8):
    """Return a PNG of a few bytes that claims any size (PNG 3rd edition: length, type, data, CRC)."""

    def chunk(kind, data):
        check = struct.pack(">I", zlib.crc32(kind + data))
        return struct.pack(">I", len(data)) + kind + data + check

    head = struct.pack(">IIBBBBB", width, height, bits, 2, 0, 0, 0)
    return (
        b"\x89PNG\r\n\x1a\n"
        + chunk(b"IHDR", head)
        + chunk(b"IDAT", zlib.compress(bytes(100)))
        + chunk(b"IEND", b"")
    )


def a_tiff_header(width, height, bits=16):
    """Return a TIFF of a few bytes that claims any size: one directory, one empty strip (TIFF 6.0)."""
    tags = [
        (256, 4, 1, width),
        (257, 4, 1, height),
        (258, 3, 1, bits),
        (259, 3, 1, 1),
        (262, 3, 1, 1),
        (273, 4, 1, 8),
        (277, 3, 1, 1),
        (278, 4, 1, height),
        (279, 4, 1, width * height * bits // 8 % 2**32),
    ]
    body = struct.pack("<H", len(tags)) + b"".join(struct.pack("<HHII", *tag) for tag in tags)
    return b"II*\0" + struct.pack("<I", 8) + body + struct.pack("<I", 0)


def shortened(path, share=0.5):
    path.write_bytes(path.read_bytes()[: int(share * path.stat().st_size)])


@pytest.fixture
def folder(tmp_path):
    """Return a folder with one of everything that can be wrong."""
    here = tmp_path
    rng = np.random.default_rng(3)
    codes = landscape_codes()
    noise = rng.integers(0, 256, (64, 96, 3), np.uint8)
    Image.fromarray(codes).save(here / "photo.png")
    (here / "box.toml").write_text(CAMERA_TOML, encoding="utf-8")
    (here / "place.toml").write_text('photo = "photo.png"\nhorizontal_view = "60 deg"\n')
    (here / "sub").mkdir()
    (here / "empty.jpg").write_bytes(b"")
    (here / "empty.toml").write_bytes(b"")
    Image.fromarray(noise).save(here / "cut.jpg", quality=95)
    shortened(here / "cut.jpg")
    Image.fromarray(noise).save(here / "cut.png")
    shortened(here / "cut.png")
    tifffile.imwrite(here / "cut.tif", noise, photometric="rgb", compression="zlib")
    shortened(here / "cut.tif")
    deep = noise.astype(np.uint16) * 257
    tifffile.imwrite(here / "cut16.tif", deep, photometric="rgb", compression="zlib")
    shortened(here / "cut16.tif")
    import imagecodecs

    (here / "cut16.png").write_bytes(imagecodecs.png_encode(deep)[:5000])
    (here / "head.jpg").write_bytes((here / "cut.jpg").read_bytes()[:40])
    (here / "text.jpg").write_text("this is no picture\n")
    (here / "phone.heic").write_bytes(b"\0\0\0\x18ftypheic\0\0\0\0mif1heic" + bytes(200))
    (here / "phone.jpg").write_bytes(b"\0\0\0\x18ftypheic\0\0\0\0mif1heic" + bytes(200))
    (here / "bomb.png").write_bytes(a_png_header(40_000, 30_000))
    (here / "bomb16.png").write_bytes(a_png_header(40_000, 30_000, bits=16))
    (here / "bomb.tif").write_bytes(a_tiff_header(40_000, 30_000))
    (here / "bomb8.tif").write_bytes(a_tiff_header(40_000, 30_000, bits=8))
    rows, columns = codes.shape[:2]
    near = np.full((rows, columns), 200, np.uint8)
    Image.fromarray(near).save(here / "map.png")
    Image.fromarray(near[:-1]).save(here / "map-short.png")
    Image.fromarray(near.T.copy()).save(here / "map-turned.png")
    Image.fromarray(codes).save(here / "map-colour.png")
    holed = near.astype(np.float32)
    holed[0, :3] = np.nan
    tifffile.imwrite(here / "map-nan.tif", holed)
    tifffile.imwrite(here / "map-negative.tif", -near.astype(np.float32))
    return here


@pytest.fixture
def refused(folder, run):
    """Return a function that runs a command that must be refused, and returns its line."""

    def check(*arguments):
        before = contents(folder)
        code, out, err = run(*arguments)
        assert err.endswith("\n"), err
        assert err.count("\n") == 1, err
        assert err.startswith("pinsim: ")
        assert code == 2, err
        assert out == ""
        assert err.isascii()
        assert "Traceback" not in err
        assert "Error" not in err
        assert contents(folder) == before
        return err[len("pinsim: ") : -1]

    return check


# Photos ---------------------------------------------------------------------------------------

PHOTOS = {
    "missing.jpg": "missing.jpg: no such file; give the path of a photo",
    "photo.png/inside.jpg": "photo.png/inside.jpg: no such file",
    "x" * 300 + ".jpg": "cannot be read: File name too long",
    "sub": "sub is a folder; give one photo in it",
    "": "is a folder; give one photo",
    "empty.jpg": r"empty.jpg is empty \(0 bytes\); copy the photo again",
    "cut.jpg": "cut.jpg is damaged or cut short .*; copy or export the photo again",
    "cut.png": "cut.png is damaged or cut short .*; copy or export the photo again",
    "cut16.png": "cut16.png is damaged or cut short .*; copy or export the photo again",
    "cut.tif": "cut.tif is damaged or .*; (copy or export the photo again|export the photo again)",
    "cut16.tif": "cut16.tif is damaged or .*; export the photo again",
    "head.jpg": "head.jpg is (damaged|not a picture).*export the photo",
    "text.jpg": "text.jpg is not a picture that pinsim reads; export the photo as JPEG, PNG or TIFF",
    "phone.heic": "phone.heic is (damaged or cut short|a HEIC picture: pip install 'pinsim.phone.')",
    "phone.jpg": "phone.jpg is (damaged or cut short|a HEIC picture)",
    "bomb.png": "bomb.png: 1200 megapixels is more than the 300 that pinsim opens; shrink the photo",
    "bomb16.png": "bomb16.png: 1200 megapixels is more than the 300",
    "bomb.tif": "bomb.tif: 1200 megapixels is more than the 300 that pinsim opens; shrink the photo",
    "bomb8.tif": "bomb8.tif: 1200 megapixels is more than the 300",
    "box.toml": "box.toml is a camera design, not a scene; the scene or photo comes first",
    "empty.toml": "empty.toml is empty; a scene file is a TOML file",
    "missing.toml": "missing.toml: no such file; give the path of a scene file",
    "sample:nowhere": "no sample scene is called 'nowhere'.*Known:",
}


@pytest.mark.parametrize("photo", PHOTOS, ids=lambda name: name[:20] or "nothing")
def test_a_wrong_photo_is_refused(refused, photo):
    line = refused("preview", photo, *VIEW, *TYPED_CAMERA)
    assert_says(line, PHOTOS[photo])


def assert_says(line, pattern):
    import re

    assert re.search(pattern, line), f"{line!r} does not say {pattern!r}"


@pytest.mark.parametrize("photo", ["cut.jpg", "bomb.png", "bomb.tif", "text.jpg", "missing.jpg"])
@pytest.mark.parametrize("command", ["compare", "contact-sheet"])
def test_the_sheets_refuse_a_wrong_photo_too(refused, command, photo):
    line = refused(command, photo, *VIEW, *TYPED_CAMERA, "--hole", "0.4mm")
    assert photo in line


def test_a_photo_that_does_not_tell_its_angle_is_asked_for(refused):
    line = refused("preview", "photo.png", *TYPED_CAMERA)
    assert_says(line, "photo.png does not tell its angle of view.*--view 65deg")


# Distances ------------------------------------------------------------------------------------

MAPS = {
    ("missing.png", "1mm"): "missing.png: no such file; give the path of a distance map",
    ("sub", "1mm"): "sub is a folder; give one distance map in it",
    ("text.jpg", "1mm"): "text.jpg is not a picture that pinsim reads; export the distance map",
    ("cut.png", "1mm"): "cut.png is damaged or cut short",
    ("bomb.tif", "1mm"): "1200 megapixels is more than the 300",
    ("map-short.png", "1mm"): "map-short.png is 72 x 47 pixels but the photo is 72 x 48. Save",
    ("map-turned.png", "1mm"): "map-turned.png is 48 x 72 .* It looks turned: rotate it",
    ("map-colour.png", "1mm"): "map-colour.png: this distance map has 3 different channels",
    ("map-nan.tif", "1mm"): "3 distances are NaN; say what they are: .*--holes far.*--holes fill",
    ("map-negative.tif", "1mm"): "distances go down to -200 mm; they start at 0",
    ("map.png", "0mm"): "map.png: the map's step is 0 mm; it must be 0.0001 to 10000 mm",
    ("map.png", "-1mm"): "map.png: the map's step is -1 mm; it must be 0.0001 to 10000 mm",
    ("map.png", "1um"): "the nearest distance is 0.2 mm, too near to draw; is the step",
    ("map.png", "1"): "--map-step: '1' has no unit; add one of um, mm",
    ("map.png", None): "what does one code value of the map mean.*--map-step 1mm",
}


@pytest.mark.parametrize(("name", "step"), MAPS)
def test_a_wrong_distance_map_is_refused(refused, name, step):
    steps = () if step is None else ("--map-step", step)
    line = refused(*PREVIEW, "--distance-map", name, *steps)
    assert_says(line, MAPS[name, step])


def test_a_distance_and_a_map_exclude_each_other(refused):
    line = refused(*PREVIEW, "--distance", "2m", "--distance-map", "map.png", "--map-step", "1mm")
    assert_says(line, "a distance and a distance map exclude each other; keep one")
    assert_says(refused(*PREVIEW, "--map-step", "1mm"), "a map step needs a distance map")


# Options --------------------------------------------------------------------------------------

# Each replaces or follows the options of a sound command; click takes the last of repeated ones.
OPTIONS = {
    ("--hole", "0.5"): "--hole: '0.5' has no unit; add one of um, mm.*for example '0.30 mm'",
    ("--hole", "0,5mm"): "--hole: cannot read '0,5mm'; write a number with a point",
    ("--hole", "-0.5mm"): "hole diameter is -0.5 mm; it must be 0.01 to 100 mm",
    ("--hole", "0mm"): "hole diameter is 0 mm; it must be 0.01 to 100 mm",
    ("--hole", "300mm"): "hole diameter is 300 mm.*If you meant 300 um, write 0.3 mm",
    ("--hole", "30mm"): "the hole, 30 mm, is too large for a box only 20 mm deep",
    ("--hole", "7mm"): "the hole, 7 mm, is as large as the film frame",
    ("--hole", "3 parsec"): "the unit of '3 parsec' is not one of um, mm",
    ("--hole", "0.3\N{GREEK SMALL LETTER LAMDA}"): r"the unit of '0.3\\u03bb' is not one of",
    ("--hole", "inf"): "--hole: cannot read 'inf'",
    ("--focal-length", "-20mm"): "focal length .* is -20 mm; it must be 2 to 20000 mm",
    ("--focal-length", "60000mm"): "If you meant 60000 um, write 60 mm",
    ("--focal-length", "20"): "--focal-length: '20' has no unit",
    ("--plate", "-1mm"): "plate thickness is -1 mm; it must be 0 to 50 mm",
    ("--plate", "thick"): "--plate: cannot read 'thick'",
    (
        "--film",
        "6x66",
    ): "no film frame is called '6x66'. Did you mean '6x6'.*or give width and height",
    ("--film", "8mmx0mm"): "film height is 0 mm; it must be 2 to 5000 mm",
    ("--film", "8mmx6furlong"): "the unit of '6furlong' is not one of",
    ("--film", "1.2.3mmx4mm"): "--film: cannot read '1.2.3mm'",
    ("--film", ""): "no film frame is called ''",
    ("--shift", "9km"): "film shift right is 9e\\+06 mm; it must be -5000 to 5000 mm",
    ("--rise", "up"): "--rise: cannot read 'up'",
    ("--material", "panchromatic"): "no material is called 'panchromatic'. Did you mean 'panchrom",
    ("--tone", "blue"): "--tone.*'blue' is not one of 'positive', 'negative'",
    ("--view", "60"): "--view: '60' has no unit; add one of deg, rad",
    ("--view", "180deg"): "horizontal view is 180 deg; it must be 0.5 to 170 deg.*left edge to the",
    ("--view", "0deg"): "horizontal view is 0 deg; it must be 0.5 to 170 deg",
    ("--view", "-60deg"): "horizontal view is -60 deg; it must be 0.5 to 170 deg",
    ("--view", "60mm"): "the unit of '60mm' is not one of deg, rad",
    ("--distance", "4"): "--distance: '4' has no unit",
    ("--distance", "-4m"): "--distance is -4000 mm; a distance is more than 0",
    ("--distance", "0.1mm"): "distance is 0.1 mm; it must be 1 to inf mm",
    ("--projection", "fisheye"): "'fisheye' is not one of 'rectilinear', 'equirectangular'",
    ("--projection", "equirectangular", "--view", "361deg"): "is 361 deg; it must be 1 to 360 deg",
    ("--projection", "equirectangular", "--view", "300deg"): "would be 200 deg high; crop it",
    ("--beyond", "wrap"): "'wrap' is not one of 'mirror', 'extend', 'black'",
    ("--wavelength", "550"): "--wavelength: '550' has no unit; add one of nm, um",
    ("--wavelength", "550mm"): "the unit of '550mm' is not one of nm, um",
    ("--wavelength", "0.55nm"): "wavelength is 0.55 nm.*If you meant 0.55 um, write 550 nm",
    ("--time", "8s"): "a time needs the light it is meant for; give the scene's EV",
    ("--time", "0s", "--ev", "12"): "an exposure takes more than 0 s",
    ("--time", "-8s", "--ev", "12"): "an exposure takes more than 0 s",
    ("--time", "8", "--ev", "12"): "--time: '8' has no unit; add one of ms, s, min, h",
    ("--time", "1e300h", "--ev", "12"): "--time is .* more than 100000 h",
    ("--ev", "bright"): "--ev is 'bright'; it must be a number of EV",
    ("--ev", "nan", "--time", "1s"): "--ev is nan EV; it must be -10 to 25 EV",
    ("--ev", "1e9", "--time", "1s"): r"--ev is 1e\+09 EV; it must be -10 to 25 EV",
    ("--look", "sideways"): "'sideways' is not one of 'upright', 'screen', 'emulsion'",
    ("--width", "0"): "a picture 0 px wide is not possible; give 16 to 20000",
    ("--width", "-5"): "a picture -5 px wide is not possible",
    ("--width", "1000000"): "a picture 1000000 px wide is not possible",
    ("--width", "wide"): "'wide' is not a valid integer",
    ("--bits", "12"): "'12' is not one of '8', '16', 'float'",
    ("--bits", "16"): "a .png file is written with 8 bits; for 16 use .tif",
    ("--bits", "float"): "a .png file holds no float; use .tif or .npz",
    ("--bits", "8", "-o", "a.npz"): "a .npz file holds the exposure as float",
    ("--bits", "float", "-o", "a.jpg"): "a .jpg file holds no float",
    ("--holle", "0.3mm"): "No such option.*--holle.*--hole",
    ("--hole",): "--hole.*requires an argument",
    ("box.toml", "place.toml"): "unexpected extra argument.*place.toml",
    ("-o", "a.gif"): "a.gif: a file's ending tells its kind, and this has .gif; use one of .png",
    (
        "-o",
        "picture",
    ): "picture: a file's ending tells its kind, and this has none; use one of .png, .jpg",
    ("-o", "sub"): "sub: a file's ending tells its kind",
    ("-o", "nowhere/a.png"): "nowhere/a.png: the folder nowhere does not exist; make it first",
    ("-o", "photo.png/a.png"): "the folder photo.png does not exist",
    ("-o", "y" * 300 + ".png"): "cannot be written: File name too long",
    ("-o", "photo.png"): "photo.png is what the picture is made from; give another name",
    ("-o", "photo.png", "--overwrite"): "photo.png is what the picture is made from",
    ("-o", "cut.png"): "cut.png exists already; give another name, or allow it with --overwrite",
}


@pytest.mark.parametrize("options", OPTIONS, ids=lambda case: ascii(" ".join(case))[:40])
def test_a_wrong_option_is_refused(refused, options):
    assert_says(refused(*PREVIEW, *options), OPTIONS[options])


COMMANDS = {
    ("previev", "photo.png"): "no command is called 'previev'. Did you mean 'preview'. Known:",
    ("--colour",): "No such option.*--colour.*; see pinsim --help",
    ("preview",): "Missing argument 'SCENE'; see pinsim preview --help",
    ("contact-sheet",): "Missing argument 'SCENE.*; see pinsim contact-sheet --help",
    ("preview", "photo.png", *VIEW): "which camera.*sample:square-box.*--hole 0.30mm",
    ("preview", "photo.png", *VIEW, "--focal-length", "60mm"): (
        "how large is the hole.*for example --hole 0.2[0-9]mm"
    ),
    ("preview", "photo.png", *VIEW, "--hole", "0.3mm"): "how far is the film from the hole",
    ("preview", "photo.png", "missing.toml", *VIEW): "missing.toml: no such file; .* camera design",
    (
        "preview",
        "photo.png",
        "photo.png",
        *VIEW,
    ): "photo.png is not text .*a camera design is a TOML",
    ("preview", "photo.png", "sub", *VIEW): "sub is a folder; give the camera design inside it",
    ("preview", "photo.png", "empty.toml", *VIEW): "empty.toml is empty; a camera design is a TOML",
    (
        "preview",
        "photo.png",
        "place.toml",
        *VIEW,
    ): "place.toml is a scene file, not a camera design",
    ("preview", "photo.png", "sample:sqare-box", *VIEW): "Did you mean 'square-box'",
    ("numbers",): "which camera",
    ("numbers", "missing.toml"): "missing.toml: no such file",
    ("numbers", *TYPED_CAMERA, "--distance", "0m"): "a distance is more than 0",
    (
        "numbers",
        *TYPED_CAMERA,
        "--wavelength",
        "9um",
    ): "wavelength is 9000 nm; it must be 1 to 2000",
    ("compare", "photo.png", *VIEW, *TYPED_CAMERA): "compare needs two designs, these are 1",
    ("compare", "photo.png", "box.toml", *VIEW): "compare needs two designs, these are 1",
    ("compare", "photo.png", *["box.toml"] * 7, *VIEW): "compare takes two to 6 designs, not 7",
    ("contact-sheet", "photo.png", *VIEW): "which camera",
    ("contact-sheet", "photo.png", *VIEW, "--camera", "missing.toml"): "missing.toml: no such file",
    ("contact-sheet", "photo.png", *VIEW, *TYPED_CAMERA, "-o", "photo.png", "--overwrite"): (
        "photo.png is what the picture is made from"
    ),
    ("compare", "place.toml", "box.toml", "--hole", "1mm", "-o", "photo.png", "--overwrite"): (
        "photo.png is what the picture is made from"
    ),
    ("contact-sheet", "place.toml", *TYPED_CAMERA, "-o", "photo.png", "--overwrite"): (
        "photo.png is what the picture is made from"
    ),
    ("preview", "place.toml", *TYPED_CAMERA, "-o", "photo.png", "--overwrite"): (
        "photo.png is what the picture is made from"
    ),
}


@pytest.mark.parametrize("arguments", COMMANDS, ids=lambda case: " ".join(case)[:60])
def test_a_wrong_command_is_refused(refused, arguments):
    assert_says(refused(*arguments), COMMANDS[arguments])


def test_the_distance_map_is_never_written_over(refused):
    arguments = ("--distance-map", "map.png", "--map-step", "10mm", "-o", "map.png")
    assert_says(refused(*PREVIEW, *arguments, "--overwrite"), "map.png is what the picture")


def test_a_contact_sheet_of_more_than_anybody_draws_is_refused(refused):
    many = [part for i in range(200) for part in ("--hole", f"0.{100 + i}mm")]
    depths = [part for i in range(101) for part in ("--focal-length", f"{50 + i}mm")]
    line = refused("contact-sheet", "photo.png", *VIEW, *depths, *many)
    assert_says(line, "20200 frames; a sheet holds 20000. Make several sheets")


# Design and scene files -----------------------------------------------------------------------

CAMERAS = {
    "focal_length = 60": "bad.toml: focal_length is 60, a number without a unit.*'0.30 mm'",
    'focal_length = "60"': "bad.toml: focal_length: '60' has no unit",
    'focal_length = "60,5 mm"': "focal_length: cannot read '60,5 mm'; write a number with a point",
    "focal_length = true": "focal_length is True; write it as one text",
    'focal_length = ["60 mm"]': "focal_length is .* write it as one text",
    'focal_lenght = "60 mm"': "bad.toml: unknown key 'focal_lenght'. Did you mean 'focal_length'",
    'name = "x"': "bad.toml: focal_length is missing; write for example: focal_length =",
    "name = 5": "bad.toml: name is 5; it must be text in quotation marks",
    'focal_length = "60 mm"': r"bad.toml \[hole\]: diameter is missing; write for example: diameter",
    'focal_length = "60 mm"\nhole = "0.3 mm"': r"\[hole\] is '0.3 mm'; it must be a table",
    'focal_length = "60 mm"\n[hol]\ndiameter = "0.3 mm"': "unknown key 'hol'. Did you mean 'hole'",
    'focal_length = "60 mm"\n[hole]\ndiametr = "0.3 mm"': (
        r"bad.toml \[hole\]: unknown key 'diametr'. Did you mean 'diameter'"
    ),
    'focal_length = "60 mm"\n[hole]\ndiameter = "300 mm"': (
        r"bad.toml \[hole\]: hole diameter is 300 mm.*If you meant 300 um, write 0.3 mm"
    ),
    'focal_length = "60 mm"\n[hole]\ndiameter = "-1 mm"': "hole diameter is -1 mm; it must be 0.01",
    'focal_length = "60 mm"\n[hole]\ndiameter = ["0.2 mm", "0.3 mm"]': "diameter is .* one text",
    'focal_length = "60 mm"\n[hole]\ndiameter = "0.3 mm"\nshape = "star"': (
        "shape is 'star'; it must be one of: "
    ),
    'focal_length = "60 mm"\n[hole]\ndiameter = "0.3 mm"\nplate_thicknes = "1 mm"': (
        "unknown key 'plate_thicknes'. Did you mean 'plate_thickness'"
    ),
    'focal_length = "60 mm"\n[hole]\ndiameter = "40 mm"\n[film]\nframe = "6x6"': (
        "bad.toml: the hole, 40 mm, is too large for a box only 60 mm deep"
    ),
    "{film}": r"bad.toml \[film\]: width is missing; write for example: width",
    '{film}fram = "6x6"': "unknown key 'fram'. Did you mean 'frame'",
    '{film}frame = "6x66"': r"bad.toml \[film\]: no film frame is called '6x66'. Did you mean '6x6'",
    '{film}frame = "6x6"\nwidth = "5 mm"': "frame and width or height exclude each other",
    '{film}width = "56 mm"': r"\[film\]: height is missing",
    '{film}width = "56 mm"\nheight = 56': "height is 56, a number without a unit",
    '{film}width = "1 mm"\nheight = "56 mm"': "film width is 1 mm; it must be 2 to 5000 mm",
    '{film}frame = "6x6"\norientation = "upright"': "orientation is 'upright'; it must be one of",
    '{film}frame = "6x6"\nshift = "5 mm"': "shift is '5 mm'; it must be two lengths, right and up",
    '{film}frame = "6x6"\nshift = ["5 mm"]': "it must be two lengths, right and up",
    '{film}frame = "6x6"\nshift = [5, 0]': "shift is 5, a number without a unit",
    '{film}frame = "6x6"\nmaterial = "tin"': "no material is called 'tin'.*Known: ",
    '{film}frame = "6x6"\nmaterail = "colour"': "unknown key 'materail'. Did you mean 'material'",
    '{film}frame = "6x6"\nsurface = "wavy"': "surface is 'wavy'",
    '{film}frame = "6x6"\n[lens]\nf = 1': "bad.toml: unknown key 'lens'. Known here:.* film",
    'tone = "negative"\n': "bad.toml: focal_length is missing",
    'focal_length = "60 mm"\ntone = "blue"': r"\[hole\]: diameter is missing",
    "focal_length = 60 mm": "bad.toml is not valid TOML: .*line 1.*quotation marks",
    "focal_length = " + "9" * 5000: "bad.toml is not valid TOML",
    "x = " + "[" * 5000: "bad.toml is not valid TOML: a value in it is far too long",
    "   \n": "bad.toml is empty",
}
FILM = 'focal_length = "60 mm"\n[hole]\ndiameter = "0.3 mm"\n[film]\n'


@pytest.mark.parametrize("text", CAMERAS, ids=lambda text: ascii(text)[:40])
def test_a_wrong_design_is_refused(refused, folder, text):
    (folder / "bad.toml").write_text(text.replace("{film}", FILM), encoding="utf-8")
    assert_says(refused("preview", "place.toml", "bad.toml"), CAMERAS[text])


SCENES = {
    'foto = "photo.png"': "bad.toml: unknown key 'foto'. Did you mean 'photo'",
    "photo = 5": "bad.toml: photo is 5; it must be a file name in quotes",
    'photo = ""': "photo is ''; it must be a file name",
    'photo = "gone.png"': "gone.png: no such file; give the path of a photo",
    "{photo}horizontal_view = 65": "horizontal_view is 65, a number without a unit.*'65 deg'",
    '{photo}horizontal_view = "65"': "horizontal_view: '65' has no unit; add one of deg, rad",
    '{photo}horizontal_view = "200 deg"': "horizontal view is 200 deg; it must be 0.5 to 170 deg",
    '{photo}horizontal_veiw = "65 deg"': "unknown key 'horizontal_veiw'. Did you mean 'horizontal_v",
    '{photo}projection = "fisheye"': "projection is 'fisheye'; it must be one of: equirect",
    "{photo}beyond = 3": "beyond is 3; it must be text in quotation marks",
    "{view}distance = 4": r"\[distance\] is 4; it must be a table",
    '{view}[distanc]\nconstant = "4 m"': "unknown key 'distanc'. Did you mean 'distance'",
    "{view}[distance]\nconstant = 4": r"\[distance\]: constant is 4, a number without a unit",
    '{view}[distance]\nconstant = "-4 m"': "constant is -4000 mm; a distance is more than 0",
    '{view}[distance]\nconstnt = "4 m"': "unknown key 'constnt'. Did you mean 'constant'",
    '{view}[distance]\nconstant = "4 m"\nmap = "map.png"': "constant and map exclude each other",
    '{view}[distance]\nmap = "map.png"': 'map.png: what does one code value.*step = "1 mm" in a scene',
    '{view}[distance]\nmap = "map.png"\nstep = 1': "step is 1, a number without a unit",
    '{view}[distance]\nmap = "gone.png"\nstep = "1 mm"': "gone.png: no such file; .* distance map",
    '{view}[distance]\nmap = ""\nstep = "1 mm"': "map is empty; it must be a file name in quotes",
    "{view}[distance]\nmap = 5": "map is 5; it must be text in quotation marks",
    '{view}[distance]\nstep = "1 mm"': "a step belongs to a map",
    '{view}[light]\nev = "bright"': r"\[light\]: ev is 'bright'; it must be a number of EV",
    "{view}[light]\nev = nan": r"\[light\]: ev is nan EV; it must be -10 to 25",
    "{view}[light]\nev = 99": r"\[light\]: ev is 99 EV; it must be -10 to 25",
    "{view}[light]\niso = 100": r"\[light\]: unknown key 'iso'.* Known here: ev",
    "{view}[sun]\nev = 15": "bad.toml: unknown key 'sun'",
}
PHOTO = 'photo = "photo.png"\n'
SEEN = PHOTO + 'horizontal_view = "60 deg"\n'


@pytest.mark.parametrize("text", SCENES, ids=lambda text: ascii(text)[:40])
def test_a_wrong_scene_file_is_refused(refused, folder, text):
    text_out = text.replace("{photo}", PHOTO).replace("{view}", SEEN)
    (folder / "bad.toml").write_text(text_out, encoding="utf-8")
    line = refused("preview", "bad.toml", *TYPED_CAMERA)
    assert_says(line, SCENES[text])
    assert "bad.toml" in line or "gone.png" in line


@pytest.mark.parametrize("encoding", ["utf-16", "latin-1"])
def test_a_design_in_another_encoding_is_refused(refused, folder, encoding):
    text = CAMERA_TOML.replace("Test box", "Schachtel \N{LATIN SMALL LETTER U WITH DIAERESIS}")
    (folder / "bad.toml").write_text(text, encoding=encoding)
    assert_says(refused("preview", "place.toml", "bad.toml"), "bad.toml is not text in UTF-8")


def test_a_name_of_any_letters_is_escaped_in_the_line(refused):
    line = refused("preview", "caf\N{LATIN SMALL LETTER E WITH ACUTE}.jpg", *VIEW, *TYPED_CAMERA)
    assert_says(line, r"caf\\xe9.jpg: no such file")


def test_an_unknown_key_lists_what_is_known(refused, folder):
    (folder / "bad.toml").write_text(CAMERA_TOML + 'zoom = "2"\n', encoding="utf-8")
    line = refused("preview", "place.toml", "bad.toml")
    for key in ("frame", "height", "material", "orientation", "shift", "surface", "width"):
        assert key in line


# Folders that cannot be written to, and real processes ----------------------------------------


@pytest.mark.skipif(os.geteuid() == 0, reason="nothing is read-only for root")
def test_a_read_only_folder_is_refused_before_any_work(refused, folder):
    locked = folder / "locked"
    locked.mkdir(mode=0o500)
    line = refused(*PREVIEW, "-o", "locked/a.png")
    assert_says(line, "locked/a.png: the folder locked cannot be written to")


@pytest.mark.parametrize(
    "arguments",
    [
        ("preview", "cut.jpg", *VIEW, *TYPED_CAMERA),
        ("preview", "bomb.tif", *VIEW, *TYPED_CAMERA),
        ("numbers", "--hole", "300mm", "--focal-length", "60mm"),
        ("preview", "caf\N{LATIN SMALL LETTER E WITH ACUTE}.jpg", *VIEW, *TYPED_CAMERA),
    ],
    ids=["truncated", "bomb", "slip", "letters"],
)
def test_a_real_process_prints_one_line_and_exits_with_2(folder, arguments):
    before = contents(folder)
    done = subprocess.run(
        [sys.executable, "-X", "dev", "-m", "pinsim", *arguments],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(ROOT), "LC_ALL": "C"},
        capture_output=True,
        text=True,
        check=False,
        timeout=60,
    )
    assert done.returncode == 2
    assert done.stdout == ""
    assert done.stderr.startswith("pinsim: ")
    assert done.stderr.count("\n") == 1, done.stderr
    assert contents(folder) == before


def test_debug_shows_where_an_error_arose(folder, monkeypatch):
    from pinsim.cli import main
    from pinsim.errors import SceneError

    monkeypatch.chdir(folder)
    with pytest.raises(SceneError, match=r"text.jpg is not a picture"):
        main(["preview", "text.jpg", *VIEW, *TYPED_CAMERA, "--debug"])


def test_what_should_not_fail_is_exit_code_1_and_still_one_line(run, folder, monkeypatch):
    """A fault of our own is not blamed on the user."""

    def broken(*_, **__):
        raise RuntimeError("two\nlines")

    monkeypatch.setattr("pinsim.render.preview.preview", broken)
    code, _, err = run(*PREVIEW)
    assert code == 1
    assert err == (
        "pinsim: something failed that should not: two lines (pinsim --debug shows where)\n"
    )


def test_stopping_is_exit_code_1_and_nothing_is_written(run, folder, monkeypatch):
    def stopped(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr("pinsim.render.preview.preview", stopped)
    before = contents(folder)
    code, out, err = run(*PREVIEW)
    # The first line ends the one on which the terminal shows ^C.
    assert (code, out, err) == (1, "", "\npinsim: stopped; nothing was written.\n")
    assert contents(folder) == before
