"""Scenes for several processes: read once, written to a temporary folder, mapped into each of them.

What is mapped is one copy in the machine's memory however many processes read it.
"""

import mmap
import pickle
from collections import OrderedDict
from dataclasses import dataclass, replace
from pathlib import Path

from pinsim.scene import Scene

_ALIGNED = 64  # bytes: where arrays begin, as numpy likes it
_MOST_SCENES = 2

_read: "OrderedDict[str, Scene]" = OrderedDict()
_moved: "OrderedDict[tuple[str, float], Scene]" = OrderedDict()


@dataclass(frozen=True, slots=True)
class Source:
    """A scene as a worker gets it: itself, or where it lies. key : its checksum."""

    key: str
    scene: Scene | None = None
    folder: Path | None = None

    def read(self, distance_mm: float | None) -> Scene:
        """Return the scene; always the same object, so that what render keeps for it is found.

        distance_mm : in place of its own distances.
        """
        base = _read.get(self.key)
        if base is None:
            base = self.scene if self.scene is not None else self._from_disk()
            _read[self.key] = base
        _read.move_to_end(self.key)
        while len(_read) > _MOST_SCENES:
            _read.popitem(last=False)
        if distance_mm is None:
            return base
        place = (self.key, distance_mm)
        if place not in _moved:
            _moved[place] = replace(base, distance=distance_mm)
        _moved.move_to_end(place)
        while len(_moved) > _MOST_SCENES:
            _moved.popitem(last=False)
        return _moved[place]

    def _from_disk(self) -> Scene:
        assert self.folder is not None
        lengths, body = pickle.loads((self.folder / f"{self.key}.head").read_bytes())
        buffers, start = [], 0
        if sum(lengths):
            with (self.folder / f"{self.key}.data").open("rb") as file:
                view = memoryview(mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ))
            for length in lengths:
                buffers.append(view[start : start + length])
                start += _padded(length)
        scene = pickle.loads(body, buffers=buffers)
        assert isinstance(scene, Scene)
        return scene


def spool(scene: Scene, key: str, folder: Path) -> Source:
    """Write a scene where other processes can map it."""
    buffers: list[pickle.PickleBuffer] = []
    body = pickle.dumps(scene, protocol=5, buffer_callback=buffers.append)
    raw = [buffer.raw() for buffer in buffers]
    with (folder / f"{key}.data").open("wb") as file:
        for part in raw:
            file.write(part)
            file.write(bytes(_padded(part.nbytes) - part.nbytes))
    (folder / f"{key}.head").write_bytes(pickle.dumps(([part.nbytes for part in raw], body)))
    return Source(key, folder=folder)


def forget() -> None:
    """Let go of the scenes that were read."""
    _read.clear()
    _moved.clear()


def _padded(length: int) -> int:
    return -(-length // _ALIGNED) * _ALIGNED
