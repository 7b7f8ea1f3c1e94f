"""Reciprocity: makers' exponents and tables, Schwarzschild's law, and what is refused."""

import math

import numpy as np
import pytest

from pinsim import DesignError
from pinsim.material import MATERIAL_NAMES, material
from pinsim.material.reciprocity import Reciprocity

TIMES_S = np.geomspace(1e-4, 1e7, 400)


def of(**table):
    return Reciprocity.from_table(table)


def test_the_makers_own_example():
    """10 s become 20.4 s at P = 1.31, none to 1 s: HARMAN, Film Reciprocity Failure Compensation."""
    film = of(exponent=1.31)
    assert film.corrected_s(10.0) == pytest.approx(20.4, abs=0.05)
    for metered_s in (0.01, 0.5, 1.0):
        assert film.corrected_s(metered_s) == metered_s


# Published exponents by class, and what they make of 10 s and 100 s: the same maker's sheet as read in
# two compilations, users' fits where it is silent.
PUBLISHED = [
    (1.26, 18.20, 331.1),
    (1.31, 20.42, 416.9),
    (1.30, 19.95, 398.1),
    (1.41, 25.70, 660.7),
    (1.33, 21.38, 457.1),
    (1.43, 26.92, 724.4),
    (1.25, 17.78, 316.2),
    (1.15, 14.13, 199.5),
    (1.24, 17.38, 302.0),
    (1.54, 34.67, 1202.3),
]


@pytest.mark.parametrize(("exponent", "ten_s", "hundred_s"), PUBLISHED)
def test_published_exponents(exponent, ten_s, hundred_s):
    film = of(exponent=exponent)
    assert film.corrected_s(10.0) == pytest.approx(ten_s, abs=0.005)
    assert film.corrected_s(100.0) == pytest.approx(hundred_s, abs=0.05)


@pytest.mark.parametrize(
    ("metered_s", "corrected_s"), [(2.0, 2.24), (10.0, 14.55), (60.0, 116.85), (100.0, 211.6)]
)
def test_schwarzschilds_own_plate(metered_s, corrected_s):
    """E t^p = const with p = 0.86: Schwarzschild, ApJ 11 (1900) 89 (0.86 from memory); computed."""
    plate = of(exponent=1.0 / 0.86)
    assert plate.corrected_s(metered_s) == pytest.approx(corrected_s, abs=0.05, rel=1e-4)
    # The law itself: the same effect in light 1/metered and for the corrected time.
    assert plate.corrected_s(metered_s) ** 0.86 == pytest.approx(metered_s, rel=1e-12)


TRADITIONAL = {"table": [[1, 2], [10, 50], [100, 1200]], "data_to_s": 100}


def test_a_makers_table_is_met_at_its_own_times():
    """Traditional black and white film, a page of darkroom data copied from makers' sheets."""
    film = of(**TRADITIONAL)
    for metered_s, corrected_s in TRADITIONAL["table"]:
        assert film.corrected_s(float(metered_s)) == pytest.approx(corrected_s, rel=1e-12)


def test_a_table_agrees_with_what_is_published_between_its_times():
    """8 min for 1 min, in the same makers' table; a straight line of log time is near: 1/2 stop."""
    between_s = of(**TRADITIONAL).corrected_s(60.0)
    assert abs(math.log2(between_s / 480.0)) < 0.5


def test_a_table_goes_on_straight_in_log_time():
    """Beyond its end, and down its first slope to where nothing needs correction.

    That start is 0.17 s: the law holds to about 1/5 s by Kodak Technical Data E-31 (2002).
    """
    film = of(**TRADITIONAL)
    last_slope = math.log(1200 / 50) / math.log(10)
    assert film.corrected_s(1000.0) == pytest.approx(1200.0 * 10.0**last_slope, rel=1e-12)
    first_slope = math.log(50 / 2) / math.log(10)
    start_s = 2.0 ** (-1.0 / (first_slope - 1.0))
    assert 0.1 < start_s < 0.25
    assert film.corrected_s(start_s * 0.999) == pytest.approx(start_s * 0.999, rel=1e-12)
    assert film.corrected_s(start_s * 1.1) == pytest.approx(start_s * 1.1**first_slope, rel=1e-9)


KINDS = {
    "exponent": {"exponent": 1.31},
    "from 4 s": {"exponent": 1.4, "starts_s": 4.0},
    "from 0.1 s": {"exponent": 1.1, "starts_s": 0.1},
    "table": TRADITIONAL,
    "table from no correction": {"table": [[0.5, 0.5], [8, 20], [60, 200]]},
    "flat end": {"table": [[1, 1], [10, 40], [100, 110]]},
    "none": {},
}


@pytest.mark.parametrize("kind", KINDS)
def test_what_every_law_must_obey(kind):
    """By what the words mean: never shorter, always rising, without a jump, and invertible."""
    law = of(**KINDS[kind])
    corrected = law.corrected_s(TIMES_S)
    assert np.all(corrected >= TIMES_S * (1.0 - 1e-12))
    assert np.all(np.diff(corrected) > 0.0)
    assert np.all(np.diff(np.log(corrected)) < 3.0 * np.diff(np.log(TIMES_S)))
    np.testing.assert_allclose(law.metered_s(corrected), TIMES_S, rtol=1e-9)
    np.testing.assert_allclose(law.efficiency(TIMES_S), TIMES_S / corrected, rtol=1e-12)
    assert law.efficiency(TIMES_S).max() <= 1.0 + 1e-12
    assert isinstance(law.corrected_s(10.0), float)
    assert law.corrected_s(10.0) == pytest.approx(float(law.corrected_s(np.array([10.0]))[0]))
    assert law.needed is (kind != "none")


def test_a_start_other_than_a_second_is_continuous():
    """Tc = 4 (Tm / 4)^1.4: at 4 s nothing, at 40 s ten times to the 1.4. Computed independently."""
    law = of(**KINDS["from 4 s"])
    assert law.corrected_s(4.0) == 4.0
    assert law.corrected_s(4.0 + 1e-9) == pytest.approx(4.0, rel=1e-8)
    assert law.corrected_s(40.0) == pytest.approx(4.0 * 25.118864315, rel=1e-9)


def test_no_times_at_all_and_none_needed():
    assert of().corrected_s(1e5) == 1e5
    assert of().label == "none"
    assert of(**TRADITIONAL).efficiency(np.zeros(2)).tolist() == [1.0, 1.0]


def test_beyond_its_data_a_time_is_still_given():
    law = of(exponent=1.3, data_to_s=100)
    assert not law.outside_data(100.0)
    assert law.outside_data(101.0)
    assert law.corrected_s(1000.0) == pytest.approx(1000.0**1.3)
    assert not of(exponent=1.3).outside_data(1e8)


REFUSED = [
    ({"exponant": 1.3}, r"unknown key 'exponant'\. Did you mean 'exponent'"),
    ({"exponent": 0.86}, r"exponent is 0\.86; it must be a plain number, 1 to 3"),
    ({"exponent": "1.3"}, r"exponent is '1\.3'; it must be a plain number"),
    ({"exponent": math.nan}, r"exponent is nan; it must be a plain number"),
    ({"starts_s": 2}, r"starts_s needs an exponent beside it"),
    ({"exponent": 1.3, "starts_s": 0}, r"starts_s is 0; it must be a plain number"),
    ({"exponent": 1.3, "table": [[1, 2], [3, 9]]}, r"table and exponent exclude each other"),
    ({"table": [[1, 2]]}, r"table must hold two pairs of seconds or more, for example"),
    ({"table": [[1, 2], 3]}, r"table: 3 is not a pair of seconds"),
    ({"table": [[1, 0.5], [10, 20]]}, r"1 s becomes 0\.5 s; write \[metered, corrected\]"),
    ({"table": [[10, 20], [5, 30]]}, r"\[5, 30\] comes after \[10\.0, 20\.0\]; times must rise"),
    ({"table": [[1, 2], [10, 20]]}, r"put a time before it that needs no correction"),
    ({"data_to_s": True}, r"data_to_s is True; it must be a plain number"),
    ({"source": 3}, r"source is 3; it must be text in quotation marks"),
]


@pytest.mark.parametrize(("table", "text"), REFUSED, ids=[str(table) for table, _ in REFUSED])
def test_what_cannot_be_is_refused_in_one_line(table, text):
    with pytest.raises(DesignError, match=text) as caught:
        Reciprocity.from_table(table)
    assert "\n" not in str(caught.value)
    assert "[reciprocity]" in str(caught.value)


# The class that each material stands for, by the same sheet and compilations as PUBLISHED.
BUILT_IN = {
    "panchromatic-50": 457.1,
    "panchromatic-100": 331.1,
    "panchromatic-400": 416.9,
    "orthochromatic-80": 316.2,
    "colour-negative": 457.1,
}


@pytest.mark.parametrize("name", BUILT_IN)
def test_a_film_that_comes_along_follows_its_class(name):
    law = material(name).reciprocity
    assert law.corrected_s(100.0) == pytest.approx(BUILT_IN[name], abs=0.05)
    assert law.source


def test_slide_film_follows_its_stops():
    """Half a stop, one and a half, two and a half at 1, 10, 100 s: a page of darkroom data."""
    law = material("colour-reversal").reciprocity
    for metered_s, stops in ((1.0, 0.5), (10.0, 1.5), (100.0, 2.5)):
        assert math.log2(law.corrected_s(metered_s) / metered_s) == pytest.approx(stops, abs=0.01)


@pytest.mark.parametrize("name", MATERIAL_NAMES)
def test_every_material_tells_its_source_or_needs_no_correction(name):
    law = material(name).reciprocity
    assert law.source or not law.needed
    assert law.label
