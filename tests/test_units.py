"""Quantities as people write them, read into mm, nm, degrees and seconds."""

import math

import pytest

from pinsim import units
from pinsim.errors import UnitError

# International inch and foot: exactly 25.4 and 304.8 mm (yard and pound agreement, 1959; from memory).
LENGTHS_MM = {
    "0.30 mm": 0.30,
    "0.30mm": 0.30,
    " 0.30  mm ": 0.30,
    ".3mm": 0.3,
    "3.mm": 3.0,
    "3e-1 mm": 0.3,
    "+3 mm": 3.0,
    "300um": 0.3,
    "300 \N{MICRO SIGN}m": 0.3,
    "300 \N{GREEK SMALL LETTER MU}m": 0.3,
    "300 microns": 0.3,
    "6 cm": 60.0,
    "4m": 4000.0,
    "4 metres": 4000.0,
    "2 meter": 2000.0,
    "1.5 km": 1.5e6,
    "2in": 50.8,
    '2"': 50.8,
    "2 inches": 50.8,
    "1 inch": 25.4,
    "1/64 in": 25.4 / 64,
    "1 / 64in": 25.4 / 64,
    "4 ft": 1219.2,
    "4'": 1219.2,
    "4 feet": 1219.2,
    "1 foot": 304.8,
    "-5 mm": -5.0,
    "0 mm": 0.0,
}


@pytest.mark.parametrize(("text", "mm"), LENGTHS_MM.items(), ids=ascii)
def test_lengths_are_read_in_every_unit_and_spelling(text, mm):
    assert units.length_mm(text, "x") == pytest.approx(mm, rel=1e-12, abs=1e-15)


@pytest.mark.parametrize(
    ("text", "deg"),
    [
        ("65 deg", 65.0),
        ("65deg", 65.0),
        ("65\N{DEGREE SIGN}", 65.0),
        ("65 degrees", 65.0),
        ("1 degree", 1.0),
        ("1 rad", 57.29577951308232),
    ],
    ids=ascii,
)
def test_angles_are_read_in_degrees_and_radians(text, deg):
    assert units.angle_deg(text, "x") == pytest.approx(deg, rel=1e-12)


def test_wavelengths_are_read_in_nanometres_and_micrometres():
    assert units.wavelength_nm("550 nm", "x") == 550.0
    assert units.wavelength_nm("0.55um", "x") == pytest.approx(550.0, rel=1e-12)
    assert units.wavelength_nm("0.55 \N{GREEK SMALL LETTER MU}m", "x") == pytest.approx(550.0)


@pytest.mark.parametrize(
    ("text", "seconds"),
    [
        ("8s", 8.0),
        ("1/4 s", 0.25),
        ("250 ms", 0.25),
        ("3 min", 180.0),
        ("3 minutes", 180.0),
        ("1.5 h", 5400.0),
        ("2 hours", 7200.0),
        ("30 sec", 30.0),
    ],
)
def test_times_are_read_from_milliseconds_to_hours(text, seconds):
    assert units.time_s(text, "x") == pytest.approx(seconds, rel=1e-12)


@pytest.mark.parametrize("text", ["infinity", "inf", "Infinity", " INF ", "infinite"])
def test_the_far_horizon_is_a_word(text):
    assert units.distance_mm(text, "x") == math.inf


def test_infinity_is_a_distance_but_no_length():
    with pytest.raises(UnitError, match=r"--hole: cannot read 'infinity'"):
        units.length_mm("infinity", "--hole")


@pytest.mark.parametrize(
    ("read", "text", "message"),
    [
        (units.length_mm, "0.30", "has no unit; add one of um, mm, cm, m, km, in, ft"),
        (units.length_mm, 0.3, "0.3, a number without a unit; write it as text"),
        (units.length_mm, 3, "3, a number without a unit"),
        (units.length_mm, True, "write it as one text with a number and a unit"),
        (units.length_mm, ["1 mm", "2 mm"], "write it as one text with a number and a unit"),
        (units.length_mm, None, "write it as one text"),
        (units.length_mm, "0,30 mm", "cannot read '0,30 mm'; write a number with a point"),
        (units.length_mm, "", "cannot read ''"),
        (units.length_mm, "mm", "cannot read 'mm'"),
        (units.length_mm, "nan mm", "cannot read 'nan mm'"),
        (units.length_mm, "3 5 mm", "cannot read"),
        (units.length_mm, "5 ft 3 in", "cannot read"),
        (units.length_mm, "1/0 mm", "divides by zero"),
        (units.length_mm, "1e999 mm", "is too large a number"),
        (units.length_mm, "3 parsec", "the unit of '3 parsec' is not one of"),
        (units.length_mm, "3 MM", "the unit of '3 MM' is not one of um, mm"),
        (units.length_mm, "3 deg", "the unit of '3 deg' is not one of um, mm"),
        (units.length_mm, "3 \N{GREEK SMALL LETTER LAMDA}", r"the unit of '3 \\u03bb' is not"),
        (units.angle_deg, "65", "'65' has no unit; add one of deg, rad"),
        (units.angle_deg, 65, "65, a number without a unit"),
        (units.angle_deg, "65 mm", "is not one of deg, rad"),
        (units.wavelength_nm, "550", "'550' has no unit; add one of nm, um"),
        (units.wavelength_nm, "550 mm", "is not one of nm, um"),
        (units.time_s, "8", "'8' has no unit; add one of ms, s, min, h"),
        (units.time_s, "0 s", "an exposure takes more than 0 s"),
        (units.time_s, "-3 s", "an exposure takes more than 0 s"),
        (units.time_s, "1e9 h", "give a shorter one"),
        (units.distance_mm, "4", "'4' has no unit"),
        (units.distance_mm, "0 m", "is 0 mm; a distance is more than 0"),
        (units.distance_mm, "-4 m", "is -4000 mm; a distance is more than 0"),
        (units.exposure_value, "bright", "'bright'; it must be a number of EV at ISO 100"),
        (units.exposure_value, "nan", "is nan EV; it must be -10 to 25 EV"),
        (units.exposure_value, "inf", "is inf EV; it must be -10 to 25 EV"),
        (units.exposure_value, 99, "is 99 EV; it must be -10 to 25 EV"),
        (units.exposure_value, True, "it must be a number of EV"),
    ],
)
def test_a_wrong_quantity_is_one_ascii_line_that_names_its_place(read, text, message):
    with pytest.raises(UnitError, match=message) as caught:
        read(text, "box.toml [hole]: diameter")
    line = str(caught.value)
    assert line.startswith("box.toml [hole]: diameter")
    assert line.isascii()
    assert "\n" not in line
    assert "for example" in line or "must be" in line or "shorter" in line or "infinity" in line


def test_exposure_values_are_plain_numbers():
    assert units.exposure_value("13", "--ev") == 13.0
    assert units.exposure_value(" -2.5 ", "--ev") == -2.5
    assert units.exposure_value(9, "light: ev") == 9.0


@pytest.mark.parametrize(
    ("mm", "text"),
    [
        (0.3, "0.3 mm"),
        (0.0254, "0.0254 mm"),
        (60.0, "60 mm"),
        (120.0, "12 cm"),
        (4000.0, "4 m"),
        (math.inf, "infinity"),
    ],
)
def test_lengths_are_told_in_the_unit_people_use(mm, text):
    assert units.format_length(mm) == text


@pytest.mark.parametrize("mm", [0.0254, 0.3, 1.0, 12.3, 99.9, 100.0, 999.0, 1000.0, 12345.0])
def test_a_length_that_was_told_can_be_read_again(mm):
    assert units.length_mm(units.format_length(mm), "x") == pytest.approx(mm, rel=6e-3)


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (1 / 30, "1/30 s"),
        (0.5, "0.5 s"),
        (8.0, "8 s"),
        (59.7, "1 min"),
        (60.0, "1 min"),
        (150.0, "2 min 30 s"),
        (3599.9, "1 h"),
        (3900.0, "1 h 5 min"),
        (7199.9, "2 h"),
    ],
)
def test_times_are_told_as_on_a_kitchen_timer(seconds, text):
    assert units.format_time(seconds) == text
