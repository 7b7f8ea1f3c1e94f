"""Designs compared: pictures, places, figures and verdict, as a sheet and as a page for a browser."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import BinaryIO, Literal

from pinsim import files
from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.exposure.light import LightLevel, at_ev
from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.develop import Look
from pinsim.render.picture import Picture
from pinsim.render.preview import preview
from pinsim.scene import Scene
from pinsim.sheets.lettering import SHEET_SUFFIXES, Sheet
from pinsim.sheets.side_by_side.common_part import CommonPart, common_part
from pinsim.sheets.side_by_side.curves import contrast_curves
from pinsim.sheets.side_by_side.details import Point, check_points, choose_details
from pinsim.sheets.side_by_side.figures import DesignFigures, design_figures
from pinsim.sheets.side_by_side.layout import Material, laid_out
from pinsim.sheets.side_by_side.leaf import LEAF_DPI, Leaf
from pinsim.sheets.side_by_side.verdict import verdict

PAGE_SUFFIXES = (".html", ".htm")
MOST_DESIGNS = 6
USUAL_EV = 15.0  # sun, as in pinsim.numbers, where nobody tells the light
_NUMBERS = {2: "two", 3: "three", 4: "four", 5: "five", 6: "six"}


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Comparison(Sheet):
    """A finished comparison. verdict : one sentence. figures : of each design, in order."""

    verdict: str
    figures: tuple[DesignFigures, ...]
    _leaf: Leaf = field(repr=False)
    _material: Material = field(repr=False)

    def save(self, path: str | Path, *, overwrite: bool = False) -> None:
        """Write the sheet as .png, .jpg, .tif or .pdf, at its true size; OutputError if it cannot be.

        The PDF's letters and lines are vectors.
        """
        target = Path(path)
        files.check_target(target, overwrite=overwrite, suffixes=SHEET_SUFFIXES)
        suffix = target.suffix.lower()
        if suffix == ".pdf":
            data = self._leaf.pdf(self.description)
            files.write_whole(target, lambda file: _write(file, data), overwrite=overwrite)
            return
        write = files.encode_picture(self.codes, suffix, dpi=LEAF_DPI, description=self.description)
        files.write_whole(target, write, overwrite=overwrite)

    @property
    def size_text(self) -> str:
        """The sheet's size in words, pixels and on paper."""
        rows, columns = self.codes.shape[:2]
        leaf = self._leaf
        return f"{columns} x {rows} px ({leaf.page_width_mm:g} x {leaf.page_height_mm:g} mm)"

    def html(self) -> str:
        """Return the page for a browser, one document that loads nothing."""
        from pinsim.sheets.side_by_side.page import page

        return page(self._material)

    def save_page(self, path: str | Path, *, overwrite: bool = False) -> None:
        """Write the page for a browser, .html; OutputError when it cannot or must not be."""
        target = Path(path)
        files.check_target(target, overwrite=overwrite, suffixes=PAGE_SUFFIXES)
        data = self.html().encode("utf-8")
        files.write_whole(target, lambda file: _write(file, data), overwrite=overwrite)


def _write(file: BinaryIO, data: bytes) -> None:
    file.write(data)


def check_compare(cameras: Sequence[Camera], details: Sequence[Point] = ()) -> None:
    """Refuse, before anything is rendered, what cannot be compared; DesignError in one line."""
    if not 2 <= len(cameras) <= MOST_DESIGNS:
        raise DesignError(f"compare takes two to {MOST_DESIGNS} designs, not {len(cameras)}.")
    check_points(details)


def compare(
    scene: Scene,
    cameras: Sequence[Camera],
    *,
    details: Sequence[Point] = (),
    time_s: float | Literal["auto"] | None = None,
    ev: float | None = None,
    wavelength_nm: float | None = None,
    look: Look = "upright",
    report: Reporter = ignore,
    on_picture: Callable[[Picture], None] | None = None,
) -> Comparison:
    """Return a sheet with the same part of a scene through two designs or more, and a verdict.

    details : places to look at closely, each (x, y), the shares from left and top of the part that all
    designs show, upright; without any, the middle, an edge, a corner and, with a distance map, the
    nearest thing. ev : for the times; else the scene's own, else 15 (sun).
    on_picture : called with each finished picture, for its notes.
    Raises DesignError when there are not two to six designs, or they share no part of the scene.
    """
    check_compare(cameras, details)
    pictures = []
    for number, camera in enumerate(cameras):
        report(Progress(number, len(cameras), camera.summary))
        picture = preview(
            scene, camera, time_s=time_s, ev=ev, wavelength_nm=wavelength_nm, look=look
        )
        if on_picture:
            on_picture(picture)
        pictures.append(picture)
    common = common_part(pictures)
    light = _light(scene, ev)
    middle = design_figures(
        pictures,
        common,
        choose_details(scene, pictures[0], common, [(0.5, 0.5)], 1.0),
        light=light,
        wavelength_nm=wavelength_nm,
    )
    finest = max(one.places[0].plain_cycles_deg for one in middle)
    places = choose_details(scene, pictures[0], common, details, finest)
    figures = design_figures(pictures, common, places, light=light, wavelength_nm=wavelength_nm)
    sentence = verdict(figures)
    material = Material(
        title=f"{scene.name} through {_NUMBERS[len(cameras)]} designs",
        verdict=sentence,
        pictures=pictures,
        common=common,
        details=places,
        figures=figures,
        curves=contrast_curves(pictures, common, places, figures, wavelength_nm=wavelength_nm),
        light_words=_light_words(pictures, ev is None and scene.ev is None, wavelength_nm),
        view_words=_view_words(pictures, common),
    )
    leaf = laid_out(material)
    names = ", ".join(f"{one.letter} {one.name}, {one.summary}" for one in figures)
    return Comparison(
        codes=leaf.raster(),
        description=f"pinsim: {material.title}: {names}. {sentence}",
        verdict=sentence,
        figures=figures,
        _leaf=leaf,
        _material=material,
    )


def _light(scene: Scene, ev: float | None) -> LightLevel:
    given = scene.ev if ev is None else ev
    return at_ev(USUAL_EV if given is None else given)


def _light_words(pictures: Sequence[Picture], guessed: bool, wavelength_nm: float | None) -> str:
    """Say how the pictures are exposed, and what light the times are for."""
    exposed = [picture.exposed for picture in pictures]
    if all(one is None for one in exposed):
        words = "equally exposed: white on the axis is white in each"
    else:
        from pinsim.exposure import time_text

        times = [time_text(one.time_s) for one in exposed if one is not None]
        words = (
            f"each exposed for {times[0]}"
            if len(set(times)) == 1
            else f"exposed for {', '.join(times)}"
        )
    if guessed:
        words += f"; times are for sun, EV {USUAL_EV:g}, as no light was told (--light)"
    if wavelength_nm is not None:
        words += f"; light of {wavelength_nm:g} nm only"
    return words


def _view_words(pictures: Sequence[Picture], common: CommonPart) -> str:
    """Say what part of the scene is shown, and how bent film is drawn."""
    across, high = common.window.size_deg
    words = f"All pictures show the same {across:.0f} x {high:.0f} deg of the scene."
    surface = common.surface
    if any(picture.camera.surface != surface for picture in pictures) and any(
        not picture.camera.surface.flat for picture in pictures
    ):
        how = "flat film" if surface.flat else "the first one's film"
        words += (
            f" Bent film is drawn as {how} would hold it, so that all places agree; preview shows it "
            "laid flat."
        )
    coarse = [
        f" {chr(ord('A') + i)}: {note}."
        for i, picture in enumerate(pictures)
        for note in picture.notes
        if "too coarse" in note
    ]
    return words + "".join(coarse)
