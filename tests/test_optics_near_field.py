"""The useful hole: geometric blur and diffraction in one integral, against printed and own tables.

Sources stand beside each check. Two kinds of reference are used: tables of Lommel's and Hopkins'
integrals, recomputed independently to the digits shown, and reference/psf_reference.json (see
reference/ORIGIN.md), made by adaptive quadrature and held against 50-digit series.
"""

import json
from pathlib import Path

import numpy as np
import pytest
from reference import fresnel
from scipy.optimize import brentq
from scipy.special import j1

from pinsim.optics import round_otf, round_psf

REFERENCE = json.loads(
    (Path(__file__).parent / "reference" / "psf_reference.json").read_text(encoding="utf-8")
)["configurations"]

PRINTED_5 = 1e-5  # the precision the tables state
QUADRATURE = 1e-6  # of the peak; the reference itself is good to 1e-11

# Lommel 1885; Born & Wolf, Principles of Optics, section 8.8.1: U1^2 + U2^2, irradiance over that
# of the unobstructed wave, at v = 0, 1, 2, 4, 8 (from memory; 40-digit series = quadrature).
LOMMEL = [
    (1.0, (0.24483488, 0.18966284, 0.08164979, 0.00100347, 0.00089725)),
    (2.0, (0.91939539, 0.71243849, 0.30911749, 0.01236044, 0.00405898)),
    (np.pi, (2.00000000, 1.55082928, 0.68402076, 0.06648788, 0.01252763)),
    (4.0, (2.83229367, 2.19791350, 0.98787503, 0.15963477, 0.02502203)),
    (1.8 * np.pi, (3.90211303, 3.03586450, 1.44778747, 0.51443759, 0.07741160)),
    (2 * np.pi, (4.00000000, 3.11685324, 1.53808477, 0.70967535, 0.11235057)),
    (8.0, (3.30728724, 2.59719856, 1.49568644, 1.33768766, 0.26985360)),
    (4 * np.pi, (0.00000000, 0.05512486, 0.60109850, 1.92158900, 1.13020076)),
]

# The quantity of Hopkins, Proc. R. Soc. A 231 (1955) 91, tables; recomputed independently (series =
# integral to 1e-15). Columns: defocus W20 = N lambda/2; rows: s = 2 nu/nu_c.
DEFOCUS_WAVES = (0.0, 0.125, 0.25, 0.371, 0.45, 0.5, 0.75, 1.0, 1.5, 2.0)
DEFOCUSED_OTF = {
    0.05: (
        0.96817,
        0.96746,
        0.96535,
        0.96195,
        0.95903,
        0.95690,
        0.94292,
        0.92359,
        0.86981,
        0.79802,
    ),
    0.1: (0.93636, 0.93378, 0.92604, 0.91373, 0.90319, 0.89552, 0.84615, 0.78009, 0.60985, 0.41297),
    0.2: (
        0.87289,
        0.86430,
        0.83886,
        0.79914,
        0.76587,
        0.74209,
        0.59748,
        0.42665,
        0.10133,
        -0.08396,
    ),
    0.3: (
        0.80973,
        0.79388,
        0.74757,
        0.67713,
        0.61996,
        0.58013,
        0.35732,
        0.14112,
        -0.09113,
        -0.04108,
    ),
    0.4: (
        0.74706,
        0.72424,
        0.65858,
        0.56175,
        0.48599,
        0.43482,
        0.17640,
        -0.01441,
        -0.06018,
        0.04500,
    ),
    0.5: (
        0.68504,
        0.65655,
        0.57590,
        0.46068,
        0.37398,
        0.31733,
        0.06199,
        -0.06831,
        0.00577,
        0.02664,
    ),
    0.6: (
        0.62384,
        0.59158,
        0.50157,
        0.37681,
        0.28641,
        0.22926,
        -0.00001,
        -0.06952,
        0.03547,
        -0.00814,
    ),
    0.8: (
        0.50463,
        0.47106,
        0.37942,
        0.25813,
        0.17531,
        0.12569,
        -0.03734,
        -0.03689,
        0.02716,
        -0.01555,
    ),
    1.0: (
        0.39100,
        0.36308,
        0.28747,
        0.18902,
        0.12324,
        0.08461,
        -0.03271,
        -0.02007,
        0.01556,
        -0.00767,
    ),
    1.2: (
        0.28476,
        0.26614,
        0.21529,
        0.14789,
        0.10179,
        0.07411,
        -0.01761,
        -0.01904,
        0.01536,
        -0.00818,
    ),
    1.4: (
        0.18812,
        0.17873,
        0.15249,
        0.11605,
        0.08958,
        0.07281,
        0.00483,
        -0.01730,
        0.01071,
        -0.00167,
    ),
    1.6: (
        0.10409,
        0.10107,
        0.09239,
        0.07956,
        0.06950,
        0.06269,
        0.02811,
        0.00203,
        -0.00641,
        0.00625,
    ),
    1.8: (
        0.03739,
        0.03704,
        0.03603,
        0.03444,
        0.03311,
        0.03216,
        0.02637,
        0.01949,
        0.00621,
        -0.00174,
    ),
}

# The same integral for a fixed box and a far object; rows: nu sqrt(lambda f), columns: N.
FIXED_BOX_NUMBERS = (0.25, 0.5, 0.742, 0.9, 1.0, 1.5, 2.0, 4.0)
FIXED_BOX_OTF = {
    0.1: (0.86430, 0.89095, 0.89658, 0.89646, 0.89552, 0.88523, 0.87029, 0.79802),
    0.2: (0.72424, 0.76321, 0.75987, 0.75003, 0.74209, 0.69218, 0.63534, 0.41297),
    0.3: (0.59158, 0.63783, 0.62000, 0.59703, 0.58013, 0.48420, 0.38588, 0.08013),
    0.4: (0.47106, 0.52607, 0.49479, 0.45972, 0.43482, 0.30251, 0.18100, -0.08396),
    0.5: (0.36308, 0.43189, 0.39183, 0.34791, 0.31733, 0.16456, 0.04232, -0.09779),
    0.6: (0.26614, 0.35469, 0.31197, 0.26301, 0.22926, 0.07086, -0.03491, -0.04108),
    0.8: (0.10107, 0.23852, 0.20935, 0.16014, 0.12569, -0.01811, -0.07243, 0.04500),
    1.0: (0.00000, 0.14817, 0.15467, 0.11541, 0.08461, -0.03778, -0.05205, 0.02664),
    1.2: (0.00000, 0.06407, 0.11717, 0.09771, 0.07411, -0.03382, -0.03073, -0.00814),
    1.5: (0.00000, 0.00000, 0.04808, 0.07208, 0.06990, -0.01525, -0.01874, -0.01807),
}


def setup_of(entry):
    return fresnel.Setup(
        diameter_mm=entry["hole_diameter_mm"],
        focal_length_mm=entry["zi_mm"],
        distance_mm=np.inf if entry["zo_mm"] is None else entry["zo_mm"],
        wavelength_nm=entry["lambda_nm"],
    )


def relative_irradiance(radius_mm, setup):
    """Return the point image over the unobstructed wave, which is 1/(pi (a m)^2) of unit energy."""
    return round_psf(radius_mm, **setup.film_keywords()) * np.pi * setup.shadow_radius_mm**2


def share_within(radius_mm, setup):
    nodes = fresnel.energy_nodes(radius_mm, setup)
    image = round_psf(nodes, **setup.film_keywords())
    return fresnel.energy_within(radius_mm, setup, image, nodes)


# --- on the film, on the axis and at the edge of the shadow ------------------------------------


# 4 sin^2(pi N/2): Fresnel's zones; Born & Wolf section 8.8.3 (from memory, recomputed).
@pytest.mark.parametrize(
    ("number", "expected"),
    [
        (0.25, 0.585786),
        (0.5, 2.0),
        (0.742, 3.378228),
        (0.9, 3.902113),
        (1.0, 4.0),
        (1.5, 2.0),
        (2.0, 0.0),
        (3.0, 4.0),
    ],
)
def test_the_middle_brightens_and_darkens_with_each_fresnel_zone(number, expected):
    hole = fresnel.setup_of_fresnel_number(number)
    assert relative_irradiance(0.0, hole) == pytest.approx(expected, abs=1e-6)


# 1/4 [1 - 2 J0(u) cos u + J0(u)^2]: Born & Wolf section 8.8.3 (from memory, recomputed to 1e-15).
@pytest.mark.parametrize(
    ("number", "expected"),
    [
        (0.25, 0.305696),
        (0.5, 0.121020),
        (0.9, 0.232236),
        (1.0, 0.151992),
        (2.0, 0.177448),
        (4.0, 0.197150),
    ],
)
def test_the_edge_of_the_shadow_has_the_known_brightness(number, expected):
    hole = fresnel.setup_of_fresnel_number(number)
    edge = relative_irradiance(hole.shadow_radius_mm, hole)
    assert edge == pytest.approx(expected, abs=1e-6)


# 1 - J0(u) cos u - J1(u) sin u: Wolf, Proc. R. Soc. A 204 (1951) 533 (from memory, recomputed).
@pytest.mark.parametrize(
    ("number", "share"),
    [
        (0.25, 0.433176),
        (0.5, 0.695758),
        (0.742, 0.715380),
        (0.9, 0.770002),
        (1.0, 0.779723),
        (1.5, 0.818789),
        (2.0, 0.842493),
        (4.0, 0.888032),
        (25.0, fresnel.shadow_energy(25.0)),
    ],
)
def test_the_shadow_of_the_hole_holds_the_light_that_wolf_gave_it(number, share):
    hole = fresnel.setup_of_fresnel_number(number)
    assert share_within(hole.shadow_radius_mm, hole) == pytest.approx(share, abs=1e-6)


@pytest.mark.parametrize(("u", "irradiance"), LOMMEL)
def test_a_point_of_light_is_drawn_as_lommels_tables_say(u, irradiance):
    hole = fresnel.setup_of_fresnel_number(u / (2 * np.pi))
    radii_mm = np.array([0.0, 1.0, 2.0, 4.0, 8.0]) / hole.v_per_mm
    # abs: the eighth digit printed.
    np.testing.assert_allclose(relative_irradiance(radii_mm, hole), irradiance, rtol=0, atol=1e-8)


# --- contrast ----------------------------------------------------------------------------------


@pytest.mark.parametrize("column", range(len(DEFOCUS_WAVES)), ids=lambda c: f"{DEFOCUS_WAVES[c]}")
def test_contrast_follows_hopkins_table_at_every_defocus(column):
    number = 2 * DEFOCUS_WAVES[column]
    # A hole has no defocus of exactly 0; N = 1e-4 changes no value by more than 1e-7.
    hole = fresnel.setup_of_fresnel_number(max(number, 1e-4))
    frequency = np.array(list(DEFOCUSED_OTF)) / 2 * hole.cutoff_per_mm
    printed = [row[column] for row in DEFOCUSED_OTF.values()]
    otf = round_otf(frequency, **hole.film_keywords())
    np.testing.assert_allclose(otf, printed, rtol=0, atol=PRINTED_5)


@pytest.mark.parametrize("wavelength_nm", [450.0, 650.0])
@pytest.mark.parametrize("column", range(len(FIXED_BOX_NUMBERS)))
def test_contrast_in_a_fixed_box_follows_the_table_for_every_hole(column, wavelength_nm):
    hole = fresnel.setup_of_fresnel_number(
        FIXED_BOX_NUMBERS[column], wavelength_nm=wavelength_nm, focal_length_mm=75.0
    )
    unit_per_mm = 1 / np.sqrt(wavelength_nm * fresnel.NM * 75.0)
    frequency = np.array(list(FIXED_BOX_OTF)) * unit_per_mm
    printed = [row[column] for row in FIXED_BOX_OTF.values()]
    otf = round_otf(frequency, **hole.film_keywords())
    np.testing.assert_allclose(otf, printed, rtol=0, atol=PRINTED_5)


# First zeros of Hopkins' integral, computed independently to 3e-4.
@pytest.mark.parametrize(
    ("number", "s"), [(1.5, 0.6000), (2.0, 0.3863), (4.0, 0.1682), (8.0, 0.07997)]
)
def test_a_large_hole_loses_its_contrast_first_at_the_known_fineness(number, s):
    hole = fresnel.setup_of_fresnel_number(number)

    def otf(s_value):
        return float(round_otf(s_value / 2 * hole.cutoff_per_mm, **hole.film_keywords()))

    fine = np.linspace(0.0, 1.2 * s, 400)
    first = next(i for i in range(400) if otf(fine[i]) <= 0)
    assert brentq(otf, fine[first - 1], fine[first]) == pytest.approx(s, abs=3e-4)


# Contrast reversal needs W20 > 0.64163 wavelengths, N > 1.28326: from Hopkins' integral, computed
# independently.
@pytest.mark.parametrize(("number", "reverses"), [(1.2825, False), (1.2840, True)])
def test_only_a_hole_that_is_large_enough_reverses_contrast(number, reverses):
    hole = fresnel.setup_of_fresnel_number(number)
    frequency = np.linspace(0, hole.cutoff_per_mm, 4001)[:-1]
    otf = round_otf(frequency, **hole.film_keywords())
    assert bool(otf.min() < -1e-9) is reverses


# Geometric optics: the transfer function of a uniform disc of diameter m d is 2 J1(x)/x.
@pytest.mark.parametrize("distance_mm", [np.inf, 300.0, 80.0])
def test_at_one_nanometre_only_the_geometric_disc_is_left(distance_mm):
    hole = fresnel.Setup(
        diameter_mm=0.5, focal_length_mm=60.0, wavelength_nm=1.0, distance_mm=distance_mm
    )
    frequency = np.linspace(0.05, 8.0, 60)
    x = np.pi * 2 * hole.shadow_radius_mm * frequency
    otf = round_otf(frequency, **hole.film_keywords())
    # What diffraction is left shifts the opening by s = lambda z nu = 1/1000 of the hole at most,
    # and the overlap shrinks by (4/pi) s/d.
    np.testing.assert_allclose(otf, 2 * j1(x) / x, rtol=0, atol=1.3e-3)


# --- light is neither made nor lost ------------------------------------------------------------


# Share of the light beyond v: 2/(pi v) to leading order, whatever the defocus. Perimeter over area
# of the opening, the slope of the transfer function at zero (from memory, recomputed).
@pytest.mark.parametrize("entry", REFERENCE, ids=lambda e: f"setup-{e['id']}")
def test_every_point_image_holds_all_of_its_light(entry):
    hole = setup_of(entry)
    v = max(300.0, 15.0 * entry["u_lommel"])
    beyond = 2 / (np.pi * v)
    # The next terms of the tail are of the relative orders 1/(2 v) and (u/v)^2.
    slack = beyond * (1 / v + 1.5 * (entry["u_lommel"] / v) ** 2) + 1e-6
    assert share_within(v / hole.v_per_mm, hole) + beyond == pytest.approx(1.0, abs=slack)


# --- reference/psf_reference.json: computed independently, see reference/ORIGIN.md ---------------


@pytest.mark.parametrize("entry", REFERENCE, ids=lambda e: f"setup-{e['id']}")
def test_the_point_image_agrees_with_brute_force_quadrature(entry):
    expected = np.array(entry["I_rel_unobstructed_fresnel"]) * entry["psf_scale_per_mm2"]
    image = round_psf(entry["r_mm"], **setup_of(entry).film_keywords())
    np.testing.assert_allclose(image, expected, rtol=0, atol=QUADRATURE * expected.max())


@pytest.mark.parametrize("entry", REFERENCE, ids=lambda e: f"setup-{e['id']}")
def test_the_transfer_function_agrees_with_brute_force_quadrature(entry):
    table = entry["otf"]
    otf = round_otf(table["frequency_cyc_per_mm"], **setup_of(entry).film_keywords())
    np.testing.assert_allclose(otf, table["value"], rtol=0, atol=QUADRATURE)


@pytest.mark.parametrize("share", ["0.50", "0.84", "0.95"])
@pytest.mark.parametrize("entry", REFERENCE, ids=lambda e: f"setup-{e['id']}")
def test_the_circle_that_holds_most_of_the_light_has_the_reference_radius(entry, share):
    radius_mm = entry["encircled_energy_radius_mm"][share]
    assert share_within(radius_mm, setup_of(entry)) == pytest.approx(float(share), abs=1e-6)


@pytest.mark.parametrize(("key", "level"), [("mtf50_cyc_per_mm", 0.5), ("mtf10_cyc_per_mm", 0.1)])
@pytest.mark.parametrize("entry", REFERENCE, ids=lambda e: f"setup-{e['id']}")
def test_half_and_a_tenth_of_the_contrast_fall_at_the_reference_frequency(entry, key, level):
    hole = setup_of(entry)

    def surplus(frequency):
        return round_otf(frequency, **hole.film_keywords()) - level

    fine = np.linspace(0, hole.cutoff_per_mm, 2001)
    first = int(np.flatnonzero(surplus(fine) <= 0)[0])
    crossing = brentq(lambda nu: float(surplus(nu)), fine[first - 1], fine[first], xtol=1e-12)
    assert crossing == pytest.approx(entry[key], rel=1e-6)


# The exact Rayleigh-Sommerfeld integral of the same file, without paraxial approximation: 1e-4 of
# the unobstructed wave for every hole of a useful size, 1 % for the 1 mm hole at 25 mm (id 25).
@pytest.mark.parametrize("entry", REFERENCE, ids=lambda e: f"setup-{e['id']}")
def test_leaving_out_the_exact_path_lengths_costs_next_to_nothing(entry):
    limit = 1e-2 if entry["id"] == 25 else 1e-4
    image = relative_irradiance(entry["r_mm"], setup_of(entry))
    np.testing.assert_allclose(image, entry["I_rel_unobstructed_rs1_exact"], rtol=0, atol=limit)
