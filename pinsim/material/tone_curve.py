"""Density against the logarithm of exposure: a material's characteristic curve.

The curve is a straight line of slope gamma whose two bends are soft:

    D(x) = base_fog + gamma (s(x - a, toe) - s(x - b, shoulder)),   s(x, w) = w log10(1 + 10^(x/w))

so it starts at base_fog, ends at d_max = base_fog + gamma (b - a), and rises everywhere. x is log10 of
exposure over that of the speed point, where D is speed_density above base_fog: that fixes a. A
reversal material's curve is the same with x turned round. The form is our own (two logarithms as
soft bends); what holds it to the world are the points that standards define, see tests.
"""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

_HALVINGS = 60  # of the interval that holds an inverse: below a rounding error of x


def _softened(x: Array, width: float) -> Array:
    # logaddexp does not overflow where 10^(x/w) would.
    return np.asarray(np.logaddexp(0.0, x * (np.log(10.0) / width)) * (width / np.log(10.0)))


def _slope(x: Array, width: float) -> Array:
    """Return the derivative of _softened: 0 before the bend, 1 after it."""
    return np.asarray(0.5 + 0.5 * np.tanh(x * (0.5 * np.log(10.0) / width)))


@dataclass(frozen=True, slots=True, kw_only=True)
class ToneCurve:
    """A characteristic curve; densities are diffuse, of film by light through it, of paper off it.

    base_fog, d_max : least and greatest density. gamma : slope of the straight part, D per log10 H.
    toe, shoulder : widths of the bends at low and high density, in log10 H.
    speed_density : density above base_fog at the speed point. rising : False for reversal.
    """

    base_fog: float
    d_max: float
    gamma: float
    toe: float
    shoulder: float
    speed_density: float = 0.10
    rising: bool = True
    _toe_at: float = field(init=False, repr=False, default=0.0)

    def __post_init__(self) -> None:
        # The further right the toe lies the thinner the density at the speed point.
        low, high = -20.0, 20.0
        for _ in range(_HALVINGS):
            middle = 0.5 * (low + high)
            if float(self._above(np.array(0.0), middle)) > self.speed_density:
                low = middle
            else:
                high = middle
        object.__setattr__(self, "_toe_at", 0.5 * (low + high))

    def _above(self, x: Array, toe_at: float) -> Array:
        shoulder_at = toe_at + (self.d_max - self.base_fog) / self.gamma
        return self.gamma * (
            _softened(x - toe_at, self.toe) - _softened(x - shoulder_at, self.shoulder)
        )

    def _along(self, log_exposure: ArrayLike) -> Array:
        x = np.asarray(log_exposure, np.float64)
        return x if self.rising else -x

    def density(self, log_exposure: ArrayLike) -> Array:
        """Return the density for log10 of exposure over the speed point's, any shape."""
        return self.base_fog + self._above(self._along(log_exposure), self._toe_at)

    def gradient(self, log_exposure: ArrayLike) -> Array:
        """Return the slope dD / dlog10 H, negative for reversal; any shape."""
        x = self._along(log_exposure) - self._toe_at
        slope = self.gamma * (
            _slope(x, self.toe)
            - _slope(x - (self.d_max - self.base_fog) / self.gamma, self.shoulder)
        )
        return slope if self.rising else -slope

    def log_exposure(self, density: ArrayLike) -> Array:
        """Return log10 of exposure over the speed point's that gives a density; any shape.

        NaN where no exposure does: at base_fog and below, at d_max and above. Found by halving.
        """
        wanted = np.asarray(density, np.float64)
        above = wanted - self.base_fog
        span = (self.d_max - self.base_fog) / self.gamma
        reach = 40.0 * max(self.toe, self.shoulder)
        low = np.full(wanted.shape, self._toe_at - reach)
        high = np.full(wanted.shape, self._toe_at + span + reach)
        for _ in range(_HALVINGS):
            middle = 0.5 * (low + high)
            denser = self._above(middle, self._toe_at) > above
            high = np.where(denser, middle, high)
            low = np.where(denser, low, middle)
        found = 0.5 * (low + high)
        inside = (wanted > self.base_fog) & (wanted < self.d_max)
        return np.asarray(np.where(inside, found if self.rising else -found, np.nan))

    @property
    def iso_range(self) -> float:
        """ISO range R of a paper: 100 log10(H_S / H_T), D from 0.04 above base_fog to 0.9 d_max.

        Source: ISO 6846, as in the Focal Encyclopedia of Photography, 4th ed., p. 679.
        """
        ends = self.log_exposure([self.base_fog + 0.04, 0.9 * self.d_max])
        return float(100.0 * abs(ends[1] - ends[0]))
