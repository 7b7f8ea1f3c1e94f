"""The four commands on small synthetic scenes: what comes out, how large, whether it can be read."""

import json
import math
import re

import numpy as np
import pytest
import tifffile
from conftest import CAMERA_TOML, TYPED_CAMERA, contents, landscape_codes
from PIL import Image, ImageDraw

import pinsim
from pinsim import Camera, DesignError, Film, Hole, Scene

# One wavelength: kernels of one colour are made nine times sooner, and sheets look the same.
GREEN = ("--wavelength", "550nm")
VIEW = ("--view", "40deg", *GREEN)


@pytest.fixture
def written(monkeypatch):
    """Record every text that is drawn: (words, box, size of the sheet)."""
    texts = []
    draw = ImageDraw.ImageDraw.text

    def text(self, xy, words, *args, **options):
        box = self.textbbox(
            xy, words, font=options.get("font"), stroke_width=options.get("stroke_width", 0)
        )
        texts.append((words, box, self.im.size))
        return draw(self, xy, words, *args, **options)

    monkeypatch.setattr(ImageDraw.ImageDraw, "text", text)
    return texts


def assert_all_on_paper(texts):
    assert texts
    for words, (left, top, right, bottom), (width, height) in texts:
        assert left >= 0, words
        assert top >= 0, words
        assert right <= width, words
        assert bottom <= height, words
        assert words.isascii(), words  # the font has no other letters


def assert_none_on_another(texts):
    """Two texts that share a place cannot be read."""
    for i, (words, (left, top, right, bottom), _) in enumerate(texts):
        for other, (left2, top2, right2, bottom2), _ in texts[:i]:
            apart = right <= left2 or right2 <= left or bottom <= top2 or bottom2 <= top
            assert apart, (words, other)


def size_of(path):
    with Image.open(path) as image:
        image.load()
        return image.size


# preview --------------------------------------------------------------------------------------


def test_preview_writes_one_picture_and_says_what_it_is(run, photo, scene_file, camera_file):
    code, out, err = run("preview", scene_file, camera_file, *GREEN)
    assert (code, err) == (0, "")
    lines = out.splitlines()
    width, height = size_of(photo.parent / "place-box.png")
    assert lines[0] == (
        f"place-box.png: {width} x {height} px, prints 8 x 6 mm; positive, upright, as the scene"
    )
    assert lines[1].startswith("camera: Test box, hole 0.5 mm, 20 mm to film, f/40, 8 x 6 mm")
    assert all(line.startswith("note: ") for line in lines[2:])
    assert width / height == pytest.approx(8 / 6, rel=0.01)
    assert out.isascii()
    assert sorted(contents(photo.parent)) == [
        "box.toml",
        "photo.png",
        "place-box.png",
        "place.toml",
    ]


@pytest.mark.parametrize("width_px", [77, 400])
def test_a_photo_that_covers_too_little_is_reported_in_percent(run, photo, camera_file, width_px):
    """A photo 10 degrees across covers 2 x 20 tan(5) = 3.4995 of 8 mm, and two thirds of that high.

    3.4995 / 8 x 2.3330 / 6 = 17.0 percent of the frame, however finely it is drawn. Trigonometry.
    """
    code, out, _ = run(
        "preview", photo, camera_file, "--view", "10deg", "--width", width_px, *GREEN
    )
    assert code == 0
    assert "note: the photo covers 17 % of the frame; the rest is hatched" in out


def test_a_photo_too_coarse_for_the_design_is_said_in_one_line(run, photo, camera_file):
    _, out, _ = run("preview", photo, camera_file, *VIEW)
    notes = [line for line in out.splitlines() if "too coarse" in line]
    assert len(notes) == 1
    assert "use one at least" in notes[0]


def test_a_photo_fine_enough_is_not_complained_about(run, tmp_path, camera_file):
    Image.fromarray(landscape_codes(600, 900)).save(tmp_path / "fine.png")
    _, out, _ = run("preview", "fine.png", camera_file, *VIEW)
    assert "too coarse" not in out


def preview(scene, camera, **options):
    return pinsim.preview(scene, camera, wavelength_nm=550.0, **options)


def scene_of(light, view_deg=40.0, **options):
    return Scene.from_light(light, horizontal_view_deg=view_deg, **options)


def small_camera(**options):
    film = Film(width_mm=options.pop("width", 8.0), height_mm=options.pop("height", 6.0))
    return Camera(focal_length_mm=20.0, hole=Hole(diameter_mm=0.5), film=film, **options)


@pytest.mark.parametrize("width_px", [16, 50, 97, 400, 444, 900])
def test_any_width_shows_the_whole_frame(width_px):
    picture = preview(scene_of(np.ones((40, 60))), small_camera(), width_px=width_px)
    rows, columns, channels = picture.exposure.shape
    assert columns == width_px
    assert channels == 3
    assert columns * picture.pitch_mm == pytest.approx(8.0, rel=1e-9)
    # Rows are whole too: at most half a row is missing or too much.
    assert abs(rows * picture.pitch_mm - 6.0) <= 0.51 * picture.pitch_mm


def test_a_larger_picture_is_an_interpolation_of_the_natural_one(frozen):
    """The film holds nothing finer than the natural grid, so cubic reading of it must agree."""
    from scipy.ndimage import map_coordinates

    rng = np.random.default_rng(8)
    scene = scene_of(frozen(rng.uniform(0.1, 1.0, (120, 180, 3)).astype(np.float32)))
    natural = preview(scene, small_camera(width=4.0, height=3.0))
    rows, columns, _ = natural.exposure.shape
    large = preview(scene, small_camera(width=4.0, height=3.0), width_px=2 * columns)
    assert large.exposure.shape[1] == 2 * columns
    row = (np.arange(large.exposure.shape[0]) - 0.5 * (large.exposure.shape[0] - 1)) * (
        large.pitch_mm / natural.pitch_mm
    ) + 0.5 * (rows - 1)
    column = (np.arange(2 * columns) - 0.5 * (2 * columns - 1)) / 2 + 0.5 * (columns - 1)
    place = np.meshgrid(row, column, indexing="ij")
    for channel in range(3):
        read = map_coordinates(natural.exposure[..., channel], place, order=5, mode="mirror")
        inside = (slice(10, -10), slice(10, -10))
        # Spline of degree 5 against band-limited reading of the same samples.
        np.testing.assert_allclose(
            large.exposure[..., channel][inside], read[inside], rtol=0, atol=3e-3
        )


def test_a_smaller_picture_shows_the_same_place(frozen):
    """A point of light stays where it is, in mm on the film, at every size of the picture."""
    light = np.full((240, 360, 3), 1e-4, np.float32)
    light[60, 250] = 50.0
    scene = scene_of(frozen(light))
    # 2 tan(20 deg) over 360 columns, times 20 mm; the pixel's middle is 70.5 columns off the axis.
    mm = 2 * math.tan(math.radians(20)) / 360 * 20
    expected = (250 - 179.5) * mm, (119.5 - 60) * mm
    for width_px in (None, 60, 100, 700):
        picture = preview(scene, small_camera(), width_px=width_px)
        spot = picture.exposure[..., 1].astype(float)
        rows, columns = spot.shape
        spot[spot < 0.3 * spot.max()] = 0.0
        x = (np.arange(columns) - 0.5 * (columns - 1)) * picture.pitch_mm
        y = (0.5 * (rows - 1) - np.arange(rows)) * picture.pitch_mm
        found = (spot.sum(0) @ x / spot.sum(), spot.sum(1) @ y / spot.sum())
        # Cutting at a third of the peak lets half a pixel of the coarsest picture in or out.
        assert found == pytest.approx(expected, abs=max(0.02, 0.15 * picture.pitch_mm)), width_px


@pytest.mark.parametrize("projection", ["rectilinear", "equirectangular"])
@pytest.mark.parametrize(("azimuth_deg", "height_deg"), [(0.0, 0.0), (4.0, 0.0), (-3.5, 2.0)])
def test_a_known_direction_lands_where_geometry_says(projection, azimuth_deg, height_deg):
    """x = z tan(azimuth), y = z tan(height) / cos(azimuth): a ray straight on through the hole."""
    x = math.tan(math.radians(azimuth_deg))
    y = math.tan(math.radians(height_deg)) / math.cos(math.radians(azimuth_deg))
    if projection == "equirectangular":
        rows, columns, view = 360, 720, 90.0
        column = (azimuth_deg + 45.0) / 90.0 * columns - 0.5
        row = (22.5 - height_deg) / 45.0 * rows - 0.5
    else:
        rows, columns, view = 600, 800, 45.0
        per = columns / 2 / math.tan(math.radians(view / 2))
        column = x * per + columns / 2 - 0.5
        row = rows / 2 - y * per - 0.5
    v, u = np.mgrid[0:rows, 0:columns]
    # A soft spot six pixels wide, so that its middle may stand between two pixels.
    light = (1e-5 + np.exp(-((u - column) ** 2 + (v - row) ** 2) / 18.0)).astype(np.float32)
    scene = Scene(
        name="dot",
        photo=scene_of(light).photo,
        horizontal_view_deg=view,
        projection=projection,
    )
    picture = preview(scene, small_camera(width=4.0, height=3.0))
    assert picture.covered_share == 1.0
    spot = picture.exposure[..., 1].astype(float)
    spot[spot < 0.2 * spot.max()] = 0.0
    rows, columns = spot.shape
    right = (np.arange(columns) - 0.5 * (columns - 1)) * picture.pitch_mm
    up = (0.5 * (rows - 1) - np.arange(rows)) * picture.pitch_mm
    found = (spot.sum(0) @ right / spot.sum(), spot.sum(1) @ up / spot.sum())
    # Falloff tilts a spot half a millimetre wide by a few micrometres.
    assert found == pytest.approx((20.0 * x, 20.0 * y), abs=0.01)


def test_a_panorama_has_no_seam_behind_and_reaches_all_round():
    """Straight ahead is the middle of the panorama; a plain one stays plain on the axis."""
    photo = scene_of(np.full((180, 360), 0.5)).photo
    scene = Scene(name="x", photo=photo, horizontal_view_deg=360, projection="equirectangular")
    picture = preview(scene, small_camera(width=4.0, height=3.0), width_px=64)
    middle = picture.exposure[24, 32]
    np.testing.assert_allclose(middle, 0.5, rtol=2e-3)
    assert picture.covered_share == 1.0


# compare --------------------------------------------------------------------------------------

COMPARISONS = {
    "two holes": ("compare", "photo.png", *VIEW, *TYPED_CAMERA, "--hole", "0.8mm"),
    "two depths": ("compare", "photo.png", *VIEW, *TYPED_CAMERA, "--focal-length", "30mm"),
    "two cameras": ("compare", "photo.png", "box.toml", "other.toml", *VIEW),
    "camera and hole": ("compare", "photo.png", "box.toml", "--hole", "0.8mm", *VIEW),
}


@pytest.mark.parametrize("name", COMPARISONS)
def test_compare_lays_two_designs_side_by_side(run, photo, camera_file, written, name):
    other = CAMERA_TOML.replace("0.5 mm", "0.7 mm").replace("Test box", "Other box")
    (photo.parent / "other.toml").write_text(other)
    code, out, err = run(*COMPARISONS[name])
    assert (code, err) == (0, "")
    width, height = size_of(photo.parent / "photo-compared.png")
    lines = out.splitlines()
    assert lines[0].startswith(f"photo-compared.png: {width} x {height} px")
    assert lines[1].startswith("A: ")
    assert lines[2].startswith("B: ")
    assert lines[1] != lines[2].replace("B:", "A:")
    assert width > height  # side by side, not one above the other
    assert_all_on_paper(written)
    words = " ".join(text for text, *_ in written)
    assert "photo through two designs" in words
    assert lines[3] in words  # the verdict
    for title in ("1  centre", "2  edge", "3  corner"):
        assert title in words
    texts = [text for text, *_ in written]
    assert texts.count("1") >= 2  # marked in both pictures
    assert re.search(r"Details, all at one scale: \d+ mm of paper is [\d.]+ deg", words)
    assert "upright, as the scene" in words


def px(start_mm, end_mm):
    return slice(round(start_mm / 25.4 * 300), round(end_mm / 25.4 * 300))


def test_compare_shows_both_pictures(run, photo):
    """Bars 0.58 mm wide on the film: a hole of 0.5 mm draws them, one of 2 mm blurs them."""
    bars = np.where(np.arange(720) // 30 % 2, 230, 30).astype(np.uint8)
    Image.fromarray(np.repeat(bars[None], 480, axis=0)).save(photo)
    code, _, _ = run("compare", photo, *VIEW, *TYPED_CAMERA, "--hole", "2mm", "-o", "c.tif")
    assert code == 0
    sheet = tifffile.imread(photo.parent / "c.tif").astype(int)
    # Places on the sheet in mm: rows well inside the pictures, columns of the left and the right one.
    left, right = (sheet[px(60, 66), px(x, x + 80)] for x in (14, 112))
    assert left.std() > 2.5 * right.std()


@pytest.mark.parametrize("look", ["screen", "emulsion"])
def test_compare_says_its_look(run, photo, written, look):
    code, _, _ = run("compare", photo, *VIEW, *TYPED_CAMERA, "--hole", "0.8mm", "--look", look)
    assert code == 0
    said = {
        "screen": "seen from behind the film like a focusing screen: turned by 180 degrees",
        "emulsion": "the exposed face of the film: upside down, not reversed sideways",
    }[look]
    assert said in [words for words, *_ in written]
    assert_all_on_paper(written)


def test_designs_that_see_nothing_in_common_are_refused():
    scene = scene_of(np.ones((90, 120)), view_deg=120)
    sides = [
        Camera(
            focal_length_mm=20.0,
            hole=Hole(diameter_mm=0.5),
            film=Film(width_mm=8, height_mm=6, shift_right_mm=side),
        )
        for side in (-12.0, 12.0)
    ]
    with pytest.raises(DesignError, match=r"see no common part of the scene; check their shifts"):
        pinsim.compare(scene, sides, wavelength_nm=550.0)


LONG = "a-name-without-any-space-that-somebody-gave-to-a-photo-of-a-lane-behind-the-mill-at-noon-in-may"


@pytest.mark.parametrize("command", ["compare", "contact-sheet"])
def test_long_and_foreign_names_stay_on_the_paper(run, photo, written, command):
    folder = photo.parent
    named = folder / f"{LONG}.png"
    photo.rename(named)
    cameras = []
    for i, name in enumerate(
        (
            LONG + "-box",
            "Gr\N{LATIN SMALL LETTER U WITH DIAERESIS}ne Schachtel \N{GREEK SMALL LETTER LAMDA}",
        )
    ):
        text = CAMERA_TOML.replace("Test box", name).replace("0.5 mm", f"0.{5 + i} mm")
        (folder / f"{i}.toml").write_text(text, encoding="utf-8")
        cameras += ["--camera"] if command == "contact-sheet" else []
        cameras.append(f"{i}.toml")
    quiet = ["--quiet"] if command == "contact-sheet" else []
    code, out, err = run(command, named, *cameras, *VIEW, "-o", "sheet.png", *quiet)
    assert (code, err) == (0, "")
    assert out.isascii()
    assert_all_on_paper(written)
    assert_none_on_another(written)


# contact-sheet --------------------------------------------------------------------------------


def test_a_contact_sheet_of_six_holes(run, photo, written):
    holes = [part for i in range(3, 9) for part in ("--hole", f"0.{i}mm")]
    code, out, _ = run(
        "contact-sheet", photo, *VIEW, "--focal-length", "40mm", "--film", "4mmx3mm", *holes
    )
    assert code == 0
    width, height = size_of(photo.parent / "contact-sheet.png")
    assert out.splitlines()[0].startswith(f"contact-sheet.png: {width} x {height} px")
    assert_all_on_paper(written)
    assert_none_on_another(written)
    words = [text for text, *_ in written]
    for i in range(3, 9):
        assert any(f"hole 0.{i} mm" in text for text in words)
    # Two rows of three: six captions stand at three places across and two down.
    boxes = [box for text, box, _ in written if text.startswith("hole 0.")]
    assert len({box[0] for box in boxes}) == 3
    assert len({box[1] for box in boxes}) == 2


def test_a_contact_sheet_lays_scenes_down_and_designs_across(run, photo, written):
    Image.fromarray(255 - landscape_codes()).save(photo.parent / "second.png")
    code, _, _ = run(
        "contact-sheet", photo, "second.png", *VIEW, *TYPED_CAMERA, "--hole", "0.9mm", "-o", "s.jpg"
    )
    assert code == 0
    places = {text: box for text, box, _ in written if text in {"photo", "second"}}
    assert places["photo"][0] == places["second"][0]
    assert places["photo"][1] < places["second"][1]
    holes = [(text, box) for text, box, _ in written if text.startswith("hole 0.")]
    assert [text for text, _ in holes] == ["hole 0.5 mm", "hole 0.9 mm"] * 2
    assert holes[0][1][0] == holes[2][1][0] < holes[1][1][0] == holes[3][1][0]
    assert holes[0][1][1] == holes[1][1][1] < holes[2][1][1] == holes[3][1][1]
    assert_none_on_another(written)


@pytest.mark.parametrize("frame", ["2mmx60mm", "60mmx2mm"])
def test_slim_frames_fit_on_their_sheets(run, photo, written, frame):
    camera = ("--hole", "1.4mm", "--focal-length", "40mm", "--film", frame)
    assert run("contact-sheet", photo, *VIEW, *camera, "-o", "s.png")[0] == 0
    assert run("compare", photo, *VIEW, *camera, "--hole", "1.8mm", "-o", "c.png")[0] == 0
    assert_all_on_paper(written)
    for name in ("s.png", "c.png"):
        width, height = size_of(photo.parent / name)
        assert max(width, height) < 6000


def test_partly_covered_frames_say_so_on_the_sheet(run, photo, written):
    assert run("contact-sheet", photo, "--view", "10deg", *TYPED_CAMERA, *GREEN)[0] == 0
    assert any(
        re.search(r"photo covers 1[67](\.\d)? % of the frame", words) for words, *_ in written
    )


def test_a_sheet_of_nothing_is_refused():
    with pytest.raises(DesignError, match=r"needs at least one scene and one design"):
        pinsim.contact_sheet([], [small_camera()])


# numbers --------------------------------------------------------------------------------------


@pytest.fixture
def figures(run):
    code, out, err = run(
        "numbers", "--hole", "0.3mm", "--focal-length", "60mm", "--film", "36x24", "--json", *GREEN
    )
    assert (code, err) == (0, "")
    return json.loads(out, parse_constant=lambda word: pytest.fail(f"{word} is not JSON"))


def test_json_is_valid_and_infinity_is_a_word(figures):
    assert figures["distances"][0]["distance_mm"] == "infinity"
    assert figures["distances"][0]["object_mm"] == "infinity"
    assert all(isinstance(row["spot_mm"], float) for row in figures["distances"])


def test_the_figures_are_those_of_the_design(figures):
    assert figures["f_number"] == pytest.approx(200.0)
    # 2 atan(36 / 120), 2 atan(24 / 120): trigonometry.
    assert figures["horizontal_view_deg"] == pytest.approx(33.398488, abs=1e-5)
    assert figures["vertical_view_deg"] == pytest.approx(22.619865, abs=1e-5)
    # cos^4 at atan(21.6333 / 60), in stops: 2 log2(1 + tan^2). Gardner, J. Res. NBS 39 (1947) 213.
    stops = 2 * math.log2(1 + (math.hypot(36, 24) / 120) ** 2)
    assert figures["corner_falloff_stops"] == pytest.approx(stops, abs=1e-6)
    # d / (lambda z), the incoherent cut-off; Goodman, Introduction to Fourier Optics (from memory).
    mean = figures["mean_wavelength_nm"] * 1e-6
    assert figures["cutoff_cycles_mm"] == pytest.approx(0.3 / (mean * 60.0), rel=1e-9)
    # t = N^2 / (2^EV S/100), ISO 2720: f/200 at EV 15, ISO 100: 1.2207 s.
    times = {row["ev"]: row["time_s"] for row in figures["times_s"]}
    assert times[15.0] == pytest.approx(200**2 / 2**15, rel=1e-9)


@pytest.mark.parametrize(
    "camera",
    [
        ("--hole", "9mm", "--focal-length", "20mm", "--film", "36x24", *GREEN),
        ("--hole", "0.01mm", "--focal-length", "2000mm", "--film", "36x24", *GREEN),
        ("--hole", "0.3mm", "--focal-length", "10mm", "--film", "8x10", "--plate", "2mm", *GREEN),
        ("--hole", "0.3mm", "--focal-length", "60mm", "--wavelength", "1nm"),
        ("--hole", "0.3mm", "--focal-length", "60mm", "--distance", "2mm", *GREEN),
    ],
    ids=["huge hole", "tiny hole", "thick plate", "rays only", "very near"],
)
def test_extreme_designs_still_give_valid_json_and_a_table(run, camera):
    code, out, err = run("numbers", *camera, "--json")
    assert (code, err) == (0, "")
    json.loads(out, parse_constant=lambda word: pytest.fail(f"{word} is not JSON"))
    code, out, err = run("numbers", *camera)
    assert (code, err) == (0, "")
    assert "nan" not in out.split()


def test_the_table_is_plain_ascii_with_units(run):
    code, out, err = run("numbers", "--hole", "0.3mm", "--focal-length", "60mm", "--film", "6x6")
    assert (code, err) == (0, "")
    assert out.isascii()
    for words in ("f/200", "56 x 56 mm", "deg across", "cycles/mm", "EV 15: 1.2 s", "infinity"):
        assert words in out


def test_printed_times_carry_their_assumptions(run):
    _, out, _ = run("numbers", "sample:square-box")
    plain = " ".join(out.split())
    assert "EV at ISO 100" in plain
    assert "no reciprocity correction" in plain
    assert "at its usual speed" in plain
