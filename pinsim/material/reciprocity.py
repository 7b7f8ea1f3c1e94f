"""How a material's speed falls off in long exposures, and the time that makes up for it.

A meter's time holds from about 1/1000 to 1/5 s (Kodak Technical Data E-31, 2002). Longer ones record
less than their length says: reciprocity fails. Makers give either an exponent, Tc = Tm^P for a metered
time Tm of a second and more (HARMAN technology, Film Reciprocity Failure Compensation), which is
Schwarzschild's law E t^p = const with P = 1/p (ApJ 11 (1900) 89), or a table of times.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, overload

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import DesignError
from pinsim.tables import Table

Array = NDArray[np.float64]
Points = tuple[tuple[float, float], ...]

EXPONENT_RANGE = (1.0, 3.0)
TIME_RANGE_S = (1e-4, 1e9)
# A table's first slope is followed down to where no correction is needed, so it must get there.
_LEAST_SLOPE = 1.0 + 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Reciprocity:
    """The time to give for a metered time. Made by `from_table`; as it is, no correction at all.

    exponent : P. starts_s : up to this metered time none is needed. points : (metered s, corrected s)
    instead of the exponent, both rising; between them, and beyond the last, straight lines of log time.
    data_to_s : the longest metered time that the source speaks of. source : who says so.
    """

    exponent: float = 1.0
    starts_s: float = 1.0
    points: Points = ()
    data_to_s: float = math.inf
    source: str = ""

    @classmethod
    def from_table(cls, table: Table | Mapping[str, Any]) -> "Reciprocity":
        """Return what a table of a TOML file says: exponent and starts_s, or table; data_to_s; source.

        An empty table is a material that needs no correction.
        Raises DesignError, in one line, for an unknown key or a value that cannot be.
        """
        if not isinstance(table, Table):
            table = Table(dict(table), "[reciprocity]", DesignError)
        by_points, by_exponent = table.has("table"), table.has("exponent")
        if by_points and by_exponent:
            raise DesignError(
                f"{table.where}: table and exponent exclude each other; keep the one that was measured."
            )
        if table.has("starts_s") and not by_exponent:
            table.refuse_slip("exponent")
            raise DesignError(
                f"{table.place('starts_s')} needs an exponent beside it, for example exponent = 1.3."
            )
        made = cls(
            exponent=_number(table, "exponent", 1.0, EXPONENT_RANGE),
            starts_s=_number(table, "starts_s", 1.0, TIME_RANGE_S),
            points=_points(table.take("table"), table.place("table")) if by_points else (),
            data_to_s=_number(table, "data_to_s", math.inf, TIME_RANGE_S),
            source=table.text("source", ""),
        )
        table.refuse_leftovers()
        return made

    @property
    def needed(self) -> bool:
        """Whether any time needs correction."""
        return bool(self.points) or self.exponent != 1.0

    @property
    def label(self) -> str:
        """The correction in a few words, for captions: "metered^1.26 above 1 s"."""
        if self.points:
            return f"table of {len(self.points)} times"
        if not self.needed:
            return "none"
        if self.starts_s == 1.0:
            return f"metered^{self.exponent:g} above 1 s"
        start = f"{self.starts_s:g} s"
        return f"{start} x (metered / {start})^{self.exponent:g} above {start}"

    @overload
    def corrected_s(self, metered_s: float) -> float: ...
    @overload
    def corrected_s(self, metered_s: Array) -> Array: ...
    def corrected_s(self, metered_s: float | Array) -> float | Array:
        """Return the time to give for a metered time; any shape, s, never shorter than metered."""
        metered = np.asarray(metered_s, np.float64)
        return _as_given(self._corrected(metered), metered_s)

    @overload
    def metered_s(self, corrected_s: float) -> float: ...
    @overload
    def metered_s(self, corrected_s: Array) -> Array: ...
    def metered_s(self, corrected_s: float | Array) -> float | Array:
        """Return the metered time that a time given is worth; the inverse of `corrected_s`."""
        given = np.asarray(corrected_s, np.float64)
        if not self.needed:
            return _as_given(given.copy(), corrected_s)
        start_s, from_s, to_s, end_slope = self._knots()
        turned = (start_s, to_s, from_s, 1.0 / end_slope)
        return _as_given(_follow(given, turned), corrected_s)

    @overload
    def efficiency(self, metered_s: float) -> float: ...
    @overload
    def efficiency(self, metered_s: Array) -> Array: ...
    def efficiency(self, metered_s: float | Array) -> float | Array:
        """Return metered over corrected time: the share of its speed that the material keeps, <= 1."""
        metered = np.asarray(metered_s, np.float64)
        corrected = self._corrected(metered)
        share = np.divide(metered, corrected, out=np.ones_like(metered), where=corrected > 0.0)
        return _as_given(share, metered_s)

    def outside_data(self, metered_s: float) -> bool:
        """Tell whether a metered time is longer than the source speaks of."""
        return metered_s > self.data_to_s * (1.0 + 1e-9)

    def _corrected(self, metered: Array) -> Array:
        return _follow(metered, self._knots()) if self.needed else metered.copy()

    def _knots(self) -> tuple[float, Array, Array, float]:
        """Return where correction starts (s), logs of times metered and corrected, the last slope."""
        if not self.points:
            start = np.array([math.log(self.starts_s)])
            return self.starts_s, start, start, self.exponent
        metered, corrected = np.log(np.array(self.points)).T
        slopes = np.diff(corrected) / np.diff(metered)
        if corrected[0] > metered[0]:
            # Down the first slope to where nothing needs correction.
            below = (corrected[0] - metered[0]) / (slopes[0] - 1.0)
            metered = np.concatenate([[metered[0] - below], metered])
            corrected = np.concatenate([[metered[0]], corrected])
        # Never flatter than the times themselves, or a long time would come out too short.
        return math.exp(metered[0]), metered, corrected, max(float(slopes[-1]), 1.0)


def _follow(times_s: Array, knots: tuple[float, Array, Array, float]) -> Array:
    """Return times carried along straight lines of log time; up to the first knot they stay."""
    start_s, from_log, to_log, end_slope = knots
    result = np.array(times_s, np.float64)
    late = result > start_s
    log_time = np.log(result, where=late, out=np.zeros_like(result))
    carried = np.where(
        log_time > from_log[-1],
        to_log[-1] + end_slope * (log_time - from_log[-1]),
        np.interp(log_time, from_log, to_log),
    )
    return np.where(late, np.exp(np.where(late, carried, 0.0)), result)


def _as_given(result: Array, like: float | Array) -> float | Array:
    return result if isinstance(like, np.ndarray) else float(result)


def _number(table: Table, key: str, default: float, limits: tuple[float, float]) -> float:
    if not table.has(key):
        return default
    return _checked(table.take(key), table.place(key), limits)


def _checked(value: Any, place: str, limits: tuple[float, float]) -> float:
    low, high = limits
    if isinstance(value, bool) or not isinstance(value, int | float) or not low <= value <= high:
        raise DesignError(f"{place} is {value!r}; it must be a plain number, {low:g} to {high:g}.")
    return float(value)


def _points(value: Any, place: str) -> Points:
    example = "for example [[1, 2], [10, 50], [100, 1200]]"
    if not isinstance(value, list) or len(value) < 2:
        raise DesignError(f"{place} must hold two pairs of seconds or more, {example}.")
    points: list[tuple[float, float]] = []
    for pair in value:
        if not isinstance(pair, list) or len(pair) != 2:
            raise DesignError(f"{place}: {pair!r} is not a pair of seconds, {example}.")
        metered, corrected = (_checked(one, f"{place}: a time", TIME_RANGE_S) for one in pair)
        if corrected < metered:
            raise DesignError(
                f"{place}: {metered:g} s becomes {corrected:g} s; write [metered, corrected], "
                "the corrected time is never the shorter."
            )
        if points and not (metered > points[-1][0] and corrected > points[-1][1]):
            raise DesignError(
                f"{place}: {pair!r} comes after {list(points[-1])!r}; times must rise."
            )
        points.append((metered, corrected))
    (first, first_corrected), (second, second_corrected) = points[:2]
    slope = math.log(second_corrected / first_corrected) / math.log(second / first)
    if first_corrected > first and slope < _LEAST_SLOPE:
        raise DesignError(
            f"{place} begins at {first:g} s, which needs {first_corrected:g} s; "
            "put a time before it that needs no correction, for example [0.1, 0.1]."
        )
    return tuple(points)
