"""From scenes and designs to a sheet: which frames, what is there already, who draws the rest."""

import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

from pinsim.batch.draw import Drawn, Outcome
from pinsim.batch.frames import (
    Frame,
    checksum,
    file_checksums,
    frame_width_px,
    scene_checksum,
)
from pinsim.batch.lanes import Lane
from pinsim.batch.run import run
from pinsim.batch.store import Store
from pinsim.camera import Camera
from pinsim.errors import DesignError
from pinsim.render.develop import Look
from pinsim.scene import Scene
from pinsim.sheets.contact.captions import Entry
from pinsim.sheets.contact.sheet import ContactSheet, Style, compose

TimeS = float | Literal["auto"] | None
MOST_FRAMES = 20_000
WIDTH_RANGE_PX = (64, 4000)


@dataclass(frozen=True, slots=True, kw_only=True)
class Design:
    """A camera, or what was asked for where none can be built, and why not."""

    camera: Camera | None
    name: str
    hole_mm: float
    focal_mm: float
    problem: str = ""

    @classmethod
    def of(cls, camera: Camera) -> "Design":
        """Return the design of a camera."""
        return cls(
            camera=camera,
            name=camera.name,
            hole_mm=camera.hole.diameter_mm,
            focal_mm=camera.focal_length_mm,
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Common:
    """What all frames of a sheet share."""

    ev: float | None = None
    wavelength_nm: float | None = None
    look: Look = "upright"
    longer_px: int = 460
    detail: bool = True


def one_frame(
    number: int,
    place: int,
    scene: Scene,
    design: Design,
    common: Common,
    *,
    distance_mm: float | None,
    time_s: TimeS,
    name: str = "",
) -> Frame:
    """Return one frame. place : of its scene in the list of scenes."""
    film = None if design.camera is None else design.camera.film
    return Frame(
        number=number,
        scene=place,
        scene_name=scene.name,
        camera=design.camera,
        camera_name=design.name,
        hole_mm=design.hole_mm,
        focal_mm=design.focal_mm,
        distance_mm=distance_mm,
        time_s=time_s,
        ev=common.ev,
        wavelength_nm=common.wavelength_nm,
        look=common.look,
        width_px=common.longer_px
        if film is None
        else frame_width_px(common.longer_px, film.width_mm, film.height_mm),
        detail=common.detail,
        name=name,
        problem=design.problem,
    )


def all_frames(
    scenes: Sequence[Scene],
    designs: Sequence[Design],
    common: Common,
    *,
    distances_mm: Sequence[float] = (),
    times_s: Sequence[TimeS] = (),
) -> list[Frame]:
    """Return every scene through every design at every distance and time, in this order."""
    low, high = WIDTH_RANGE_PX
    if not low <= common.longer_px <= high:
        raise DesignError(
            f"frames {common.longer_px} px wide are not possible; give {low} to {high}."
        )
    if not scenes or not designs:
        raise DesignError("a contact sheet needs at least one scene and one design.")
    product = list(
        itertools.product(enumerate(scenes), designs, distances_mm or (None,), times_s or (None,))
    )
    if len(product) > MOST_FRAMES:
        raise DesignError(
            f"these are {len(product)} frames; a sheet holds {MOST_FRAMES}. Make several sheets."
        )
    return [
        one_frame(number, place, scene, design, common, distance_mm=distance, time_s=time)
        for number, ((place, scene), design, distance, time) in enumerate(product, 1)
    ]


def check(frames: Sequence[Frame], style: Style) -> None:
    """Lay empty frames out, so that what does not fit on a page is refused before it is drawn."""
    compose([Entry(frame, None, reason="-") for frame in frames], Store(), style)


@dataclass(slots=True, eq=False)
class Job:
    """Frames to be drawn, what is kept of them, and what failed."""

    frames: list[Frame]
    scenes: Sequence[Scene]
    store: Store
    sums: list[str] = field(init=False)
    keys: dict[int, str] = field(init=False)
    failed: dict[int, str] = field(default_factory=dict)
    refused: int = 0

    def __post_init__(self) -> None:
        self.sums = [scene_checksum(scene) for scene in self.scenes]
        self.keys = {
            frame.number: "" if frame.camera is None else checksum(frame, self.sums[frame.scene])
            for frame in self.frames
        }

    def missing(self) -> list[Frame]:
        """Return what is still to be drawn; of frames alike only the first."""
        left: dict[str, Frame] = {}
        for frame in self.frames:
            key = self.keys[frame.number]
            if not key or (self.store.about(key) is None and frame.number not in self.failed):
                left.setdefault(key or f"none {frame.number}", frame)
        return list(left.values())

    def draw(
        self,
        lanes: Sequence[Lane],
        sources: Sequence[Any],
        on_outcome: Callable[[Frame, Outcome], None],
    ) -> None:
        """Draw what is missing; each frame is kept before on_outcome is told."""
        alike: dict[str, list[int]] = {}
        for number, key in self.keys.items():
            alike.setdefault(key or f"none {number}", []).append(number)

        def settle(frame: Frame, outcome: Outcome) -> None:
            key = self.keys[frame.number]
            if isinstance(outcome, Drawn):
                self.store.put(key, outcome)
            else:
                for number in alike[key or f"none {frame.number}"]:
                    self.failed[number] = outcome.reason
                self.refused += outcome.refused
            on_outcome(frame, outcome)

        run(self.missing(), sources, lanes, settle)

    def entries(self) -> list[Entry]:
        """Return what there is by now: frames drawn, and frames that failed."""
        found = []
        for frame in self.frames:
            key = self.keys[frame.number]
            about = self.store.about(key) if key else None
            if about is not None:
                found.append(Entry(frame, about, key=key))
            elif frame.number in self.failed:
                found.append(Entry(frame, None, reason=self.failed[frame.number], key=key))
        return found

    def refuse_all(self) -> None:
        """Raise DesignError when every frame was refused: then there is no sheet to make."""
        if self.failed and self.refused and len(self.failed) == len(self.frames):
            raise DesignError(next(iter(self.failed.values())))

    def sheet(self, style: Style, remarks: Sequence[str] = ()) -> ContactSheet:
        """Return the sheet of what there is by now."""
        inputs: dict[str, str] = {}
        for scene in self.scenes:
            inputs.update(file_checksums(scene))
        return compose(self.entries(), self.store, style, inputs=inputs, remarks=remarks)
