"""Contact sheets: what lies where, what is said of it, which frame is marked, what a plan says."""

import csv
import json
import re
import zlib

import numpy as np
import pytest
import tifffile
from conftest import contents, landscape_codes
from PIL import Image

import pinsim
from pinsim import Camera, DesignError, Film, Hole, Scene
from pinsim.batch.draw import codes_of
from pinsim.batch.frames import checksum_of, scene_checksum
from pinsim.batch.needs import nearest_to, read_need

GREEN = ("--wavelength", "550nm")
VIEW = ("--view", "40deg", *GREEN, "--quiet")
HOLES = ("--hole", "0.3mm", "--hole", "0.5mm")
DEPTHS = ("--focal-length", "20mm", "--focal-length", "30mm")
BOX = ("--film", "8mmx6mm")


def scene_of(codes=None, **options):
    light = (landscape_codes() if codes is None else codes).astype(np.float32) / 255.0
    return Scene.from_light(light, horizontal_view_deg=40.0, **options)


def cameras(holes=(0.3, 0.5), depths=(20.0, 30.0), **options):
    film = Film(width_mm=8.0, height_mm=6.0)
    return [
        Camera(focal_length_mm=depth, hole=Hole(diameter_mm=hole), film=film, **options)
        for depth in depths
        for hole in holes
    ]


def sheet_of(*arguments, **options):
    options = {"wavelength_nm": 550.0, "width_px": 96, **options}
    return pinsim.contact_sheet(*arguments, **options)


def placed(sheet, what="frame"):
    """Return (entry, page, left, top, right, bottom) of every picture, in pixels."""
    found = []
    for number, page in enumerate(sheet.layout.pages):
        for thing in page.things:
            if getattr(thing, "what", "") == what:
                scale = sheet.layout.px_per_mm
                x, y = round(thing.x_mm * scale), round(thing.y_mm * scale)
                found.append((sheet.entries[thing.frame], number, x, y))
    return found


def texts(sheet):
    return [
        thing.line for page in sheet.layout.pages for thing in page.things if hasattr(thing, "line")
    ]


def rows_in(path):
    return list(csv.DictReader(path.read_text(encoding="utf-8").splitlines()))


# What is in a frame -----------------------------------------------------------------------------


@pytest.mark.parametrize("tone", ["positive", "negative"])
def test_a_frame_is_bit_by_bit_what_preview_draws(tone):
    """Against the other road through pinsim: one scene, one camera, one picture."""
    scene, boxes = scene_of(), cameras(tone=tone)
    sheet = sheet_of([scene], boxes)
    seen = 0
    for entry, page, x, y in placed(sheet):
        alone = pinsim.preview(
            scene, entry.frame.camera, width_px=96, averaged=True, wavelength_nm=550.0
        )
        codes = alone.codes()
        rows, columns = codes.shape[:2]
        part = sheet.page(page)[y : y + rows, x : x + columns]
        np.testing.assert_array_equal(part, np.broadcast_to(codes, part.shape))
        seen += 1
    assert seen == 4


@pytest.mark.parametrize("side", [8.0, 48.0])
def test_the_enlarged_middle_is_the_middle_enlarged(side):
    """A quarter of the frame's width, so 4 x 96 px of a whole picture, and its middle rows.

    A small film is cut out of the whole, a large one drawn by itself: another grid, the same light.
    """
    rng = np.random.default_rng(4)
    coarse = rng.random((30, 40, 3)).astype(np.float32)
    scene = Scene.from_light(
        np.kron(coarse, np.ones((8, 8, 1), np.float32)), horizontal_view_deg=40.0
    )
    box = Camera(
        focal_length_mm=2.5 * side,
        hole=Hole(diameter_mm=0.025 * side),
        film=Film(width_mm=side, height_mm=0.75 * side),
    )
    sheet = sheet_of([scene], [box])
    ((_, page, x, y),) = placed(sheet, "detail")
    large = pinsim.preview(scene, box, width_px=384, averaged=True, wavelength_nm=550.0).codes()
    middle = large[144 - 12 : 144 + 13, 144:240].astype(float)
    shown = sheet.page(page)[y : y + 25, x : x + 96].astype(float)
    assert np.abs(shown - middle).mean() < 3.0
    assert np.abs(shown - large[:25, :96]).mean() > 20.0


def test_frames_held_upright_are_no_taller_than_wide_ones():
    boxes = [
        Camera(focal_length_mm=20.0, hole=Hole(diameter_mm=0.5), film=Film(width_mm=w, height_mm=h))
        for w, h in ((8.0, 6.0), (6.0, 8.0))
    ]
    sheet = sheet_of([scene_of()], boxes, detail=False)
    shapes = [(entry.about["rows"], entry.about["columns"]) for entry in sheet.entries]
    assert shapes == [(72, 96), (96, 72)]


# Where it lies ----------------------------------------------------------------------------------


def pdf_pages(path):
    """Return each page's size in points and the pictures on it: (x, y, width, height), points.

    Read from the file itself: the MediaBox and the cm operators before each Do, PDF 32000-1, 8.3.4.
    """
    data = path.read_bytes()
    sizes = [
        tuple(map(float, m)) for m in re.findall(rb"/MediaBox \[ 0 0 ([\d.]+) ([\d.]+) \]", data)
    ]
    pages = []
    for stream in re.findall(rb"stream\r?\n(.*?)endstream", data, re.DOTALL):
        try:
            body = zlib.decompressobj().decompress(stream)
        except zlib.error:
            continue
        if b" Do" in body:
            number = rb"(-?[\d.]+)"
            shape = (
                number + rb" 0 0 " + number + rb" " + number + rb" " + number + rb" cm\s*/\S+ Do"
            )
            found = [tuple(map(float, one)) for one in re.findall(shape, body)]
            pages.append([(x, y, w, h) for w, h, x, y in found])
    return sizes, pages


def test_a_sheet_of_two_by_two_has_its_true_size_on_paper(tmp_path):
    """A4 is 210 x 297 mm (ISO 216), a point 1/72 inch, an inch 25.4 mm.

    Margins of 10 mm and a gap of 4 mm leave (210 - 24) / 2 = 93 mm for a frame of 8 x 6, 69.75 high.
    """
    sheet = sheet_of([scene_of()], cameras(), page="A4", columns=2, detail=False)
    sheet.save(tmp_path / "sheet.pdf")
    sheet.save(tmp_path / "sheet.png")
    sizes, ((*frames,),) = pdf_pages(tmp_path / "sheet.pdf")
    mm = 25.4 / 72.0
    assert sizes == [(pytest.approx(210 / mm, abs=1e-2), pytest.approx(297 / mm, abs=1e-2))]
    boxes = [(x * mm, 297.0 - (y + h) * mm, w * mm, h * mm) for x, y, w, h in frames]
    assert len(boxes) == 4
    for x, _, width, height in boxes:
        assert width == pytest.approx(93.0, abs=0.02)
        assert height == pytest.approx(69.75, abs=0.02)
        assert min(abs(x - 10.0), abs(x - 107.0)) < 0.02
    # Left to right, then down, holes across and boxes down.
    assert boxes[0][1] == boxes[1][1] < boxes[2][1] == boxes[3][1]
    assert boxes[0][0] == boxes[2][0] < boxes[1][0] == boxes[3][0]
    assert [(e.frame.focal_mm, e.frame.hole_mm) for e in sheet.entries] == [
        (20.0, 0.3),
        (20.0, 0.5),
        (30.0, 0.3),
        (30.0, 0.5),
    ]
    with Image.open(tmp_path / "sheet.png") as image:
        dpi = image.info["dpi"][0]
        assert image.width / dpi * 25.4 == pytest.approx(210.0, abs=0.5)
        assert image.height / dpi * 25.4 == pytest.approx(297.0, abs=0.5)
        codes = np.asarray(image)
    for (entry, _, x, y), box in zip(placed(sheet), boxes, strict=True):
        assert x / dpi * 25.4 == pytest.approx(box[0], abs=0.5 * 25.4 / dpi + 0.02)
        assert y / dpi * 25.4 == pytest.approx(box[1], abs=0.5 * 25.4 / dpi + 0.02)
        picture = codes_of(sheet._store.png(entry.key))
        np.testing.assert_array_equal(codes[y : y + 72, x : x + 96], picture)


def test_many_frames_go_on_as_many_pages_as_they_need(tmp_path):
    boxes = cameras(holes=[0.3 + 0.01 * k for k in range(14)], depths=(20.0,))
    sheet = sheet_of([scene_of()], boxes, page="A5 landscape", columns=3, detail=False)
    assert sheet.page_count > 1
    assert sorted({page for page, _, _ in sheet.layout.places}) == [*range(1, sheet.page_count + 1)]
    files = sheet.save(tmp_path / "sheet.png")
    assert [file.name for file in files] == [
        "sheet.png",
        *(f"sheet-{k}.png" for k in range(2, sheet.page_count + 1)),
    ]
    sheet.save(tmp_path / "sheet.tif")
    sheet.save(tmp_path / "sheet.pdf")
    with tifffile.TiffFile(tmp_path / "sheet.tif") as tiff:
        assert len(tiff.pages) == sheet.page_count
        for number, page in enumerate(tiff.pages):
            np.testing.assert_array_equal(page.asarray(), sheet.page(number))
    sizes, pages = pdf_pages(tmp_path / "sheet.pdf")
    assert sizes == [(pytest.approx(595.28, abs=0.1), pytest.approx(419.53, abs=0.1))] * len(pages)
    assert sum(map(len, pages)) == 14  # A5 landscape is 210 x 148 mm, ISO 216
    for page in sheet.layout.pages:
        for thing in page.things:
            bottom = thing.y_mm + getattr(thing, "height_mm", 0.0)
            assert 0.0 <= thing.x_mm <= page.width_mm
            assert bottom <= page.height_mm


def test_equal_sheets_are_equal_files(tmp_path):
    for name in ("one", "two"):
        sheet = sheet_of([scene_of()], cameras(), page="A5", columns=2)
        for suffix in (".png", ".pdf", ".tif"):
            sheet.save(tmp_path / f"{name}{suffix}")
    for suffix in (".png", ".pdf", ".tif"):
        one, two = (tmp_path / f"{name}{suffix}" for name in ("one", "two"))
        assert one.read_bytes() == two.read_bytes()


# What is said of it -----------------------------------------------------------------------------


def test_captions_tell_what_differs_and_the_heading_what_does_not():
    said = texts(
        sheet_of([scene_of(name="yard")], cameras(depths=(20.0,)), detail=False, page="A4")
    )
    assert said.count("hole 0.3 mm") == said.count("hole 0.5 mm") == 1
    assert sum("20 mm from hole to film" in line for line in said) == 1
    assert sum("8 x 6 mm" in line for line in said) == 1
    assert sum("yard" in line for line in said) == 1
    assert sum("deg" in line for line in said) == 1


def test_groups_have_what_they_share_in_their_heading():
    sheet = sheet_of([scene_of()], cameras(), detail=False, page="A4")
    said = texts(sheet)
    assert sum("20 mm from hole to film" in line for line in said) == 1
    assert sum("30 mm from hole to film" in line for line in said) == 1
    by_hole = texts(sheet_of([scene_of()], cameras(), detail=False, group="hole", page="A4"))
    assert sum("hole 0.3 mm" in line for line in by_hole) == 1
    assert sum("30 mm from hole to film" in line for line in by_hole) == 2


def test_frames_are_sorted_as_asked():
    sheet = sheet_of([scene_of()], cameras(), sort=["-hole", "focal-length"], group="none")
    order = [(entry.frame.hole_mm, entry.frame.focal_mm) for entry in sheet.entries]
    assert order == [(0.5, 20.0), (0.5, 30.0), (0.3, 20.0), (0.3, 30.0)]
    sheet = sheet_of([scene_of()], cameras(), sort=["needed-time"], group="none")
    f_numbers = [entry.about["f_number"] for entry in sheet.entries]
    assert f_numbers == sorted(f_numbers)


def test_distances_and_times_are_frames_of_their_own():
    sheet = sheet_of(
        [scene_of()],
        cameras(holes=(0.5,), depths=(20.0,)),
        distances_mm=(100.0, float("inf")),
        time_s=(0.001, "auto"),
        ev=14.0,
        page="A4",
    )
    asked = [(entry.frame.distance_mm, entry.frame.time_s) for entry in sheet.entries]
    assert len(set(asked)) == 4
    assert len({entry.key for entry in sheet.entries}) == 4
    said = texts(sheet)
    assert sum("everything at 10 cm" in line for line in said) == 1


# The need ---------------------------------------------------------------------------------------


def test_the_frame_nearest_to_the_need_is_marked_once():
    sheet = sheet_of([scene_of()], cameras(), need="shortest time", page="A4")
    (place,) = sheet.nearest
    # t = N^2 / (2^EV S / 100), ISO 2720: shortest for the least focal length over hole, 20 / 0.5.
    assert sheet.entries[place].frame.focal_mm == 20.0
    assert sheet.entries[place].frame.hole_mm == 0.5
    boxes = [t for page in sheet.layout.pages for t in page.things if hasattr(t, "weight_mm")]
    assert len(boxes) == 1
    assert texts(sheet).count("nearest to the need") == 1


def test_needs_are_met_by_the_right_figures():
    abouts = [
        {
            "detail_cycles_mm": middle,
            "frame_cycles_mm": low,
            "corner_cycles_mm": corner,
            "needed_time_s": time,
            "horizontal_view_deg": view,
            "diagonal_view_deg": view,
        }
        for middle, low, corner, time, view in (
            (5.0, 1.0, 1.0, 4.0, 50.0),
            (4.0, 2.0, 3.0, 1.0, 40.0),
        )
    ]
    wanted = {
        "finest": 0,
        "Finest in the  middle": 0,
        "finest over the frame": 1,
        "finest in the corner": 1,
        "lightest": 1,
        "shortest time": 1,
        "widest": 0,
        "4.2 c/mm": 1,
        "4.8 cycles/mm in the middle": 0,
        "1.2 c/mm in the corner": 0,
        "44 deg": 1,  # 44/40 is nearer than 50/44
        "1.9 s": 1,
        "2.1 s": 0,
    }
    for words, place in wanted.items():
        assert nearest_to(read_need(words), abouts) == [place], words
    assert nearest_to(read_need("finest"), [None, abouts[1], dict(abouts[1])]) == [1, 2]
    assert nearest_to(read_need("finest"), [None]) == []


@pytest.mark.parametrize("words", ["sharpest", "0 c/mm", "4 c/mm at the edge", "-3 deg", "", "12"])
def test_a_need_that_is_not_known_names_those_that_are(words):
    with pytest.raises(DesignError, match=r"is not understood; .*finest over the frame"):
        read_need(words)


# Figures ----------------------------------------------------------------------------------------


def test_the_table_holds_every_frame_with_the_figures_of_pinsim_numbers(run, photo):
    code, out, err = run(
        "contact-sheet", photo, *VIEW, *HOLES, *DEPTHS, *BOX, "--need", "finest", "-o", "s.png"
    )
    assert (code, err) == (0, "")
    rows = rows_in(photo.parent / "s.csv")
    told = json.loads((photo.parent / "s.json").read_text(), parse_constant=pytest.fail)
    assert len(rows) == len(told["frames"]) == 4
    assert told["inputs_sha256"][str(photo)] == contents(photo.parent)["photo.png"]
    for row, frame in zip(rows, told["frames"], strict=True):
        _, figures, _ = run(
            *("numbers", "--hole", f"{row['hole_mm']}mm", "--json", *GREEN, *BOX),
            *("--focal-length", f"{row['focal_length_mm']}mm"),
        )
        alone = json.loads(figures)
        assert frame["f_number"] == pytest.approx(alone["f_number"], rel=1e-5)
        assert float(row["detail_cycles_mm"]) == pytest.approx(
            alone["distances"][0]["detail_cycles_mm"], rel=1e-4
        )
        assert len(frame["checksum_sha256"]) == 64
    assert [row["nearest_to_need"] for row in rows].count("True") == 1
    assert f"frame {1 + [r['nearest_to_need'] for r in rows].index('True')}" in out
    # Frames are kept only until the sheet is whole.
    assert sorted(contents(photo.parent)) == ["photo.png", "s.csv", "s.json", "s.png"]


def test_a_checksum_changes_with_every_value_and_with_nothing_else(frozen):
    scene = scene_of()
    same = scene_of(landscape_codes().copy(), name="another name")
    assert scene_checksum(scene) == scene_checksum(same)
    codes = landscape_codes()
    codes[5, 5, 1] ^= 1
    assert scene_checksum(scene_of(codes)) != scene_checksum(scene)
    assert scene_checksum(scene_of(distance_mm=900.0)) != scene_checksum(scene)
    near = frozen(np.full(codes.shape[:2], 900.0))
    far = near.copy()
    far[0, 0] = 901.0
    sums = {scene_checksum(scene_of(distance_mm=one)) for one in (near, far)}
    assert len(sums) == 2
    values = [1, 1.0, "1", True, None, [1], [[1]], ["a", "b"], ["ab"], {"a": 1}, np.ones(1)]
    assert len({checksum_of(one) for one in values}) == len(values)


# A plan -----------------------------------------------------------------------------------------

PLAN = """
scenes = ["photo.png"]
view = "40 deg"
wavelength = "550 nm"
film = "8mmx6mm"
holes = ["0.3 mm", "0.5 mm"]
focal_lengths = ["20 mm", "30 mm"]
need = "widest"
sort = ["-hole"]
group = "focal-length"
page = "A5"
columns = 2
width = 96
detail = false
title = "Which box?"
"""


def test_a_plan_says_all_that_options_say(run, photo):
    (photo.parent / "plan.toml").write_text(PLAN, encoding="utf-8")
    assert run("contact-sheet", "plan.toml", "--quiet", "-o", "planned.png")[0] == 0
    typed = (*("--sort", "-hole", "--group", "focal-length", "--page", "A5"),)
    typed += ("--need", "widest", "--columns", "2", "--width", "96", "--no-detail")
    typed += ("--title", "Which box?")
    code, _, _ = run(
        "contact-sheet", photo, *VIEW, *HOLES, *DEPTHS, *BOX, *typed, "-o", "typed.png"
    )
    assert code == 0
    one, two = (photo.parent / f"{name}.png" for name in ("planned", "typed"))
    assert one.read_bytes() == two.read_bytes()
    # What is typed beside a plan comes first.
    run("contact-sheet", "plan.toml", "--quiet", "--hole", "0.4mm", "-o", "other.png")
    rows = rows_in(photo.parent / "other.csv")
    assert {row["hole_mm"] for row in rows} == {"0.4"}


def test_a_plan_may_name_frames_one_by_one(run, photo, camera_file):
    text = """
    scenes = ["photo.png"]
    cameras = ["box.toml"]
    view = "40 deg"
    wavelength = "550 nm"
    width = 96
    [[frame]]
    name = "as drilled"
    hole = "0.45 mm"
    [[frame]]
    name = "as hoped"
    hole = "0.30 mm"
    distance = "1 m"
    """
    (photo.parent / "plan.toml").write_text(text, encoding="utf-8")
    code, out, _ = run("contact-sheet", "plan.toml", "--quiet", "-o", "s.png")
    assert code == 0, out
    rows = rows_in(photo.parent / "s.csv")
    assert [(row["name"], row["hole_mm"], row["distance_mm"]) for row in rows] == [
        ("as drilled", "0.45", ""),
        ("as hoped", "0.3", "1000.0"),
    ]


WRONG_PLANS = {
    "hole = ['0.3 mm']": "unknown key 'hole'. Did you mean 'holes'",
    "columns = 'two'": "columns is 'two'; it must be a whole number",
    "page = 'A9'": "no page is called 'A9'. Known: A2, A3",
    "sort = ['sharpness']": "nothing is sorted by 'sharpness'. Known:",
    "group = 'holes'": "not grouped by 'holes'. Did you mean 'hole'",
    "need = 'nice'": "the need 'nice' is not understood",
    "detail = 1": "detail is 1; it must be true or false",
    "width = 5": "frames 5 px wide are not possible; give 64 to 4000",
    "times = ['2 s']": "a time needs the light it is meant for",
    "[frame]\nhole = '1 mm'": "write [[frame]] in double brackets",
    "[[frame]]\ndiameter = '1 mm'": "frame]] 1: unknown key 'diameter'",
}


@pytest.mark.parametrize("line", WRONG_PLANS)
def test_a_wrong_plan_is_refused_in_one_line(run, photo, line):
    plain = PLAN
    for key in ("columns", "page", "sort", "group", "need", "detail", "width"):
        if line.startswith(key):
            plain = re.sub(rf"^{key} = .*\n", "", plain, flags=re.MULTILINE)
    text = line + "\n" + plain if not line.startswith("[") else plain + line
    (photo.parent / "plan.toml").write_text(text, encoding="utf-8")
    code, out, err = run("contact-sheet", "plan.toml", "--quiet", "-o", "s.png")
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert WRONG_PLANS[line] in err
    assert sorted(contents(photo.parent)) == ["photo.png", "plan.toml"]


def test_a_dry_run_tells_and_writes_nothing(run, photo):
    code, out, err = run(
        "contact-sheet", photo, *VIEW, *HOLES, *DEPTHS, *BOX, "-o", "s.png", "--dry-run"
    )
    assert (code, err) == (0, "")
    assert sum("to draw" in line for line in out.splitlines()) == 5  # four frames and their sum
    assert "4 frames: 0 there, 4 to draw" in out
    assert "time: about" in out
    assert "memory: about" in out
    assert sorted(contents(photo.parent)) == ["photo.png"]


def test_a_camera_file_and_holes_that_do_not_fit_it_are_one_failed_frame(run, photo, camera_file):
    """The frame says why, the others are drawn, and the exit code tells."""
    code, out, err = run(
        *("contact-sheet", photo, *VIEW, "--camera", camera_file, "--hole", "0.5mm"),
        *("--hole", "7mm", "-o", "s.png", "--width", 96),
    )
    assert (code, err) == (1, "")
    assert "failed: photo, Test box, hole 7 mm" in out
    assert "as large as the film frame" in out
    rows = rows_in(photo.parent / "s.csv")
    assert [bool(row["problem"]) for row in rows] == [False, True]
    with Image.open(photo.parent / "s.png") as image:
        image.load()
    # All of them wrong is a wrong command, and nothing is written.
    before = contents(photo.parent)
    code, _, err = run("contact-sheet", photo, *VIEW, "--camera", camera_file, "--hole", "7mm")
    assert code == 2
    assert "as large as the film frame" in err
    assert contents(photo.parent) == before
