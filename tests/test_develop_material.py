"""What a material shows of a scene: seeing, exposing, density, prints, grain."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import spearmanr

import pinsim
from pinsim.errors import DesignError
from pinsim.material import MATERIAL_NAMES, Grain, Sensor, material
from pinsim.render.develop import develop_material, light_from_density, seen_light
from pinsim.render.expose import Exposed, expose
from pinsim.render.grain import add_grain, add_sensor_noise, noise_field
from pinsim.render.printing import ISO_RANGES, print_of

MID = 0.18
NEGATIVES = [name for name in MATERIAL_NAMES if material(name).process == "negative"]
CURVED = [name for name in MATERIAL_NAMES if material(name).curve]
COLOUR = ("colour", "colour-negative", "colour-reversal", "digital-sensor")
FILM = pinsim.Film(width_mm=8.0, height_mm=6.0)
BOX = pinsim.Camera(focal_length_mm=60.0, hole=pinsim.Hole(diameter_mm=0.3), film=FILM)


def camera_with(name, **changes):
    return replace(BOX, material_name=name, **changes)


def exposed_as(name, stops=0.0, *, metered_s=0.1):
    """Return a material exposed right, or some stops off, in a light that asks for a metered time."""
    one = camera_with(name)
    ev = math.log2(one.f_number**2 * 100.0 / (metered_s * one.material.speed_iso))
    need = expose(one, time_s=1.0, ev=ev).needed_s
    return expose(one, time_s=need * 2.0**stops, ev=ev)


def scene_of(*colours):
    """Return a scene of upright stripes of sRGB colours, linear light inside."""
    codes = np.array(colours, np.float64) / 255.0
    linear = np.where(codes <= 0.04045, codes / 12.92, ((codes + 0.055) / 1.055) ** 2.4)
    light = np.repeat(linear[None, :, :], 60, axis=0).repeat(60, axis=1).astype(np.float32)
    return pinsim.Scene.from_light(light, horizontal_view_deg=9.0)


# Seeing ---------------------------------------------------------------------------------------

BRICK, SKY = (190, 105, 80), (98, 122, 157)  # sky: the usual colour chart's, from memory


def stripes(name, **options):
    """Return the codes of a brick and a sky stripe as a material shows them."""
    picture = pinsim.preview(scene_of(BRICK, SKY), camera_with(name), width_px=64, **options)
    codes = picture.codes()
    middle = codes.shape[0] // 2
    return codes[middle, codes.shape[1] // 4], codes[middle, 3 * codes.shape[1] // 4]


@pytest.mark.parametrize("options", [{}, {"time_s": "auto", "ev": 15.0}], ids=["plain", "exposed"])
def test_brick_and_sky_change_places_on_blue_sensitive_paper(options):
    """Blue-sensitive emulsions draw red dark and sky pale, panchromatic ones about as the eye sees
    (Great Soviet Encyclopedia, "Orthochromatic materials")."""
    brick, sky = (int(one[0]) for one in stripes("panchromatic-100", **options))
    assert brick > sky
    for name in ("blue-sensitive-paper", "variable-contrast-paper", "orthochromatic-80"):
        brick, sky = (int(one[0]) for one in stripes(name, **options))
        assert sky > brick + 20, name
    gap = {
        name: int(np.subtract(*(one.astype(int)[0] for one in stripes(name)[::-1])))
        for name in ("orthochromatic-80", "blue-sensitive-paper")
    }
    assert gap["blue-sensitive-paper"] > gap["orthochromatic-80"]


@pytest.mark.parametrize("name", COLOUR)
@pytest.mark.parametrize("stops", [-2.0, 0.0, 2.0])
def test_grey_stays_grey_in_colour(name, stops):
    """Three alike curves are neutral by definition."""
    codes = develop_material(
        np.repeat(np.geomspace(0.003, 3.0, 50, dtype=np.float32)[:, None, None], 3, axis=2),
        exposed=exposed_as(name, stops, metered_s=20.0),
    )
    assert (codes == codes[..., :1]).all()
    assert np.ptp(codes.astype(int)) > 60


@pytest.mark.parametrize("name", COLOUR)
def test_colours_stay_what_they_are(name):
    """A red thing is red, a blue one blue, in a right exposure."""
    brick, sky = stripes(name, time_s="auto", ev=15.0)
    assert brick[0] > brick[1] > brick[2]
    assert sky[2] > sky[1] > sky[0]


# Exposing -------------------------------------------------------------------------------------


def test_lux_seconds_are_those_of_photometry():
    """E = pi L/(4 N^2), L = K 2^EV/100, K = 12.5 (ISO 2720): 9.817/S lx s at the metered time.

    That is 0.27 stop more than behind a lens, 8.1/S (ANSI PH3.49, q = 0.65).
    """
    for name in ("panchromatic-100", "panchromatic-400", "blue-sensitive-paper"):
        speed = material(name).speed_iso
        exposed = exposed_as(name)
        mid = float(exposed.lux_seconds(np.array(MID)))
        assert mid == pytest.approx(9.817 / speed, rel=1e-3)
        assert math.log2(mid / (0.65 * 12.5 / speed)) == pytest.approx(0.27, abs=0.01)
        assert exposed.lux_seconds(np.array(1.0)) == pytest.approx(9.817 / speed / MID, rel=1e-3)


def test_a_right_mid_tone_lies_well_above_the_speed_point():
    """log10(9.817/0.8) = 1.09: 3.6 stops above the speed point of ISO 6."""
    found = float(exposed_as("panchromatic-100").log_exposure(np.array(MID)))
    assert found == pytest.approx(math.log10(9.817 / 0.8), abs=1e-3)


def test_the_corrected_time_gives_the_mid_tone_its_density():
    """HARMAN technology: P = 1.31 makes 20.4 s of 10 s metered, and the negative is as a short one."""
    exposed = exposed_as("panchromatic-400", metered_s=10.0)
    assert exposed.needed_s == pytest.approx(20.4, abs=0.05)
    short = exposed_as("panchromatic-400", metered_s=0.1)
    curve = material("panchromatic-400").curve
    long_density, short_density = (
        float(curve.density(one.log_exposure(np.array(MID)))) for one in (exposed, short)
    )
    assert long_density == pytest.approx(short_density, abs=1e-6)


def test_dim_places_lose_what_their_own_longer_time_would_cost():
    """Two stops dimmer asks for 4 x 10 s = 40 s metered; P = 1.26 makes that 40^1.26 s, so 40^-0.26 of
    the speed is left. Computed by hand from the published exponent."""
    exposed = exposed_as("panchromatic-100", metered_s=10.0)
    kept = exposed.efficiency(np.array([MID, MID / 4.0]))
    np.testing.assert_allclose(kept, [10.0**-0.26, 40.0**-0.26], rtol=1e-6)


@pytest.mark.parametrize("name", ["panchromatic-100", "colour-reversal"])
def test_contrast_rises_with_long_exposures_only(name):
    """Makers advise to develop less after long exposures, as shadows lose more (their tables)."""
    tones = np.array([MID / 4.0, MID * 2.0])

    def log_range(metered_s):
        return float(np.ptp(exposed_as(name, metered_s=metered_s).log_exposure(tones)))

    assert log_range(0.01) == pytest.approx(math.log10(8.0), abs=1e-9)
    assert log_range(30.0) > 1.2 * math.log10(8.0)
    assert exposed_as("colour", metered_s=1000.0).efficiency(tones) == pytest.approx([1.0, 1.0])


def test_what_a_time_is_worth_is_said_with_all_it_assumes():
    camera = camera_with("panchromatic-400", film=pinsim.Film(width_mm=100.0, height_mm=100.0))
    picture = pinsim.preview(scene_of(BRICK, SKY), camera, time_s=40.8, ev=10.0, width_px=64)
    told = [note for note in picture.notes if "metered" in note]
    assert len(told) == 1
    for words in (
        "1.0 stops over",
        "EV 10",
        "index 400 (+-0.3 stops)",
        "10 s metered",
        "20 s corr",
    ):
        assert words in told[0]
    assert any("in the far corner" in note and "more are lost" in note for note in picture.notes)
    # 40 000 / (2^10 x 4) = 9.77 s, to the power 1.31: 19.8 s.
    assert picture.gain == pytest.approx(40.8 / 19.8, rel=0.01)


def test_a_negative_of_what_makes_none_is_said_to_be_an_inversion():
    for name, said in (("colour-reversal", True), ("colour-negative", False)):
        camera = camera_with(name, tone="negative")
        notes = pinsim.preview(
            scene_of(BRICK, SKY), camera, time_s="auto", ev=15.0, width_px=64
        ).notes
        assert any("makes no negative" in note for note in notes) == said


def test_auto_is_the_corrected_time():
    picture = pinsim.preview(
        scene_of(BRICK, SKY), camera_with("panchromatic-400"), time_s="auto", ev=10.0, width_px=64
    )
    assert picture.exposed is not None
    assert picture.exposed.time_s == pytest.approx(20.0)  # 9.8 s metered, rounded to a watch
    assert abs(math.log2(picture.gain)) < 1.0 / 6.0 + 1e-6


def test_exposure_itself_knows_no_time():
    scene, camera = scene_of(BRICK, SKY), camera_with("panchromatic-100")
    plain = pinsim.preview(scene, camera, width_px=64)
    timed = pinsim.preview(scene, camera, width_px=64, time_s=100.0, ev=12.0)
    np.testing.assert_array_equal(plain.exposure, timed.exposure)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"time_s": "auto"}, "a time needs the light"),
        ({"time_s": -1.0, "ev": 12.0}, "give more than 0 s"),
        ({"grain_seed": 1}, "grain is drawn in what the material shows after a time"),
    ],
)
def test_what_cannot_be_exposed_is_refused(options, words):
    with pytest.raises(DesignError, match=words):
        pinsim.preview(scene_of(BRICK, SKY), BOX, width_px=64, **options)


# Showing --------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def lane():
    """Return every exposure of a real scene, a grey one."""
    camera = replace(pinsim.Camera.load("sample:square-box"), material_name="panchromatic-100")
    picture = pinsim.preview(pinsim.Scene.load("sample:lane"), camera, width_px=120)
    values = picture.exposure[np.isfinite(picture.exposure)].astype(np.float64)
    return np.unique(values[values > 1e-3])


@pytest.mark.parametrize("name", CURVED)
def test_a_print_gives_the_scenes_order_of_tones_back(name, lane):
    """Whatever negative and paper do to contrast, brighter stays brighter: rank correlation 1."""
    exposed = exposed_as(name, metered_s=5.0)
    shown = seen_light(lane, exposed, tone="positive")
    used = shown < 1.0 - 1e-9 if material(name).process == "negative" else shown > 0.0
    assert used.mean() > 0.9
    assert spearmanr(lane[used], shown[used]).statistic == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("name", NEGATIVES)
def test_a_negative_turns_the_order_round(name, lane):
    exposed = exposed_as(name, metered_s=5.0)
    shown = seen_light(lane, exposed, tone="negative")
    assert spearmanr(lane, shown).statistic == pytest.approx(-1.0, abs=1e-4)


@pytest.mark.parametrize("name", NEGATIVES)
def test_a_fitting_print_shows_the_mid_tone_as_it_was(name):
    """The paper is chosen so; its range is one that papers have been made in (ANSI PH2.2-1966: log
    ranges 0.50 to 1.70, Focal Encyclopedia of Photography, p. 679)."""
    exposed = exposed_as(name)
    around = np.array([MID * 0.98, MID, MID * 1.02])
    shown = seen_light(around, exposed, tone="positive")
    assert shown[1] == pytest.approx(MID, abs=0.01)
    gradient = np.log(shown[2] / shown[0]) / np.log(1.02 / 0.98)
    paper = print_of(material(name)).paper
    assert ISO_RANGES[0] - 0.1 <= paper.iso_range <= ISO_RANGES[1] + 0.1
    if name not in ("green-sensitive-film", "blue-sensitive-paper", "variable-contrast-paper"):
        assert gradient == pytest.approx(1.0, abs=0.12)
    else:  # no paper is soft enough for these
        assert paper.iso_range == pytest.approx(ISO_RANGES[1], abs=0.1)
        assert gradient > (1.5 if material(name).support == "paper" else 1.1)


@pytest.mark.parametrize("name", NEGATIVES)
def test_thin_negatives_are_clear_and_print_dark_thick_ones_dense_and_print_pale(name):
    """Two stops under and over, seen on the light table and printed as a right one would be."""
    tones = np.array([0.02, MID, 1.0])
    under, right, over = (exposed_as(name, stops) for stops in (-2.0, 0.0, 2.0))
    on_table = [seen_light(tones, one, tone="negative") for one in (under, right, over)]
    printed = [seen_light(tones, one, tone="positive") for one in (under, right, over)]
    assert (on_table[0] > on_table[1]).all()
    assert (on_table[1] >= on_table[2]).all()
    assert (printed[0] < printed[1] + 1e-6).all()
    assert (printed[1] <= printed[2]).all()
    # Shadows sink to base and fog and print as black as paper gets; highlights run together.
    clear = seen_light(np.array(0.0), right, tone="negative")
    assert on_table[0][0] == pytest.approx(float(clear), rel=0.06)
    assert printed[0][0] < 0.03
    assert printed[2][2] > 0.97
    assert printed[2][2] - seen_light(np.array(0.5), over, tone="positive") < 0.02


def test_film_that_saw_nothing_shows_its_base():
    """Base and fog just below the light table's white; orange for colour negatives (usual practice)."""
    for name in NEGATIVES:
        one = exposed_as(name)
        layers = [float(seen_light(np.array(0.0), one, tone="negative", layer=k)) for k in range(3)]
        assert layers[0] == pytest.approx(0.9, abs=0.01), name
        if name == "colour-negative":
            assert layers[0] > 1.8 * layers[1] > 2.5 * layers[2]
        else:
            assert layers[0] == layers[1] == layers[2]


@pytest.mark.parametrize("name", ["colour-reversal", "direct-positive-paper"])
def test_reversal_material_is_seen_as_it_is(name):
    """A slide's light is 10^-D over that of its clear base, and falls short when underexposed."""
    exposed = exposed_as(name)
    curve = material(name).curve
    tones = np.geomspace(0.01, 2.0, 50)
    density = curve.density(exposed.log_exposure(tones))
    shown = seen_light(tones, exposed, tone="positive")
    np.testing.assert_allclose(-np.log10(shown), density - curve.base_fog, atol=1e-9)
    assert (seen_light(tones, exposed_as(name, -1.0), tone="positive") < shown).all()


def test_a_sensor_is_straight_until_it_is_full():
    """ISO 12232, from memory: full at 78/S lx s, half a stop above white (78/9.817 x 0.18 = 1.43)."""
    exposed = exposed_as("digital-sensor")
    tones = np.linspace(0.0, 3.0, 301)
    shown = seen_light(tones, exposed, tone="positive")
    np.testing.assert_allclose(shown, np.minimum(tones, 78.0 / 9.8175 * MID), rtol=1e-4, atol=1e-8)


@pytest.mark.parametrize("stops", [-2.0, 0.0, 1.0])
def test_the_plain_record_is_the_photo_as_ever(stops):
    """sRGB of linear light cut at white (IEC 61966-2-1)."""
    tones = np.linspace(0.0, 1.5, 200, dtype=np.float32).reshape(20, 10, 1).repeat(3, axis=2)
    codes = develop_material(tones, exposed=exposed_as("colour", stops))
    light = np.clip(tones.astype(np.float64) * 2.0**stops, 0.0, 1.0)
    encoded = np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055)
    assert np.abs(codes - np.round(255.0 * encoded)).max() <= 1


@pytest.mark.parametrize("bits", [8, 16])
@pytest.mark.parametrize("tone", ["positive", "negative"])
@pytest.mark.parametrize("name", MATERIAL_NAMES)
def test_the_table_gives_what_the_formula_does(name, tone, bits):
    layers = len(material(name).channels)
    rng = np.random.default_rng(7)
    tones = np.exp(rng.uniform(-8.0, 1.5, (40, 50, layers))).astype(np.float32)
    exposed = exposed_as(name, 1.0, metered_s=3.0)
    codes = develop_material(tones, exposed=exposed, tone=tone, bits=bits)
    light = np.stack(
        [seen_light(tones[..., k], exposed, tone=tone, layer=k) for k in range(layers)], axis=-1
    )
    light = np.clip(light, 0.0, 1.0)
    encoded = np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055)
    if tone == "negative" and material(name).process != "negative":
        encoded = 1.0 - encoded
    top = (1 << bits) - 1
    assert codes.dtype == (np.uint8 if bits == 8 else np.uint16)
    assert np.abs(codes - top * encoded).max() <= (1.0 if bits == 8 else 60.0)


def test_nothing_strange_comes_of_strange_exposures(frozen):
    tones = np.full((8, 8, 1), 0.18, np.float32)
    tones[0, 0], tones[0, 1], tones[0, 2] = np.nan, 0.0, 1e30
    codes = develop_material(frozen(tones), exposed=exposed_as("panchromatic-100"))
    assert codes[0, 0] in (112, 168)
    assert codes[0, 1] < 40
    assert codes[0, 2] == 255
    assert codes[5, 5] == pytest.approx(118, abs=3)  # sRGB of mid-grey


def test_a_wavelength_leaves_the_curve_in_place():
    """A filter changes what is seen, not how density follows exposure."""
    camera = camera_with("panchromatic-100")
    scene = scene_of((128, 128, 128), (40, 40, 40))
    options = {"width_px": 64, "time_s": 0.5, "ev": 15.0}
    green = pinsim.preview(scene, camera, wavelength_nm=550.0, **options).codes()
    white = pinsim.preview(scene, camera, **options).codes()
    assert np.abs(green[30, 12].astype(int) - white[30, 12].astype(int)).max() <= 1


# Grain ----------------------------------------------------------------------------------------

COARSE = Grain(sigma_density=0.02, correlation_um=9.0)


def test_a_hole_of_48_um_sees_the_grain_that_was_told():
    """Granularity is the spread seen through a hole of 48 um (usual measure, from memory)."""
    pitch_um = 4.0
    field = noise_field((600, 600), pitch_um=pitch_um, grain=COARSE, rng=np.random.default_rng(3))
    reach = np.arange(-6, 7) * pitch_um
    hole = (reach[:, None] ** 2 + reach[None, :] ** 2 <= 24.0**2).astype(float)
    hole /= hole.sum()
    size = hole.shape[0]
    seen = [
        float((field[r : r + size, c : c + size] * hole).sum())
        for r in range(0, 580, 13)
        for c in range(0, 580, 13)
    ]
    # 1900 spots know their spread to 2 %; the drawn hole is made of 4 um squares.
    assert np.std(seen) == pytest.approx(0.02, rel=0.07)


def test_larger_pixels_flicker_less_by_selwyns_law():
    """sigma root(area) is constant (Selwyn 1935, from memory)."""
    spread = {
        pitch: float(
            noise_field(
                (500, 500), pitch_um=pitch, grain=COARSE, rng=np.random.default_rng(1)
            ).std()
        )
        for pitch in (100.0, 200.0, 400.0)
    }
    assert spread[100.0] / spread[200.0] == pytest.approx(2.0, rel=0.03)
    assert spread[100.0] / spread[400.0] == pytest.approx(4.0, rel=0.03)
    fine = replace(COARSE, correlation_um=0.5)
    field = noise_field((500, 500), pitch_um=200.0, grain=fine, rng=np.random.default_rng(1))
    area = math.pi * 24.0**2
    assert float(field.std()) == pytest.approx(0.02 * math.sqrt(area) / 200.0, rel=0.03)


def test_small_pixels_see_grains_that_hang_together():
    field = noise_field((400, 400), pitch_um=2.0, grain=COARSE, rng=np.random.default_rng(1))
    beside = float(np.corrcoef(field[:, 1:].ravel(), field[:, :-1].ravel())[0, 1])
    far = float(np.corrcoef(field[:, 60:].ravel(), field[:, :-60].ravel())[0, 1])
    assert beside > 0.9
    assert abs(far) < 0.05


def test_grain_is_in_density_and_grows_with_it():
    """None in clear film, and by the root of density (random dots, from memory)."""
    density = np.zeros((300, 400, 1), np.float32)
    density[:, 100:] = 0.25
    density[:, 250:] = 1.0
    noisy = add_grain(density, pitch_mm=0.05, grain=COARSE, rng=np.random.default_rng(5))
    assert (noisy[:, :100] == 0.0).all()
    thin, dense = noisy[:, 100:250].std(), noisy[:, 250:].std()
    assert dense / thin == pytest.approx(2.0, rel=0.05)


def test_grain_of_colour_is_neutral_on_average_and_differs_between_layers():
    density = np.full((300, 300, 3), 1.0, np.float32)
    noisy = add_grain(density, pitch_mm=0.05, grain=COARSE, rng=np.random.default_rng(5))
    means = noisy.mean(axis=(0, 1))
    np.testing.assert_allclose(means, 1.0, atol=1e-5)
    layers = np.corrcoef(noisy.reshape(-1, 3).T)
    assert np.abs(layers - np.eye(3)).max() < 0.03


@pytest.mark.parametrize("name", ["panchromatic-400", "colour-negative", "digital-sensor"])
def test_the_same_seed_draws_the_same_grain(name):
    tones = np.full((60, 60, len(material(name).channels)), 0.3, np.float32)
    exposed = exposed_as(name)

    def drawn(seed):
        rng = np.random.default_rng(seed)
        return develop_material(tones, exposed=exposed, pitch_mm=0.02, rng=rng).astype(int)

    np.testing.assert_array_equal(drawn(4), drawn(4))
    assert (drawn(4) != drawn(5)).any()
    plain = develop_material(tones, exposed=exposed).astype(int)
    assert abs(drawn(4).mean() - plain.mean()) < 1.0
    assert drawn(4).std() > 0.1


def test_a_saved_picture_has_the_grain_that_is_shown():
    picture = pinsim.preview(
        scene_of(BRICK, SKY),
        camera_with("panchromatic-400"),
        time_s="auto",
        ev=14.0,
        width_px=200,
        grain_seed=2,
    )
    np.testing.assert_array_equal(picture.codes(), picture.codes())
    smooth = replace(picture, grain_seed=None)
    assert (picture.codes() != smooth.codes()).any()
    assert picture.codes().shape[2] == 1


def test_a_sensors_noise_is_counted_light():
    """n electrons flicker by root n (Poisson): 10 000 of 40 000 by 1 %, of averaged pixels by less."""
    sensor = Sensor(
        saturation_lxs=78.0,
        pixel_pitch_um=5.0,
        full_well_electrons=40_000.0,
        read_noise_electrons=0.0,
    )
    filled = np.full((300, 300, 1), 0.25, np.float32)
    for pitch_mm, share in ((0.005, 0.01), (0.010, 0.005)):
        noisy = add_sensor_noise(
            filled, pitch_mm=pitch_mm, sensor=sensor, rng=np.random.default_rng(1)
        )
        assert float(noisy.std() / noisy.mean()) == pytest.approx(share, rel=0.03)


def test_a_sensor_has_no_densities():
    exposed = exposed_as("digital-sensor")
    assert isinstance(exposed, Exposed)
    with pytest.raises(ValueError, match="has no densities"):
        light_from_density(np.array(1.0), exposed, tone="positive")
    with pytest.raises(ValueError, match="gives no negative to print"):
        print_of(material("colour"))


# On the line ----------------------------------------------------------------------------------


def test_the_line_exposes_and_says_so(run, photo, camera_file):
    arguments = ("preview", photo, camera_file, "--view", "40deg", "--width", 80)
    given = ("--time", "auto", "--ev", 9, "--material", "panchromatic-100", "--grain")
    code, out, err = run(*arguments, *given, "-o", "a.png")
    assert (code, err) == (0, "")
    assert "metered for EV 9, panchromatic-100 at index 100" in out
    code, _, err = run(*arguments, "--time", "auto", "-o", "b.png")
    assert code == 2
    assert "a time needs the light it is meant for" in err
    code, _, err = run(*arguments, "--time", "soon", "--ev", 9, "-o", "b.png")
    assert code == 2
    assert "or 'auto'" in err
    code, _, err = run(*arguments, "--grain", "-o", "b.png")
    assert code == 2
    assert "for example --time auto" in err
