"""The hole that is small for its box: Airy's disc and the diffraction-limited contrast curve.

The far field is a far object and a Fresnel number of 1e-4: a 0.3 mm hole some 400 m in front of
the film, where the missing focus changes nothing above 1e-7. Tolerances follow the printed digits.
"""

import numpy as np
import pytest
from reference import fresnel
from scipy.optimize import brentq

from pinsim.optics import round_otf, round_psf

HOLE = fresnel.setup_of_fresnel_number(1e-4, focal_length_mm=60.0)
# lambda N_f, the unit in which Airy's radii are printed: lambda z / d.
UNIT_MM = 1.0 / HOLE.cutoff_per_mm


def point_image(radius_units):
    return round_psf(np.asarray(radius_units) * UNIT_MM, **HOLE.film_keywords())


def contrast(rho):
    return round_otf(np.asarray(rho) * HOLE.cutoff_per_mm, **HOLE.film_keywords())


# Dark rings: Airy 1835; Born & Wolf, Principles of Optics, section 8.5.2, table 8.2 (zeros of J1).
@pytest.mark.parametrize("radius", [1.21966989, 2.23313059, 3.23831548, 4.24106286])
def test_the_dark_rings_stand_where_airy_put_them(radius):
    around = radius + np.array([-0.002, -0.001, 0.0, 0.001, 0.002])
    # The field is J1(v)/v: its square touches zero as a parabola, whose lowest point is the ring.
    parabola = np.polyfit(around - radius, point_image(around), 2)
    assert -parabola[1] / (2 * parabola[0]) == pytest.approx(0.0, abs=2e-5)
    assert point_image(radius) < 1e-7 * point_image(0.0)


# Born & Wolf, section 8.5.2, table 8.2 (from memory; recomputed to 1e-8).
@pytest.mark.parametrize(
    ("radius", "share_of_centre"),
    [(1.63471935, 0.01749786), (2.67929202, 0.00415800), (3.69871032, 0.00160064)],
)
def test_the_bright_rings_have_the_printed_strength(radius, share_of_centre):
    ring = point_image(radius) / point_image(0.0)
    assert ring == pytest.approx(share_of_centre, abs=2e-8)
    assert ring > point_image(radius - 0.02) / point_image(0.0)
    assert ring > point_image(radius + 0.02) / point_image(0.0)


# Rayleigh 1881, 1 - J0^2 - J1^2; Born & Wolf section 8.5.2 (83.8, 91.0, 93.8 %).
@pytest.mark.parametrize(
    ("radius", "share"),
    [
        (1.21966989, 0.83778487),
        (2.23313059, 0.90993054),
        (3.23831548, 0.93764747),
        (4.24106286, 0.95231917),
        # Radii of 50, 80, 84, 90, 95 % of the light, same formula, printed to 1e-6.
        (0.534832, 0.50),
        (0.896942, 0.80),
        (1.365849, 0.84),
        (1.900688, 0.90),
        (3.915871, 0.95),
    ],
)
def test_a_ring_holds_the_light_that_rayleigh_gave_it(radius, share):
    edge_mm = radius * UNIT_MM
    nodes = fresnel.energy_nodes(edge_mm, HOLE)
    image = round_psf(nodes, **HOLE.film_keywords())
    assert fresnel.energy_within(edge_mm, HOLE, image, nodes) == pytest.approx(share, abs=1e-6)


# 2 J1(v)/v solved for one half and for 1/e^2; computed independently.
@pytest.mark.parametrize(
    ("radius", "share_of_centre"), [(0.51449698, 0.5), (0.82246149, np.exp(-2))]
)
def test_the_spot_falls_to_half_where_airys_formula_says(radius, share_of_centre):
    assert point_image(radius) / point_image(0.0) == pytest.approx(share_of_centre, abs=1e-7)


# (2/pi)[arccos rho - rho sqrt(1 - rho^2)]: Goodman, Introduction to Fourier Optics (1968), section
# 6.3 (formula from memory; its value 0.391 at one half is quoted in print).
@pytest.mark.parametrize(
    ("rho", "expected"),
    [
        (0.05, 0.936365),
        (0.1, 0.872889),
        (0.2, 0.747060),
        (0.25, 0.685038),
        (0.3, 0.623838),
        (0.4, 0.504632),
        (0.5, 0.391002),
        (0.6, 0.284757),
        (0.7, 0.188120),
        (0.75, 0.144294),
        (0.8, 0.104088),
        (0.9, 0.037386),
        (0.95, 0.013320),
        (1 / 1.21966989, 0.08923410),
    ],
)
def test_contrast_falls_along_goodmans_curve(rho, expected):
    assert contrast(rho) == pytest.approx(expected, abs=1e-6)


# Solutions of the same formula, computed independently.
@pytest.mark.parametrize(
    ("level", "rho"), [(0.5, 0.40397275), (0.2, 0.68704883), (0.1, 0.80538364)]
)
def test_half_a_fifth_and_a_tenth_of_the_contrast_are_reached_at_the_known_fineness(level, rho):
    crossing = brentq(lambda x: float(contrast(x)) - level, 0.01, 0.99, xtol=1e-12)
    assert crossing == pytest.approx(rho, abs=1e-6)


# The band limit of incoherent imaging: Goodman 1968, section 6.3 (from memory).
@pytest.mark.parametrize("rho", [1.0, 1.0001, 1.5, 20.0])
def test_nothing_finer_than_the_cutoff_is_drawn_at_all(rho):
    assert contrast(rho) == pytest.approx(0.0, abs=1e-12)


def test_a_plain_surface_keeps_its_full_brightness():
    """Zero frequency passes whole: unit energy, by the definition of the transfer function."""
    assert contrast(0.0) == pytest.approx(1.0, abs=1e-12)
