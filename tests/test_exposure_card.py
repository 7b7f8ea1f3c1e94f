"""The card of exposure times, and the strip of exposures: size, letters, what can be read."""

import base64
import itertools
import math
import re
import zlib
from dataclasses import replace

import numpy as np
import pytest
from conftest import contents
from PIL import Image

import pinsim
from pinsim import Camera, DesignError, Film, Hole, Scene
from pinsim.exposure import time_text
from pinsim.exposure.light import usual_lights
from pinsim.exposure.table import CAUTION, time_table
from pinsim.render.expose import expose
from pinsim.sheets import exposure_card as cards
from pinsim.sheets.bracket import at_time, bracket_strip, bracket_times_s
from pinsim.sheets.exposure_card import exposure_card

A6_MM = (148.0, 105.0)  # ISO 216
MANY = ("panchromatic-100", "panchromatic-400", "orthochromatic-80", "variable-contrast-paper")


def table_of(*materials, lights=None, holes=(), **options):
    camera = Camera.load("sample:square-box")
    cameras = [replace(camera, material_name=name) for name in materials or ("colour",)]
    if holes:
        cameras = [camera.with_hole(hole) for hole in holes]
    return time_table(cameras, lights or usual_lights(), **options)


def words_of(pdf):
    """Return every text that a PDF of one page draws, in order."""
    texts = []
    for stream in re.findall(rb"stream\r?\n(.*?)endstream", pdf, re.DOTALL):
        data = zlib.decompress(base64.a85decode(stream.strip().removesuffix(b"~>")))
        texts += re.findall(rb"\(((?:[^()\\]|\\.)*)\) Tj", data)
    letters = [re.sub(rb"\\(\d{3})", lambda o: bytes([int(o[1], 8)]), text) for text in texts]
    return [re.sub(rb"\\(.)", rb"\1", text).decode("latin-1") for text in letters]


class _Noted:
    """Paper that notes what is written on it, with its place; Helvetica's own widths."""

    def __init__(self, size_mm):
        self._inner = cards._Pdf(size_mm, "")
        self.texts = []

    def width_mm(self, text, size_pt, *, bold=False):
        return self._inner.width_mm(text, size_pt, bold=bold)

    def text(
        self, x_mm, y_mm, text, size_pt, *, bold=False, slanted=False, grey=0.0, anchor="left"
    ):
        if not text:
            return
        wide = self.width_mm(text, size_pt, bold=bold)
        left = x_mm - {"left": 0.0, "right": wide, "centre": wide / 2}[anchor]
        tall = 0.72 * size_pt * 25.4 / 72
        self.texts.append((text, size_pt, (left, y_mm - tall, left + wide, y_mm)))

    def box(self, *_):
        pass

    def line(self, *_):
        pass


CARDS = [
    (("colour",), A6_MM),
    (("panchromatic-100", "blue-sensitive-paper"), A6_MM),
    (MANY, A6_MM),
    (MANY, (210.0, 148.0)),
    (("panchromatic-400",), (105.0, 74.0)),
    (("panchromatic-400", "colour"), (105.0, 148.0)),
]


@pytest.mark.parametrize(("materials", "size_mm"), CARDS)
def test_nothing_stands_off_the_card_or_on_anything_else(materials, size_mm):
    paper = _Noted(size_mm)
    cards._fitted(paper, table_of(*materials), size_mm).draw()
    assert len(paper.texts) > 40
    for i, (text, _, (left, top, right, bottom)) in enumerate(paper.texts):
        assert 2.0 <= left < right <= size_mm[0] - 2.0, text
        assert 2.0 <= top < bottom <= size_mm[1] - 2.0, text
        for other, _, (left2, top2, right2, bottom2) in paper.texts[:i]:
            apart = (
                right <= left2 + 0.01 or right2 <= left + 0.01 or bottom <= top2 or bottom2 <= top
            )
            assert apart, (text, other)


@pytest.mark.parametrize(("materials", "size_mm"), CARDS)
def test_times_are_written_large(materials, size_mm):
    """Seen at arm's length, 60 cm: 9 arcmin, where sharp eyes need 5 (ISO 8596, from memory)."""
    paper = _Noted(size_mm)
    table = table_of(*materials)
    cards._fitted(paper, table, size_mm).draw()
    tallest_mm = {}
    for text, _, (_, top, _, bottom) in paper.texts:
        tallest_mm[text] = max(tallest_mm.get(text, 0.0), bottom - top)
    for cell in (cell for row in table.cells for cell in row):
        seen_arcmin = 60.0 * math.degrees(tallest_mm[cell.centre.text] / 600.0)
        assert seen_arcmin >= 9.0


@pytest.mark.parametrize("size_mm", [A6_MM, (210.0, 148.0), (120.0, 90.0)])
def test_a_page_of_true_size_in_built_in_letters(size_mm, tmp_path):
    exposure_card(table_of(), size_mm=size_mm).save(tmp_path / "card.pdf")
    pdf = (tmp_path / "card.pdf").read_bytes()
    box = re.search(rb"/MediaBox \[ 0 0 ([\d.]+) ([\d.]+) \]", pdf)
    assert [float(side) * 25.4 / 72 for side in box.groups()] == pytest.approx(size_mm, abs=0.01)
    assert len(re.findall(rb"/Type /Page\b(?!s)", pdf)) == 1
    assert b"/BaseFont /Helvetica-Bold" in pdf
    assert b"/FontFile" not in pdf
    assert b"/Subtype /Image" not in pdf


def test_the_card_says_what_it_assumes_and_warns():
    table = table_of("panchromatic-100", filter_factor=4.0)
    words = words_of(exposure_card(table).pdf())
    text = " ".join(words)
    for said in (
        "Square box",
        "f/200",
        "panchromatic-100 at EI 100",
        "filter x4",
        "correction metered^1.26 above 1 s",
        "Rounded by 1/6 stop at most.",
        "Corner: 1.3 stops darker",
        "* outside the data",
        "148 x 105 mm at 100 %",
        CAUTION,
    ):
        assert said in text
    for row in table.cells:
        assert row[0].centre.text in words
        assert row[0].corner.text in words
    assert text.isascii()
    # A card is used for years: no date stands on it.
    assert not re.search(r"\b20\d\d\b", text)


def test_the_caution_is_the_one_of_the_page_of_cautions():
    """Sun, finder and beam are all named there."""
    from pathlib import Path

    page = (Path(__file__).parents[1] / "docs" / "cautions.md").read_text("utf-8")
    assert (
        "Never look at the sun through a hole, through a finder beside it, or along a beam" in page
    )
    for word in ("Never look at the sun through", "finder", "beam"):
        assert word in CAUTION


def test_marks_only_where_there_is_doubt():
    day = table_of("panchromatic-100", lights=usual_lights()[1:3])
    assert not [word for word in words_of(exposure_card(day).pdf()) if word in {"*", "^"}]
    night = table_of("panchromatic-100", lights=usual_lights()[-1:])
    assert "*" in words_of(exposure_card(night).pdf())


def test_a_name_keeps_the_letters_that_the_font_has():
    """Latin-1 in a PDF's built-in fonts; what they lack becomes a question mark, never a crash."""
    camera = replace(
        Camera.load("sample:square-box"), name="Gro\u00dfe B\u00fcchse \u6771\u4eac (2)"
    )
    card = exposure_card(time_table([camera], usual_lights()))
    assert "Gro\u00dfe B\u00fcchse ?? (2)" in words_of(card.pdf())
    with_accents = cards._Raster(A6_MM)
    assert with_accents.width_mm("B\u00fcchse", 9.0) == with_accents.width_mm("Buchse", 9.0)


def test_equal_cards_are_equal_files():
    assert exposure_card(table_of()).pdf() == exposure_card(table_of()).pdf()


@pytest.mark.parametrize("suffix", [".png", ".jpg", ".tif"])
def test_the_card_as_a_picture(suffix, tmp_path):
    """300 dots per inch of 148 x 105 mm are 1748 x 1240."""
    path = tmp_path / f"card{suffix}"
    exposure_card(table_of(*MANY)).save(path)
    with Image.open(path) as image:
        assert image.size == (1748, 1240)
        assert image.info["dpi"] == pytest.approx((300, 300), abs=0.1)
        codes = np.asarray(image.convert("L"), float)
    assert (codes > 250).mean() > 0.4
    assert 0.01 < (codes < 60).mean() < 0.2


@pytest.mark.parametrize(("size_mm", "materials"), [((50.0, 50.0), ("colour",)), (A6_MM, MANY * 3)])
def test_what_does_not_fit_is_refused(size_mm, materials):
    with pytest.raises(DesignError, match=r"do not fit a card of .*larger --card-size"):
        exposure_card(table_of(*materials), size_mm=size_mm)


def test_the_command_writes_the_card(run, tmp_path):
    code, out, err = run(
        "exposure", "sample:square-box", "--hole", "0.2mm", "--hole", "0.3mm", "-o", "a.pdf"
    )
    assert (code, err) == (0, "")
    assert "a.pdf: a card of 148 x 105 mm; print it at 100 %" in out
    assert list(contents(tmp_path)) == ["a.pdf"]
    code, _, err = run("exposure", "sample:square-box", "-o", "a.pdf")
    assert code == 2
    assert "a.pdf exists already" in err


@pytest.mark.parametrize(
    ("size", "complaint"),
    [
        ("A9", "no card is called 'A9'"),
        ("20mmx20mm", "--card-size is 20 mm; it must be 50 to 500 mm"),
        ("100x80", "--card-size: '100' has no unit"),
        ("50mmx50mm", "do not fit a card of 50 x 50 mm"),
    ],
)
def test_a_card_that_cannot_be_leaves_nothing_behind(run, tmp_path, size, complaint):
    code, out, err = run("exposure", "sample:square-box", "-o", "a.pdf", "--card-size", size)
    assert (code, out) == (2, "")
    assert complaint in err
    assert not contents(tmp_path)


# The strip ------------------------------------------------------------------------------------


def picture_of(time_s, material="panchromatic-100", ev=12.0):
    light = np.linspace(0.02, 1.0, 60, dtype=np.float32)[None, :].repeat(40, axis=0)
    film = Film(width_mm=8.0, height_mm=6.0)
    camera = Camera(
        focal_length_mm=20.0, hole=Hole(diameter_mm=0.5), film=film, material_name=material
    )
    scene = Scene.from_light(light, horizontal_view_deg=40.0)
    return pinsim.preview(scene, camera, time_s=time_s, ev=ev, wavelength_nm=550.0, width_px=200)


def test_times_of_a_strip_are_a_stop_apart():
    """Twice the time is a stop; each is rounded by 1/6 stop at most, so gaps are 2/3 to 4/3 stop."""
    for middle_s in (0.02, 1.3, 47.0, 5000.0):
        times = bracket_times_s(middle_s, 7)
        assert times[3] == middle_s
        for k, time_s in enumerate(times):
            assert abs(np.log2(time_s / (middle_s * 2.0 ** (k - 3)))) <= 1 / 6 + 1e-9


def test_another_time_needs_no_new_rendering():
    """The same picture as one that was made with that time from the start."""
    again, made = at_time(picture_of("auto"), 4.0), picture_of(4.0)
    np.testing.assert_array_equal(again.codes(), made.codes())
    assert again.gain == pytest.approx(made.gain)
    assert made.exposed.time_s == 4.0
    assert made.gain == pytest.approx(expose(made.camera, time_s=4.0, ev=12.0).gain)


@pytest.mark.parametrize("count", [3, 5, 7, 9])
def test_a_strip_shows_every_time(count, monkeypatch):
    from PIL import ImageDraw

    texts = []
    draw = ImageDraw.ImageDraw.text
    monkeypatch.setattr(
        ImageDraw.ImageDraw,
        "text",
        lambda self, xy, words, *a, **o: (texts.append(words), draw(self, xy, words, *a, **o))[1],
    )
    picture = picture_of(2.0)
    sheet = bracket_strip(picture, count=count)
    for time_s in bracket_times_s(2.0, count):
        assert time_text(time_s) in texts
    assert sheet.codes.shape[2] == 3


def test_a_strip_grows_brighter_to_the_right():
    """A longer exposure is a lighter print of a negative; in the order of reading."""
    sheet = bracket_strip(picture_of("auto"), count=5)
    codes = sheet.codes.astype(float)[-250:-80]
    step = codes.shape[1] // 5
    means = [codes[:, k * step + 40 : (k + 1) * step - 10].mean() for k in range(5)]
    assert all(b > a + 1.0 for a, b in itertools.pairwise(means))


def test_a_picture_without_a_time_has_no_strip():
    with pytest.raises(DesignError, match="a bracket needs a picture that was made with a time"):
        bracket_strip(picture_of(None, ev=None))


@pytest.mark.parametrize("count", [0, 1, 4, 11, -3])
def test_a_strip_without_a_middle_is_refused(count):
    with pytest.raises(
        DesignError, match=r"a bracket of .* is not possible; give one of 3, 5, 7, 9"
    ):
        bracket_times_s(1.0, count)


@pytest.mark.parametrize("name", ["strip.png", "strip.pdf"])
def test_the_command_writes_a_strip(run, photo, camera_file, name):
    code, out, err = run(
        *("preview", photo, camera_file, "--view", "40deg", "--wavelength", "550nm"),
        *("--bracket", "3", "--light", "hazy-sun", "-o", name),
    )
    assert (code, err) == (0, "")
    assert "3 exposures a stop apart" in out
    data = (photo.parent / name).read_bytes()
    assert data.startswith(b"%PDF" if name.endswith("pdf") else b"\x89PNG")


@pytest.mark.parametrize(
    ("more", "complaint"),
    [
        (("--bracket", "4"), "a bracket of 4 is not possible"),
        (("--bracket", "5"), "a time needs the light it is meant for"),
        (("--bracket", "5", "--width", "300"), "--width does not go with --bracket"),
        (("--bracket", "5", "--bits", "16"), "--bits does not go with --bracket"),
        (("--bracket", "5", "-o", "a.npz"), "use one of"),
    ],
)
def test_a_strip_that_cannot_be_leaves_nothing_behind(run, photo, camera_file, more, complaint):
    before = contents(photo.parent)
    code, out, err = run("preview", photo, camera_file, "--view", "40deg", *more)
    assert (code, out) == (2, "")
    assert complaint in err
    assert contents(photo.parent) == before
