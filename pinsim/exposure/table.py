"""Times for many lights down, and several materials or holes across: what is pinned in a box's lid."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pinsim.errors import DesignError
from pinsim.exposure.light import LightLevel
from pinsim.exposure.times import HAND_LEAST_S, REASONS, Time, light_share, time_for

if TYPE_CHECKING:
    from pinsim.camera import Camera

OUTSIDE_MARK, SHORT_MARK = "*", "^"
CAUTION = "Never look at the sun through the hole, beside it in a finder, or along its beam."


@dataclass(frozen=True, slots=True, kw_only=True)
class Cell:
    """One camera's times in one light: in the middle, in the farthest corner, a stop either way."""

    centre: Time
    corner: Time
    less: Time
    more: Time


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """One camera of the table. title, subtitle : what tells it from the others."""

    camera: "Camera"
    title: str
    subtitle: str
    corner_share: float

    @property
    def corner_stops(self) -> float:
        """How much darker the corner is, stops; infinity where no light comes."""
        return -math.log2(self.corner_share) if self.corner_share > 0.0 else math.inf

    @property
    def corner_text(self) -> str:
        """How dark the corner is, in words."""
        if self.corner_share <= 0.0:
            return "unlit"
        stops = self.corner_stops
        if abs(stops) < 0.05:
            return "as bright as the centre"
        return f"{abs(stops):.1f} stops {'darker' if stops > 0.0 else 'brighter'}"


@dataclass(frozen=True, slots=True, kw_only=True)
class TimeTable:
    """Times, cells[light][column], and what they were computed for."""

    name: str
    columns: tuple[Column, ...]
    lights: tuple[LightLevel, ...]
    cells: tuple[tuple[Cell, ...], ...]
    filter_factor: float

    @property
    def summary(self) -> str:
        """What all columns share of the camera, in one line."""
        camera = self.columns[0].camera
        if len({column.camera.hole.label for column in self.columns}) == 1:
            return camera.summary
        return f"{camera.focal_length_mm:g} mm to film, {camera.film.label}"

    def legend(self, *, short: bool = False) -> list[str]:
        """Return what the times assume and what their marks mean, one sentence a line."""
        if short:
            lines = [
                "EV at ISO 100.",
                *self._materials(),
                self._corners(),
                self._outside(),
                self._short(),
            ]
            return [line for line in lines if line]
        lines = [
            "EV at ISO 100. Metered time N^2 / (2^EV EI/100), ISO 2720, then corrected for long "
            "exposure (reciprocity).",
            *self._materials(),
            self._corners(),
            "Rounded by 1/6 stop at most."
            + (" A stop less or more is half or twice the time." if len(self.columns) == 1 else ""),
        ]
        if self.filter_factor != 1.0:
            lines.append(
                f"A filter of factor {self.filter_factor:.3g} "
                f"({math.log2(self.filter_factor):.2g} stops) is in all times."
            )
        lines += [self._ranges(), self._outside(), self._short()]
        return [line for line in lines if line]

    def _materials(self) -> list[str]:
        lines = []
        for material in {c.camera.material_name: c.camera.material for c in self.columns}.values():
            law = material.reciprocity
            unsure = material.speed_unsure_stops
            index = f"EI {material.speed_iso:g}" + (f" +- {unsure:g} stop" if unsure >= 0.5 else "")
            line = f"{material.name}: {index}, correction {law.label}"
            if not math.isinf(law.data_to_s):
                line += f", known to {law.data_to_s:g} s metered"
            lines.append(f"{line}.")
        return lines

    def _corners(self) -> str:
        texts = [column.corner_text for column in self.columns]
        if len(set(texts)) == 1:
            return f"Corner: {texts[0]}{'' if texts[0] == 'unlit' else ', of an evenly lit scene'}."
        each = "; ".join(f"{c.title} {text}" for c, text in zip(self.columns, texts, strict=True))
        return f"Corners of an evenly lit scene: {each}."

    def _ranges(self) -> str:
        if all(light.low_ev == light.high_ev for light in self.lights):
            return ""
        return "Of a range of EV, the time is for its middle."

    def _outside(self) -> str:
        whys = {why for row in self.cells for cell in row for t in _all(cell) for why in t.outside}
        if not whys:
            return ""
        return (
            f"{OUTSIDE_MARK} outside the data ({', '.join(why for why in REASONS if why in whys)}): "
            "a start for a test, no more."
        )

    def _short(self) -> str:
        short = [t for row in self.cells for cell in row for t in _all(cell) if not t.by_hand]
        if not short:
            return ""
        most = max(time.filter_stops_by_hand for time in short)
        return (
            f"{SHORT_MARK} too short by hand: a shutter, or a filter (one of {most} "
            f"{'stop' if most == 1 else 'stops'} brings the shortest here to {HAND_LEAST_S:g} s "
            "or more)."
        )


def _all(cell: Cell) -> tuple[Time, ...]:
    return cell.centre, cell.corner, cell.less, cell.more


def marked(time: Time) -> str:
    """Return a time in words with its mark."""
    if time.outside:
        return time.text + OUTSIDE_MARK
    return time.text if time.by_hand else time.text + SHORT_MARK


def time_table(
    cameras: Sequence["Camera"], lights: Sequence[LightLevel], *, filter_factor: float = 1.0
) -> TimeTable:
    """Return the times of every camera in every light.

    filter_factor : how many times longer for the filter, 1 to 1e6. Raises DesignError when there is
    nothing to tell, or the factor cannot be.
    """
    if not cameras or not lights:
        raise DesignError("a table of times needs at least one camera and one light.")
    if not 1.0 <= filter_factor <= 1e6:
        raise DesignError(
            f"the filter's factor is {filter_factor:g}; it must be 1 to 1000000, "
            "such as 8 for a filter of 3 stops."
        )
    columns = tuple(_columns(cameras))

    def cell(column: Column, light: LightLevel) -> Cell:
        def timed(stops: float, share: float = 1.0) -> Time:
            return time_for(
                column.camera, light, filter_factor=filter_factor, stops=stops, share=share
            )

        return Cell(
            centre=timed(0.0),
            corner=timed(0.0, column.corner_share),
            less=timed(-1.0),
            more=timed(1.0),
        )

    return TimeTable(
        name=cameras[0].name,
        columns=columns,
        lights=tuple(lights),
        cells=tuple(tuple(cell(column, light) for column in columns) for light in lights),
        filter_factor=filter_factor,
    )


def _columns(cameras: Sequence["Camera"]) -> list[Column]:
    """Name each camera by what it has not in common with the others."""
    holes = len({camera.hole.label for camera in cameras}) > 1
    depths = len({camera.focal_length_mm for camera in cameras}) > 1
    materials = len({camera.material_name for camera in cameras}) > 1
    columns = []
    for camera in cameras:
        words = []
        if holes:
            words.append(camera.hole.label)
        if depths:
            words.append(f"at {camera.focal_length_mm:g} mm")
        if materials or not words:
            words.append(camera.material_name)
        below = f"EI {camera.material.speed_iso:g}" if materials or not holes else ""
        if holes or depths:
            below = f"f/{camera.f_number:.0f}" + (f", {below}" if below else "")
        columns.append(
            Column(
                camera=camera,
                title=" ".join(words),
                subtitle=below,
                corner_share=light_share(camera, *camera.far_corner),
            )
        )
    return columns
