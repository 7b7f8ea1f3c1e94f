"""The documents: every command parses, every script runs, every link leads somewhere.

What is held against the documents is the program itself and the files beside them; their numbers are
quoted from runs and are not repeated here.
"""

import re
import shlex
from pathlib import Path

import click
import numpy as np
import pytest
from PIL import Image

import pinsim
from pinsim.batch.plan_file import read_plan
from pinsim.cli import COMMANDS, _group
from pinsim.samples import names

ROOT = Path(__file__).resolve().parent.parent
PAGES = sorted([*ROOT.glob("docs/*.md"), *ROOT.glob("README.md")])
BLOCK = re.compile(r"^```(\w+)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
LINK = re.compile(r"\]\(([^)\s]+)\)")


def blocks(page: Path, language: str) -> list[str]:
    """Return the page's blocks of a language."""
    return [text for kind, text in BLOCK.findall(page.read_text("utf-8")) if kind == language]


def commands(page: Path) -> list[str]:
    """Return the lines of shell blocks that call pinsim; a line may go on after a backslash."""
    lines = "\n".join(blocks(page, "sh")).replace("\\\n", " ").splitlines()
    return [line.strip() for line in lines if line.strip().startswith("pinsim ")]


ALL_COMMANDS = [(page.name, line) for page in PAGES for line in commands(page)]
SCRIPTS = [
    text
    for name in ("python.md", "many-at-once.md")
    for text in blocks(ROOT / "docs" / name, "python")
]
DESIGNS = [text for page in PAGES for text in blocks(page, "toml") if "focal_length =" in text]
PLANS = [text for page in PAGES for text in blocks(page, "toml") if "scenes =" in text]
SCENES = [text for page in PAGES for text in blocks(page, "toml") if "photo" in text]


def test_the_documents_hold_something_to_test():
    """A pattern that matches nothing would make every test below pass."""
    assert len(ALL_COMMANDS) >= 20
    assert len(SCRIPTS) >= 5
    assert len(DESIGNS) >= 3
    assert SCENES


@pytest.mark.parametrize(("page", "line"), ALL_COMMANDS)
def test_a_command_of_the_documents_parses(page, line):
    """Known command, known options, values with units that can be read; nothing is rendered."""
    name, *arguments = shlex.split(line)[1:]
    if name.startswith("-"):
        _group.make_context("pinsim", [name, *arguments], resilient_parsing=True)
        return
    assert name in COMMANDS, f"{page}: {line}"
    command = _group.get_command(click.Context(_group), name)
    assert command is not None
    if {"-h", "--help"} & set(arguments):
        return
    command.make_context(name, list(arguments))
    for argument in arguments:
        if argument.startswith("sample:"):
            word = argument.removeprefix("sample:")
            assert word in {**names("scene"), **names("camera")}


def test_a_misspelt_command_would_be_found():
    """The check above sees a wrong option."""
    command = _group.get_command(click.Context(_group), "preview")
    with pytest.raises(click.NoSuchOption, match="--hoel"):
        command.make_context("preview", ["photo.jpg", "--hoel", "0.3mm"])


@pytest.mark.parametrize("script", SCRIPTS)
def test_a_script_of_the_documents_runs(script, tmp_path, monkeypatch):
    """In an empty folder, as a reader would try it."""
    monkeypatch.chdir(tmp_path)
    exec(compile(script, "docs", "exec"), {})


@pytest.mark.parametrize("text", DESIGNS)
def test_a_design_of_the_documents_loads(text, tmp_path):
    """Every key shown is known, every value allowed."""
    file = tmp_path / "camera.toml"
    file.write_text(text, "utf-8")
    assert pinsim.Camera.load(file).focal_length_mm > 0.0


@pytest.mark.parametrize("text", PLANS)
def test_a_plan_of_the_documents_loads(text, tmp_path):
    """Every key shown is known, every value allowed; scenes and cameras are asked for beside it."""
    file = tmp_path / "plan.toml"
    file.write_text(text, "utf-8")
    assert read_plan(file)["scenes"] == (str(tmp_path / "courtyard.jpg"),)


@pytest.mark.parametrize("text", SCENES)
def test_a_scene_of_the_documents_loads(text, tmp_path):
    """With a photo and a map of the names it gives."""
    grey = Image.fromarray(np.full((4, 6), 80, np.uint8))
    for name in re.findall(r'"([\w-]+\.(?:png|jpg))"', text):
        grey.save(tmp_path / name)
    file = tmp_path / "scene.toml"
    file.write_text(text, "utf-8")
    assert pinsim.Scene.load(file).photo.shape == (4, 6)


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_every_link_leads_to_a_file(page):
    """Pictures and pages; links to the outside are not followed."""
    for link in LINK.findall(page.read_text("utf-8")):
        if re.match(r"[a-z]+:|#", link):
            continue
        target = (page.parent / link.split("#")[0]).resolve()
        assert target.exists(), f"{page.name}: {link}"
        assert target.is_relative_to(ROOT), f"{page.name}: {link}"


def test_every_page_stands_in_the_index():
    """A page nobody can find is no help."""
    index = (ROOT / "docs" / "README.md").read_text("utf-8")
    for page in ROOT.glob("docs/*.md"):
        assert page.name == "README.md" or f"({page.name})" in index


def test_pictures_are_small():
    """Under 400 KB each, so that a page opens at once and a checkout stays light."""
    for picture in (ROOT / "docs" / "pictures").iterdir():
        assert picture.stat().st_size < 400_000, picture.name
