"""compare: the verdict against published optima, the same part of the scene to a pixel, true size."""

import math
import re
from dataclasses import replace

import numpy as np
import pytest
from conftest import TYPED_CAMERA
from PIL import Image
from scipy import ndimage

import pinsim
from pinsim import Camera, DesignError, Film, Hole, Scene
from pinsim.optics import FilmSurface
from pinsim.sheets.side_by_side.common_part import common_part, exposure_of, part_of
from pinsim.sheets.side_by_side.figures import degrees_per_mm, directions_at
from pinsim.sheets.side_by_side.leaf import Leaf, broken, width_mm

GREEN_NM = 550.0
VIEW = ("--view", "40deg", "--wavelength", "550nm")
DEPTH_MM = 20.0
UNIT_MM = math.sqrt(GREEN_NM * 1e-6 * DEPTH_MM)  # of hole sizes: sqrt(lambda f)
# Petzval's and Rayleigh's hole: d = k sqrt(lambda f), k^2 = 4 N with N = 0.5 (Petzval 1857, by the
# abstract of Mielenz, J. Res. NIST 104 (1999) 479) and N = 0.9 (Rayleigh, Phil. Mag. 31 (1891) 87).
PETZVAL_MM = math.sqrt(4.0 * 0.5) * UNIT_MM
RAYLEIGH_MM = math.sqrt(4.0 * 0.9) * UNIT_MM
# Frequencies at which their contrast first falls to 50, 20 and 10 %, times sqrt(lambda f); computed
# independently (Fresnel-Lommel transfer function of a round hole, quadrature), see REFERENCE below.
REFERENCE = {0.5: (0.42586, 0.36886), 0.2: (0.88180, 0.70395), 0.1: (1.11326, 1.16424)}


def plain_scene(**options):
    return Scene.from_light(
        np.full((60, 80), 0.5, np.float32), horizontal_view_deg=40.0, name="wall", **options
    )


def box(hole_mm, depth_mm=DEPTH_MM, **options):
    film = Film(**{"width_mm": 8.0, "height_mm": 6.0, **options})
    return Camera(focal_length_mm=depth_mm, hole=Hole(diameter_mm=hole_mm), film=film)


def compared(*cameras, scene=None, **options):
    return pinsim.compare(scene or plain_scene(), cameras, wavelength_nm=GREEN_NM, **options)


def swapped(sentence):
    return re.sub(r"\b[AB]\b", lambda found: "B" if found[0] == "A" else "A", sentence)


# The verdict --------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def classics():
    """Petzval's hole and Rayleigh's in one box, far objects, one colour."""
    return compared(box(PETZVAL_MM), box(RAYLEIGH_MM), ev=12.0)


@pytest.mark.parametrize("contrast", REFERENCE)
def test_the_detail_in_the_middle_is_that_of_the_tables(classics, contrast):
    """Computed independently: Fresnel-Lommel quadrature, 1e-5; a degree is z pi/180 on the axis."""
    k = (0.5, 0.2, 0.1).index(contrast)
    for design, expected in zip(classics.figures, REFERENCE[contrast], strict=True):
        cycles_mm = design.at("centre").cycles_deg[k] / (DEPTH_MM * math.pi / 180.0)
        assert cycles_mm * UNIT_MM == pytest.approx(expected, rel=2e-3)


def test_the_verdict_is_what_the_numbers_imply(classics):
    """The table above: 0.88180/0.70395 is 25 % finer; areas 0.9/0.5 are log2 1.8 = 0.8 stop."""
    assert classics.verdict.startswith("A draws 25 % finer in the middle")
    assert "needs 0.8 stop more light" in classics.verdict
    assert "at EV 12" in classics.verdict
    assert classics.verdict.endswith(".")
    assert "\n" not in classics.verdict


def test_the_verdict_says_when_less_contrast_turns_the_order_round(classics):
    """At 10 % Rayleigh's hole leads, 1.16424 against 1.11326: 5 % (computed independently)."""
    assert "in what is just seen (10 % contrast) B reaches 5 % finer detail" in classics.verdict


def test_the_sentence_turns_round_with_the_designs(classics):
    other = compared(box(RAYLEIGH_MM), box(PETZVAL_MM), ev=12.0)
    assert other.verdict.startswith("B draws 25 % finer in the middle")
    assert other.verdict == swapped(classics.verdict)


@pytest.mark.parametrize("factor", [0.8, 1.25])
def test_the_best_hole_wins_against_others(factor):
    """Detail is greatest at k = 1.5235 for 20 % (computed independently, see the table above)."""
    best = 1.5235 * UNIT_MM
    assert pinsim.best_diameter_mm(DEPTH_MM, wavelength_nm=GREEN_NM) == pytest.approx(
        best, rel=2e-3
    )
    first = compared(box(best), box(best * factor)).verdict
    second = compared(box(best * factor), box(best)).verdict
    assert re.match(r"A draws \d+ % finer in the middle", first)
    assert re.match(r"B draws \d+ % finer in the middle", second)


def test_detail_is_compared_in_the_scene_and_not_on_the_film():
    """d = k sqrt(lambda f) at twice the depth: cycles/mm fall by sqrt 2, cycles per degree rise."""
    deep = box(PETZVAL_MM * math.sqrt(2.0), 2.0 * DEPTH_MM, width_mm=16.0, height_mm=12.0)
    result = compared(box(PETZVAL_MM), deep)
    short, long = (design.at("centre") for design in result.figures)
    assert long.film_cycles_mm / short.film_cycles_mm == pytest.approx(1 / math.sqrt(2.0), rel=2e-3)
    assert long.plain_cycles_deg / short.plain_cycles_deg == pytest.approx(math.sqrt(2.0), rel=2e-3)
    assert result.verdict.startswith("B draws 41 % finer in the middle, 41 % in the corners")
    assert "sees" not in result.verdict  # both frames have one angle of view


def test_designs_that_hardly_differ_are_not_told_apart():
    result = compared(box(0.150), box(0.151))
    assert result.verdict.startswith("A and B hardly differ")
    assert "choose what is easier to make" in result.verdict


def test_the_same_detail_for_less_light_is_said():
    """On either side of the best size two holes draw alike, and the larger needs less light."""
    best = pinsim.best_diameter_mm(DEPTH_MM, wavelength_nm=GREEN_NM)
    result = compared(box(0.93 * best), box(1.07 * best, width_mm=8.0), details=[(0.5, 0.5)])
    one, other = (design.places[0].plain_cycles_deg for design in result.figures)
    assert one / other == pytest.approx(1.0, abs=0.03)
    assert "draw equally fine at place 1, and B needs 0.4 stop less light" in result.verdict


def test_reciprocity_is_in_the_times():
    """HARMAN technology, Film Reciprocity Failure Compensation: Tc = Tm^1.26 for this kind of film."""
    film = {"material_name": "panchromatic-100"}
    cameras = [replace(box(hole), **film) for hole in (0.1, 0.2)]
    assert cameras[0].material.speed_iso == 100.0
    for design in compared(*cameras, ev=2.0).figures:
        metered = (DEPTH_MM / design.hole_mm) ** 2 / 2.0**2.0  # ISO 2720 at ISO 100
        assert design.time.corrected_s == pytest.approx(metered**1.26, rel=1e-9)


def test_a_corner_that_gets_no_light_is_told():
    """A bore of 1 mm through a plate shuts a hole of 0.15 mm off beyond atan 0.15 = 8.5 deg."""
    thick = Camera(
        focal_length_mm=DEPTH_MM,
        hole=Hole(diameter_mm=0.15, plate_thickness_mm=1.0),
        film=Film(width_mm=8.0, height_mm=6.0),
    )
    result = compared(box(0.15), thick)
    assert "no light reaches the corners of B" in result.verdict
    assert result.figures[1].at("corner").plain_cycles_deg == 0.0
    assert result.figures[1].at("centre").plain_cycles_deg > 0.0


def test_three_designs_are_ranked():
    best = 1.5235 * UNIT_MM
    result = compared(box(0.7 * best), box(best), box(1.4 * best))
    assert result.verdict.startswith("Of these, B draws finest in the middle (")
    assert re.search(r"C needs least light .*, A most \(2\.0 stops more\)\.$", result.verdict)


# Degrees and millimetres --------------------------------------------------------------------------


@pytest.mark.parametrize("bend_mm", [math.inf, 20.0, 11.0])
def test_degrees_per_mm_are_those_of_the_rays(bend_mm):
    """Against the angle between two rays to film points a micrometre apart."""
    camera = box(0.15, bend_radius_mm=bend_mm)
    surface = FilmSurface(focal_length_mm=DEPTH_MM, bend_radius_mm=bend_mm)
    for point in ((0.0, 0.0), (3.0, 2.0), (-4.0, 3.0)):
        directions = directions_at(point)
        step = 1e-3
        ends = [
            surface.points_mm(*(np.array(point) + sign * 0.5 * step * directions).T)
            for sign in (-1.0, 1.0)
        ]
        before, after = (one / np.linalg.norm(one, axis=1)[:, None] for one in ends)
        angle = np.degrees(2.0 * np.arcsin(0.5 * np.linalg.norm(after - before, axis=1)))
        np.testing.assert_allclose(
            degrees_per_mm(camera, point, directions), angle / step, rtol=1e-5
        )


# The same part of the scene -----------------------------------------------------------------------

# Slopes of rays to red spots, right and up, away from the marked details.
SPOTS = ((-0.07, 0.045), (0.07, 0.045), (-0.07, -0.045), (0.07, -0.045))
PHOTO_PX, PHOTO_DEG = 1201, 40.0


def spotted_scene():
    focal_px = 0.5 * PHOTO_PX / math.tan(math.radians(0.5 * PHOTO_DEG))
    across = (np.arange(PHOTO_PX) - 0.5 * (PHOTO_PX - 1)) / focal_px
    up = -(np.arange(901) - 450.0) / focal_px
    light = np.full((901, PHOTO_PX, 3), 0.8, np.float32)
    for right, high in SPOTS:
        inside = np.hypot(across[None, :] - right, up[:, None] - high) < 0.008
        light[inside] = (0.6, 0.02, 0.02)
    return Scene.from_light(light, horizontal_view_deg=PHOTO_DEG, name="spots")


def red_spots(codes):
    """Return middles of red spots, (column, row), weighted by how red they are."""
    green = codes[..., 1].astype(float)
    redness = np.maximum(codes[..., 0].astype(float) - green - 30.0, 0.0)
    labels, count = ndimage.label(redness > 0.0)
    sizes = ndimage.sum_labels(redness > 0.0, labels, range(1, count + 1))
    keep = [i + 1 for i in range(count) if sizes[i] > 100]
    middles = ndimage.center_of_mass(redness, labels, keep)
    return np.array([(column, row) for row, column in middles])


UNLIKE = {
    "two depths": (box(0.1), box(0.15, 30.0)),
    "two frames": (box(0.1), box(0.1, width_mm=10.0, height_mm=5.2)),
    "a shifted frame": (box(0.1), box(0.12, 30.0, width_mm=11.0, shift_right_mm=0.7)),
}


@pytest.mark.parametrize("name", UNLIKE)
def test_both_pictures_show_the_same_places_at_one_scale(tmp_path, name):
    """Straight lines through a point: a ray's place on flat film is its slope times the depth."""
    result = pinsim.compare(spotted_scene(), UNLIKE[name], wavelength_nm=GREEN_NM)
    result.save(tmp_path / "c.png")
    with Image.open(tmp_path / "c.png") as image:
        codes = np.asarray(image)
    spots = red_spots(codes[:, : round(198.0 / 25.4 * 300.0)])
    spots = spots[np.argsort(spots[:, 0])]
    assert len(spots) == 8
    left, right = (
        part[np.lexsort((part[:, 0].round(-1), part[:, 1].round(-1)))]
        for part in (spots[:4], spots[4:])
    )
    apart = right - left
    np.testing.assert_allclose(apart[:, 1], 0.0, atol=1.0)
    np.testing.assert_allclose(apart[:, 0], apart[0, 0], atol=1.0)
    # The common part is as wide as the narrower view; the picture's column is 93.5 mm wide.
    edges = [
        ((one.film.shift_right_mm + side * 0.5 * one.film.width_mm) / one.focal_length_mm)
        for one in UNLIKE[name]
        for side in (-1.0, 1.0)
    ]
    wide = min(edges[1], edges[3]) - max(edges[0], edges[2])
    px_per_slope = round(93.5 / 25.4 * 300.0) / wide
    slopes = np.array(sorted(SPOTS, key=lambda one: (-one[1], one[0])))
    expected = (slopes - slopes[0]) * [px_per_slope, -px_per_slope]
    for found, start_mm in ((left, 9.0), (right, 9.0 + 93.5 + 4.0)):
        np.testing.assert_allclose(found - found[0], expected, atol=1.0)
        # From the picture's own left edge, which is the common part's.
        column = start_mm / 25.4 * 300.0 + (slopes[:, 0] - max(edges[0], edges[2])) * px_per_slope
        np.testing.assert_allclose(found[:, 0], column - 0.5, atol=1.0)


def test_the_common_part_is_said():
    result = compared(box(0.15), box(0.15, 30.0))
    assert result.figures[1].hidden_share == 0.0
    # (20/30)^2 of the shorter box's frame is seen by the deeper one too.
    assert result.figures[0].hidden_share == pytest.approx(1.0 - (2.0 / 3.0) ** 2, abs=0.01)
    page = result.html()
    assert "cropped to 44 % of the frame, which all show" in page
    assert "the whole frame" in page


BENT = {
    "flat and an arc": (box(0.1), box(0.1, bend_radius_mm=20.0)),
    "a tin and flat": (box(0.1, 24.0, bend_radius_mm=12.0), box(0.1)),
    "two unlike arcs": (box(0.1, bend_radius_mm=30.0), box(0.1, bend_radius_mm=15.0)),
    "bent up and down": (box(0.1), box(0.1, bend_radius_mm=20.0, bend_axis="horizontal")),
    "bent either way": (
        box(0.1, bend_radius_mm=20.0),
        box(0.1, bend_radius_mm=20.0, bend_axis="horizontal"),
    ),
}


@pytest.mark.parametrize("name", BENT)
def test_bent_film_is_drawn_so_that_every_place_agrees(name):
    """A ray of slopes (a, b) through the hole meets flat film at z (a, b), whichever film drew it."""
    pictures = [
        pinsim.preview(spotted_scene(), camera, wavelength_nm=GREEN_NM) for camera in BENT[name]
    ]
    common = common_part(pictures)
    shape = (600, round(600 * common.width_mm / common.height_mm))
    found = []
    for picture in pictures:
        light = exposure_of(picture, common, common.whole, shape)
        codes = np.round(255.0 * np.clip(light, 0.0, 1.0) ** 0.45)
        spots = red_spots(np.nan_to_num(codes))
        assert len(spots) == 4
        found.append(spots[np.lexsort((spots[:, 0].round(-1), spots[:, 1].round(-1)))])
    np.testing.assert_allclose(found[0], found[1], atol=1.0)
    slopes = np.array(sorted(SPOTS, key=lambda one: (-one[1], one[0])))
    if common.surface.flat:
        places = slopes * common.surface.focal_length_mm
        expected = np.column_stack(
            [
                (places[:, 0] - common.left_mm) / common.width_mm * shape[1] - 0.5,
                (common.top_mm - places[:, 1]) / common.height_mm * shape[0] - 0.5,
            ]
        )
        np.testing.assert_allclose(found[1], expected, atol=1.0)


def test_the_common_window_of_bent_film_is_told_in_angles():
    pictures = [
        pinsim.preview(plain_scene(), camera, wavelength_nm=GREEN_NM)
        for camera in BENT["flat and an arc"]
    ]
    window = common_part(pictures).window
    # The flat film ends at its slope; along an arc about the hole an angle is length over radius.
    assert window.right == pytest.approx(math.atan(4.0 / 20.0), rel=1e-6)
    bent = part_of(pictures[1], window)
    expected = 2.0 * 20.0 * math.atan(4.0 / 20.0)
    assert bent.width * pictures[1].pitch_mm == pytest.approx(expected, rel=1e-6)


# Details ------------------------------------------------------------------------------------------


def test_the_nearest_thing_is_found_and_its_distance_told():
    """A block 0.3 m away in a far place: its shadow is larger by 1 + z/zo."""
    rng = np.random.default_rng(3)
    light = rng.uniform(0.2, 0.9, (120, 160)).astype(np.float32)
    distance_mm = np.full((120, 160), 50_000.0)
    # The frame's middle half of the photo: x 0.25 to 0.3 of what the film sees.
    distance_mm[66:80, 52:66] = 300.0
    scene = Scene.from_light(light, horizontal_view_deg=40.0, distance_mm=distance_mm, name="block")
    result = compared(box(0.2), box(0.3), scene=scene)
    nearest = result.figures[0].at("nearest thing")
    assert nearest.distance_mm == pytest.approx(300.0)
    assert result.figures[0].at("centre").distance_mm == pytest.approx(50_000.0)
    # The larger hole loses more from being near: the geometric shadow grows.
    for design in result.figures:
        assert design.at("nearest thing").plain_cycles_deg < design.at("centre").plain_cycles_deg


def test_places_that_are_pointed_at_replace_the_usual_ones():
    result = compared(box(0.15), box(0.3), details=[(0.5, 0.5), (1.0, 0.0)])
    assert [place.name for place in result.figures[0].places] == ["place 1", "place 2"]
    usual = compared(box(0.15), box(0.3)).figures[0]
    middle, corner = result.figures[0].places
    assert middle.plain_cycles_deg == pytest.approx(usual.at("centre").plain_cycles_deg, rel=1e-6)
    assert corner.plain_cycles_deg == pytest.approx(usual.at("corner").plain_cycles_deg, rel=1e-6)
    # A frame of 8 x 6 mm, 20 mm from the hole: its corner is atan(5/20) off the axis.
    assert corner.field_deg == pytest.approx(math.degrees(math.atan(5.0 / 20.0)), rel=1e-3)


@pytest.mark.parametrize("point", [(-0.1, 0.5), (0.5, 1.01), (math.nan, 0.5)])
def test_places_outside_are_refused(point):
    with pytest.raises(DesignError, match=r"must be 0 to 1, the share of what all designs show"):
        compared(box(0.15), box(0.3), details=[point])


def test_too_many_or_too_few_designs_are_refused():
    with pytest.raises(DesignError, match=r"takes two to 6 designs, not 7"):
        compared(*[box(0.1)] * 7)
    with pytest.raises(DesignError, match=r"takes two to 6 designs, not 1"):
        compared(box(0.1))


# Paper --------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def sheet():
    light = np.random.default_rng(5).uniform(0.2, 0.9, (90, 120, 3)).astype(np.float32)
    scene = Scene.from_light(light, horizontal_view_deg=40.0, name="speckles")
    return compared(box(0.15), box(0.3), scene=scene)


def test_the_page_is_a4_on_its_side_in_every_kind_of_file(sheet, tmp_path):
    """A4 is 210 x 297 mm (ISO 216); a point is 1/72 inch."""
    for name in ("c.png", "c.jpg", "c.tif"):
        sheet.save(tmp_path / name)
        with Image.open(tmp_path / name) as image:
            dpi = float(image.info["dpi"][0])
            assert image.size[0] / dpi * 25.4 == pytest.approx(297.0, abs=0.1)
            assert image.size[1] / dpi * 25.4 == pytest.approx(210.0, abs=0.1)
    sheet.save(tmp_path / "c.pdf")
    data = (tmp_path / "c.pdf").read_bytes()
    media = re.search(rb"/MediaBox \[ 0 0 ([\d.]+) ([\d.]+) \]", data)
    assert float(media[1]) / 72.0 * 25.4 == pytest.approx(297.0, abs=0.01)
    assert float(media[2]) / 72.0 * 25.4 == pytest.approx(210.0, abs=0.01)
    assert data.count(b"/Type /Page\n") + data.count(b"/Type /Page ") == 1
    assert b"/FontFile2" in data  # letters are letters, of a font inside the file
    # Two pictures, and two of each of three details.
    assert data.count(b"/Subtype /Image") == 8
    assert sheet.size_text.endswith("(297 x 210 mm)")


def test_the_same_comparison_is_the_same_file(tmp_path):
    for name in ("a.pdf", "b.pdf"):
        compared(box(0.15), box(0.3)).save(tmp_path / name)
    assert (tmp_path / "a.pdf").read_bytes() == (tmp_path / "b.pdf").read_bytes()


def test_words_are_broken_within_their_room():
    words = "a-long-name-" * 12 + " and then some more words that go on for a while"
    for line in broken(words, 9.0, 40.0):
        assert width_mm(line, 9.0) <= 40.0


def test_a_raster_line_is_drawn_where_it_is_told():
    leaf = Leaf(20.0)
    leaf.page_height_mm = 10.0
    leaf.line([(2.0, 5.0), (18.0, 5.0)], colour=(0, 0, 0), thick=0.5)
    rows, columns = np.nonzero(leaf.raster()[..., 0] < 128)
    mm = 25.4 / 300.0
    assert (rows.mean() + 0.5) * mm == pytest.approx(5.0, abs=0.05)
    assert (columns.min() * mm, (columns.max() + 1) * mm) == pytest.approx((2.0, 18.0), abs=0.1)


# The command --------------------------------------------------------------------------------------


def test_the_command_tells_the_verdict_and_writes_both(run, photo):
    code, out, err = run(
        "compare", photo, *VIEW, *TYPED_CAMERA, "--hole", "0.8mm", "--page", "c.html", "-o", "c.pdf"
    )
    assert (code, err) == (0, "")
    lines = out.splitlines()
    assert lines[0] == "c.pdf: 3508 x 2480 px (297 x 210 mm)"
    assert re.fullmatch(r"c\.html: \d\.\d MB, for a browser", lines[1])
    assert lines[2].startswith("A: typed design, hole 0.5 mm")
    assert lines[3].startswith("B: typed design, hole 0.8 mm")
    assert re.match(r"A draws .* in the middle", lines[4])
    assert (photo.parent / "c.html").stat().st_size < 6_000_000


def test_nothing_is_written_over_and_nothing_is_rendered_first(run, photo, monkeypatch):
    def rendered(*_, **__):
        raise AssertionError("rendered before the files were checked")

    monkeypatch.setattr("pinsim.sheets.side_by_side.comparison.preview", rendered)
    (photo.parent / "old.html").write_text("mine")
    command = ("compare", photo, *VIEW, *TYPED_CAMERA, "--hole", "0.8mm")
    for more, said in (
        (("--page", "old.html"), "old.html exists already"),
        (("--page", "c.txt"), "use one of .html, .htm"),
        (("--page", "nowhere/c.html"), "the folder nowhere does not exist"),
        (("--detail", "2,0.5"), "write two shares of the picture"),
        (("--detail", "0.5"), "write two shares of the picture"),
        (("--detail", "a,b"), "write two shares of the picture"),
        (("-o", "c.gif"), "use one of .png"),
    ):
        code, out, err = run(*command, *more)
        assert (code, out) == (2, "")
        assert said in err
        assert len(err.splitlines()) == 1
    assert (photo.parent / "old.html").read_text() == "mine"
    assert not (photo.parent / "photo-compared.png").exists()


def test_more_than_two_designs_have_a_row_each(run, photo):
    holes = [part for i in (3, 5, 8) for part in ("--hole", f"0.{i}mm")]
    code, out, err = run(
        "compare",
        photo,
        *VIEW,
        "--focal-length",
        "20mm",
        "--film",
        "8mmx6mm",
        *holes,
        "-o",
        "c.png",
    )
    assert (code, err) == (0, "")
    assert [line[:3] for line in out.splitlines()[1:4]] == ["A: ", "B: ", "C: "]
    with Image.open(photo.parent / "c.png") as image:
        assert image.size[0] == 3508
        assert image.size[1] > 2480
