"""The architecture: imports point down the floors, heavy packages stay in their rooms."""

import ast
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1] / "pinsim"

# Lowest first; a room or file may use what stands above it in this table, never below or beside.
FLOORS = (
    {"threads"},
    {"errors", "progress", "colour", "optics"},
    {"units", "tables", "samples", "files", "classical", "tools"},
    {"material"},
    {"scene"},
    {"tracing"},
    {"camera"},
    {"best", "exposure"},
    {"against_round", "numbers", "render"},
    {"batch"},
    {"sheets"},
    {"live"},
    {"cli"},
    {"__main__"},
)
FLOOR = {name: number for number, names in enumerate(FLOORS) for name in names}

# Who may load what, besides numpy and the standard library. optics is pure mathematics.
MAY_LOAD = {
    "batch": {"PIL", "dask", "distributed"},
    "optics": {"scipy"},
    "scene": {
        "OpenEXR",
        "PIL",
        "imagecodecs",
        "pillow_heif",
        "rawpy",
        "scipy",
        "skimage",
        "tifffile",
    },
    "files": {"PIL", "imagecodecs", "imageio"},
    "live": {"PIL", "starlette", "uvicorn"},
    "render": {"scipy", "skimage"},
    "sheets": {"PIL", "reportlab"},
    "tracing": {"scipy", "skimage"},
    "cli": {"click", "rich"},
}
# Nothing that touches the disk belongs in optics.
FOR_FILES = {"io", "json", "os", "pathlib", "tempfile", "tomllib"}

FILES = sorted(ROOT.rglob("*.py"))


def room_of(path):
    return path.relative_to(ROOT).with_suffix("").parts[0]


def imported(path):
    """Return (module name, line, whether at the top of the file) of everything a file imports."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    inside = {
        id(node)
        for function in ast.walk(tree)
        if isinstance(function, ast.FunctionDef)
        for node in ast.walk(function)
    }
    typing_only = {
        id(node)
        for test in ast.walk(tree)
        if isinstance(test, ast.If) and ast.unparse(test.test) == "TYPE_CHECKING"
        for node in ast.walk(test)
    }
    found = []
    for node in ast.walk(tree):
        if id(node) in typing_only:
            continue
        at_top = id(node) not in inside
        if isinstance(node, ast.Import):
            found += [(alias.name, node.lineno, at_top) for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}:{node.lineno} imports relatively; write the whole name"
            if node.module == "pinsim":
                found += [(f"pinsim.{alias.name}", node.lineno, at_top) for alias in node.names]
            else:
                found.append((node.module, node.lineno, at_top))
    return found


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_imports_point_down(path):
    here = room_of(path)
    if here == "__init__":
        pytest.skip("the front door names every room, and enters each when it is asked for")
    assert here in FLOOR, f"{here} has no floor yet; give it one in this table"
    for name, line, _ in imported(path):
        if not name.startswith("pinsim.") or name == "pinsim.__version__":
            continue
        there = name.split(".")[1]
        assert there == here or FLOOR[there] < FLOOR[here], f"{here}:{line} imports {there}"


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_each_room_loads_only_the_packages_it_may(path):
    here = room_of(path)
    for name, line, _ in imported(path):
        package = name.split(".")[0]
        if package in {"pinsim", "numpy"} or package in sys.stdlib_module_names:
            continue
        assert package in MAY_LOAD.get(here, set()), f"{here}:{line} loads {package}"


@pytest.mark.parametrize("path", sorted((ROOT / "optics").glob("*.py")), ids=lambda p: p.name)
def test_optics_knows_neither_files_nor_pictures(path):
    for name, line, _ in imported(path):
        assert name.split(".")[0] not in FOR_FILES | {"PIL", "imageio", "tifffile"}, line
    assert "open(" not in path.read_text(encoding="utf-8").replace("_open(", "")


@pytest.mark.parametrize("path", sorted((ROOT / "cli").glob("*.py")), ids=lambda p: p.name)
def test_the_command_line_loads_rooms_only_when_a_command_runs(path):
    """Some are imported inside functions, so they may load what they need."""
    if path.name in {"designs.py", "many.py", "scenes.py"}:
        pytest.skip("loaded by the commands while they run")
    light = {"pinsim.cli", "pinsim.errors", "pinsim.units", "pinsim.progress", "pinsim.__version__"}
    for name, line, at_top in imported(path):
        if at_top and name.startswith("pinsim"):
            assert ".".join(name.split(".")[:2]) in light, (
                f"{path.name}:{line} loads {name} at once"
            )
            assert name not in {"pinsim.cli.designs", "pinsim.cli.scenes"}, f"{path.name}:{line}"
        if at_top:
            assert name.split(".")[0] not in {"numpy", "scipy", "PIL", "rich", "skimage"}, line


def test_the_front_door_imports_nothing_at_once():
    for name, _, at_top in imported(ROOT / "__init__.py"):
        assert not at_top or name == "typing"


def test_every_public_name_can_be_fetched():
    import pinsim

    for name in pinsim.__all__:
        assert getattr(pinsim, name).__name__ == name
    assert pinsim.optics.__name__ == "pinsim.optics"
    with pytest.raises(AttributeError, match=r"has no attribute 'lens'"):
        _ = pinsim.lens
