"""Characteristic curves against the points that standards define, and against their own inverses."""

import math

import numpy as np
import pytest

from pinsim.material import MATERIAL_NAMES, ToneCurve, material

CURVED = [name for name in MATERIAL_NAMES if material(name).curve]
FILMS = ("orthochromatic-80", "panchromatic-50", "panchromatic-100", "panchromatic-400")
PAPERS = ("blue-sensitive-paper", "variable-contrast-paper", "direct-positive-paper")
# 1.0 is a tenfold exposure; far beyond both bends of every curve.
LOG_EXPOSURES = np.linspace(-6.0, 8.0, 4001)


def lux_seconds_at(name, density):
    """Return the exposure in lx s that gives a density above base and fog."""
    one = material(name)
    logs = one.curve.log_exposure(one.curve.base_fog + density)
    return 10.0**logs * one.speed_lxs / one.speed_iso


@pytest.mark.parametrize("name", FILMS)
def test_a_films_speed_is_where_iso_6_measures_it(name):
    """ISO 6:1993: S = 0.8 / Hm, Hm in lx s at 0.10 above base and fog (0.8 from memory)."""
    speed = 0.8 / lux_seconds_at(name, 0.10)
    assert speed == pytest.approx(material(name).speed_iso, rel=1e-6)


def test_speed_points_of_usual_indices():
    """ISO 6:1993: S = 50, 100, 400 have Hm = 0.016, 0.008, 0.002 lx s."""
    for name, exposure in (
        ("panchromatic-50", 0.016),
        ("panchromatic-100", 0.008),
        ("panchromatic-400", 0.002),
    ):
        assert lux_seconds_at(name, 0.10) == pytest.approx(exposure, rel=1e-6)


@pytest.mark.parametrize("name", FILMS)
def test_a_films_contrast_is_that_of_iso_6(name):
    """ISO 6:1993: 1.30 in log exposure beyond the speed point adds a density of 0.80, to 10 %."""
    start, end = material(name).curve.density([0.0, 1.30])
    assert end - start == pytest.approx(0.80, rel=0.10)


def test_average_gradient_is_that_of_pictorial_development():
    """Chord over 1.5 log exposure from the speed point: 0.50 to 0.65 (The Manual of Photography, from
    memory)."""
    for name in FILMS:
        start, end = material(name).curve.density([0.0, 1.5])
        assert 0.50 <= (end - start) / 1.5 <= 0.66, name


def test_a_colour_negative_films_speed_is_that_of_iso_5800():
    """ISO 5800:1987, from memory: S = root 2 / root (H_G H_slowest), H at 0.15 above the base.

    All layers are alike here, so both H are the same.
    """
    assert math.sqrt(2.0) / lux_seconds_at("colour-negative", 0.15) == pytest.approx(
        160.0, rel=1e-3
    )


def test_a_slide_films_speed_is_that_of_iso_2240():
    """ISO 2240:2003, from memory: S = 10 / root (H_S H_T), at 2.00 and 0.20 above the base.

    Within a third of a stop, as speeds are rounded.
    """
    shadow, light = (lux_seconds_at("colour-reversal", one) for one in (2.0, 0.2))
    assert shadow < light
    assert math.log2(10.0 / math.sqrt(shadow * light) / 100.0) == pytest.approx(0.0, abs=1.0 / 3.0)


@pytest.mark.parametrize("name", PAPERS)
def test_a_papers_range_is_that_of_iso_6846(name):
    """R = 100 log10(H_S/H_T), D from 0.04 above base and fog to 0.9 of the greatest (ISO 6846;
    Focal Encyclopedia of Photography, 4th ed., p. 679). Read off the curve by a plain search.
    """
    curve = material(name).curve
    density = curve.density(LOG_EXPOSURES)
    inside = LOG_EXPOSURES[(density > curve.base_fog + 0.04) & (density < 0.9 * curve.d_max)]
    assert curve.iso_range == pytest.approx(100.0 * np.ptp(inside), abs=0.8)


def test_graded_paper_is_grade_2():
    """Log ranges 0.50 to 1.70 are six grades, 0 the softest (ANSI PH2.2-1966, as in the Focal
    Encyclopedia of Photography, p. 679); so grade 2 lies about 1.10, grades being 0.2 apart.
    """
    assert material("blue-sensitive-paper").curve.iso_range == pytest.approx(110.0, abs=15.0)


@pytest.mark.parametrize("name", CURVED)
def test_curves_never_turn_round(name):
    """More light, more density; on reversal material less. Known of every emulsion short of
    solarisation, which needs a thousand times more."""
    curve = material(name).curve
    steps = np.diff(curve.density(LOG_EXPOSURES))
    # Far beyond the bends all that is left is the last digit of a sum.
    assert (steps * (1.0 if curve.rising else -1.0) > -1e-12).all()
    middle = np.abs(LOG_EXPOSURES[:-1]) < 1.0
    assert (np.abs(steps[middle]) > 0.0).all()


@pytest.mark.parametrize("name", CURVED)
def test_a_curve_and_its_inverse_undo_each_other(name):
    curve = material(name).curve
    densities = np.linspace(curve.base_fog + 1e-3, curve.d_max - 1e-3, 2001)
    logs = curve.log_exposure(densities)
    assert np.abs(curve.density(logs) - densities).max() < 1e-6
    inside = np.linspace(logs.min(), logs.max(), 2001)
    assert np.abs(curve.log_exposure(curve.density(inside)) - inside).max() < 1e-6


@pytest.mark.parametrize("name", CURVED)
def test_no_exposure_gives_what_a_curve_does_not_reach(name):
    curve = material(name).curve
    outside = [curve.base_fog - 0.1, curve.base_fog, curve.d_max, curve.d_max + 0.1]
    assert np.isnan(curve.log_exposure(outside)).all()


@pytest.mark.parametrize("name", CURVED)
def test_the_gradient_is_the_slope(name):
    curve = material(name).curve
    step = 1e-4
    slope = (curve.density(LOG_EXPOSURES + step) - curve.density(LOG_EXPOSURES - step)) / (2 * step)
    np.testing.assert_allclose(curve.gradient(LOG_EXPOSURES), slope, atol=1e-6)


@pytest.mark.parametrize("rising", [True, False])
def test_ends_and_straight_part_are_what_was_asked(rising):
    """A film of fog 0.2, greatest density 2.4, gamma 0.8: unexposed, drowned in light, and between."""
    curve = ToneCurve(
        base_fog=0.2, d_max=2.4, gamma=0.8, toe=0.2, shoulder=0.2, speed_density=0.3, rising=rising
    )
    ends = curve.density([-30.0, 30.0])
    assert sorted(ends) == pytest.approx([0.2, 2.4], abs=1e-9)
    assert (ends[0] < ends[1]) == rising
    assert curve.density(0.0) == pytest.approx(0.5, abs=1e-9)
    middle = curve.log_exposure(1.3)
    assert abs(curve.gradient(middle)) == pytest.approx(0.8, rel=1e-4)
