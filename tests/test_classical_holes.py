"""The hole sizes of the books, what each is best at, and the drills and needles that make them.

d = k sqrt(lambda f). The constants are the authors' own (source beside each); which criterion each
fits was computed independently, and is computed again here from Lommel's and Hopkins' integrals in
reference/fresnel.py, without code of pinsim.
"""

import numpy as np
import pytest
from reference import fresnel

from pinsim.classical import classical_holes
from pinsim.optics import Light
from pinsim.tools import needles, number_drills, tools_around

GREEN = Light(wavelengths_nm=np.array([550.0]))
HALF_OF_A_DIGIT = 5.1e-4

# Author, a year it is dated by, k to the digits known, Fresnel number N = k^2/4, what it is best at.
AUTHORS = [
    # 2 r^2 = f lambda: Wien. Ber. 26 (1857) 33, as Mielenz, J. Res. NIST 104 (1999) 479, has it.
    ("Petzval", "1857", 1.4142, 0.5, "medium"),
    # Scientific Papers III, article 178, p. 431: 2 r^2 = f lambda.
    ("Rayleigh", "1889", 1.4142, 0.5, "medium"),
    # u = pi: abstract of J. Res. NIST 104 (1999) 479.
    ("Mielenz", "1999", 1.4142, 0.5, "medium"),
    # d = sqrt(f)/28 mm: Lenses in Photography (from memory), at 550 nm.
    ("Kingslake", "1951", 1.523, 0.580, "20 %"),
    # d = 0.008 sqrt(f) inches (from memory), at 550 nm.
    ("Abney", "", 1.719, 0.739, "bright"),
    # A third of the far-field distance d^2/lambda: SPIE J. 5 (1966) 050103; constant inferred.
    ("Reynolds", "1966", 1.732, 0.75, "bright"),
    # u = 1.8 pi: Phil. Mag. 31 (1891) 87.
    ("Rayleigh", "1891", 1.8974, 0.9, "90 %"),
    # f = s^2/lambda: Appl. Opt. 10 (1971) 2763.
    ("Young", "1971", 2.0, 1.0, "points"),
]
IDS = [f"{author} {year}".strip() for author, year, *_ in AUTHORS]


def row_of(author, year, *, focal_length_mm=50.0, light=GREEN, distance_mm=np.inf):
    """Return pinsim's one row of an author and year."""
    rows = classical_holes(focal_length_mm, light=light, distance_mm=distance_mm)
    found = [row for row in rows if row.author.startswith(author) and year in row.year]
    assert len(found) == 1
    return found[0]


@pytest.mark.parametrize(("author", "year", "k", "number", "_best_at"), AUTHORS, ids=IDS)
def test_each_author_has_the_constant_he_published(author, year, k, number, _best_at):
    row = row_of(author, year)
    assert row.constant == pytest.approx(k, abs=HALF_OF_A_DIGIT)
    assert row.constant**2 / 4 == pytest.approx(number, abs=1e-3)


# Diameters, mm, at 550 nm and infinity, computed independently: f, N = 0.5, 0.9, 1.
BY_FOCAL_LENGTH = [
    (25.0, 0.1658, 0.2225, 0.2345),
    (35.0, 0.1962, 0.2632, 0.2775),
    (50.0, 0.2345, 0.3146, 0.3317),
    (75.0, 0.2872, 0.3854, 0.4062),
    (100.0, 0.3317, 0.4450, 0.4690),
    (150.0, 0.4062, 0.5450, 0.5745),
    (200.0, 0.4690, 0.6293, 0.6633),
    (300.0, 0.5745, 0.7707, 0.8124),
]


@pytest.mark.parametrize(("focal_length_mm", "petzval", "rayleigh", "young"), BY_FOCAL_LENGTH)
def test_the_books_holes_come_to_these_diameters(focal_length_mm, petzval, rayleigh, young):
    for author, year, expected in (
        ("Petzval", "1857", petzval),
        ("Mielenz", "1999", petzval),
        ("Rayleigh", "1891", rayleigh),
        ("Young", "1971", young),
    ):
        row = row_of(author, year, focal_length_mm=focal_length_mm)
        assert row.diameter_mm == pytest.approx(expected, abs=5.1e-5)


@pytest.mark.parametrize(("distance_mm", "expected"), [(300.0, 0.38536), (80.0, 0.29665)])
def test_rayleigh_makes_the_hole_smaller_for_a_near_object(distance_mm, expected):
    """r^2 (1/zo + 1/zi) = 0.9 lambda; film 100 mm from the hole (form from memory)."""
    row = row_of("Rayleigh", "1891", focal_length_mm=100.0, distance_mm=distance_mm)
    assert row.diameter_mm == pytest.approx(expected, abs=5.1e-6)


def test_rules_that_name_no_light_do_not_change_with_it():
    blue = Light(wavelengths_nm=np.array([450.0]))
    for author, year, changes in (
        ("Kingslake", "1951", False),
        ("Abney", "", False),
        ("Young", "1971", True),
    ):
        in_green, in_blue = (row_of(author, year, light=light) for light in (GREEN, blue))
        ratio = np.sqrt(450.0 / 550.0) if changes else 1.0
        assert in_blue.diameter_mm / in_green.diameter_mm == pytest.approx(ratio, rel=1e-12)
    # 0.008 sqrt(f) inches for f = 4 inches; sqrt(f)/28 mm for f = 49 mm.
    assert row_of("Abney", "", focal_length_mm=101.6).diameter_mm == pytest.approx(0.016 * 25.4)
    assert row_of("Kingslake", "1951", focal_length_mm=49.0).diameter_mm == pytest.approx(0.25)


def brightness(k):
    """Return the irradiance of a point image's middle for unit energy; unit 1/(lambda f)."""
    setup = fresnel.setup_of_fresnel_number(k**2 / 4)
    return fresnel.psf(0.0, setup)[0] * 550 * fresnel.NM * 60


def finest(contrast):
    def of(k):
        setup = fresnel.setup_of_fresnel_number(k**2 / 4)
        frequency = np.linspace(0, 0.999 * setup.cutoff_per_mm, 1500)
        otf = fresnel.hopkins_otf(frequency, setup, nodes=80)
        first = int(np.flatnonzero(otf <= contrast)[0])
        found = np.interp(-contrast, -otf[first - 1 : first + 1], frequency[first - 1 : first + 1])
        return found * np.sqrt(550 * fresnel.NM * 60)

    return of


def tightness(k):
    """Return one over the radius that holds 90 % of a point's light; unit 1/sqrt(lambda f)."""
    setup = fresnel.setup_of_fresnel_number(k**2 / 4)
    unit = np.sqrt(550 * fresnel.NM * 60)
    radius = np.linspace(0, 4 * unit, 6001)
    ring = 2 * np.pi * radius * fresnel.psf(radius, setup)
    held = np.concatenate([[0.0], np.cumsum((ring[1:] + ring[:-1]) / 2 * np.diff(radius))])
    return unit / np.interp(0.9, held, radius)


# What must be as large as it can be, and the optimum k and value computed independently to these
# digits (other integrals, other program).
CRITERIA = {
    "medium": (finest(0.3), 1.4247, 0.68553),
    "20 %": (finest(0.2), 1.5235, 0.89820),
    "bright": (brightness, 1.7228, 1.44922),
    "90 %": (tightness, 1.9451, 1 / 1.51917),
}


@pytest.mark.parametrize("criterion", CRITERIA)
def test_the_yardstick_of_each_criterion_has_its_known_best(criterion):
    measure, k, value = CRITERIA[criterion]
    assert measure(k) == pytest.approx(value, rel=2e-4)
    assert measure(k) > max(measure(0.93 * k), measure(1.07 * k))


@pytest.mark.parametrize(
    ("author", "year", "best_at"),
    [(author, year, best_at) for author, year, _, _, best_at in AUTHORS if best_at in CRITERIA],
)
def test_each_books_hole_is_the_best_there_is_at_what_it_is_listed_for(author, year, best_at):
    """Within half a per cent of the optimum, and no other criterion's listing fits it better."""
    row = row_of(author, year)
    shares = {
        name: measure(row.constant) / measure(k) for name, (measure, k, _) in CRITERIA.items()
    }
    assert shares[best_at] >= 0.995
    assert shares[best_at] == pytest.approx(max(shares.values()), abs=1e-3)
    assert best_at in row.best_for


def test_young_lists_the_hole_that_parts_two_points():
    """His RL/s is least at f = s^2/lambda (Appl. Opt. 10 (1971) 2763; numbers from memory)."""
    assert "points" in row_of("Young", "1971").best_for


# Frequency of 20 % contrast of the books' holes, in 1/sqrt(lambda f), computed independently.
@pytest.mark.parametrize(
    ("author", "year", "detail"),
    [("Petzval", "1857", 0.88180), ("Rayleigh", "1891", 0.70395), ("Young", "1971", 0.64248)],
)
def test_the_detail_listed_beside_a_books_hole_is_what_it_draws(author, year, detail):
    row = row_of(author, year, focal_length_mm=60.0)
    unit_mm = np.sqrt(550 * fresnel.NM * 60.0)
    assert row.detail_cycles_mm * unit_mm == pytest.approx(detail, rel=1e-3)


# ASME B94.11M, number sizes, inches.
DRILLS_IN = {
    61: 0.0390,
    62: 0.0380,
    63: 0.0370,
    64: 0.0360,
    65: 0.0350,
    66: 0.0330,
    67: 0.0320,
    68: 0.0310,
    69: 0.0292,
    70: 0.0280,
    71: 0.0260,
    72: 0.0250,
    73: 0.0240,
    74: 0.0225,
    75: 0.0210,
    76: 0.0200,
    77: 0.0180,
    78: 0.0160,
    79: 0.0145,
    80: 0.0135,
}
# Two lists of sewing needles, mm: Watkins' table in a handbook of photography; users' list of 1999.
NEEDLES_MM = [
    (1, 1.346),
    (4, 1.016),
    (5, 0.813),
    (6, 0.686),
    (7, 0.686),
    (7, 0.559),
    (8, 0.584),
    (8, 0.533),
    (9, 0.508),
    (10, 0.508),
    (10, 0.457),
    (12, 0.406),
    (13, 0.330),
    (13, 0.356),
    (15, 0.254),
]


def test_number_drills_have_their_standard_sizes():
    seen = {drill.number: drill.diameter_mm for drill in number_drills()}
    assert seen == pytest.approx({number: 25.4 * inch for number, inch in DRILLS_IN.items()})
    assert seen[80] == pytest.approx(0.3429)
    assert seen[70] == pytest.approx(0.7112)


@pytest.mark.parametrize(("number", "diameter_mm"), NEEDLES_MM)
def test_a_needle_is_as_thick_as_either_list_says_within_what_is_admitted(number, diameter_mm):
    (needle,) = (one for one in needles() if one.number == number)
    assert needle.unsure_mm == pytest.approx(0.07)
    assert abs(needle.diameter_mm - diameter_mm) <= needle.unsure_mm


def test_the_tools_offered_are_those_just_smaller_and_just_larger():
    offered = {(tool.kind, tool.number) for tool in tools_around([0.50])}
    assert {number for kind, number in offered if kind == "drill"} == {77, 76}
    below_all = {(tool.kind, tool.number) for tool in tools_around([0.20])}
    assert below_all == {("drill", 80), ("needle", 15)}
