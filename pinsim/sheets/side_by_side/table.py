"""The figures as rows of words, with the better one of each row named, for paper and for a browser."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

from pinsim.numbers import format_detail
from pinsim.sheets.side_by_side.figures import DesignFigures
from pinsim.sheets.side_by_side.verdict import (
    ALIKE_DETAIL,
    ALIKE_STOPS,
    light_stops,
    middle_of,
)
from pinsim.units import format_length

_WIDER_SHARE = 0.05  # a view wider by less is the same


@dataclass(frozen=True, slots=True)
class Cell:
    """What one design has. mark : a word, if it is the better one; empty else."""

    text: str
    mark: str = ""


@dataclass(frozen=True, slots=True)
class Row:
    """One line: what it tells, and what each design has."""

    label: str
    cells: tuple[Cell, ...]


@dataclass(frozen=True, slots=True)
class Group:
    """Rows that belong together under one heading."""

    title: str
    rows: tuple[Row, ...]


def table(designs: Sequence[DesignFigures]) -> tuple[Group, ...]:
    """Return all rows in three groups: the design, its detail, its light and view."""
    return (
        Group("Light", _light(designs)),
        Group("Finest detail, cycles per degree", _detail(designs)),
        Group("Frame", _frame(designs)),
    )


def legend(designs: Sequence[DesignFigures], view_words: str) -> str:
    """Return what the figures mean, in a few sentences."""
    materials = ", ".join(dict.fromkeys(one.material for one in designs))
    lines = [
        "A cycle is a light and a dark line; the moon is half a degree wide. Detail is what is plain "
        "to see, 20 % contrast, where it is not said otherwise, in the direction where it is poorest, "
        "compared in the scene and not on the film: all pictures here are at one angular scale.",
        f"A black label names the better one; none stands where they differ by less than "
        f"{100.0 * ALIKE_DETAIL:.0f} % or {ALIKE_STOPS:g} stop.",
        f"Times: {materials}, EV at ISO 100, corrected for long exposure.",
        view_words,
    ]
    return " ".join(line for line in lines if line)


def _light(designs: Sequence[DesignFigures]) -> tuple[Row, ...]:
    quickest = min(designs, key=lambda one: one.time.metered_s)
    spread = max(light_stops(one, quickest) for one in designs)
    shortest = [
        spread >= ALIKE_STOPS and light_stops(one, quickest) < ALIKE_STOPS for one in designs
    ]
    word = "less light" if len(designs) == 2 else "least light"
    times = tuple(
        Cell(_time(one), word if short else "")
        for one, short in zip(designs, shortest, strict=True)
    )
    holes = tuple(Cell(one.hole) for one in designs)
    numbers = tuple(Cell(f"f/{one.f_number:.0f}") for one in designs)
    return (
        Row("hole", holes),
        Row("f-number", numbers),
        Row(f"time at EV {designs[0].ev:g}", times),
    )


def _time(design: DesignFigures) -> str:
    return design.time.text + ("*" if design.time.outside else "")


def time_notes(designs: Sequence[DesignFigures]) -> str:
    """Return what the star beside a time means, if there is one."""
    whys = dict.fromkeys(why for one in designs for why in one.time.outside)
    return f"* a guess: {', '.join(whys)}." if whys else ""


def _detail(designs: Sequence[DesignFigures]) -> tuple[Row, ...]:
    rows = []
    for i, place in enumerate(designs[0].places):
        far = (
            ""
            if math.isinf(place.distance_mm)
            else f", {format_length(_rounded(place.distance_mm))}"
        )
        rows.append(
            Row(
                f"{place.name}{far}",
                _finer([one.places[i].plain_cycles_deg for one in designs]),
            )
        )
    middle = middle_of(designs[0]).name
    for k, words in ((0, "clear, 50 %"), (2, "just seen, 10 %")):
        rows.append(
            Row(
                f"{middle}: {words}",
                _finer([middle_of(one).cycles_deg[k] for one in designs]),
            )
        )
    on_film = tuple(Cell(f"{format_detail(middle_of(one).film_cycles_mm)} c/mm") for one in designs)
    return (*rows, Row(f"{middle}: on the film", on_film))


def _rounded(distance_mm: float) -> float:
    """Return a distance with two figures: the map's median tells no more."""
    size = 10.0 ** (math.floor(math.log10(distance_mm)) - 1)
    return round(distance_mm / size) * size


def _finer(found: Sequence[float]) -> tuple[Cell, ...]:
    """Return finest details, cycles per degree, with the better ones marked."""
    best = max(found)
    word = "finer" if len(found) == 2 else "finest"
    differ = min(found) * (1.0 + ALIKE_DETAIL) <= best and best > 0.0
    return tuple(
        Cell(
            f"{one:#.3g}".rstrip(".") if one > 0.0 else "none",
            word if differ and one * (1.0 + ALIKE_DETAIL) > best else "",
        )
        for one in found
    )


def _frame(designs: Sequence[DesignFigures]) -> tuple[Row, ...]:
    darkest = [one.falloff_stops for one in designs]
    least = min(darkest)
    even = "evener" if len(designs) == 2 else "evenest"
    uneven = math.isfinite(least) and max(darkest) - least >= ALIKE_STOPS
    falloff = tuple(
        Cell(
            "unlit" if math.isinf(one) else "0 stops" if one < 0.05 else f"-{one:.1f} stops",
            even if uneven and one - least < ALIKE_STOPS else "",
        )
        for one in darkest
    )
    areas = [one.horizontal_view_deg * one.vertical_view_deg for one in designs]
    wide = "wider" if len(designs) == 2 else "widest"
    differ = max(areas) >= (1.0 + _WIDER_SHARE) * min(areas)
    views = tuple(
        Cell(
            f"{one.horizontal_view_deg:.0f} x {one.vertical_view_deg:.0f} deg",
            wide if differ and area * (1.0 + _WIDER_SHARE) > max(areas) else "",
        )
        for one, area in zip(designs, areas, strict=True)
    )
    shown = tuple(Cell(f"{100.0 * (1.0 - one.hidden_share):.0f} %") for one in designs)
    rows = [
        Row("light in its corner", falloff),
        Row("sees", views),
        Row("of it, shown here", shown),
    ]
    if min(one.covered_share for one in designs) < 0.999:
        covered = tuple(Cell(f"{100.0 * one.covered_share:.0f} %") for one in designs)
        rows.append(Row("photo covers", covered))
    return tuple(rows)
