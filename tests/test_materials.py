"""Materials: what they see, how they are found by name, and how a builder adds to them."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest

import pinsim
from pinsim import material as materials
from pinsim.errors import DesignError
from pinsim.material import MATERIAL_NAMES, Catalogue, material

FIRST_FIVE = (
    "blue-sensitive-paper",
    "colour",
    "orthochromatic-80",
    "panchromatic-100",
    "panchromatic-400",
)
# nm beyond which a class is blind, and colours that it must see: Great Soviet Encyclopedia,
# "Orthochromatic materials" (blue-sensitive 400 to 500, orthochromatic to 600), panchromatic to 650 to
# 680 and variable-contrast paper to 550 to 580 from memory of handbooks.
LIMITS = {
    "blue-sensitive-paper": (520.0, {"blue"}),
    "variable-contrast-paper": (580.0, {"blue", "green"}),
    "direct-positive-paper": (600.0, {"blue", "green"}),
    "orthochromatic-80": (610.0, {"blue", "green"}),
    "green-sensitive-film": (590.0, {"blue", "green"}),
    "panchromatic-50": (690.0, {"blue", "green", "red"}),
    "panchromatic-100": (690.0, {"blue", "green", "red"}),
    "panchromatic-400": (690.0, {"blue", "green", "red"}),
}


def test_every_name_there_ever_was_is_there():
    assert set(FIRST_FIVE) <= set(MATERIAL_NAMES)
    for name in (
        "Channel",
        "Material",
        "material",
        "DEFAULT_MATERIAL",
        "basis_spectra",
        "SHORTEST_NM",
        "LONGEST_NM",
        "WAVELENGTHS_PER_BAND",
    ):
        assert hasattr(materials, name)


@pytest.mark.parametrize("name", LIMITS)
def test_a_class_is_blind_beyond_its_limit(name):
    limit_nm, seen = LIMITS[name]
    light = material(name).light
    beyond = light.shares[light.wavelengths_nm > limit_nm].sum() / light.shares.sum()
    assert beyond < 0.02
    assert set(material(name).colours_seen) == seen


@pytest.mark.parametrize("name", MATERIAL_NAMES)
def test_white_light_exposes_every_layer_fully(name):
    for channel in material(name).channels:
        assert channel.weights.sum() == pytest.approx(1.0, rel=1e-12)
        assert (channel.weights >= 0.0).all()
        assert sum(channel.band_shares.values()) == pytest.approx(1.0, rel=1e-12)


@pytest.mark.parametrize("name", MATERIAL_NAMES)
def test_every_material_says_where_it_comes_from(name):
    one = material(name)
    assert one.sources
    assert all(text.isascii() and len(text) > 8 for text in (*one.sources, one.description))
    assert one.speed_iso > 0.0
    assert (one.curve is None) == (one.process == "sensor")


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [
        ("blue-sensitive-paper", 3.0, 12.0),  # common practice, no source: 3 to 12
        ("variable-contrast-paper", 3.0, 12.0),
        ("direct-positive-paper", 1.0, 3.0),  # a maker's sheet, from memory: 1 to 3
    ],
)
def test_paper_speeds_are_those_of_practice(name, low, high):
    one = material(name)
    assert low <= one.speed_iso <= high
    assert one.speed_unsure_stops >= 0.5


@pytest.mark.parametrize(
    ("name", "metered_s", "corrected_s"),
    [
        # HARMAN technology, Film Reciprocity Failure Compensation: 10 s and 100 s.
        ("panchromatic-50", (10.0, 100.0), (21.38, 457.1)),
        ("panchromatic-100", (10.0, 100.0), (18.20, 331.1)),
        ("panchromatic-400", (10.0, 100.0), (20.42, 416.9)),
        ("orthochromatic-80", (10.0, 100.0), (17.78, 316.2)),
        # A page of darkroom data: half, 1.5 and 2.5 stops at 1, 10, 100 s.
        ("colour-reversal", (1.0, 10.0, 100.0), (2**0.5, 10 * 2**1.5, 100 * 2**2.5)),
        # Users' fits: 20 to 23 s and 398 to 525 s.
        ("colour-negative", (10.0, 100.0), (21.4, 457.0)),
    ],
)
def test_long_times_are_those_that_were_published(name, metered_s, corrected_s):
    found = material(name).reciprocity.corrected_s(np.array(metered_s))
    np.testing.assert_allclose(found, corrected_s, rtol=5e-3)


def test_a_wavelength_changes_only_the_light():
    one = material("panchromatic-400").at(550.0)
    assert one.light.mean_nm == pytest.approx(550.0, rel=1e-12)
    assert one.curve == material("panchromatic-400").curve
    assert one.reciprocity == material("panchromatic-400").reciprocity


# A builder's own ------------------------------------------------------------------------------

OWN = """\
[my-paper]
like = "blue-sensitive-paper"
description = "old paper from the attic"
speed = 3
[my-paper.curve]
gamma = 1.2

[panchromatic-100]
speed = 64
[panchromatic-100.reciprocity]
table = [[1, 2], [10, 50], [100, 1200]]
"""

WHOLE = """\
[plate]
process = "negative"
speed = 1.5
spectrum = { wavelength_nm = [380, 420, 500], sensitivity = [0.5, 1.0, 0.0] }
[plate.curve]
base_fog = 0.1
toe = 0.3
gamma = 1.0
shoulder = 0.3
d_max = 2.0
"""


@pytest.fixture
def own(tmp_path):
    path = tmp_path / "my-materials.toml"
    path.write_text(OWN, encoding="utf-8")
    return path


def test_like_takes_over_all_that_is_not_changed(own):
    mine, paper = Catalogue.load(own).material("my-paper"), material("blue-sensitive-paper")
    assert mine.name == "my-paper"
    assert mine.speed_iso == 3.0
    assert mine.description == "old paper from the attic"
    assert mine.curve == replace(paper.curve, gamma=1.2)
    assert mine.support == "paper"
    np.testing.assert_array_equal(mine.light.shares, paper.light.shares)


def test_a_known_name_is_changed_for_this_file_only(own):
    mine = Catalogue.load(own).material("panchromatic-100")
    assert mine.speed_iso == 64.0
    assert mine.reciprocity.corrected_s(100.0) == pytest.approx(1200.0)
    assert mine.curve == material("panchromatic-100").curve
    assert material("panchromatic-100").speed_iso == 100.0


def test_a_material_may_stand_by_itself(tmp_path):
    path = tmp_path / "a.toml"
    path.write_text(WHOLE, encoding="utf-8")
    plate = Catalogue.load(path).material("plate")
    assert plate.light.wavelengths_nm.max() <= 500.0
    assert plate.reciprocity.corrected_s(100.0) == pytest.approx(100.0, rel=1e-12)


def test_a_sensor_like_a_film_takes_no_curve_over(tmp_path):
    path = tmp_path / "a.toml"
    path.write_text('[a]\nlike = "panchromatic-100"\nprocess = "sensor"\n', encoding="utf-8")
    found = Catalogue.load(path).material("a")
    assert found.curve is None
    assert found.sensor is not None
    assert found.sensor.saturation_lxs == 78.0


def test_like_may_lead_on_to_another_of_the_file(tmp_path):
    path = tmp_path / "a.toml"
    path.write_text(WHOLE + '[b]\nlike = "plate"\nspeed = 3\n[c]\nlike = "b"\n', encoding="utf-8")
    assert Catalogue.load(path).material("c").speed_iso == 3.0


def test_the_same_text_is_the_same_catalogue(own, tmp_path):
    """Kernels are kept for each design, so a design read twice must be the same."""
    first, second = Catalogue.load(own), Catalogue.load(own)
    assert first == second
    assert hash(first) == hash(second)
    own.write_text(OWN.replace("speed = 3", "speed = 4"), encoding="utf-8")
    assert Catalogue.load(own) != first


LIKE = '[a]\nlike = "panchromatic-100"\n'
WRONG = {
    '[a]\nlike = "panchromatic-10"': r"\[a\]: like: no material is called .*Did you mean 'panchrom",
    '[a]\nlike = "a"': "like is its own name",
    '[a]\nlike = "b"\n[b]\nlike = "a"': "leads back to itself: a -> b -> a",
    "a = 3": r"\[a\] is 3; a material is a table",
    '[a]\nlike = "colour-negative"\nspede = 3': "unknown key 'spede'. Did you mean 'speed'",
    LIKE + 'speed = "100"': "speed is '100'; it must be a plain number",
    LIKE + "speed = 0": "speed is 0; it must be 0.01 to 100000",
    LIKE + "speed = true": "speed is True; it must be a plain number",
    LIKE + 'process = "positive"': "process is 'positive'; .*negative, rev",
    LIKE + "[a.curve]\ngama = 1": r"\[curve\]: unknown key 'gama'.*'gamma'",
    LIKE + "[a.curve]\nd_max = 0.3": "d_max is 0.3; it must be more than",
    LIKE + "[a.curve]\ngamma = -1": "gamma is -1; it must be 0.1 to 10",
    LIKE + 'spectrum = "red"': r"\[spectrum\] is 'red'; .*photo",
    LIKE + "[a.spectrum]\nfrom_nm = 600\nto_nm = 500": "to_nm is 500; it must",
    LIKE + "[a.spectrum]\nfrom_nm = 0.4\nto_nm = 0.5": "from_nm is 0.4; .*in nm",
    LIKE + "[a.spectrum]\nwavelength_nm = [400, 500]\nsensitivity = [1]": "equal",
    LIKE + "[a.spectrum]\nwavelength_nm = [500, 400]\nsensitivity = [1, 1]": "rise",
    LIKE + "[a.spectrum]\nwavelength_nm = [400, 500]\nsensitivity = [0, 0]": "zero",
    LIKE + "mask_density = [0.1, 0.2]": "mask_density .* three densities",
    LIKE + "[a.reciprocity]\nexponent = 0.9": "exponent is 0.9; it must be",
    "[a]\nspeed = 3": "process is missing; write for example: process = ",
    '[a]\nprocess = "negative"\nspeed = 3': "spectrum is missing",
    "": "is empty",
    "[a\nb": "is not valid TOML",
}


@pytest.mark.parametrize("text", WRONG, ids=lambda text: text.replace("\n", " ")[:50])
def test_a_wrong_file_is_refused_in_one_line(text, tmp_path):
    path = tmp_path / "own.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(DesignError, match=WRONG[text]) as caught:
        Catalogue.load(path)
    message = str(caught.value)
    assert "own.toml" in message
    assert "\n" not in message
    assert message.isascii()


def test_a_missing_file_is_refused(tmp_path):
    with pytest.raises(
        DesignError, match=r"none.toml: no such file; give the path of a file of mat"
    ):
        Catalogue.load(tmp_path / "none.toml")


# In designs and on the line -------------------------------------------------------------------


def design(folder, extra):
    path = folder / "box.toml"
    path.write_text(
        'focal_length = "20 mm"\n[hole]\ndiameter = "0.5 mm"\n'
        f'[film]\nwidth = "8 mm"\nheight = "6 mm"\n{extra}\n',
        encoding="utf-8",
    )
    return path


def test_a_design_names_its_own_materials(own, tmp_path):
    camera = pinsim.Camera.load(
        design(tmp_path, f'material = "my-paper"\nmaterials = "{own.name}"')
    )
    assert camera.material.speed_iso == 3.0
    assert camera.material_name == "my-paper"
    assert hash(camera) == hash(replace(camera))


def test_a_design_whose_materials_are_wrong_says_where(own, tmp_path):
    own.write_text("[my-paper]\nlike = 3\n", encoding="utf-8")
    path = design(tmp_path, f'material = "my-paper"\nmaterials = "{own.name}"')
    with pytest.raises(
        DesignError, match=r"box.toml \[film\].*my-materials.toml \[my-paper\]: like"
    ):
        pinsim.Camera.load(path)


def test_an_unknown_material_of_a_design_names_what_its_file_adds(own, tmp_path):
    path = design(tmp_path, f'material = "my-papr"\nmaterials = "{own.name}"')
    with pytest.raises(
        DesignError, match=r"called 'my-papr'. Did you mean 'my-paper'.*adds my-paper"
    ):
        pinsim.Camera.load(path)


def test_the_line_takes_a_file_of_materials(own, run, camera_file):
    code, out, _ = run(
        "numbers", camera_file, "--materials", own, "--material", "my-paper", "--json"
    )
    assert code == 0
    assert json.loads(out)["material"] == "my-paper"
    code, _, err = run("numbers", camera_file, "--material", "my-paper")
    assert code == 2
    assert err.startswith("pinsim: no material is called 'my-paper'")


def test_materials_lists_all_and_tells_all_of_one(run, own):
    code, out, err = run("materials")
    assert (code, err) == (0, "")
    for name in MATERIAL_NAMES:
        assert f"\n{name} " in out
    assert max(len(line) for line in out.splitlines()) <= 100
    code, out, _ = run("materials", "--materials", own)
    assert "my-paper" in out
    assert "old paper from the attic (" in out
    code, out, _ = run("materials", "panchromatic-400")
    assert code == 0
    assert "10 s -> 20 s" in out  # HARMAN technology: 20.4 s
    assert "ISO 6:1993" in out
    code, _, err = run("materials", "panchro")
    assert code == 2
    assert "no material is called 'panchro'" in err


def test_materials_as_json(run):
    _, out, _ = run("materials", "--json")
    found = {one["name"]: one for one in json.loads(out)}
    assert set(found) == set(MATERIAL_NAMES)
    assert found["panchromatic-100"]["exposure_index"] == 100.0
    assert found["colour"]["curve"] is None
    _, out, _ = run("materials", "digital-sensor", "--json")
    assert json.loads(out)["sensor"]["pixel_pitch_um"] == 6.0


def test_blue_sensitive_paper_is_sharper_at_a_smaller_hole():
    """The best hole goes with the root of the wavelength: d = k root(lambda f), Petzval 1857 and all
    after him."""
    paper, film = (
        pinsim.best_diameter_mm(60.0, material=name)
        for name in ("blue-sensitive-paper", "panchromatic-100")
    )
    blue, middle = (
        material(name).light.mean_nm for name in ("blue-sensitive-paper", "panchromatic-100")
    )
    assert paper / film == pytest.approx(math.sqrt(blue / middle), rel=0.03)
