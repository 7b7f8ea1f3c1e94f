"""The print of a negative: a paper whose scale fits, exposed as a right negative of the kind needs.

The paper's grade is chosen for the material, not for the picture, and the printing time is that of a
well exposed negative's mid-tone. So a thin negative prints dark and a thick one pale, as they should
look when a time was wrong. A paper only comes in so many grades: what is harder than the softest can
hold, as a paper negative is, prints hard.
"""

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pinsim.material import Material, ToneCurve
from pinsim.render.expose import METERED_LXS, MID_TONE

Array = NDArray[np.float64]

# The mid-tone prints as itself: density above paper white.
MID_DENSITY = -math.log10(MID_TONE)
# ISO ranges that papers have been made in: log ranges 0.50 to 1.70 are grades 5 to 0 of
# ANSI PH2.2-1966, as in the Focal Encyclopedia of Photography, 4th ed., p. 679.
ISO_RANGES = (50.0, 170.0)
# A glossy paper's white and black, and how softly it reaches them, in density: usual, from memory.
_WHITE, _BLACK = 0.05, 2.1
_TOE_DENSITY, _SHOULDER_DENSITY = 0.16, 0.35


def _paper(gamma: float) -> ToneCurve:
    return ToneCurve(
        base_fog=_WHITE,
        d_max=_BLACK,
        gamma=gamma,
        toe=_TOE_DENSITY / gamma,
        shoulder=_SHOULDER_DENSITY / gamma,
        speed_density=MID_DENSITY,
    )


def _gamma_for(wanted_range: float) -> float:
    # Widths go with 1/gamma, so the range is exactly proportional to it.
    return _paper(1.0).iso_range / wanted_range


@dataclass(frozen=True, slots=True, kw_only=True)
class Print:
    """How the negatives of one material are printed.

    paper : its curve, 0 at the mid-tone's exposure. mid_density : of a right negative's mid-tone.
    """

    paper: ToneCurve
    mid_density: float

    def density(self, negative: Array) -> Array:
        """Return the print's density where the negative has a density; any shape."""
        return self.paper.density(self.mid_density - np.asarray(negative, np.float64))

    def light(self, negative: Array) -> Array:
        """Return the print's light to an eye that takes the paper's white for 1, its black for 0."""
        reflected = 10.0 ** (self.paper.base_fog - self.density(negative))
        black = 10.0 ** (self.paper.base_fog - self.paper.d_max)
        return np.asarray((reflected - black) / (1.0 - black))


@lru_cache(maxsize=64)
def print_of(material: Material) -> Print:
    """Return the paper that fits a negative material, and the printing time as a density.

    The fitting paper draws the mid-tone's surroundings as steep as they are in the scene, as
    far as papers go.
    """
    if material.curve is None:
        raise ValueError(f"{material.name} gives no negative to print")
    mid = math.log10(METERED_LXS / material.speed_lxs)
    gradient = float(material.curve.gradient(mid))
    slope = float(_paper(1.0).gradient(0.0))
    fitting = 1.0 / (gradient * slope)
    hardest, softest = (_gamma_for(wanted) for wanted in ISO_RANGES)
    paper = _paper(min(max(fitting, softest), hardest))
    return Print(paper=paper, mid_density=float(material.curve.density(mid)))
