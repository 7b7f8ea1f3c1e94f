"""Design and scene files: what is written in them is what comes out, in mm and degrees."""

import math

import numpy as np
import pytest
from conftest import CAMERA_TOML, landscape_codes
from PIL import Image

from pinsim import Camera, DesignError, Film, Hole, Scene, SceneError
from pinsim.camera import FRAMES_MM, named_film
from pinsim.samples import names

# The examples that the project's design document and its users' pages give, key for key.
TEA_CADDY = """\
name = "Tea caddy"
focal_length = "60 mm"
[hole]
shape = "round"
diameter = "0.30 mm"
plate_thickness = "0.05 mm"
[film]
frame = "6x6"
surface = "flat"
shift = ["0 mm", "5 mm"]     # frame centre, right and up as the scene is seen
material = "panchromatic-100"
"""

COURTYARD = """\
photo = "courtyard.jpg"
horizontal_view = "84 deg"
projection = "rectilinear"
[distance]
constant = "4 m"
[light]
ev = 13
"""


@pytest.fixture
def write(tmp_path):
    def to(text, name="box.toml"):
        path = tmp_path / name
        path.write_text(text, encoding="utf-8")
        return path

    return to


@pytest.fixture
def courtyard(tmp_path):
    Image.fromarray(landscape_codes()).save(tmp_path / "courtyard.jpg", quality=95)
    return tmp_path


def test_the_example_design_loads(write):
    camera = Camera.load(write(TEA_CADDY))
    assert camera.name == "Tea caddy"
    assert camera.focal_length_mm == 60.0
    assert camera.hole.diameter_mm == pytest.approx(0.3, rel=1e-15)
    assert camera.hole.plate_thickness_mm == pytest.approx(0.05, rel=1e-15)
    assert (camera.film.width_mm, camera.film.height_mm) == (56.0, 56.0)
    assert (camera.film.shift_right_mm, camera.film.shift_up_mm) == (0.0, 5.0)
    assert camera.material_name == "panchromatic-100"
    assert camera.tone == "positive"
    assert camera.f_number == pytest.approx(200.0, rel=1e-12)


def test_the_example_scene_loads(write, courtyard):
    scene = Scene.load(write(COURTYARD, "scene.toml"))
    assert scene.name == courtyard.name  # a file called scene.toml is named by its folder
    assert scene.horizontal_view_deg == 84.0
    assert scene.projection == "rectilinear"
    assert scene.distance == 4000.0
    assert scene.ev == 13.0
    assert scene.beyond == "extend"
    assert scene.photo.shape == (48, 72)
    assert set(scene.files) == {courtyard / "scene.toml", courtyard / "courtyard.jpg"}


def test_the_example_map_loads(write, courtyard):
    codes = np.arange(48 * 72, dtype=np.uint16).reshape(48, 72)
    Image.fromarray(codes).save(courtyard / "courtyard-distance.png")
    text = COURTYARD.replace('constant = "4 m"', 'map = "courtyard-distance.png"\nstep = "1 mm"')
    scene = Scene.load(write(text, "place.toml"))
    assert scene.name == "place"
    np.testing.assert_array_equal(scene.distance.codes, codes)
    # Code 0 is infinitely far, so its reciprocal is 0; code 2000 is 2 m.
    rows, columns = np.array([0, 2000 // 72]), np.array([0, 2000 % 72])
    np.testing.assert_allclose(scene.distance.inverse_mm(rows, columns), [0.0, 1 / 2000])
    assert courtyard / "courtyard-distance.png" in scene.files


def test_what_is_typed_comes_before_the_scene_file(write, courtyard):
    path = write(COURTYARD, "scene.toml")
    scene = Scene.load(path, horizontal_view_deg=50.0, distance_mm=math.inf, beyond="black")
    assert (scene.horizontal_view_deg, scene.distance, scene.beyond) == (50.0, math.inf, "black")


def test_a_scene_file_needs_no_distance_and_says_what_it_takes(write, courtyard):
    scene = Scene.load(write('photo = "courtyard.jpg"\nhorizontal_view = "1.2 rad"\n'))
    assert scene.distance == math.inf
    assert scene.horizontal_view_deg == pytest.approx(68.754935, abs=1e-6)
    assert "distance taken as infinity (--distance to change)" in scene.notes


def test_a_panorama_is_all_round_unless_told(write, courtyard):
    Image.new("RGB", (72, 36)).save(courtyard / "round.png")
    text = 'photo = "round.png"\nprojection = "equirectangular"\n'
    assert Scene.load(write(text)).horizontal_view_deg == 360.0


def test_a_design_written_by_a_windows_editor_loads(tmp_path):
    path = tmp_path / "box.toml"
    path.write_bytes(b"\xef\xbb\xbf" + TEA_CADDY.replace("\n", "\r\n").encode())
    assert Camera.load(path).name == "Tea caddy"


def test_paths_in_a_scene_file_start_at_its_own_folder(write, courtyard, monkeypatch):
    path = write(COURTYARD, "scene.toml")
    monkeypatch.chdir("/")
    assert Scene.load(path).photo.shape == (48, 72)


@pytest.mark.parametrize("name", sorted(names("camera")))
def test_every_sample_design_loads(name):
    camera = Camera.load(f"sample:{name}")
    assert camera.name
    # Builders' rule of thumb, common practice, no source: f-numbers of such boxes are 100 to 500.
    assert 100 < camera.f_number < 500


# Frames ---------------------------------------------------------------------------------------

# 36 x 24: ISO 1007. Roll film 120: ISO 732 and a published table of picture sizes; 69.5 and 112 mm
# from memory, as backs differ. Sheets inside the holder: from memory, 2 mm either way.
# Paper: ISO 1008, from memory.
PUBLISHED_MM = {
    "36x24": (36.0, 24.0, 0.01),
    "24x36": (36.0, 24.0, 0.01),
    "6x4.5": (56.0, 41.5, 0.01),
    "6x6": (56.0, 56.0, 0.01),
    "6x7": (69.5, 56.0, 0.6),
    "6x8": (77.0, 56.0, 0.01),
    "6x9": (84.0, 56.0, 0.01),
    "6x12": (112.0, 56.0, 0.01),
    "6x17": (168.0, 56.0, 0.01),
    "4x5": (120.0, 95.0, 2.0),
    "5x7": (170.5, 120.5, 2.0),
    "8x10": (245.0, 194.0, 2.0),
    "4x5-paper": (5 * 25.4, 4 * 25.4, 0.1),
    "5x7-paper": (178.0, 127.0, 0.3),
    "8x10-paper": (254.0, 203.0, 0.3),
    "10x15cm-paper": (152.0, 102.0, 0.3),
}


def test_every_frame_has_its_published_size():
    assert set(FRAMES_MM) == set(PUBLISHED_MM)
    for name, (width, height, tolerance) in PUBLISHED_MM.items():
        film = named_film(name)
        assert film.width_mm == pytest.approx(width, abs=tolerance), name
        assert film.height_mm == pytest.approx(height, abs=tolerance), name
        assert film.width_mm >= film.height_mm


# Diagonal of 36 x 24 over the frame's diagonal; computed independently.
CROP_RATIOS = {"6x4.5": 0.62074, "6x6": 0.54632, "6x7": 0.48476, "6x9": 0.42857, "6x12": 0.34553}


@pytest.mark.parametrize("name", CROP_RATIOS)
def test_frames_compare_with_35_mm_as_published(name):
    film = named_film(name)
    ratio = math.hypot(36, 24) / math.hypot(film.width_mm, film.height_mm)
    assert ratio == pytest.approx(CROP_RATIOS[name], abs=6e-6)


def test_portrait_holds_a_frame_upright(write, run, tmp_path):
    film = named_film("6x9", portrait=True)
    assert (film.width_mm, film.height_mm, film.frame) == (56.0, 84.0, "6x9 upright")
    text = TEA_CADDY.replace('frame = "6x6"', 'frame = "6x9"\norientation = "portrait"')
    film = Camera.load(write(text)).film
    assert (film.width_mm, film.height_mm) == (56.0, 84.0)
    text = CAMERA_TOML + 'orientation = "portrait"\n'
    film = Camera.load(write(text)).film
    assert (film.width_mm, film.height_mm) == (6.0, 8.0)


# Angles of view in closed form ----------------------------------------------------------------


def box(width, height, depth, right=0.0, up=0.0):
    film = Film(width_mm=width, height_mm=height, shift_right_mm=right, shift_up_mm=up)
    return Camera(focal_length_mm=depth, hole=Hole(diameter_mm=0.3), film=film)


@pytest.mark.parametrize(
    ("depth", "across", "high", "corners"),
    # 2 atan(side / 2 f) of the 36 x 24 mm frame, computed independently.
    [
        (18, 90.0000, 67.3801, 100.4757),
        (24, 73.7398, 53.1301, 84.0622),
        (28, 65.4705, 46.3972, 75.3806),
        (35, 54.4322, 37.8493, 63.4400),
        (50, 39.5978, 26.9915, 46.7930),
        (85, 23.9132, 16.0714, 28.5583),
        (135, 15.1893, 10.1592, 18.2081),
    ],
)
def test_angles_of_view_of_a_centred_frame(depth, across, high, corners):
    camera = box(36, 24, depth)
    assert camera.horizontal_view_deg == pytest.approx(across, abs=6e-5)
    assert camera.vertical_view_deg == pytest.approx(high, abs=6e-5)
    assert camera.diagonal_view_deg == pytest.approx(corners, abs=6e-5)
    assert camera.corner_deg == pytest.approx(corners / 2, abs=6e-5)


def test_angles_of_view_of_a_shifted_frame():
    """From -10 to 30 mm at 30 mm depth: 45 degrees and atan(1/3) = 18.4349 degrees. Trigonometry."""
    camera = box(40, 20, 30, right=10, up=-10)
    assert camera.horizontal_view_deg == pytest.approx(45.0 + 18.434949, abs=1e-5)
    # From -20 to 0 mm: atan(2/3).
    assert camera.vertical_view_deg == pytest.approx(33.690068, abs=1e-5)
    # Farthest corner: 30 right, 20 down, 30 deep.
    assert camera.corner_deg == pytest.approx(
        math.degrees(math.atan(math.hypot(30, 20) / 30)), abs=1e-9
    )


def test_the_far_corner_is_found_on_every_side():
    expected = box(40, 20, 30, right=10, up=5).corner_deg
    for right, up in ((-10, 5), (10, -5), (-10, -5)):
        assert box(40, 20, 30, right=right, up=up).corner_deg == pytest.approx(expected, abs=1e-9)


def test_the_f_number_is_depth_over_diameter():
    assert box(36, 24, 60).f_number == pytest.approx(200.0)
    assert box(36, 24, 60).with_hole(0.6).f_number == pytest.approx(100.0)
    assert box(36, 24, 60).with_focal_length(90).f_number == pytest.approx(300.0)


def test_the_summary_says_hole_depth_f_number_and_film():
    assert box(56, 42, 60).summary == "hole 0.3 mm, 60 mm to film, f/200, 56 x 42 mm"


# Valid from birth -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Hole(diameter_mm=math.nan), "hole diameter is nan mm; it must be 0.01 to 100 mm"),
        (lambda: Hole(diameter_mm=math.inf), "hole diameter is inf mm"),
        (lambda: Hole(diameter_mm=0.3, plate_thickness_mm=-1), "plate thickness is -1 mm"),
        (lambda: Film(width_mm=math.nan, height_mm=5), "film width is nan mm"),
        (lambda: Film(width_mm=5, height_mm=5, shift_up_mm=math.nan), "film shift up is nan mm"),
        (lambda: box(56, 56, math.nan), r"focal length \(hole to film\) is nan mm"),
        (lambda: Camera(focal_length_mm=60, hole=Hole(diameter_mm=0.3), tone="blue"), "tone is 'b"),
        (
            lambda: Camera(focal_length_mm=60, hole=Hole(diameter_mm=0.3), material_name="tin"),
            "no material is called 'tin'",
        ),
        (lambda: named_film("6x5"), "no film frame is called '6x5'. Did you mean '6x"),
    ],
)
def test_what_cannot_be_built_is_refused_at_once(make, message):
    with pytest.raises(DesignError, match=message):
        make()


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"horizontal_view_deg": math.nan}, "horizontal view is nan deg"),
        ({"horizontal_view_deg": 40, "distance_mm": math.nan}, "distance is nan mm"),
        (
            {"horizontal_view_deg": 40, "distance_mm": -5.0},
            "distance is -5 mm; it must be 1 to inf",
        ),
    ],
)
def test_a_scene_that_cannot_be_is_refused_at_once(options, message):
    with pytest.raises(SceneError, match=message):
        Scene.from_light(np.ones((4, 4)), **options)


def test_a_design_cannot_be_changed_only_copied():
    camera = box(36, 24, 60)
    with pytest.raises(AttributeError, match=r"cannot assign to field 'focal_length_mm'"):
        camera.focal_length_mm = 50
    assert camera.with_focal_length(50).focal_length_mm == 50
    assert camera.focal_length_mm == 60


# A design changed on the line -----------------------------------------------------------------


@pytest.fixture
def figures_of(run):
    import json

    def of(*arguments):
        code, out, err = run("numbers", *arguments, "--json", "--distance", "inf")
        assert (code, err) == (0, "")
        return json.loads(out)

    return of


def test_a_design_can_be_changed_on_the_line(write, figures_of):
    path = write(TEA_CADDY)
    figures = figures_of(path, "--hole", "0.4mm", "--focal-length", "80mm", "--film", "6x9")
    assert (figures["hole_mm"], figures["focal_length_mm"]) == (0.4, 80.0)
    assert (figures["frame_width_mm"], figures["frame_height_mm"]) == (84.0, 56.0)
    # The design's own shift stays: from -23 to 33 mm at 80 mm.
    assert figures["vertical_view_deg"] == pytest.approx(
        math.degrees(math.atan(33 / 80) + math.atan(23 / 80)), abs=1e-9
    )
    figures = figures_of(
        path, "--rise", "0mm", "--shift", "-10mm", "--film", "90mm x 60mm", "--portrait"
    )
    assert (figures["frame_width_mm"], figures["frame_height_mm"]) == (60.0, 90.0)
    assert figures["vertical_view_deg"] == pytest.approx(
        2 * math.degrees(math.atan(45 / 60)), abs=1e-9
    )
    assert figures["horizontal_view_deg"] == pytest.approx(
        math.degrees(math.atan(40 / 60) + math.atan(20 / 60)), abs=1e-9
    )
    assert (
        figures_of(path, "--material", "blue-sensitive-paper")["material"] == "blue-sensitive-paper"
    )


def test_another_frame_stays_as_bent_as_the_film_was(write, figures_of):
    """A 60 mm film in an arc of 60 mm round the hole sees 60/60 rad whatever its height."""
    text = TEA_CADDY.replace('"flat"', '{ bend_radius = "60 mm" }')
    figures = figures_of(write(text), "--film", "60mmx20mm")
    assert figures["horizontal_view_deg"] == pytest.approx(math.degrees(1.0), abs=1e-9)


def test_portrait_turns_the_designs_own_frame(write, figures_of):
    text = TEA_CADDY.replace('frame = "6x6"', 'frame = "6x9"')
    figures = figures_of(write(text), "--portrait")
    assert (figures["frame_width_mm"], figures["frame_height_mm"]) == (56.0, 84.0)
    assert figures["frame"] == "6x9 upright"
