"""How long: light to EV, metered and corrected times, the corner, rounding; and the command."""

import itertools
import json
import math

import numpy as np
import pytest

from pinsim import Camera, DesignError, Film, Hole, UnitError
from pinsim.exposure import auto_time_s, gain_of, metered_time_s, read_light, time_for, time_text
from pinsim.exposure.light import (
    LIGHT_NAMES,
    at_ev,
    ev_of_illuminance,
    ev_of_luminance,
    ev_of_reading,
    film_illuminance_lx,
    illuminance_of_ev,
    luminance_of_ev,
    usual_lights,
)
from pinsim.exposure.table import time_table
from pinsim.exposure.times import DIM, LONG, NO_DATA, light_share, round_time_s
from pinsim.units import time_s as read_time_s


def camera_of(f_number=200.0, material="colour", **options):
    """A box 100 mm deep; its film is small unless told, its plate thin."""
    film = options.pop("film", Film(width_mm=20.0, height_mm=20.0))
    hole = Hole(diameter_mm=100.0 / f_number, plate_thickness_mm=options.pop("plate_mm", 0.0))
    return Camera(focal_length_mm=100.0, hole=hole, film=film, material_name=material, **options)


# Light --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("ev", "luminance", "illuminance"),
    [
        (0, 0.125, 2.5),
        (5, 4.0, 80.0),
        (10, 128.0, 2560.0),
        (12, 512.0, 10_240.0),
        (15, 4096.0, 81_920.0),
    ],
)
def test_the_table_of_ev_at_iso_100(ev, luminance, illuminance):
    """K = 12.5, C = 250: the usual table of luminance and illuminance that follows from ISO 2720."""
    assert luminance_of_ev(ev) == pytest.approx(luminance, rel=1e-12)
    assert illuminance_of_ev(ev) == pytest.approx(illuminance, rel=1e-12)
    assert ev_of_luminance(luminance) == pytest.approx(ev, abs=1e-12)
    assert ev_of_illuminance(illuminance) == pytest.approx(ev, abs=1e-12)


@pytest.mark.parametrize(("time", "ev"), [(1 / 100, 14.64), (1 / 125, 14.97)])
def test_sunny_sixteen(time, ev):
    """f/16 and 1/S in sun: EV 14.64 for 1/100 s, 14.97 for 1/125 s (ANSI practice, from memory)."""
    assert ev_of_reading(16.0, time) == pytest.approx(ev, abs=0.005)


def test_sunny_sixteen_is_3200_candela():
    """With K = 12.5 sunny 16 is L = 3200 cd/m^2 (text of the ANSI meter standard)."""
    assert luminance_of_ev(ev_of_reading(16.0, 1 / 100)) == pytest.approx(3200.0, rel=1e-12)


@pytest.mark.parametrize("ev", [-3.0, 4.0, 9.5, 15.0])
@pytest.mark.parametrize("material", ["blue-sensitive-paper", "panchromatic-400"])
def test_the_reflected_light_equation(ev, material):
    """N^2 / t = L S / K, ISO 2720:1974, with its usual K = 12.5."""
    camera = camera_of(167.0, material)
    left = 167.0**2 / metered_time_s(camera, ev)
    right = 0.125 * 2.0**ev * camera.material.speed_iso / 12.5
    assert left == pytest.approx(right, rel=1e-12)


@pytest.mark.parametrize("speed", [("blue-sensitive-paper", 6.0), ("panchromatic-100", 100.0)])
def test_what_the_film_gets_behind_a_bare_hole(speed):
    """E = pi L / (4 N^2), so H = (pi/4) K / S = 9.817 / S lx s, whatever the light. Photometry.

    A meter's own q = 0.65 gives 8.1 / S behind glass (ANSI PH3.49): 0.27 stop less.
    """
    material, iso = speed
    camera = camera_of(250.0, material)
    for ev in (3.0, 14.0):
        lux = film_illuminance_lx(luminance_of_ev(ev), camera.f_number)
        exposure = lux * metered_time_s(camera, ev)
        assert exposure * iso == pytest.approx(9.817, abs=5e-4)
    assert math.log2(exposure * iso / (0.65 * 12.5)) == pytest.approx(0.27, abs=0.005)


@pytest.mark.parametrize(
    ("f_number", "time"),
    [(128.0, 0.5000), (167.0, 0.8511), (200.0, 1.2207), (250.0, 1.9073), (300.0, 2.7466)],
)
def test_times_in_the_sun(f_number, time):
    """EV 15, ISO 100: t = N^2 / 2^EV; sunny 16 with 1/100 s gives 1.28 times that."""
    assert metered_time_s(camera_of(f_number), 15.0) == pytest.approx(time, abs=5e-5)
    sunny = metered_time_s(camera_of(f_number), ev_of_reading(16.0, 1 / 100))
    assert sunny == pytest.approx(1.28 * time, rel=1e-4)


# Exposure values of scenes at ISO 100: table after ANSI PH2.7, as copied in an encyclopedia.
SCENES = {
    "snow-in-sun": (16, 16),
    "sand-in-sun": (16, 16),
    "sun": (15, 15),
    "hazy-sun": (14, 14),
    "bright-overcast": (13, 13),
    "overcast": (12, 12),
    "open-shade": (12, 12),
    "sunset": (12, 12),
    "night-street": (7, 8),
    "room": (5, 7),
    "moonlight": (-3, -2),
}


def test_every_word_stands_in_the_published_table():
    assert set(SCENES) == set(LIGHT_NAMES)


@pytest.mark.parametrize("name", SCENES)
def test_a_word_is_the_middle_of_its_range(name):
    low, high = SCENES[name]
    for spelling in (name, name.upper(), name.replace("-", " "), name.replace("-", "_")):
        light = read_light(spelling, "--light")
        assert (light.low_ev, light.high_ev, light.ev) == (low, high, (low + high) / 2)


READINGS = [
    "f/16, 1/125, ISO 100",
    "f/16 1/125",
    "f16 1/125s iso100",
    "F 16 1/125 sec ISO: 100",
    "1/125 s at f/16",
    "iso 100/21 f/16 1/125",
    "ISO 400, f/16, 1/500",
    "asa 25; f/8; 1/125",
    'f/256 2" iso 100',
    "f/16,1/125,iso100",
    "\N{LATIN SMALL LETTER F WITH HOOK}/16 1/125 s ISO 100/21\N{DEGREE SIGN}",
]


@pytest.mark.parametrize("text", READINGS)
def test_loose_spellings_of_a_reading(text):
    """All are EV 14.97, which is sunny 16 with 1/125 s; f/256 and 2 s are EV 15."""
    light = read_light(text, "--light")
    assert light.ev == pytest.approx(15.0 if "256" in text else 14.966, abs=0.001)
    assert light.note == ("" if "iso" in text.lower() or "asa" in text else "ISO 100 assumed")


@pytest.mark.parametrize(
    ("text", "ev"),
    [
        ("81920 lx", 15.0),
        ("81.92 klx", 15.0),
        ("7610.6 fc", 15.0),  # 1 fc is 10.764 lx
        ("4096 cd/m2", 15.0),
        ("4096 cd/m\N{SUPERSCRIPT TWO}", 15.0),
        ("4096 nits", 15.0),
        ("12000 lx", 12.229),
        ("400 cd/m2", 11.644),
        ("EV 12", 12.0),
        ("-2.5 ev", -2.5),
        ("EV 12 at ISO 400", 10.0),
    ],
)
def test_lux_candela_and_ev(text, ev):
    """E = 2.5 2^EV lx and L = 2^(EV - 3) cd/m^2 at ISO 100, from ISO 2720."""
    assert read_light(text, "--light").ev == pytest.approx(ev, abs=0.001)


REFUSED = [
    ("overcst", r"no light is called 'overcst'\. Did you mean 'overcast'\? Known: snow-in-sun, "),
    ("fog", r"no light is called 'fog'\. Known: "),
    ("", r"--light is ''; give a word such as sun"),
    ("12", r"'12' has no unit; write 'EV 12', '12 lx' or '12 cd/m2'"),
    ("f/16", r"'f/16' lacks a time, for example 1/125"),
    ("1/125", r"'1/125' lacks an f-number, for example f/16"),
    ("f/16 125", r"125 in 'f/16 125' could be 1/125 s or 125 s; write which"),
    ("f/5,6 1/125", r"numbers take a point, not a comma"),
    ("f/0 1/125", r"the f-number in 'f/0 1/125' is 0; it must be 0\.5 to 2000"),
    ("f/16 1/0", r"the time in 'f/16 1/0' is not possible"),
    ("f/16 1/125 iso 0", r"the ISO speed .* is 0"),
    ("0 lx", r"--light is 0 lx; a light is more than 0 lx"),
    ("-5 lx", r"--light is -5 lx"),
    ("1e30 lx", r"is 98\.3 EV at ISO 100; it must be -10 to 25"),
    ("400 cd", r"cannot read 'cd' in '400 cd'"),
    ("ev 12 f/16 1/125", r"has an EV and a reading; give one of them"),
]


@pytest.mark.parametrize(("text", "complaint"), REFUSED)
def test_a_light_that_cannot_be_read_is_refused_in_one_line(text, complaint):
    with pytest.raises(UnitError, match=complaint) as caught:
        read_light(text, "--light")
    assert "\n" not in str(caught.value)
    assert str(caught.value).isascii()


# Times --------------------------------------------------------------------------------------


def test_the_correction_comes_after_the_metered_time():
    """EV 4, f/126.49, ISO 400 and P = 1.31: 250 s metered. The maker's law, computed independently."""
    camera = camera_of(math.sqrt(16_000.0), "panchromatic-400")
    time = time_for(camera, at_ev(4.0))
    assert time.metered_s == pytest.approx(250.0, rel=1e-9)
    assert time.corrected_s == pytest.approx(250.0**1.31, rel=1e-9)
    assert time.outside == (NO_DATA,)


def test_a_filter_comes_before_the_correction():
    """A filter dims the light on the film: 10 s metered and factor 8 are 80^1.31 s, not 8 x 10^1.31."""
    camera = camera_of(200.0, "panchromatic-400")
    light = at_ev(math.log2(200.0**2 / 4.0 / 10.0))
    assert time_for(camera, light).corrected_s == pytest.approx(10.0**1.31, rel=1e-9)
    filtered = time_for(camera, light, filter_factor=8.0)
    assert filtered.corrected_s == pytest.approx(80.0**1.31, rel=1e-9)


def test_a_stop_is_twice_the_time_at_the_same_light():
    camera = camera_of(200.0, "panchromatic-100")
    needed_s = time_for(camera, at_ev(10.0)).corrected_s
    assert time_for(camera, at_ev(10.0), stops=1.0).corrected_s == pytest.approx(2.0 * needed_s)
    assert time_for(camera, at_ev(10.0), stops=-1.0).corrected_s == pytest.approx(0.5 * needed_s)
    assert gain_of(camera, time_s=2.0 * needed_s, ev=10.0) == pytest.approx(2.0)


# cos^4 of the angle in stops: Gardner, J. Res. NBS 39 (1947) 213 (citation from memory); computed.
FALLOFF_STOPS = [(10, 0.0883), (20, 0.3590), (30, 0.8301), (40, 1.5380), (45, 2.0), (55, 3.2078)]


def film_to(angle_deg):
    """A square film whose corner lies this far off the axis of a box 100 mm deep."""
    side = math.sqrt(2.0) * 100.0 * math.tan(math.radians(angle_deg))
    return Film(width_mm=side, height_mm=side)


@pytest.mark.parametrize(("angle_deg", "stops"), FALLOFF_STOPS)
def test_the_corner_needs_as_many_stops_more_as_cos4_says(angle_deg, stops):
    camera = camera_of(film=film_to(angle_deg))
    share = light_share(camera, *camera.far_corner)
    assert -math.log2(share) == pytest.approx(stops, abs=1e-4)
    cell = time_table([camera], [at_ev(13.0)]).cells[0][0]
    ratio = cell.corner.corrected_s / cell.centre.corrected_s
    assert math.log2(ratio) == pytest.approx(stops, abs=1e-4)


@pytest.mark.parametrize(("angle_deg", "clear"), [(10, 0.95511), (30, 0.85331), (45, 0.74706)])
def test_a_thick_plate_shades_the_corner_too(angle_deg, clear):
    """A plate a fifth of the hole thick: overlap of two circles, computed and by Monte Carlo."""
    camera = camera_of(plate_mm=0.1, film=film_to(angle_deg))
    cos4 = math.cos(math.radians(angle_deg)) ** 4
    share = light_share(camera, *camera.far_corner)
    assert share == pytest.approx(cos4 * clear, rel=2e-5)


def test_a_round_tin_is_even_around_and_dim_above():
    """Hole in the tin's own wall: cos^4 of the elevation only; 0.344363 at 40 degrees. Geometry."""
    height = 2.0 * 100.0 * math.tan(math.radians(40.0))
    # Elevation is measured from where the film is: above the middle it is 100 mm away.
    film = Film(width_mm=60.0, height_mm=height, bend_radius_mm=50.0)
    camera = camera_of(film=film)
    assert light_share(camera, 1.0, 0.0) == pytest.approx(1.0, abs=1e-9)
    assert light_share(camera, 0.0, 1.0) == pytest.approx(0.344363, abs=1e-6)


def test_the_corner_has_its_own_reciprocity():
    """Two stops darker at 45 degrees: 4 x 10 s metered are 40^1.26 s there, not 4 x 10^1.26."""
    camera = camera_of(200.0, "panchromatic-100", film=film_to(45.0))
    light = at_ev(math.log2(200.0**2 / 10.0))
    cell = time_table([camera], [light]).cells[0][0]
    assert cell.centre.corrected_s == pytest.approx(10.0**1.26, rel=1e-9)
    assert cell.corner.corrected_s == pytest.approx(40.0**1.26, rel=1e-5)


def test_a_corner_without_light_has_no_time():
    """A plate four times as thick as its hole is wide shuts off what lies beyond 14 degrees."""
    camera = camera_of(plate_mm=2.0, film=film_to(45.0))
    cell = time_table([camera], [at_ev(13.0)]).cells[0][0]
    assert cell.corner.text == "unlit"
    assert math.isinf(cell.corner.corrected_s)


ALL_TIMES_S = np.concatenate([np.geomspace(1e-4, 3e9, 20_001), np.arange(0.05, 200.0, 0.05)])


def test_rounding_costs_a_sixth_of_a_stop_at_most():
    worst = max(abs(math.log2(round_time_s(time) / time)) for time in ALL_TIMES_S)
    assert worst <= 1.0 / 6.0 + 1e-9


def test_rounding_keeps_the_order_and_what_is_round_already():
    rounded = [round_time_s(time) for time in sorted(ALL_TIMES_S)]
    assert all(a <= b for a, b in itertools.pairwise(rounded))
    assert [round_time_s(time) for time in rounded] == pytest.approx(rounded, rel=1e-12)


def test_no_two_times_have_one_text():
    """What is printed tells times apart up to a year, and a clock's parts never reach sixty."""
    texts = {}
    for time in np.geomspace(1e-3, 3e7, 20_001):
        texts.setdefault(time_text(time), set()).add(round_time_s(time))
    assert all(len(times) == 1 for times in texts.values())
    assert not {"60 s", "60 min"} & texts.keys()
    assert not [text for text in texts if text.endswith((" 60 s", " 60 min"))]


def test_a_text_reads_back_as_its_time():
    """Read by the program's own units, which know no days; a shutter's marks are rounded names."""
    for time in np.geomspace(0.01, 1.0e5, 3001):
        parts = time_text(time).split()
        read = sum(
            read_time_s(" ".join(pair), "text")
            for pair in zip(parts[::2], parts[1::2], strict=True)
        )
        assert abs(math.log2(read / round_time_s(time))) < (0.11 if time < 0.45 else 1e-9)


@pytest.mark.parametrize(
    ("time", "text"),
    [
        (1.47, "1.5 s"),
        (44.0, "45 s"),
        (151.0, "2 min 30 s"),
        (4700.0, "1 h 20 min"),
        (1 / 250, "1/250 s"),
        (1 / 16, "1/15 s"),
        (0.31, "0.3 s"),
        (59.0, "1 min"),
        (86_000.0, "24 h"),
        (2.6 * 86_400.0, "2 d 12 h"),
        (4e7, "1.3 years"),
        (math.inf, "never"),
    ],
)
def test_times_as_people_set_them(time, text):
    """By what clocks and shutters are marked with: common practice, no source."""
    assert time_text(time) == text


def test_marked_shutter_speeds_are_thirds_of_a_stop():
    """1/250 is the name of 2^-8 s and 1/60 of 2^-6 s: the usual markings, from memory."""
    assert round_time_s(1 / 250) == pytest.approx(2.0**-8)
    assert round_time_s(1 / 60) == pytest.approx(2.0**-6)


@pytest.mark.parametrize(("f_number", "stops"), [(200.0, 0), (100.0, 1), (50.0, 3), (20.0, 6)])
def test_too_short_by_hand(f_number, stops):
    """EV 15, ISO 100: 1.22, 0.305, 0.0763, 0.0122 s; whole stops that bring them to 0.5 s or more."""
    time = time_for(camera_of(f_number), at_ev(15.0))
    assert time.by_hand is (stops == 0)
    assert time.filter_stops_by_hand == stops
    if stops:
        assert time.corrected_s * 2**stops >= 0.5 > time.corrected_s * 2 ** (stops - 1)


def test_where_metering_and_film_fail_a_time_is_given_and_marked():
    """Under 1 lx (EV -1.3), over 10 h, beyond 100 s metered: each by itself, and none in daylight."""
    film, sensor = camera_of(200.0, "panchromatic-100"), camera_of(200.0, "digital-sensor")
    assert time_for(film, at_ev(13.0)).outside == ()
    assert time_for(film, at_ev(8.0)).outside == (NO_DATA,)
    assert time_for(camera_of(10.0, "digital-sensor"), at_ev(-1.4)).outside == (DIM,)
    assert time_for(camera_of(10.0, "digital-sensor"), at_ev(-1.3)).outside == ()
    assert time_for(sensor, at_ev(0.1)).outside == (LONG,)
    assert time_for(sensor, at_ev(0.2)).outside == ()
    moon = time_for(film, read_light("moonlight", "--light"))
    assert moon.outside == (DIM, LONG, NO_DATA)
    assert moon.corrected_s > 0.0


@pytest.mark.parametrize("ev", [15.0, 11.3, 6.0])
def test_the_automatic_time_is_the_corrected_one_rounded(ev):
    camera = camera_of(200.0, "panchromatic-400")
    needed_s = max(metered_time_s(camera, ev), metered_time_s(camera, ev) ** 1.31)
    if metered_time_s(camera, ev) < 1.0:
        needed_s = metered_time_s(camera, ev)
    assert auto_time_s(camera, ev) == pytest.approx(needed_s, rel=0.123)  # 1/6 stop
    assert auto_time_s(camera, ev) == round_time_s(auto_time_s(camera, ev))


def test_the_usual_lights_go_down_from_sun_to_moon():
    levels = [light.ev for light in usual_lights()]
    assert levels == sorted(levels, reverse=True)
    assert levels[0] == 16.0
    assert levels[-1] == -2.5


@pytest.mark.parametrize("factor", [0.5, math.nan, math.inf, 1e7, -8.0])
def test_a_filter_that_cannot_be_is_refused(factor):
    with pytest.raises(DesignError, match=r"the filter's factor is .*it must be 1 to 1000000"):
        time_table([camera_of()], usual_lights(), filter_factor=factor)


# The command --------------------------------------------------------------------------------

BOX = ("exposure", "sample:square-box")


@pytest.mark.parametrize("columns", [60, 80, 100, 140])
@pytest.mark.parametrize(
    "more",
    [
        (),
        ("--material", "panchromatic-100"),
        (
            "--material",
            "panchromatic-400",
            "--material",
            "blue-sensitive-paper",
            "--material",
            "colour",
        ),
        ("--hole", "0.2mm", "--hole", "0.3mm", "--hole", "0.4mm"),
    ],
)
def test_the_table_fits_the_terminal(run, monkeypatch, columns, more):
    monkeypatch.setenv("COLUMNS", str(columns))
    code, out, err = run(*BOX, *more)
    assert (code, err) == (0, "")
    assert out.isascii()
    assert max(map(len, out.splitlines())) <= columns
    for word in ("moonlight", "corner", "EI "):
        assert word in out


def test_columns_stand_below_each_other(run, monkeypatch):
    """Every unit of the main column ends at one place."""
    monkeypatch.setenv("COLUMNS", "80")
    _, out, _ = run(*BOX)
    rule = next(line for line in out.splitlines() if line.startswith("---"))
    starts = [i for i, letter in enumerate(rule) if letter == "-" and rule[i - 1 : i] != "-"]
    rows = out.splitlines()[out.splitlines().index(rule) + 1 :][:11]
    for start in starts[1:]:
        assert all(row[start - 2 : start].strip() == "" for row in rows)


def test_the_rows_tell_what_was_asked(run):
    """Sun through f/200 at ISO 100 is 1.2207 s (t = N^2 / 2^EV), three stops of filter 9.766 s."""
    _, out, _ = run(*BOX, "--light", "sun", "--json")
    time = json.loads(out)["rows"][0]["times"][0]["centre"]
    assert time["corrected_s"] == pytest.approx(1.2207, abs=5e-5)
    assert (time["set_s"], time["text"]) == (1.2, "1.2 s")
    for filter_ in (("--filter-factor", "8"), ("--filter-stops", "3")):
        _, out, _ = run(*BOX, "--light", "sun", "--json", *filter_)
        time = json.loads(out)["rows"][0]["times"][0]["centre"]
        assert time["metered_s"] == pytest.approx(9.7656, abs=5e-5)


def test_every_material_and_hole_gets_its_column(run):
    _, out, _ = run(
        *BOX, *("--material", "panchromatic-100", "--material", "blue-sensitive-paper"),
        *("--hole", "0.2mm", "--hole", "0.4mm", "--json"),
    )  # fmt: skip
    columns = json.loads(out)["columns"]
    assert [(one["hole_mm"], one["material"]) for one in columns] == [
        (0.2, "panchromatic-100"),
        (0.2, "blue-sensitive-paper"),
        (0.4, "panchromatic-100"),
        (0.4, "blue-sensitive-paper"),
    ]
    assert len({one["title"] for one in columns}) == 4


def test_assumptions_are_said(run, monkeypatch):
    monkeypatch.setenv("COLUMNS", "300")
    _, out, _ = run(
        *BOX, "--material", "panchromatic-100", "--light", "f/16 1/125", "--light", "room"
    )
    assert "note: light: f/16, 1/125 s, ISO 100 is EV 15 at ISO 100; ISO 100 assumed" in out
    assert "note: light: room is EV 6 at ISO 100 (EV 5 to 7, its middle)" in out
    assert (
        "panchromatic-100: EI 100, correction metered^1.26 above 1 s, known to 100 s metered" in out
    )
    assert "* outside the data (beyond what is known of its correction)" in out
    assert "f/200" in out


def test_an_unlit_corner_can_be_told_as_json(run):
    code, out, _ = run(*BOX, "--plate", "2mm", "--light", "sun", "--json")
    assert code == 0
    assert json.loads(out)["rows"][0]["times"][0]["corner"]["corrected_s"] is None
    assert json.loads(out)["columns"][0]["corner_stops_darker"] is None
    assert "Infinity" not in out


@pytest.mark.parametrize(
    ("more", "complaint"),
    [
        (("--light", "fog"), "--light: no light is called 'fog'"),
        (("--filter-factor", "8", "--filter-stops", "3"), "tell the same; give one of them"),
        (("--filter-stops", "-1"), "--filter-stops is -1; it must be 0 to 19"),
        (("--filter-stops", "nan"), "--filter-stops is nan"),
        (("--filter-factor", "0.5"), "the filter's factor is 0.5"),
        (("--material", "tin"), "no material is called 'tin'"),
    ],
)
def test_what_is_wrong_is_said_in_one_line(run, more, complaint):
    code, out, err = run(*BOX, *more)
    assert (code, out) == (2, "")
    assert complaint in err
    assert err.count("\n") == 1


def test_preview_takes_the_light_in_words(run, photo, camera_file):
    """hazy-sun is EV 14 (table after ANSI PH2.7), so the pictures are the same."""
    same = ("--view", "40deg", "--wavelength", "550nm", "--time", "1s", "--width", "60")
    for light, name in ((("--light", "hazy sun"), "a.png"), (("--ev", "14"), "b.png")):
        code, _, err = run("preview", photo, camera_file, *same, *light, "-o", name)
        assert (code, err) == (0, "")
    assert (photo.parent / "a.png").read_bytes() == (photo.parent / "b.png").read_bytes()
    code, _, err = run("preview", photo, camera_file, *same, "--light", "sun", "--ev", "14")
    assert code == 2
    assert "--ev and --light both tell the brightness; give one of them" in err
