"""Designs as files: what the server was started with, and what the page writes and opens."""

import os
import re
import tempfile
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from pinsim.camera import Camera, Hole
from pinsim.camera.design_file import camera_from
from pinsim.camera.design_text import TracedFrom, design_text
from pinsim.errors import DesignError, PinsimError
from pinsim.live.refused import RefusedError, plain_line, shown_name
from pinsim.live.state import CAMERA_KEYS, camera_keys, texts_of
from pinsim.material import BUILT_IN
from pinsim.samples import PREFIX, names
from pinsim.tables import Table, read_toml

MOST_TOML = 64 << 10
FIRST_SCENE = "sample:courtyard"
FIRST_CAMERA = "sample:square-box"


@dataclass(frozen=True, slots=True, kw_only=True)
class Given:
    """What the command line was given. scene : a path or sample:NAME. camera : the design, read.

    design_file : where it was read from, if from a file; traced, materials : how the files that it
    names are written down again. state : keys of the state that the line's options set.
    """

    scene: str = FIRST_SCENE
    map: Path | None = None
    camera: Camera | None = None
    design_file: Path | None = None
    traced: TracedFrom | None = None
    materials: str = ""
    state: Mapping[str, Any] | None = None


class Designs:
    """The design that the server was started with, the samples, and those that the page opens.

    folder : private. A design may name files only if the server was started with it.
    """

    def __init__(self, given: Given, folder: Path) -> None:
        self.given = Camera.load(FIRST_CAMERA) if given.camera is None else given.camera
        self._told = given
        self._folder = folder

    def keys(self, camera: Camera) -> dict[str, Any]:
        """Return a camera as the page's keys; what only files hold is taken from the given design."""
        own = "given" if camera.materials != BUILT_IN else None
        return camera_keys(camera, traced="given", materials_of=own)

    def listed(self) -> list[dict[str, Any]]:
        """Return the designs that can be chosen."""
        found = []
        if self._told.camera is not None:
            found.append(("given", self.given, self.keys(self.given)))
        for name in names("camera"):
            camera = Camera.load(f"{PREFIX}{name}")
            found.append((f"{PREFIX}{name}", camera, camera_keys(camera)))
        return [
            {
                "id": design_id,
                "name": plain_line(camera.name),
                "summary": plain_line(camera.summary),
                "state": keys,
                "texts": texts_of(keys),
                "traced": camera.hole.shape == "traced",
            }
            for design_id, camera, keys in found
        ]

    def written(self, camera: Camera) -> dict[str, Any]:
        """Return a design as the text of a file, with a name for it."""
        text = design_text(
            camera,
            traced=self._told.traced if camera.hole.shape == "traced" else None,
            materials=self._told.materials if camera.materials != BUILT_IN else "",
        )
        return {"toml": text, "file_name": f"{stem(camera.name)}.toml"}

    def opened(self, text: object, file_name: object) -> dict[str, Any]:
        """Return the camera's keys of a design's text; RefusedError, in one line, for what is wrong."""
        if not isinstance(text, str):
            raise RefusedError("toml must be the text of a design file.", status=400)
        if len(text) > MOST_TOML:
            raise RefusedError("the design is far too long for one camera.", status=413)
        name = shown_name(file_name) if isinstance(file_name, str) else ""
        name = name or "design"
        try:
            camera = self._read(text, name)
        except PinsimError as problem:
            raise RefusedError(str(problem)) from None
        keys = self.keys(camera)
        return {
            "state": {key: keys[key] for key in CAMERA_KEYS},
            "texts": texts_of(keys),
            "notes": [],
        }

    def _read(self, text: str, name: str) -> Camera:
        values = self._values(text, name)
        if "photo" in values and "focal_length" not in values:
            raise DesignError(
                f"{name} is a scene file, not a camera design; start pinsim live with it."
            )
        self._refuse_files(values, name)
        file = self._told.design_file
        folder = self._folder if file is None else file.parent
        camera = camera_from(Table(values, name, DesignError), folder)
        if camera.hole.outline is not None and not _same(camera.hole, self.given.hole):
            raise DesignError(
                f"{name} [hole] reads its scan otherwise than the design that pinsim live was started "
                "with; start it with this one."
            )
        return camera

    def _values(self, text: str, name: str) -> dict[str, Any]:
        handle, path = tempfile.mkstemp(suffix=".toml", dir=self._folder)
        try:
            with os.fdopen(handle, "wb") as file:
                file.write(text.encode("utf-8", "surrogatepass"))
            return read_toml(Path(path), DesignError, "camera design")
        except DesignError as problem:
            raise DesignError(str(problem).replace(path, name)) from None
        finally:
            Path(path).unlink(missing_ok=True)

    def _refuse_files(self, values: Mapping[str, Any], name: str) -> None:
        """Refuse names of files in a design, except those that the server was started with."""
        hole, film = values.get("hole"), values.get("film")
        asked = [
            (hole.get("image") if isinstance(hole, dict) else None, self._image(), "[hole] image"),
            (
                film.get("materials") if isinstance(film, dict) else None,
                self._materials(),
                "[film] materials",
            ),
        ]
        for told, allowed, where in asked:
            if told is None or (isinstance(told, str) and told in allowed):
                continue
            raise DesignError(
                f"{name} {where} names another file, which a page may not have read; start pinsim live "
                "with this design: pinsim live SCENE CAMERA."
            )

    def _image(self) -> set[str]:
        return _as_written(self._told.traced.image if self._told.traced else "", self._told)

    def _materials(self) -> set[str]:
        return _as_written(self._told.materials, self._told)


def _same(one: Hole, other: Hole) -> bool:
    """Tell whether two traced holes are the same, traced from one scan at one scale."""
    first, second = one.outline, other.outline
    if first is None or second is None:
        return first is second
    return first.cell_mm == second.cell_mm and np.array_equal(first.clear, second.clear)


def _as_written(name: str, given: Given) -> set[str]:
    """Return the ways in which a file of the given design is written: as it stands, and whole."""
    if not name:
        return set()
    folder = given.design_file.parent if given.design_file is not None else Path()
    return {name, str((folder / name).absolute()), str((folder / name).resolve())}


def stem(words: str) -> str:
    """Return words as the name of a file, without its ending."""
    plain = re.sub(r"[^a-z0-9.]+", "-", words.lower()).strip("-.")[-100:]
    return plain or "pinsim"
