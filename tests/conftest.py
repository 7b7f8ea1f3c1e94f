"""What the tests share: arrays nobody can write to, small photos and designs, and the command line."""

import hashlib
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from pinsim.cli import main


@pytest.fixture
def frozen():
    """Return a function that copies an array and makes the copy read-only."""

    def freeze(array):
        array = np.array(array)
        array.flags.writeable = False
        return array

    return freeze


def landscape_codes(rows: int = 48, columns: int = 72) -> np.ndarray:
    """Return sRGB codes of a small place unlike all its mirror images: sky, ground, a red post."""
    codes = np.empty((rows, columns, 3), np.uint8)
    codes[: rows // 2] = (140, 180, 230)
    codes[rows // 2 :] = (70, 90, 50)
    codes[:, columns // 5 : columns // 4] = (200, 40, 30)
    codes[: rows // 6, -columns // 6 :] = (255, 255, 250)
    return codes


@pytest.fixture
def landscape():
    """Return the codes of the small place."""
    return landscape_codes()


@pytest.fixture
def photo(tmp_path):
    """Return the path of the small place as a PNG, in the test's own folder."""
    path = tmp_path / "photo.png"
    Image.fromarray(landscape_codes()).save(path)
    return path


# A design whose film needs few pixels: 444 x 333. Typed so that every test shows the same camera.
TYPED_CAMERA = ("--hole", "0.5mm", "--focal-length", "20mm", "--film", "8mmx6mm")

CAMERA_TOML = """\
name = "Test box"
focal_length = "20 mm"
[hole]
diameter = "0.5 mm"
[film]
width = "8 mm"
height = "6 mm"
"""


@pytest.fixture
def camera_file(tmp_path):
    """Return the path of the same design as a file."""
    path = tmp_path / "box.toml"
    path.write_text(CAMERA_TOML, encoding="utf-8")
    return path


@pytest.fixture
def scene_file(tmp_path, photo):
    """Return the path of a scene file beside the photo."""
    path = tmp_path / "place.toml"
    path.write_text(f'photo = "{photo.name}"\nhorizontal_view = "40 deg"\n', encoding="utf-8")
    return path


def contents(folder: Path) -> dict[str, str]:
    """Return every file below a folder with a digest of its bytes."""
    return {
        str(file.relative_to(folder)): hashlib.sha256(file.read_bytes()).hexdigest()
        for file in sorted(folder.rglob("*"))
        if file.is_file()
    }


@pytest.fixture
def run(capsys, monkeypatch, tmp_path):
    """Return a function that runs the command line in the test's folder: (code, out, err)."""
    monkeypatch.chdir(tmp_path)

    def call(*arguments):
        code = main([str(one) for one in arguments])
        captured = capsys.readouterr()
        return code, captured.out, captured.err

    return call
