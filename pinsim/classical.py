"""The hole sizes that books give, as d = k sqrt(lambda f), and what each of them is best at.

They differ because they answer different questions. k is each author's own; the criterion beside it
is the one whose optimum, computed from the same diffraction integral, lies nearest; for Young, whose
constant lies between two, his own.
"""

import math
from dataclasses import dataclass

from pinsim import optics

_GREEN_MM = 550e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """One author's rule.

    constant : k, the hole's diameter over sqrt(lambda f). best_for, criterion : what it is best at,
    in two words, and with the constant computed for that need in light of one colour. source : where
    it was published, and how surely it is known. knows_light : False where the rule names no
    wavelength; its k is then that of 550 nm.
    """

    author: str
    year: str
    constant: float
    best_for: str
    criterion: str
    source: str
    knows_light: bool = True

    def diameter_mm(
        self, focal_length_mm: float, wavelength_nm: float, *, distance_mm: float = math.inf
    ) -> float:
        """Return the hole the rule gives; for near objects f is z zo/(z + zo), as Rayleigh has it."""
        wavelength_mm = wavelength_nm * 1e-6 if self.knows_light else _GREEN_MM
        depth_mm = 1.0 / (1.0 / focal_length_mm + 1.0 / distance_mm)
        return self.constant * math.sqrt(wavelength_mm * depth_mm)


RULES = (
    Rule(
        author="Petzval",
        year="1857",
        constant=math.sqrt(2.0),
        best_for="medium detail",
        criterion="contrast of medium detail: of 50 to 30 % the optimum is k 1.38 to 1.42",
        source="2 r^2 = lambda f; Sitzungsber. Akad. Wiss. Wien 26 (1857) 33, as Mielenz 1999 has it",
    ),
    Rule(
        author="Rayleigh",
        year="1889",
        constant=math.sqrt(2.0),
        best_for="medium detail",
        criterion="contrast of medium detail: of 50 to 30 % the optimum is k 1.38 to 1.42",
        source="2 r^2 = lambda f; Scientific Papers III, art. 178, p. 431",
    ),
    Rule(
        author="Mielenz",
        year="1999",
        constant=math.sqrt(2.0),
        best_for="medium detail",
        criterion="contrast of medium detail: of 50 to 30 % the optimum is k 1.38 to 1.42",
        source="u = pi; J. Res. NIST 104 (1999) 479, abstract",
    ),
    Rule(
        author="Kingslake",
        year="1951/1963",
        # d = sqrt(f in mm) / 28
        constant=1.0 / (28.0 * math.sqrt(_GREEN_MM)),
        best_for="fine detail, 20 %",
        criterion="finest detail at 20 % contrast: optimum k 1.52",
        source="d = sqrt(f)/28 mm; Lenses in Photography (formula from memory)",
        knows_light=False,
    ),
    Rule(
        author="Abney",
        year="not known",
        # d = 0.008 sqrt(f), inches: 0.008 sqrt(25.4) = 0.0403 for mm
        constant=0.008 * math.sqrt(25.4 / _GREEN_MM),
        best_for="brightest middle",
        criterion="light in the very middle of a point image: optimum k 1.72",
        source="d = 0.008 sqrt(f), inches (from memory)",
        knows_light=False,
    ),
    Rule(
        author="Reynolds, Ward",
        year="1966",
        constant=math.sqrt(3.0),
        best_for="brightest middle",
        criterion="light in the very middle of a point image: optimum k 1.72",
        source="f = d^2/(3 lambda); SPIE J. 5 (1966) 050103, abstract (constant inferred from it)",
    ),
    Rule(
        author="Rayleigh",
        year="1891",
        constant=math.sqrt(3.6),
        best_for="90 % in a circle",
        criterion="smallest circle with 90 % of a point's light: optimum k 1.95",
        source="r^2 (1/z + 1/zo) = 0.9 lambda; Phil. Mag. 31 (1891) 87, u = 1.8 pi",
    ),
    Rule(
        author="Young",
        year="1971",
        constant=2.0,
        best_for="parting 2 points",
        criterion="telling two points apart at little contrast: finest detail at 5 % has k 2.09",
        source="f = r^2/lambda; Appl. Opt. 10 (1971) 2763",
    ),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Classical:
    """A rule's hole for one design, and the finest detail it draws in the middle at 20 % contrast."""

    author: str
    year: str
    constant: float
    diameter_mm: float
    detail_cycles_mm: float
    best_for: str
    criterion: str
    source: str


def classical_holes(
    focal_length_mm: float, *, light: optics.Light, distance_mm: float = math.inf
) -> tuple[Classical, ...]:
    """Return every rule's hole, smallest constant first, and what it draws in a light."""
    return tuple(
        Classical(
            author=rule.author,
            year=rule.year,
            constant=rule.constant,
            diameter_mm=(
                diameter := rule.diameter_mm(
                    focal_length_mm, light.mean_nm, distance_mm=distance_mm
                )
            ),
            detail_cycles_mm=optics.finest_detail(
                diameter_mm=diameter,
                focal_length_mm=focal_length_mm,
                light=light,
                distance_mm=distance_mm,
                contrast=0.2,
            ),
            best_for=rule.best_for,
            criterion=rule.criterion,
            source=rule.source,
        )
        for rule in RULES
    )
