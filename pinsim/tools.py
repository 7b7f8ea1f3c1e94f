"""What a builder has to make a hole with: number drills and sewing needles, and their sizes."""

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

INCH_MM = 25.4

# Diameters in inches: ASME B94.11M, number sizes 61 to 80.
NUMBER_DRILLS_IN = {
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
# Sewing needles by number, inches: Watkins' table in an old handbook of photography, and a list
# made by users in 1999. Where both name a needle they differ by up to 25 %.
_NEEDLES_WATKINS_IN = {
    1: 0.053,
    4: 0.040,
    5: 0.032,
    7: 0.027,
    8: 0.023,
    10: 0.020,
    12: 0.016,
    13: 0.013,
}
_NEEDLES_1999_IN = {
    6: 0.027,
    7: 0.022,
    8: 0.021,
    9: 0.020,
    10: 0.018,
    12: 0.016,
    13: 0.014,
    15: 0.010,
}
NEEDLE_UNSURE_MM = 0.07

CAUTION = (
    "Wear eye protection, mind sharp points, deburr the hole; "
    "follow the tool maker's and your local safety rules."
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Tool:
    """A drill or a needle. unsure_mm : how far its diameter may be off."""

    kind: Literal["drill", "needle"]
    number: int
    diameter_mm: float
    unsure_mm: float = 0.0

    @property
    def label(self) -> str:
        """The tool as the trade calls it."""
        return f"drill #{self.number}" if self.kind == "drill" else f"needle no. {self.number}"


def number_drills() -> tuple[Tool, ...]:
    """Return all number drills, smallest first."""
    return tuple(
        Tool(kind="drill", number=number, diameter_mm=inches * INCH_MM)
        for number, inches in sorted(NUMBER_DRILLS_IN.items(), reverse=True)
    )


def needles() -> tuple[Tool, ...]:
    """Return all needles, smallest first, at the middle of what the lists say of each."""
    found = []
    for number in sorted(_NEEDLES_WATKINS_IN.keys() | _NEEDLES_1999_IN.keys(), reverse=True):
        said = [
            inches[number] * INCH_MM
            for inches in (_NEEDLES_WATKINS_IN, _NEEDLES_1999_IN)
            if number in inches
        ]
        found.append(
            Tool(
                kind="needle",
                number=number,
                diameter_mm=sum(said) / len(said),
                unsure_mm=NEEDLE_UNSURE_MM,
            )
        )
    return tuple(sorted(found, key=lambda tool: tool.diameter_mm))


SMALLEST_DRILL = number_drills()[0]
LARGEST_DRILL = number_drills()[-1]


def tools_around(diameters_mm: Iterable[float]) -> tuple[Tool, ...]:
    """Return the nearest drill and needle on either side of each hole, smallest first."""
    chosen: dict[tuple[str, int], Tool] = {}
    for diameter in diameters_mm:
        for row in (number_drills(), needles()):
            smaller = [tool for tool in row if tool.diameter_mm <= diameter][-1:]
            larger = [tool for tool in row if tool.diameter_mm > diameter][:1]
            for tool in smaller + larger:
                chosen[tool.kind, tool.number] = tool
    return tuple(sorted(chosen.values(), key=lambda tool: (tool.diameter_mm, tool.kind)))


def how_to_make(diameter_mm: float) -> str:
    """Return one line of advice for a hole that no number drill makes; nothing if one does."""
    if diameter_mm < 0.97 * SMALLEST_DRILL.diameter_mm:
        return (
            f"{diameter_mm:.3f} mm is smaller than the smallest number drill "
            f"(#{SMALLEST_DRILL.number}, {SMALLEST_DRILL.diameter_mm:.3f} mm): let only the point of a "
            "needle through thin metal, sand the burr off and measure what you got, or buy a "
            "laser-drilled hole."
        )
    if diameter_mm > 1.03 * LARGEST_DRILL.diameter_mm:
        return (
            f"{diameter_mm:.2f} mm is larger than the fine drills listed here "
            f"(#{LARGEST_DRILL.number}, {LARGEST_DRILL.diameter_mm:.3f} mm): ordinary drills make it."
        )
    return ""
