"""Pictures that are done, by the checksum of what went in: in a folder, or in memory.

In a folder each is a PNG (two, with its enlarged middle) and a JSON file, which comes last and holds
the checksums of the others: what was cut off in the middle, or changed since, does not count as done.
"""

import hashlib
import json
from pathlib import Path
from typing import Any, BinaryIO

from pinsim import files
from pinsim.batch.draw import Drawn
from pinsim.errors import OutputError

_NAME = 40  # hexadecimal digits in a file's name: enough for no two to meet
ABOUT = "about.txt"
_SAYS = (
    "Frames of a contact sheet that pinsim has begun. They are needed to go on (--resume) and can be "
    "deleted when the sheet is whole.\n"
)


class Store:
    """Where finished pictures are. folder : None keeps them in memory."""

    def __init__(self, folder: Path | None = None) -> None:
        self.folder = folder
        self._memory: dict[str, Drawn] = {}
        self._about: dict[str, dict[str, Any]] = {}
        self._made = False

    def _make_folder(self, folder: Path) -> None:
        """Make the folder when the first picture comes: where nothing is drawn nothing is left."""
        try:
            folder.mkdir(exist_ok=True)
            (folder / ABOUT).write_text(_SAYS, encoding="ascii")
        except OSError as problem:
            raise OutputError(
                f"{folder} cannot be made to keep frames in: {problem.strerror}."
            ) from None

    def about(self, key: str) -> dict[str, Any] | None:
        """Return the figures of a picture that is done and unharmed, else None."""
        if key not in self._about and self.folder is not None:
            found = read_about(self.folder, key)
            if found is not None:
                self._about[key] = found
        return self._about.get(key)

    def put(self, key: str, drawn: Drawn) -> None:
        """Keep a picture; in a folder it appears whole or not at all."""
        self._about[key] = drawn.about
        if self.folder is None:
            self._memory[key] = drawn
            return
        if not self._made:
            self._make_folder(self.folder)
            self._made = True
        parts = {"png": drawn.png, "detail.png": drawn.detail_png}
        sums = {}
        for ending, data in parts.items():
            if data is not None:
                _write(self.folder / f"{key[:_NAME]}.{ending}", data)
                sums[ending] = hashlib.sha256(data).hexdigest()
        text = json.dumps({"checksum": key, "files": sums, "about": _plain(drawn.about)}, indent=1)
        _write(self.folder / f"{key[:_NAME]}.json", text.encode())

    def png(self, key: str, *, detail: bool = False) -> bytes:
        """Return a picture, or its enlarged middle, as a PNG file; KeyError if there is none."""
        if self.folder is None:
            drawn = self._memory[key]
            data = drawn.detail_png if detail else drawn.png
        else:
            file = self.folder / f"{key[:_NAME]}.{'detail.png' if detail else 'png'}"
            data = file.read_bytes() if file.exists() else None
        if data is None:
            raise KeyError(key)
        return data

    def remove(self) -> None:
        """Delete the folder with what this class writes; anything else in it stays, and so does it."""
        if self.folder is None or not self.folder.is_dir():
            return
        for file in self.folder.iterdir():
            stem, _, ending = file.name.partition(".")
            own = ending in {"png", "detail.png", "json"} and len(stem) == _NAME
            if own or file.name == ABOUT or file.name.startswith(".pinsim-"):
                file.unlink(missing_ok=True)
        try:
            self.folder.rmdir()
        except OSError:  # somebody keeps something of his own in it
            return


def read_about(folder: Path, key: str) -> dict[str, Any] | None:
    """Return the figures of a picture in a folder if all of it is there, else None."""
    try:
        told = json.loads((folder / f"{key[:_NAME]}.json").read_text(encoding="utf-8"))
        whole = told["checksum"] == key and all(
            hashlib.sha256((folder / f"{key[:_NAME]}.{ending}").read_bytes()).hexdigest() == value
            for ending, value in told["files"].items()
        )
        return _unplain(told["about"]) if whole else None
    except (OSError, ValueError, KeyError, TypeError):
        return None


def _plain(about: dict[str, Any]) -> dict[str, Any]:
    """Return values that JSON knows: it has no infinity."""
    return {key: "infinity" if value == float("inf") else value for key, value in about.items()}


def _unplain(about: dict[str, Any]) -> dict[str, Any]:
    return {key: float("inf") if value == "infinity" else value for key, value in about.items()}


def _write(path: Path, data: bytes) -> None:
    def write(file: BinaryIO) -> None:
        file.write(data)

    files.write_whole(path, write, overwrite=True)
