"""Starting is cheap: what `import pinsim` and `pinsim --help` load, in fresh processes."""

import subprocess
import sys
from pathlib import Path

import pytest

from pinsim.cli import COMMANDS

ROOT = Path(__file__).resolve().parents[1]
HEAVY = (
    *("OpenEXR", "PIL", "imagecodecs", "imageio", "numpy", "pillow_heif", "rawpy", "rich", "scipy"),
    *("skimage", "tifffile"),
)


def loaded_by(code):
    """Return which heavy packages are loaded after a fresh interpreter ran some code."""
    ask = f"\nimport sys\nprint('loaded:', *[m for m in {HEAVY!r} if m in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-c", code + ask],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
        timeout=60,
    )
    return done.stdout.splitlines()[-1].split()[1:]


def test_importing_the_package_loads_nothing_heavy():
    assert loaded_by("import pinsim") == []


def test_the_check_itself_sees_what_is_loaded():
    assert "numpy" in loaded_by("import pinsim; pinsim.Scene")


@pytest.mark.parametrize("arguments", [["--help"], ["-h"], [], ["--version"], ["previev"]])
def test_help_loads_nothing_heavy(arguments):
    assert loaded_by(f"from pinsim.cli import main; main({arguments!r})") == []


@pytest.mark.parametrize("command", COMMANDS)
def test_help_for_a_command_loads_nothing_heavy(command):
    assert loaded_by(f"from pinsim.cli import main; main([{command!r}, '--help'])") == []


@pytest.mark.parametrize(
    "command", ["preview", "compare", "contact-sheet", "numbers", "exposure", "trace"]
)
def test_a_misspelt_quantity_is_refused_before_anything_heavy_is_loaded(command):
    code = f"from pinsim.cli import main; main([{command!r}, '--hole', '0,3mm'])"
    assert loaded_by(code) == []


@pytest.mark.parametrize("command", ["preview", "exposure"])
def test_a_light_that_cannot_be_read_is_refused_before_anything_heavy_is_loaded(command):
    code = f"from pinsim.cli import main; main([{command!r}, 'a.jpg', '--light', 'fog'])"
    assert loaded_by(code) == []


def test_every_command_of_the_table_stands_in_help_and_can_be_loaded():
    done = subprocess.run(
        [sys.executable, "-m", "pinsim", "--help"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
        timeout=60,
    )
    assert done.stderr == ""
    assert done.stdout.isascii()
    for name, (_, text) in COMMANDS.items():
        assert name in done.stdout
        assert text.split()[0] in done.stdout


def test_importing_changes_no_settings():
    """numpy's printing, its error state and the environment stay as the user set them."""
    code = (
        "import os, numpy as np\n"
        "before = (np.get_printoptions(), np.geterr(), dict(os.environ))\n"
        "import pinsim, pinsim.render.preview, pinsim.sheets, pinsim.cli\n"
        "assert before == (np.get_printoptions(), np.geterr(), dict(os.environ))"
    )
    assert "numpy" in loaded_by(code)
